//! What a device is: its element letter, its model, and the class that a deck declares for that model.

use crate::declared::{Class, Kind};
use crate::diag::Diagnostic;
use crate::names::{Names, Sym};
use hashbrown::HashMap;

/// Index in `Design::types`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct TypeIx(pub u32);

/// What an element does between its terminals, as far as the analyses care.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
#[allow(missing_docs)]
pub enum Element {
    Nmos,
    Pmos,
    Npn,
    Pnp,
    Njf,
    Pjf,
    Diode,
    Resistor,
    Capacitor,
    Inductor,
    VoltageSource,
    CurrentSource,
    /// E F G H B and code models: what drives their output is not analysed.
    Controlled,
    /// S and W: conducts between its first two terminals.
    Switch,
    /// T, O, U, Y, P.
    Line,
    /// A declared box, or a leaf whose inside is unknown.
    Opaque,
}

impl Element {
    fn of_kind(kind: Kind) -> Element {
        match kind {
            Kind::Nmos => Element::Nmos,
            Kind::Pmos => Element::Pmos,
            Kind::Npn => Element::Npn,
            Kind::Pnp => Element::Pnp,
            Kind::Njf => Element::Njf,
            Kind::Pjf => Element::Pjf,
            Kind::Diode => Element::Diode,
            Kind::Resistor => Element::Resistor,
            Kind::Capacitor => Element::Capacitor,
            Kind::Inductor => Element::Inductor,
            Kind::Box => Element::Opaque,
        }
    }

    /// Whether it is a MOS transistor.
    pub fn is_mos(self) -> bool {
        matches!(self, Element::Nmos | Element::Pmos)
    }
}

/// A kind of device as it occurs on cards: letter, model and class.
#[derive(Clone, Debug, PartialEq)]
pub struct DeviceType {
    /// The element letter, lower case.
    pub letter: u8,
    /// The model's name as first written, where the card has one.
    pub model: Option<Sym>,
    /// Index of the class.
    pub class: Option<u32>,
    /// What it does.
    pub element: Element,
    /// Whether its model is one that a class should name, and none does.
    pub classless: bool,
    /// Whether the card has a number of terminals that does not fit: nothing is concluded from it.
    pub misfit: bool,
    /// For each pin of the class, the index of its net on the card; none where the card has the class's order.
    pub order: Option<Box<[u8]>>,
}

/// Finds the class of a model: an exact name goes before a glob.
pub(crate) struct Matcher<'a> {
    classes: &'a [Class],
    known: HashMap<Sym, Option<u32>>,
}

impl<'a> Matcher<'a> {
    pub(crate) fn new(classes: &'a [Class]) -> Matcher<'a> {
        Matcher { classes, known: HashMap::new() }
    }

    /// The class that names this model. Two globs that disagree are a deck error, reported once for each model.
    pub(crate) fn class_of(&mut self, model: Sym, names: &Names, diagnostics: &mut Vec<Diagnostic>) -> Option<u32> {
        if let Some(&known) = self.known.get(&model) {
            return known;
        }
        let found = self.search(names.text(model), diagnostics);
        self.known.insert(model, found);
        found
    }

    fn search(&self, model: &str, diagnostics: &mut Vec<Diagnostic>) -> Option<u32> {
        let matching = |wild: bool| {
            self.classes
                .iter()
                .enumerate()
                .filter(move |(_, class)| class.models.iter().any(|glob| glob.is_wild() == wild && glob.matches(model)))
                .map(|(index, _)| index as u32)
        };
        for wild in [false, true] {
            let mut found = matching(wild);
            if let Some(first) = found.next() {
                if let Some(second) = found.next() {
                    let (a, b) = (&self.classes[first as usize], &self.classes[second as usize]);
                    diagnostics.push(
                        Diagnostic::error("deck", b.place, format!("the model `{model}` is claimed by two classes: `{}` and `{}`", a.name, b.name))
                            .with_label("this class claims it")
                            .with_place(a.place, "and this one")
                            .with_help("make one of their `models` patterns narrower, or write the model's exact name in the class that it belongs to"),
                    );
                }
                return Some(first);
            }
        }
        None
    }
}

/// What a card without a class does, by its letter and its `.model` card's type.
pub(crate) fn element_of(letter: u8, model_kind: Option<&str>, class: Option<&Class>) -> Option<Element> {
    if let Some(class) = class {
        return Some(Element::of_kind(class.kind));
    }
    Some(match letter {
        b'r' => Element::Resistor,
        b'c' => Element::Capacitor,
        b'l' => Element::Inductor,
        b'v' => Element::VoltageSource,
        b'i' => Element::CurrentSource,
        b'e' | b'f' | b'g' | b'h' | b'b' | b'a' => Element::Controlled,
        b's' | b'w' => Element::Switch,
        b't' | b'o' | b'u' | b'y' | b'p' => Element::Line,
        b'd' => Element::Diode,
        b'm' | b'q' | b'j' | b'z' => match model_kind? {
            "nmos" | "nsoi" => Element::Nmos,
            "pmos" | "psoi" => Element::Pmos,
            "npn" => Element::Npn,
            "pnp" => Element::Pnp,
            "njf" | "nmf" | "nhfet" => Element::Njf,
            "pjf" | "pmf" | "phfet" => Element::Pjf,
            _ => return None,
        },
        _ => return None,
    })
}
