//! Frames: the reference nets against which reaches are kept, and the values of all rails in them.
//!
//! Rails are difference bounds: `BST: SW .. SW + 5.5V` says that BST is never below SW and at most 5.5 V above. Their values
//! in each frame are shortest paths over those bounds (Bellman-Ford), so that what one rail says of another holds both ways.

use super::interval::Interval;
use crate::declared::{Deck, End, Rail};
use crate::design::NetIx;
use crate::diag::Diagnostic;
use crate::graph::{ContextIx, Contexts, RailSlot, rail, rail_in_mode};
use hashbrown::HashMap;

/// A reference net.
#[derive(Clone, Debug, PartialEq)]
pub struct Frame {
    /// The net of the top; none for ground.
    pub net: Option<NetIx>,
    /// Its name; `0` for ground.
    pub name: String,
}

/// More frames than this are not kept: the rails that carry most go first.
pub(super) const MOST_FRAMES: usize = 32;

/// The frames of a top, and the values of its rails in them.
#[derive(Clone, Debug, Default)]
pub struct Frames {
    /// Ground first.
    pub all: Vec<Frame>,
    /// Rail nets of the top (roots), sorted.
    pub rails: Vec<NetIx>,
    /// For each mode, rail and frame.
    values: Vec<Vec<Vec<Interval>>>,
    /// For each mode and rail, the declaration that holds; none for nets that sources make rails.
    slots: Vec<Vec<Option<RailSlot>>>,
    /// Rails with a range that did not become frames, for want of room.
    pub left_out: usize,
}

/// A source of known value between two nets of the top: V(plus) − V(minus) is in the range.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct SourceLink {
    pub(super) plus: NetIx,
    pub(super) minus: NetIx,
    pub(super) range: Interval,
}

/// What [`Frames::new`] needs to know about a top.
pub(super) struct TopFacts<'t> {
    pub(super) at: ContextIx,
    pub(super) contexts: &'t Contexts,
    pub(super) deck: &'t Deck,
    pub(super) ground: Option<NetIx>,
    pub(super) sources: &'t [SourceLink],
    /// For each net: how many bodies, sources, resistors and diodes stand on it (0 or 1 is enough).
    pub(super) carries: &'t dyn Fn(NetIx) -> bool,
    pub(super) name: &'t dyn Fn(NetIx) -> String,
    pub(super) net_named: &'t dyn Fn(&str) -> Option<NetIx>,
    /// Names of the modes that are judged; one without a name where the deck has none.
    pub(super) modes: &'t [Option<usize>],
}

/// Difference bounds among rail nets; node 0 is ground.
struct Bounds {
    nodes: HashMap<NetIx, usize>,
    nets: Vec<Option<NetIx>>,
    /// `(x, y, most)`: V(x) − V(y) ≤ most.
    edges: Vec<(usize, usize, f64)>,
}

impl Bounds {
    fn node(&mut self, net: NetIx) -> usize {
        *self.nodes.entry(net).or_insert_with(|| {
            self.nets.push(Some(net));
            self.nets.len() - 1
        })
    }

    /// The most that each node can be above `base`, or (with `below`) that `base` can be above each.
    fn most(&self, base: usize, below: bool) -> Vec<f64> {
        let mut most = vec![f64::INFINITY; self.nets.len()];
        most[base] = 0.0;
        for _ in 0..self.nets.len() {
            let mut changed = false;
            for &(x, y, bound) in &self.edges {
                let (from, to) = if below { (x, y) } else { (y, x) };
                let candidate = most[from] + bound;
                if candidate < most[to] - 1e-12 {
                    most[to] = candidate;
                    changed = true;
                }
            }
            if !changed {
                break;
            }
        }
        most
    }
}

