//! Structure recognition: which part a transistor plays in its circuit, asked on demand around one device.
//!
//! Each role has one file with its exact definition and one row in [`RECOGNISERS`]. A device may play several; each answer keeps
//! its evidence, the other devices. In the spirit of published building-block recognition (H. Graeb, S. Zizala, J. Eckmueller,
//! K. Antreich, "The sizing rules method for analog integrated circuit design", ICCAD 2001; M. Ohlrich et al., "SubGemini",
//! DAC 1993; both from memory).
//!
//! A question starts at one device and walks its nets through the hierarchy, up and down, with a [`Walker`]. It stops at rails
//! that carry supplies, and at nets with more than [`MOST_PINS`] pins, so that no list of a rail's million pins is ever walked.
//! A cell that stands in several surroundings is asked about once for each of those that the question sees
//! ([`Surroundings`]), at most [`MOST_SURROUNDINGS`]. Names of roles are the trade's.

mod back_to_back;
mod cascode;
mod diode;
mod drive;
mod ends;
mod follower;
mod gain;
mod idle;
mod latch;
mod local;
mod mirror;
mod pair;
mod sense;
mod summary;
mod switch;
mod walk;

pub use drive::Use;
pub use local::{MOST_PINS, Roles};
pub use mirror::{Member, Mirror};
pub use pair::Pair;
pub use walk::{
    MOST_SURROUNDINGS, Mos, Net, Spot, SpotIx, Standing, Surroundings, Touch, Touching, Unit, Walk, Walker, Walks,
};

/// What a transistor does in its circuit.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Role {
    /// Drain and source on one net: it can do nothing.
    Dummy,
    /// Gate on source: it never turns on.
    Idle,
    /// Half of a pair.
    Pair,
    /// Its gate is driven from its own drain.
    DiodeConnected,
    /// The diode-connected device of a mirror.
    MirrorReference,
    /// A device that repeats a reference's current.
    MirrorOutput,
    /// One of two devices, each gate on the other's drain.
    Latch,
    /// Stands on another device's drain with a steady gate.
    Cascode,
    /// Common source with a load.
    Gain,
    /// One of two in series, sources and gates joined.
    BackToBack,
    /// Its gate is driven rail to rail.
    Switch,
    /// Drain on a rail, source the output.
    Follower,
    /// Measures the current of a far wider device beside it.
    Sense,
}

impl Role {
    /// Its name.
    pub fn word(self) -> &'static str {
        match self {
            Role::Dummy => "dummy",
            Role::Idle => "idle",
            Role::Pair => "pair",
            Role::DiodeConnected => "diode-connected",
            Role::MirrorReference => "mirror-reference",
            Role::MirrorOutput => "mirror-output",
            Role::Latch => "latch",
            Role::Cascode => "cascode",
            Role::Gain => "gain",
            Role::BackToBack => "back-to-back",
            Role::Switch => "switch",
            Role::Follower => "follower",
            Role::Sense => "sense",
        }
    }

    /// Whether such a device works on and at its full voltage all the time, by design.
    pub fn works_all_the_time(self) -> bool {
        matches!(self, Role::MirrorOutput | Role::Cascode | Role::Follower | Role::Gain | Role::Pair)
    }
}

/// What a device is when it plays no known role.
pub const UNCLASSIFIED: &str = "unclassified";

/// A role that a device plays, with the devices that show it.
#[derive(Clone, Debug, PartialEq)]
pub struct Played {
    /// The role.
    pub role: Role,
    /// The other devices of the structure.
    pub with: Vec<Unit>,
}

/// Looks for one role of a device: the other devices of the structure, or none where it does not play it.
type Recogniser = fn(&mut Walker<'_>, Unit) -> Option<Vec<Unit>>;

/// All roles with what recognises them; the first that a device plays is its main one. A recogniser may ask for roles that stand
/// above its own here, and [`Role::Latch`]: so no question comes back to itself.
pub const RECOGNISERS: &[(Role, Recogniser)] = &[
    (Role::Dummy, idle::dummy),
    (Role::Idle, idle::idle),
    (Role::Pair, |walker, unit| pair::pair(walker, unit).map(|pair| pair.others(unit))),
    (Role::DiodeConnected, diode::diode_connected),
    (Role::MirrorReference, |walker, unit| mirror::playing(walker, unit, Member::Reference)),
    (Role::MirrorOutput, |walker, unit| mirror::playing(walker, unit, Member::Output)),
    (Role::Latch, latch::latch),
    (Role::Cascode, cascode::cascode),
    (Role::Gain, gain::gain),
    (Role::BackToBack, back_to_back::back_to_back),
    (Role::Switch, switch::switch),
    (Role::Follower, follower::follower),
    (Role::Sense, sense::sense),
];

impl Walker<'_> {
    /// The devices with which a device plays a role; none where it does not.
    pub fn playing(&mut self, unit: Unit, role: Role) -> Option<Vec<Unit>> {
        self.once(
            |walker| &mut walker.played,
            (unit, role),
            |walker| {
                let recognise = RECOGNISERS.iter().find(|(of, _)| *of == role);
                recognise.and_then(|(_, recognise)| recognise(walker, unit))
            },
        )
    }

    /// Whether a device plays a role.
    pub fn plays(&mut self, unit: Unit, role: Role) -> bool {
        self.playing(unit, role).is_some()
    }

    /// All roles of a device, its main one first. Empty: unclassified.
    pub fn roles(&mut self, unit: Unit) -> Vec<Played> {
        let mut found = Vec::new();
        for &(role, _) in RECOGNISERS {
            if let Some(with) = self.playing(unit, role) {
                found.push(Played { role, with });
            }
            if matches!(found.last(), Some(Played { role: Role::Dummy | Role::Idle, .. })) {
                break;
            }
        }
        found
    }

    /// The mirror that a device belongs to, and as what.
    pub fn mirror(&mut self, unit: Unit) -> Option<Mirror> {
        mirror::mirror(self, unit)
    }

    /// The pair that a device is half of.
    pub fn pair(&mut self, unit: Unit) -> Option<Pair> {
        pair::pair(self, unit)
    }
}
