//! What may stand on each net of each cell, above and below it, in a few bits: enough to leave most devices alone.
//!
//! Bits are gathered from the leaves up, then from the tops down, once for each context. They promise too much at times (a bit
//! may come from one caller of several), never too little. A symmetric device that works the other way round in one surroundings of
//! several has the bits of both.

use super::local::Roles;
use crate::design::{DeviceIx, Element, NetIx, Template};
use crate::graph::{Context, ContextIx, Mark, Pin};
use crate::reach::Terminals;
use hashbrown::HashSet;

/// Bits of a net; those of p-channel devices stand [`P`] places higher than those of n-channel ones.
pub(super) type Bits = u32;

const P: u32 = 16;
pub(super) const GATE: Bits = 1;
pub(super) const GATES: Bits = 1 << 1;
pub(super) const SOURCE: Bits = 1 << 2;
pub(super) const SOURCES: Bits = 1 << 3;
pub(super) const DRAIN: Bits = 1 << 4;
/// The gate of a device whose drain is on a rail and whose source is on none.
const FOLLOWER: Bits = 1 << 5;
/// The gate of a device that may be diode-connected.
pub(super) const REFERENCE: Bits = 1 << 6;
pub(super) const RESISTOR: Bits = 1 << 8;
pub(super) const CURRENT: Bits = 1 << 9;
/// Something that conducts in a way of its own.
pub(super) const OTHER: Bits = 1 << 10;
/// Bits that two of a kind raise together.
const DOUBLED: [(Bits, Bits); 2] = [(GATE, GATES), (SOURCE, SOURCES)];

/// A bit of one polarity.
pub(super) fn of(n: bool, bit: Bits) -> Bits {
    if n { bit } else { bit << P }
}

/// How far a chain from a drain is followed inside one cell.
const LONGEST: usize = 4;

/// The bits of all nets of all contexts.
pub(super) struct Summary {
    all: Vec<Vec<Bits>>,
}

impl Summary {
    /// The bits of a net, which is a root.
    pub(super) fn of(&self, at: ContextIx, net: NetIx) -> Bits {
        self.all[at.0 as usize][net.0 as usize]
    }

    pub(super) fn new(roles: &Roles<'_>) -> Summary {
        let contexts = roles.reach.contexts;
        let order = contexts.callees_first();
        let turned = turned(roles);
        let own = contexts.indices().map(|at| own_bits(roles, at, &turned)).collect();
        let mut summary = Summary { all: own };
        summary.spread(roles, &order);
        let references: Vec<Vec<(NetIx, Bits)>> =
            contexts.indices().map(|at| summary.references(roles, at, &turned)).collect();
        for (at, found) in references.iter().enumerate() {
            for &(net, bit) in found {
                summary.all[at][net.0 as usize] |= bit;
            }
        }
        if references.iter().any(|found| !found.is_empty()) {
            summary.spread(roles, &order);
        }
        summary
    }

    /// From the leaves up, then from the tops down.
    fn spread(&mut self, roles: &Roles<'_>, order: &[ContextIx]) {
        for &at in order {
            self.each_link(roles, at, |all, (above, outer), (below, inner)| {
                let bits = all[below][inner];
                add(&mut all[above][outer], bits);
            });
        }
        for &at in order.iter().rev() {
            self.each_link(roles, at, |all, (above, outer), (below, inner)| {
                let bits = all[above][outer];
                all[below][inner] |= bits;
            });
        }
    }

    /// Each port of each instance in a context, as its net outside and inside.
    fn each_link(
        &mut self,
        roles: &Roles<'_>,
        at: ContextIx,
        mut each: impl FnMut(&mut Vec<Vec<Bits>>, (usize, usize), (usize, usize)),
    ) {
        let contexts = roles.reach.contexts;
        let context = contexts.get(at);
        let template = roles.design().template(context.variant);
        for (instance, &child) in template.instance_indices().zip(&context.children) {
            let below = contexts.get(child);
            let inner = roles.design().template(below.variant).boundary();
            for (&outer, inner) in template.instance_pins(instance).iter().zip(inner) {
                let (outer, inner) = (context.root(outer).0 as usize, below.root(inner).0 as usize);
                each(&mut self.all, (at.0 as usize, outer), (child.0 as usize, inner));
            }
        }
    }

