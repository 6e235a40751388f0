//! Currents through channels, worked out on demand from those that are known.
//!
//! Known currents are declared ones (`currents:`), those of current sources, and the most that a resistor carries between nets of
//! known reach. They travel by Kirchhoff's current law at a net where all other currents are known (a series connection is the
//! plainest case), and between the members of a mirror of one class by the ratio of width × copies / length. Half of a pair carries at
//! most what its tail does. What cannot be had that way stays unknown.
//!
//! A current is **exact** if it is declared, a source's, or follows from such by series, sums and ratios; else it is a **bound**
//! of the magnitude. A ratio leaves out what the drain's voltage adds (channel-length modulation): exact means as exact as a
//! designer's own ratio. A reference or output with a resistor in its source gives bounds alone.

mod limits;
mod narrow;
mod sums;

pub use narrow::caps;

use crate::declared::DeclaredCurrent;
use crate::roles::{Member, Net, SpotIx, Touch, Unit, Walker};
use crate::source::Span;
use hashbrown::{HashMap, HashSet};

/// What is known of the current through a channel.
#[derive(Clone, Debug, PartialEq)]
pub struct Current {
    /// Its magnitude, or the most that it can be, amperes.
    pub amps: f64,
    /// Whether it is that current, and not only a bound of it.
    pub exact: bool,
    /// Whether a mirror's ratio stands behind it: the drain's voltage adds to such a current.
    pub by_ratio: bool,
    /// Whether the channel itself is held to it (by a declaration, its gate, or what stands below its source). Else it is what its drain's
    /// net is fed with all the time, and a channel that switches carries more while it discharges that net.
    pub while_switching: bool,
    /// How it was found, from the known current on.
    pub steps: Vec<Step>,
}

/// One step on the way of a current.
#[derive(Clone, Debug, PartialEq)]
pub struct Step {
    /// The device that it goes through, where it is one.
    pub unit: Option<Unit>,
    /// The declaration that says it, where it is one.
    pub place: Option<Span>,
    /// The current there, amperes.
    pub amps: f64,
    /// Why.
    pub by: By,
}

/// Why a current is known.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum By {
    /// It is declared.
    Declared,
    /// A current source says it.
    Source,
    /// The most that a resistor carries.
    Resistor,
    /// What other currents at a net leave for it.
    Sum,
    /// The most that the others at a net leave for it.
    Most,
    /// A mirror's ratio.
    Ratio(f64),
}

/// At most this many devices are asked for one answer.
const MOST_ASKED: usize = 200;

/// The current of a device by all ways, or by the nets at its ends alone.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
struct Question {
    unit: Unit,
    by_nets_alone: bool,
}

/// Currents that were found on a walk so far.
#[derive(Debug, Default)]
pub struct Known {
    found: HashMap<Question, (Option<Current>, bool)>,
}

/// Currents around one walk.
pub struct Currents<'c, 'w> {
    pub(super) walker: &'c mut Walker<'w>,
    known: &'c mut Known,
    busy: HashSet<Question>,
    /// What the question under way has found so far; what is missing there may be for lack of that question's own answer.
    so_far: HashMap<Question, Option<Current>>,
}

impl<'c, 'w> Currents<'c, 'w> {
    /// Currents as seen from the start of a walk.
    pub fn new(walker: &'c mut Walker<'w>, known: &'c mut Known) -> Currents<'c, 'w> {
        Currents { walker, known, busy: HashSet::new(), so_far: HashMap::new() }
    }

    /// The current through a device's channel; none where it is not known.
    pub fn of(&mut self, unit: Unit) -> Option<Current> {
        self.ask(Question { unit, by_nets_alone: false })
    }

    fn ask(&mut self, question: Question) -> Option<Current> {
        if let Some((known, above)) = self.known.found.get(&question) {
            self.walker.resume(*above);
            return known.clone();
        }
        if let Some(known) = self.so_far.get(&question) {
            return known.clone();
        }
        if self.busy.is_empty() {
            return self.outermost(question);
        }
        if self.so_far.len() + self.busy.len() >= MOST_ASKED || !self.busy.insert(question) {
            return None;
        }
        let before = self.walker.pause();
        let found = self.look(question);
        self.busy.remove(&question);
        if found.as_ref().is_some_and(|current| current.exact) {
            self.known.found.insert(question, (found.clone(), self.walker.must_look_above()));
        } else {
            self.so_far.insert(question, found.clone());
        }
        self.walker.resume(before);
        found
    }

    /// Asks again as long as exact currents come to light on the way, since each may settle what was open before.
    fn outermost(&mut self, question: Question) -> Option<Current> {
        let above = self.walker.pause();
        loop {
            let before = self.known.found.len();
            self.busy.insert(question);
            let found = self.look(question);
            self.busy.remove(&question);
            self.so_far.clear();
            if found.as_ref().is_some_and(|current| current.exact) || self.known.found.len() == before {
                self.known.found.insert(question, (found.clone(), self.walker.must_look_above()));
                self.walker.resume(above);
                return found;
            }
        }
    }

    /// The current that a channel is held to while it switches; none where it is not known.
    pub fn while_switching(&mut self, unit: Unit) -> Option<Current> {
        let usual = self.of(unit);
        if usual.as_ref().is_some_and(|current| current.while_switching) {
            return usual;
        }
        let mos = self.walker.working(unit)?;
        self.left_for(unit, mos.s, Touch::Source { n: mos.n })
    }

