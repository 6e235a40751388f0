//! What all runs under one top share: the design, its rings, and the answers that its contexts gave.

use super::expand::Reach;
use super::frames::Frames;
use super::held::Held;
use super::inputs::{Answer, InputKey, Inputs};
use super::interval::Interval;
use super::plan::Plans;
use super::rings::Rings;
use super::solve::Solver;
use super::state::State;
use super::terminals::Terminals;
use crate::declared::{Deck, End};
use crate::design::{Design, NetIx, Template};
use crate::graph::{ContextIx, Contexts, Mark, rail, rail_in_mode};
use hashbrown::HashMap;
use std::borrow::Cow;
use std::cell::RefCell;
use std::rc::Rc;
use std::sync::Arc;

/// What all runs under one top share.
pub(super) struct Shared<'s> {
    pub(super) design: &'s Design<'s>,
    pub(super) contexts: &'s Contexts,
    pub(super) deck: &'s Deck,
    pub(super) plans: &'s Plans,
    pub(super) terminals: &'s [Terminals],
    pub(super) frames: &'s Frames,
    pub(super) modes: &'s [Option<usize>],
    /// The highest that any net can be by rails and sources alone, volts; also its negative.
    pub(super) span: f64,
    pub(super) rings: Cow<'s, Rings>,
    pub(super) held: RefCell<Arc<Held>>,
    known: RefCell<HashMap<InputKey, u32>>,
    answers: RefCell<Vec<Rc<Answer>>>,
    pub(super) asked: RefCell<Vec<(ContextIx, u32, Inputs)>>,
    /// Finished states of large cells, by the answer's number: running them once more would cost more than keeping them.
    kept: RefCell<HashMap<u32, State>>,
}

/// Cells of at least this many nets keep the state of their answers.
const LARGE_CELL: usize = 4096;

impl<'s> Shared<'s> {
    pub(super) fn new(reach: &'s Reach<'_>, frames: &'s Frames, at: ContextIx) -> Shared<'s> {
        let mut shared = Shared::before_rings(reach, frames);
        shared.rings = Cow::Owned(Rings::new(&shared, at));
        shared
    }

    /// To run again what was run under a top.
    pub(super) fn again(reach: &'s Reach<'_>, top: usize) -> Shared<'s> {
        Shared {
            rings: Cow::Borrowed(&reach.rings[top]),
            held: RefCell::new(Arc::clone(&reach.held[top])),
            ..Shared::before_rings(reach, &reach.frames[top])
        }
    }

    fn before_rings(reach: &'s Reach<'_>, frames: &'s Frames) -> Shared<'s> {
        Shared {
            design: reach.design,
            contexts: reach.contexts,
            deck: reach.deck,
            plans: &reach.plans,
            terminals: reach.terminals(),
            frames,
            modes: &reach.modes,
            span: span(frames, reach.modes.len(), &reach.plans),
            rings: Cow::default(),
            held: RefCell::default(),
            known: RefCell::default(),
            answers: RefCell::default(),
            asked: RefCell::default(),
            kept: RefCell::default(),
        }
    }

    /// What a context adds to its ports for these inputs, and the answer's number.
    pub(super) fn answer(&self, at: ContextIx, mode: u32, inputs: Inputs) -> (u32, Rc<Answer>) {
        let key = inputs.key(at, mode);
        if let Some(&number) = self.known.borrow().get(&key) {
            return (number, Rc::clone(&self.answers.borrow()[number as usize]));
        }
        let large = self.template_of(at).nets.len() >= LARGE_CELL;
        let mut solver = Solver::new(self, at, mode, &inputs, large);
        solver.run();
        let answer = Rc::new(Answer::of(&solver.state, solver.template, solver.context));
        let number = self.answers.borrow().len() as u32;
        self.answers.borrow_mut().push(Rc::clone(&answer));
        if large {
            self.kept.borrow_mut().insert(number, std::mem::take(&mut solver.state));
        }
        let mut known = self.known.borrow_mut();
        // Told its own answer, the context adds nothing more: asking again is answered at once, at every level.
        known.insert(inputs.with(&answer).key(at, mode), number);
        known.insert(key, number);
        drop(known);
        self.asked.borrow_mut().push((at, mode, inputs));
        (number, answer)
    }

    pub(super) fn template_of(&self, at: ContextIx) -> &'s Template {
        self.design.template(self.contexts.get(at).variant)
    }

