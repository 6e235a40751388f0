//! Classes: the devices of a process, checked field by field.

use super::keys::{BODY, CLASS, DENSITY, DOPING, DRIFT, FINGERS, LENGTH, ON_STATE, POWER, SHARE, VOLTAGE};
use super::node::{Entry, Node, Shape};
use super::rail::quoted_net;
use super::size::size;
use super::value::{Checker, Fields};
use crate::declared::{Class, Drift, Fingers, Kind, OnState, Rating, Tie, TieTarget};
use crate::names::Glob;
use crate::source::Span;

/// The classes of a map, in its order. A class that was cleared is left out.
pub(crate) fn classes(checker: &mut Checker, node: &Node) -> Vec<Class> {
    let entries = checker.map(node, "a list of classes");
    entries.iter().filter(|entry| !is_cleared(&entry.value)).filter_map(|entry| class(checker, entry)).collect()
}

/// Whether a map was emptied by a later deck.
pub(crate) fn is_cleared(node: &Node) -> bool {
    matches!(&node.shape, Shape::Map(entries) if entries.is_empty())
}

fn class(checker: &mut Checker, entry: &Entry) -> Option<Class> {
    let fields = checker.fields(&entry.value, &CLASS);
    let Some(kind) = fields.get("kind") else {
        checker.error_with_help(
            entry.place,
            format!("class `{}` has no `kind`", entry.key),
            format!(
                "say what it is: {}; or mind the spelling, if it is meant to change a class of another deck",
                kinds()
            ),
        );
        return None;
    };
    let kind = checker.word(kind, "kind of device", &Kind::ALL)?;
    let (pins, pins_place) = pins(checker, entry, &fields, kind)?;
    let pins = Pins { names: &pins, place: pins_place, class: &entry.key };
    Some(Class {
        name: entry.key.clone(),
        place: entry.place,
        kind,
        models: models(checker, entry, &fields),
        high_voltage: truth(checker, &fields, "high_voltage"),
        asymmetric: truth(checker, &fields, "asymmetric"),
        matched_use: truth(checker, &fields, "matched_use"),
        size: fields.get("size").map(|node| size(checker, node)).unwrap_or_default(),
        fingers: section(&fields, "fingers").and_then(|entry| fingers(checker, &entry.value)),
        length: fields.get("length").and_then(|node| checker.range(node, LENGTH)),
        threshold: fields.get("threshold").and_then(|node| checker.range(node, VOLTAGE)),
        ratings: fields.get("ratings").map(|node| ratings(checker, node, &pins)).unwrap_or_default(),
        on_state: section(&fields, "on_state").and_then(|entry| on_state(checker, entry)),
        body: section(&fields, "body").and_then(|entry| body(checker, entry, &pins)),
        ties: fields.get("ties").map(|node| ties(checker, node, &pins)).unwrap_or_default(),
        drift: section(&fields, "drift").map(|entry| drift(checker, &entry.value)),
        clamp: fields.entry("clamp").and_then(|entry| {
            pins.find(checker, entry.place, "a")?;
            pins.find(checker, entry.place, "k")?;
            checker.range(&entry.value, VOLTAGE)
        }),
        source: fields.get("source").and_then(|node| checker.text(node)).map(str::to_string),
        pins: pins.names.to_vec(),
    })
}

fn kinds() -> String {
    Kind::ALL.map(|(_, word)| word).join(" ")
}

/// A part of a class that was written and not cleared.
fn section<'t>(fields: &Fields<'t>, key: &str) -> Option<&'t Entry> {
    fields.entry(key).filter(|entry| !is_cleared(&entry.value))
}

fn truth(checker: &mut Checker, fields: &Fields, key: &str) -> bool {
    fields.get(key).and_then(|node| checker.truth(node)).unwrap_or(false)
}

fn models(checker: &mut Checker, entry: &Entry, fields: &Fields) -> Vec<Glob> {
    let Some(node) = fields.get("models") else { return vec![Glob::exact(entry.key.as_str())] };
    let models = checker.texts(node);
    if models.is_empty() {
        checker.error(node.span, format!("class `{}` lists no model, so nothing would belong to it", entry.key));
    }
    models.into_iter().map(|(model, _)| Glob::new(model)).collect()
}

/// The pins of a class and where they are listed.
struct Pins<'a> {
    names: &'a [String],
    place: Option<Span>,
    class: &'a str,
}

