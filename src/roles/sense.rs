//! Devices that measure the current of another.

use super::{Role, Touch, Unit, Walker};

/// How many times wider the measured device is at least (common practice, no source).
const MANY: f64 = 10.0;

/// **sense**: shares class, gate and one of drain and source with a device many times its width that is no mirror reference.
pub(super) fn sense(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if super::drive::use_of_rail(walker, mos.g) == Some(super::Use::Supply) {
        return None;
    }
    let beside = walker.units(mos.g, |touch| touch == Touch::Gate { n: mos.n });
    let mut found = Vec::new();
    for other in beside.into_iter().filter(|&other| other != unit) {
        let Some(wide) = walker.working(other) else { continue };
        let shares = walker.same(wide.d, mos.d) || walker.same(wide.s, mos.s);
        if wide.class != mos.class || mos.class.is_none() || !shares {
            continue;
        }
        let (Some(own), Some(its)) = (walker.total_width(unit), walker.total_width(other)) else { continue };
        if its >= own * MANY {
            found.push(other);
        }
    }
    let mirrored =
        !found.is_empty() && walker.plays(unit, Role::MirrorOutput) || walker.plays(unit, Role::MirrorReference);
    (!found.is_empty() && !mirrored).then_some(found)
}