    /// What contexts were asked, by the numbers of the answers.
    pub(super) fn into_asked(self) -> Vec<(ContextIx, u32, Inputs)> {
        self.asked.into_inner()
    }

    /// The finished state of an answer to these inputs, if it was kept; it is given away.
    pub(super) fn kept_state(&self, key: &InputKey) -> Option<State> {
        let number = *self.known.borrow().get(key)?;
        self.kept.borrow_mut().remove(&number)
    }

    /// Gives a finished state back, for whoever asks next.
    pub(super) fn keep_state(&self, key: &InputKey, state: State) {
        if let Some(&number) = self.known.borrow().get(key) {
            self.kept.borrow_mut().insert(number, state);
        }
    }

    /// The rails that are declared in a context itself, with their values in each frame.
    pub(super) fn rails_in(&self, at: ContextIx, mode: u32) -> Vec<(NetIx, Vec<Interval>)> {
        let context = self.contexts.get(at);
        if context.parents.is_empty() {
            let values = |net: NetIx| {
                (0..self.frames.all.len())
                    .map(|frame| self.frames.value(mode as usize, net, frame))
                    .collect::<Option<Vec<_>>>()
            };
            return self.frames.rails.iter().filter_map(|&net| Some((net, values(net)?))).collect();
        }
        let template = self.design.template(context.variant);
        let boundary: Vec<NetIx> = if context.marked().is_empty() {
            Vec::new()
        } else {
            template.boundary().map(|net| context.root(net)).collect()
        };
        let inner = context.marked().iter().filter(|(net, _)| !boundary.contains(net));
        inner.filter_map(|&(net, set)| Some((net, self.inner_rail(self.contexts.marks.of(set), mode)?))).collect()
    }

    /// A rail inside an instance: its ends are converted through ground.
    fn inner_rail(&self, marks: &[Mark], mode: u32) -> Option<Vec<Interval>> {
        let slot = rail_in_mode(self.deck, marks, self.modes[mode as usize])?;
        let declared = rail(self.deck, slot);
        let frames = 0..self.frames.all.len();
        Some(
            frames
                .map(|frame| Interval {
                    lo: self.end(&declared.low, mode, frame).lo,
                    hi: self.end(&declared.high, mode, frame).hi,
                })
                .collect(),
        )
    }

    fn end(&self, end: &End, mode: u32, frame: usize) -> Interval {
        match end {
            End::Volts(volts) => {
                match self.frames.all[frame].net.and_then(|net| self.frames.value(mode as usize, net, 0)) {
                    Some(base) => Interval { lo: volts - base.hi, hi: volts - base.lo },
                    None => Interval::point(*volts),
                }
            }
            End::Net { net, offset } => {
                let top = self
                    .frames
                    .all
                    .iter()
                    .find(|frame| frame.name.eq_ignore_ascii_case(net))
                    .and_then(|frame| frame.net);
                let value = top.and_then(|net| self.frames.value(mode as usize, net, frame)).unwrap_or(Interval::ANY);
                Interval { lo: value.lo + offset, hi: value.hi + offset }
            }
        }
    }
}

/// The highest voltage, of either sign, that rails and sources can add up to.
fn span(frames: &Frames, modes: usize, plans: &Plans) -> f64 {
    let rails = (0..modes).flat_map(|mode| {
        let values = frames
            .rails
            .iter()
            .flat_map(move |&net| (0..frames.all.len()).filter_map(move |frame| frames.value(mode, net, frame)));
        values.flat_map(|value| [value.lo.abs(), value.hi.abs()]).filter(|volts| volts.is_finite())
    });
    let sources =
        plans.all.iter().flat_map(|plan| &plan.sources).map(|link| link.range.lo.abs().max(link.range.hi.abs()));
    rails.fold(0.0, f64::max) + sources.filter(|volts| volts.is_finite()).sum::<f64>()
}
