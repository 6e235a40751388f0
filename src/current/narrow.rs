//! Currents narrow reach: how far a limited current can pull a net that a resistor holds to a rail.
//!
//! A net N that a resistor R holds to a rail, and that only devices of known current pull away from it, cannot be pulled further
//! from that rail than the sum of their currents times R: a bound of V(N) − V(rail) like a clamp's. A level shifter that pulls a
//! bounded current through a resistor in a floating domain is safe for that reason alone.
//!
//! **Guarantee.** Every element that can take current out of N (or bring it, for the other sense) is counted, or N has no bound.
//! Currents by a mirror's ratio count [`BY_RATIO`] times.

use super::{Currents, Known};
use crate::design::{DeviceIx, NetIx};
use crate::graph::ContextIx;
use crate::reach::{Cap, Interval, ReachIx, Terminals};
use crate::roles::{Net, Roles, Standing, Surroundings, Touch, Unit, Walker, Walks};
use hashbrown::HashMap;

/// What the drain's voltage, and what the reference's spread, may add to a current by ratio (common practice, no source).
const BY_RATIO: f64 = 2.0;

/// The bounds that currents give, over all contexts.
pub fn caps(roles: &Roles<'_>) -> Vec<Cap> {
    let reach = roles.reach;
    let walks: Walks<'_, Known> = Walks::default();
    let mut found: HashMap<(ContextIx, NetIx, NetIx), Interval> = HashMap::new();
    for at in reach.indices() {
        let context = reach.get(at).context;
        let template = reach.design.template(reach.contexts.get(context).variant);
        for device in template.devices() {
            let Terminals::Through { resistor: true, .. } = roles.terminals_of(context, device) else { continue };
            if let Some((net, rail, range)) = of_resistor(roles, &walks, at, device) {
                // One plan serves all that share a structure: the weakest of their bounds holds for each.
                let known = found.entry((context, net, rail)).or_insert(range);
                *known = Interval { lo: known.lo.min(range.lo), hi: known.hi.max(range.hi) };
            }
        }
    }
    let mut caps: Vec<Cap> = found
        .into_iter()
        .filter(|(_, range)| range.lo.is_finite() || range.hi.is_finite())
        .map(|((context, net, rail), range)| Cap { context, net, rail, range })
        .collect();
    caps.sort_by_key(|cap| (cap.context, cap.net, cap.rail));
    caps
}

/// What a resistor between a rail and another net bounds: the net, the rail, and V(net) − V(rail); in all surroundings.
fn of_resistor<'r>(
    roles: &'r Roles<'r>,
    walks: &Walks<'r, Known>,
    at: ReachIx,
    device: DeviceIx,
) -> Option<(NetIx, NetIx, Interval)> {
    let context = roles.reach.contexts.get(roles.reach.get(at).context);
    let pins = roles.design().template(context.variant).device_pins(device);
    let (a, b) = (context.root(*pins.first()?), context.root(*pins.get(1)?));
    let structure = roles.reach.get(at).context;
    if !roles.may_be_held(structure, a) && !roles.may_be_held(structure, b) {
        return None;
    }
    let mut standing = Standing { anchor: at, path: Vec::new() };
    let mut surroundings = Surroundings::default();
    let mut all: Option<(NetIx, NetIx, Interval)> = None;
    loop {
        let walk = walks.from(roles, standing.anchor);
        let mut walker = walk.walker.borrow_mut();
        walker.begin();
        let unit = walker.unit(&standing.path, device);
        let (a, b) = (Net { spot: unit.spot, net: a }, Net { spot: unit.spot, net: b });
        let (net, rail) = match (walker.is_rail(a), walker.is_rail(b)) {
            (false, true) => (a, b),
            (true, false) => (b, a),
            _ => return None,
        };
        let range = in_surroundings(&mut walker, &mut walk.beside.borrow_mut(), unit, net, rail);
        let above = walker.must_look_above();
        if !above {
            let known = &mut all.get_or_insert((net.net, rail.net, range)).2;
            *known = Interval { lo: known.lo.min(range.lo), hi: known.hi.max(range.hi) };
        }
        drop(walker);
        match surroundings.next(roles, standing, above) {
            Some(next) => standing = next,
            // Where not all surroundings were seen, nothing is said.
            None if surroundings.are_cut() => return None,
            None => return all,
        }
    }
}

