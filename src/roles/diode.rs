//! Diode-connected devices.

use super::{Net, Touch, Unit, Walker};
use hashbrown::HashSet;

/// How many devices may stand between a drain and its gate.
const LONGEST_CHAIN: usize = 4;

/// How many nets are looked at for one chain: the resistors of an extracted netlist make meshes.
const MOST_NETS: usize = 64;

/// **diode-connected**: the gate's net is the drain's; or it is reached from the drain through a chain of channels of the same polarity
/// (each entered at its source), resistors or a follower (entered at its gate, its drain on a rail), none of whose inner
/// nets is a rail or a port of the top. So the reference of a cascode, wide-swing or buffered mirror is found.
///
/// Where a device that shares gate and source has its gate straight on its own drain, that one is meant and no other: in a
/// Wilson mirror the input's drain too leads to the common gate, through the output's cascode.
pub(super) fn diode_connected(walker: &mut Walker<'_>, unit: Unit) -> Option<Vec<Unit>> {
    let mos = walker.working(unit)?;
    if walker.same(mos.d, mos.g) {
        return Some(Vec::new());
    }
    // A gate that nothing but gates and capacitors stand on is driven from elsewhere.
    if walker.is_rail(mos.d) || walker.leads_out(mos.d) || straight_beside(walker, unit) {
        return None;
    }
    let mut ways: Vec<(Net, Vec<Unit>)> = vec![(mos.d, Vec::new())];
    let mut seen: HashSet<Net> = HashSet::new();
    seen.insert(mos.d);
    while let Some((here, way)) = ways.pop() {
        for on in walker.each_on(here).iter() {
            if on.unit == unit || way.contains(&on.unit) {
                continue;
            }
            let Some(next) = step(walker, mos.n, on.unit, on.touch, here) else { continue };
            let mut longer = way.clone();
            longer.push(on.unit);
            if walker.same(next, mos.g) {
                return Some(longer);
            }
            let open = longer.len() < LONGEST_CHAIN
                && seen.len() < MOST_NETS
                && !walker.is_rail(next)
                && !walker.leads_out(next);
            if open && seen.insert(next) {
                ways.push((next, longer));
            }
        }
    }
    None
}

fn step(walker: &mut Walker<'_>, polarity: bool, through: Unit, touch: Touch, from: Net) -> Option<Net> {
    match touch {
        Touch::Source { n } if n == polarity => Some(walker.working(through)?.d),
        Touch::Gate { n } if n == polarity => {
            let follower = walker.working(through)?;
            (walker.is_rail(follower.d) && !walker.is_rail(follower.s)).then_some(follower.s)
        }
        Touch::Resistor => walker.other_end(through, from),
        _ => None,
    }
}

/// Whether a device beside it, with gate and source in common, has its gate straight on its drain.
fn straight_beside(walker: &mut Walker<'_>, unit: Unit) -> bool {
    let Some(mos) = walker.mos(unit) else { return false };
    if super::drive::use_of_rail(walker, mos.g) == Some(super::Use::Supply) {
        return false;
    }
    super::mirror::beside(walker, &mos).straight
}