impl Frames {
    /// Finds the frames of a top and the values of its rails.
    pub(super) fn new(top: &TopFacts<'_>, diagnostics: &mut Vec<Diagnostic>) -> Frames {
        let mut frames = Frames::default();
        let per_mode: Vec<Bounds> = top.modes.iter().map(|&mode| bounds(top, mode, diagnostics)).collect();
        let mut rails: Vec<NetIx> = per_mode.iter().flat_map(|bounds| bounds.nets.iter().flatten().copied()).collect();
        rails.sort_unstable();
        rails.dedup();
        frames.rails = rails;
        frames.choose(top, &per_mode);
        for (index, bounds) in per_mode.iter().enumerate() {
            frames.values.push(frames.in_mode(bounds));
            let slots = frames.rails.iter().map(|&net| slot(top, net, top.modes[index])).collect();
            frames.slots.push(slots);
        }
        frames.report_contradictions(top, diagnostics);
        frames
    }

    fn choose(&mut self, top: &TopFacts<'_>, per_mode: &[Bounds]) {
        self.all.push(Frame { net: None, name: "0".to_owned() });
        let ground: Vec<Vec<Interval>> = per_mode.iter().map(|bounds| against(bounds, 0)).collect();
        let varies = |net: NetIx| {
            per_mode
                .iter()
                .zip(&ground)
                .any(|(bounds, values)| bounds.nodes.get(&net).is_some_and(|&at| values[at].hi > values[at].lo))
        };
        let named: Vec<NetIx> = crate::graph::all_rails(top.deck)
            .flat_map(|(_, rail)| [&rail.low, &rail.high])
            .filter_map(|end| match end {
                End::Net { net, .. } => (top.net_named)(net),
                End::Volts(_) => None,
            })
            .collect();
        // A rail that a steady source makes of another stands at a fixed distance from it: as a frame it would say nothing new.
        let own_range = |net: NetIx| {
            let declared = top.modes.iter().any(|&mode| slot(top, net, mode).is_some());
            declared
                || top
                    .sources
                    .iter()
                    .any(|link| (link.plus == net || link.minus == net) && link.range.hi > link.range.lo)
        };
        let mut wanted: Vec<(bool, NetIx)> = self
            .rails
            .iter()
            .filter(|&&net| varies(net) && own_range(net) && (named.contains(&net) || (top.carries)(net)))
            .map(|&net| (!named.contains(&net), net))
            .collect();
        wanted.sort_unstable();
        self.left_out = wanted.len().saturating_sub(MOST_FRAMES - 1);
        wanted.truncate(MOST_FRAMES - 1);
        self.all.extend(wanted.into_iter().map(|(_, net)| Frame { net: Some(net), name: (top.name)(net) }));
    }

    /// For each rail and frame.
    fn in_mode(&self, bounds: &Bounds) -> Vec<Vec<Interval>> {
        let by_frame: Vec<Option<Vec<Interval>>> = self
            .all
            .iter()
            .map(|frame| match frame.net {
                None => Some(against(bounds, 0)),
                Some(net) => bounds.nodes.get(&net).map(|&node| against(bounds, node)),
            })
            .collect();
        let value = |net: &NetIx, values: &Option<Vec<Interval>>| match (bounds.nodes.get(net), values) {
            (Some(&node), Some(values)) => values[node],
            _ => Interval::ANY,
        };
        self.rails.iter().map(|net| by_frame.iter().map(|values| value(net, values)).collect()).collect()
    }

    /// The value of a rail net in a mode and frame; none where the net is no rail in that mode.
    pub fn value(&self, mode: usize, net: NetIx, frame: usize) -> Option<Interval> {
        let at = self.rails.binary_search(&net).ok()?;
        Some(self.values[mode][at][frame]).filter(|value| *value != Interval::ANY)
    }

    /// The declaration that holds for a rail net in a mode.
    pub fn slot(&self, mode: usize, net: NetIx) -> Option<RailSlot> {
        self.slots[mode][self.rails.binary_search(&net).ok()?]
    }

