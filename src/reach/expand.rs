//! All contexts of a design with their reaches: the fixpoint from the top, then every cell in each of its surroundings.

use super::bounds::{Caps, PairBounds};
use super::frames::{Frames, TopFacts};
use super::held::{Held, HeldIx, WIDEST, settle};
use super::inputs::{InputKey, Inputs};
use super::plan::{Cap, Ground, Plans};
use super::rings::{RingIx, Rings};
use super::shared::Shared;
use super::solve::Solver;
use super::state::State;
use super::terminals::{Terminals, table};
use crate::declared::Deck;
use crate::design::{Design, InstanceIx, NetIx};
use crate::diag::Diagnostic;
use crate::graph::{ContextIx, Contexts, paths};
use hashbrown::HashMap;
use std::sync::Arc;

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
    pub(super) caps: Vec<Caps>,
    /// For each mode, its rings and what is ruled out in them.
    held: Vec<(RingIx, HeldIx)>,
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
    /// For each top.
    pub(super) rings: Vec<Rings>,
    pub(super) held: Vec<Arc<Held>>,
    terminals: Vec<Terminals>,
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
            rings: Vec::new(),
            held: Vec::new(),
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
                held: Vec::new(),
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
            rings: Vec::new(),
            held: Vec::new(),
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
        if self.get(at).parents.is_empty() {
            return String::new();
        }
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
        let found = Expander::new(self, &frames, at, top, self.all.len() as u32).run(at);
        self.all.extend(found.contexts);
        self.asked.push(found.asked);
        self.rings.push(found.rings);
        self.held.push(found.held);
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

/// What is found under one top.
struct Found {
    contexts: Vec<ReachContext>,
    asked: Vec<(ContextIx, u32, Inputs)>,
    rings: Rings,
    held: Arc<Held>,
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
    fn new(reach: &'e Reach<'_>, frames: &'e Frames, at: ContextIx, top: u32, base: u32) -> Expander<'e> {
        Expander { shared: Shared::new(reach, frames, at), top, base, known: HashMap::new(), all: Vec::new() }
    }

    fn run(mut self, at: ContextIx) -> Found {
        let modes = self.shared.modes.len();
        let inputs = (0..modes).map(|mode| self.outside(at, mode as u32)).collect();
        self.add(at, inputs);
        let mut next = 0;
        while next < self.all.len() {
            self.expand(next);
            next += 1;
        }
        Found {
            contexts: self.all,
            asked: self.shared.asked.into_inner(),
            rings: self.shared.rings.into_owned(),
            held: self.shared.held.into_inner(),
        }
    }

    /// What a top gets from outside: nothing at all.
    fn outside(&self, at: ContextIx, mode: u32) -> Inputs {
        let template = self.shared.template_of(at);
        let ports = template.boundary().count();
        let tied = |net: NetIx| self.shared.frames.rails.binary_search(&self.shared.contexts.get(at).root(net)).is_ok();
        Inputs {
            values: vec![super::state::NOTHING; ports * self.shared.frames.all.len() * 2],
            drive: vec![0; ports],
            fixed: vec![false; ports],
            tied: template.boundary().map(tied).collect(),
            open: template.boundary().map(|net| !tied(net)).collect(),
            caps: Vec::new(),
            bounds: Vec::new(),
            ring: self.shared.rings.of_top(mode),
            held: WIDEST,
        }
    }

    fn add(&mut self, at: ContextIx, mut inputs: Vec<Inputs>) -> ReachIx {
        let index = ReachIx(self.base + self.all.len() as u32);
        let mut states = Vec::with_capacity(inputs.len());
        let (mut tied, mut open, mut bounds, mut caps) = (Vec::new(), Vec::new(), Vec::new(), Vec::new());
        let is_top = self.all.is_empty();
        for (mode, inputs) in (0..).zip(&mut inputs) {
            let mut solver = match is_top {
                true => settle(&self.shared, at, mode, inputs),
                false => self.finished(at, mode, inputs),
            };
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
            held: inputs.iter().map(|inputs| (inputs.ring, inputs.held)).collect(),
        });
        index
    }

    fn finished(&self, at: ContextIx, mode: u32, inputs: &Inputs) -> Solver<'_> {
        let mut solver = Solver::new(&self.shared, at, mode, inputs, true);
        match self.shared.kept_state(&inputs.key(at, mode)) {
            Some(state) => solver.state = state,
            None => solver.run(),
        }
        solver
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
            let held = here.held[mode];
            let solver = Solver::finished(&self.shared, at, mode as u32, state, groups, limits, held);
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
