//! Rings: gates whose voltage depends on the channels that they open. Latches, crossed pairs, self-biased loops and regulators.
//!
//! A least fixpoint builds every voltage up from the rails. That is right while a condition ("can this gate turn its channel on")
//! speaks of voltages that do not depend on what the condition lets through. In a ring they do, and the least fixpoint finds the
//! state that the rails force, not one that only holds itself. So gates in a ring are held open until their channels are ruled
//! out (`held.rs`), and this module says which gates those are.
//!
//! The graph has two nodes for each net, its high and its low end. What carries current joins the ends of its nets, each side
//! by itself; a gate leads from the end that opens its channel (n: high) to both ends of the channel. A rail is no node:
//! nothing moves it. The condition on a gate is in a ring where the end that it lets through leads back to the gate's. The
//! high end of a channel follows the gate's high end in another way, a threshold below: no ring of such steps alone holds
//! itself up, so that only thresholds of zero and less (depletion) are held there.
//!
//! Cells are seen by their callers through their boundary (which ports lead to which), and told which of their ports are on one ring
//! outside. Both are exact, so that the hierarchy finds the rings of the flattened netlist. It is all structure, worked
//! out once for each context and set of rails; cells without a ring in or through them are all told the same.

use super::components::{Edges, components};
use super::leads::{PortNode, leads};
use super::shared::Shared;
use super::state::Side;
use super::terminals::Terminals;
use crate::design::{DeviceIx, InstanceIx, NetIx, Template};
use crate::graph::{Context, ContextIx};
use hashbrown::HashMap;
use petgraph::unionfind::UnionFind;
use std::rc::Rc;

/// Index of a [`Ring`].
pub(super) type RingIx = u32;

/// No ring goes through the cell, or any below.
pub(super) const NO_RING: RingIx = 0;

/// The rings in a context.
#[derive(Clone, Debug, Default)]
pub(super) struct Ring {
    /// For each device, whether the condition on its gate is in a ring; empty where none is.
    held: Vec<bool>,
    /// For each instance statement, its rings; empty where none has any.
    below: Vec<RingIx>,
}

impl Ring {
    /// Whether the condition on a device's gate is in a ring.
    pub(super) fn holds(&self, device: DeviceIx) -> bool {
        self.held.get(device.0 as usize).is_some_and(|&held| held)
    }

    /// The rings in an instance.
    pub(super) fn below(&self, instance: InstanceIx) -> RingIx {
        self.below.get(instance.0 as usize).copied().unwrap_or(NO_RING)
    }

    /// The devices whose conditions are in a ring.
    pub(super) fn held(&self) -> impl Iterator<Item = DeviceIx> + '_ {
        self.held.iter().zip(0..).filter(|&(&held, _)| held).map(|(_, device)| DeviceIx(device))
    }
}

/// The rings of all contexts under a top.
#[derive(Clone, Debug, Default)]
pub(super) struct Rings {
    all: Vec<Ring>,
    /// For each mode, those of the top.
    tops: Vec<RingIx>,
}

impl Rings {
    /// Finds the rings of a top in every mode.
    pub(super) fn new(shared: &Shared<'_>, top: ContextIx) -> Rings {
        let mut rings = Rings { all: vec![Ring::default()], tops: Vec::new() };
        let mut by_rails: HashMap<Vec<RailKey<'_>>, RingIx> = HashMap::new();
        for mode in 0..shared.modes.len() as u32 {
            // Modes that give the same rails other values have the same rings.
            let rails = rail_keys(shared, top, mode);
            let known = by_rails.get(&rails).copied();
            let ring = known.unwrap_or_else(|| {
                let ports = vec![false; shared.template_of(top).boundary().count()];
                let mut finder = Finder {
                    shared,
                    mode,
                    rings: &mut rings,
                    shown: HashMap::new(),
                    asked: HashMap::new(),
                    known: HashMap::new(),
                };
                finder.ring(top, &ports, &[])
            });
            by_rails.insert(rails, ring);
            rings.tops.push(ring);
        }
        rings
    }

    pub(super) fn get(&self, ring: RingIx) -> &Ring {
        &self.all[ring as usize]
    }

    pub(super) fn of_top(&self, mode: u32) -> RingIx {
        self.tops.get(mode as usize).copied().unwrap_or(NO_RING)
    }
}

