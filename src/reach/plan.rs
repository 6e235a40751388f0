//! What the structure of a context says before any voltage is known: what ties a net to a rail, where clamps stand, which
//! nets an inductor lifts. Worked out once for each context, from the leaves up; a cell's part is seen by its callers through
//! its boundary.

use super::bounds::{PairList, PairTable};
use super::frames::SourceLink;
use super::interval::Interval;
use super::terminals::Terminals;
use crate::declared::Deck;
use crate::design::{Design, DeviceIx, Element, InstanceIx, NetIx, Template};
use crate::graph::{Context, ContextIx, Contexts, Mark, rail};
use crate::netlist::tree::CellIx;
use hashbrown::HashMap;
use petgraph::unionfind::UnionFind;

/// A diode drop, volts: how far a body diode lets its drain go beyond its source (0.9 V: common practice, no source).
pub(super) const DIODE_DROP: f64 = 0.9;

/// A bound of the voltage between two nets of a context that something other than its devices' kinds gives.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Cap {
    /// The context.
    pub context: ContextIx,
    /// A net.
    pub net: NetIx,
    /// The other, a rail.
    pub rail: NetIx,
    /// V(net) − V(rail), volts.
    pub range: Interval,
}

/// What a context shows at its boundary.
#[derive(Clone, Debug, Default)]
struct Shown {
    /// For each boundary position, the first position that conducting paths inside connect it with.
    tied_to: Vec<u32>,
    /// Whether those paths lead to a rail inside.
    has_rail: Vec<bool>,
    /// Whether something whose drive is not known stands on those paths.
    open: Vec<bool>,
    /// Whether an inductor stands on it.
    inductor: Vec<bool>,
    /// Whether a body, source, resistor or diode stands on it.
    carries: Vec<bool>,
    /// Whether nothing inside moves it: only gates and the like stand on it.
    listens: Vec<bool>,
    bounds: Vec<(u32, u32, Interval)>,
    sources: Vec<(u32, u32, Interval)>,
}

/// The structure of one context. Nets are roots throughout.
#[derive(Debug, Default)]
pub(super) struct Plan {
    /// For each net, its group of nets that conducting paths connect whatever the gates do.
    group: Vec<u32>,
    /// Groups that hold a rail of this context.
    group_has_rail: Vec<bool>,
    /// Groups with something whose drive is not known: an unknown model, a controlled source, a capacitor to a net that moves, a
    /// pin of a top level that comments name.
    pub(super) group_open: Vec<bool>,
    /// Nets that an inductor stands on.
    pub(super) inductor: Vec<bool>,
    /// Nets that a body, source, resistor or diode stands on.
    pub(super) carries: Vec<bool>,
    pub(super) bounds: PairTable,
    pub(super) sources: Vec<SourceLink>,
    shown: Shown,
}

impl Plan {
    /// For each boundary position, whether nothing inside moves it.
    pub(super) fn listens(&self) -> &[bool] {
        &self.shown.listens
    }

    /// The group of a net.
    pub(super) fn group(&self, net: NetIx) -> u32 {
        self.group[net.0 as usize]
    }

    /// For each group, whether something ties it to a rail, given what ties its ports from outside.
    pub(super) fn tied_groups(&self, ports: &[(NetIx, bool)]) -> Vec<bool> {
        let mut tied = self.group_has_rail.clone();
        for &(net, from_outside) in ports {
            tied[self.group(net) as usize] |= from_outside;
        }
        tied
    }
}

/// Plans of all contexts.
pub(super) struct Plans {
    pub(super) all: Vec<Plan>,
}

/// What plans are made from.
#[derive(Clone, Copy)]
pub(super) struct Ground<'g> {
    pub(super) design: &'g Design<'g>,
    pub(super) contexts: &'g Contexts,
    pub(super) deck: &'g Deck,
    pub(super) terminals: &'g [Terminals],
    /// Sorted by context.
    pub(super) caps: &'g [Cap],
}

impl Plans {
    pub(super) fn new(ground: Ground<'_>) -> Plans {
        let mut plans = Plans { all: Vec::new() };
        plans.all.resize_with(ground.contexts.all.len(), Plan::default);
        for at in ground.contexts.callees_first() {
            let plan = Maker::new(ground, at).make(&plans);
            plans.all[at.0 as usize] = plan;
        }
        plans
    }

    pub(super) fn get(&self, at: ContextIx) -> &Plan {
        &self.all[at.0 as usize]
    }
}

struct Maker<'m> {
    ground: Ground<'m>,
    at: ContextIx,
    context: &'m Context,
    template: &'m Template,
    groups: UnionFind<u32>,
    /// Nets with an unknown drive.
    open: Vec<NetIx>,
    bounds: PairList,
    /// Nets that something moves.
    moved: Vec<bool>,
    plan: Plan,
}

