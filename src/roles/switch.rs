//! Switches.

use super::{Role, Unit, Use, Walker};

/// **switch**: its gate is driven rail to rail ([`Walker::rail_to_rail`]), or is a declared signal that takes it from off to fully on. No
/// half of a pair, no member of a mirror or latch. A follower's shape (drain on a rail, source on none) with a
/// declared signal is read as a follower, unless the device is one of two back to back.
pub(super) fn switch(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    let driven = walker.rail_to_rail(mos.g);
    if !driven && walker.use_of(mos.g) != Use::Signal {
        return None;
    }
    let other =
        [Role::DiodeConnected, Role::Pair, Role::MirrorOutput, Role::MirrorReference, Role::Latch, Role::Cascode];
    if other.into_iter().any(|role| walker.plays(unit, role)) {
        return None;
    }
    let follows = walker.is_rail(mos.d) && super::follower::is_output(walker, unit, mos.s);
    if !driven && follows && !walker.plays(unit, Role::BackToBack) {
        return None;
    }
    Some(if driven { walker.drivers(mos.g) } else { Vec::new() })
}