/// Something that is a rail in a mode: a net of the top, or a name that only the mode declares.
#[derive(PartialEq, Eq, Hash)]
enum RailKey<'k> {
    Net(NetIx),
    Name(&'k str),
}

fn rail_keys<'k>(shared: &Shared<'k>, top: ContextIx, mode: u32) -> Vec<RailKey<'k>> {
    let of_top = shared.rails_in(top, mode).into_iter().map(|(net, _)| RailKey::Net(net));
    let own = shared.modes[mode as usize].map(|mode| shared.deck.modes[mode].rails.iter()).into_iter().flatten();
    let always = |name: &str| shared.deck.rails.iter().any(|rail| rail.net.text() == name);
    let mut names: Vec<&str> = own.map(|rail| rail.net.text()).filter(|name| !always(name)).collect();
    names.sort_unstable();
    of_top.chain(names.into_iter().map(RailKey::Name)).collect()
}

/// What leads from where to where between the ports of a cell. Positions on rails occur nowhere.
#[derive(Debug, Default)]
struct Shown {
    /// For each position, the first one that currents can come from: the same side of both is one node.
    joined: Vec<u32>,
    /// Each of the first nodes leads to each of the second.
    leads: Vec<(Vec<PortNode>, Vec<PortNode>)>,
}

struct Finder<'f, 's> {
    shared: &'f Shared<'s>,
    mode: u32,
    rings: &'f mut Rings,
    /// By context and which of its ports are rails.
    shown: HashMap<(ContextIx, Vec<bool>), Rc<Shown>>,
    /// The same, and what outside puts ports on one ring.
    asked: HashMap<(ContextIx, Vec<bool>, Vec<PortNode>), RingIx>,
    /// By what is in them.
    known: HashMap<(ContextIx, Vec<bool>, Vec<RingIx>), RingIx>,
}

/// The graph of one context.
struct Graph<'g> {
    context: &'g Context,
    template: &'g Template,
    /// Nets that are rails.
    rail: Vec<bool>,
    /// For each net, the one that stands for all that currents can come from.
    group: Vec<u32>,
    edges: Vec<(u32, u32)>,
    nodes: usize,
}

impl Graph<'_> {
    fn node(&self, net: NetIx, side: usize) -> u32 {
        self.group[net.0 as usize] * 2 + side as u32
    }

    /// The node of an instance's port.
    fn at_pin(&self, pins: &[NetIx], port: PortNode) -> u32 {
        self.node(self.context.root(pins[port as usize / 2]), port as usize % 2)
    }

    fn is_rail(&self, net: NetIx) -> bool {
        self.rail[net.0 as usize]
    }

    /// Each of some nodes leads to each of others.
    fn lead(&mut self, from: impl ExactSizeIterator<Item = u32>, to: impl Iterator<Item = u32>) {
        let between = self.nodes as u32;
        self.nodes += 1;
        self.edges.extend(from.map(|node| (node, between)));
        self.edges.extend(to.map(|node| (between, node)));
    }
}