fn in_surroundings(walker: &mut Walker<'_>, known: &mut Known, unit: Unit, net: Net, rail: Net) -> Interval {
    let modes = walker.ground.reach.modes.len();
    let held = (0..modes)
        .map(|mode| walker.volts(mode, net, rail))
        .fold(Interval::point(0.0), |all, range| Interval { lo: all.lo.min(range.lo), hi: all.hi.max(range.hi) });
    let mut currents = Currents::new(walker, known);
    let Some(ohms) = currents.resistance(unit) else { return Interval::ANY };
    let mut away = |down: bool| currents.pulling(unit, net, rail, down).map(|amps| amps * ohms);
    // A bound that says no more than the ranges already do is left out.
    let lo = away(true).map(|volts| -volts).filter(|&lo| lo > held.lo + 1e-6).unwrap_or(f64::NEG_INFINITY);
    let hi = away(false).filter(|&hi| hi < held.hi - 1e-6).unwrap_or(f64::INFINITY);
    Interval { lo, hi }
}

impl Currents<'_, '_> {
    /// The most current that pulls a net away from the rail that a resistor holds it to: below it, or above it. None where
    /// something pulls whose current is not known.
    fn pulling(&mut self, holder: Unit, net: Net, rail: Net, down: bool) -> Option<f64> {
        if self.walker.leads_out(net) || self.declared_into(net).is_some() {
            return None;
        }
        let mut total = 0.0;
        for on in self.walker.on(net)?.iter().filter(|on| on.unit != holder) {
            total += self.pull_of(on.unit, on.touch, net, rail, down)?;
        }
        Some(total)
    }

    fn pull_of(&mut self, unit: Unit, touch: Touch, net: Net, rail: Net, down: bool) -> Option<f64> {
        match touch {
            Touch::Gate { .. } | Touch::Capacitor | Touch::Nothing => Some(0.0),
            // A body is the far end of the junctions of its own device; here it stands on the net itself.
            Touch::Body => {
                let mos = self.walker.mos(unit)?;
                let ends = [mos.d, mos.s];
                // The junctions of n-channel bodies take current out of the net, those of p-channel bodies bring some.
                let harmless = mos.n != down
                    || ends.iter().all(|&end| self.walker.same(end, net) || self.stays_beyond(end, rail, down));
                harmless.then_some(0.0)
            }
            Touch::Still => {
                let mos = self.walker.mos(unit)?;
                self.junction_of(mos.n, mos.b, net, rail, down)
            }
            Touch::Drain { n } | Touch::Source { n } => {
                let mos = self.walker.mos(unit)?;
                let junction = self.junction_of(n, mos.b, net, rail, down)?;
                let at_drain = matches!(touch, Touch::Drain { .. });
                let far = if at_drain { mos.s } else { mos.d };
                if self.stays_beyond(far, rail, down) {
                    return Some(junction);
                }
                // Only a channel that conducts the way it is drawn has a current that is known.
                if !at_drain || n != down {
                    return None;
                }
                let current = self.of(unit)?;
                Some(junction + current.amps * if current.by_ratio { BY_RATIO } else { 1.0 })
            }
            Touch::Resistor => {
                let far = self.walker.other_end(unit, net)?;
                if self.stays_beyond(far, rail, down) {
                    return Some(0.0);
                }
                Some(self.through_resistor(unit)?.amps)
            }
            Touch::CurrentSource => self.source_range(unit).map(|(lo, hi)| lo.abs().max(hi.abs())),
            Touch::Anode | Touch::Cathode => {
                let class = self.walker.class(unit)?;
                let far = self.walker.other_end(unit, net)?;
                let breaks = class.clamp.map_or(f64::INFINITY, |clamp| clamp.hi);
                let forward = (touch == Touch::Anode) == down;
                let still = self.stays_beyond(far, rail, down) || (!forward && breaks == f64::INFINITY);
                still.then_some(0.0)
            }
            Touch::Conductor => None,
        }
    }

    /// What a drain's or source's junction to its body pulls: nothing, or what is not known.
    fn junction_of(&mut self, n: bool, body: Option<Net>, net: Net, rail: Net, down: bool) -> Option<f64> {
        // The junction of an n-channel device brings current from its body, that of a p-channel one takes it there.
        let Some(body) = body else { return Some(0.0) };
        let harmless = n == down || self.walker.same(body, net) || self.stays_beyond(body, rail, down);
        harmless.then_some(0.0)
    }

    /// Whether a net cannot pull another below a rail (or above it): it never is on that side of the rail itself.
    fn stays_beyond(&mut self, far: Net, rail: Net, down: bool) -> bool {
        if self.walker.same(far, rail) {
            return true;
        }
        (0..self.walker.ground.reach.modes.len()).all(|mode| {
            let above = self.walker.volts(mode, far, rail);
            if down { above.lo >= -1e-9 } else { above.hi <= 1e-9 }
        })
    }
}
