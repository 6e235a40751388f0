//! The most current that can flow, whatever the circuit does: what caps on reach may stand on.
//!
//! Here every element that can carry current is counted with both its directions: channels that conduct backwards, body diodes,
//! junctions of drains, zeners in breakdown. (What `of` answers is a designer's reading: it takes mirrors to be
//! saturated, and body diodes to be off.) What has no bound has no answer.
//!
//! - An element can take current out of a net only towards a lower net: what reach says never to be lower takes none.
//! - A resistor carries at most what reach leaves across it.
//! - Through any element no more flows than the others at its far end, which is no rail, can take away.
//! - A mirror's output carries, in its own direction, at most its ratio times the most that reaches the drain of a reference of
//!   the same model, times what the drain's voltage adds ([`Currents::slope`]). The reference's gate must stand on its drain itself: behind a
//!   cascode that runs out of room, or a resistor, its drain can fall so far below its gate that its current says nothing.
//! - A channel whose gate never passes its threshold carries none. A declared current is believed.

use super::Currents;
use crate::roles::{Mos, Net, Touch, Unit};

/// How far from a net its currents are followed, in elements.
const FURTHEST: usize = 8;

/// At most so many elements are looked at for one net.
const MOST_LOOKS: usize = 2000;

/// By how much a net may be beyond another and still count as level with it, volts.
const LEVEL: f64 = 1e-9;

/// Which way current goes at a net.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub(super) enum Way {
    /// Out of the net, to lower ones.
    Out,
    /// Into the net, from higher ones.
    In,
}

/// A question for the most current at one net.
#[derive(Default)]
pub(super) struct Question {
    beyond: Option<Net>,
    under_way: Vec<Unit>,
    looks: usize,
}

impl Question {
    /// A question that matters only while the net is beyond a rail: below it (out), or above it (in).
    pub(super) fn beyond(rail: Net) -> Question {
        Question { beyond: Some(rail), ..Question::default() }
    }
}

impl Currents<'_, '_> {
    /// The most that everything on a net, but for one element, takes out of it or brings into it; none where that is not known.
    pub(super) fn most_at(&mut self, question: &mut Question, net: Net, but: Unit, way: Way) -> Option<f64> {
        let net = self.walker.climb(net);
        let mut total = match self.declared_into(net) {
            Some(declared) if way == Way::Out => (-declared.amps.lo).max(0.0),
            Some(declared) => declared.amps.hi.max(0.0),
            None if self.walker.leads_out(net) => return None,
            None => 0.0,
        };
        for on in self.walker.on(net)?.iter().filter(|on| on.unit != but) {
            question.looks += 1;
            if question.looks > MOST_LOOKS {
                return None;
            }
            total += self.most_of(question, on.unit, on.touch, net, way)?;
        }
        total.is_finite().then_some(total)
    }

    fn most_of(&mut self, question: &mut Question, unit: Unit, touch: Touch, net: Net, way: Way) -> Option<f64> {
        match touch {
            Touch::Gate { .. } | Touch::Capacitor | Touch::Nothing => Some(0.0),
            Touch::Body => self.junctions_of_body(question, unit, net, way),
            Touch::Drain { .. } | Touch::Source { .. } | Touch::Still => {
                let mos = self.walker.mos(unit)?;
                if !self.junction_is_off(question, &mos, net, way) {
                    return None;
                }
                self.through_channel(question, unit, &mos, net, way)
            }
            Touch::Resistor => {
                let ohms = self.resistance(unit)?;
                let far = self.walker.other_end(unit, net)?;
                if self.leads_nowhere(question, far, net, way) {
                    return Some(0.0);
                }
                let volts = self.most_volts(net, far, way);
                least(Some(volts / ohms).filter(|amps| amps.is_finite()), self.beyond_it(question, unit, far, way))
            }
            Touch::CurrentSource => {
                let (lo, hi) = self.source_range(unit)?;
                let first = self.walker.first_net(unit)?;
                let other = self.walker.other_end(unit, net)?;
                if self.walker.same(net, other) {
                    return Some(0.0);
                }
                // It takes its current from its first net to its second.
                let leaves = self.walker.same(first, net) == (way == Way::Out);
                Some(if leaves { hi.max(0.0) } else { (-lo).max(0.0) })
            }
            Touch::Anode | Touch::Cathode => {
                let far = self.walker.other_end(unit, net)?;
                let forward = (touch == Touch::Anode) == (way == Way::Out);
                let breaks =
                    self.walker.class(unit).and_then(|class| class.clamp).is_some_and(|clamp| clamp.hi.is_finite());
                if !forward && !breaks || self.leads_nowhere(question, far, net, way) {
                    return Some(0.0);
                }
                self.beyond_it(question, unit, far, way)
            }
            Touch::Conductor => None,
        }
    }