    fn report_contradictions(&self, top: &TopFacts<'_>, diagnostics: &mut Vec<Diagnostic>) {
        for (mode, by_rail) in self.values.iter().enumerate() {
            for (&net, values) in self.rails.iter().zip(by_rail) {
                let Some(slot) =
                    self.slots[mode].get(self.rails.partition_point(|&rail| rail < net)).copied().flatten()
                else {
                    continue;
                };
                if values[0].is_empty() {
                    let declared = rail(top.deck, slot);
                    let name = (top.name)(net);
                    let fault = Diagnostic::error(
                        "deck",
                        declared.value_place,
                        format!("the range of the rail `{name}` is empty: its low end lies above its high end"),
                    )
                    .with_help("look at the rails that its ends name: their own ranges must leave room between");
                    if !diagnostics.iter().any(|other| other.span == fault.span) {
                        diagnostics.push(fault);
                    }
                }
            }
        }
    }
}

/// All nodes' ranges against one of them.
fn against(bounds: &Bounds, base: usize) -> Vec<Interval> {
    let (above, below) = (bounds.most(base, false), bounds.most(base, true));
    above.into_iter().zip(below).map(|(hi, lo)| Interval { lo: -lo, hi }).collect()
}

/// The rail declaration that holds for a net in a mode: the mode's own goes first, an exact name before a pattern.
fn slot(top: &TopFacts<'_>, net: NetIx, mode: Option<usize>) -> Option<RailSlot> {
    rail_in_mode(top.deck, top.contexts.marks_of(top.at, net), mode)
}

fn bounds(top: &TopFacts<'_>, mode: Option<usize>, diagnostics: &mut Vec<Diagnostic>) -> Bounds {
    let mut bounds = Bounds { nodes: HashMap::new(), nets: vec![None], edges: Vec::new() };
    if let Some(ground) = top.ground {
        let node = bounds.node(ground);
        bounds.edges.extend([(node, 0, 0.0), (0, node, 0.0)]);
    }
    for &(net, _) in top.contexts.get(top.at).marked() {
        if let Some(slot) = slot(top, net, mode) {
            bounds.node(net);
            declare(top, &mut bounds, net, rail(top.deck, slot), diagnostics);
        }
    }
    follow_sources(top.sources, &mut bounds);
    bounds
}

fn declare(top: &TopFacts<'_>, bounds: &mut Bounds, net: NetIx, rail: &Rail, diagnostics: &mut Vec<Diagnostic>) {
    let node = bounds.node(net);
    for (end, is_high) in [(&rail.low, false), (&rail.high, true)] {
        let (other, offset) = match end {
            End::Volts(volts) => (0, *volts),
            End::Net { net: name, offset } => match (top.net_named)(name) {
                Some(other) => (bounds.node(other), *offset),
                None => {
                    report_unknown_end(name, rail, diagnostics);
                    continue;
                }
            },
        };
        bounds.edges.push(if is_high { (node, other, offset) } else { (other, node, -offset) });
    }
}

fn report_unknown_end(name: &str, rail: &Rail, diagnostics: &mut Vec<Diagnostic>) {
    let fault = Diagnostic::error(
        "deck",
        rail.value_place,
        format!("an end of the rail `{}` names `{name}`, which is no net of the top", rail.net.text()),
    )
    .with_help(format!("declare it against a net of the top cell, or in volts; nets of other names: net(\"{name}\")"));
    if !diagnostics.contains(&fault) {
        diagnostics.push(fault);
    }
}

/// A source with one end on a rail makes its other end one, unless that is declared.
fn follow_sources(sources: &[SourceLink], bounds: &mut Bounds) {
    let mut waiting: Vec<&SourceLink> = sources.iter().collect();
    loop {
        let before = waiting.len();
        waiting.retain(|link| {
            let (plus, minus) = (bounds.nodes.contains_key(&link.plus), bounds.nodes.contains_key(&link.minus));
            if !plus && !minus {
                return true;
            }
            // Between two nets whose voltage is known already, a source can only agree or be a mistake of the netlist.
            if !(plus && minus) {
                let (p, m) = (bounds.node(link.plus), bounds.node(link.minus));
                bounds.edges.extend([(p, m, link.range.hi), (m, p, -link.range.lo)]);
            }
            false
        });
        if waiting.len() == before {
            return;
        }
    }
}
