//! Scalars get their meaning: texts, truth values, whole numbers, quantities with the dimension that their place asks for, ranges.

use super::keys::{Section, Wanted};
use super::node::{Entry, Node, Shape, part_of};
use crate::declared::Range;
use crate::diag::Diagnostic;
use crate::names::nearest;
use crate::quantity::{Dim, parse_quantity};
use crate::source::{SourceMap, Span};

/// Collects complaints while a tree is checked.
pub(crate) struct Checker<'a> {
    /// The texts, to find places inside scalars.
    pub(crate) sources: &'a SourceMap,
    /// What is wrong so far.
    pub(crate) complaints: &'a mut Vec<Diagnostic>,
}

/// The entries of a map whose keys are known to be allowed.
#[derive(Clone, Copy)]
pub(crate) struct Fields<'t> {
    entries: &'t [Entry],
}

impl<'t> Fields<'t> {
    /// The value of a key, if one was written.
    pub(crate) fn get(&self, key: &str) -> Option<&'t Node> {
        self.entry(key).map(|entry| &entry.value)
    }

    /// A key with its value, if one was written.
    pub(crate) fn entry(&self, key: &str) -> Option<&'t Entry> {
        self.entries.iter().find(|entry| entry.key == key && entry.value.shape != Shape::Empty)
    }
}

/// Why a text is not the quantity that its place asks for.
pub(crate) fn misfit(text: &str, wanted: Wanted) -> String {
    let Wanted { words, example, .. } = wanted;
    let starts_number = text.trim_start_matches(['+', '-', '.']).starts_with(|letter: char| letter.is_ascii_digit());
    match parse_quantity(text) {
        Ok(other) if other.dim == Dim::NONE => {
            format!("{words} is needed here, {text} has no unit (such as {example})")
        }
        Ok(other) if other.dim != wanted.dim => format!("{words} is needed here, {text} is {}", other.dim.in_words()),
        Err(why) if starts_number => format!("{words} is needed here: {why}"),
        _ => format!("{words} is needed here, such as {example}; `{text}` is none"),
    }
}

/// The number that a text is in the wanted dimension, in base units.
pub(crate) fn number_in(text: &str, wanted: Wanted) -> Option<f64> {
    parse_quantity(text).ok().filter(|quantity| quantity.dim == wanted.dim).map(|quantity| quantity.value)
}

