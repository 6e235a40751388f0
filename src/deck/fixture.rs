//! Decks in memory, and a few words for rules, for tests.

use super::*;
use crate::declared::Subject;
use crate::expr::{ArgType, Type, Vocabulary};
use crate::quantity::Dim;
use std::io;
use std::path::Path;

/// Files in memory: path and text.
pub(super) struct InMemory<'a>(pub(super) &'a [(&'a str, &'a [u8])]);

impl DeckFiles for InMemory<'_> {
    fn read(&self, path: &Path) -> io::Result<Vec<u8>> {
        let found = self.0.iter().find(|(name, _)| Path::new(name) == path);
        found.map(|(_, bytes)| bytes.to_vec()).ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))
    }
}

/// A few attributes of each subject, enough for the rule pages.
struct Words(Subject);

const KINDS: &[&str] = &["nmos", "pmos", "npn", "diode"];

impl Vocabulary for Words {
    fn name(&self, name: &str) -> Option<Type> {
        let length = Type::Number(Dim::METRE);
        let volts = Type::Number(Dim::VOLT);
        let count = Type::Number(Dim::NONE);
        Some(match (self.0, name) {
            (_, "name") | (Subject::Device, "class.name" | "model" | "body_ties" | "off_ties") => Type::Text,
            (Subject::Device, "d.net" | "g.net" | "s.net" | "b.net") => Type::Text,
            (Subject::Device, "width" | "length" | "finger_width") => length,
            (Subject::Device, "class.length.min" | "class.length.max") => length,
            (Subject::Device, "class.fingers.width.min" | "class.fingers.width.max") => length,
            (Subject::Device, "fingers" | "copies" | "class.fingers.min" | "class.fingers.multiple_of") => count,
            (Subject::Device, "class.high_voltage" | "body_held" | "ties_held" | "idle" | "dummy") => Type::Bool,
            (Subject::Device, "class.kind") => Type::Word(KINDS),
            (Subject::Class, "rating.vds" | "drift.limit" | "junction.limit") => volts,
            (Subject::Run, "model" | "found" | "wanted" | "class" | "pins" | "file" | "reason" | "near") => Type::Text,
            (Subject::Run, "rule" | "at" | "until" | "devices") => Type::Text,
            _ => return None,
        })
    }

    fn call(&self, name: &str, args: &[ArgType<'_>]) -> Option<Result<Type, String>> {
        let known = args.len() == 1 && args[0].kind.is_some();
        (name == "has").then(|| if known { Ok(Type::Bool) } else { Err("`has` takes one attribute".to_string()) })
    }

    fn names(&self) -> Vec<String> {
        vec!["fingers".to_string(), "width".to_string()]
    }
}

/// A vocabulary for each subject.
pub(super) fn words(subject: Subject) -> &'static dyn Vocabulary {
    match subject {
        Subject::Device => &Words(Subject::Device),
        Subject::Class => &Words(Subject::Class),
        Subject::Run => &Words(Subject::Run),
        _ => &Words(Subject::Net),
    }
}

/// Loads `own` decks out of `files`.
pub(super) fn load(files: &[(&str, &str)], own: &[&str], sources: &mut SourceMap) -> (Deck, Vec<Diagnostic>) {
    let files: Vec<(&str, &[u8])> = files.iter().map(|(path, text)| (*path, text.as_bytes())).collect();
    let own: Vec<PathBuf> = own.iter().map(PathBuf::from).collect();
    load_decks(&InMemory(&files), &own, sources, &words)
}
