//! Walking a design from one device: its nets through the hierarchy, up and down, in one of the surroundings it stands in.
//!
//! A cell's context may have many callers. A walk begins in the cell itself (its anchor). Where the question leads out of the
//! anchor, the walk notes that its answer is worth nothing ([`Walker::must_look_above`]), and the question is asked again from each
//! caller ([`Surroundings`]). So only those surroundings are told apart that the question looked at: a device that is
//! decided inside its cell is asked about once, however many instances there are; and all questions with one anchor share what
//! they learn ([`Walks`]).

use super::local::{MOST_PINS, Roles};
use super::{Role, Use};
use crate::declared::Class;
use crate::design::{DeviceIx, Element, InstanceIx, NetIx, Sizes};
use crate::graph::{Context, Mark, Pin};
use crate::names::Sym;
use crate::reach::{Interval, ReachIx, Terminals};
use hashbrown::{HashMap, HashSet};
use std::cell::RefCell;
use std::hash::Hash;
use std::rc::Rc;

/// At most so many surroundings of one device are looked at; the instances in the others are counted as not looked at.
pub const MOST_SURROUNDINGS: usize = 64;

/// Walks that know this many devices, or more of them than this, are given up for new ones: what they know costs memory.
const MOST_KNOWN: usize = 100_000;
const MOST_WALKS: usize = 1000;

/// Index of a [`Spot`] in its walker.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct SpotIx(pub u32);

/// One instance of a cell, as far as this walk has come to know it.
#[derive(Clone, Debug)]
pub struct Spot {
    /// Its context.
    pub at: ReachIx,
    /// Its caller and the statement there; none where the walk did not have to look.
    pub above: Option<(SpotIx, InstanceIx)>,
    below: Vec<(InstanceIx, SpotIx)>,
}

/// A net of one instance.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Net {
    /// The instance.
    pub spot: SpotIx,
    /// The net in its cell, as root.
    pub net: NetIx,
}

/// A device of one instance.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Unit {
    /// The instance.
    pub spot: SpotIx,
    /// The device in its cell.
    pub device: DeviceIx,
}

/// A MOS transistor with its nets. Drain and source as they work: a symmetric device drawn the other way round is turned.
#[derive(Clone, Copy, Debug)]
pub struct Mos {
    /// N-channel.
    pub n: bool,
    /// Drain.
    pub d: Net,
    /// Gate.
    pub g: Net,
    /// Source.
    pub s: Net,
    /// Body, where it has one.
    pub b: Option<Net>,
    /// Index of its class.
    pub class: Option<u32>,
    /// Whether it carries nothing whatever happens: a dummy, or idle.
    pub still: bool,
}

/// As what a device touches a net. `n` is its polarity.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs)]
pub enum Touch {
    Drain {
        n: bool,
    },
    Gate {
        n: bool,
    },
    Source {
        n: bool,
    },
    Body,
    /// Drain or source of a device that carries nothing: a dummy, an idle one.
    Still,
    Resistor,
    CurrentSource,
    Anode,
    Cathode,
    Capacitor,
    /// Anything else that may carry current.
    Conductor,
    /// A pin without a part in currents (an isolation pocket).
    Nothing,
}

/// A device on a net.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Touching {
    /// The device.
    pub unit: Unit,
    /// As what.
    pub touch: Touch,
}

/// Where a device is looked at: a context, and the instance statements that lead from there down to the device's cell.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Standing {
    /// The context; nothing above it matters.
    pub anchor: ReachIx,
    /// From there down.
    pub path: Vec<InstanceIx>,
}

/// The surroundings of one device that are still to be looked at.
#[derive(Clone, Debug, Default)]
pub struct Surroundings {
    pending: Vec<Standing>,
    met: usize,
    cut: bool,
}

