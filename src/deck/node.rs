//! A deck's YAML as a small tree in which every scalar is text and every node knows its place.
//!
//! YAML would turn `NO`, `1E3` or `0` into truth values and numbers. In a deck they may be the names of nets, so nothing is
//! anything but text until its place in the deck gives it a meaning. Keys keep their order and their places too: an error
//! points at the key or value that somebody wrote, also after several decks were merged.

use crate::diag::Diagnostic;
use crate::source::{FileId, SourceMap, Span};
use serde::de::{Deserialize, Deserializer, Error, MapAccess, SeqAccess, Visitor};
use serde_saphyr::options::NonFiniteFloatPolicy;
use serde_saphyr::{DuplicateKeyPolicy, Location, Options, Spanned};
use std::fmt;
use std::ops::Range;

/// Maps and lists inside one another that a deck may have.
const DEEPEST: usize = 32;
/// Values that a deck may have, those repeated by aliases included.
const MOST_NODES: usize = 250_000;

/// A value of a deck with its place.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Node {
    /// Where it stands: a scalar with its quotes, a map or list from its beginning to the end of its last value.
    pub(crate) span: Span,
    /// What it is.
    pub(crate) shape: Shape,
}

/// What a node is.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Shape {
    /// Nothing was written.
    Empty,
    /// A scalar, as text.
    Text(String),
    /// A list.
    List(Vec<Node>),
    /// A map in the order of the file.
    Map(Vec<Entry>),
}

/// A key and its value.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Entry {
    /// The key's text.
    pub(crate) key: String,
    /// Where the key stands.
    pub(crate) place: Span,
    /// The value.
    pub(crate) value: Node,
}

/// Reads a deck's text, which must be in `sources`. What is no sound YAML becomes an error with its place, and the tree is then empty;
/// duplicate keys become errors too, and the first one counts.
pub(crate) fn read(sources: &SourceMap, file: FileId, complaints: &mut Vec<Diagnostic>) -> Node {
    let text = sources.text(file);
    match serde_saphyr::from_str_with_options::<Raw>(text, options()) {
        Ok(raw) => Builder { text, file, complaints }.node(raw),
        Err(error) => {
            complaints.push(unsound(sources, file, &error));
            Node { span: Span::new(file, 0, 0), shape: Shape::Empty }
        }
    }
}

/// The place of a part of a scalar: `part` counts bytes of its text, which quotes, escapes and folded lines move about in the file.
pub(crate) fn part_of(sources: &SourceMap, span: Span, text: &str, part: Range<usize>) -> Span {
    let written = sources.slice(span);
    let mut places = Aligned { written, next: 0 };
    let (mut start, mut end) = (None, None);
    for (at, letter) in text.char_indices() {
        if letter.is_whitespace() {
            continue;
        }
        let Some(place) = places.find(letter) else { break };
        if at >= part.start && start.is_none() {
            start = Some(place);
        }
        if at < part.end {
            end = Some(place + letter.len_utf8());
        }
        if at >= part.end {
            break;
        }
    }
    let start = start.unwrap_or(written.len());
    let end = end.unwrap_or(start).max(start);
    Span::new(span.file, span.start + start as u32, span.start + end as u32)
}

/// Finds the letters of a scalar's text, one after another, in the text of the file.
struct Aligned<'a> {
    written: &'a str,
    next: usize,
}

impl Aligned<'_> {
    fn find(&mut self, letter: char) -> Option<usize> {
        let place = self.next + self.written[self.next..].find(letter)?;
        self.next = place + letter.len_utf8();
        Some(place)
    }
}

fn options() -> Options {
    serde_saphyr::options! {
        duplicate_keys: DuplicateKeyPolicy::PassThrough,
        non_finite_float_policy: NonFiniteFloatPolicy::AsString,
        with_snippet: false,
        budget: serde_saphyr::budget! { max_depth: DEEPEST, flow_nesting_limit: DEEPEST, max_nodes: MOST_NODES, max_buffered_comment_events: MOST_NODES },
        alias_limits: serde_saphyr::alias_limits! { max_total_replayed_events: MOST_NODES },
    }
}

/// What the YAML library says, by a piece of its words, and what a designer should read.
const SAID: [(&str, &str); 14] = [
    ("tabs disallowed", "a tab stands in the indentation, where YAML wants blanks"),
    ("unclosed quote", "a quote is opened and never closed"),
    ("mapping values are not allowed", "a second `: ` in one value: it needs quotes, or a line of its own"),
    ("expected ',' or '}'", "a `{` before this place is not closed, or a comma is missing"),
    ("expected ',' or ']'", "a `[` before this place is not closed, or a comma is missing"),
    ("implicit flow mapping", "a value is missing between two commas, or a bracket before this place is not closed"),
    ("unexpected character", "a value cannot begin with this sign: put it in quotes"),
    ("unknown anchor", "no `&` before this place has the name that `*` asks for"),
    ("multiple YAML documents", "a second document begins with `---`, and a deck is one document"),
    ("alias replay", "aliases repeat one another too often to be read"),
    ("recursive reference", "an alias stands inside what it repeats"),
    ("recursion limit", "maps and lists stand too deep in one another"),
    ("budget", "the deck is too large, or maps and lists stand too deep in one another"),
    ("expected '-' indicator", "a list's lines begin with `-`, and this one does not: mind the indentation"),
];

fn unsound(sources: &SourceMap, file: FileId, error: &serde_saphyr::Error) -> Diagnostic {
    let place = error.location().map_or(0, |location| offset(sources.text(file), location));
    let place = Span::new(file, place, place);
    let said = error.to_string();
    if let Some((_, words)) = SAID.iter().find(|(piece, _)| said.contains(piece)) {
        return Diagnostic::error("deck", place, format!("this is not sound YAML: {words}"));
    }
    let words = said.rsplit_once(" at line ").map_or(said.as_str(), |(words, _)| words);
    Diagnostic::error("deck", place, format!("this is not sound YAML: {words}"))
        .with_help("look at the indentation, the quotes and the brackets before this place")
}

