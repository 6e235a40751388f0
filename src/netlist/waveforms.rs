//! What the value of a source or a passive element is: for a source that changes, the values between which it stays.

use super::letters::{Element, is_name};
use super::tree::{Fields, Word};
use super::values::whole;

/// What bounds a V or I source over all time.
#[derive(Clone, Debug, PartialEq)]
pub enum Waveform {
    /// It stays between the least and the greatest of all `levels` and of `offset - |amplitude|` and
    /// `offset + |amplitude|` of all `swings`. With neither, it is 0.
    Bounded {
        /// Values that it takes.
        levels: Vec<Word>,
        /// Offset and amplitude of sines.
        swings: Vec<(Word, Word)>,
    },
    /// Nothing on the card bounds it.
    Unknown,
}

/// The waveform of a V or I card. Small-signal (`ac`) values count for nothing.
///
/// Forms from the Ngspice User's Manual, version 39, section 4.1.
pub fn waveform(text: &str, fields: &Fields, element: &Element) -> Waveform {
    let mut scan = Scan { text, words: &fields.words, at: element.value_from, levels: Vec::new(), swings: Vec::new() };
    let read = scan.all();
    for (key, value) in &fields.params {
        if ["dc", "value"].iter().any(|known| key.of(text).eq_ignore_ascii_case(known)) {
            scan.levels.push(*value);
        }
        if key.of(text).eq_ignore_ascii_case("file") {
            return Waveform::Unknown;
        }
    }
    match read {
        Some(()) => Waveform::Bounded { levels: scan.levels, swings: scan.swings },
        None => Waveform::Unknown,
    }
}

struct Scan<'a> {
    text: &'a str,
    words: &'a [Word],
    at: usize,
    levels: Vec<Word>,
    swings: Vec<(Word, Word)>,
}

impl Scan<'_> {
    fn keyword(&self) -> Option<String> {
        let word = self.words.get(self.at).filter(|word| !word.quoted)?;
        const KEYS: &[&str] = &[
            "dc", "ac", "pulse", "sin", "exp", "pwl", "sffm", "am", "trnoise", "trrandom", "external", "distof1",
            "distof2", "pat", "portnum", "z0", "r", "td", "pwlfile", "repeat",
        ];
        let word = word.of(self.text);
        KEYS.iter().find(|key| word.eq_ignore_ascii_case(key)).map(|key| (*key).to_owned())
    }

    /// The next word, whole, if it is a value.
    fn value(&mut self) -> Option<Word> {
        let word = *self.words.get(self.at)?;
        if self.keyword().is_some() {
            return None;
        }
        let word = whole(self.text, word);
        self.at += 1;
        // The words inside a call's brackets belong to it.
        while self.words.get(self.at).is_some_and(|next| next.start < word.end) {
            self.at += 1;
        }
        Some(word)
    }

    fn all(&mut self) -> Option<()> {
        let mut bare = 0;
        while self.at < self.words.len() {
            let Some(key) = self.keyword() else {
                let value = self.value()?;
                bare += 1;
                let is_value = value.quoted || bare == 1 || !is_name(value.of(self.text));
                if !is_value || bare > 1 {
                    return None;
                }
                self.levels.push(value);
                continue;
            };
            self.at += 1;
            self.part(&key)?;
        }
        Some(())
    }

    fn part(&mut self, key: &str) -> Option<()> {
        match key {
            "dc" => {
                if let Some(value) = self.value() {
                    self.levels.push(value);
                }
            }
            "ac" | "distof1" | "distof2" | "portnum" | "z0" | "r" | "td" => self.skip_values(),
            "pulse" | "exp" | "pat" => {
                for _ in 0..2 {
                    let value = self.value()?;
                    self.levels.push(value);
                }
                self.skip_values();
            }
            "sin" | "sffm" => {
                let pair = (self.value()?, self.value()?);
                self.swings.push(pair);
                self.skip_values();
            }
            "pwl" => {
                let before = self.levels.len();
                while self.value().is_some() {
                    match self.value() {
                        Some(value) => self.levels.push(value),
                        None => break,
                    }
                }
                (self.levels.len() > before).then_some(())?;
            }
            _ => return None,
        }
        Some(())
    }

    fn skip_values(&mut self) {
        while self.value().is_some() {}
    }
}

