//! The voltage between two nets, and why a net's range may be unknown.

use super::expand::{Reach, ReachContext, ReachIx};
use super::interval::Interval;
use crate::design::NetIx;
use crate::graph::Context;

/// Why a net's voltage is not known, in one mode.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Unknown {
    /// No conducting path ties it to a rail, whatever the gates do.
    Untied,
    /// An inductor can lift it beyond its supplies.
    Inductor,
    /// Nothing is known to pull it up.
    NothingUp,
    /// Nothing is known to pull it down.
    NothingDown,
    /// It hangs on a net whose voltage is unknown.
    Follows,
}

impl Unknown {
    /// In words, to stand after a net's name.
    pub fn words(self) -> &'static str {
        match self {
            Unknown::Untied => "no conducting path ties it to a rail",
            Unknown::Inductor => "an inductor can lift it beyond the supplies",
            Unknown::NothingUp => "nothing is known that pulls it up",
            Unknown::NothingDown => "nothing is known that pulls it down",
            Unknown::Follows => "it follows a net whose voltage is unknown",
        }
    }
}

impl Reach<'_> {
    /// V(x) − V(y) in a mode: what the frames say together, with what clamps and body diodes say; 0 where they are one net.
    pub fn between(&self, at: ReachIx, mode: usize, x: NetIx, y: NetIx) -> Interval {
        let here = self.get(at);
        self.between_here(here, self.contexts.get(here.context), mode, x, y)
    }

    /// The same, where the context is at hand.
    pub fn between_here(&self, here: &ReachContext, context: &Context, mode: usize, x: NetIx, y: NetIx) -> Interval {
        let (x, y) = (context.root(x), context.root(y));
        if x == y {
            return Interval::point(0.0);
        }
        let state = &here.states[mode];
        let mut between = Interval::ANY;
        for frame in 0..state.frames {
            let (of_x, of_y) = (state.reach(x, frame), state.reach(y, frame));
            between = between.and(Interval { lo: of_x.lo - of_y.hi, hi: of_x.hi - of_y.lo });
        }
        if state.is_fixed(x) && state.is_fixed(y) { between } else { between.and(self.bound(here, mode, x, y)) }
    }

    /// What clamps and body diodes say of V(x) − V(y), for roots.
    fn bound(&self, here: &ReachContext, mode: usize, x: NetIx, y: NetIx) -> Interval {
        self.plans.get(here.context).bounds.between(x, y).and(here.bounds[mode].between(x, y))
    }

    /// The reach of a net in a frame and mode.
    pub fn of(&self, at: ReachIx, mode: usize, net: NetIx, frame: usize) -> Interval {
        let here = self.get(at);
        here.states[mode].reach(self.contexts.get(here.context).root(net), frame)
    }

    /// Whether something conducting connects a net with a rail in a mode.
    pub fn is_driven(&self, at: ReachIx, mode: usize, net: NetIx) -> bool {
        let here = self.get(at);
        here.states[mode].is_driven(self.contexts.get(here.context).root(net))
    }

    /// Whether a net's value is given as a rail's in a mode.
    pub fn is_rail(&self, at: ReachIx, mode: usize, net: NetIx) -> bool {
        let here = self.get(at);
        let net = self.contexts.get(here.context).root(net);
        here.states[mode].is_fixed(net) && self.unknown(at, mode, net).is_none()
    }

    /// Whether no conducting path ties a net to any rail, whatever the gates do.
    pub fn is_untied(&self, at: ReachIx, net: NetIx) -> bool {
        let here = self.get(at);
        let net = self.contexts.get(here.context).root(net);
        !here.tied[self.plans.get(here.context).group(net) as usize]
    }

    /// Whether conducting paths, whatever the gates do, lead from a net to a port or global of the top that no rail declares.
    pub fn is_open(&self, at: ReachIx, net: NetIx) -> bool {
        let here = self.get(at);
        let net = self.contexts.get(here.context).root(net);
        here.open[self.plans.get(here.context).group(net) as usize]
    }

    /// Whether a body, source, resistor or diode stands on a net.
    pub fn carries(&self, at: ReachIx, net: NetIx) -> bool {
        let here = self.get(at);
        let net = self.contexts.get(here.context).root(net);
        self.plans.get(here.context).carries[net.0 as usize]
    }

    /// Why a net's range in the ground frame lacks an end; none where both are known.
    pub fn unknown(&self, at: ReachIx, mode: usize, net: NetIx) -> Option<Unknown> {
        let here = self.get(at);
        let context = self.contexts.get(here.context);
        let net = context.root(net);
        let state = &here.states[mode];
        let reach = state.reach(net, 0);
        if reach.lo.is_finite() && reach.hi.is_finite() {
            return None;
        }
        let plan = self.plans.get(here.context);
        Some(if !here.tied[plan.group(net) as usize] {
            Unknown::Untied
        } else if plan.inductor[net.0 as usize] && state.is_fixed(net) {
            Unknown::Inductor
        } else if state.value(net, 0, super::state::Side::Hi) == super::state::NOTHING {
            Unknown::NothingUp
        } else if state.value(net, 0, super::state::Side::Lo) == super::state::NOTHING {
            Unknown::NothingDown
        } else {
            Unknown::Follows
        })
    }
}
