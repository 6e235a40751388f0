//! What each element letter means: its terminals, and where its model or value stands.
//!
//! Terminals from the Ngspice User's Manual, version 39, table 2.1 and the "General form" line of each device. How many
//! nets a card has may depend on its model, so the reader of cards asks its caller which words are models.

use super::Complaint;
use super::directives::is_params_mark;
use super::tree::{Fields, Word};
use std::ops::Range;

/// What follows an element's nets.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Then {
    /// A value, a model, or both.
    ValueOrModel,
    /// A model.
    Model,
    /// A value, a waveform or a formula.
    Value,
    /// A value behind two more nets, or a formula at once.
    ControlledValue,
    /// Nothing: all words are nets but the last, which is a cell or model.
    LastWord,
    /// Parameters alone.
    Nothing,
}

/// One line of the table of element letters.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Letter {
    /// Lower case.
    pub letter: u8,
    /// What it is, in a word or two.
    pub what: &'static str,
    /// How a card is written, for messages.
    pub form: &'static str,
    /// Nets it usually has.
    pub usual: usize,
    /// The most it can have, with a known model behind them.
    pub most: usize,
    /// Names of other elements between nets and the rest.
    pub names: usize,
    /// What follows.
    pub then: Then,
}

const fn row(
    letter: u8,
    what: &'static str,
    form: &'static str,
    nets: (usize, usize),
    names: usize,
    then: Then,
) -> Letter {
    Letter { letter, what, form, usual: nets.0, most: nets.1, names, then }
}

/// The table. Optional further nets: substrate of an R, C or D, substrate and temperature of a Q, and what power devices add to an M.
pub const LETTERS: &[Letter] = &[
    row(b'a', "code model", "Aname nets … model", (1, usize::MAX), 0, Then::LastWord),
    row(b'b', "behavioural source", "Bname plus minus v={formula}", (2, 2), 0, Then::Value),
    row(b'c', "capacitor", "Cname plus minus value", (2, 3), 0, Then::ValueOrModel),
    row(b'd', "diode", "Dname anode cathode model", (2, 3), 0, Then::Model),
    row(
        b'e',
        "voltage-controlled voltage source",
        "Ename plus minus control+ control- gain",
        (4, 4),
        0,
        Then::ControlledValue,
    ),
    row(b'f', "current-controlled current source", "Fname plus minus Vname gain", (2, 2), 1, Then::Value),
    row(
        b'g',
        "voltage-controlled current source",
        "Gname plus minus control+ control- gain",
        (4, 4),
        0,
        Then::ControlledValue,
    ),
    row(b'h', "current-controlled voltage source", "Hname plus minus Vname gain", (2, 2), 1, Then::Value),
    row(b'i', "current source", "Iname plus minus value", (2, 2), 0, Then::Value),
    row(b'j', "junction transistor", "Jname drain gate source model", (3, 4), 0, Then::Model),
    row(b'k', "coupling", "Kname Lname Lname value", (0, 0), 2, Then::Value),
    row(b'l', "inductor", "Lname plus minus value", (2, 2), 0, Then::ValueOrModel),
    row(b'm', "transistor", "Mname drain gate source bulk model", (4, 7), 0, Then::Model),
    row(b'n', "compact model", "Nname nets … model", (1, usize::MAX), 0, Then::LastWord),
    row(b'o', "lossy line", "Oname n1+ n1- n2+ n2- model", (4, 4), 0, Then::Model),
    row(b'p', "coupled lines", "Pname nets … model", (2, usize::MAX), 0, Then::LastWord),
    row(b'q', "bipolar transistor", "Qname collector base emitter model", (3, 5), 0, Then::Model),
    row(b'r', "resistor", "Rname plus minus value", (2, 3), 0, Then::ValueOrModel),
    row(b's', "switch", "Sname plus minus control+ control- model", (4, 4), 0, Then::Model),
    row(b't', "line", "Tname n1+ n1- n2+ n2- z0=…", (4, 4), 0, Then::Nothing),
    row(b'u', "RC line", "Uname n1 n2 common model", (3, 3), 0, Then::Model),
    row(b'v', "voltage source", "Vname plus minus value", (2, 2), 0, Then::Value),
    row(b'w', "current-controlled switch", "Wname plus minus Vname model", (2, 2), 1, Then::Model),
    row(b'x', "cell", "Xname nets … cell", (0, usize::MAX), 0, Then::LastWord),
    row(b'y', "line", "Yname n1 ground n2 ground model", (4, 4), 0, Then::Model),
    row(b'z', "field-effect transistor", "Zname drain gate source model", (3, 4), 0, Then::Model),
];

/// The line of a letter, in either case.
pub fn letter(byte: u8) -> Option<&'static Letter> {
    let byte = byte.to_ascii_lowercase();
    byte.is_ascii_lowercase().then(|| &LETTERS[usize::from(byte - b'a')])
}

