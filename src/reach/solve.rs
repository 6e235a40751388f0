//! The fixpoint of one context in one mode.

use super::bounds::{Caps, PairBounds};
use super::held::HeldIx;
use super::inputs::Inputs;
use super::interval::Interval;
use super::plan::Plan;
use super::rings::{Ring, RingIx};
use super::shared::Shared;
use super::state::{ANSWER, DRIVEN, NOTHING, OUTSIDE, Side, State};
use super::terminals::Terminals;
use super::touch::{Toucher, Touches};
use crate::design::{DeviceIx, InstanceIx, NetIx, Template, VariantIx};
use crate::graph::{Context, ContextIx};
use std::collections::VecDeque;
use std::sync::Arc;

/// Cells of at most this many devices, and no instances, are swept whole.
const SMALL_CELL: usize = 48;

/// One run of the fixpoint.
pub(super) struct Solver<'s> {
    pub(super) shared: &'s Shared<'s>,
    pub(super) at: ContextIx,
    pub(super) mode: u32,
    pub(super) context: &'s Context,
    pub(super) variant: VariantIx,
    pub(super) template: &'s Template,
    pub(super) plan: &'s Plan,
    pub(super) terminals: &'s [Terminals],
    pub(super) state: State,
    pub(super) tied: Vec<bool>,
    pub(super) open: Vec<bool>,
    pub(super) bounds: PairBounds,
    pub(super) caps: Caps,
    pub(super) ring: &'s Ring,
    held: HeldIx,
    pub(super) ruled_out: Arc<[u64]>,
    queue: VecDeque<u32>,
    queued: Vec<bool>,
    waiting: Vec<Waiting>,
    /// For each net, how often it grew.
    grew: Vec<u32>,
    /// For each instance, how often its nets had grown when it had answered last.
    answered: Vec<u64>,
    ask: VecDeque<u32>,
    ask_later: VecDeque<u32>,
}

/// In which list an instance waits to be asked.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Waiting {
    Not,
    Soon,
    /// Until all its inputs have a range, or nothing else is left to do.
    Later,
}

