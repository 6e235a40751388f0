//! Modes, transitions and currents: how the circuit is operated.

use super::keys::{CURRENT, CURRENTS, RATE, TIME, TRANSITION};
use super::node::{Entry, Node, Shape};
use super::rail::{net_pattern, rails};
use super::value::Checker;
use crate::declared::{DeclaredCurrent, Mode, Transition};

/// The modes of a map, in its order.
pub(crate) fn modes(checker: &mut Checker, node: &Node) -> Vec<Mode> {
    let entries = checker.map(node, "a list of modes");
    let mode =
        |entry: &Entry| Mode { name: entry.key.clone(), rails: rails(checker, &entry.value), place: entry.place };
    entries.iter().map(mode).collect()
}

/// The transitions of a list.
pub(crate) fn transitions(checker: &mut Checker, node: &Node, modes: &[Mode]) -> Vec<Transition> {
    let Shape::List(nodes) = &node.shape else {
        checker.error(node.span, "transitions are a list: `- {from: hold, to: fill, takes: 5ns, rate: 2MHz}`");
        return Vec::new();
    };
    nodes.iter().filter_map(|node| transition(checker, node, modes)).collect()
}

fn transition(checker: &mut Checker, node: &Node, modes: &[Mode]) -> Option<Transition> {
    let fields = checker.fields(node, &TRANSITION);
    if !matches!(node.shape, Shape::Map(_)) {
        return None;
    }
    checker.needs(node, &fields, &TRANSITION, "transition");
    let from = fields.get("from").and_then(|node| mode_named(checker, node, modes));
    let to = fields.get("to").and_then(|node| mode_named(checker, node, modes));
    let takes = fields.get("takes").and_then(|node| checker.quantity(node, TIME));
    let rate = fields.get("rate").and_then(|node| checker.quantity(node, RATE));
    let (from, to, takes, rate) = (from?, to?, takes?, rate?);
    if from == to {
        checker.error(
            node.span,
            format!("a transition leads from one mode to another, this one stays in {}", modes[from].name),
        );
        return None;
    }
    Some(Transition { from, to, takes, rate, place: node.span })
}

fn mode_named(checker: &mut Checker, node: &Node, modes: &[Mode]) -> Option<usize> {
    let name = checker.text(node)?;
    let found = modes.iter().position(|mode| mode.name == name);
    if found.is_none() {
        let known = modes.iter().map(|mode| mode.name.as_str());
        checker.unknown(node.span, format!("there is no mode `{name}`"), name, known);
    }
    found
}

/// The currents into nets, and through devices.
pub(crate) fn currents(checker: &mut Checker, node: &Node) -> (Vec<DeclaredCurrent>, Vec<DeclaredCurrent>) {
    let fields = checker.fields(node, &CURRENTS);
    let mut list = |key: &str| {
        let Some(node) = fields.get(key) else { return Vec::new() };
        let entries = checker.map(node, "a list of currents");
        entries.iter().filter_map(|entry| current(checker, entry)).collect()
    };
    (list("into"), list("through"))
}

fn current(checker: &mut Checker, entry: &Entry) -> Option<DeclaredCurrent> {
    let at = net_pattern(checker, entry)?;
    let amps = checker.range(&entry.value, CURRENT)?;
    Some(DeclaredCurrent { at, amps, place: entry.place })
}
