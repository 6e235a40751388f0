//! Source followers.

use super::{Net, Role, Touch, Unit, Use, Walker};

/// **follower**: its drain is on a rail, its source is the output, and its gate is a signal, or a reference that no cascode has (its
/// source stands on no other device's drain). One whose gate is driven rail to rail is a switch. The output may be declared a rail, if it
/// moves or is off ground, no other device's source or body stands on it, and nothing holds the gate to it (a resistor or clamp from
/// gate to source makes a switch or a pass device of it).
pub(super) fn follower(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if !walker.is_rail(mos.d) || !is_output(walker, unit, mos.s) || walker.use_of(mos.g) == Use::Supply {
        return None;
    }
    let other = [
        Role::DiodeConnected,
        Role::Pair,
        Role::MirrorOutput,
        Role::MirrorReference,
        Role::Latch,
        Role::Cascode,
        Role::BackToBack,
        Role::Switch,
    ];
    (!other.into_iter().any(|role| walker.plays(unit, role))).then(Vec::new)
}

/// Whether a source's net is what the device drives: no rail, or a declared output that nothing else is fed from.
pub(super) fn is_output(walker: &mut Walker<'_>, unit: Unit, net: Net) -> bool {
    if !walker.is_rail(net) {
        return true;
    }
    let reach = walker.ground.reach;
    let at = walker.spot(net.spot).at;
    let level = |mode: usize| reach.of(at, mode, net.net, 0);
    if walker.is_ground(net) || (0..reach.modes.len()).all(|mode| level(mode).lo == 0.0 && level(mode).hi == 0.0) {
        return false;
    }
    let Some(on) = walker.on(net) else { return false };
    if on.iter().any(|on| matches!(on.touch, Touch::Source { .. } | Touch::Body) && on.unit != unit) {
        return false;
    }
    let Some(gate) = walker.mos(unit).map(|mos| mos.g) else { return false };
    let holders = walker.units(gate, |touch| matches!(touch, Touch::Resistor | Touch::Anode | Touch::Cathode));
    !holders.into_iter().any(|holder| walker.other_end(holder, gate).is_some_and(|other| walker.same(other, net)))
}
