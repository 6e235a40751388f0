//! Two switches in series that block both ways.

use super::drive::use_of_rail;
use super::{Mos, Net, Role, Touch, Unit, Use, Walker};

/// **back-to-back**: two devices of one polarity in series (each perhaps in several parts), sources on one net that is no rail, gates on one
/// net, drains on two. Nothing else that conducts stands on the sources' net, but what holds it (resistors, diodes): so the
/// outputs of a mirror, or switches on an undeclared supply, are none. When on, one of the two rightly carries its current from
/// source to drain.
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
    if found.is_empty() || walker.leads_out(mos.s) || !is_inner(walker, &mos) {
        return None;
    }
    let one_of_a_mirror = !found.is_empty() && walker.plays(unit, Role::MirrorOutput);
    (!found.is_empty() && !one_of_a_mirror).then_some(found)
}

/// Whether nothing but the sources of two devices, and what holds the net, stands on a source's net.
fn is_inner(walker: &mut Walker<'_>, mos: &Mos) -> bool {
    let Some(on) = walker.on(mos.s) else { return false };
    let mut drains: Vec<Net> = Vec::new();
    for on in on.iter() {
        match on.touch {
            Touch::Source { n } if n == mos.n => match walker.mos(on.unit) {
                Some(other) if walker.same(other.g, mos.g) => drains.push(other.d),
                _ => return false,
            },
            Touch::Drain { .. } | Touch::Source { .. } | Touch::CurrentSource | Touch::Conductor => return false,
            _ => {}
        }
    }
    drains.sort_unstable();
    drains.dedup();
    drains.len() == 2
}
