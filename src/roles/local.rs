//! What recognition looks up again and again: for each context what stands on which net, for each rail whether it is a supply.

use crate::declared::Deck;
use crate::design::{Design, Element, NetIx};
use crate::graph::{ContextIx, Mark, PinTable, RailSlot};
use crate::reach::{Reach, Terminals, terminals};
use hashbrown::HashSet;
use std::sync::OnceLock;
use std::sync::atomic::{AtomicU64, Ordering};

/// Nets with more pins than this (in one cell, or in all) are not walked: no structure of the kind that is looked for has as many.
pub const MOST_PINS: usize = 1000;

/// The ground of recognition: nothing in it is computed before somebody asks.
pub struct Roles<'r> {
    /// Voltages, with the design and its contexts.
    pub reach: &'r Reach<'r>,
    pub(super) terminals: Vec<Terminals>,
    locals: Vec<OnceLock<Local>>,
    supplies: OnceLock<HashSet<RailSlot>>,
    unseen: AtomicU64,
}

/// Which gates stand on a net of a context, as far as its own devices say.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Gates {
    /// Two or more of one polarity.
    pub shared: bool,
    /// A device whose drain may lead to its gate: one with both on the net, or something that a chain could pass through.
    pub reference: bool,
}

/// What stands on the nets of one context. Nets are roots throughout.
pub(super) struct Local {
    pub(super) pins: PinTable,
    /// Boundary nets and their positions, sorted by net; of several positions on one net, the first.
    positions: Vec<(NetIx, u32)>,
    /// For each net, the marks below.
    flags: Vec<u8>,
}

const N_GATE: u8 = 1;
const N_GATES: u8 = 2;
const P_GATE: u8 = 4;
const P_GATES: u8 = 8;
const DIODE: u8 = 16;
const PASSES: u8 = 32;
const SUPPLIES: u8 = 64;

impl Local {
    /// The boundary position of a net.
    pub(super) fn position(&self, net: NetIx) -> Option<u32> {
        self.positions.binary_search_by_key(&net, |&(net, _)| net).ok().map(|at| self.positions[at].1)
    }

    /// Whether bodies or sources of the cell's own devices stand on a net.
    pub(super) fn supplies(&self, net: NetIx) -> bool {
        self.flags[net.0 as usize] & SUPPLIES != 0
    }
}

impl<'r> Roles<'r> {
    /// Prepares for questions.
    pub fn new(reach: &'r Reach<'r>) -> Roles<'r> {
        let mut locals = Vec::new();
        locals.resize_with(reach.contexts.all.len(), OnceLock::new);
        let terminals = terminals(reach.design);
        Roles { reach, terminals, locals, supplies: OnceLock::new(), unseen: AtomicU64::new(0) }
    }

    /// The design.
    pub fn design(&self) -> &'r Design<'r> {
        self.reach.design
    }

    /// The deck.
    pub fn deck(&self) -> &'r Deck {
        self.reach.deck
    }

    /// Instances whose surroundings were too many to look at all of them, over all questions so far.
    pub fn unseen(&self) -> u64 {
        self.unseen.load(Ordering::Relaxed)
    }

    pub(super) fn leave_unseen(&self, instances: u64) {
        self.unseen.fetch_max(instances, Ordering::Relaxed);
    }

    pub(super) fn local(&self, at: ContextIx) -> &Local {
        self.locals[at.0 as usize].get_or_init(|| self.look(at))
    }

    fn look(&self, at: ContextIx) -> Local {
        let context = self.reach.contexts.get(at);
        let template = self.design().template(context.variant);
        let mut positions: Vec<(NetIx, u32)> = template.boundary().map(|net| context.root(net)).zip(0..).collect();
        positions.sort_unstable();
        positions.dedup_by_key(|&mut (net, _)| net);
        let mut flags = vec![0; template.nets.len()];
        for device in template.devices() {
            let pins = template.device_pins(device);
            let mut raise = |pin: u8, flag: u8| {
                if let Some(&net) = pins.get(pin as usize) {
                    flags[context.root(net).0 as usize] |= flag;
                }
            };
            let kind = template.types[device.0 as usize];
            match self.terminals[kind.0 as usize] {
                Terminals::Mos { d, g, s, b, n, .. } => {
                    raise(s, SUPPLIES);
                    b.into_iter().for_each(|b| raise(b, SUPPLIES));
                    let (one, two) = if n { (N_GATE, N_GATES) } else { (P_GATE, P_GATES) };
                    let (drain, source) = (context.root(pins[d as usize]), context.root(pins[s as usize]));
                    let gate = context.root(pins[g as usize]);
                    let on_gate = &mut flags[gate.0 as usize];
                    *on_gate |= if *on_gate & one != 0 { two } else { one };
                    if gate == drain || gate == source {
                        flags[gate.0 as usize] |= DIODE;
                    }
                    // A cascode's drain, or a follower's source, may bring a drain back to this net.
                    for (net, other) in [(drain, source), (source, drain)] {
                        if context.mark_set(other) == crate::graph::MarkSet(0) {
                            flags[net.0 as usize] |= PASSES;
                        }
                    }
                    flags[source.0 as usize] |= PASSES;
                }
                Terminals::Through { a, b, resistor: true } => {
                    raise(a, PASSES);
                    raise(b, PASSES);
                }
                _ => {}
            }
        }
        Local { pins: PinTable::rooted(template, &|net| context.root(net), MOST_PINS), positions, flags }
    }

    /// What gates stand on a net of a context, by a glance that costs nothing: enough to leave most nets alone. A net that leads
    /// out of the cell or into an instance may have more.
    pub fn gates(&self, at: ContextIx, net: NetIx) -> Gates {
        let (local, context) = (self.local(at), self.reach.contexts.get(at));
        let root = context.root(net);
        let flags = local.flags[root.0 as usize];
        let elsewhere = local.position(root).is_some()
            || local.pins.on(root).any(|pin| matches!(pin, crate::graph::Pin::Instance(..)));
        Gates {
            shared: elsewhere || flags & (N_GATES | P_GATES) != 0,
            reference: elsewhere || flags & (DIODE | PASSES) != 0,
        }
    }

    /// Whether bodies or sources stand on some net that this declaration names.
    pub(super) fn is_supply(&self, slot: RailSlot) -> bool {
        self.supplies.get_or_init(|| self.find_supplies()).contains(&slot)
    }

    fn find_supplies(&self) -> HashSet<RailSlot> {
        let mut found = HashSet::new();
        for at in self.reach.contexts.indices() {
            let context = self.reach.contexts.get(at);
            let local = self.local(at);
            for &(net, set) in context.marked() {
                if local.supplies(net) {
                    found.extend(self.reach.contexts.marks.of(set).iter().filter_map(|mark| match mark {
                        Mark::Rail(slot) => Some(*slot),
                        Mark::Named(_) => None,
                    }));
                }
            }
        }
        found
    }

    /// Which terminal of a device is which.
    pub fn terminals_of(&self, at: ContextIx, device: crate::design::DeviceIx) -> Terminals {
        self.element(at, device).1
    }

    /// What a device is, electrically.
    pub(super) fn element(&self, at: ContextIx, device: crate::design::DeviceIx) -> (Element, Terminals) {
        let template = self.design().template(self.reach.contexts.get(at).variant);
        let kind = template.types[device.0 as usize].0 as usize;
        (self.design().types[kind].element, self.terminals[kind])
    }
}