impl Surroundings {
    /// The next surroundings, after those of `now`; `above`: whether these have to be told apart by their callers.
    pub fn next(&mut self, ground: &Roles<'_>, now: Standing, above: bool) -> Option<Standing> {
        if above {
            let parents = &ground.reach.get(now.anchor).parents;
            let room = if ground.is_worn_out() { 0 } else { MOST_SURROUNDINGS.saturating_sub(self.met) };
            if parents.len() > room {
                let seen: u64 = parents[..room].iter().map(|&(parent, _)| ground.reach.get(parent).count).sum();
                self.cut = true;
                ground.leave_unseen(ground.reach.get(now.anchor).count.saturating_sub(seen));
            }
            self.met += parents.len().min(room);
            self.pending.extend(parents[..parents.len().min(room)].iter().rev().map(|&(anchor, instance)| {
                let path = std::iter::once(instance).chain(now.path.iter().copied()).collect();
                Standing { anchor, path }
            }));
        }
        self.pending.pop()
    }

    /// Whether there were too many to look at all of them.
    pub fn are_cut(&self) -> bool {
        self.cut
    }
}

/// A walk, with what others want to keep beside it.
pub struct Walk<'w, T> {
    /// The walk.
    pub walker: RefCell<Walker<'w>>,
    /// What is kept beside it.
    pub beside: RefCell<T>,
}

/// Walks by their anchors: what one question learned serves the next.
#[derive(Default)]
pub struct Walks<'w, T> {
    all: RefCell<HashMap<ReachIx, Rc<Walk<'w, T>>>>,
}

impl<'w, T: Default> Walks<'w, T> {
    /// The walk from a context.
    pub fn from(&self, ground: &'w Roles<'w>, anchor: ReachIx) -> Rc<Walk<'w, T>> {
        let mut all = self.all.borrow_mut();
        let full = |walk: &Rc<Walk<'w, T>>| walk.walker.try_borrow().is_ok_and(|walk| walk.mos.len() >= MOST_KNOWN);
        if all.get(&anchor).is_some_and(full) || all.len() >= MOST_WALKS {
            all.clear();
        }
        let new = || Walk { walker: RefCell::new(Walker::new(ground, anchor)), beside: RefCell::default() };
        Rc::clone(all.entry(anchor).or_insert_with(|| Rc::new(new())))
    }
}

/// Something that was found, with what the way there met.
#[derive(Clone, Debug)]
pub(super) struct Found<T> {
    value: T,
    above: bool,
    crowded: Option<Net>,
}

/// A device and its width, metres.
type Width = (Unit, f64);

/// A walk from one context.
pub struct Walker<'w> {
    /// What it looks up.
    pub ground: &'w Roles<'w>,
    spots: Vec<Spot>,
    above: bool,
    crowded: Option<Net>,
    touching: HashMap<Net, Found<Option<Rc<Vec<Touching>>>>>,
    mos: HashMap<Unit, Found<Option<Mos>>>,
    sizes: HashMap<Unit, Rc<Sizes>>,
    pub(super) played: HashMap<(Unit, Role), Found<Option<Vec<Unit>>>>,
    pub(super) driven: HashMap<Net, Found<bool>>,
    /// Nets that the question under way has found not to be driven so far.
    pub(super) undriven: HashSet<Net>,
    pub(super) uses: HashMap<Net, Found<Use>>,
    pub(super) gates: HashMap<(Net, bool), Found<Rc<super::mirror::Gates>>>,
    pub(super) beside: HashMap<(Net, Net, bool), Found<Rc<super::mirror::Beside>>>,
    pub(super) mirrors: HashMap<(Net, Net, bool), Found<Rc<super::mirror::Group>>>,
    pub(super) widest: HashMap<(Net, Net, u32), Found<Option<Width>>>,
}

