//! Why a net's end of range is what it is: the chain of devices from a rail, read from the setters that the fixpoint kept.

use super::expand::{Reach, ReachIx};
use super::inputs::Inputs;
use super::plan::DIODE_DROP;
use super::shared::Shared;
use super::solve::{Solver, answer_of};
use super::state::{NOTHING, OUTSIDE, Side, State};
use super::terminals::Terminals;
use crate::design::{DeviceIx, InstanceIx, NetIx};
use crate::graph::{ContextIx, RailSlot};
use std::borrow::Cow;

/// One step of a chain, from the rail to the net asked for.
#[derive(Clone, Debug, PartialEq)]
pub struct Step {
    /// The instance path of the cell that the step stands in, empty for the top.
    pub cell_path: String,
    /// The context of that cell.
    pub context: ContextIx,
    /// What passed the voltage on.
    pub by: StepBy,
    /// The net it led to, by its name in the cell.
    pub net: String,
    /// The end of the net's range after the step, volts.
    pub volts: f64,
}

/// What passed a voltage on.
#[derive(Clone, Debug, PartialEq)]
pub enum StepBy {
    /// A declared rail; none where a source makes it one, or where it is ground.
    Rail(Option<RailSlot>),
    /// A device, with the reason in words.
    Device(DeviceIx, String),
    /// Nothing is known of the net it starts from.
    Unknown,
}

/// Longer chains are cut: the far end is shown, and that it goes on.
const MOST_STEPS: usize = 200;

/// A place on the way back: a finished state of a context, and how to get to the cell above.
struct Here<'w> {
    context: ContextIx,
    state: Cow<'w, State>,
    /// What instances were asked in the run that made the state, by the numbers of its answers.
    asked: Cow<'w, [(ContextIx, u32, Inputs)]>,
    /// The cell above: its place in the list of places, and the instance; none for the context that the walk began in.
    above: Option<(usize, InstanceIx)>,
    reach: Option<ReachIx>,
    path: String,
}

/// Walks back from one end of a net's range, and gives the chain from its beginning.
pub fn trace(reach: &Reach<'_>, at: ReachIx, mode: usize, net: NetIx, frame: usize, side: Side) -> Vec<Step> {
    walk(reach, at, mode, net, (frame, side), true)
}

/// The same without going down into instances, whose cells would have to be computed again: cheap enough for every finding. A
/// chain that comes out of an instance begins there.
pub fn trace_in_cell(reach: &Reach<'_>, at: ReachIx, mode: usize, net: NetIx, frame: usize, side: Side) -> Vec<Step> {
    walk(reach, at, mode, net, (frame, side), false)
}

fn walk(
    reach: &Reach<'_>,
    at: ReachIx,
    mode: usize,
    net: NetIx,
    (frame, side): (usize, Side),
    descend: bool,
) -> Vec<Step> {
    let mut walk = Walk { reach, mode, frame, side, descend, places: Vec::new(), steps: Vec::new() };
    let first = walk.reach_place(at);
    walk.places.push(first);
    let net = reach.contexts.get(reach.get(at).context).root(net);
    walk.run(net);
    walk.steps.reverse();
    walk.steps
}

struct Walk<'w, 'r> {
    reach: &'w Reach<'r>,
    mode: usize,
    frame: usize,
    side: Side,
    descend: bool,
    places: Vec<Here<'w>>,
    steps: Vec<Step>,
}