/// An element card understood. Ranges and indices are into `Fields::words`; the words are its.
#[derive(Clone, Debug, PartialEq)]
pub struct Element {
    /// Its letter, lower case.
    pub letter: u8,
    /// The words that are nets, in the order of the card.
    pub nodes: Range<usize>,
    /// Its model or cell. An M card with one net too few before its model has it too: whether three nets are right
    /// depends on the model.
    pub model: Option<Word>,
    /// The first word behind nets, names and model; past the end where there is none.
    pub value_from: usize,
}

/// Makes an element of a card's fields. `is_model` says whether a word is the name of a model or of a declared device;
/// it decides only where the card can be read in more than one way.
///
/// A name that is no known model after the two nets of an R, C or L counts as the model where a size or another value
/// stands on the card, and as a parameter otherwise.
pub fn interpret(text: &str, fields: &Fields, is_model: &mut dyn FnMut(&str) -> bool) -> Result<Element, Complaint> {
    let first =
        fields.words.first().filter(|name| !name.quoted).map_or(b'?', |name| text.as_bytes()[name.start as usize]);
    let Some(row) = letter(first) else {
        let place = fields.words.first().map_or((fields.end, fields.end), |name| (name.start, name.end));
        return Err(Complaint::new(place.0 as usize, place.1 as usize, "this is no element card")
            .with_help("an element's name begins with a letter"));
    };
    let card = Card { text, fields, row, count: count(text, fields) };
    match row.then {
        Then::LastWord => card.last_word(),
        Then::Model => card.with_model(is_model),
        Then::ValueOrModel => card.value_or_model(is_model),
        Then::Value => card.with_value(),
        Then::ControlledValue => card.controlled(),
        Then::Nothing => card.element(row.usual, None, row.usual + 1),
    }
}

/// How many words count: `params:` at the end is none.
fn count(text: &str, fields: &Fields) -> usize {
    let marks = fields.words.iter().rev().take_while(|word| is_params_mark(word.of(text))).count();
    fields.words.len() - marks
}

struct Card<'a> {
    text: &'a str,
    fields: &'a Fields,
    row: &'static Letter,
    count: usize,
}

