//! Which terminal of a device is which, worked out once for each kind of device.

use crate::declared::Class;
use crate::design::{Design, DeviceType, Element};

/// The terminals of a kind of device, as indices of its pins, and what its channel needs to conduct.
#[derive(Clone, Copy, Debug, PartialEq)]
#[allow(missing_docs)]
pub enum Terminals {
    /// Drain, gate, source, body; `n` for n-channel. Threshold in volts: `-∞` where it is not declared.
    Mos { d: u8, g: u8, s: u8, b: Option<u8>, n: bool, threshold: f64 },
    /// Collector, base, emitter; `n` for npn.
    Bipolar { c: u8, b: u8, e: u8, n: bool },
    /// Drain, gate, source; `n` for n-channel.
    Jfet { d: u8, g: u8, s: u8, n: bool },
    /// Anode, cathode; `breaks`: it has a breakdown that it is meant to be used in, so that it conducts both ways.
    Diode { a: u8, k: u8, breaks: bool },
    /// Passes voltage both ways between two terminals.
    Through { a: u8, b: u8, resistor: bool },
    /// Lifts its nets beyond its supplies.
    Inductor { a: u8, b: u8 },
    /// Holds a voltage between two terminals.
    Source { plus: u8, minus: u8 },
    /// Says nothing.
    Mute,
}

/// The terminals of all kinds of device of a design.
pub fn table(design: &Design<'_>) -> Vec<Terminals> {
    design.types.iter().map(|kind| terminals(kind, kind.class.map(|class| &design.classes[class as usize]))).collect()
}

fn terminals(kind: &DeviceType, class: Option<&Class>) -> Terminals {
    let pin = |name: &str, default: u8| match class {
        Some(class) => class.pin(name).map(|at| at as u8),
        None => Some(default),
    };
    let found = match kind.element {
        _ if kind.misfit => None,
        Element::Nmos | Element::Pmos => mos(kind, class, &pin),
        Element::Npn | Element::Pnp => {
            let pins = (pin("c", 0), pin("b", 1), pin("e", 2));
            let n = kind.element == Element::Npn;
            three(pins).map(|(c, b, e)| Terminals::Bipolar { c, b, e, n })
        }
        Element::Njf | Element::Pjf => {
            let n = kind.element == Element::Njf;
            three((pin("d", 0), pin("g", 1), pin("s", 2))).map(|(d, g, s)| Terminals::Jfet { d, g, s, n })
        }
        Element::Diode => {
            let breaks = class.and_then(|class| class.clamp).is_some_and(|clamp| clamp.hi.is_finite());
            Some(Terminals::Diode { a: pin("a", 0).unwrap_or(0), k: pin("k", 1).unwrap_or(1), breaks })
        }
        Element::Resistor => Some(Terminals::Through { a: 0, b: 1, resistor: true }),
        Element::CurrentSource | Element::Switch => Some(Terminals::Through { a: 0, b: 1, resistor: false }),
        Element::Line => Some(Terminals::Through { a: 0, b: if kind.letter == b'u' { 1 } else { 2 }, resistor: false }),
        Element::Inductor => Some(Terminals::Inductor { a: 0, b: 1 }),
        Element::VoltageSource => Some(Terminals::Source { plus: 0, minus: 1 }),
        Element::Capacitor | Element::Controlled | Element::Opaque => None,
    };
    // A class's pins are all on the card (or its number of terminals is a misfit); a card without a class may have fewer.
    let fits = |pins: &[u8]| class.is_some() || pins.iter().all(|&pin| pin < kind.terminals);
    match found {
        Some(Terminals::Mos { d, g, s, b, n, threshold }) if fits(&[d, g, s]) => {
            Terminals::Mos { d, g, s, b: b.filter(|&b| fits(&[b])), n, threshold }
        }
        Some(terminals) if fits(&pins_of(terminals)) => terminals,
        _ => Terminals::Mute,
    }
}

fn pins_of(terminals: Terminals) -> Vec<u8> {
    match terminals {
        Terminals::Mos { d, g, s, .. } | Terminals::Jfet { d, g, s, .. } => vec![d, g, s],
        Terminals::Bipolar { c, b, e, .. } => vec![c, b, e],
        Terminals::Diode { a: x, k: y, .. }
        | Terminals::Through { a: x, b: y, .. }
        | Terminals::Inductor { a: x, b: y }
        | Terminals::Source { plus: x, minus: y } => vec![x, y],
        Terminals::Mute => Vec::new(),
    }
}

fn mos(kind: &DeviceType, class: Option<&Class>, pin: &dyn Fn(&str, u8) -> Option<u8>) -> Option<Terminals> {
    let (d, g, s) = three((pin("d", 0), pin("g", 1), pin("s", 2)))?;
    let threshold = class.and_then(|class| class.threshold).map_or(f64::NEG_INFINITY, |threshold| threshold.lo);
    Some(Terminals::Mos { d, g, s, b: pin("b", 3), n: kind.element == Element::Nmos, threshold })
}

fn three(pins: (Option<u8>, Option<u8>, Option<u8>)) -> Option<(u8, u8, u8)> {
    Some((pins.0?, pins.1?, pins.2?))
}
