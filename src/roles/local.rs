//! What recognition looks up again and again: for each context what stands on which net, for each rail whether it is a supply.

use super::summary::{self, Bits, Summary};
use crate::declared::Deck;
use crate::design::{Design, Element, NetIx};
use crate::graph::{ContextIx, Mark, PinTable, RailSlot};
use crate::reach::{Reach, Terminals, terminals};
use hashbrown::HashSet;
use std::sync::OnceLock;
use std::sync::atomic::{AtomicU64, Ordering};

/// Nets with more pins than this (in one cell, or in all) are not walked: no structure of the kind that is looked for has as many.
pub const MOST_PINS: usize = 1000;

/// All questions of a run together walk at most so many pins, and so many for each pin of a context: the work grows with the design, whatever
/// its structure.
const LEAST_WORK: u64 = 2_000_000;
const WORK_PER_PIN: u64 = 4;

/// The ground of recognition: nothing in it is computed before somebody asks.
pub struct Roles<'r> {
    /// Voltages, with the design and its contexts.
    pub reach: &'r Reach<'r>,
    pub(super) terminals: Vec<Terminals>,
    locals: Vec<OnceLock<Local>>,
    supplies: OnceLock<HashSet<RailSlot>>,
    summary: OnceLock<Summary>,
    unseen: AtomicU64,
    work: AtomicU64,
    most_work: u64,
}

/// What stands on the nets of one context. Nets are roots throughout.
pub(super) struct Local {
    pub(super) pins: PinTable,
    /// Boundary nets and their positions, sorted by net; of several positions on one net, the first.
    positions: Vec<(NetIx, u32)>,
    /// Nets on which bodies or sources of the cell's own devices stand.
    supplies: Vec<bool>,
}

impl Local {
    /// The boundary position of a net.
    pub(super) fn position(&self, net: NetIx) -> Option<u32> {
        self.positions.binary_search_by_key(&net, |&(net, _)| net).ok().map(|at| self.positions[at].1)
    }

    /// Whether bodies or sources of the cell's own devices stand on a net.
    pub(super) fn supplies(&self, net: NetIx) -> bool {
        self.supplies[net.0 as usize]
    }
}

impl<'r> Roles<'r> {
    /// Prepares for questions.
    pub fn new(reach: &'r Reach<'r>) -> Roles<'r> {
        let mut locals = Vec::new();
        locals.resize_with(reach.contexts.all.len(), OnceLock::new);
        let terminals = terminals(reach.design);
        let pins: usize =
            reach.contexts.all.iter().map(|context| reach.design.template(context.variant).pins.len()).sum();
        let most_work = LEAST_WORK + WORK_PER_PIN * pins as u64;
        Roles {
            reach,
            terminals,
            locals,
            supplies: OnceLock::new(),
            summary: OnceLock::new(),
            unseen: AtomicU64::new(0),
            work: AtomicU64::new(0),
            most_work,
        }
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

    /// Whether so many pins were walked that recognition gives up: what is asked from then on is unknown.
    pub fn is_worn_out(&self) -> bool {
        self.work.load(Ordering::Relaxed) >= self.most_work
    }

    pub(super) fn works(&self, pins: u64) {
        self.work.fetch_add(pins, Ordering::Relaxed);
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
        let mut supplies = vec![false; template.nets.len()];
        for device in template.devices() {
            let kind = template.types[device.0 as usize];
            if let Terminals::Mos { s, b, .. } = self.terminals[kind.0 as usize] {
                let pins = template.device_pins(device);
                for pin in [Some(s), b].into_iter().flatten() {
                    supplies[context.root(pins[pin as usize]).0 as usize] = true;
                }
            }
        }
        Local { pins: PinTable::rooted(template, &|net| context.root(net), MOST_PINS), positions, supplies }
    }

    fn bits(&self, at: ContextIx, net: NetIx) -> Bits {
        let root = self.reach.contexts.get(at).root(net);
        self.summary.get_or_init(|| Summary::new(self)).of(at, root)
    }

    /// Whether a device may belong to a mirror with its reference in the netlist, by a glance at its gate's net. `n`: its polarity.
    pub fn may_mirror(&self, at: ContextIx, gate: NetIx, n: bool) -> bool {
        let wanted = summary::of(n, summary::GATES | summary::REFERENCE);
        self.bits(at, gate) & wanted == wanted
    }

    /// Whether a device may be half of a pair, by a glance at its source's net.
    pub fn may_pair(&self, at: ContextIx, source: NetIx, n: bool) -> bool {
        self.bits(at, source) & summary::of(n, summary::SOURCES) != 0
    }

    /// Whether a device may be a common-source stage, by a glance at its drain's net: something may load it, or stand on it as a cascode.
    pub fn may_gain(&self, at: ContextIx, drain: NetIx, n: bool) -> bool {
        let loads =
            summary::RESISTOR | summary::CURRENT | summary::of(!n, summary::DRAIN) | summary::of(n, summary::SOURCE);
        self.bits(at, drain) & loads != 0
    }

    /// Whether resistors may stand on a net.
    pub fn may_resist(&self, at: ContextIx, net: NetIx) -> bool {
        self.bits(at, net) & summary::RESISTOR != 0
    }

    /// Whether all that pulls a net may have a known current: channels or sources, and nothing that conducts in a way of its own.
    pub fn may_be_held(&self, at: ContextIx, net: NetIx) -> bool {
        let bits = self.bits(at, net);
        let pulls = summary::of(true, summary::DRAIN) | summary::of(false, summary::DRAIN) | summary::CURRENT;
        bits & pulls != 0 && bits & summary::OTHER == 0
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
