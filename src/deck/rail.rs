//! Rails: which nets a declaration means, and what the ends of its range are held against.

use super::keys::VOLTAGE;
use super::node::{Entry, Node, Shape};
use super::value::{Checker, misfit, number_in};
use crate::declared::{End, Rail};
use crate::names::Glob;
use crate::quantity::{Dim, parse_quantity};
use std::ops::Range;

/// How a net's name is written where it could be taken for something else.
const NET: &str = "net(";

/// The rails of a map, in its order.
pub(crate) fn rails(checker: &mut Checker, node: &Node) -> Vec<Rail> {
    let entries = checker.map(node, "a list of rails");
    entries.iter().filter_map(|entry| rail(checker, entry)).collect()
}

fn rail(checker: &mut Checker, entry: &Entry) -> Option<Rail> {
    if entry.value.shape == Shape::Empty {
        checker.error(entry.place, format!("rail `{}` has no voltage: write `{}: 0V..5V`", entry.key, entry.key));
        return None;
    }
    let text = checker.text(&entry.value)?;
    let net = net_pattern(checker, entry)?;
    let ends = match dots(text) {
        Some(Dots::At(dots)) => {
            let low = end(checker, &entry.value, 0..dots, "a lower end")?;
            let high = end(checker, &entry.value, dots + 2..text.len(), "an upper end")?;
            (low, high)
        }
        Some(Dots::Glued(dots)) => {
            let place = checker.part(&entry.value, dots..dots + 2);
            checker.error_with_help(
                place,
                "`..` needs spaces around it where an end is a net",
                "write `SW .. SW + 5V`",
            );
            return None;
        }
        None => {
            let end = end(checker, &entry.value, 0..text.len(), "a voltage")?;
            (end.clone(), end)
        }
    };
    upright(checker, &entry.value, &ends)?;
    Some(Rail { net, low: ends.0, high: ends.1, place: entry.place, value_place: entry.value.span })
}

/// The pattern of nets that a key means; `net("…")` is exactly that name.
pub(crate) fn net_pattern(checker: &mut Checker, entry: &Entry) -> Option<Glob> {
    match quoted_net(entry.key.trim()) {
        Some(Ok(name)) => Some(Glob::exact(name)),
        Some(Err(())) => {
            checker.error(entry.place, "a net called so is written net(\"…\"), with nothing after the bracket");
            None
        }
        None => Some(Glob::new(entry.key.as_str())),
    }
}

/// The name inside `net("…")`; `Err` where the text begins so but does not end so; none for other texts.
pub(crate) fn quoted_net(text: &str) -> Option<Result<&str, ()>> {
    let inside = text.strip_prefix(NET)?.trim_start();
    let inside = inside.strip_suffix(')').map(str::trim_end).ok_or(());
    let name = inside.and_then(|inside| {
        let unquoted = |quote| inside.strip_prefix(quote).and_then(|rest: &str| rest.strip_suffix(quote));
        unquoted('"').or_else(|| unquoted('\'')).ok_or(())
    });
    Some(name.and_then(|name| if name.is_empty() || name.contains(['"', '\'']) { Err(()) } else { Ok(name) }))
}

enum Dots {
    /// `..` between two ends.
    At(usize),
    /// `..` inside something that is no range of voltages, without spaces.
    Glued(usize),
}

/// Where the `..` of a range stands: with spaces (or an end of the text) on both sides, or between two quantities.
fn dots(text: &str) -> Option<Dots> {
    let outside = outside_quotes(text);
    let all = || outside.match_indices("..").map(|(at, _)| at);
    let spaced = |at: usize| {
        let (before, after) = (outside[..at].chars().next_back(), outside[at + 2..].chars().next());
        before.is_none_or(char::is_whitespace) && after.is_none_or(char::is_whitespace)
    };
    let ends = |at: usize| [&text[..at], &text[at + 2..]].map(str::trim);
    let plain = |at: &usize| ends(*at).iter().all(|end| end.is_empty() || parse_quantity(end).is_ok());
    all().find(|&at| spaced(at)).or_else(|| all().find(plain)).map(Dots::At).or_else(|| all().next().map(Dots::Glued))
}

/// The text with what stands in quotes blotted out, byte for byte.
fn outside_quotes(text: &str) -> String {
    let mut quote = None;
    let blot = |letter: char| "_".repeat(letter.len_utf8());
    text.chars()
        .map(|letter| match quote {
            Some(open) => {
                if open == letter {
                    quote = None;
                }
                blot(letter)
            }
            None if letter == '"' => {
                quote = Some(letter);
                blot(letter)
            }
            None => letter.to_string(),
        })
        .collect()
}

