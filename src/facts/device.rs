//! One device in its surroundings.

use super::glance::{Cells, Glance, Shape};
use super::{Evidence, World};
use crate::current::{Current, Known};
use crate::declared::Class;
use crate::design::{Card, Design, DeviceIx, DeviceType, NetIx, Reading, Sizes};
use crate::expr::Value;
use crate::graph::{Context, Mark, rail, rail_in_mode};
use crate::quantity::Dim;
use crate::reach::ReachIx;
use crate::roles::{Standing, Surroundings, Unit, Walk, Walks};
use std::cell::{OnceCell, RefCell};
use std::rc::Rc;

/// A device of a declared class, in one context.
pub struct DeviceView<'w> {
    /// Everything that is known.
    pub world: World<'w>,
    /// The context of its cell.
    pub at: ReachIx,
    /// The device in its cell.
    pub device: DeviceIx,
    /// Its class.
    pub class: &'w Class,
    /// Whether notes are wanted in words, or only what was concerned and how badly.
    pub(super) in_words: bool,
    /// Where it is seen, and where else it stands.
    pub(super) standing: Standing,
    pub(super) surroundings: Surroundings,
    pub(super) walks: OnceCell<Rc<Walks<'w, Known>>>,
    pub(super) walk: OnceCell<Rc<Walk<'w, Known>>>,
    /// As that walk knows it.
    pub(super) unit: OnceCell<Unit>,
    pub(super) current: OnceCell<Option<Current>>,
    card: OnceCell<Card<'w>>,
    sizes: OnceCell<Sizes>,
    evidence: RefCell<Evidence>,
}