    fn look(&mut self, question: Question) -> Option<Current> {
        let Question { unit, by_nets_alone } = question;
        if let Some(declared) = self.declared_through(unit) {
            return Some(declared);
        }
        if by_nets_alone {
            return self.by_its_nets(unit);
        }
        let own = self.ask(Question { unit, by_nets_alone: true });
        if own.as_ref().is_some_and(|current| current.exact) {
            return own;
        }
        better(own, self.by_mirror(unit))
    }

    /// What the nets at its ends leave for it.
    fn by_its_nets(&mut self, unit: Unit) -> Option<Current> {
        let mos = self.walker.working(unit)?;
        let at_drain = self.left_for(unit, mos.d, Touch::Drain { n: mos.n });
        if at_drain.as_ref().is_some_and(|current| current.exact) {
            return at_drain;
        }
        better(at_drain, self.left_for(unit, mos.s, Touch::Source { n: mos.n }))
    }

    /// What its mirror's ratio makes of another member's current.
    fn by_mirror(&mut self, unit: Unit) -> Option<Current> {
        let mirror = self.walker.mirror(unit)?;
        let own = self.strength(unit)?;
        let mut best = None;
        for &other in mirror.references.iter().chain(&mirror.outputs).filter(|&&other| other != unit) {
            let (Some((its_class, its)), Some(sources)) = (self.strength(other), self.sources(unit, other, &mirror))
            else {
                continue;
            };
            if its_class != own.0 {
                continue;
            }
            let current = self.ask(Question { unit: other, by_nets_alone: true });
            let Some(mut current) = current else { continue };
            // What bounds an output's current may be its load: the mirror would drive more, and drives the others with that.
            if !current.exact && !mirror.references.contains(&other) {
                continue;
            }
            let ratio = own.1 / its;
            current.amps *= ratio;
            current.exact &= sources == Sources::Joined;
            current.by_ratio = true;
            current.while_switching = true;
            current.steps.push(Step { unit: Some(unit), place: None, amps: current.amps, by: By::Ratio(ratio) });
            best = better(best, Some(current));
            if best.as_ref().is_some_and(|current: &Current| current.exact) {
                break;
            }
        }
        best
    }

    /// Whether the ratio of two members holds as it stands, or bounds the first one's current; none where it does neither.
    fn sources(&mut self, unit: Unit, other: Unit, mirror: &crate::roles::Mirror) -> Option<Sources> {
        let (own, its) = (self.walker.mos(unit)?, self.walker.mos(other)?);
        if self.walker.same(own.s, its.s) {
            return Some(Sources::Joined);
        }
        // A resistor in this device's source only takes from its drive; one in the other's does not say.
        let reference = mirror.member == Member::Output && mirror.references.contains(&other);
        (reference && self.walker.is_rail(its.s)).then_some(Sources::Degenerated)
    }

    /// Its class, and width × copies / length.
    fn strength(&mut self, unit: Unit) -> Option<(u32, f64)> {
        let class = self.walker.mos(unit)?.class?;
        let width = self.walker.total_width(unit)?;
        let sizes = self.walker.sizes(unit)?;
        let length = *sizes.length.as_ref().ok()?;
        (length > 0.0 && length.is_finite()).then(|| (class, width / length))
    }

    fn declared_through(&mut self, unit: Unit) -> Option<Current> {
        let ground = self.walker.ground;
        if ground.deck().currents_through.is_empty() {
            return None;
        }
        self.reach_the_top(unit.spot);
        let path = self.walker.unit_path(unit);
        let declared = ground.deck().currents_through.iter().find(|current| current.at.matches_path(&path))?;
        declared_current(declared, Some(unit))
    }

    /// The declared current that enters a net from outside.
    fn declared_into(&mut self, net: Net) -> Option<&'w DeclaredCurrent> {
        let deck = self.walker.ground.deck();
        if deck.currents_into.is_empty() {
            return None;
        }
        let net = self.walker.climb(net);
        let inner = deck.currents_into.iter().any(|current| current.at.text().contains('.'));
        if inner {
            self.reach_the_top(net.spot);
        } else if !self.walker.context(net.spot).parents.is_empty() {
            return None;
        }
        let above = self.walker.path(net.spot);
        let name = self.walker.net_name(net);
        let path = if above.is_empty() { name.to_owned() } else { format!("{above}.{name}") };
        deck.currents_into.iter().find(|current| current.at.matches_path(&path))
    }

    /// Makes the walk choose its callers up to the top, where a full path is wanted.
    fn reach_the_top(&mut self, spot: SpotIx) {
        self.walker.reach_the_top(spot);
    }
}

#[derive(Clone, Copy, PartialEq)]
enum Sources {
    Joined,
    Degenerated,
}

fn declared_current(declared: &DeclaredCurrent, unit: Option<Unit>) -> Option<Current> {
    let amps = declared.amps.lo.abs().max(declared.amps.hi.abs());
    let step = Step { unit, place: Some(declared.place), amps, by: By::Declared };
    amps.is_finite().then(|| Current { amps, exact: true, by_ratio: false, while_switching: true, steps: vec![step] })
}

/// Of two answers the exact one, else the smaller bound.
fn better(a: Option<Current>, b: Option<Current>) -> Option<Current> {
    match (a, b) {
        (Some(a), Some(b)) => Some(if a.exact != b.exact {
            if a.exact { a } else { b }
        } else if b.amps < a.amps {
            b
        } else {
            a
        }),
        (a, b) => a.or(b),
    }
}