impl Card<'_> {
    fn word(&self, index: usize) -> Word {
        self.fields.words[index]
    }

    fn element(&self, nets: usize, model: Option<Word>, value_from: usize) -> Result<Element, Complaint> {
        if self.count < nets + 1 + self.row.names {
            return Err(self.too_short());
        }
        Ok(Element { letter: self.row.letter, nodes: 1..nets + 1, model, value_from })
    }

    fn too_short(&self) -> Complaint {
        let start = self.word(0).start as usize;
        let name = self.word(0).of(self.text);
        let end = (self.fields.end as usize).max(self.word(0).end as usize);
        let end = self.text[start..end]
            .find('\n')
            .map_or(end, |line| start + self.text[start..start + line].trim_end().len());
        let what = self.row.what;
        let message = match self.count {
            1 => format!("{what} `{name}` has nothing behind its name"),
            2 => format!("{what} `{name}` has only one word behind its name"),
            count => format!("{what} `{name}` has only {} words behind its name", count - 1),
        };
        Complaint::new(start, end, message).with_help(format!("write `{}`", self.row.form))
    }

    /// The model of an export comment, or of the word behind a lone `/`, with how many nets stand before it.
    fn marked_model(&self) -> Option<(Word, usize)> {
        if let Some(model) = self.fields.bracket_model {
            return Some((model, self.count - 1));
        }
        let index = self.fields.after_slash.filter(|&index| index >= 1 && index < self.count)?;
        Some((self.word(index), index - 1))
    }

    fn last_word(&self) -> Result<Element, Complaint> {
        if let Some((model, nets)) = self.marked_model() {
            return self.element(nets, Some(model), self.fields.words.len());
        }
        if self.count < 2 {
            return Err(self.too_short());
        }
        self.element(self.count - 2, Some(self.word(self.count - 1)), self.fields.words.len())
    }

    fn with_model(&self, is_model: &mut dyn FnMut(&str) -> bool) -> Result<Element, Complaint> {
        let (usual, names) = (self.row.usual, self.row.names);
        if let Some((model, nets)) = self.marked_model() {
            return self.element(nets.min(self.row.most), Some(model), self.count);
        }
        // One net too few is for the caller to judge, who knows the model (three nets are right for some transistors).
        let least = if self.row.letter == b'm' { 3 } else { usual };
        if self.count < least + names + 2 {
            return Err(self.too_short());
        }
        let last = self.count - 1;
        let (from, to) = (least + names + 1, last.min(self.row.most + names + 1));
        let known = (from..=to).find(|&index| !self.word(index).quoted && is_model(self.word(index).of(self.text)));
        let index = known.unwrap_or_else(|| self.likely_model(from, to));
        self.element(index - 1 - names, Some(self.word(index)), index + 1)
    }

    /// Where the model stands if no word is a known one: at its usual place; on an M, Q or D card, whose nets vary, the
    /// last word that can be a name.
    fn likely_model(&self, from: usize, to: usize) -> usize {
        let usual = (self.row.usual + self.row.names + 1).min(to);
        if !matches!(self.row.letter, b'm' | b'q' | b'd') {
            return usual;
        }
        let can_be = |index: &usize| {
            let word = self.word(*index).of(self.text);
            is_name(word) && !word.eq_ignore_ascii_case("off")
        };
        (from..=to).rev().find(can_be).unwrap_or(usual).max(usual)
    }

    fn value_or_model(&self, is_model: &mut dyn FnMut(&str) -> bool) -> Result<Element, Complaint> {
        if let Some(model) = self.fields.bracket_model {
            return self.element(2, Some(model), 3);
        }
        if let Some((model, nets)) = self.marked_model() {
            return self.element(nets.clamp(2, self.row.most.max(2)), Some(model), self.count);
        }
        let value_given = self.fields.params.iter().any(|(key, _)| {
            let key = key.of(self.text);
            ["r", "c", "l", "w", "value", "resistance", "capacitance", "inductance", "area", "dtemp", "q"]
                .iter()
                .any(|known| key.eq_ignore_ascii_case(known))
        });
        if self.count < 3 || (self.count == 3 && !value_given) {
            return Err(self.too_short());
        }
        if self.count == 3 {
            // `R1 a b r={x} model`
            let behind = self.fields.stray.filter(|word| !word.quoted && is_model(word.of(self.text)));
            return self.element(2, behind, 3);
        }
        let mut known =
            |index: usize| index < self.count && !self.word(index).quoted && is_model(self.word(index).of(self.text));
        if known(3) {
            return self.element(2, Some(self.word(3)), 4);
        }
        let named = |index: usize| index < self.count && self.can_name(self.word(index));
        if known(4) {
            // `R1 a b bulk model`, or `R1 a b 1k model`.
            let nets = if named(3) && self.row.most > 2 { 3 } else { 2 };
            return self.element(nets, Some(self.word(4)), if nets == 3 { 5 } else { 3 });
        }
        let model = named(3) && (value_given || (self.count > 4 && !named(4)));
        match model {
            true => self.element(2, Some(self.word(3)), 4),
            false => self.element(2, None, 3),
        }
    }

    /// Whether a word can be a name: no number, no formula, no function's call.
    fn can_name(&self, word: Word) -> bool {
        let called = self.text.as_bytes().get(word.end as usize) == Some(&b'(');
        !word.quoted && !called && is_name(word.of(self.text))
    }

    fn with_value(&self) -> Result<Element, Complaint> {
        let from = self.row.usual + self.row.names + 1;
        let needs_value = matches!(self.row.letter, b'f' | b'h' | b'k');
        if needs_value && self.count <= from && self.fields.params.is_empty() {
            return Err(self.too_short());
        }
        if self.row.letter == b'b' && self.fields.params.is_empty() {
            return Err(self.too_short());
        }
        self.element(self.row.usual, None, from)
    }

    /// E and G: four nets and a gain, or two nets and a formula.
    fn controlled(&self) -> Result<Element, Complaint> {
        const FORMS: &[&str] = &[
            "poly",
            "value",
            "vol",
            "cur",
            "table",
            "laplace",
            "freq",
            "vcvs",
            "vccs",
            "pwl",
            "npwl",
            "ppwl",
            "vcr",
            "vccap",
            "delay",
            "opamp",
            "transformer",
            "chebyshev",
        ];
        let third = (self.count > 3).then(|| self.word(3));
        let formula = match third {
            Some(word) => word.quoted || FORMS.iter().any(|form| word.of(self.text).eq_ignore_ascii_case(form)),
            None => !self.fields.params.is_empty(),
        };
        if formula {
            return self.element(2, None, 3);
        }
        if self.count < 6 && (self.count < 5 || self.fields.params.is_empty()) {
            return Err(self.too_short());
        }
        self.element(4, None, 5)
    }
}

/// Whether a word can be a name rather than a number.
pub(super) fn is_name(word: &str) -> bool {
    !word.starts_with(|first: char| first.is_ascii_digit() || matches!(first, '.' | '+' | '-'))
}

#[cfg(test)]
mod tests {
    use super::super::fields::read_fields;
    use super::*;