fn offset(text: &str, location: Location) -> u32 {
    let line_start: usize =
        text.split_inclusive('\n').take(location.line().saturating_sub(1) as usize).map(str::len).sum();
    let line = &text[line_start..];
    let inside = line.char_indices().nth(location.column().saturating_sub(1) as usize).map_or(line.len(), |(at, _)| at);
    (line_start + inside) as u32
}

/// What the YAML library hands over.
struct Raw {
    at: Location,
    value: Value,
}

enum Value {
    /// A plain scalar that YAML takes for a number, a truth value or nothing: its text is in the file.
    Plain,
    Text(String),
    List(Vec<Raw>),
    Map(Vec<(Raw, Raw)>),
}

impl<'de> Deserialize<'de> for Raw {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Raw, D::Error> {
        let spanned = Spanned::<Value>::deserialize(deserializer)?;
        Ok(Raw { at: spanned.defined, value: spanned.value })
    }
}

impl<'de> Deserialize<'de> for Value {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Value, D::Error> {
        deserializer.deserialize_any(AnyValue)
    }
}

struct AnyValue;

impl<'de> Visitor<'de> for AnyValue {
    type Value = Value;

    fn expecting(&self, words: &mut fmt::Formatter) -> fmt::Result {
        words.write_str("a text, a list or a map")
    }

    fn visit_bool<E: Error>(self, _: bool) -> Result<Value, E> {
        Ok(Value::Plain)
    }

    fn visit_i64<E: Error>(self, _: i64) -> Result<Value, E> {
        Ok(Value::Plain)
    }

    fn visit_u64<E: Error>(self, _: u64) -> Result<Value, E> {
        Ok(Value::Plain)
    }

    fn visit_i128<E: Error>(self, _: i128) -> Result<Value, E> {
        Ok(Value::Plain)
    }

    fn visit_u128<E: Error>(self, _: u128) -> Result<Value, E> {
        Ok(Value::Plain)
    }

    fn visit_f64<E: Error>(self, _: f64) -> Result<Value, E> {
        Ok(Value::Plain)
    }

    fn visit_unit<E: Error>(self) -> Result<Value, E> {
        Ok(Value::Plain)
    }

    fn visit_str<E: Error>(self, text: &str) -> Result<Value, E> {
        Ok(Value::Text(text.to_string()))
    }

    fn visit_seq<A: SeqAccess<'de>>(self, mut list: A) -> Result<Value, A::Error> {
        let mut values = Vec::new();
        while let Some(value) = list.next_element()? {
            values.push(value);
        }
        Ok(Value::List(values))
    }

    fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<Value, A::Error> {
        let mut entries = Vec::new();
        while let Some(entry) = map.next_entry()? {
            entries.push(entry);
        }
        Ok(Value::Map(entries))
    }
}

struct Builder<'a> {
    text: &'a str,
    file: FileId,
    complaints: &'a mut Vec<Diagnostic>,
}

impl Builder<'_> {
    /// Depth is bounded by the budget of the YAML library.
    fn node(&mut self, raw: Raw) -> Node {
        let span = self.span(raw.at);
        match raw.value {
            Value::Plain => {
                let text = self.text.get(span.range()).unwrap_or_default().to_string();
                let shape = if text.is_empty() { Shape::Empty } else { Shape::Text(text) };
                Node { span, shape }
            }
            Value::Text(text) => Node { span, shape: Shape::Text(text) },
            Value::List(values) => {
                let values: Vec<Node> = values.into_iter().map(|value| self.node(value)).collect();
                let span = values.last().map_or(span, |last| span.to(last.span));
                Node { span, shape: Shape::List(values) }
            }
            Value::Map(entries) => {
                let entries = self.entries(entries);
                let span = entries.last().map_or(span, |last| span.to(last.place).to(last.value.span));
                Node { span, shape: Shape::Map(entries) }
            }
        }
    }

    fn entries(&mut self, raw: Vec<(Raw, Raw)>) -> Vec<Entry> {
        let mut entries: Vec<Entry> = Vec::with_capacity(raw.len());
        let mut seen = std::collections::HashMap::new();
        for (key, value) in raw {
            let key = self.node(key);
            let value = self.node(value);
            let Shape::Text(text) = key.shape else {
                self.complaints.push(Diagnostic::error("deck", key.span, "a key must be a name"));
                continue;
            };
            if let Some(&first) = seen.get(&text) {
                self.complaints.push(twice(&text, key.span, first));
                continue;
            }
            seen.insert(text.clone(), key.span);
            entries.push(Entry { key: text, place: key.span, value });
        }
        entries
    }

    /// Scalars over several lines come with the white space after them: it is left out.
    fn span(&self, at: Location) -> Span {
        let span = at.span();
        let start = span.byte_offset().map_or_else(|| offset(self.text, at), |start| start as u32);
        let end = start as usize + span.byte_len().unwrap_or(0) as usize;
        let written = self.text.get(start as usize..end).unwrap_or_default();
        Span::new(self.file, start, start + written.trim_end().len() as u32)
    }
}

/// The error for a key that stands a second time in one map.
pub(crate) fn twice(key: &str, second: Span, first: Span) -> Diagnostic {
    Diagnostic::error("deck", second, format!("`{key}` stands here a second time"))
        .with_place(first, "first written here")
        .with_help("keep one of them: which one counts would be a guess")
}