impl<'w> Walk<'w, '_> {
    fn reach_place(&self, at: ReachIx) -> Here<'w> {
        let here = self.reach.get(at);
        Here {
            context: here.context,
            state: Cow::Borrowed(&here.states[self.mode]),
            asked: Cow::Borrowed(&self.reach.asked[here.top as usize]),
            above: None,
            reach: Some(at),
            path: self.reach.path(at),
        }
    }

    fn run(&mut self, mut net: NetIx) {
        let mut place = 0;
        while self.steps.len() < MOST_STEPS {
            let here = &self.places[place];
            let at = here.state.at(net, self.frame, self.side);
            let value = here.state.values[at];
            if value == NOTHING || value == f64::INFINITY {
                return self.push(place, net, StepBy::Unknown);
            }
            let setter = here.state.setters.get(at).copied().unwrap_or(OUTSIDE);
            if setter == OUTSIDE {
                match self.go_up(place, net) {
                    Some((above, outer)) => (place, net) = (above, outer),
                    None => return self.push(place, net, StepBy::Rail(self.rail_slot(place, net))),
                }
                continue;
            }
            match answer_of(setter) {
                Some(_) if !self.descend => return,
                Some(answer) => match self.go_down(place, net, answer) {
                    Some((below, inner)) => (place, net) = (below, inner),
                    None => return,
                },
                None => match self.cause(place, net, DeviceIx(setter)) {
                    Some((from, why)) => {
                        self.push(place, net, StepBy::Device(DeviceIx(setter), why));
                        net = from;
                    }
                    None => return self.push(place, net, StepBy::Unknown),
                },
            }
        }
    }

    fn push(&mut self, place: usize, net: NetIx, by: StepBy) {
        let here = &self.places[place];
        let template = self.reach.design.template(self.reach.contexts.get(here.context).variant);
        let value = here.state.value(net, self.frame, self.side);
        let volts = if self.side == Side::Hi { value } else { -value };
        let net = self.reach.design.net_name(template, net).to_owned();
        self.steps.push(Step { cell_path: here.path.clone(), context: here.context, by, net, volts });
    }

    fn rail_slot(&self, place: usize, net: NetIx) -> Option<RailSlot> {
        let here = &self.places[place];
        let top = here.reach.map_or(0, |at| self.reach.get(at).top);
        let is_top = self.reach.contexts.get(here.context).parents.is_empty();
        if is_top {
            return self.reach.frames[top as usize].slot(self.mode, net);
        }
        let marks = self.reach.contexts.marks_of(here.context, net);
        marks.iter().find_map(|mark| match mark {
            crate::graph::Mark::Rail(slot) => Some(*slot),
            crate::graph::Mark::Named(_) => None,
        })
    }

    /// A port's value comes from the cell above.
    fn go_up(&mut self, place: usize, net: NetIx) -> Option<(usize, NetIx)> {
        let (above, instance) = match (self.places[place].above, self.places[place].reach) {
            (Some(above), _) => above,
            (None, Some(at)) => {
                let &(above, instance) = self.reach.get(at).parents.first()?;
                let made = self.reach_place(above);
                self.places.push(made);
                let index = self.places.len() - 1;
                self.places[place].above = Some((index, instance));
                (index, instance)
            }
            (None, None) => return None,
        };
        let inside = self.reach.contexts.get(self.places[place].context);
        let position =
            self.reach.design.template(inside.variant).boundary().position(|port| inside.root(port) == net)?;
        let outside = self.reach.contexts.get(self.places[above].context);
        let pin = *self.reach.design.template(outside.variant).instance_pins(instance).get(position)?;
        Some((above, outside.root(pin)))
    }

    /// An instance raised the net: its cell is run again with what it was told then.
    fn go_down(&mut self, place: usize, net: NetIx, answer: u32) -> Option<(usize, NetIx)> {
        let &(instance, number) = self.places[place].state.answers.get(answer as usize)?;
        let instance = InstanceIx(instance);
        let top = self.top_of(place);
        let (child, mode, inputs) = self.places[place].asked.get(number as usize)?.clone();
        let (state, asked) = self.rerun(top, child, mode, &inputs);
        let outside = self.reach.contexts.get(self.places[place].context);
        let template = self.reach.design.template(outside.variant);
        let inside = self.reach.contexts.get(child);
        let below = self.reach.design.template(inside.variant);
        let (pins, boundary): (&[NetIx], Vec<NetIx>) = (template.instance_pins(instance), below.boundary().collect());
        let set_inside = |position: &usize| {
            let inner = inside.root(boundary[*position]);
            state.setters.get(state.at(inner, self.frame, self.side)).is_some_and(|&setter| setter != OUTSIDE)
        };
        let positions = (0..pins.len()).filter(|&position| outside.root(pins[position]) == net);
        let position = positions.into_iter().find(set_inside)?;
        let inner = inside.root(boundary[position]);
        let name = self.reach.design.instance_name(template, instance);
        let path = if self.places[place].path.is_empty() {
            name.to_owned()
        } else {
            format!("{}.{name}", self.places[place].path)
        };
        self.places.push(Here {
            context: child,
            state: Cow::Owned(state),
            asked: Cow::Owned(asked),
            above: Some((place, instance)),
            reach: None,
            path,
        });
        Some((self.places.len() - 1, inner))
    }

    fn top_of(&self, mut place: usize) -> u32 {
        while self.places[place].reach.is_none() {
            match self.places[place].above {
                Some((above, _)) => place = above,
                None => return 0,
            }
        }
        self.places[place].reach.map_or(0, |at| self.reach.get(at).top)
    }

    /// Runs a context again with what it was told, and gives its state with what its own instances were asked.
    fn rerun(&self, top: u32, at: ContextIx, mode: u32, inputs: &Inputs) -> (State, Vec<(ContextIx, u32, Inputs)>) {
        let shared = Shared::again(self.reach, top as usize);
        let mut solver = Solver::new(&shared, at, mode, inputs, true);
        solver.run();
        let state = std::mem::take(&mut solver.state);
        drop(solver);
        (state, shared.into_asked())
    }

    /// Which net a device took the value from, and why it came out as it did.
    fn cause(&self, place: usize, net: NetIx, device: DeviceIx) -> Option<(NetIx, String)> {
        let here = &self.places[place];
        let context = self.reach.contexts.get(here.context);
        let template = self.reach.design.template(context.variant);
        let pins = template.device_pins(device);
        let root = |pin: u8| context.root(pins[pin as usize]);
        let value = |of: NetIx| here.state.value(of, self.frame, self.side);
        let own = value(net);
        let name = |of: NetIx| self.reach.design.net_name(template, of);
        match self.reach.terminals()[template.types[device.0 as usize].0 as usize] {
            Terminals::Mos { d, g, s, b, n, threshold } => {
                let (d, g, s) = (root(d), root(g), root(s));
                let other = if net == d { s } else { d };
                if net != d && net != s {
                    let end = [d, s].into_iter().max_by(|a, b| value(*a).total_cmp(&value(*b)))?;
                    return Some((end, format!("its body diode from `{}`", name(end))));
                }
                let limited = if n { Side::Hi } else { Side::Lo };
                let gate = value(g) - threshold;
                let body = b.map(root).filter(|&b| {
                    b != net && value(b) >= own && (value(other) < own || self.side == limited && gate < own)
                });
                if let Some(b) = body {
                    return Some((b, format!("its body diode from `{}`", name(b))));
                }
                if self.side == limited && gate < value(other) && threshold.is_finite() {
                    let volts = crate::quantity::show(threshold, crate::quantity::Dim::VOLT);
                    let way = if n { "below" } else { "above" };
                    return Some((
                        g,
                        format!("its channel follows its gate `{}`, a threshold of {volts} {way}", name(g)),
                    ));
                }
                Some((other, self.capped(own, value(other), format!("its channel from `{}`", name(other)))))
            }
            Terminals::Bipolar { c, b, e, .. } => {
                let best = [c, b, e]
                    .into_iter()
                    .map(root)
                    .filter(|&of| of != net && value(of) >= own)
                    .min_by(|a, b| value(*a).total_cmp(&value(*b)))?;
                Some((best, format!("from `{}`", name(best))))
            }
            Terminals::Jfet { d, g, s, .. } => {
                let best = [d, s, g].into_iter().map(root).find(|&of| of != net && value(of) >= own)?;
                Some((best, format!("its channel from `{}`", name(best))))
            }
            Terminals::Diode { a, k, .. } => {
                let other = if root(a) == net { root(k) } else { root(a) };
                Some((other, self.capped(own, value(other), format!("from `{}`", name(other)))))
            }
            Terminals::Through { a, b, .. } | Terminals::Source { plus: a, minus: b } => {
                let other = if root(a) == net { root(b) } else { root(a) };
                Some((other, self.capped(own, value(other), format!("from `{}`", name(other)))))
            }
            Terminals::Inductor { .. } | Terminals::Mute => None,
        }
    }

    fn capped(&self, own: f64, from: f64, words: String) -> String {
        if own < from - 1e-9 && from - own > DIODE_DROP * 1e-3 {
            format!("{words}, held back by a clamp or a body diode")
        } else {
            words
        }
    }
}
