//! What a net is used for: a supply, a bias, a signal; and which nets are driven rail to rail.

use super::{Net, Role, Touch, Unit, Walker};
use crate::graph::{Mark, rail};
use crate::reach::{Reach, ReachIx};

/// What a net is to the gates on it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Use {
    /// A rail on which bodies or sources stand, or ground; a port of the top with bodies or sources on it.
    Supply,
    /// Steady: a rail without bodies or sources that hardly moves and never goes to a rail's own level, or a net that a
    /// diode-connected device or a divider sets.
    Bias,
    /// A rail without bodies or sources that moves.
    Signal,
    /// Any other net.
    Internal,
}

/// A rail that moves by less than this over all modes, in some frame, is steady, volts; so is one that stays further than this on one
/// side of the frame's net and moves by less than half of its largest value there: bias lines and supplies move with
/// process and temperature, signals come to a rail (common practice, no source).
const STEADY: f64 = 0.5;

/// How far drivers of drivers are followed, and how many nets are looked at for one question.
const DEEPEST: usize = 8;
const MOST_NETS: usize = 64;

impl Walker<'_> {
    /// What a net is used for.
    pub fn use_of(&mut self, net: Net) -> Use {
        self.once(|walker| &mut walker.uses, net, |walker| walker.look_at_use(net))
    }

    fn look_at_use(&mut self, net: Net) -> Use {
        let rail = use_of_rail(self, net);
        if let Some(rail @ (Use::Supply | Use::Bias)) = rail {
            return rail;
        }
        let on = self.each_on(net);
        if rail.is_none() && self.leads_out(net) && self.feeds(net) {
            return Use::Supply;
        }
        let gates: Vec<Unit> =
            on.iter().filter(|on| matches!(on.touch, Touch::Gate { .. })).map(|on| on.unit).collect();
        if gates.into_iter().any(|gate| self.plays(gate, Role::DiodeConnected))
            || rail.is_none() && self.is_divider(net)
        {
            return Use::Bias;
        }
        rail.unwrap_or(Use::Internal)
    }

    /// Whether an undeclared port of the top feeds devices: bodies stand on it whose sources do not, or several sources.
    fn feeds(&mut self, net: Net) -> bool {
        let on = self.each_on(net);
        let sources = on.iter().filter(|on| matches!(on.touch, Touch::Source { .. })).count();
        let bodies: Vec<Unit> = on.iter().filter(|on| on.touch == Touch::Body).map(|on| on.unit).collect();
        sources > 1 || bodies.into_iter().any(|body| self.mos(body).is_some_and(|mos| !self.same(mos.s, net)))
    }

    /// A net that only resistors set: two or more of them, and nothing else that conducts.
    fn is_divider(&mut self, net: Net) -> bool {
        if self.leads_out(net) {
            return false;
        }
        let Some(on) = self.on(net) else { return false };
        let resistors = on.iter().filter(|on| on.touch == Touch::Resistor).count();
        let still = |touch: Touch| {
            matches!(
                touch,
                Touch::Resistor | Touch::Gate { .. } | Touch::Capacitor | Touch::Still | Touch::Body | Touch::Nothing
            )
        };
        if resistors < 2 || !on.iter().all(|on| still(on.touch)) {
            return false;
        }
        // What stands behind the resistors has to be steady as well: a divider of an output is a signal.
        let ends: Vec<Unit> = on.iter().filter(|on| on.touch == Touch::Resistor).map(|on| on.unit).collect();
        ends.into_iter().all(|resistor| {
            self.other_end(resistor, net)
                .is_some_and(|other| matches!(use_of_rail(self, other), Some(Use::Supply | Use::Bias)))
        })
    }

    /// Whether something stands on a net of which nobody knows how it drives.
    pub(super) fn is_open(&mut self, net: Net) -> bool {
        self.each_on(net).iter().any(|on| on.touch == Touch::Conductor)
    }

    /// Whether a net is driven rail to rail: modes hold it at both ends; or it is the joined drains of complementary devices (with gates
    /// joined, or each itself driven so, or of a latch); or a device that is driven so pulls it one way and a resistor to
    /// a rail the other; or it hangs on such a net through a resistor or a channel.
    pub fn rail_to_rail(&mut self, net: Net) -> bool {
        let outermost = self.undriven.is_empty();
        let found = self.driven_fully(net, 0);
        if outermost {
            self.undriven.clear();
        }
        found
    }

    fn driven_fully(&mut self, net: Net, depth: usize) -> bool {
        let net = if self.is_rail(net) { net } else { self.climb(net) };
        // On the way back to itself a net drives nothing; what was seen once for this question is not seen again.
        if depth >= DEEPEST || self.undriven.len() >= MOST_NETS || self.undriven.contains(&net) {
            return false;
        }
        let found = self.once(
            |walker| &mut walker.driven,
            net,
            |walker| {
                walker.undriven.insert(net);
                walker.look_at_drivers(net, depth + 1)
            },
        );
        // That it is not driven is known for good only where no other question is under way.
        if !found && depth > 0 {
            self.driven.remove(&net);
        }
        found
    }

    fn look_at_drivers(&mut self, net: Net, depth: usize) -> bool {
        match use_of_rail(self, net) {
            Some(Use::Signal) => return self.is_held_at_both_ends(net),
            Some(_) => return false,
            None => {}
        }
        let on = self.each_on(net);
        let drains = |n: bool| -> Vec<Unit> {
            on.iter().filter(|on| on.touch == Touch::Drain { n }).map(|on| on.unit).collect()
        };
        let (down, up) = (drains(true), drains(false));
        let (down, up) = (self.distinct(down), self.distinct(up));
        for &low in &down {
            for &high in &up {
                if self.complementary(low, high, depth) {
                    return true;
                }
            }
        }
        let resistors: Vec<Unit> = on.iter().filter(|on| on.touch == Touch::Resistor).map(|on| on.unit).collect();
        let ends: Vec<Net> = resistors.into_iter().filter_map(|resistor| self.other_end(resistor, net)).collect();
        let held = ends.iter().any(|&end| self.is_rail(end));
        if held && down.iter().chain(&up).any(|&pull| self.gate_driven_fully(pull, depth)) {
            return true;
        }
        if ends.iter().any(|&end| self.driven_fully(end, depth)) {
            return true;
        }
        let passes: Vec<Unit> = on
            .iter()
            .filter(|on| matches!(on.touch, Touch::Drain { .. } | Touch::Source { .. }))
            .map(|on| on.unit)
            .collect();
        let passes = self.distinct(passes);
        passes.into_iter().any(|pass| {
            let Some(mos) = self.working(pass) else { return false };
            let far = if self.same(mos.d, net) { mos.s } else { mos.d };
            self.driven_fully(far, depth)
        })
    }

    /// Of devices in parallel, with all nets in common, the first.
    fn distinct(&mut self, units: Vec<Unit>) -> Vec<Unit> {
        let mut seen = hashbrown::HashSet::new();
        units
            .into_iter()
            .filter(|&unit| self.mos(unit).is_some_and(|mos| seen.insert((mos.n, mos.d, mos.g, mos.s))))
            .collect()
    }

    fn gate_driven_fully(&mut self, unit: Unit, depth: usize) -> bool {
        let Some(mos) = self.working(unit) else { return false };
        self.driven_fully(mos.g, depth) || use_of_rail(self, mos.g) == Some(Use::Signal)
    }

    fn complementary(&mut self, low: Unit, high: Unit, depth: usize) -> bool {
        let (Some(n), Some(p)) = (self.working(low), self.working(high)) else { return false };
        if self.same(n.g, p.g) || self.gates_below(low, p.g) || self.gates_below(high, n.g) {
            return true;
        }
        if self.plays(low, Role::Latch) || self.plays(high, Role::Latch) {
            return true;
        }
        self.is_rail(n.s)
            && self.is_rail(p.s)
            && self.gate_driven_fully(low, depth)
            && self.gate_driven_fully(high, depth)
    }

    /// Whether a device further down the same stack has its gate on a net (the stack of a NAND or NOR gate).
    fn gates_below(&mut self, unit: Unit, gate: Net) -> bool {
        let mut here = unit;
        for _ in 0..DEEPEST {
            let Some(mos) = self.working(here) else { return false };
            if self.same(mos.g, gate) {
                return true;
            }
            if self.is_rail(mos.s) {
                return false;
            }
            let below = self.units(mos.s, |touch| touch == Touch::Drain { n: mos.n });
            let Some(&next) = below.first() else { return false };
            here = next;
        }
        false
    }

    /// Whether two modes hold a rail at different voltages, in some frame.
    fn is_held_at_both_ends(&self, net: Net) -> bool {
        let reach = self.ground.reach;
        let at = self.spot(net.spot).at;
        let frames = frames_of(reach, at);
        (0..frames).any(|frame| {
            let ranges: Vec<_> = (0..reach.modes.len()).map(|mode| reach.of(at, mode, net.net, frame)).collect();
            let lowest = ranges.iter().map(|range| range.hi).fold(f64::INFINITY, f64::min);
            let highest = ranges.iter().map(|range| range.lo).fold(f64::NEG_INFINITY, f64::max);
            lowest.is_finite() && highest.is_finite() && highest - lowest > STEADY
        })
    }

    /// The devices whose drains drive a net.
    pub(super) fn drivers(&mut self, net: Net) -> Vec<Unit> {
        if self.is_rail(net) {
            return Vec::new();
        }
        self.units(net, |touch| matches!(touch, Touch::Drain { .. }))
    }

    /// Whether a device is n-channel.
    pub(super) fn mos_is_n(&self, unit: Unit) -> bool {
        self.class(unit).is_none_or(|class| class.kind != crate::declared::Kind::Pmos)
    }
}