impl Pins<'_> {
    /// The index of a pin; complains where there is none of this name.
    fn find(&self, checker: &mut Checker, place: Span, name: &str) -> Option<usize> {
        let found = self.names.iter().position(|pin| pin.eq_ignore_ascii_case(name));
        if found.is_none() {
            let message = format!("class `{}` has no pin `{name}`", self.class);
            checker.unknown(place, message, name, self.names.iter().map(String::as_str));
            if let (Some(place), Some(error)) = (self.place, checker.complaints.last_mut()) {
                error.labels.push(crate::diag::Label { span: place, text: "its pins".to_string() });
            }
        }
        found
    }
}

/// The pins that a kind cannot do without, and those it has where the deck lists none.
fn pins_of(kind: Kind) -> (&'static [&'static str], &'static [&'static str]) {
    match kind {
        Kind::Nmos | Kind::Pmos => (&["d", "g", "s"], &["d", "g", "s", "b"]),
        Kind::Njf | Kind::Pjf => (&["d", "g", "s"], &["d", "g", "s"]),
        Kind::Npn | Kind::Pnp => (&["c", "b", "e"], &["c", "b", "e"]),
        Kind::Diode => (&["a", "k"], &["a", "k"]),
        Kind::Resistor | Kind::Capacitor | Kind::Inductor => (&["a", "b"], &["a", "b"]),
        Kind::Box => (&[], &[]),
    }
}

fn pins(checker: &mut Checker, entry: &Entry, fields: &Fields, kind: Kind) -> Option<(Vec<String>, Option<Span>)> {
    let (needed, usual) = pins_of(kind);
    let Some(node) = fields.get("pins") else {
        if usual.is_empty() {
            checker.error(
                entry.place,
                format!("class `{}` lists no pins: write `pins: [in, out, vss]`, in netlist order", entry.key),
            );
            return None;
        }
        return Some((usual.iter().map(|pin| pin.to_string()).collect(), None));
    };
    let mut pins: Vec<String> = Vec::new();
    for (pin, place) in checker.texts(node) {
        let pin = pin.to_ascii_lowercase();
        if !pin.bytes().all(|byte| byte.is_ascii_alphanumeric() || byte == b'_') || pin.is_empty() {
            checker.error(place, format!("`{pin}` is no name for a pin: letters, digits and _ make one"));
            return None;
        }
        if pins.contains(&pin) {
            checker.error(place, format!("pin `{pin}` is listed twice"));
            return None;
        }
        pins.push(pin);
    }
    let missing: Vec<&str> = needed.iter().copied().filter(|pin| !pins.iter().any(|known| known == pin)).collect();
    if !missing.is_empty() {
        let word = kind.word();
        checker.error_with_help(
            node.span,
            format!("a class of kind {word} lacks pin {}", missing.join(" and pin ")),
            format!(
                "the pins of a {word} are called {}, in the order of the netlist, others have free names",
                needed.join(" ")
            ),
        );
        return None;
    }
    Some((pins, Some(node.span)))
}

fn fingers(checker: &mut Checker, node: &Node) -> Option<Fingers> {
    let fields = checker.fields(node, &FINGERS);
    if !matches!(node.shape, Shape::Map(_)) {
        return None;
    }
    Some(Fingers {
        min: fields.get("min").and_then(|node| checker.count(node)),
        multiple_of: fields.get("multiple_of").and_then(|node| checker.count(node)),
        width: fields.get("width").and_then(|node| checker.range(node, LENGTH)),
    })
}

fn ratings(checker: &mut Checker, node: &Node, pins: &Pins) -> Vec<Rating> {
    let entries = checker.map(node, "`ratings`");
    entries.iter().filter_map(|entry| rating(checker, entry, pins)).collect()
}

fn rating(checker: &mut Checker, entry: &Entry, pins: &Pins) -> Option<Rating> {
    if entry.value.shape == Shape::Empty {
        return None;
    }
    let Some((plus, minus)) = pair(&entry.key) else {
        checker.error_with_help(
            entry.place,
            format!("`{}` is no pair of pins", entry.key),
            "write vds, vgs, vsb … for pins of one letter, and \"v(iso,s)\" for others",
        );
        return None;
    };
    let plus = pins.find(checker, entry.place, plus)?;
    let minus = pins.find(checker, entry.place, minus)?;
    if plus == minus {
        checker.error(entry.place, "a rating is between two pins");
        return None;
    }
    let range = checker.range(&entry.value, VOLTAGE)?;
    if range.lo == range.hi {
        checker.error_with_help(
            entry.value.span,
            "a rating is a range: one value alone would forbid every other voltage",
            format!("write -0.3V..{0}, or ..{0} if there is no lower limit", written(&entry.value)),
        );
        return None;
    }
    Some(Rating { name: entry.key.clone(), plus, minus, range, place: entry.place })
}

