//! Waivers as decks write them.

use super::keys::WAIVER;
use super::node::{Node, Shape};
use super::value::{Checker, Fields};
use crate::names::Glob;
use crate::waiver::{Date, Waiver, read_date};

/// The waivers of a list; `rules` are the ids that there are.
pub(crate) fn waivers(checker: &mut Checker, node: &Node, rules: &[&str]) -> Vec<Waiver> {
    let Shape::List(nodes) = &node.shape else {
        checker.error(node.span, "waivers are a list: `- {rule: finger-count, at: xbias.m4, reason: \"…\"}`");
        return Vec::new();
    };
    nodes.iter().filter_map(|node| waiver(checker, node, rules)).collect()
}

fn waiver(checker: &mut Checker, node: &Node, rules: &[&str]) -> Option<Waiver> {
    let fields = checker.fields(node, &WAIVER);
    if !matches!(node.shape, Shape::Map(_)) {
        return None;
    }
    checker.needs(node, &fields, &WAIVER, "waiver");
    let rule = fields.get("rule").and_then(|node| rule_named(checker, node, rules));
    let at = text(checker, &fields, "at");
    let reason = text(checker, &fields, "reason");
    let pair = text(checker, &fields, "pair").map(|pair| pair.to_ascii_lowercase());
    let by = text(checker, &fields, "by");
    let until = match fields.get("until") {
        Some(node) => Some(date(checker, node)?),
        None => None,
    };
    Some(Waiver { rule: rule?, at: Glob::new(at?), pair, reason: reason?, by, until, place: node.span, card: None })
}

/// A text that says something.
fn text(checker: &mut Checker, fields: &Fields, key: &str) -> Option<String> {
    let node = fields.get(key)?;
    let text = checker.text(node)?.trim();
    if text.is_empty() {
        checker.error(node.span, format!("`{key}` is empty"));
        return None;
    }
    Some(text.to_string())
}

fn rule_named(checker: &mut Checker, node: &Node, rules: &[&str]) -> Option<String> {
    let name = checker.text(node)?;
    if rules.contains(&name) {
        return Some(name.to_string());
    }
    checker.unknown(node.span, format!("there is no rule `{name}`"), name, rules.iter().copied());
    None
}

fn date(checker: &mut Checker, node: &Node) -> Option<Date> {
    let text = checker.text(node)?;
    let date = read_date(text);
    if date.is_none() {
        checker.error(node.span, format!("a day of the calendar is needed here, such as 2027-03-01, not `{text}`"));
    }
    date
}