impl<'s> Finder<'_, 's> {
    /// The rings in a context: which of its ports are rails, and for each end of its ports the first one that is on the same ring
    /// outside (empty: none is).
    fn ring(&mut self, at: ContextIx, ports: &[bool], outside: &[PortNode]) -> RingIx {
        let asked = (at, ports.to_vec(), outside.to_vec());
        if let Some(&known) = self.asked.get(&asked) {
            return known;
        }
        let mut graph = self.graph(at, ports);
        let boundary: Vec<NetIx> = graph.template.boundary().collect();
        for (own, &first) in outside.iter().enumerate().filter(|&(own, &first)| own as u32 != first) {
            let (own, first) = (graph.at_pin(&boundary, own as u32), graph.at_pin(&boundary, first));
            graph.edges.extend([(own, first), (first, own)]);
        }
        let component = components(&Edges::new(graph.nodes, &graph.edges));
        let found = self.found(at, &graph, &component);
        self.asked.insert(asked, found);
        found
    }

    fn found(&mut self, at: ContextIx, graph: &Graph<'_>, component: &[u32]) -> RingIx {
        let (context, template) = (graph.context, graph.template);
        let mut held: Vec<bool> = template.devices().map(|device| self.is_held(graph, device, component)).collect();
        if !held.contains(&true) {
            held.clear();
        }
        let mut below = Vec::with_capacity(template.instances.len());
        for (instance, &child) in template.instance_indices().zip(&context.children) {
            let pins = template.instance_pins(instance);
            let ports: Vec<bool> = pins.iter().map(|&net| graph.is_rail(context.root(net))).collect();
            let outside = outside(graph, pins, &ports, component);
            below.push(self.ring(child, &ports, &outside));
        }
        if below.iter().all(|&ring| ring == NO_RING) {
            below.clear();
        }
        if held.is_empty() && below.is_empty() {
            return NO_RING;
        }
        let next = self.rings.all.len() as RingIx;
        let ring = *self.known.entry((at, held.clone(), below.clone())).or_insert(next);
        if ring == next {
            self.rings.all.push(Ring { held, below });
        }
        ring
    }

    /// The gate of a device that has a condition on it, a net of its channel, the side that opens the channel, and the threshold. None
    /// where gate or channel stand on rails alone.
    fn control(&self, graph: &Graph<'_>, device: DeviceIx) -> Option<(NetIx, NetIx, Side, f64)> {
        let pins = graph.template.device_pins(device);
        let root = |pin: u8| graph.context.root(pins[pin as usize]);
        let (gate, channel, n, threshold) = match self.terminals(graph, device) {
            Terminals::Mos { d, g, s, n, threshold, .. } if threshold > f64::NEG_INFINITY => {
                (root(g), [root(d), root(s)], n, threshold)
            }
            Terminals::Bipolar { b, n, .. } => (root(b), [root(b), root(b)], n, f64::MIN_POSITIVE),
            _ => return None,
        };
        let moves = channel.into_iter().find(|&net| !graph.is_rail(net))?;
        let opens = if n { Side::Hi } else { Side::Lo };
        (!graph.is_rail(gate)).then_some((gate, moves, opens, threshold))
    }

    fn is_held(&self, graph: &Graph<'_>, device: DeviceIx, component: &[u32]) -> bool {
        let Some((gate, channel, opens, threshold)) = self.control(graph, device) else { return false };
        let ring = |side: usize| {
            component[graph.node(gate, opens.index()) as usize] == component[graph.node(channel, side) as usize]
        };
        ring(1 - opens.index()) || threshold <= 0.0 && ring(opens.index())
    }

    fn terminals(&self, graph: &Graph<'_>, device: DeviceIx) -> Terminals {
        self.shared.terminals[graph.template.types[device.0 as usize].0 as usize]
    }

    fn graph(&mut self, at: ContextIx, ports: &[bool]) -> Graph<'s> {
        let context = self.shared.contexts.get(at);
        let template = self.shared.template_of(at);
        let rail = self.rails(at, ports);
        let shown = self.shown_below(context, template, &rail);
        let mut graph =
            Graph { context, template, rail, group: Vec::new(), edges: Vec::new(), nodes: template.nets.len() * 2 };
        graph.group = self.groups(&graph, &shown);
        for device in template.devices() {
            if let Some((gate, channel, opens, _)) = self.control(&graph, device) {
                let from = graph.node(gate, opens.index());
                graph.edges.extend([(from, graph.node(channel, 0)), (from, graph.node(channel, 1))]);
            }
        }
        for (instance, shown) in template.instance_indices().zip(&shown) {
            let pins = template.instance_pins(instance);
            for (from, to) in &shown.leads {
                let from: Vec<u32> = from.iter().map(|&port| graph.at_pin(pins, port)).collect();
                let to: Vec<u32> = to.iter().map(|&port| graph.at_pin(pins, port)).collect();
                graph.lead(from.into_iter(), to.into_iter());
            }
        }
        graph
    }

    /// Nets that nothing moves: ports that are, declared ones, and what sources make of them.
    fn rails(&self, at: ContextIx, ports: &[bool]) -> Vec<bool> {
        let context = self.shared.contexts.get(at);
        let template = self.shared.template_of(at);
        let mut rail = vec![false; template.nets.len()];
        for (net, &is_rail) in template.boundary().zip(ports) {
            rail[context.root(net).0 as usize] |= is_rail;
        }
        for (net, _) in self.shared.rails_in(at, self.mode) {
            rail[net.0 as usize] = true;
        }
        let mut waiting: Vec<(usize, usize)> = self
            .shared
            .plans
            .get(at)
            .sources
            .iter()
            .map(|link| (link.plus.0 as usize, link.minus.0 as usize))
            .collect();
        loop {
            let before = waiting.len();
            waiting.retain(|&(plus, minus)| {
                let either = rail[plus] || rail[minus];
                (rail[plus], rail[minus]) = (either, either);
                !either
            });
            if waiting.len() == before {
                return rail;
            }
        }
    }

    fn groups(&self, graph: &Graph<'_>, shown: &[Rc<Shown>]) -> Vec<u32> {
        let (context, template) = (graph.context, graph.template);
        let mut groups = UnionFind::<u32>::new(template.nets.len());
        let mut join = |nets: &[NetIx]| {
            let mut moved = nets.iter().map(|&net| context.root(net)).filter(|&net| !graph.is_rail(net));
            if let Some(first) = moved.next() {
                moved.for_each(|net| _ = groups.union(first.0, net.0));
            }
        };
        for device in template.devices() {
            let pins = template.device_pins(device);
            let pin = |pin: u8| pins[pin as usize];
            match self.terminals(graph, device) {
                Terminals::Mos { d, s, b, .. } => join(&[pin(d), pin(s), pin(b.unwrap_or(s))]),
                Terminals::Bipolar { c: x, b: y, e: z, .. } | Terminals::Jfet { d: x, g: y, s: z, .. } => {
                    join(&[pin(x), pin(y), pin(z)]);
                }
                Terminals::Diode { a: x, k: y, .. }
                | Terminals::Through { a: x, b: y, .. }
                | Terminals::Source { plus: x, minus: y } => join(&[pin(x), pin(y)]),
                Terminals::Inductor { .. } | Terminals::Mute => {}
            }
        }
        for (instance, shown) in template.instance_indices().zip(shown) {
            let pins = template.instance_pins(instance);
            for (position, &first) in shown.joined.iter().enumerate() {
                if position as u32 != first {
                    join(&[pins[position], pins[first as usize]]);
                }
            }
        }
        groups.into_labeling()
    }

    fn shown_below(&mut self, context: &Context, template: &Template, rail: &[bool]) -> Vec<Rc<Shown>> {
        let instances = template.instance_indices().zip(&context.children);
        instances
            .map(|(instance, &child)| {
                let pins = template.instance_pins(instance);
                self.shown(child, pins.iter().map(|&net| rail[context.root(net).0 as usize]).collect())
            })
            .collect()
    }

    fn shown(&mut self, at: ContextIx, ports: Vec<bool>) -> Rc<Shown> {
        let asked = (at, ports);
        if let Some(known) = self.shown.get(&asked) {
            return Rc::clone(known);
        }
        let graph = self.graph(at, &asked.1);
        let boundary: Vec<NetIx> = graph.template.boundary().map(|net| graph.context.root(net)).collect();
        let mut first_of: HashMap<u32, u32> = HashMap::new();
        let mut shown = Shown::default();
        let mut ends: Vec<(PortNode, u32)> = Vec::new();
        for (position, &net) in (0..).zip(&boundary) {
            let first = match graph.is_rail(net) {
                true => position,
                false => *first_of.entry(graph.group[net.0 as usize]).or_insert(position),
            };
            shown.joined.push(first);
            if first == position && !graph.is_rail(net) {
                ends.extend([0, 1].map(|side| (position * 2 + side, graph.node(net, side as usize))));
            }
        }
        shown.leads = leads(&Edges::new(graph.nodes, &graph.edges), &ends);
        let shown = Rc::new(shown);
        self.shown.insert(asked, Rc::clone(&shown));
        shown
    }
}

/// For each end of an instance's ports, the first one of the instance on the same ring; empty where all are alone.
fn outside(graph: &Graph<'_>, pins: &[NetIx], rails: &[bool], component: &[u32]) -> Vec<PortNode> {
    let mut first_of: HashMap<u32, PortNode> = HashMap::new();
    let mut all = Vec::with_capacity(pins.len() * 2);
    for own in 0..pins.len() as u32 * 2 {
        all.push(match rails[own as usize / 2] {
            true => own,
            false => *first_of.entry(component[graph.at_pin(pins, own) as usize]).or_insert(own),
        });
    }
    if all.iter().zip(0..).all(|(&first, own)| first == own) { Vec::new() } else { all }
}
