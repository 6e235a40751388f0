//! Cascodes.

use super::{Role, Touch, Unit, Use, Walker};

/// **cascode**: its source's net is the drain of another device and no rail, its gate is a supply or a bias, it is no half of a pair and
/// not diode-connected. A high-voltage device here protects the one below: that is its proper use.
pub(super) fn cascode(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if walker.is_rail(mos.s) {
        return None;
    }
    let below = walker.units(mos.s, |touch| matches!(touch, Touch::Drain { .. }));
    let below: Vec<Unit> = below.into_iter().filter(|&other| other != unit).collect();
    let steady = !below.is_empty() && matches!(walker.use_of(mos.g), Use::Supply | Use::Bias);
    if !steady || walker.plays(unit, Role::DiodeConnected) || walker.plays(unit, Role::Pair) {
        return None;
    }
    let one_of_a_mirror = walker.plays(unit, Role::MirrorOutput) || walker.plays(unit, Role::MirrorReference);
    (!one_of_a_mirror).then_some(below)
}
