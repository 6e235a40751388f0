//! All contexts of a design with their reaches: the fixpoint from the top, then every cell in each of its surroundings.

use super::frames::{Frames, TopFacts};
use super::interval::Interval;
use super::plan::{Cap, Ground, PairBounds, Plans};
use super::solve::{Answer, InputKey, Inputs, Solver};
use super::state::State;
use super::terminals::{Terminals, table};
use crate::declared::{Deck, End};
use crate::design::{Design, InstanceIx, NetIx};
use crate::diag::Diagnostic;
use crate::graph::{ContextIx, Contexts, Mark, paths, rail, rail_in_mode};
use hashbrown::HashMap;
use std::cell::RefCell;
use std::rc::Rc;

/// Index in [`Reach::all`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct ReachIx(pub u32);

/// A context whose ports bring the same in every mode and frame.
#[derive(Debug)]
pub struct ReachContext {
    /// The cell and its structural surroundings.
    pub context: ContextIx,
    /// Which top it belongs to, by index in `Reach::frames`.
    pub top: u32,
    /// How many instances of the design are in it (saturating).
    pub count: u64,
    /// Who leads here.
    pub parents: Vec<(ReachIx, InstanceIx)>,
    /// Where each instance statement leads.
    pub children: Vec<ReachIx>,
    /// Its nets in each mode.
    pub states: Vec<State>,
    pub(super) tied: Vec<bool>,
    pub(super) open: Vec<bool>,
    /// For each mode.
    pub(super) bounds: Vec<PairBounds>,
    pub(super) caps: Vec<HashMap<NetIx, Vec<f64>>>,
}

/// The reach of everything.
pub struct Reach<'r> {
    /// The design.
    pub design: &'r Design<'r>,
    /// Its structural contexts.
    pub contexts: &'r Contexts,
    /// The deck.
    pub deck: &'r Deck,
    /// Modes that were judged: index in the deck; one entry of none where it has no modes.
    pub modes: Vec<Option<usize>>,
    /// For each top, its frames.
    pub frames: Vec<Frames>,
    /// All contexts, tops first.
    pub all: Vec<ReachContext>,
    /// Contradictions of the deck that only the netlist shows.
    pub diagnostics: Vec<Diagnostic>,
    pub(super) plans: Plans,
    pub(super) asked: Vec<Vec<(ContextIx, u32, Inputs)>>,
    terminals: Vec<Terminals>,
}

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
    known: RefCell<HashMap<InputKey, u32>>,
    answers: RefCell<Vec<Rc<Answer>>>,
    asked: RefCell<Vec<(ContextIx, u32, Inputs)>>,
    /// Finished states of large cells, by the answer's number: running them once more would cost more than keeping them.
    kept: RefCell<HashMap<u32, State>>,
}

/// Cells of at least this many nets keep the state of their answers.
const LARGE_CELL: usize = 4096;

