//! Current mirrors.

use super::{Mos, Net, Role, Touch, Unit, Use, Walker};
use hashbrown::HashMap;
use std::rc::Rc;

/// What a device is in its mirror.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Member {
    /// Diode-connected: it sets the gate.
    Reference,
    /// It repeats the reference's current.
    Output,
}

/// A mirror, as seen from one of its devices.
#[derive(Clone, Debug, PartialEq)]
pub struct Mirror {
    /// What that device is.
    pub member: Member,
    /// The diode-connected devices; empty where the reference stands outside of the netlist.
    pub references: Vec<Unit>,
    /// All outputs.
    pub outputs: Vec<Unit>,
}

/// By how much a gate-source voltage may exceed the largest threshold of a device that works as a current source, volts (common
/// practice, no source): one that is driven harder is a switch that is on.
const OVERDRIVE: f64 = 1.0;

/// **mirror**: devices of one polarity whose gates share a net, whose sources share a net (or lead to one net through a resistor
/// each; or one directly and one through a resistor), one of which is diode-connected. That is the reference, the others are
/// outputs. A cascode stacked on them is none: its source is another net.
///
/// A device whose gate is a declared bias and whose source is on a supply is the output of a mirror whose reference stands outside of the
/// netlist, if the bias stays within a volt of its threshold.
pub(super) fn mirror(walker: &mut Walker<'_>, unit: Unit) -> Option<Mirror> {
    let mos = walker.working(unit)?;
    let rail = super::drive::use_of_rail(walker, mos.g);
    if rail == Some(Use::Supply) {
        return None;
    }
    let group = group(walker, &mos);
    if !group.references.is_empty() && !group.outputs.is_empty() {
        let member = if group.references.contains(&unit) { Member::Reference } else { Member::Output };
        return Some(Mirror { member, references: group.references.clone(), outputs: group.outputs.clone() });
    }
    let outside = group.references.is_empty() && rail == Some(Use::Bias) && is_current_source(walker, unit, mos.s);
    outside.then(|| Mirror { member: Member::Output, references: Vec::new(), outputs: vec![unit] })
}

/// Devices that share gate and source: those that are diode-connected, and the others.
#[derive(Debug, Default)]
pub(super) struct Group {
    references: Vec<Unit>,
    outputs: Vec<Unit>,
}

fn group(walker: &mut Walker<'_>, mos: &Mos) -> Rc<Group> {
    let key = (mos.g, mos.s, mos.n);
    walker.once(
        |walker| &mut walker.mirrors,
        key,
        |walker| {
            let members = beside(walker, mos);
            let mut found = Group::default();
            for &member in &members.all {
                match members.all.len() > 1 && walker.plays(member, Role::DiodeConnected) {
                    true => found.references.push(member),
                    false => found.outputs.push(member),
                }
            }
            Rc::new(found)
        },
    )
}

/// The working devices of one polarity whose gates are on one net, by their sources and by what lies behind resistors there.
#[derive(Debug, Default)]
pub(super) struct Gates {
    by_source: HashMap<Net, Vec<Unit>>,
    by_far_end: HashMap<Net, Vec<Unit>>,
}

fn gates(walker: &mut Walker<'_>, gate: Net, n: bool) -> Rc<Gates> {
    walker.once(
        |walker| &mut walker.gates,
        (gate, n),
        |walker| {
            let mut found = Gates::default();
            for unit in walker.units(gate, |touch| touch == Touch::Gate { n }) {
                let Some(mos) = walker.working(unit) else { continue };
                found.by_source.entry(mos.s).or_default().push(unit);
                for end in behind_resistors(walker, mos.s) {
                    found.by_far_end.entry(end).or_default().push(unit);
                }
            }
            Rc::new(found)
        },
    )
}

/// The working devices that share gate and source with one another.
#[derive(Debug, Default)]
pub(super) struct Beside {
    /// All of them.
    pub(super) all: Vec<Unit>,
    /// Whether one has its gate straight on its drain.
    pub(super) straight: bool,
}

