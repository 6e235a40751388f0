//! Currents narrow reach: how far a limited current can pull a net that a resistor holds to a rail.
//!
//! A net N that a resistor R holds to a rail, and that only elements of limited current pull away from it, cannot be pulled further
//! from that rail than the sum of their currents times R: a bound of V(N) − V(rail) like a clamp's. A level shifter that pulls a
//! bounded current through a resistor in a floating domain is safe for that reason alone.
//!
//! **Guarantee.** Every element that can take current out of N (or bring it, for the other sense) is counted at the most that it can
//! carry (`limits.rs`), or N has no bound. It holds for resistors of their nominal values, currents as declared, references and outputs
//! of a mirror that are alike, and no capacitor that kicks.

use super::limits::{Question, Way};
use super::{Currents, Known};
use crate::design::{DeviceIx, NetIx};
use crate::graph::ContextIx;
use crate::reach::{Cap, Interval, ReachIx, Terminals};
use crate::roles::{Net, Roles, Standing, Surroundings, Unit, Walker, Walks};
use hashbrown::HashMap;
use hashbrown::hash_map::Entry;

/// The bounds that currents give, over all contexts.
pub fn caps(roles: &Roles<'_>) -> Vec<Cap> {
    let reach = roles.reach;
    let walks: Walks<'_, Known> = Walks::default();
    let mut found: HashMap<(ContextIx, DeviceIx), Option<Held>> = HashMap::new();
    for at in reach.indices() {
        let context = reach.get(at).context;
        let template = reach.design.template(reach.contexts.get(context).variant);
        for device in template.devices() {
            let Terminals::Through { resistor: true, .. } = roles.terminals_of(context, device) else { continue };
            let held = of_resistor(roles, &walks, at, device);
            // One plan serves all that share a structure: the weakest of their bounds holds for each, and where one has none, none.
            match found.entry((context, device)) {
                Entry::Vacant(new) => {
                    new.insert(held);
                }
                Entry::Occupied(mut known) => {
                    let weaker = known.get().zip(held).and_then(|(known, held)| known.weaker(held));
                    known.insert(weaker);
                }
            }
        }
    }
    let bounds = found.into_iter().filter_map(|((context, _), held)| Some((context, held?)));
    let mut caps: Vec<Cap> = bounds
        .filter(|(_, held)| held.range.lo.is_finite() || held.range.hi.is_finite())
        .map(|(context, Held { net, rail, range })| Cap { context, net, rail, range })
        .collect();
    caps.sort_by(|a, b| {
        (a.context, a.net, a.rail).cmp(&(b.context, b.net, b.rail)).then(a.range.lo.total_cmp(&b.range.lo))
    });
    caps
}

/// A net that a resistor holds to a rail, and how far from it V(net) − V(rail) stays.
#[derive(Clone, Copy)]
struct Held {
    net: NetIx,
    rail: NetIx,
    range: Interval,
}

impl Held {
    fn weaker(self, other: Held) -> Option<Held> {
        let range = Interval { lo: self.range.lo.min(other.range.lo), hi: self.range.hi.max(other.range.hi) };
        ((self.net, self.rail) == (other.net, other.rail)).then_some(Held { range, ..self })
    }
}

/// What a resistor between a rail and another net bounds, in all surroundings; none where it is none, or bounds nothing.
fn of_resistor<'r>(roles: &'r Roles<'r>, walks: &Walks<'r, Known>, at: ReachIx, device: DeviceIx) -> Option<Held> {
    let context = roles.reach.contexts.get(roles.reach.get(at).context);
    let pins = roles.design().template(context.variant).device_pins(device);
    let (a, b) = (context.root(*pins.first()?), context.root(*pins.get(1)?));
    let structure = roles.reach.get(at).context;
    if !roles.may_be_held(structure, a) && !roles.may_be_held(structure, b) {
        return None;
    }
    let mut standing = Standing { anchor: at, path: Vec::new() };
    let mut surroundings = Surroundings::default();
    let mut all: Option<Held> = None;
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
            let held = Held { net: net.net, rail: rail.net, range };
            let weakest = all.map_or(Some(held), |all| all.weaker(held))?;
            if weakest.range == Interval::ANY {
                return None;
            }
            all = Some(weakest);
        }
        drop(walker);
        match surroundings.next(roles, standing, above) {
            Some(next) => standing = next,
            // Where not all surroundings were seen, nothing is said.
            None => return all.filter(|_| !surroundings.are_cut()),
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
    let mut away = |way: Way| currents.most_at(&mut Question::beyond(rail), net, unit, way).map(|amps| amps * ohms);
    // A bound that says no more than the ranges already do is left out.
    let lo = away(Way::Out).map(|volts| -volts).filter(|&lo| lo > held.lo + 1e-6).unwrap_or(f64::NEG_INFINITY);
    let hi = away(Way::In).filter(|&hi| hi < held.hi - 1e-6).unwrap_or(f64::INFINITY);
    Interval { lo, hi }
}
