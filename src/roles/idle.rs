//! Devices that do nothing: dummies, and idle ones.

use super::{Unit, Walker};
use crate::reach::Terminals;

/// **dummy**: drain and source on one net (the gate may be on it as well).
pub(super) fn dummy(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let (d, _, s) = ends(walker, unit)?;
    walker.context(unit.spot).same(d, s).then(Vec::new)
}

/// **idle**: gate on source, of a device that has to be turned on. Drain and source as they work (see [`super::Mos`]).
pub(super) fn idle(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let depletion = walker.class(unit).and_then(|class| class.threshold).is_some_and(|threshold| threshold.lo < 0.0);
    if depletion {
        return None;
    }
    let mos = walker.mos(unit)?;
    walker.same(mos.g, mos.s).then(Vec::new)
}

fn ends(walker: &Walker<'_>, unit: Unit) -> Option<(crate::design::NetIx, crate::design::NetIx, crate::design::NetIx)> {
    let at = walker.ground.reach.get(walker.spot(unit.spot).at).context;
    let (_, Terminals::Mos { d, g, s, .. }) = walker.ground.element(at, unit.device) else { return None };
    let pins = walker.ground.design().template(walker.context(unit.spot).variant).device_pins(unit.device);
    Some((pins[d as usize], pins[g as usize], pins[s as usize]))
}
