//! The rounds that settle rings: which of their conditions are ruled out.
//!
//! In the first round every gate in a ring may be anywhere: its channel conducts. The least fixpoint under that has all that
//! the circuit can do, whichever state it keeps. So where the ranges that come out keep a gate from ever turning its channel on,
//! it is off in all states: it is ruled out from the next round on; and so on, until a round rules out nothing more or
//! [`MOST_ROUNDS`] have passed. Each round is sound by the one before it, so any may be the last. (A descending iteration over
//! the conditions, in the manner of P. Cousot and R. Cousot, "Abstract interpretation", POPL 1977, from memory.)
//! A latch that nothing forces is done after one round; where an input forces one of its nets, the next rounds settle the other.
//!
//! What is ruled out belongs to instances. It is kept as a tree along the hierarchy, with equal branches kept once, so that
//! equal instances stay one question.

use super::inputs::{InputKey, Inputs};
use super::rings::{NO_RING, RingIx};
use super::shared::Shared;
use super::solve::Solver;
use crate::design::InstanceIx;
use crate::graph::ContextIx;
use hashbrown::HashMap;
use std::sync::Arc;

/// Index of what is ruled out in an instance and in all below it.
pub(super) type HeldIx = u32;

/// Nothing is, here and below.
pub(super) const WIDEST: HeldIx = 0;

/// After so many rounds the ranges are taken as they are: each is a whole run. What an input forces settles one gate further
/// along a ring in each.
const MOST_ROUNDS: usize = 8;

/// All that is ruled out under one top.
#[derive(Clone, Debug)]
pub(super) struct Held {
    all: Vec<Node>,
    known: HashMap<(RingIx, Node), HeldIx>,
}

#[derive(Clone, Debug, Default, PartialEq, Eq, Hash)]
struct Node {
    /// A bit for each device and end of its channel; empty where nothing is ruled out.
    ruled_out: Arc<[u64]>,
    /// For each instance statement; empty where nothing is ruled out below.
    below: Vec<HeldIx>,
}

impl Default for Held {
    fn default() -> Held {
        Held { all: vec![Node::default()], known: HashMap::new() }
    }
}

impl Held {
    /// The bits of a context's own devices.
    pub(super) fn ruled_out(&self, held: HeldIx) -> Arc<[u64]> {
        Arc::clone(&self.all[held as usize].ruled_out)
    }

    pub(super) fn below(&self, held: HeldIx, instance: InstanceIx) -> HeldIx {
        self.all[held as usize].below.get(instance.0 as usize).copied().unwrap_or(WIDEST)
    }

    fn add(&mut self, ring: RingIx, node: Node) -> HeldIx {
        if node == Node::default() {
            return WIDEST;
        }
        let all = &mut self.all;
        *self.known.entry((ring, node)).or_insert_with_key(|(_, node)| {
            all.push(node.clone());
            all.len() as HeldIx - 1
        })
    }
}

/// Runs a top in one mode, in as many rounds as its rings take. The inputs are left with what is ruled out in the last one.
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
    /// What a finished run rules out of the conditions in rings, here and below, with what was ruled out before.
    fn narrowed(&mut self, run: &Solver<'_>, inputs: &Inputs) -> HeldIx {
        let ring = self.shared.rings.get(inputs.ring);
        let mut ruled_out = run.ruled_out.to_vec();
        for device in ring.held() {
            for (end, _) in run.rules_out(device).iter().enumerate().filter(|(_, ruled_out)| **ruled_out) {
                let at = device.0 as usize * 2 + end;
                ruled_out.resize((run.template.device_count() * 2).div_ceil(64), 0);
                ruled_out[at / 64] |= 1 << (at % 64);
            }
        }
        let mut below = Vec::new();
        for instance in run.template.instance_indices().filter(|&instance| ring.below(instance) != NO_RING) {
            let held = self.below(run.context.children[instance.0 as usize], run.inputs_for(instance));
            if held != WIDEST {
                below.resize(run.template.instances.len(), WIDEST);
                below[instance.0 as usize] = held;
            }
        }
        self.shared.rule_out(inputs.ring, ruled_out, below)
    }

    fn below(&mut self, at: ContextIx, inputs: Inputs) -> HeldIx {
        let key = inputs.key(at, self.mode);
        if let Some(&known) = self.known.get(&key) {
            return known;
        }
        let mut run = Solver::new(self.shared, at, self.mode, &inputs, false);
        let kept = self.shared.kept_state(&key);
        let was_kept = kept.is_some();
        match kept {
            Some(state) => run.state = state,
            None => run.run(),
        }
        let narrowed = self.narrowed(&run, &inputs);
        // Where more is ruled out, nobody will ask for this run again.
        if was_kept && narrowed == inputs.held {
            self.shared.keep_state(&key, std::mem::take(&mut run.state));
        }
        self.known.insert(key, narrowed);
        narrowed
    }
}

impl Shared<'_> {
    fn rule_out(&self, ring: RingIx, ruled_out: Vec<u64>, below: Vec<HeldIx>) -> HeldIx {
        Arc::make_mut(&mut self.held.borrow_mut()).add(ring, Node { ruled_out: ruled_out.into(), below })
    }
}