    fn shown(text: &str, models: &[&str]) -> String {
        let mut fields = Fields::default();
        assert_eq!(read_fields(text, 0, &mut fields), None);
        match interpret(text, &fields, &mut |word| models.contains(&word)) {
            Ok(element) => {
                let nodes: Vec<_> = fields.words[element.nodes.clone()].iter().map(|word| word.of(text)).collect();
                let rest: Vec<_> = fields.words.iter().skip(element.value_from).map(|word| word.of(text)).collect();
                format!(
                    "{} | {} | {}",
                    nodes.join(" "),
                    element.model.map_or("-", |word| word.of(text)),
                    rest.join(" ")
                )
            }
            Err(complaint) => complaint.message,
        }
    }

    #[test]
    fn the_table_is_in_order() {
        assert!(LETTERS.iter().zip(b'a'..=b'z').all(|(row, letter)| row.letter == letter));
        assert_eq!((LETTERS.len(), letter(b'M').map(|row| row.usual), letter(b'1')), (26, Some(4), None));
    }

    /// Ngspice User's Manual, version 39, table 2.1 and the "General form" lines of chapters 3 to 12.
    #[test]
    fn nets_and_models_of_every_letter() {
        let table = [
            ("R1 n1 n2 1k", "n1 n2 | - | 1k"),
            ("R1 n1 n2 rx w=2u", "n1 n2 | rx | "),
            ("R1 n1 n2 rload", "n1 n2 | - | rload"),
            ("R1 n1 n2 1k known", "n1 n2 | known | 1k known"),
            ("R1 n1 n2 sub known w=1", "n1 n2 sub | known | "),
            ("R1 n1 n2 100 $[rp] $SUB=s", "n1 n2 | rp | 100"),
            ("R1 n1 n2 r='2*x'", "n1 n2 | - | "),
            ("R1 n1 n2 r={x} known", "n1 n2 | known | "),
            ("C1 n1 n2 known 2p", "n1 n2 | known | 2p"),
            ("L1 n1 n2 1u ic=0", "n1 n2 | - | 1u"),
            ("K1 L1 L2 0.9", " | - | 0.9"),
            ("V1 p n dc 5 ac 1", "p n | - | dc 5 ac 1"),
            ("I1 p n", "p n | - | "),
            ("E1 p n cp cn 2", "p n cp cn | - | 2"),
            ("E1 p n value={v(a)}", "p n | - | "),
            ("G1 p n poly(1) a 0 0 1", "p n | - | poly 1 a 0 0 1"),
            ("F1 p n v1 2", "p n | - | 2"),
            ("H1 p n v1 2", "p n | - | 2"),
            ("B1 p n v={1}", "p n | - | "),
            ("D1 a k dx 2", "a k | dx | 2"),
            ("D1 a k t dx", "a k t | dx | "),
            ("Q1 c b e qx", "c b e | qx | "),
            ("Q1 c b e s qx 2 off", "c b e s | qx | 2 off"),
            ("Q1 c b e s t known", "c b e s t | known | "),
            ("J1 d g s jx", "d g s | jx | "),
            ("Z1 d g s zx", "d g s | zx | "),
            ("M1 d g s b n60 w=1", "d g s b | n60 | "),
            ("M1 d g s known w=1", "d g s | known | "),
            ("M1 d g s b iso known", "d g s b iso | known | "),
            ("M1 d g s b iso n60 w=1", "d g s b iso | n60 | "),
            ("M1 d g s b n60 10u 2u off", "d g s b | n60 | 10u 2u off"),
            ("M1 d g s b $[n60]", "d g s b | n60 | "),
            ("S1 p n cp cn sx on", "p n cp cn | sx | on"),
            ("W1 p n v1 wx", "p n | wx | "),
            ("T1 a b c d z0=50", "a b c d | - | "),
            ("O1 a b c d ox", "a b c d | ox | "),
            ("U1 a b c ux l=1", "a b c | ux | "),
            ("Y1 a 0 b 0 yx", "a 0 b 0 | yx | "),
            ("P1 a b 0 c d 0 px", "a b 0 c d 0 | px | "),
            ("A1 [a b] c gate", "a b c | gate | "),
            ("X1 a b cell p=1", "a b | cell | "),
            ("X1 a b / cell p=1", "a b | cell | "),
            ("X1 a b cell params: p=1", "a b | cell | "),
            ("X1 cell", " | cell | "),
        ];
        for (text, wanted) in table {
            assert_eq!(shown(text, &["known"]), wanted, "{text}");
        }
    }

    #[test]
    fn cards_too_short_say_what_they_need() {
        for text in [
            "M1 d g n60",
            "R1 a",
            "R1 a b",
            "Q1 c b e",
            "E1 a b c d",
            "F1 a b",
            "B1 a b",
            "X1",
            "D1 a k",
            "K1 L1 L2",
            "M1 w=1",
        ] {
            assert!(shown(text, &[]).contains("behind its name"), "{text}: {}", shown(text, &[]));
        }
    }
}