impl<'s> Shared<'s> {
    pub(super) fn new(reach: &'s Reach<'_>, frames: &'s Frames) -> Shared<'s> {
        Shared {
            design: reach.design,
            contexts: reach.contexts,
            deck: reach.deck,
            plans: &reach.plans,
            terminals: &reach.terminals,
            frames,
            modes: &reach.modes,
            span: span(frames, reach.modes.len(), &reach.plans),
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
        let large = self.design.template(self.contexts.get(at).variant).nets.len() >= LARGE_CELL;
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

    /// What contexts were asked, by the numbers of the answers.
    pub(super) fn into_asked(self) -> Vec<(ContextIx, u32, Inputs)> {
        self.asked.into_inner()
    }

    /// The finished state of an answer to these inputs, if it was kept; it is given away.
    fn kept_state(&self, key: &InputKey) -> Option<State> {
        let number = *self.known.borrow().get(key)?;
        self.kept.borrow_mut().remove(&number)
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

impl<'r> Reach<'r> {
    /// Computes the reach of every net in every mode (`modes`: indices of the deck's modes to judge; empty: all).
    pub fn new(design: &'r Design<'r>, contexts: &'r Contexts, deck: &'r Deck, only: &[usize]) -> Reach<'r> {
        Reach::narrowed(design, contexts, deck, only, &[])
    }

    /// The same under further bounds between nets, sorted by context.
    pub fn narrowed(
        design: &'r Design<'r>,
        contexts: &'r Contexts,
        deck: &'r Deck,
        only: &[usize],
        caps: &[Cap],
    ) -> Reach<'r> {
        let modes: Vec<Option<usize>> = match deck.modes.len() {
            0 => vec![None],
            all => (0..all).filter(|mode| only.is_empty() || only.contains(mode)).map(Some).collect(),
        };
        let terminals = table(design);
        let plans = Plans::new(Ground { design, contexts, deck, terminals: &terminals, caps });
        let mut reach = Reach {
            design,
            contexts,
            deck,
            modes,
            frames: Vec::new(),
            all: Vec::new(),
            diagnostics: Vec::new(),
            plans,
            asked: Vec::new(),
            terminals,
        };
        for top in contexts.indices().filter(|&at| contexts.get(at).parents.is_empty()) {
            reach.add_top(top);
        }
        reach.count();
        reach
    }

    pub(super) fn terminals(&self) -> &[Terminals] {
        &self.terminals
    }

    /// The contexts alone, without a voltage: for runs whose rules ask for none. It has no modes.
    pub fn structural(design: &'r Design<'r>, contexts: &'r Contexts, deck: &'r Deck) -> Reach<'r> {
        let same = |at: &ContextIx| ReachIx(at.0);
        let all = contexts.indices().map(|at| {
            let context = contexts.get(at);
            ReachContext {
                context: at,
                top: 0,
                count: context.count,
                parents: context.parents.iter().map(|(above, instance)| (same(above), *instance)).collect(),
                children: context.children.iter().map(same).collect(),
                states: Vec::new(),
                tied: Vec::new(),
                open: Vec::new(),
                bounds: Vec::new(),
                caps: Vec::new(),
            }
        });
        Reach {
            design,
            contexts,
            deck,
            modes: Vec::new(),
            frames: Vec::new(),
            all: all.collect(),
            diagnostics: Vec::new(),
            plans: Plans { all: Vec::new() },
            asked: Vec::new(),
            terminals: Vec::new(),
        }
    }

    /// A context.
    pub fn get(&self, at: ReachIx) -> &ReachContext {
        &self.all[at.0 as usize]
    }

    /// All indices.
    pub fn indices(&self) -> impl Iterator<Item = ReachIx> + use<> {
        (0..self.all.len() as u32).map(ReachIx)
    }

    /// The dotted path of the first instance in a context; empty for a top.
    pub fn path(&self, at: ReachIx) -> String {
        paths::all(at.0, 1, |at| self.above(at)).0.pop().unwrap_or_default()
    }

    /// The paths of the instances in a context, at most `limit`, and whether those are all.
    pub fn paths(&self, at: ReachIx, limit: usize) -> (Vec<String>, bool) {
        paths::all(at.0, limit, |at| self.above(at))
    }

    fn above(&self, at: u32) -> Vec<(u32, &str)> {
        let parents = &self.all[at as usize].parents;
        let name = |above: ReachIx, instance| {
            let context = self.contexts.get(self.get(above).context);
            self.design.instance_name(self.design.template(context.variant), instance)
        };
        parents.iter().map(|&(above, instance)| (above.0, name(above, instance))).collect()
    }

    /// The dotted names of instance statements that lead down from a context.
    pub fn path_down(&self, from: ReachIx, path: &[InstanceIx]) -> String {
        let mut here = from;
        let mut names = Vec::with_capacity(path.len());
        for &instance in path {
            let context = self.contexts.get(self.get(here).context);
            names.push(self.design.instance_name(self.design.template(context.variant), instance));
            here = self.get(here).children[instance.0 as usize];
        }
        names.join(".")
    }

    /// The name of a judged mode; none where the deck has no modes.
    pub fn mode_name(&self, mode: usize) -> Option<&'r str> {
        self.modes[mode].map(|mode| self.deck.modes[mode].name.as_str())
    }

    fn add_top(&mut self, at: ContextIx) {
        let context = self.contexts.get(at);
        let template = self.design.template(context.variant);
        let plan = self.plans.get(at);
        let find = |name: &str| {
            let name = self.design.names.find(name)?;
            template.nets.iter().position(|&net| net == name).map(|index| context.root(NetIx(index as u32)))
        };
        let facts = TopFacts {
            at,
            contexts: self.contexts,
            deck: self.deck,
            ground: find("0"),
            sources: &plan.sources,
            carries: &|net| plan.carries[net.0 as usize],
            name: &|net| self.design.net_name(template, net).to_owned(),
            net_named: &find,
            modes: &self.modes,
        };
        let frames = Frames::new(&facts, &mut self.diagnostics);
        let top = self.frames.len() as u32;
        let (contexts, asked) = Expander::new(self, &frames, top, self.all.len() as u32).run(at);
        self.all.extend(contexts);
        self.asked.push(asked);
        self.frames.push(frames);
    }

    /// Counts instances from the tops down, callers first (Kahn).
    fn count(&mut self) {
        let mut open: Vec<u32> = self.all.iter().map(|context| context.parents.len() as u32).collect();
        let mut ready: Vec<u32> = (0..self.all.len() as u32).filter(|&at| open[at as usize] == 0).collect();
        for &top in &ready {
            self.all[top as usize].count = 1;
        }
        while let Some(at) = ready.pop() {
            let (count, children) = (self.all[at as usize].count, std::mem::take(&mut self.all[at as usize].children));
            for child in &children {
                let below = &mut self.all[child.0 as usize];
                below.count = below.count.saturating_add(count);
                open[child.0 as usize] -= 1;
                if open[child.0 as usize] == 0 {
                    ready.push(child.0);
                }
            }
            self.all[at as usize].children = children;
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

/// Finds the reach contexts under one top.
struct Expander<'e> {
    shared: Shared<'e>,
    top: u32,
    base: u32,
    known: HashMap<Vec<InputKey>, ReachIx>,
    all: Vec<ReachContext>,
}

impl<'e> Expander<'e> {
    fn new(reach: &'e Reach<'_>, frames: &'e Frames, top: u32, base: u32) -> Expander<'e> {
        Expander { shared: Shared::new(reach, frames), top, base, known: HashMap::new(), all: Vec::new() }
    }

    fn run(mut self, at: ContextIx) -> (Vec<ReachContext>, Vec<(ContextIx, u32, Inputs)>) {
        let modes = self.shared.modes.len();
        let inputs = (0..modes).map(|_| self.outside(at)).collect();
        self.add(at, inputs);
        let mut next = 0;
        while next < self.all.len() {
            self.expand(next);
            next += 1;
        }
        (self.all, self.shared.asked.into_inner())
    }

    /// What a top gets from outside: nothing at all.
    fn outside(&self, at: ContextIx) -> Inputs {
        let template = self.shared.design.template(self.shared.contexts.get(at).variant);
        let ports = template.boundary().count();
        let tied = |net: NetIx| self.shared.frames.rails.binary_search(&self.shared.contexts.get(at).root(net)).is_ok();
        Inputs {
            values: vec![super::state::NOTHING; ports * self.shared.frames.all.len() * 2],
            driven: vec![false; ports],
            fixed: vec![false; ports],
            tied: template.boundary().map(tied).collect(),
            open: template.boundary().map(|net| !tied(net)).collect(),
            caps: Vec::new(),
            bounds: Vec::new(),
        }
    }

    fn add(&mut self, at: ContextIx, inputs: Vec<Inputs>) -> ReachIx {
        let index = ReachIx(self.base + self.all.len() as u32);
        let mut states = Vec::with_capacity(inputs.len());
        let (mut tied, mut open, mut bounds, mut caps) = (Vec::new(), Vec::new(), Vec::new(), Vec::new());
        for (mode, inputs) in inputs.iter().enumerate() {
            let mut solver = Solver::new(&self.shared, at, mode as u32, inputs, true);
            match self.shared.kept_state(&inputs.key(at, mode as u32)) {
                Some(state) => solver.state = state,
                None => solver.run(),
            }
            states.push(std::mem::take(&mut solver.state));
            (tied, open) = (solver.tied, solver.open);
            bounds.push(solver.bounds);
            caps.push(solver.caps);
        }
        self.all.push(ReachContext {
            context: at,
            top: self.top,
            count: 0,
            parents: Vec::new(),
            children: Vec::new(),
            states,
            tied,
            open,
            bounds,
            caps,
        });
        index
    }

    fn expand(&mut self, index: usize) {
        let at = self.all[index].context;
        let context = self.shared.contexts.get(at);
        let instances = self.shared.design.template(context.variant).instances.len() as u32;
        if instances == 0 {
            return;
        }
        let per_instance = self.inputs_below(index, instances);
        for (instance, inputs) in per_instance.into_iter().enumerate() {
            let child = context.children[instance];
            let key: Vec<InputKey> =
                inputs.iter().enumerate().map(|(mode, inputs)| inputs.key(child, mode as u32)).collect();
            let below = match self.known.get(&key) {
                Some(&known) => known,
                None => {
                    let added = self.add(child, inputs);
                    self.known.insert(key, added);
                    added
                }
            };
            let here = ReachIx(self.base + index as u32);
            self.all[(below.0 - self.base) as usize].parents.push((here, InstanceIx(instance as u32)));
            self.all[index].children.push(below);
        }
    }

    /// For each instance, what the finished states bring to it in each mode.
    fn inputs_below(&mut self, index: usize, instances: u32) -> Vec<Vec<Inputs>> {
        let at = self.all[index].context;
        let mut per_instance = vec![Vec::new(); instances as usize];
        for mode in 0..self.shared.modes.len() {
            let here = &mut self.all[index];
            let state = std::mem::take(&mut here.states[mode]);
            let limits = (std::mem::take(&mut here.bounds[mode]), std::mem::take(&mut here.caps[mode]));
            let groups = (std::mem::take(&mut here.tied), std::mem::take(&mut here.open));
            let solver = Solver::finished(&self.shared, at, mode as u32, state, groups, limits);
            for (instance, inputs) in per_instance.iter_mut().enumerate() {
                inputs.push(solver.inputs_for(InstanceIx(instance as u32)));
            }
            let here = &mut self.all[index];
            (here.states[mode], here.bounds[mode], here.caps[mode]) = (solver.state, solver.bounds, solver.caps);
            (here.tied, here.open) = (solver.tied, solver.open);
        }
        per_instance
    }
}