    /// The gates' nets of devices that may be diode-connected.
    fn references(&self, roles: &Roles<'_>, at: ContextIx, turned: &Turned) -> Vec<(NetIx, Bits)> {
        let context = roles.reach.contexts.get(at);
        let template = roles.design().template(context.variant);
        let mut found = Vec::new();
        for device in template.devices() {
            let Some(mos) = mos(roles, context, template, device) else { continue };
            if mos.d == mos.s {
                continue;
            }
            if turned.contains(&(at, device)) {
                found.push((mos.g, of(mos.n, REFERENCE)));
                continue;
            }
            let on = of(mos.n, SOURCE | FOLLOWER) | RESISTOR;
            let chain = || self.of(at, mos.d) & on != 0 && self.may_lead(roles, at, device, &mos);
            if mos.d == mos.g || mos.s == mos.g || chain() {
                found.push((mos.g, of(mos.n, REFERENCE)));
            }
        }
        found
    }

    /// Whether a chain of devices may lead from a drain to its gate: true as soon as it would leave the cell.
    fn may_lead(&self, roles: &Roles<'_>, at: ContextIx, device: DeviceIx, from: &Ends) -> bool {
        let (context, local) = (roles.reach.contexts.get(at), roles.local(at));
        let template = roles.design().template(context.variant);
        let on = of(from.n, SOURCE | FOLLOWER) | RESISTOR;
        let mut seen = vec![from.d];
        let mut ways = vec![(from.d, 0)];
        while let Some((net, length)) = ways.pop() {
            if self.of(at, net) & on == 0 || is_rail(roles, context, net) {
                continue;
            }
            if length == LONGEST || local.position(net).is_some() || local.pins.is_crowded(net) {
                return true;
            }
            for pin in local.pins.on(net) {
                let Pin::Device(other, pin) = pin else { return true };
                if other == device {
                    continue;
                }
                let next = match mos(roles, context, template, other) {
                    Some(ends) if ends.n == from.n && ends.s == net && pin != ends.gate_pin => ends.d,
                    Some(ends) if ends.n == from.n && ends.g == net && pin == ends.gate_pin => ends.s,
                    Some(_) => continue,
                    None => match through(roles, context, template, other) {
                        Some((a, b)) => {
                            if a == net {
                                b
                            } else {
                                a
                            }
                        }
                        None => continue,
                    },
                };
                if next == from.g {
                    return true;
                }
                if !seen.contains(&next) {
                    seen.push(next);
                    ways.push((next, length + 1));
                }
            }
        }
        false
    }
}

/// A transistor's nets, as roots.
struct Ends {
    n: bool,
    d: NetIx,
    g: NetIx,
    s: NetIx,
    gate_pin: u8,
}

fn mos(roles: &Roles<'_>, context: &Context, template: &Template, device: DeviceIx) -> Option<Ends> {
    let kind = template.types[device.0 as usize].0 as usize;
    let Terminals::Mos { d, g, s, b, n, .. } = roles.terminals[kind] else { return None };
    let pins = template.device_pins(device);
    let root = |pin: u8| context.root(pins[pin as usize]);
    let (mut drain, gate, mut source) = (root(d), root(g), root(s));
    let class = roles.design().types[kind].class.map(|class| &roles.design().classes[class as usize]);
    let symmetric = class.is_none_or(|class| !class.asymmetric);
    if symmetric && b.is_some_and(|b| root(b) == drain && root(b) != source) {
        std::mem::swap(&mut drain, &mut source);
    }
    Some(Ends { n, d: drain, g: gate, s: source, gate_pin: g })
}