/// Reads one end of a rail's range, the bytes `part` of the node's text.
fn end(checker: &mut Checker, node: &Node, part: Range<usize>, what: &str) -> Option<End> {
    let Shape::Text(text) = &node.shape else { return None };
    let piece = &text[part.clone()];
    let start = part.start + piece.len() - piece.trim_start().len();
    let end = piece.trim();
    let place = checker.part(node, start..start + end.len());
    if end.is_empty() {
        checker.error(node.span, format!("{what} is missing: a rail has both ends, or one voltage"));
        return None;
    }
    if let Some(volts) = number_in(end, VOLTAGE) {
        return Some(End::Volts(volts));
    }
    if let Ok(number) = parse_quantity(end) {
        if number.dim == Dim::NONE && number.value == 0.0 {
            return Some(End::Volts(0.0));
        }
        if number.dim == Dim::NONE {
            checker.error(place, format!("is this {end} V or a net called {end}? write {end}V, or net(\"{end}\")"));
        } else {
            checker.error_with_help(place, misfit(end, VOLTAGE), format!("a net called so is written net(\"{end}\")"));
        }
        return None;
    }
    let (net, offset) = match signed(end) {
        Some((net, sign, amount, at)) => match number_in(amount, VOLTAGE) {
            Some(volts) => (net, sign * volts),
            None => {
                let at = start + at;
                let place = checker.part(node, at..at + amount.len());
                checker.error(place, misfit(amount, VOLTAGE));
                return None;
            }
        },
        None => (end, 0.0),
    };
    match net_name(net) {
        Ok(net) => Some(End::Net { net: net.to_string(), offset }),
        Err(Some(help)) => {
            checker.error_with_help(place, format!("`{end}` is no voltage and no net"), help);
            None
        }
        Err(None) => {
            checker.error(place, misfit(end, VOLTAGE));
            None
        }
    }
}

/// Splits `NET + 1V` at its sign: the net, the sign, the amount and where that begins.
fn signed(end: &str) -> Option<(&str, f64, &str, usize)> {
    let outside = outside_quotes(end);
    let (at, sign) = [(" + ", 1.0), (" - ", -1.0)]
        .into_iter()
        .filter_map(|(mark, sign)| outside.rfind(mark).map(|at| (at, sign)))
        .max_by_key(|&(at, _)| at)?;
    let amount = end[at + 3..].trim_start();
    Some((end[..at].trim_end(), sign, amount, end.len() - amount.len()))
}

/// The net that an end names; `Err` with what to write instead.
fn net_name(text: &str) -> Result<&str, Option<String>> {
    match quoted_net(text) {
        Some(Ok(name)) => return Ok(name),
        Some(Err(())) => return Err(Some("write net(\"…\") around the name of the net".to_string())),
        None => {}
    }
    if text.contains(['"', '\'', '(', ')', ',', '=']) {
        return Err(None);
    }
    if text.contains(char::is_whitespace) {
        return Err(Some(format!(
            "an end is a voltage, a net, or a net give or take a voltage: `VIN + 1V`; a net with a blank in its name is written net(\"{text}\")"
        )));
    }
    if text.contains(['*', '?']) {
        return Err(Some(format!(
            "an end names one net, so globs have no place here; a net called so is written net(\"{text}\")"
        )));
    }
    if text.ends_with(['+', '-']) {
        return Err(Some(format!("a net whose name ends in + or - is written net(\"{text}\")")));
    }
    if let Some(at) = text.rfind(['+', '-'])
        && number_in(&text[at + 1..], VOLTAGE).is_some()
    {
        let (net, sign, amount) = (&text[..at], &text[at..=at], &text[at + 1..]);
        return Err(Some(format!("write spaces, `{net} {sign} {amount}`; or net(\"{text}\") if a net is called so")));
    }
    if looks_like_number(text) {
        return Err(None);
    }
    Ok(text)
}

/// Whether a text is so close to a quantity that it is a slip rather than a net's name: `5v`, `-3Volt`, `5u`.
fn looks_like_number(text: &str) -> bool {
    let unsigned = text.trim_start_matches(['+', '-']);
    let unit = unsigned.trim_start_matches(|letter: char| letter.is_ascii_digit() || letter == '.');
    unit.len() < unsigned.len() && unit.chars().count() <= 5 && unit.chars().all(char::is_alphabetic)
}

fn upright(checker: &mut Checker, node: &Node, ends: &(End, End)) -> Option<()> {
    let upside_down = match ends {
        (End::Volts(low), End::Volts(high)) => low > high,
        (End::Net { net: a, offset: low }, End::Net { net: b, offset: high }) => {
            a.eq_ignore_ascii_case(b) && low > high
        }
        _ => false,
    };
    if !upside_down {
        return Some(());
    }
    let Shape::Text(text) = &node.shape else { return None };
    if let Some(Dots::At(at)) = dots(text) {
        checker.upside_down(node.span, text[..at].trim(), text[at + 2..].trim());
    }
    None
}
