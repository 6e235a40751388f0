//! Sizes of a device: from its card's parameters, through its class's expressions, when somebody asks.

use super::params::{Reading, Scope, Trouble};
use super::{Design, DeviceIx, VariantIx};
use crate::declared::Class;
use crate::expr::{self, Expr};
use crate::netlist::fields::read_fields;
use crate::netlist::letters::interpret;
use crate::netlist::tree::{CellIx, Fields, Word};
use crate::netlist::values::{number, operand};
use crate::netlist::waveforms::{Waveform, value_word, waveform};
use crate::source::{FileId, Span};
use hashbrown::HashMap;
use std::cell::RefCell;

/// The sizes of one device in one variant, in metres and plain numbers.
#[derive(Clone, Debug, PartialEq)]
pub struct Sizes {
    /// Total drawn width of one copy, metres.
    pub width: Reading,
    /// Channel length, metres.
    pub length: Reading,
    /// Fingers of one copy.
    pub fingers: Reading,
    /// Copies in parallel, with those of the instances above.
    pub copies: Reading,
}

/// How deep header defaults may refer to one another.
const DEFAULT_DEPTH: u32 = 20;

/// The fields of one card, with the text they lie in.
pub struct Card<'a> {
    /// The file.
    pub file: FileId,
    /// Its text.
    pub text: &'a str,
    /// First byte.
    pub start: u32,
    /// Its fields.
    pub fields: Fields,
}

impl Card<'_> {
    /// The place of a parameter's value.
    pub fn param(&self, name: &str) -> Option<Word> {
        self.fields
            .params
            .iter()
            .rev()
            .find(|(key, _)| key.of(self.text).eq_ignore_ascii_case(name))
            .map(|&(_, value)| value)
    }

    /// Whether it is the call of a cell.
    fn is_call(&self) -> bool {
        self.text.as_bytes().get(self.start as usize).is_some_and(|letter| letter.eq_ignore_ascii_case(&b'x'))
    }

    /// The whole card, from its letter to its last field.
    pub fn span(&self) -> Span {
        Span::new(self.file, self.start, self.fields.end.max(self.start))
    }

    /// The place of `name=value`.
    pub fn param_span(&self, name: &str) -> Option<Span> {
        let found = self.fields.params.iter().rev().find(|(key, _)| key.of(self.text).eq_ignore_ascii_case(name));
        found.map(|(key, value)| Span::new(self.file, key.start, value.end + u32::from(value.quoted)))
    }
}