impl<'w> DeviceView<'w> {
    /// Looks at a device.
    pub fn new(world: World<'w>, at: ReachIx, device: DeviceIx, class: &'w Class) -> DeviceView<'w> {
        DeviceView::of(world, at, device, class, true)
    }

    pub(super) fn of(
        world: World<'w>,
        at: ReachIx,
        device: DeviceIx,
        class: &'w Class,
        in_words: bool,
    ) -> DeviceView<'w> {
        DeviceView {
            world,
            at,
            device,
            class,
            in_words,
            standing: Standing { anchor: at, path: Vec::new() },
            surroundings: Surroundings::default(),
            walks: OnceCell::new(),
            walk: OnceCell::new(),
            unit: OnceCell::new(),
            current: OnceCell::new(),
            card: OnceCell::new(),
            sizes: OnceCell::new(),
            evidence: RefCell::default(),
        }
    }

    /// Looks at a device for a verdict alone: words are made only for findings that are reported.
    pub fn for_verdict(world: World<'w>, at: ReachIx, device: DeviceIx, class: &'w Class) -> DeviceView<'w> {
        DeviceView::of(world, at, device, class, false)
    }

    /// The design.
    pub fn design(&self) -> &'w Design<'w> {
        self.world.design
    }

    /// Its context.
    pub fn context(&self) -> &'w Context {
        self.world.context(self.at)
    }

    /// What it is.
    pub fn device_type(&self) -> &'w DeviceType {
        self.design().device_type(self.design().template(self.context().variant), self.device)
    }

    /// Its card.
    pub fn card(&self) -> &Card<'w> {
        self.card.get_or_init(|| self.design().device_card(self.context().variant, self.device))
    }

    /// Its sizes.
    pub fn sizes(&self) -> &Sizes {
        self.sizes.get_or_init(|| self.design().sizes(self.context().variant, self.class, self.card()))
    }

    /// Its own name, as written.
    pub fn name(&self) -> &'w str {
        self.design().device_name(self.design().template(self.context().variant), self.device)
    }

    /// The cell that holds it; empty at top level.
    pub fn cell(&self) -> &'w str {
        self.design().template(self.context().variant).cell.map_or("", |cell| self.design().cell_name(cell))
    }

    /// The model on its card.
    pub fn model(&self) -> &'w str {
        self.device_type().model.map_or("", |model| self.design().names.text(model))
    }

    /// Its dotted path, by the first instance in its surroundings.
    pub fn path(&self) -> String {
        if self.walk.get().is_some() {
            let unit = self.unit();
            return self.walk().borrow().unit_path(unit);
        }
        let above = self.world.reach.path(self.at);
        if above.is_empty() { self.name().to_owned() } else { format!("{above}.{}", self.name()) }
    }

    /// The net on a pin of its class.
    pub fn net(&self, pin: usize) -> Option<NetIx> {
        self.design().template(self.context().variant).device_pins(self.device).get(pin).copied()
    }

    /// The name of the net on a pin, inside its cell.
    pub fn net_text(&self, pin: usize) -> &'w str {
        let template = self.design().template(self.context().variant);
        self.net(pin).map_or("", |net| self.design().net_name(template, net))
    }

    /// Whether the net on a pin is a declared rail.
    pub fn is_rail(&self, pin: usize) -> bool {
        self.net(pin)
            .is_some_and(|net| self.world.marks_of(self.at, net).iter().any(|mark| matches!(mark, Mark::Rail(_))))
    }

    /// Whether two pins, by name, share a net; none where the class has no such pin.
    pub fn tied(&self, a: &str, b: &str) -> Option<bool> {
        let (a, b) = (self.net(self.class.pin(a)?)?, self.net(self.class.pin(b)?)?);
        Some(self.context().same(a, b))
    }

    /// What a first look at it says.
    pub(super) fn glance(&self) -> Glance<'w> {
        Cells::new(self.world, self.at).glance(self.device, Shape::of(self.class))
    }

    /// d, g and s on one net, or d on s: it can do nothing.
    pub fn is_dummy(&self) -> bool {
        self.glance().is_dummy()
    }

    /// Gate on source: it never turns on. An enhancement device, or one whose threshold is not declared.
    pub fn is_idle(&self) -> bool {
        self.glance().is_idle()
    }

    /// Notes that a pin is concerned.
    pub(super) fn concern(&self, pin: usize) {
        let mut evidence = self.evidence.borrow_mut();
        if !evidence.pins.contains(&pin) {
            evidence.pins.push(pin);
            evidence.pairs.push(self.class.pins.get(pin).cloned().unwrap_or_default());
        }
    }

    /// Changes the notes.
    pub(super) fn note(&self, change: impl FnOnce(&mut Evidence)) {
        change(&mut self.evidence.borrow_mut());
    }

    /// Notes where the rails on these pins are declared, with what they say in a mode.
    pub(super) fn note_rails(&self, mode: usize, pins: &[usize]) {
        if !self.in_words {
            return;
        }
        let reach = self.world.reach;
        let deck_mode = reach.modes[mode];
        for &pin in pins {
            let Some(net) = self.net(pin) else { continue };
            if let Some(slot) = rail_in_mode(self.world.deck, self.world.marks_of(self.at, net), deck_mode) {
                let place = rail(self.world.deck, slot).place;
                let words = format!(
                    "{} of `{}` is this rail: {}",
                    self.class.pins[pin],
                    self.name(),
                    self.reach_text(mode, pin)
                );
                self.note(|evidence| evidence.places.push((place, words)));
            }
        }
    }

    /// Notes why something is unknown.
    pub(super) fn unknown(&self, why: impl Into<String>) -> Value {
        self.evidence.borrow_mut().unknown(why);
        Value::Unknown
    }

    /// Notes that the class does not declare what was asked for.
    pub(super) fn undeclared(&self) -> Value {
        self.evidence.borrow_mut().undeclared = true;
        Value::Unknown
    }

    /// Takes the notes made so far.
    pub fn take_evidence(&self) -> Evidence {
        self.evidence.take()
    }

    /// A reading as a value; its trouble becomes a reason.
    pub(super) fn reading(&self, reading: &Reading, dim: Dim) -> Value {
        match reading {
            Ok(value) => Value::Number { value: *value, dim },
            Err(trouble) => self.unknown(trouble.message.clone()),
        }
    }

    /// Width of one finger, metres.
    pub(super) fn finger_width(&self) -> Value {
        let sizes = self.sizes();
        match (&sizes.width, &sizes.fingers) {
            (Ok(_), Ok(fingers)) if *fingers <= 0.0 => self.unknown("its number of fingers is not positive"),
            (Ok(width), Ok(fingers)) => Value::Number { value: width / fingers, dim: Dim::METRE },
            (Err(trouble), _) | (_, Err(trouble)) => self.unknown(trouble.message.clone()),
        }
    }

    /// A parameter of the card.
    pub(super) fn param(&self, name: &str) -> Value {
        match self.design().parameter(self.context().variant, self.card(), name) {
            Some(reading) => self.reading(&reading, Dim::NONE),
            None => self.unknown(format!("the card does not give `{name}`")),
        }
    }
}