impl<'m> Maker<'m> {
    fn new(ground: Ground<'m>, at: ContextIx) -> Maker<'m> {
        let context = ground.contexts.get(at);
        let template = ground.design.template(context.variant);
        let nets = template.nets.len();
        let plan = Plan { inductor: vec![false; nets], carries: vec![false; nets], ..Plan::default() };
        let (groups, bounds, moved) = (UnionFind::new(nets), PairList::default(), vec![false; nets]);
        Maker { ground, at, context, template, groups, open: Vec::new(), bounds, moved, plan }
    }

    fn make(mut self, plans: &Plans) -> Plan {
        for device in self.template.devices() {
            self.device(device);
        }
        for (instance, &child) in self.template.instance_indices().zip(&self.context.children) {
            self.instance(instance, &plans.get(child).shown);
        }
        let caps = self.ground.caps;
        let first = caps.partition_point(|cap| cap.context < self.at);
        for cap in caps[first..].iter().take_while(|cap| cap.context == self.at) {
            self.bounds.add(cap.net, cap.rail, cap.range);
        }
        let (context, marks) = (self.context, &self.ground.contexts.marks);
        let mut groups = std::mem::replace(&mut self.groups, UnionFind::new(0));
        self.plan.group =
            (0..self.template.nets.len() as u32).map(|net| groups.find_mut(context.root(NetIx(net)).0)).collect();
        let inside = std::mem::take(&mut self.plan.group_has_rail);
        let mut has_rail = vec![false; self.template.nets.len()];
        for (net, _) in inside.iter().enumerate().filter(|(_, rail)| **rail) {
            has_rail[self.plan.group[net] as usize] = true;
        }
        for &(net, set) in context.marked() {
            if marks.of(set).iter().any(|mark| matches!(mark, Mark::Rail(_))) {
                has_rail[self.plan.group(net) as usize] = true;
            }
        }
        self.plan.group_has_rail = has_rail;
        self.gather_open();
        self.plan.bounds = std::mem::take(&mut self.bounds).pack(self.template.nets.len());
        self.show();
        self.plan
    }

    fn device(&mut self, device: DeviceIx) {
        let pins = self.template.device_pins(device);
        let (context, kind) = (self.context, self.template.types[device.0 as usize]);
        let root = |pin: u8| context.root(pins[pin as usize]);
        match self.ground.terminals[kind.0 as usize] {
            Terminals::Mos { d, s, b, n, .. } => {
                let (d, s) = (root(d), root(s));
                self.tie(d, s);
                self.carry(&[s]);
                if let Some(b) = b.map(root) {
                    self.tie(b, d);
                    self.carry(&[b]);
                    if b == s && d != s {
                        let range = if n {
                            Interval { lo: -DIODE_DROP, hi: f64::INFINITY }
                        } else {
                            Interval { lo: f64::NEG_INFINITY, hi: DIODE_DROP }
                        };
                        self.bounds.add(d, s, range);
                    }
                }
            }
            Terminals::Bipolar { c, b, e, .. } => {
                self.tie(root(c), root(e));
                self.tie(root(b), root(e));
                self.carry(&[root(e), root(b)]);
            }
            Terminals::Jfet { d, g, s, .. } => {
                self.tie(root(d), root(s));
                self.tie(root(g), root(s));
                self.carry(&[root(s)]);
            }
            Terminals::Diode { a, k, .. } => {
                let (a, k) = (root(a), root(k));
                self.tie(a, k);
                self.carry(&[a, k]);
                let class = self.ground.design.types[kind.0 as usize]
                    .class
                    .map(|class| &self.ground.design.classes[class as usize]);
                if let Some(clamp) = class.and_then(|class| class.clamp) {
                    self.bounds.add(k, a, Interval { lo: clamp.lo, hi: clamp.hi });
                }
            }
            Terminals::Through { a, b, resistor } => {
                self.tie(root(a), root(b));
                if resistor {
                    self.carry(&[root(a), root(b)]);
                }
            }
            Terminals::Inductor { a, b } => {
                self.tie(root(a), root(b));
                self.plan.inductor[root(a).0 as usize] = true;
                self.plan.inductor[root(b).0 as usize] = true;
            }
            Terminals::Source { plus, minus } => {
                let (plus, minus) = (root(plus), root(minus));
                if let Some(range) = self.ground.design.source_range(self.context.variant, device) {
                    self.tie(plus, minus);
                    let range = Interval { lo: range.0, hi: range.1 };
                    self.plan.sources.push(SourceLink { plus, minus, range });
                }
            }
            Terminals::Mute => self.unknown_drive(device),
        }
    }

    /// A device of which nothing is known may drive any of its nets; a capacitor drives one where the other moves.
    fn unknown_drive(&mut self, device: DeviceIx) {
        let pins = self.template.device_pins(device);
        let kind = &self.ground.design.types[self.template.types[device.0 as usize].0 as usize];
        if kind.element == Element::Capacitor && !kind.misfit {
            let &[a, b, ..] = pins else { return };
            for (net, other) in [(a, b), (b, a)] {
                if !self.is_steady(self.context.root(other)) {
                    self.open.push(self.context.root(net));
                }
            }
        } else {
            self.open.extend(pins.iter().map(|&net| self.context.root(net)));
        }
    }

    /// Whether a net is a rail of one voltage: ground, or declared so in all that names it.
    fn is_steady(&self, net: NetIx) -> bool {
        let marks = self.ground.contexts.marks.of(self.context.mark_set(net));
        let mut rails = marks.iter().filter_map(|mark| match mark {
            Mark::Rail(slot) => Some(rail(self.ground.deck, *slot)),
            Mark::Named(_) => None,
        });
        let ground = self.ground.design.names.text(self.template.nets[net.0 as usize]) == "0";
        let declared = rails.next().map(|first| first.low == first.high && rails.all(|rail| rail.low == rail.high));
        declared.unwrap_or(ground)
    }

    /// Marks the groups of all nets with an unknown drive.
    fn gather_open(&mut self) {
        let mut open = vec![false; self.template.nets.len()];
        for net in &self.open {
            open[self.plan.group(*net) as usize] = true;
        }
        if self.template.cell == Some(CellIx(0)) {
            for pin in &self.ground.design.tree.interface {
                if let Some(net) = self.template.nets.iter().position(|&net| net == pin.name) {
                    open[self.plan.group(self.context.root(NetIx(net as u32))) as usize] = true;
                }
            }
        }
        self.plan.group_open = open;
    }

    fn tie(&mut self, a: NetIx, b: NetIx) {
        self.groups.union(a.0, b.0);
        self.moved[a.0 as usize] = true;
        self.moved[b.0 as usize] = true;
    }

    fn carry(&mut self, nets: &[NetIx]) {
        for net in nets {
            self.plan.carries[net.0 as usize] = true;
        }
    }

    fn instance(&mut self, instance: InstanceIx, shown: &Shown) {
        let pins = self.template.instance_pins(instance);
        let net = |position: u32| self.context.root(pins[position as usize]);
        if self.plan.group_has_rail.is_empty() {
            self.plan.group_has_rail = vec![false; self.template.nets.len()];
        }
        for position in 0..shown.tied_to.len() as u32 {
            let (at, here) = (position as usize, net(position));
            self.groups.union(here.0, net(shown.tied_to[at]).0);
            self.plan.group_has_rail[here.0 as usize] |= shown.has_rail[at];
            if shown.open[at] {
                self.open.push(here);
            }
            self.plan.inductor[here.0 as usize] |= shown.inductor[at];
            self.plan.carries[here.0 as usize] |= shown.carries[at];
            self.moved[here.0 as usize] |= !shown.listens[at];
        }
        for &(x, y, range) in &shown.bounds {
            self.bounds.add(net(x), net(y), range);
        }
        for &(plus, minus, range) in &shown.sources {
            self.plan.sources.push(SourceLink { plus: net(plus), minus: net(minus), range });
        }
    }

    fn show(&mut self) {
        let boundary: Vec<NetIx> = self.template.boundary().map(|net| self.context.root(net)).collect();
        let mut first_of_group: HashMap<u32, u32> = HashMap::new();
        let mut positions: HashMap<NetIx, u32> = HashMap::new();
        let plan = &mut self.plan;
        for (position, &net) in boundary.iter().enumerate() {
            let group = plan.group[net.0 as usize];
            plan.shown.tied_to.push(*first_of_group.entry(group).or_insert(position as u32));
            plan.shown.has_rail.push(plan.group_has_rail[group as usize]);
            plan.shown.open.push(plan.group_open[group as usize]);
            plan.shown.inductor.push(plan.inductor[net.0 as usize]);
            plan.shown.carries.push(plan.carries[net.0 as usize]);
            plan.shown.listens.push(!self.moved[net.0 as usize]);
            positions.entry(net).or_insert(position as u32);
        }
        for (x, y, range) in plan.bounds.iter() {
            if let (Some(&x), Some(&y)) = (positions.get(&x), positions.get(&y)) {
                plan.shown.bounds.push((x, y, range));
            }
        }
        plan.shown.bounds.sort_unstable_by_key(|&(x, y, _)| (x, y));
        plan.shown.sources = shown_sources(&plan.sources, &positions);
    }
}

/// Sources between boundary nets, chains of them through inner nets included.
fn shown_sources(sources: &[SourceLink], positions: &HashMap<NetIx, u32>) -> Vec<(u32, u32, Interval)> {
    let mut shown = Vec::new();
    if sources.is_empty() {
        return shown;
    }
    for (&start, &from) in positions {
        let mut seen = vec![start];
        let mut stack = vec![(start, Interval::point(0.0))];
        while let Some((net, above)) = stack.pop() {
            for link in sources.iter().filter(|link| link.plus == net || link.minus == net) {
                let (next, step) =
                    if link.minus == net { (link.plus, link.range) } else { (link.minus, link.range.negated()) };
                if seen.contains(&next) {
                    continue;
                }
                seen.push(next);
                let total = Interval { lo: above.lo + step.lo, hi: above.hi + step.hi };
                match positions.get(&next) {
                    Some(&to) if from < to => shown.push((to, from, total)),
                    Some(_) => {}
                    None => stack.push((next, total)),
                }
            }
        }
    }
    shown.sort_by_key(|edge| (edge.0, edge.1));
    shown
}