impl<'w> Walker<'w> {
    /// A walk that starts in a context.
    pub fn new(ground: &'w Roles<'w>, anchor: ReachIx) -> Walker<'w> {
        Walker {
            ground,
            spots: vec![Spot { at: anchor, above: None, below: Vec::new() }],
            above: false,
            crowded: None,
            touching: HashMap::new(),
            mos: HashMap::new(),
            sizes: HashMap::new(),
            played: HashMap::new(),
            driven: HashMap::new(),
            undriven: HashSet::new(),
            uses: HashMap::new(),
            gates: HashMap::new(),
            beside: HashMap::new(),
            mirrors: HashMap::new(),
            widest: HashMap::new(),
        }
    }

    /// The device of the cell that a path of instances leads to.
    pub fn unit(&mut self, path: &[InstanceIx], device: DeviceIx) -> Unit {
        let spot = path.iter().fold(SpotIx(0), |spot, &instance| self.below(spot, instance));
        Unit { spot, device }
    }

    /// Begins a question: what earlier ones met on their way counts no more.
    pub fn begin(&mut self) {
        self.above = false;
        self.crowded = None;
    }

    /// Whether the question led out of the anchor, so that its answer is worth nothing.
    pub fn must_look_above(&self) -> bool {
        self.above
    }

    /// Looks something up, or finds it; what the way there meets is met again by all that look it up.
    pub(super) fn once<K: Eq + Hash + Copy, T: Clone>(
        &mut self,
        of: impl Fn(&mut Self) -> &mut HashMap<K, Found<T>>,
        key: K,
        find: impl FnOnce(&mut Self) -> T,
    ) -> T {
        if let Some(known) = of(self).get(&key) {
            let known = known.clone();
            self.above |= known.above;
            self.crowded = self.crowded.or(known.crowded);
            return known.value;
        }
        let before = (std::mem::take(&mut self.above), self.crowded.take());
        let value = find(self);
        let found = Found { value: value.clone(), above: self.above, crowded: self.crowded };
        of(self).insert(key, found);
        self.above |= before.0;
        self.crowded = before.1.or(self.crowded);
        value
    }

    /// What the way of a question met so far, and a fresh start; to be given back to [`Walker::resume`].
    pub fn pause(&mut self) -> bool {
        std::mem::take(&mut self.above)
    }

    /// Goes on after [`Walker::pause`].
    pub fn resume(&mut self, above: bool) {
        self.above |= above;
    }

    /// A net with so many pins that it was not walked, if some question met one.
    pub fn crowded(&self) -> Option<Net> {
        self.crowded
    }

    /// An instance.
    pub fn spot(&self, at: SpotIx) -> &Spot {
        &self.spots[at.0 as usize]
    }

    /// The structural context of an instance.
    pub fn context(&self, at: SpotIx) -> &'w Context {
        let reach = self.ground.reach;
        reach.contexts.get(reach.get(self.spot(at).at).context)
    }

    /// The dotted path of an instance; where the walk did not look, by the first caller.
    pub fn path(&self, at: SpotIx) -> String {
        let (top, below) = self.stands(at);
        let above = self.ground.reach.path(top);
        let parts = [above, below];
        parts.into_iter().filter(|part| !part.is_empty()).collect::<Vec<_>>().join(".")
    }

    /// The highest context that the walk looked at above an instance, and the dotted path from there.
    pub fn stands(&self, at: SpotIx) -> (ReachIx, String) {
        let mut names = Vec::new();
        let mut here = at;
        while let Some((above, instance)) = self.spot(here).above {
            let template = self.ground.design().template(self.context(above).variant);
            names.push(self.ground.design().instance_name(template, instance));
            here = above;
        }
        names.reverse();
        (self.spot(here).at, names.join("."))
    }

    /// The dotted path of a device.
    pub fn unit_path(&self, unit: Unit) -> String {
        let template = self.ground.design().template(self.context(unit.spot).variant);
        let name = self.ground.design().device_name(template, unit.device);
        let above = self.path(unit.spot);
        if above.is_empty() { name.to_owned() } else { format!("{above}.{name}") }
    }

    /// A net's name in its cell.
    pub fn net_name(&self, net: Net) -> &'w str {
        let template = self.ground.design().template(self.context(net.spot).variant);
        self.ground.design().net_name(template, net.net)
    }

    fn above(&mut self, at: SpotIx) -> Option<(SpotIx, InstanceIx)> {
        let above = self.spot(at).above;
        if above.is_none() && !self.ground.reach.get(self.spot(at).at).parents.is_empty() {
            self.above = true;
        }
        above
    }

    fn below(&mut self, at: SpotIx, instance: InstanceIx) -> SpotIx {
        if let Some(&(_, known)) = self.spot(at).below.iter().find(|(of, _)| *of == instance) {
            return known;
        }
        let child = self.ground.reach.get(self.spot(at).at).children[instance.0 as usize];
        let below = SpotIx(self.spots.len() as u32);
        self.spots.push(Spot { at: child, above: Some((at, instance)), below: Vec::new() });
        self.spots[at.0 as usize].below.push((instance, below));
        below
    }

    /// A net of an instance, found as far up as it leads. A rail is left where it is: where it leads to is known.
    pub fn net(&mut self, spot: SpotIx, net: NetIx) -> Net {
        let net = Net { spot, net: self.context(spot).root(net) };
        if self.is_rail(net) { self.lift(net) } else { self.climb(net) }
    }

    /// As far up as the net leads.
    pub fn climb(&mut self, mut net: Net) -> Net {
        while let Some(position) = self.position(net) {
            let Some((above, instance)) = self.above(net.spot) else { break };
            net = self.in_caller(above, instance, position);
        }
        net
    }

    /// As far up as the net leads through callers that the walk has already chosen.
    fn lift(&self, mut net: Net) -> Net {
        while let (Some((above, instance)), Some(position)) = (self.spot(net.spot).above, self.position(net)) {
            net = self.in_caller(above, instance, position);
        }
        net
    }

    fn position(&self, net: Net) -> Option<u32> {
        let context = self.ground.reach.get(self.spot(net.spot).at).context;
        self.ground.local(context).position(net.net)
    }

    fn in_caller(&self, above: SpotIx, instance: InstanceIx, position: u32) -> Net {
        let context = self.context(above);
        let pins = self.ground.design().template(context.variant).instance_pins(instance);
        Net { spot: above, net: context.root(pins[position as usize]) }
    }

    /// Whether two nets are one.
    pub fn same(&self, a: Net, b: Net) -> bool {
        a == b || self.lift(a) == self.lift(b)
    }

    /// Whether a net is a declared rail, ground, or held by a source to one.
    pub fn is_rail(&self, net: Net) -> bool {
        let reach = self.ground.reach;
        let at = self.spot(net.spot).at;
        self.marks(net).iter().any(|mark| matches!(mark, Mark::Rail(_)))
            || self.is_ground(net)
            || (0..reach.modes.len()).any(|mode| reach.is_rail(at, mode, net.net))
    }

    pub(super) fn is_ground(&self, net: Net) -> bool {
        self.net_name(self.lift(net)) == "0"
    }

    pub(super) fn marks(&self, net: Net) -> &'w [Mark] {
        self.ground.reach.contexts.marks_of(self.ground.reach.get(self.spot(net.spot).at).context, net.net)
    }

    /// Whether a net is a port or global of the top: what stands on it outside is not known.
    pub fn leads_out(&self, net: Net) -> bool {
        let lifted = self.lift(net);
        self.position(lifted).is_some()
    }

    /// Everything that stands on a net, in this cell and all others; none where there is too much of it.
    pub fn on(&mut self, net: Net) -> Option<Rc<Vec<Touching>>> {
        let top = self.climb(net);
        self.once(
            |walker| &mut walker.touching,
            top,
            |walker| {
                let (mut found, mut steps) = (Vec::new(), 0);
                let complete = !walker.ground.is_worn_out() && walker.gather(top, &mut found, &mut steps);
                walker.ground.works(steps as u64 + 1);
                if !complete {
                    walker.crowded = Some(top);
                }
                complete.then(|| Rc::new(found))
            },
        )
    }

    /// What is on a net, and nothing where there is too much of it.
    pub fn each_on(&mut self, net: Net) -> Rc<Vec<Touching>> {
        self.on(net).unwrap_or_default()
    }

    fn gather(&mut self, net: Net, found: &mut Vec<Touching>, steps: &mut usize) -> bool {
        let context = self.ground.reach.get(self.spot(net.spot).at).context;
        let ground = self.ground;
        let local = ground.local(context);
        if local.pins.is_crowded(net.net) {
            return false;
        }
        for pin in local.pins.on(net.net) {
            *steps += 1;
            if *steps > MOST_PINS {
                return false;
            }
            match pin {
                Pin::Device(device, pin) => {
                    let unit = Unit { spot: net.spot, device };
                    let touch = self.touch(unit, pin);
                    found.push(Touching { unit, touch });
                }
                Pin::Instance(instance, position) => {
                    let below = self.below(net.spot, instance);
                    let context = self.context(below);
                    let inner = ground.design().template(context.variant).boundary().nth(position as usize);
                    let Some(inner) = inner else { continue };
                    let inner = Net { spot: below, net: context.root(inner) };
                    // Several ports on one net are one net inside: it is looked at through the first.
                    if self.position(inner) == Some(position) && !self.gather(inner, found, steps) {
                        return false;
                    }
                }
            }
        }
        true
    }

    fn touch(&mut self, unit: Unit, pin: u8) -> Touch {
        let context = self.ground.reach.get(self.spot(unit.spot).at).context;
        let (element, terminals) = self.ground.element(context, unit.device);
        match terminals {
            Terminals::Mos { d, g, s, b, n, .. } => {
                if pin == g {
                    return Touch::Gate { n };
                }
                if pin != d && pin != s {
                    return if b == Some(pin) { Touch::Body } else { Touch::Nothing };
                }
                let (still, turned) = self.manner(unit, d, g, s);
                match (still, (pin == d) != turned) {
                    (true, _) => Touch::Still,
                    (false, true) => Touch::Drain { n },
                    (false, false) => Touch::Source { n },
                }
            }
            Terminals::Diode { a, k, .. } if pin == a || pin == k => {
                if pin == a {
                    Touch::Anode
                } else {
                    Touch::Cathode
                }
            }
            Terminals::Through { a, b, resistor } if pin == a || pin == b => match (resistor, element) {
                (true, _) => Touch::Resistor,
                (false, Element::CurrentSource) => Touch::CurrentSource,
                (false, _) => Touch::Conductor,
            },
            Terminals::Diode { .. } | Terminals::Through { .. } => Touch::Nothing,
            Terminals::Mute if element == Element::Capacitor => Touch::Capacitor,
            _ => Touch::Conductor,
        }
    }

    /// Whether a MOS carries nothing whatever happens, and whether its drawn drain works as its source.
    fn manner(&self, unit: Unit, d: u8, g: u8, s: u8) -> (bool, bool) {
        let context = self.context(unit.spot);
        let pins = self.ground.design().template(context.variant).device_pins(unit.device);
        let (drain, gate, source) = (pins[d as usize], pins[g as usize], pins[s as usize]);
        if context.same(drain, source) {
            return (true, false);
        }
        let class = self.class(unit);
        let turned = super::ends::is_turned(self.ground, self.spot(unit.spot).at, unit.device);
        let depletion = class.and_then(|class| class.threshold).is_some_and(|threshold| threshold.lo < 0.0);
        let idle = !depletion && context.same(gate, if turned { drain } else { source });
        (idle, turned)
    }

    /// The class of a device.
    pub fn class(&self, unit: Unit) -> Option<&'w Class> {
        let template = self.ground.design().template(self.context(unit.spot).variant);
        self.ground.design().class(template, unit.device)
    }

    /// The model on a device's card.
    pub fn model(&self, unit: Unit) -> Option<Sym> {
        let template = self.ground.design().template(self.context(unit.spot).variant);
        self.ground.design().device_type(template, unit.device).model
    }

    /// A MOS transistor with its nets; none where the device is none.
    pub fn mos(&mut self, unit: Unit) -> Option<Mos> {
        self.once(|walker| &mut walker.mos, unit, |walker| walker.look_at(unit))
    }

    fn look_at(&mut self, unit: Unit) -> Option<Mos> {
        let context = self.ground.reach.get(self.spot(unit.spot).at).context;
        let (_, Terminals::Mos { d, g, s, b, n, .. }) = self.ground.element(context, unit.device) else { return None };
        let variant = self.context(unit.spot).variant;
        let template = self.ground.design().template(variant);
        let pins = template.device_pins(unit.device);
        let (still, turned) = self.manner(unit, d, g, s);
        let (d, s) = if turned { (s, d) } else { (d, s) };
        let class = self.ground.design().device_type(template, unit.device).class;
        let (d, g, s) = (pins[d as usize], pins[g as usize], pins[s as usize]);
        let b = b.map(|b| pins[b as usize]);
        Some(Mos {
            n,
            d: self.net(unit.spot, d),
            g: self.net(unit.spot, g),
            s: self.net(unit.spot, s),
            b: b.map(|b| self.net(unit.spot, b)),
            class,
            still,
        })
    }

    /// A MOS transistor that can carry current: no dummy, not idle.
    pub fn working(&mut self, unit: Unit) -> Option<Mos> {
        self.mos(unit).filter(|mos| !mos.still)
    }

    /// The other end of a two-terminal device.
    pub fn other_end(&mut self, unit: Unit, net: Net) -> Option<Net> {
        let template = self.ground.design().template(self.context(unit.spot).variant);
        let pins = template.device_pins(unit.device);
        let (a, b) = (*pins.first()?, *pins.get(1)?);
        let (a, b) = (self.net(unit.spot, a), self.net(unit.spot, b));
        Some(if self.same(a, net) { b } else { a })
    }

    /// The devices that touch a net in a wanted way, each once.
    pub(super) fn units(&mut self, net: Net, wanted: impl Fn(Touch) -> bool) -> Vec<Unit> {
        let mut found: Vec<Unit> = self.each_on(net).iter().filter(|on| wanted(on.touch)).map(|on| on.unit).collect();
        found.dedup();
        found
    }

    /// The first net of a two-terminal device.
    pub fn first_net(&mut self, unit: Unit) -> Option<Net> {
        let template = self.ground.design().template(self.context(unit.spot).variant);
        let first = *template.device_pins(unit.device).first()?;
        Some(self.net(unit.spot, first))
    }

    /// V(x) − V(y) in a mode; nets of two instances are compared through the reference nets alone.
    pub fn volts(&self, mode: usize, x: Net, y: Net) -> Interval {
        let reach = self.ground.reach;
        if self.same(x, y) {
            return Interval::point(0.0);
        }
        let (at_x, at_y) = (self.spot(x.spot).at, self.spot(y.spot).at);
        if x.spot == y.spot {
            return reach.between(at_x, mode, x.net, y.net);
        }
        let frames = super::drive::frames_of(reach, at_x);
        (0..frames).fold(Interval::ANY, |all, frame| {
            let (of_x, of_y) = (reach.of(at_x, mode, x.net, frame), reach.of(at_y, mode, y.net, frame));
            all.and(Interval { lo: of_x.lo - of_y.hi, hi: of_x.hi - of_y.lo })
        })
    }

    /// Looks up to the top, for a question that wants the full path.
    pub fn reach_the_top(&mut self, spot: SpotIx) {
        let mut here = spot;
        while let Some((above, _)) = self.above(here) {
            here = above;
        }
    }

    /// A device's sizes.
    pub fn sizes(&mut self, unit: Unit) -> Option<Rc<Sizes>> {
        if let Some(known) = self.sizes.get(&unit) {
            return Some(known.clone());
        }
        let class = self.class(unit)?;
        let variant = self.context(unit.spot).variant;
        let card = self.ground.design().device_card(variant, unit.device);
        let sizes = Rc::new(self.ground.design().sizes(variant, class, &card));
        self.sizes.insert(unit, sizes.clone());
        Some(sizes)
    }

    /// Width of all copies, metres.
    pub fn total_width(&mut self, unit: Unit) -> Option<f64> {
        let sizes = self.sizes(unit)?;
        let total = sizes.width.as_ref().ok()? * sizes.copies.as_ref().ok()?;
        (total > 0.0 && total.is_finite()).then_some(total)
    }
}
