//! A first look at a device: the answers that take a few comparisons and note nothing. A million devices are asked most rules this
//! way, and only those that do not clearly hold are looked at again by a [`DeviceView`], which can say why.

use super::World;
use super::ratings::Outcome;
use crate::declared::{Class, Kind, Rating, TieTarget};
use crate::design::{DeviceIx, NetIx, Template};
use crate::graph::{Context, Mark};
use crate::reach::{Interval, ReachContext, ReachIx};

/// Which pins a class's questions are about, looked up once for a class.
#[derive(Clone, Copy, Debug)]
pub struct Shape<'w> {
    class: &'w Class,
    d: Option<usize>,
    g: Option<usize>,
    s: Option<usize>,
    is_mos: bool,
    is_depletion: bool,
}

impl<'w> Shape<'w> {
    /// Of a class.
    pub fn of(class: &'w Class) -> Shape<'w> {
        Shape {
            class,
            d: class.pin("d"),
            g: class.pin("g"),
            s: class.pin("s"),
            is_mos: class.kind.is_mos(),
            is_depletion: class.threshold.is_some_and(|threshold| threshold.lo < 0.0),
        }
    }

    /// The class.
    pub fn class(&self) -> &'w Class {
        self.class
    }
}

/// All devices of one context, to be glanced at one after another.
#[derive(Clone, Copy)]
pub struct Cells<'w> {
    world: World<'w>,
    at: ReachIx,
    here: &'w ReachContext,
    context: &'w Context,
    template: &'w Template,
}

impl<'w> Cells<'w> {
    /// Of a context.
    pub fn new(world: World<'w>, at: ReachIx) -> Cells<'w> {
        let (here, context) = (world.reach.get(at), world.context(at));
        Cells { world, at, here, context, template: world.design.template(context.variant) }
    }

    /// One of its devices.
    pub fn glance(&self, device: DeviceIx, shape: Shape<'w>) -> Glance<'w> {
        Glance { around: *self, shape, pins: self.template.device_pins(device) }
    }
}

/// One device in its surroundings, with what is asked most.
pub struct Glance<'w> {
    around: Cells<'w>,
    shape: Shape<'w>,
    pins: &'w [NetIx],
}

/// The mode in which a pair is farthest outside, and by how much.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Excess {
    pub(super) mode: usize,
    pub(super) volts: f64,
    pub(super) range: Interval,
}

/// Voltages closer than this are the same, volts.
pub(super) const TOLERANCE: f64 = 1e-6;

/// An answer; *unknown* is one, too.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs)]
pub enum Truth {
    Yes,
    No,
    Unknown,
}

impl Truth {
    fn of(holds: bool) -> Truth {
        if holds { Truth::Yes } else { Truth::No }
    }
}

