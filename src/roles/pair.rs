//! Differential pairs.

use super::{Net, Role, Touch, Unit, Use, Walker};

/// Two devices that share a current.
#[derive(Clone, Debug, PartialEq)]
pub struct Pair {
    /// The devices of one side.
    pub left: Vec<Unit>,
    /// The devices of the other.
    pub right: Vec<Unit>,
    /// What brings the current.
    pub tail: Vec<Unit>,
    /// The net that both sources stand on.
    pub net: Net,
}

impl Pair {
    /// All devices but one.
    pub(super) fn others(&self, unit: Unit) -> Vec<Unit> {
        self.left.iter().chain(&self.right).chain(&self.tail).copied().filter(|&other| other != unit).collect()
    }
}

/// **pair**: devices of one polarity with their sources on one net that is no rail, in two groups of different gates and different drains,
/// and the only other paths from that net lead to a current: a mirror output, a current source, a resistor to a rail, or a
/// channel whose gate is a bias or a supply. So a multiplexer is no pair. The halves may differ in class: that is a mistake
/// in a pair, not another circuit. A half whose gate is on the other's drain, or that is an inverter's lower device, makes none: several
/// logic gates on a ground with a resistor look like that. One gate may be steady (a reference); two that both are make no pair.
///
/// The left side is the one whose device was drawn first.
pub(super) fn pair(walker: &mut Walker<'_>, unit: Unit) -> Option<Pair> {
    let mos = walker.working(unit)?;
    if walker.is_rail(mos.s) || walker.leads_out(mos.s) {
        return None;
    }
    let mut sides: Vec<(Net, Net, Vec<Unit>)> = Vec::new();
    let mut tail = Vec::new();
    for on in walker.on(mos.s)?.iter() {
        match on.touch {
            Touch::Source { n } if n == mos.n => {
                let half = walker.mos(on.unit)?;
                match sides.iter_mut().find(|(g, d, _)| walker.same(*g, half.g) && walker.same(*d, half.d)) {
                    Some((_, _, units)) => units.push(on.unit),
                    None => sides.push((half.g, half.d, vec![on.unit])),
                }
            }
            Touch::Body | Touch::Still | Touch::Capacitor | Touch::Gate { .. } | Touch::Nothing => {}
            Touch::Anode | Touch::Cathode => {}
            touch => {
                if !brings_a_current(walker, on.unit, touch, mos.s, mos.n) {
                    return None;
                }
                tail.push(on.unit);
            }
        }
    }
    let [(left_gate, left_drain, left), (right_gate, right_drain, right)] = sides.as_slice() else { return None };
    let apart = !walker.same(*left_gate, *right_gate) && !walker.same(*left_drain, *right_drain);
    if tail.is_empty() || !apart {
        return None;
    }
    let crossed = walker.same(*left_gate, *right_drain) || walker.same(*right_gate, *left_drain);
    let logic = left.iter().chain(right).any(|&half| is_inverter(walker, half));
    if crossed || logic {
        return None;
    }
    let steady = |walker: &mut Walker<'_>, gate: Net| matches!(walker.use_of(gate), Use::Supply | Use::Bias);
    if steady(walker, *left_gate) && steady(walker, *right_gate) {
        return None;
    }
    let (left, right) = if left.first() <= right.first() { (left, right) } else { (right, left) };
    Some(Pair { left: left.clone(), right: right.clone(), tail, net: mos.s })
}

fn brings_a_current(walker: &mut Walker<'_>, unit: Unit, touch: Touch, net: Net, polarity: bool) -> bool {
    match touch {
        Touch::CurrentSource => true,
        Touch::Resistor => walker.other_end(unit, net).is_some_and(|other| walker.is_rail(other)),
        Touch::Drain { n } if n == polarity => {
            let Some(mos) = walker.mos(unit) else { return false };
            matches!(walker.use_of(mos.g), Use::Supply | Use::Bias) || walker.plays(unit, Role::MirrorOutput)
        }
        _ => false,
    }
}

/// Whether a device of the other polarity shares gate and drain with it.
fn is_inverter(walker: &mut Walker<'_>, unit: Unit) -> bool {
    let Some(mos) = walker.mos(unit) else { return false };
    let above = walker.units(mos.d, |touch| touch == Touch::Drain { n: !mos.n });
    above.into_iter().any(|other| walker.mos(other).is_some_and(|other| walker.same(other.g, mos.g)))
}
