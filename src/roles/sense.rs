//! Devices that measure the current of another.

use super::{Mos, Role, Touch, Unit, Walker};

/// How many times wider the measured device is at least (common practice, no source).
const MANY: f64 = 10.0;

/// **sense**: shares class, gate and one of drain and source (not both: that is a part of the same device) with a device many times
/// its width that is no mirror reference. No member of a latch: its gate is not the measured device's alone.
pub(super) fn sense(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if super::drive::use_of_rail(walker, mos.g) == Some(super::Use::Supply) {
        return None;
    }
    let (class, own) = (mos.class?, walker.total_width(unit)?);
    // Those with the source in common, and those with the drain in common (seen from the other end).
    let at_source = super::mirror::widest(walker, &mos, class);
    let at_drain = widest_at_drain(walker, unit, &mos, class);
    let wide = |(other, width): (Unit, f64)| (other != unit && width >= own * MANY).then_some(other);
    let found = at_source.and_then(wide).into_iter().chain(at_drain.and_then(wide));
    let apart =
        |other: &Unit| walker.mos(*other).is_some_and(|wide| walker.same(wide.d, mos.d) != walker.same(wide.s, mos.s));
    let found: Vec<Unit> = found.filter(apart).collect();
    let other = [Role::MirrorOutput, Role::MirrorReference, Role::Latch];
    if found.is_empty() || other.into_iter().any(|role| walker.plays(unit, role)) {
        return None;
    }
    Some(found)
}

fn widest_at_drain(walker: &mut Walker<'_>, unit: Unit, mos: &Mos, class: u32) -> Option<(Unit, f64)> {
    if walker.is_rail(mos.s) {
        // A device whose source is on a supply does not measure from its drain's side.
        return None;
    }
    let mut widest = None;
    for other in walker.units(mos.g, |touch| touch == Touch::Gate { n: mos.n }) {
        let Some(wide) = walker.working(other).filter(|wide| wide.class == Some(class)) else { continue };
        if other == unit || !walker.same(wide.d, mos.d) {
            continue;
        }
        let Some(width) = walker.total_width(other) else { continue };
        if widest.is_none_or(|(_, most)| width > most) {
            widest = Some((other, width));
        }
    }
    widest
}
