//! How a class's sizes follow from the parameters of its cards.

use super::keys::{LENGTH, SIZE};
use super::node::{Entry, Node};
use super::value::{Checker, number_in};
use crate::declared::Size;
use crate::quantity::spice_number;

/// The `size` of a class.
pub(crate) fn size(checker: &mut Checker, node: &Node) -> Size {
    let fields = checker.fields(node, &SIZE);
    let mut expression = |key| fields.get(key).and_then(|node| checker.size_expression(node));
    let (width, length) = (expression("width"), expression("length"));
    let (fingers, copies) = (expression("fingers"), expression("copies"));
    Size {
        unit: fields.get("unit").and_then(|node| unit(checker, node)),
        width,
        length,
        fingers,
        copies,
        defaults: fields.get("defaults").map(|node| defaults(checker, node)).unwrap_or_default(),
    }
}

/// `um`, or `1um`.
fn unit(checker: &mut Checker, node: &Node) -> Option<f64> {
    let text = checker.text(node)?;
    let unit = number_in(&format!("1{text}"), LENGTH).or_else(|| number_in(text, LENGTH)).filter(|&unit| unit > 0.0);
    if unit.is_none() {
        checker.error(node.span, format!("a unit of length is needed here: um, nm or m, not `{text}`"));
    }
    unit
}

fn defaults(checker: &mut Checker, node: &Node) -> Vec<(String, f64)> {
    let entries = checker.map(node, "`defaults`");
    entries.iter().filter_map(|entry| default(checker, entry)).collect()
}

fn default(checker: &mut Checker, entry: &Entry) -> Option<(String, f64)> {
    let text = checker.text(&entry.value)?;
    let number =
        spice_number(text, false).filter(|number| text[number.rest..].bytes().all(|byte| byte.is_ascii_alphabetic()));
    let Some(value) = number.map(|number| number.value).filter(|value| value.is_finite()) else {
        checker.error(
            entry.value.span,
            format!("a number as in the netlist is needed here, such as 1 or 0.5u, not `{text}`"),
        );
        return None;
    };
    Some((entry.key.to_ascii_lowercase(), value))
}
