//! Common-source stages.

use super::{Net, Role, Touch, Unit, Use, Walker};

/// **gain**: source on a rail (or through a resistor on one), gate an internal signal (no rail, no bias, not driven rail to rail, no port
/// of the top), drain, or the drain of the cascode on it, on a net loaded by a mirror output, a current source or a
/// resistor to a rail, and no rail. So a regulator's pass device, whose drain is a declared output, is none.
pub(super) fn gain(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if walker.is_rail(mos.d) || walker.is_rail(mos.g) || walker.leads_out(mos.g) || walker.is_open(mos.g) {
        return None;
    }
    let base = if walker.is_rail(mos.s) { vec![mos.s] } else { super::mirror::behind_resistors(walker, mos.s) };
    if !base.iter().any(|&net| walker.is_rail(net)) {
        return None;
    }
    let load = loads(walker, unit, mos.d, mos.n).or_else(|| through_cascode(walker, unit, mos.d, mos.n))?;
    if walker.use_of(mos.g) != Use::Internal || walker.rail_to_rail(mos.g) {
        return None;
    }
    let other =
        [Role::DiodeConnected, Role::Pair, Role::MirrorOutput, Role::MirrorReference, Role::Latch, Role::BackToBack];
    (!other.into_iter().any(|role| walker.plays(unit, role))).then_some(load)
}

fn through_cascode(walker: &mut Walker<'_>, unit: Unit, drain: Net, polarity: bool) -> Option<Vec<Unit>> {
    let above = walker.units(drain, |touch| touch == Touch::Source { n: polarity });
    above.into_iter().filter(|&other| other != unit).find_map(|other| {
        if !walker.plays(other, Role::Cascode) {
            return None;
        }
        let top = walker.mos(other)?.d;
        let mut load = loads(walker, other, top, polarity)?;
        load.insert(0, other);
        Some(load)
    })
}

/// What loads a net, for a device of one polarity: a current of the other side, or a resistor to a rail.
fn loads(walker: &mut Walker<'_>, unit: Unit, net: Net, polarity: bool) -> Option<Vec<Unit>> {
    if walker.is_rail(net) {
        return None;
    }
    let mut found = Vec::new();
    for on in walker.each_on(net).iter().filter(|on| on.unit != unit) {
        let loads = match on.touch {
            Touch::CurrentSource => true,
            Touch::Resistor => walker.other_end(on.unit, net).is_some_and(|other| walker.is_rail(other)),
            Touch::Drain { n } if n != polarity => brings_current(walker, on.unit),
            _ => false,
        };
        if loads {
            found.push(on.unit);
        }
    }
    (!found.is_empty()).then_some(found)
}

/// Whether a device is a mirror output, has a steady gate, or is a cascode.
fn brings_current(walker: &mut Walker<'_>, unit: Unit) -> bool {
    if walker.plays(unit, Role::MirrorOutput) || walker.plays(unit, Role::Cascode) {
        return true;
    }
    walker.mos(unit).is_some_and(|mos| matches!(walker.use_of(mos.g), Use::Bias))
}