impl<'s> Solver<'s> {
    /// Sets up a run: rails and unknown nets are fixed, ports have what the surroundings bring.
    pub(super) fn new(shared: &'s Shared<'s>, at: ContextIx, mode: u32, inputs: &Inputs, remember: bool) -> Solver<'s> {
        let context = shared.contexts.get(at);
        let template = shared.design.template(context.variant);
        let frames = shared.frames.all.len();
        let mut solver = Solver {
            shared,
            at,
            mode,
            context,
            variant: context.variant,
            template,
            plan: shared.plans.get(at),
            terminals: shared.terminals,
            state: State::new(template.nets.len(), frames, remember),
            tied: Vec::new(),
            open: Vec::new(),
            bounds: PairBounds::default(),
            caps: Caps::default(),
            ring: shared.rings.get(inputs.ring),
            held: inputs.held,
            ruled_out: shared.held.borrow().ruled_out(inputs.held),
            queue: VecDeque::new(),
            queued: vec![false; template.nets.len()],
            waiting: vec![Waiting::Not; template.instances.len()],
            grew: if template.instances.is_empty() { Vec::new() } else { vec![0; template.nets.len()] },
            answered: vec![u64::MAX; template.instances.len()],
            ask: VecDeque::new(),
            ask_later: VecDeque::new(),
        };
        solver.take_inputs(inputs);
        solver.fix_rails();
        solver.fix_unknown();
        solver.follow_sources();
        solver.make_caps(inputs);
        solver
    }

    /// A run that is over, to be asked what it brings to its instances.
    pub(super) fn finished(
        shared: &'s Shared<'s>,
        at: ContextIx,
        mode: u32,
        state: State,
        (tied, open): (Vec<bool>, Vec<bool>),
        (bounds, caps): (PairBounds, Caps),
        (ring, held): (RingIx, HeldIx),
    ) -> Solver<'s> {
        let context = shared.contexts.get(at);
        let template = shared.design.template(context.variant);
        Solver {
            shared,
            at,
            mode,
            context,
            variant: context.variant,
            template,
            plan: shared.plans.get(at),
            terminals: shared.terminals,
            state,
            tied,
            open,
            bounds,
            caps,
            ring: shared.rings.get(ring),
            held,
            ruled_out: shared.held.borrow().ruled_out(held),
            queue: VecDeque::new(),
            queued: Vec::new(),
            waiting: Vec::new(),
            grew: Vec::new(),
            answered: Vec::new(),
            ask: VecDeque::new(),
            ask_later: VecDeque::new(),
        }
    }

    fn take_inputs(&mut self, inputs: &Inputs) {
        let frames = self.state.frames;
        let (mut ports, mut open) = (Vec::with_capacity(inputs.drive.len()), vec![false; self.template.nets.len()]);
        for (position, net) in self.template.boundary().enumerate() {
            let net = self.context.root(net);
            ports.push((net, inputs.tied[position]));
            open[self.plan.group(net) as usize] |= inputs.open[position];
            let from = position * frames * 2;
            let to = self.state.at(net, 0, Side::Hi);
            self.state.values[to..to + frames * 2].copy_from_slice(&inputs.values[from..from + frames * 2]);
            self.state.drive[net.0 as usize] |= inputs.drive[position];
            self.state.fixed[net.0 as usize] |= inputs.fixed[position];
        }
        self.tied = self.plan.tied_groups(&ports);
        for (known, &inside) in open.iter_mut().zip(&self.plan.group_open) {
            *known |= inside;
        }
        self.open = open;
    }

    /// Rails that the deck declares in this context: those of the top, and those inside an instance.
    fn fix_rails(&mut self) {
        for (net, values) in self.shared.rails_in(self.at, self.mode) {
            for (frame, value) in values.iter().enumerate() {
                let to = self.state.at(net, frame, Side::Hi);
                self.state.values[to] = value.hi;
                self.state.values[to + 1] = -value.lo;
            }
            self.state.fixed[net.0 as usize] = true;
            self.state.drive[net.0 as usize] |= DRIVEN;
        }
    }

    /// Nets of which nothing is known: tied to no rail, or on an inductor. As gates they let their channels conduct fully.
    fn fix_unknown(&mut self) {
        for net in (0..self.template.nets.len() as u32).map(NetIx) {
            if self.context.root(net) != net || self.state.fixed[net.0 as usize] {
                continue;
            }
            if !self.tied[self.plan.group(net) as usize] || self.plan.inductor[net.0 as usize] {
                let from = self.state.at(net, 0, Side::Hi);
                self.state.values[from..from + self.state.frames * 2].fill(f64::INFINITY);
                self.state.fixed[net.0 as usize] = true;
            }
        }
    }

    /// A source with one end on a rail makes its other end a rail.
    fn follow_sources(&mut self) {
        let mut waiting = self.plan.sources.clone();
        loop {
            let before = waiting.len();
            waiting.retain(|link| {
                let known = |net: NetIx| self.state.fixed[net.0 as usize] && self.state.is_driven(net);
                let (to, from, range) = match (known(link.plus), known(link.minus)) {
                    (false, true) => (link.plus, link.minus, link.range),
                    (true, false) => (link.minus, link.plus, link.range.negated()),
                    (true, true) => return false,
                    (false, false) => return true,
                };
                for frame in 0..self.state.frames {
                    let (hi, lo) = (self.state.value(from, frame, Side::Hi), self.state.value(from, frame, Side::Lo));
                    let at = self.state.at(to, frame, Side::Hi);
                    self.state.values[at] = hi + range.hi;
                    self.state.values[at + 1] = lo - range.lo;
                }
                self.state.fixed[to.0 as usize] = true;
                self.state.drive[to.0 as usize] |= DRIVEN;
                false
            });
            if waiting.len() == before {
                return;
            }
        }
    }

    /// Clamps and body diodes against rails cap what is propagated.
    fn make_caps(&mut self, inputs: &Inputs) {
        if !inputs.caps.is_empty() {
            self.take_caps(inputs);
        }
        let boundary: Vec<NetIx> =
            if inputs.bounds.is_empty() { Vec::new() } else { self.template.boundary().collect() };
        for &(x, y, range) in &inputs.bounds {
            self.bounds.add(self.context.root(boundary[x as usize]), self.context.root(boundary[y as usize]), range);
        }
        let bounds = std::mem::take(&mut self.bounds);
        for (x, y, range) in self.plan.bounds.iter().chain(bounds.iter()) {
            match (self.state.fixed[x.0 as usize], self.state.fixed[y.0 as usize]) {
                (false, true) => self.cap(x, y, range),
                (true, false) => self.cap(y, x, range.negated()),
                _ => {}
            }
        }
        self.bounds = bounds;
    }

    fn take_caps(&mut self, inputs: &Inputs) {
        let ends = self.state.frames * 2;
        for (position, net) in self.template.boundary().enumerate() {
            let outside = &inputs.caps[position * ends..(position + 1) * ends];
            if outside.iter().any(|cap| cap.is_finite()) {
                let caps = self.caps.lower(self.context.root(net), self.template.nets.len(), ends);
                caps.iter_mut().zip(outside).for_each(|(cap, &outside)| *cap = cap.min(outside));
            }
        }
    }

    /// V(net) − V(rail) stays in the range.
    fn cap(&mut self, net: NetIx, rail: NetIx, range: Interval) {
        let frames = self.state.frames;
        let caps = self.caps.lower(net, self.template.nets.len(), frames * 2);
        for frame in 0..frames {
            let (hi, lo) = (self.state.value(rail, frame, Side::Hi), self.state.value(rail, frame, Side::Lo));
            caps[frame * 2] = caps[frame * 2].min(hi + range.hi);
            caps[frame * 2 + 1] = caps[frame * 2 + 1].min(lo - range.lo);
        }
    }

    /// Runs to the fixpoint.
    pub(super) fn run(&mut self) {
        for device in self.template.devices() {
            self.apply(device);
        }
        if self.template.instances.is_empty() && self.template.device_count() <= SMALL_CELL {
            return self.sweep();
        }
        for instance in 0..self.template.instances.len() as u32 {
            self.ask_soon(instance);
        }
        let pins = Touches::new(self.template, self.context, &self.state.fixed);
        loop {
            self.settle_devices(&pins);
            let Some(instance) = self.next_to_ask() else { break };
            // Told its own answer and nothing else, a cell has nothing to add.
            if self.growth(InstanceIx(instance)) != self.answered[instance as usize] {
                self.ask_instance(InstanceIx(instance));
                self.answered[instance as usize] = self.growth(InstanceIx(instance));
            }
        }
    }

    /// How often the nets of an instance have grown, all together.
    fn growth(&self, instance: InstanceIx) -> u64 {
        let pins = self.template.instance_pins(instance);
        pins.iter().map(|&net| u64::from(self.grew[self.context.root(net).0 as usize])).sum()
    }

    fn ask_soon(&mut self, instance: u32) {
        if std::mem::replace(&mut self.waiting[instance as usize], Waiting::Soon) != Waiting::Soon {
            self.ask.push_back(instance);
        }
    }

    /// The next instance to ask. One whose inputs have no range yet waits: it would be asked again when they do. In what order
    /// instances are asked changes no range.
    fn next_to_ask(&mut self) -> Option<u32> {
        while let Some(instance) = self.ask.pop_front() {
            if self.has_its_inputs(InstanceIx(instance)) {
                self.waiting[instance as usize] = Waiting::Not;
                return Some(instance);
            }
            self.waiting[instance as usize] = Waiting::Later;
            self.ask_later.push_back(instance);
        }
        while let Some(instance) = self.ask_later.pop_front() {
            if self.waiting[instance as usize] == Waiting::Later {
                self.waiting[instance as usize] = Waiting::Not;
                return Some(instance);
            }
        }
        None
    }

    fn has_its_inputs(&self, instance: InstanceIx) -> bool {
        let listens = self.shared.plans.get(self.context.children[instance.0 as usize]).listens();
        self.template.instance_pins(instance).iter().zip(listens).filter(|&(_, &listens)| listens).all(|(&net, _)| {
            let at = self.state.at(self.context.root(net), 0, Side::Hi);
            self.state.values[at] != NOTHING && self.state.values[at + 1] != NOTHING
        })
    }

    /// A small cell needs no list of who stands where: all its devices are asked again until nothing changes.
    fn sweep(&mut self) {
        while !self.queue.is_empty() {
            self.queue.clear();
            self.queued.fill(false);
            for device in self.template.devices() {
                self.apply(device);
            }
        }
    }

    fn settle_devices(&mut self, touches: &Touches) {
        while let Some(net) = self.queue.pop_front() {
            self.queued[net as usize] = false;
            for toucher in touches.on(NetIx(net)) {
                match toucher {
                    Toucher::Device(device) => self.apply(device),
                    Toucher::Instance(instance) => self.ask_soon(instance.0),
                }
            }
        }
    }

    fn ask_instance(&mut self, instance: InstanceIx) {
        let child = self.context.children[instance.0 as usize];
        let inputs = self.inputs_for(instance);
        let (number, answer) = self.shared.answer(child, self.mode, inputs);
        let pins = self.template.instance_pins(instance);
        let by = ANSWER | self.state.answers.len() as u32;
        self.state.answers.push((instance.0, number));
        let frames = self.state.frames;
        for (position, &net) in pins.iter().enumerate() {
            let net = self.context.root(net);
            for frame in 0..frames {
                for side in Side::BOTH {
                    self.raise(net, frame, side, answer.values[(position * frames + frame) * 2 + side.index()], by);
                }
            }
            self.set_drive(net, answer.drive[position]);
        }
    }

    /// What this state brings to an instance.
    pub(super) fn inputs_for(&self, instance: InstanceIx) -> Inputs {
        let pins = self.template.instance_pins(instance);
        let frames = self.state.frames;
        let mut inputs = Inputs {
            values: Vec::with_capacity(pins.len() * frames * 2),
            drive: Vec::with_capacity(pins.len()),
            fixed: Vec::with_capacity(pins.len()),
            tied: Vec::with_capacity(pins.len()),
            open: Vec::with_capacity(pins.len()),
            ring: self.ring.below(instance),
            held: self.shared.held.borrow().below(self.held, instance),
            ..Inputs::default()
        };
        let mut distinct: Vec<(NetIx, u32)> = Vec::new();
        for (position, &net) in pins.iter().enumerate() {
            let net = self.context.root(net);
            let from = self.state.at(net, 0, Side::Hi);
            inputs.values.extend_from_slice(&self.state.values[from..from + frames * 2]);
            inputs.drive.push(self.state.drive[net.0 as usize]);
            inputs.fixed.push(self.state.fixed[net.0 as usize]);
            inputs.tied.push(self.tied[self.plan.group(net) as usize]);
            inputs.open.push(self.open[self.plan.group(net) as usize]);
            distinct.push((net, position as u32));
        }
        if distinct.iter().any(|&(net, _)| self.caps.of(net).is_some()) {
            for (net, _) in &distinct {
                match self.caps.of(*net) {
                    Some(caps) => inputs.caps.extend_from_slice(caps),
                    None => inputs.caps.extend(std::iter::repeat_n(f64::INFINITY, frames * 2)),
                }
            }
        }
        if !self.plan.bounds.is_empty() || !self.bounds.is_empty() {
            distinct.sort_unstable();
            distinct.dedup_by_key(|&mut (net, _)| net);
            let spoken_of = |net: NetIx| self.plan.bounds.speaks_of(net) || !self.bounds.is_empty();
            distinct.retain(|(net, _)| spoken_of(*net));
            for &(x, at_x) in distinct.iter().filter(|(net, _)| !self.state.fixed[net.0 as usize]) {
                for &(y, at_y) in &distinct {
                    let range = self.plan.bounds.between(x, y).and(self.bounds.between(x, y));
                    if range != Interval::ANY && (self.state.fixed[y.0 as usize] || x < y) {
                        inputs.bounds.push((at_x, at_y, range));
                    }
                }
            }
        }
        inputs
    }

    /// Whether an earlier round ruled out that a device conducts at one end of its channel.
    pub(super) fn is_ruled_out(&self, device: DeviceIx, end: usize) -> bool {
        let at = device.0 as usize * 2 + end;
        self.ruled_out.get(at / 64).is_some_and(|word| word >> (at % 64) & 1 == 1)
    }

    /// What clamps and body diodes say of V(x) − V(y).
    pub(super) fn pair_bound(&self, x: NetIx, y: NetIx) -> Interval {
        let spoken_of = |net: NetIx| self.plan.bounds.speaks_of(net);
        if self.bounds.is_empty() && !(spoken_of(x) && spoken_of(y))
            || self.state.fixed[x.0 as usize] && self.state.fixed[y.0 as usize]
        {
            return Interval::ANY;
        }
        self.plan.bounds.between(x, y).and(self.bounds.between(x, y))
    }

    pub(super) fn source_range(&self, device: DeviceIx) -> Option<(f64, f64)> {
        self.shared.design.source_range(self.variant, device)
    }

    #[inline]
    pub(super) fn raise(&mut self, net: NetIx, frame: usize, side: Side, value: f64, by: u32) {
        // Most raises are none: that is seen first. (What is not above [`NOTHING`] is nothing.)
        let at = self.state.at(net, frame, side);
        let least = self.state.values[at] + 1e-12;
        if value <= least || self.state.fixed[net.0 as usize] {
            return;
        }
        let value = match self.caps.of(net) {
            Some(caps) => value.min(caps[frame * 2 + side.index()]),
            None => value,
        };
        if value > least {
            self.state.values[at] = value;
            if let Some(setter) = self.state.setters.get_mut(at) {
                *setter = by;
            }
            self.touch(net);
        }
    }

    /// A raise that may feed itself through a loop of sources: past the span of all rails and sources nothing is known.
    pub(super) fn raise_bounded(&mut self, net: NetIx, frame: usize, side: Side, value: f64, by: u32) {
        let value = if value > self.shared.span { f64::INFINITY } else { value };
        self.raise(net, frame, side, value, by);
    }

    pub(super) fn set_drive(&mut self, net: NetIx, drive: u8) {
        let known = &mut self.state.drive[net.0 as usize];
        if *known | drive != *known {
            *known |= drive;
            self.touch(net);
        }
    }

    fn touch(&mut self, net: NetIx) {
        if let Some(grew) = self.grew.get_mut(net.0 as usize) {
            *grew += 1;
        }
        if !self.state.fixed[net.0 as usize] && !std::mem::replace(&mut self.queued[net.0 as usize], true) {
            self.queue.push_back(net.0);
        }
    }
}

/// Whether a setter is an instance's answer, and which.
pub(super) fn answer_of(setter: u32) -> Option<u32> {
    (setter != OUTSIDE && setter & ANSWER != 0).then_some(setter & !ANSWER)
}
