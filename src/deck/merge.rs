//! Laying one deck over another: maps merge key by key, lists and values replace, waivers add, an empty map or list clears.
//!
//! Decks are merged as trees, before anything in them is checked, so that an error in the result points at the file and line
//! that it came from.

use super::node::{Entry, Node, Shape, twice};
use crate::diag::Diagnostic;
use std::collections::HashMap;

/// Lays `over` upon `base`. Both are whole decks.
pub(crate) fn lay_over(base: &mut Node, over: Node) {
    let Shape::Map(sections) = over.shape else { return };
    if !matches!(base.shape, Shape::Map(_)) {
        base.shape = Shape::Map(Vec::new());
    }
    let Shape::Map(known) = &mut base.shape else { return };
    for section in sections {
        let keys = Keys::of(&section.key);
        let adds = section.key == "waivers";
        match known.iter_mut().find(|entry| entry.key == section.key) {
            Some(entry) if adds => add(&mut entry.value, section.value),
            Some(entry) => merge(entry, section, keys),
            None => known.push(section),
        }
    }
}

/// How the keys of a section's maps compare.
#[derive(Clone, Copy, PartialEq)]
enum Keys {
    /// As written.
    Exact,
    /// Names of nets, which netlists compare without case.
    Nets,
    /// As written, with maps of nets below.
    NetsBelow,
}

impl Keys {
    fn of(section: &str) -> Keys {
        match section {
            "rails" => Keys::Nets,
            "modes" | "currents" => Keys::NetsBelow,
            _ => Keys::Exact,
        }
    }

    fn below(self) -> Keys {
        match self {
            Keys::NetsBelow => Keys::Nets,
            Keys::Nets | Keys::Exact => Keys::Exact,
        }
    }
}

fn folded(key: &str, keys: Keys) -> String {
    match keys {
        Keys::Exact | Keys::NetsBelow => key.to_string(),
        Keys::Nets => key.to_ascii_lowercase(),
    }
}

fn add(base: &mut Node, over: Node) {
    match (&mut base.shape, over.shape) {
        (_, Shape::Empty) => {}
        (Shape::List(known), Shape::List(more)) if !more.is_empty() => known.extend(more),
        (_, shape) => *base = Node { span: over.span, shape },
    }
}

/// Depth is that of the trees, which their reader bounds.
fn merge(base: &mut Entry, over: Entry, keys: Keys) {
    match (&mut base.value.shape, over.value.shape) {
        (_, Shape::Empty) => {}
        (Shape::Map(known), Shape::Map(more)) if !more.is_empty() => {
            let mut index: HashMap<String, usize> =
                known.iter().enumerate().map(|(at, entry)| (folded(&entry.key, keys), at)).collect();
            for entry in more {
                match index.get(&folded(&entry.key, keys)) {
                    Some(&at) => merge(&mut known[at], entry, keys.below()),
                    None => {
                        index.insert(folded(&entry.key, keys), known.len());
                        known.push(entry);
                    }
                }
            }
        }
        (_, shape) => {
            base.value = Node { span: over.value.span, shape };
            base.key = over.key;
            base.place = over.place;
        }
    }
}

/// Complains about nets that one deck names twice with different case, which a netlist would not tell apart.
pub(crate) fn complain_of_same_nets(deck: &Node, complaints: &mut Vec<Diagnostic>) {
    let Shape::Map(sections) = &deck.shape else { return };
    for section in sections {
        match section.key.as_str() {
            "rails" => same_nets(&section.value, complaints),
            "modes" | "currents" => {
                let Shape::Map(inner) = &section.value.shape else { continue };
                inner.iter().for_each(|entry| same_nets(&entry.value, complaints));
            }
            _ => {}
        }
    }
}

fn same_nets(map: &Node, complaints: &mut Vec<Diagnostic>) {
    let Shape::Map(entries) = &map.shape else { return };
    let mut seen = HashMap::new();
    for entry in entries {
        if let Some(first) = seen.insert(entry.key.to_ascii_lowercase(), entry.place) {
            complaints.push(twice(&entry.key, entry.place, first));
        }
    }
}