/// A question that a glance may answer: none where it takes a closer look.
pub type Question = fn(&Glance<'_>) -> Option<Truth>;

/// The attributes of devices that a glance may answer, by name.
pub fn question(name: &str) -> Option<Question> {
    let question: Question = match name {
        "dummy" => |glance| Some(Truth::of(glance.is_dummy())),
        "idle" => |glance| Some(Truth::of(glance.is_idle())),
        "body_held" => |glance| glance.is_body_held(),
        "ratings_held" => |glance| glance.are_ratings_held(),
        "swapped" => |glance| glance.is_swapped(),
        "gate_driven" => |glance| glance.is_gate_driven(),
        "overlap_held" => |glance| glance.is_overlap_held(),
        "mirrored" => |glance| glance.is_mirrored(),
        "amplifies" => |glance| glance.is_amplifying(),
        _ => return None,
    };
    Some(question)
}

impl Glance<'_> {
    fn net(&self, pin: Option<usize>) -> Option<NetIx> {
        self.pins.get(pin?).copied()
    }

    fn share(&self, a: Option<usize>, b: Option<usize>) -> bool {
        matches!((self.net(a), self.net(b)), (Some(a), Some(b)) if self.around.context.same(a, b))
    }

    fn modes(&self) -> std::ops::Range<usize> {
        0..self.around.world.reach.modes.len()
    }

    /// d, g and s on one net, or d on s: it can do nothing.
    pub(super) fn is_dummy(&self) -> bool {
        self.shape.is_mos && self.share(self.shape.d, self.shape.s)
    }

    /// Gate on source: it never turns on. An enhancement device, or one whose threshold is not declared.
    pub(super) fn is_idle(&self) -> bool {
        self.shape.is_mos && !self.shape.is_depletion && self.share(self.shape.g, self.shape.s)
    }

    /// The body on another pin's net; whether it is on a net of some name takes a closer look.
    fn is_body_held(&self) -> Option<Truth> {
        let tie = self.shape.class.body.as_ref()?;
        let held =
            |target: &TieTarget| matches!(target, TieTarget::Pin(other) if self.share(Some(tie.pin), Some(*other)));
        let by_name = |target: &TieTarget| matches!(target, TieTarget::Net(_));
        match tie.targets.iter().any(held) {
            false if tie.targets.iter().any(by_name) => None,
            held => Some(Truth::of(held)),
        }
    }

    /// V(plus) − V(minus) of two pins in a mode.
    pub(super) fn voltage(&self, mode: usize, plus: usize, minus: usize) -> Interval {
        match (self.net(Some(plus)), self.net(Some(minus))) {
            (Some(plus), Some(minus)) => {
                let Cells { world, here, context, .. } = self.around;
                world.reach.between_here(here, context, mode, plus, minus)
            }
            _ => Interval::ANY,
        }
    }

    /// How a rated pair comes out over all modes, and where it is worst.
    pub(super) fn judge_rating(&self, rating: &Rating) -> (Outcome, Option<Excess>) {
        let mut worst: Option<Excess> = None;
        let mut known = true;
        for mode in self.modes() {
            let range = self.voltage(mode, rating.plus, rating.minus);
            let above = range.known_hi().map_or(f64::NEG_INFINITY, |hi| hi - rating.range.hi);
            let below = range.known_lo().map_or(f64::NEG_INFINITY, |lo| rating.range.lo - lo);
            let volts = above.max(below);
            if volts > TOLERANCE && worst.is_none_or(|worst| volts > worst.volts) {
                worst = Some(Excess { mode, volts, range });
            }
            known &= (range.hi.is_finite() || rating.range.hi == f64::INFINITY)
                && (range.lo.is_finite() || rating.range.lo == f64::NEG_INFINITY);
        }
        let outcome = match worst {
            Some(_) => Outcome::Violated,
            None if known => Outcome::Proven,
            None => Outcome::Unproven,
        };
        (outcome, worst)
    }

    fn are_ratings_held(&self) -> Option<Truth> {
        let mut answer = Truth::Yes;
        for rating in &self.shape.class.ratings {
            match self.judge_rating(rating).0 {
                Outcome::Proven => {}
                Outcome::Violated => return Some(Truth::No),
                Outcome::Unproven => answer = Truth::Unknown,
            }
        }
        Some(answer)
    }

    /// V(plus) − V(minus), counted as for an n-channel device.
    fn upright(&self, mode: usize, plus: usize, minus: usize) -> Interval {
        let range = self.voltage(mode, plus, minus);
        if self.shape.class.kind == Kind::Pmos { range.negated() } else { range }
    }

    /// Whether the drain can be on the blocking side of the source in some mode. Where the device's body is on its drain, its body
    /// diode conducts before the drain can block anything, whatever the ranges of the two nets say.
    pub(super) fn can_block(&self, d: usize, s: usize) -> bool {
        let body = self.shape.class.pin("b");
        let never = self.share(body, Some(d)) && !self.share(body, Some(s));
        !never && self.modes().any(|mode| self.upright(mode, d, s).known_hi().is_some_and(|hi| hi > TOLERANCE))
    }

    fn is_swapped(&self) -> Option<Truth> {
        let (Some(d), Some(s)) = (self.shape.d, self.shape.s) else { return Some(Truth::No) };
        self.can_block(d, s).then_some(Truth::No)
    }

    /// Whether some conducting path ties the gate to a rail, and in every mode one of these paths can conduct. What hangs on
    /// something that nobody declares is unknown.
    pub(super) fn is_gate_driven(&self) -> Option<Truth> {
        let Some(net) = self.net(self.shape.g) else { return Some(Truth::Yes) };
        let Cells { world, at, .. } = self.around;
        let (reach, deck) = (world.reach, world.deck);
        let driven = self.modes().all(|mode| reach.is_driven(at, mode, net));
        Some(match driven && !reach.is_untied(at, net) {
            true => Truth::Yes,
            false if reach.is_open(at, net) || deck.rails.is_empty() && deck.modes.is_empty() => Truth::Unknown,
            false => Truth::No,
        })
    }

    /// Where nothing happens between modes, whether the device keeps from being on and high; what it carries, and as what, takes a
    /// closer look.
    fn is_overlap_held(&self) -> Option<Truth> {
        let class = self.shape.class;
        let limit = class.on_state?.vds;
        let (Some(d), Some(g), Some(s)) = (self.shape.d, self.shape.g, self.shape.s) else { return None };
        let deck = self.around.world.deck;
        if self.modes().len() != 1 || !deck.transitions.is_empty() {
            return None;
        }
        let vds = self.upright(0, d, s);
        if vds.hi <= limit && -vds.lo <= limit {
            return Some(Truth::Yes);
        }
        let least = class.threshold.map_or(f64::NEG_INFINITY, |threshold| threshold.lo);
        (self.upright(0, g, s).hi <= least).then_some(Truth::Yes)
    }

    /// A gate's net without a second gate or a possible reference belongs to no mirror; unless it is a bias.
    fn is_mirrored(&self) -> Option<Truth> {
        let gate = self.net(self.shape.g)?;
        let Cells { world, here, .. } = self.around;
        let n = self.shape.class.kind == Kind::Nmos;
        let rail = self.is_rail(gate) || self.modes().any(|mode| world.reach.is_rail(self.around.at, mode, gate));
        (!rail && !world.roles.may_mirror(here.context, gate, n)).then_some(Truth::No)
    }

    /// A pair's source is no rail and bears a second one; a gain stage's drain is none and bears a load, its gate is none.
    fn is_amplifying(&self) -> Option<Truth> {
        let (d, g, s) = (self.net(self.shape.d)?, self.net(self.shape.g)?, self.net(self.shape.s)?);
        let either = !self.shape.class.asymmetric && self.may_amplify(s, g, d);
        (!either && !self.may_amplify(d, g, s)).then_some(Truth::No)
    }

    fn may_amplify(&self, d: NetIx, g: NetIx, s: NetIx) -> bool {
        let Cells { world, here, .. } = self.around;
        let (roles, at, n) = (world.roles, here.context, self.shape.class.kind == Kind::Nmos);
        let pair = !self.is_rail(s) && roles.may_pair(at, s, n);
        let held = self.modes().any(|mode| world.reach.is_rail(self.around.at, mode, s));
        let based = held || self.is_rail(s) || roles.may_resist(at, s);
        pair || based && !self.is_rail(d) && !self.is_rail(g) && roles.may_gain(at, d, n)
    }

    fn is_rail(&self, net: NetIx) -> bool {
        let Cells { world, at, .. } = self.around;
        world.marks_of(at, net).iter().any(|mark| matches!(mark, Mark::Rail(_)))
    }
}
