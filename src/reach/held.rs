//! Held ranges: what the conditions in rings are judged by, and the rounds that narrow them.
//!
//! In the first round every gate in a ring may be anywhere: its channel conducts. The least fixpoint under that has all that
//! the circuit can do, whichever state it keeps. So the ranges that it gives those gates hold, and the conditions are judged by
//! them in the next round, which takes away what they rule out; and so on, until nothing narrows any more or
//! [`MOST_ROUNDS`] have passed. Each round is sound by the one before it, so any may be the last. (A descending iteration, as in
//! P. Cousot and R. Cousot, "Abstract interpretation", POPL 1977: a narrowing of conditions alone, from memory.)
//! A latch stays wide after the first round, and the second confirms it; where an input forces one of its
//! nets, the next rounds settle the other.
//!
//! Held ranges belong to instances. They are kept as a tree along the hierarchy, with equal branches kept once, so that equal instances
//! stay one question.

use super::inputs::{InputKey, Inputs};
use super::rings::{NO_RING, RingIx};
use super::shared::Shared;
use super::solve::Solver;
use super::state::Side;
use crate::design::InstanceIx;
use crate::graph::ContextIx;
use hashbrown::HashMap;
use std::sync::Arc;

/// Index of the held ranges of an instance and of all below it.
pub(super) type HeldIx = u32;

/// Anything is possible, here and below.
pub(super) const WIDEST: HeldIx = 0;

/// After so many rounds the ranges are taken as they are. Two do for latches; each ring that only another ring settles takes one more.
const MOST_ROUNDS: usize = 16;

/// Volts: a range that shrinks by less has not changed.
const CHANGE: f64 = 1e-9;

/// All held ranges under one top.
#[derive(Clone, Debug)]
pub(super) struct Held {
    all: Vec<Node>,
    known: HashMap<(RingIx, Vec<u64>, Vec<HeldIx>), HeldIx>,
}

#[derive(Clone, Debug, Default)]
struct Node {
    /// For each gate in a ring of the context, frame and side, as raises; empty where they are unbounded.
    values: Arc<[f64]>,
    /// For each instance statement; empty where nothing is held below.
    below: Vec<HeldIx>,
}

impl Default for Held {
    fn default() -> Held {
        Held { all: vec![Node::default()], known: HashMap::new() }
    }
}

impl Held {
    /// The ranges of a context's own gates; empty where they are unbounded.
    pub(super) fn values(&self, held: HeldIx) -> Arc<[f64]> {
        Arc::clone(&self.all[held as usize].values)
    }

    pub(super) fn below(&self, held: HeldIx, instance: InstanceIx) -> HeldIx {
        self.all[held as usize].below.get(instance.0 as usize).copied().unwrap_or(WIDEST)
    }

    fn add(&mut self, ring: RingIx, values: Vec<f64>, below: Vec<HeldIx>) -> HeldIx {
        let values = if values.iter().all(|value| *value == f64::INFINITY) { Vec::new() } else { values };
        let below = if below.iter().all(|&held| held == WIDEST) { Vec::new() } else { below };
        if values.is_empty() && below.is_empty() {
            return WIDEST;
        }
        let bits = values.iter().map(|value| if *value == 0.0 { 0 } else { value.to_bits() }).collect();
        let all = &mut self.all;
        *self.known.entry((ring, bits, below.clone())).or_insert_with(|| {
            all.push(Node { values: values.into(), below });
            all.len() as HeldIx - 1
        })
    }
}

/// Runs a top in one mode, in as many rounds as its rings take. The inputs are left with the ranges held in the last one.
pub(super) fn settle<'s>(shared: &'s Shared<'s>, at: ContextIx, mode: u32, inputs: &mut Inputs) -> Solver<'s> {
    let mut narrower = Narrower { shared, mode, known: HashMap::new() };
    let mut round = 1;
    loop {
        let mut solver = Solver::new(shared, at, mode, inputs, true);
        solver.run();
        if inputs.ring == NO_RING || round == MOST_ROUNDS {
            return solver;
        }
        let narrowed = narrower.narrowed(&solver, inputs);
        if narrowed == inputs.held {
            return solver;
        }
        inputs.held = narrowed;
        round += 1;
    }
}

struct Narrower<'n> {
    shared: &'n Shared<'n>,
    mode: u32,
    known: HashMap<InputKey, HeldIx>,
}

impl Narrower<'_> {
    /// What a finished run says of the gates in rings, here and below, in so far as it is narrower than what was held in it.
    fn narrowed(&mut self, run: &Solver<'_>, inputs: &Inputs) -> HeldIx {
        let ring = self.shared.rings.get(inputs.ring);
        let mut values = Vec::with_capacity(ring.gates.len() * run.state.frames * 2);
        for &gate in &ring.gates {
            for frame in 0..run.state.frames {
                let reach = run.state.reach(gate, frame);
                for (side, found) in [(Side::Hi, reach.hi), (Side::Lo, -reach.lo)] {
                    let held = run.held(gate, frame, side);
                    values.push(if found < held - CHANGE { found } else { held });
                }
            }
        }
        let below = run.template.instance_indices().map(|instance| match ring.below(instance) {
            NO_RING => WIDEST,
            _ => self.below(run.context.children[instance.0 as usize], run.inputs_for(instance)),
        });
        let below = below.collect();
        Arc::make_mut(&mut self.shared.held.borrow_mut()).add(inputs.ring, values, below)
    }

    fn below(&mut self, at: ContextIx, inputs: Inputs) -> HeldIx {
        let key = inputs.key(at, self.mode);
        if let Some(&known) = self.known.get(&key) {
            return known;
        }
        let mut solver = Solver::new(self.shared, at, self.mode, &inputs, false);
        solver.run();
        let narrowed = self.narrowed(&solver, &inputs);
        self.known.insert(key, narrowed);
        narrowed
    }
}
