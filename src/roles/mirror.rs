//! Current mirrors.

use super::{Net, Role, Touch, Unit, Use, Walker};

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
    let gates = walker.units(mos.g, |touch| touch == Touch::Gate { n: mos.n });
    let mut members = Vec::new();
    for other in gates {
        if other == unit {
            members.push(other);
        } else if let Some(found) = walker.working(other)
            && common_source(walker, found.s, mos.s)
        {
            members.push(other);
        }
    }
    let mut references = Vec::new();
    if members.len() > 1 {
        for &member in &members {
            if walker.plays(member, Role::DiodeConnected) {
                references.push(member);
            }
        }
    }
    let outputs: Vec<Unit> = members.iter().copied().filter(|member| !references.contains(member)).collect();
    if !references.is_empty() && !outputs.is_empty() {
        let member = if references.contains(&unit) { Member::Reference } else { Member::Output };
        return Some(Mirror { member, references, outputs });
    }
    let outside = references.is_empty() && rail == Some(Use::Bias) && is_current_source(walker, unit, mos.s);
    outside.then(|| Mirror { member: Member::Output, references: Vec::new(), outputs: vec![unit] })
}

/// The role as a recogniser gives it: an output with its references, a reference with its outputs.
pub(super) fn playing(walker: &mut Walker<'_>, unit: Unit, member: Member) -> Option<Vec<Unit>> {
    let mirror = mirror(walker, unit).filter(|mirror| mirror.member == member)?;
    Some(match member {
        Member::Reference => mirror.outputs,
        Member::Output => mirror.references,
    })
}

/// Whether two sources are one net, or lead to one net through a resistor.
pub(super) fn common_source(walker: &mut Walker<'_>, a: Net, b: Net) -> bool {
    if walker.same(a, b) {
        return true;
    }
    let (from_a, from_b) = (behind_resistors(walker, a), behind_resistors(walker, b));
    let both = |walker: &Walker<'_>, nets: &[Net], net: Net| nets.iter().any(|&other| walker.same(other, net));
    both(walker, &from_a, b)
        || both(walker, &from_b, a)
        || from_a.iter().any(|&net| walker.is_rail(net) && both(walker, &from_b, net))
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