fn written(node: &Node) -> &str {
    match &node.shape {
        Shape::Text(text) => text,
        _ => "5V",
    }
}

/// The pins of `vds` or `v(iso,s)`.
fn pair(name: &str) -> Option<(&str, &str)> {
    let rest = name.strip_prefix(['v', 'V'])?;
    if let Some(inside) = rest.trim_start().strip_prefix('(') {
        let (plus, minus) = inside.trim_end().strip_suffix(')')?.split_once(',')?;
        return Some((plus.trim(), minus.trim()));
    }
    let letters = rest.len() == 2 && rest.bytes().all(|byte| byte.is_ascii_alphabetic());
    letters.then(|| rest.split_at(1))
}

fn on_state(checker: &mut Checker, entry: &Entry) -> Option<OnState> {
    let fields = checker.fields(&entry.value, &ON_STATE);
    let Some(vds) = fields.get("vds") else {
        checker.error(entry.place, "`on_state` needs `vds`: the |VDS| above which the voltage counts as high");
        return None;
    };
    let vds = checker.quantity(vds, VOLTAGE);
    let density = fields.get("density").and_then(|node| checker.quantity(node, DENSITY));
    let duty = fields.get("duty").and_then(|node| share(checker, node));
    let power = fields.get("power").and_then(|node| checker.quantity(node, POWER));
    Some(OnState { vds: vds?, density, duty, power, place: entry.place })
}

fn share(checker: &mut Checker, node: &Node) -> Option<f64> {
    let share = checker.quantity(node, SHARE)?;
    if share > 1.0 {
        checker.error(node.span, "a share of time is at most 100%");
        return None;
    }
    Some(share)
}

fn body(checker: &mut Checker, entry: &Entry, pins: &Pins) -> Option<Tie> {
    let fields = checker.fields(&entry.value, &BODY);
    let tie = fields.entry("tie")?;
    let pin = pins.find(checker, entry.place, "b")?;
    targets(checker, tie, pin, pins)
}

fn ties(checker: &mut Checker, node: &Node, pins: &Pins) -> Vec<Tie> {
    let entries = checker.map(node, "`ties`");
    let tie = |entry: &Entry| {
        if entry.value.shape == Shape::Empty || matches!(&entry.value.shape, Shape::List(list) if list.is_empty()) {
            return None;
        }
        let pin = pins.find(checker, entry.place, &entry.key)?;
        if pins.names[pin] == "b" {
            checker.error_with_help(entry.place, "the tie of b has a place of its own", "write `body: {tie: s}`");
            return None;
        }
        targets(checker, entry, pin, pins)
    };
    entries.iter().filter_map(tie).collect()
}

fn targets(checker: &mut Checker, entry: &Entry, pin: usize, pins: &Pins) -> Option<Tie> {
    let mut targets = Vec::new();
    for (name, place) in checker.texts(&entry.value) {
        targets.push(target(checker, name, place, pin, pins)?);
    }
    if targets.is_empty() {
        return None;
    }
    Some(Tie { pin, targets, place: entry.place })
}

fn target(checker: &mut Checker, name: &str, place: Span, pin: usize, pins: &Pins) -> Option<TieTarget> {
    match quoted_net(name) {
        Some(Ok(net)) => return Some(TieTarget::Net(net.to_string())),
        Some(Err(())) => {
            checker.error(place, "a net called so is written net(\"…\")");
            return None;
        }
        None => {}
    }
    match pins.names.iter().position(|known| known.eq_ignore_ascii_case(name)) {
        Some(target) if target == pin => {
            checker
                .error(place, format!("pin `{name}` shares its own net always: another pin or a rail is needed here"));
            None
        }
        Some(target) => Some(TieTarget::Pin(target)),
        None if name.contains(['*', '?']) || name.trim().is_empty() => {
            checker.error(place, format!("a pin of the class or one rail is needed here, not `{name}`"));
            None
        }
        None => Some(TieTarget::Net(name.to_string())),
    }
}

fn drift(checker: &mut Checker, node: &Node) -> Drift {
    let fields = checker.fields(node, &DRIFT);
    Drift {
        length: fields.get("length").and_then(|node| checker.quantity(node, LENGTH)),
        doping: fields.get("doping").and_then(|node| checker.quantity(node, DOPING)),
    }
}