impl Checker<'_> {
    /// Adds an error.
    pub(crate) fn error(&mut self, place: Span, message: impl Into<String>) {
        self.complaints.push(Diagnostic::error("deck", place, message));
    }

    /// Adds an error with a way out.
    pub(crate) fn error_with_help(&mut self, place: Span, message: impl Into<String>, help: impl Into<String>) {
        self.complaints.push(Diagnostic::error("deck", place, message).with_help(help));
    }

    /// Adds an error about an unknown name, and offers the nearest of those that are known.
    pub(crate) fn unknown<'n>(
        &mut self,
        place: Span,
        message: String,
        word: &str,
        known: impl IntoIterator<Item = &'n str>,
    ) {
        let known: Vec<&str> = known.into_iter().collect();
        let error = Diagnostic::error("deck", place, message);
        let help = match nearest(word, known.iter().copied()) {
            Some(near) => Some(format!("did you mean `{near}`?")),
            None if known.is_empty() || known.len() > 24 => None,
            None => Some(format!("there are: {}", known.join(", "))),
        };
        self.complaints.push(match help {
            Some(help) => error.with_help(help),
            None => error,
        });
    }

    /// The place of a part of a scalar.
    pub(crate) fn part(&self, node: &Node, part: std::ops::Range<usize>) -> Span {
        match &node.shape {
            Shape::Text(text) => part_of(self.sources, node.span, text, part),
            _ => node.span,
        }
    }

    /// The entries of a map; a list or scalar is complained of.
    pub(crate) fn map<'t>(&mut self, node: &'t Node, what: &str) -> &'t [Entry] {
        match &node.shape {
            Shape::Map(entries) => entries,
            Shape::Empty => &[],
            _ => {
                self.error(node.span, format!("{what} is a map: lines of `key: value`, or `{{key: value}}`"));
                &[]
            }
        }
    }

    /// The entries of a map with fixed keys; unknown keys are complained of.
    pub(crate) fn fields<'t>(&mut self, node: &'t Node, section: &Section) -> Fields<'t> {
        let entries = self.map(node, section.name);
        for entry in entries {
            if !section.keys.iter().any(|key| key.name == entry.key) {
                let message = format!("{} has no key `{}`", section.name, entry.key);
                self.unknown(entry.place, message, &entry.key, section.keys.iter().map(|key| key.name));
            }
        }
        Fields { entries }
    }

    /// Complains about keys that a section cannot do without.
    pub(crate) fn needs(&mut self, node: &Node, fields: &Fields, section: &Section, what: &str) {
        let missing: Vec<&str> = section.needs.iter().copied().filter(|key| fields.get(key).is_none()).collect();
        if !missing.is_empty() {
            self.error(node.span, format!("this {what} lacks {}", missing.join(" and ")));
        }
    }

    /// A scalar's text.
    pub(crate) fn text<'t>(&mut self, node: &'t Node) -> Option<&'t str> {
        match &node.shape {
            Shape::Text(text) => Some(text),
            Shape::Empty => {
                self.error(node.span, "a value is needed here");
                None
            }
            _ => {
                self.error(node.span, "one value is needed here, not a list or a map");
                None
            }
        }
    }

    /// The texts of a list, or of a single scalar.
    pub(crate) fn texts<'t>(&mut self, node: &'t Node) -> Vec<(&'t str, Span)> {
        match &node.shape {
            Shape::List(nodes) => nodes.iter().filter_map(|node| Some((self.text(node)?, node.span))).collect(),
            Shape::Empty => Vec::new(),
            Shape::Text(text) => vec![(text, node.span)],
            Shape::Map(_) => {
                self.error(node.span, "a list is needed here: `[one, two]`");
                Vec::new()
            }
        }
    }

    /// `true` or `false`.
    pub(crate) fn truth(&mut self, node: &Node) -> Option<bool> {
        match self.text(node)? {
            "true" => Some(true),
            "false" => Some(false),
            other => {
                self.error(node.span, format!("`true` or `false` is needed here, not `{other}`"));
                None
            }
        }
    }

    /// A whole number from 1.
    pub(crate) fn count(&mut self, node: &Node) -> Option<u32> {
        let text = self.text(node)?;
        let count = text.parse().ok().filter(|&count: &u32| count > 0);
        if count.is_none() {
            self.error(node.span, format!("a whole number from 1 is needed here, not `{text}`"));
        }
        count
    }

    /// One of a few words.
    pub(crate) fn word<T: Copy>(&mut self, node: &Node, what: &str, words: &[(T, &str)]) -> Option<T> {
        let text = self.text(node)?;
        let found = words.iter().find(|(_, word)| *word == text).map(|(value, _)| *value);
        if found.is_none() {
            self.unknown(node.span, format!("there is no {what} `{text}`"), text, words.iter().map(|(_, word)| *word));
        }
        found
    }

    /// A quantity above zero.
    pub(crate) fn quantity(&mut self, node: &Node, wanted: Wanted) -> Option<f64> {
        let text = self.text(node)?;
        let Some(value) = number_in(text, wanted) else {
            self.error(node.span, misfit(text, wanted));
            return None;
        };
        if value <= 0.0 {
            self.error(node.span, format!("{} above zero is needed here, not {text}", wanted.words));
            return None;
        }
        Some(value)
    }

    /// A range `a..b` of which either end may be left out, or a single value.
    pub(crate) fn range(&mut self, node: &Node, wanted: Wanted) -> Option<Range> {
        let text = self.text(node)?;
        let Some(dots) = text.find("..") else {
            let value = self.end(node, 0..text.len(), wanted)?;
            return Some(Range { lo: value, hi: value });
        };
        let (low, high) = (&text[..dots], &text[dots + 2..]);
        if low.trim().is_empty() && high.trim().is_empty() {
            self.error(node.span, "a range needs one end at least");
            return None;
        }
        let lo = match low.trim() {
            "" => Some(f64::NEG_INFINITY),
            _ => self.end(node, 0..dots, wanted),
        };
        let hi = match high.trim() {
            "" => Some(f64::INFINITY),
            _ => self.end(node, dots + 2..text.len(), wanted),
        };
        let (lo, hi) = (lo?, hi?);
        if lo > hi {
            self.upside_down(node.span, low.trim(), high.trim());
            return None;
        }
        Some(Range { lo, hi })
    }

    /// The error for a range whose lower end is the higher one.
    pub(crate) fn upside_down(&mut self, place: Span, low: &str, high: &str) {
        self.error_with_help(
            place,
            format!("this range is upside down: {low} is above {high}"),
            format!("write {high}..{low}"),
        );
    }

    fn end(&mut self, node: &Node, part: std::ops::Range<usize>, wanted: Wanted) -> Option<f64> {
        let Shape::Text(text) = &node.shape else { return None };
        let piece = &text[part.clone()];
        let trimmed = piece.trim();
        let value = number_in(trimmed, wanted);
        if value.is_none() {
            let start = part.start + (piece.len() - piece.trim_start().len());
            self.error(self.part(node, start..start + trimmed.len()), misfit(trimmed, wanted));
        }
        value
    }
}