impl<'a> Design<'a> {
    /// Reads a card again, for its fields.
    pub fn card(&self, file: FileId, start: u32) -> Card<'a> {
        let text = self.sources.text(file);
        let mut fields = Fields::default();
        read_fields(text, start, &mut fields);
        Card { file, text, start, fields }
    }

    /// The card of a device.
    pub fn device_card(&self, variant: VariantIx, device: DeviceIx) -> Card<'a> {
        let (file, start) = self.template(variant).device_card(device);
        self.card(file, start)
    }

    /// A parameter of a card, in the scope of the variant that holds it; none where the card does not give it.
    pub fn parameter(&self, variant: VariantIx, card: &Card<'_>, name: &str) -> Option<Reading> {
        let word = card.param(name)?;
        Some(self.in_scope(variant, |scope| self.word(scope, card, word)))
    }

    /// The value of a word of a card.
    pub(super) fn word(&self, scope: &Scope<'_>, card: &Card<'_>, word: Word) -> Reading {
        self.word_behind(scope, card, word, None)
    }

    fn word_behind(&self, scope: &Scope<'_>, card: &Card<'_>, word: Word, behind: Option<&OnCall<'_>>) -> Reading {
        let mega = self.tree.mega.contains(&card.file);
        if let Some(value) = number(card.text, word, mega).filter(|_| !word.quoted) {
            return Ok(value);
        }
        match operand(card.text, word, card.file, mega) {
            Ok(operand) if card.is_call() => {
                let Some(expr) = &operand.expr else { return scope.operand(&operand) };
                let fresh = RefCell::new(HashMap::new());
                let known = behind.map_or(&fresh, |behind| behind.known);
                let own = OnCall { design: self, scope, card, word, known, behind };
                expr::evaluate_spice(expr, &own).map_err(|fault| Trouble::at(operand.span, fault))
            }
            Ok(operand) => scope.operand(&operand),
            Err(complaint) => {
                let diagnostic = complaint.diagnostic(card.file);
                Err(Trouble {
                    span: Some(diagnostic.span),
                    message: diagnostic.message,
                    help: diagnostic.help,
                    quiet: false,
                })
            }
        }
    }

    /// The range that a voltage or current source's value stays in, over all time; none where its card does not bound it.
    pub fn source_range(&self, variant: VariantIx, device: DeviceIx) -> Option<(f64, f64)> {
        let card = self.device_card(variant, device);
        let element = interpret(card.text, &card.fields, &mut |_| false).ok()?;
        let Waveform::Bounded { levels, swings } = waveform(card.text, &card.fields, &element) else { return None };
        self.in_scope(variant, |scope| {
            let value = |word| self.word(scope, &card, word).ok();
            let mut ends: Vec<f64> = levels.iter().map(|&word| value(word)).collect::<Option<_>>()?;
            for &(offset, amplitude) in &swings {
                let (offset, amplitude) = (value(offset)?, value(amplitude)?.abs());
                ends.extend([offset - amplitude, offset + amplitude]);
            }
            if ends.is_empty() {
                ends.push(0.0);
            }
            Some((
                ends.iter().copied().fold(f64::INFINITY, f64::min),
                ends.iter().copied().fold(f64::NEG_INFINITY, f64::max),
            ))
        })
    }

    /// A resistor's value, ohms, with all copies in parallel; none where a model alone gives it.
    pub fn resistance(&self, variant: VariantIx, device: DeviceIx) -> Option<f64> {
        let card = self.device_card(variant, device);
        let element = interpret(card.text, &card.fields, &mut |_| false).ok()?;
        let word = value_word(card.text, &card.fields, &element)?;
        let ohms = self.in_scope(variant, |scope| self.word(scope, &card, word)).ok()?;
        Some(ohms / self.copies(variant, device)?)
    }

    /// How many copies of a device stand in parallel, with those of the instances above.
    pub fn copies(&self, variant: VariantIx, device: DeviceIx) -> Option<f64> {
        let card = self.device_card(variant, device);
        let own = self.parameter(variant, &card, "m").unwrap_or(Ok(1.0)).ok()?;
        Some(own * self.variants[variant.0 as usize].multiplier)
    }

    /// The sizes of a device by its class.
    pub fn sizes(&self, variant: VariantIx, class: &Class, card: &Card<'_>) -> Sizes {
        let metres = class.size.unit.unwrap_or(self.globals.scale);
        let read = |expr: &Option<Expr>, what: &str| match expr {
            Some(expr) => self.sized(variant, class, card, expr),
            None => Err(Trouble::missing(format!(
                "the class `{}` does not say how its {what} follows from the card (`size`)",
                class.name
            ))),
        };
        let copies = match &class.size.copies {
            Some(expr) => self.sized(variant, class, card, expr),
            None => self.parameter(variant, card, "m").unwrap_or(Ok(1.0)),
        };
        Sizes {
            width: read(&class.size.width, "width").map(|value| value * metres),
            length: read(&class.size.length, "length").map(|value| value * metres),
            fingers: read(&class.size.fingers, "number of fingers"),
            copies: copies.map(|copies| copies * self.variants[variant.0 as usize].multiplier),
        }
    }

    fn sized(&self, variant: VariantIx, class: &Class, card: &Card<'_>, expr: &Expr) -> Reading {
        self.in_scope(variant, |scope| {
            let sizing = Sizing { design: self, scope, class, card, header: self.header_of(variant, card), depth: 0 };
            sizing.evaluate(expr)
        })
    }

    /// The cell that the netlist defines under a leaf's model name, for its header's defaults.
    fn header_of(&self, variant: VariantIx, card: &Card<'_>) -> Option<CellIx> {
        if !card.is_call() {
            return None;
        }
        let word = card.fields.after_slash.and_then(|at| card.fields.words.get(at)).or(card.fields.words.last())?;
        let name = self.names.find(word.of(card.text))?;
        let mut scope = self.template(variant).cell;
        while let Some(cell) = scope {
            let source = &self.tree.cells[cell.0 as usize];
            if let Some(&found) = source.inner.iter().find(|inner| self.tree.cells[inner.0 as usize].name.name == name)
            {
                return Some(found);
            }
            scope = source.parent;
        }
        None
    }
}