fn through(roles: &Roles<'_>, context: &Context, template: &Template, device: DeviceIx) -> Option<(NetIx, NetIx)> {
    let kind = template.types[device.0 as usize].0 as usize;
    let Terminals::Through { a, b, resistor: true } = roles.terminals[kind] else { return None };
    let pins = template.device_pins(device);
    Some((context.root(pins[a as usize]), context.root(pins[b as usize])))
}

fn is_rail(roles: &Roles<'_>, context: &Context, net: NetIx) -> bool {
    let marks = roles.reach.contexts.marks.of(context.mark_set(net));
    marks.iter().any(|mark| matches!(mark, Mark::Rail(_)))
}

/// What only voltages tell, in some surroundings: devices that work the other way round than they are drawn, and such as have their drain on
/// a net that something holds, and their source on none.
#[derive(Default)]
struct Turned {
    devices: HashSet<(ContextIx, DeviceIx)>,
    followers: HashSet<(ContextIx, DeviceIx)>,
}

impl Turned {
    fn contains(&self, device: &(ContextIx, DeviceIx)) -> bool {
        self.devices.contains(device)
    }
}

fn turned(roles: &Roles<'_>) -> Turned {
    let mut found = Turned::default();
    for at in roles.reach.indices() {
        let structure = roles.reach.get(at).context;
        let context = roles.reach.contexts.get(structure);
        let template = roles.design().template(context.variant);
        for device in template.devices() {
            let Some(mos) = mos(roles, context, template, device) else { continue };
            if !is_rail(roles, context, mos.s)
                && !is_rail(roles, context, mos.d)
                && (0..roles.reach.modes.len()).any(|mode| roles.reach.is_rail(at, mode, mos.d))
            {
                found.followers.insert((structure, device));
            }
            let open = super::ends::drawn(roles, structure, context, device) == super::ends::Drawn::Open;
            if open && super::ends::is_turned(roles, at, device) {
                found.devices.insert((structure, device));
            }
        }
    }
    found
}

fn own_bits(roles: &Roles<'_>, at: ContextIx, turned: &Turned) -> Vec<Bits> {
    let context = roles.reach.contexts.get(at);
    let template = roles.design().template(context.variant);
    let mut bits = vec![0; template.nets.len()];
    for device in template.devices() {
        if let Some(mos) = mos(roles, context, template, device) {
            if mos.d == mos.s {
                continue;
            }
            add(&mut bits[mos.d.0 as usize], of(mos.n, DRAIN));
            add(&mut bits[mos.s.0 as usize], of(mos.n, SOURCE));
            let mut follows = is_rail(roles, context, mos.d) && !is_rail(roles, context, mos.s);
            if turned.contains(&(at, device)) {
                add(&mut bits[mos.s.0 as usize], of(mos.n, DRAIN));
                add(&mut bits[mos.d.0 as usize], of(mos.n, SOURCE));
                follows = true;
            }
            follows |= turned.followers.contains(&(at, device));
            add(&mut bits[mos.g.0 as usize], of(mos.n, if follows { GATE | FOLLOWER } else { GATE }));
            continue;
        }
        let kind = template.types[device.0 as usize].0 as usize;
        let bit = match (roles.terminals[kind], roles.design().types[kind].element) {
            (Terminals::Through { resistor: true, .. }, _) => RESISTOR,
            (_, Element::CurrentSource) => CURRENT,
            (_, Element::Capacitor) | (Terminals::Diode { .. }, _) => continue,
            _ => OTHER,
        };
        for &net in template.device_pins(device) {
            bits[context.root(net).0 as usize] |= bit;
        }
    }
    bits
}

fn add(all: &mut Bits, more: Bits) {
    for (one, two) in DOUBLED {
        for bit in [true, false].map(|n| (of(n, one), of(n, two))) {
            if *all & bit.0 != 0 && more & bit.0 != 0 {
                *all |= bit.1;
            }
        }
    }
    *all |= more;
}
