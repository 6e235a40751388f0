//! Waivers in comments of a netlist: `drainwise: accept finger-count until 2027-03-01 because trimmed at test`.

use super::{Date, read_date};
use crate::names::nearest;
use std::ops::Range;

/// What stands in front of one.
pub const MARK: &str = "drainwise:";

const EXAMPLE: &str = "write it as `drainwise: accept finger-count because trimmed at test`; `of vgs` behind the rule narrows it to a \
                       pair, `until 2027-03-01` before the reason gives it a last day";

/// What a comment accepts.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Said {
    /// The rule, which may not exist.
    pub rule: String,
    /// Where it is named, in bytes of the words.
    pub rule_place: Range<usize>,
    /// Only this terminal pair or pin.
    pub pair: Option<String>,
    /// Last day it holds.
    pub until: Option<Date>,
    /// Why.
    pub reason: String,
}

/// What is wrong with such a comment.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// Where, in bytes of the words.
    pub place: Range<usize>,
    /// One sentence.
    pub message: String,
    /// What to do.
    pub help: String,
}

/// Reads what stands behind [`MARK`], up to the line's end.
pub fn read(words: &str) -> Result<Said, Fault> {
    let mut rest = Words { text: words, at: 0 };
    let (verb, place) = rest.next();
    if !verb.eq_ignore_ascii_case("accept") {
        let said = if verb.is_empty() { "nothing stands there".to_owned() } else { format!("`{verb}` is not known") };
        let near = nearest(verb, ["accept"]).map_or(EXAMPLE.to_owned(), |near| format!("did you mean `{near}`?"));
        return Err(fault(place, format!("a comment for this program begins with `accept`; {said}"), near));
    }
    let (rule, rule_place) = rest.next();
    if rule.is_empty() || rule.eq_ignore_ascii_case("because") {
        return Err(fault(rule_place, "this waiver names no rule".to_owned(), EXAMPLE.to_owned()));
    }
    let (mut pair, mut until) = (None, None);
    loop {
        let (word, place) = rest.next();
        match word.to_ascii_lowercase().as_str() {
            "because" => break,
            "of" => pair = Some(rest.value("of", "a pair such as `vgs`")?.0.to_ascii_lowercase()),
            "until" => {
                let (day, place) = rest.value("until", "a day such as 2027-03-01")?;
                let wrong = || format!("`{day}` is no day of the calendar");
                until = Some(read_date(day).ok_or_else(|| fault(place, wrong(), "write it as 2027-03-01".to_owned()))?);
            }
            "" => return Err(fault(0..words.len(), "this waiver gives no reason".to_owned(), EXAMPLE.to_owned())),
            _ => {
                let help = nearest(word, ["because", "until", "of"])
                    .map_or(EXAMPLE.to_owned(), |near| format!("did you mean `{near}`?"));
                return Err(fault(place, format!("`{word}` is not understood here"), help));
            }
        }
    }
    let reason = rest.text[rest.at..].trim().to_owned();
    if reason.is_empty() {
        let message = "this waiver gives no reason".to_owned();
        return Err(fault(0..words.len(), message, "say behind `because` why the finding is accepted".to_owned()));
    }
    Ok(Said { rule: rule.to_owned(), rule_place, pair, until, reason })
}

fn fault(place: Range<usize>, message: String, help: String) -> Fault {
    Fault { place, message, help }
}

struct Words<'w> {
    text: &'w str,
    at: usize,
}

impl<'w> Words<'w> {
    /// The next word and its place; empty at the end.
    fn next(&mut self) -> (&'w str, Range<usize>) {
        let rest = &self.text[self.at..];
        let start = self.at + rest.len() - rest.trim_start().len();
        let length = self.text[start..].find(char::is_whitespace).unwrap_or(self.text.len() - start);
        self.at = start + length;
        (&self.text[start..self.at], start..self.at)
    }

    fn value(&mut self, key: &str, what: &str) -> Result<(&'w str, Range<usize>), Fault> {
        let (word, place) = self.next();
        if word.is_empty() || word.eq_ignore_ascii_case("because") {
            return Err(fault(place, format!("behind `{key}` stands {what}"), EXAMPLE.to_owned()));
        }
        Ok((word, place))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_waiver_has_a_rule_and_a_reason() {
        let said = read(" accept over-rating of VGS until 2027-03-01 because measured, see report  ").unwrap();
        assert_eq!((said.rule.as_str(), said.pair.as_deref()), ("over-rating", Some("vgs")));
        assert_eq!(said.until, Some(Date { year: 2027, month: 3, day: 1 }));
        assert_eq!((said.reason.as_str(), said.rule_place), ("measured, see report", 8..19));
        assert_eq!(read("ACCEPT x BECAUSE y until z").unwrap().reason, "y until z");
    }

    #[test]
    fn what_is_wrong_is_said_at_its_place() {
        for (words, place, message) in [
            ("", 0..0, "begins with `accept`"),
            (" acept x because y", 1..6, "`acept` is not known"),
            (" accept", 7..7, "names no rule"),
            (" accept because y", 8..15, "names no rule"),
            (" accept x", 0..9, "gives no reason"),
            (" accept x because ", 0..18, "gives no reason"),
            (" accept x until because y", 16..23, "behind `until`"),
            (" accept x until 2027-02-30 because y", 16..26, "no day of the calendar"),
            (" accept x y because z", 10..11, "not understood"),
        ] {
            let fault = read(words).unwrap_err();
            assert!(fault.message.contains(message), "{words}: {}", fault.message);
            assert_eq!(fault.place, place, "{words}");
        }
    }
}
