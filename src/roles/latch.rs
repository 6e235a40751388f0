//! Latches.

use super::{Touch, Unit, Walker};

/// **latch**: two devices of one polarity, each gate on the other's drain.
pub(super) fn latch(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if walker.same(mos.d, mos.g) || super::drive::use_of_rail(walker, mos.d) == Some(super::Use::Supply) {
        return None;
    }
    let across = walker.units(mos.d, |touch| touch == Touch::Gate { n: mos.n });
    let mut found = Vec::new();
    for other in across.into_iter().filter(|&other| other != unit) {
        if let Some(crossed) = walker.working(other)
            && walker.same(crossed.d, mos.g)
        {
            found.push(other);
        }
    }
    (!found.is_empty()).then_some(found)
}
