//! Decks: from YAML files to what they declare.
//!
//! Three steps. [`load_decks`] reads the files and those that they use, each into a tree in which every value is still text
//! with its place. The trees are laid over one another. The merged tree is then checked section by section into the types of
//! [`declared`](crate::declared), whose existence is the proof that all was sound. Whatever is wrong becomes a diagnostic at the exact place in the
//! YAML file that it came from; a deck with an error must not be used.

mod accepted;
pub mod at;
mod class;
pub mod keys;
mod load;
mod merge;
mod node;
mod operation;
pub mod pages;
mod rail;
mod ring;
mod rule;
pub mod schema;
mod size;
mod value;
mod words;

#[cfg(test)]
mod fixture;
#[cfg(test)]
mod tests;

pub use load::DeckFiles;
pub use rule::Vocabularies;

use crate::declared::Deck;
use crate::diag::{Diagnostic, Severity};
use crate::names::Glob;
use crate::source::{SourceMap, Span};
use keys::{DECK, INCLUDES};
use load::{Loaded, load, shown, tidy};
use node::Node;
use std::path::PathBuf;
use value::{Checker, Fields};

/// The decks inside the program, by name.
const BUILTINS: [(&str, &str); 4] = [
    ("ldmos", include_str!("../../rules/decks/ldmos.yaml")),
    ("sky130", include_str!("../../rules/decks/sky130.yaml")),
    ("gf180mcu", include_str!("../../rules/decks/gf180mcu.yaml")),
    ("sg13g2", include_str!("../../rules/decks/sg13g2.yaml")),
];

/// The names of the decks inside the program, without `builtin:`.
pub fn builtin_names() -> impl Iterator<Item = &'static str> {
    BUILTINS.iter().map(|(name, _)| *name)
}

/// The text of the deck inside the program that `builtin:NAME` means. That of `ldmos` is a comment: its rules are the pages of the
/// [`pages`].
pub fn builtin(name: &str) -> Option<&'static str> {
    BUILTINS.iter().find(|(known, _)| *known == name).map(|(_, text)| *text)
}

/// Reads the run's `own` decks (paths, or `builtin:` names) and all that they use, merges and checks them. Without any deck,
/// `builtin:ldmos` applies alone. The texts go into `sources`, under the paths as given.
///
/// If any of the diagnostics is an error, the deck is not to be used.
pub fn load_decks(
    files: &dyn DeckFiles,
    own: &[PathBuf],
    sources: &mut SourceMap,
    vocabularies: Vocabularies,
) -> (Deck, Vec<Diagnostic>) {
    let mut complaints = Vec::new();
    let loaded = load(files, own, sources, &mut complaints);
    let mut checker = Checker { sources, complaints: &mut complaints };
    let deck = check(&mut checker, &loaded, vocabularies);
    complaints.sort_by_key(|complaint| (complaint.severity != Severity::Error, complaint.span));
    (deck, complaints)
}

fn check(checker: &mut Checker, loaded: &Loaded, vocabularies: Vocabularies) -> Deck {
    let fields = checker.fields(&loaded.tree, &DECK);
    let classes = fields.get("classes").map(|node| class::classes(checker, node)).unwrap_or_default();
    let rails = fields.get("rails").map(|node| rail::rails(checker, node)).unwrap_or_default();
    let modes = fields.get("modes").map(|node| operation::modes(checker, node)).unwrap_or_default();
    ring::complain_of_rings(&rails, &modes, checker.complaints);
    let transitions =
        fields.get("transitions").map(|node| operation::transitions(checker, node, &modes)).unwrap_or_default();
    let (into, through) = fields.get("currents").map(|node| operation::currents(checker, node)).unwrap_or_default();
    let rules = fields.get("rules").map(|node| rule::rules(checker, node, &classes, vocabularies)).unwrap_or_default();
    let ids = rule_names(&fields);
    let waivers = fields.get("waivers").map(|node| accepted::waivers(checker, node, &ids)).unwrap_or_default();
    let (include_roots, include_skips) =
        fields.get("includes").map(|node| includes(checker, node, loaded)).unwrap_or_default();
    Deck {
        netlists: fields.get("netlists").map(|node| paths(checker, node, loaded)).unwrap_or_default(),
        top: fields.get("top").and_then(|node| Some((checker.text(node)?.to_string(), node.span))),
        include_roots,
        include_skips,
        classes,
        rails,
        modes,
        transitions,
        currents_into: into,
        currents_through: through,
        rules,
        waivers,
        own_files: loaded.own.clone(),
    }
}

/// The ids of all rules, sound or not: a waiver of a rule with an error in it is no second error.
fn rule_names<'t>(fields: &Fields<'t>) -> Vec<&'t str> {
    match fields.get("rules").map(|node| &node.shape) {
        Some(node::Shape::Map(entries)) => entries.iter().map(|entry| entry.key.as_str()).collect(),
        _ => Vec::new(),
    }
}

fn includes(checker: &mut Checker, node: &Node, loaded: &Loaded) -> (Vec<String>, Vec<Glob>) {
    let fields = checker.fields(node, &INCLUDES);
    let roots = fields.get("roots").map(|node| paths(checker, node, loaded)).unwrap_or_default();
    let skips = fields.get("skip").map(|node| checker.texts(node)).unwrap_or_default();
    (roots.into_iter().map(|(path, _)| path).collect(), skips.into_iter().map(|(skip, _)| Glob::new(skip)).collect())
}

/// Paths relative to the folder of the file that they stand in, made usable from here.
fn paths(checker: &mut Checker, node: &Node, loaded: &Loaded) -> Vec<(String, Span)> {
    let from_here = |(path, place): (&str, Span)| {
        let folder = loaded.folders.get(&place.file).cloned().unwrap_or_default();
        let path = shown(&tidy(&folder.join(path)));
        (if path.is_empty() { ".".to_string() } else { path }, place)
    };
    checker.texts(node).into_iter().map(from_here).collect()
}