/// What a rail is used for; none where a net is no rail.
pub(super) fn use_of_rail(walker: &mut Walker<'_>, net: Net) -> Option<Use> {
    if !walker.is_rail(net) {
        return None;
    }
    if walker.is_ground(net) {
        return Some(Use::Supply);
    }
    let slots: Vec<_> = walker
        .marks(net)
        .iter()
        .filter_map(|mark| match mark {
            Mark::Rail(slot) => Some(*slot),
            Mark::Named(_) => None,
        })
        .collect();
    let wild = slots.iter().any(|&slot| rail(walker.ground.deck(), slot).net.is_wild());
    let supply = if slots.is_empty() || wild {
        // One pattern may name supplies and inputs: only the net itself tells.
        match walker.on(net) {
            Some(on) => on.iter().any(|on| matches!(on.touch, Touch::Body | Touch::Source { .. })),
            None => true,
        }
    } else {
        slots.iter().any(|&slot| walker.ground.is_supply(slot))
    };
    Some(if supply {
        Use::Supply
    } else if is_steady(walker, net) {
        Use::Bias
    } else {
        Use::Signal
    })
}

/// How many frames a context's nets are kept in.
pub(super) fn frames_of(reach: &Reach<'_>, at: ReachIx) -> usize {
    reach.frames.get(reach.get(at).top as usize).map_or(0, |frames| frames.all.len())
}

/// Whether a rail hardly moves over all modes, seen from some other net that is kept as a reference.
fn is_steady(walker: &Walker<'_>, net: Net) -> bool {
    let reach = walker.ground.reach;
    let at = walker.spot(net.spot).at;
    let frames = frames_of(reach, at);
    (0..frames).any(|frame| {
        let ranges: Vec<_> = (0..reach.modes.len()).map(|mode| reach.of(at, mode, net.net, frame)).collect();
        let own = frame > 0 && ranges.iter().all(|range| range.lo == 0.0 && range.hi == 0.0);
        let lo = ranges.iter().map(|range| range.lo).fold(f64::INFINITY, f64::min);
        let hi = ranges.iter().map(|range| range.hi).fold(f64::NEG_INFINITY, f64::max);
        let apart = lo > STEADY && hi - lo <= hi / 2.0 || hi < -STEADY && hi - lo <= -lo / 2.0;
        !own && (hi - lo <= STEADY || apart)
    })
}