    /// What a channel takes from a net, or brings to it.
    fn through_channel(&mut self, question: &mut Question, unit: Unit, mos: &Mos, net: Net, way: Way) -> Option<f64> {
        let at_drain = self.walker.same(mos.d, net);
        let far = if at_drain { mos.s } else { mos.d };
        if self.leads_nowhere(question, far, net, way) || self.never_conducts(unit, mos) {
            return Some(0.0);
        }
        if let Some(declared) = self.declared_through(unit) {
            return Some(declared.amps);
        }
        let forward = (mos.n == at_drain) == (way == Way::Out);
        let class = self.walker.class(unit);
        let depletion = class.and_then(|class| class.threshold).is_none_or(|threshold| threshold.lo < 0.0);
        if forward && !depletion && self.walker.same(mos.g, mos.s) {
            return Some(0.0);
        }
        // Its own junction may take from the far end what its channel brings there.
        let inside = mos.b.is_none_or(|b| self.walker.same(b, net) || self.walker.same(b, far));
        let beyond = if inside || self.junction_is_off(&Question::default(), mos, far, way) {
            self.beyond_it(question, unit, far, way)
        } else {
            None
        };
        least(beyond, if forward { self.mirrored(question, unit, mos) } else { None })
    }

    /// What the others at an element's far end can take from it (or bring to it).
    fn beyond_it(&mut self, question: &mut Question, unit: Unit, far: Net, way: Way) -> Option<f64> {
        if self.walker.is_rail(far) || question.under_way.len() >= FURTHEST || question.under_way.contains(&unit) {
            return None;
        }
        question.under_way.push(unit);
        let rail = question.beyond.take();
        let most = self.most_at(question, far, unit, way);
        question.beyond = rail;
        question.under_way.pop();
        most
    }

    /// What a mirror's output carries at most in its own direction.
    fn mirrored(&mut self, question: &mut Question, unit: Unit, mos: &Mos) -> Option<f64> {
        if question.under_way.len() >= FURTHEST || question.under_way.contains(&unit) {
            return None;
        }
        let mirror = self.walker.mirror(unit)?;
        let (_, own) = self.strength(unit)?;
        let slope = self.slope(mos)?;
        let way = if mos.n { Way::In } else { Way::Out };
        let rail = question.beyond.take();
        question.under_way.push(unit);
        let mut best = None;
        for &other in mirror.references.iter().filter(|&&other| other != unit) {
            if !self.repeats(unit, mos, other) {
                continue;
            }
            let (Some(its), Some((_, strength))) = (self.walker.mos(other), self.strength(other)) else { continue };
            let most = match self.declared_through(other) {
                Some(declared) => Some(declared.amps),
                None if self.walker.is_rail(its.d) => None,
                None => self.most_at(question, its.d, other, way),
            };
            best = least(best, most.map(|amps| amps * own / strength * slope));
        }
        question.under_way.pop();
        question.beyond = rail;
        best
    }