/// The working devices that have a device's gate and polarity, and whose sources share a net with its own, or lead to one net
/// through a resistor each, or one directly and one through a resistor.
pub(super) fn beside(walker: &mut Walker<'_>, mos: &Mos) -> Rc<Beside> {
    let key = (mos.g, mos.s, mos.n);
    walker.once(
        |walker| &mut walker.beside,
        key,
        |walker| {
            let gates = gates(walker, mos.g, mos.n);
            let mut all: Vec<Unit> = Vec::new();
            let mut add = |units: Option<&Vec<Unit>>| all.extend(units.into_iter().flatten());
            add(gates.by_source.get(&mos.s));
            add(gates.by_far_end.get(&mos.s));
            for end in behind_resistors(walker, mos.s) {
                add(gates.by_source.get(&end));
                if walker.is_rail(end) {
                    add(gates.by_far_end.get(&end));
                }
            }
            all.sort_unstable();
            all.dedup();
            let straight = all.iter().any(|&unit| walker.mos(unit).is_some_and(|mos| walker.same(mos.d, mos.g)));
            Rc::new(Beside { all, straight })
        },
    )
}

/// The widest device of a class among those that share gate and source, and its width.
pub(super) fn widest(walker: &mut Walker<'_>, mos: &Mos, class: u32) -> Option<(Unit, f64)> {
    walker.once(
        |walker| &mut walker.widest,
        (mos.g, mos.s, class),
        |walker| {
            let members = beside(walker, mos);
            let mut widest: Option<(Unit, f64)> = None;
            for &unit in &members.all {
                if walker.mos(unit).and_then(|mos| mos.class) != Some(class) {
                    continue;
                }
                let Some(width) = walker.total_width(unit) else { continue };
                if widest.is_none_or(|(_, most)| width > most) {
                    widest = Some((unit, width));
                }
            }
            widest
        },
    )
}

/// The role as a recogniser gives it: an output with its references, a reference with its outputs.
pub(super) fn playing(walker: &mut Walker<'_>, unit: Unit, member: Member) -> Option<Vec<Unit>> {
    let mirror = mirror(walker, unit).filter(|mirror| mirror.member == member)?;
    Some(match member {
        Member::Reference => mirror.outputs,
        Member::Output => mirror.references,
    })
}

/// The nets that lie behind resistors on a net that is no rail.
pub(super) fn behind_resistors(walker: &mut Walker<'_>, net: Net) -> Vec<Net> {
    if walker.is_rail(net) {
        return Vec::new();
    }
    let resistors = walker.units(net, |touch| touch == Touch::Resistor);
    resistors.into_iter().filter_map(|resistor| walker.other_end(resistor, net)).collect()
}

/// Whether a device with a steady gate carries a current that its gate sets: its source is on a supply, perhaps through a
/// resistor, and its gate does not drive it far beyond its threshold.
fn is_current_source(walker: &mut Walker<'_>, unit: Unit, source: Net) -> bool {
    let base: Vec<Net> = if walker.is_rail(source) { vec![source] } else { behind_resistors(walker, source) };
    if !base.iter().any(|&net| super::drive::use_of_rail(walker, net) == Some(Use::Supply)) {
        return false;
    }
    let Some(class) = walker.class(unit) else { return false };
    let (Some(g), Some(s)) = (class.pin("g"), class.pin("s")) else { return false };
    let Some(most) = class.threshold.map(|threshold| threshold.hi).filter(|most| most.is_finite()) else {
        return false;
    };
    let reach = walker.ground.reach;
    let pins = reach.design.template(walker.context(unit.spot).variant).device_pins(unit.device);
    let at = walker.spot(unit.spot).at;
    // The gate against the supply: a resistor in the source only takes from the drive.
    let base_net = |pin: usize| pins[pin];
    let drive = (0..reach.modes.len()).map(|mode| {
        let drive = reach.between(at, mode, base_net(g), base_net(s));
        if walker.mos_is_n(unit) { drive.hi } else { -drive.lo }
    });
    let drive = drive.fold(f64::NEG_INFINITY, f64::max);
    drive.is_finite() && drive <= most + OVERDRIVE
}