/// The scope of a parameter on a cell's call: the other parameters of the same card, then the scope around. So a call may say
/// `nf=2 ad='w/nf'`; one that says `w=w` means the `w` around. (Observed with the circuit simulator ngspice, version 39.)
struct OnCall<'s> {
    design: &'s Design<'s>,
    scope: &'s Scope<'s>,
    card: &'s Card<'s>,
    word: Word,
    /// What the others came to, by where they stand: each is worked out once.
    known: &'s RefCell<HashMap<u32, Reading>>,
    /// The parameter whose value asks for this one.
    behind: Option<&'s OnCall<'s>>,
}

impl OnCall<'_> {
    fn is_being_asked(&self, word: Word) -> bool {
        let mut at = Some(self);
        while let Some(asked) = at {
            if asked.word.start == word.start {
                return true;
            }
            at = asked.behind;
        }
        false
    }

    fn depth(&self) -> u32 {
        let (mut depth, mut at) = (0, self.behind);
        while let Some(asked) = at {
            (depth, at) = (depth + 1, asked.behind);
        }
        depth
    }
}

impl expr::Parameters for OnCall<'_> {
    fn name(&self, name: &str) -> Result<Option<f64>, String> {
        match self.card.param(name).filter(|&word| !self.is_being_asked(word)) {
            Some(_) if self.depth() >= DEFAULT_DEPTH => {
                Err("the parameters of this card refer to one another".to_owned())
            }
            Some(word) => {
                let known = self.known.borrow().get(&word.start).cloned();
                let reading = known.unwrap_or_else(|| {
                    let reading = self.design.word_behind(self.scope, self.card, word, Some(self));
                    self.known.borrow_mut().insert(word.start, reading.clone());
                    reading
                });
                reading.map(Some).map_err(|trouble| if trouble.quiet { String::new() } else { trouble.message })
            }
            None => expr::Parameters::name(self.scope, name),
        }
    }

    fn call(&self, name: &str, args: &[f64]) -> Result<Option<f64>, String> {
        expr::Parameters::call(self.scope, name, args)
    }

    fn names(&self) -> Vec<String> {
        let own = self.card.fields.params.iter().map(|(key, _)| key.of(self.card.text).to_owned());
        own.chain(expr::Parameters::names(self.scope)).collect()
    }
}

/// The scope of a class's size expressions: the card's parameters, then the header's defaults, then the class's.
struct Sizing<'s> {
    design: &'s Design<'s>,
    scope: &'s Scope<'s>,
    class: &'s Class,
    card: &'s Card<'s>,
    header: Option<CellIx>,
    depth: u32,
}

impl Sizing<'_> {
    fn evaluate(&self, expr: &Expr) -> Reading {
        expr::evaluate_spice(expr, self).map_err(|fault| Trouble {
            span: None,
            quiet: fault.message.is_empty(),
            message: fault.message,
            help: fault.help,
        })
    }

    fn default(&self, name: &str) -> Option<Reading> {
        let cell = &self.design.tree.cells[self.header?.0 as usize];
        let sym = self.design.names.find(name)?;
        let param = cell.formals.iter().rev().find(|param| param.name.name == sym)?;
        let inner = Sizing { depth: self.depth + 1, ..*self };
        Some(match &param.value.expr {
            _ if self.depth > DEFAULT_DEPTH => {
                Err(Trouble::missing(format!("the defaults of `{name}` refer to one another")))
            }
            Some(expr) => inner.evaluate(expr),
            None => Err(Trouble::quiet("its default could not be read")),
        })
    }
}

impl expr::Parameters for Sizing<'_> {
    fn name(&self, name: &str) -> Result<Option<f64>, String> {
        let plain = |reading: Reading| reading.map(Some).map_err(|trouble| trouble.message);
        if let Some(word) = self.card.param(name) {
            return plain(self.design.word(self.scope, self.card, word));
        }
        if let Some(reading) = self.default(name) {
            return plain(reading);
        }
        if let Some((_, value)) = self.class.size.defaults.iter().find(|(key, _)| key.eq_ignore_ascii_case(name)) {
            return Ok(Some(*value));
        }
        if name.eq_ignore_ascii_case("m") {
            return Ok(Some(1.0));
        }
        Err(format!("the card does not give `{name}`"))
    }

    fn call(&self, name: &str, args: &[f64]) -> Result<Option<f64>, String> {
        expr::Parameters::call(self.scope, name, args)
    }
}