    /// Whether a reference's current bounds an output's: one model, the gate on the reference's own drain, no less drive.
    fn repeats(&mut self, unit: Unit, mos: &Mos, reference: Unit) -> bool {
        let Some(its) = self.walker.mos(reference) else { return false };
        if self.walker.model(unit) != self.walker.model(reference) || !self.walker.same(its.d, its.g) {
            return false;
        }
        let body_is_quiet = its.b.is_none_or(|b| self.walker.same(b, its.s) || self.is_level(b, its.d, !its.n));
        body_is_quiet && (self.walker.same(mos.s, its.s) || self.is_level(mos.s, its.s, mos.n))
    }

    /// What the drain's voltage adds to a mirror's ratio at most, as a factor: two up to 20 V, and 5 %/V (an Early voltage
    /// of 20 V: short channels; common practice, no source).
    fn slope(&self, mos: &Mos) -> Option<f64> {
        let (high, low) = if mos.n { (mos.d, mos.s) } else { (mos.s, mos.d) };
        let volts = self.highest(high, low);
        volts.is_finite().then(|| 1.0 + (volts / 20.0).max(1.0))
    }

    /// Whether the gate of a channel never passes its threshold, at either end, in any mode.
    fn never_conducts(&self, unit: Unit, mos: &Mos) -> bool {
        let Some(threshold) = self.walker.class(unit).and_then(|class| class.threshold) else { return false };
        [mos.d, mos.s].iter().all(|&end| {
            let drive = if mos.n { self.highest(mos.g, end) } else { self.highest(end, mos.g) };
            drive <= threshold.lo - LEVEL
        })
    }

    /// Whether the junction between a drain or source and its body brings nothing to the net (or takes nothing from it). That of
    /// an n-channel device brings current from its body, that of a p-channel one takes it there.
    fn junction_is_off(&self, question: &Question, mos: &Mos, net: Net, way: Way) -> bool {
        let Some(body) = mos.b else { return true };
        mos.n == (way == Way::Out) || self.walker.same(body, net) || self.leads_nowhere(question, body, net, way)
    }

    /// What the junctions of a body that stands on the net take from it: nothing, or what is not known.
    fn junctions_of_body(&mut self, question: &mut Question, unit: Unit, net: Net, way: Way) -> Option<f64> {
        let mos = self.walker.mos(unit)?;
        let off = mos.n != (way == Way::Out)
            || [mos.d, mos.s]
                .iter()
                .all(|&end| self.walker.same(end, net) || self.leads_nowhere(question, end, net, way));
        off.then_some(0.0)
    }

    /// Whether no current can go from a net to a far one (or come from there): it never is lower (higher), whatever the mode.
    fn leads_nowhere(&self, question: &Question, far: Net, net: Net, way: Way) -> bool {
        let bases = [Some(net), question.beyond];
        bases.into_iter().flatten().any(|base| self.is_level(far, base, way == Way::Out))
    }

    /// Whether a net is never below another (or never above it).
    fn is_level(&self, net: Net, base: Net, not_below: bool) -> bool {
        let (high, low) = if not_below { (base, net) } else { (net, base) };
        self.walker.same(net, base) || self.highest(high, low) <= LEVEL
    }

    fn most_volts(&self, net: Net, far: Net, way: Way) -> f64 {
        let (high, low) = if way == Way::Out { (net, far) } else { (far, net) };
        self.highest(high, low).max(0.0)
    }

    /// The most that a net can be above another, in any mode.
    fn highest(&self, high: Net, low: Net) -> f64 {
        let modes = 0..self.walker.ground.reach.modes.len();
        modes.map(|mode| self.walker.volts(mode, high, low).hi).fold(f64::NEG_INFINITY, f64::max)
    }
}

/// The smaller of two bounds, of which one may not be known.
fn least(a: Option<f64>, b: Option<f64>) -> Option<f64> {
    match (a, b) {
        (Some(a), Some(b)) => Some(a.min(b)),
        (a, b) => a.or(b),
    }
}
