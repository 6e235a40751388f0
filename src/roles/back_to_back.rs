//! Two switches in series that block both ways.

use super::drive::use_of_rail;
use super::{Role, Unit, Use, Walker};

/// **back-to-back**: two devices of one polarity in series, sources on one net that is no rail, gates on one net, drains on two. When
/// on, one of them rightly carries its current from source to drain.
pub(super) fn back_to_back(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if walker.is_rail(mos.s) || walker.same(mos.d, mos.g) || use_of_rail(walker, mos.g) == Some(Use::Supply) {
        return None;
    }
    let beside = super::mirror::beside(walker, &mos);
    let mut found = Vec::new();
    for &other in beside.all.iter().filter(|&&other| other != unit) {
        if let Some(mirrored) = walker.working(other)
            && walker.same(mirrored.s, mos.s)
            && !walker.same(mirrored.d, mos.d)
            && !walker.same(mirrored.d, mirrored.g)
        {
            found.push(other);
        }
    }
    let one_of_a_mirror = !found.is_empty() && walker.plays(unit, Role::MirrorOutput);
    (!found.is_empty() && !one_of_a_mirror).then_some(found)
}