/// The value of an R, C or L card: the word behind its nets, or `r=`, `c=`, `l=`. None where a model gives it alone.
pub fn value_word(text: &str, fields: &Fields, element: &Element) -> Option<Word> {
    let own = [element.letter];
    let own = std::str::from_utf8(&own).unwrap_or("");
    let named = fields.params.iter().rev().find(|(key, _)| {
        let key = key.of(text);
        // On a card with a model, `l=` is a length.
        (key.eq_ignore_ascii_case(own) && !(own == "l" && element.model.is_some())) || key.eq_ignore_ascii_case("value")
    });
    if let Some(&(_, value)) = named {
        return Some(value);
    }
    let word = *fields.words.get(element.value_from)?;
    let plain = |word: &Word| word.quoted || element.model.is_none() || !is_name(word.of(text));
    Some(whole(text, word)).filter(plain)
}

#[cfg(test)]
mod tests {
    use super::super::fields::read_fields;
    use super::super::letters::interpret;
    use super::*;

    fn read(text: &str) -> (Fields, Element) {
        let mut fields = Fields::default();
        assert_eq!(read_fields(text, 0, &mut fields), None);
        let element = interpret(text, &fields, &mut |word| word == "known").unwrap();
        (fields, element)
    }

    fn shown(text: &str) -> String {
        let (fields, element) = read(text);
        match waveform(text, &fields, &element) {
            Waveform::Bounded { levels, swings } => {
                let levels = levels.iter().map(|word| word.of(text).to_owned());
                let swings = swings.iter().map(|(offset, swing)| format!("{}+-{}", offset.of(text), swing.of(text)));
                levels.chain(swings).collect::<Vec<_>>().join(" ")
            }
            Waveform::Unknown => "?".to_owned(),
        }
    }

    /// Ngspice User's Manual, version 39, section 4.1: independent sources.
    #[test]
    fn sources_are_bounded_by_their_levels() {
        let table = [
            ("V1 a 0", ""),
            ("V1 a 0 5", "5"),
            ("V1 a 0 dc 5 ac 1 90", "5"),
            ("V1 a 0 dc=5 ac=1", "5"),
            ("V1 a 0 ac 1", ""),
            ("V1 a 0 {vdd*2}", "vdd*2"),
            ("V1 a 0 max(1,2)", "max(1,2)"),
            ("V1 a 0 PULSE(0 {vdd} 1n 1n 1n 5u 10u)", "0 vdd"),
            ("V1 a 0 3 PULSE 0 5 1n ac 1", "3 0 5"),
            ("V1 a 0 PWL(0 0 1n 1 2n -5) r=0", "0 1 -5"),
            ("I1 a 0 SIN(1 2 1k)", "1+-2"),
            ("I1 a 0 exp(1 4 2n)", "1 4"),
            ("V1 a 0 sffm(1 2 3 4 5)", "1+-2"),
            ("V1 a 0 trnoise(1 2)", "?"),
            ("V1 a 0 pwl file=\"x.txt\"", "?"),
            ("V1 a 0 strange 1", "?"),
        ];
        for (text, wanted) in table {
            assert_eq!(shown(text), wanted, "{text}");
        }
    }

    #[test]
    fn values_of_passives() {
        let value = |text: &str| {
            let (fields, element) = read(text);
            value_word(text, &fields, &element).map(|word| word.of(text).to_owned())
        };
        assert_eq!(value("R1 a b 1k tc=1").as_deref(), Some("1k"));
        assert_eq!(value("R1 a b 'x * 2'").as_deref(), Some("x * 2"));
        assert_eq!(value("R1 a b r=2").as_deref(), Some("2"));
        assert_eq!(value("R1 a b known 2k").as_deref(), Some("2k"));
        assert_eq!(value("R1 a b known l=2u w=1u"), None);
        assert_eq!(value("L1 a b l=2u").as_deref(), Some("2u"));
        assert_eq!(value("R1 a b max(1,2)").as_deref(), Some("max(1,2)"));
    }
}
