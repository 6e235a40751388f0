//! Source followers.

use super::{Role, Unit, Use, Walker};

/// **follower**: its drain is on a rail, its source is the output (no rail), and its gate is a signal, or a reference that no cascode
/// has (its source stands on no other device's drain). One whose gate is driven rail to rail is a switch.
pub(super) fn follower(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if !walker.is_rail(mos.d) || walker.is_rail(mos.s) || walker.leads_out(mos.s) || walker.use_of(mos.g) == Use::Supply {
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
