//! What decks declare, checked: classes, rails, modes, transitions, currents and rules.
//!
//! A value of one of these types exists only when its YAML was sound, so nothing above asks again. All voltages are in
//! volts, lengths in metres, currents in amperes, times in seconds; ranges without an end are infinite there.

use crate::diag::Severity;
use crate::expr::{Expr, Template};
use crate::names::Glob;
use crate::source::Span;
use crate::waiver::Waiver;

/// A closed range of plain numbers in base units. An absent end is infinite.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Range {
    /// Lower end, or `-∞`.
    pub lo: f64,
    /// Upper end, or `+∞`.
    pub hi: f64,
}

/// The kinds of device that a class can be.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
#[allow(missing_docs)]
pub enum Kind {
    Nmos,
    Pmos,
    Npn,
    Pnp,
    Njf,
    Pjf,
    Diode,
    Resistor,
    Capacitor,
    Inductor,
    /// Anything else: connected, but nothing is known of its inside.
    Box,
}

impl Kind {
    /// All kinds with their names in decks.
    pub const ALL: [(Kind, &'static str); 11] = [
        (Kind::Nmos, "nmos"),
        (Kind::Pmos, "pmos"),
        (Kind::Npn, "npn"),
        (Kind::Pnp, "pnp"),
        (Kind::Njf, "njf"),
        (Kind::Pjf, "pjf"),
        (Kind::Diode, "diode"),
        (Kind::Resistor, "resistor"),
        (Kind::Capacitor, "capacitor"),
        (Kind::Inductor, "inductor"),
        (Kind::Box, "box"),
    ];

    /// Its name in decks.
    pub fn word(self) -> &'static str {
        Kind::ALL.iter().find(|(kind, _)| *kind == self).map_or("box", |(_, word)| word)
    }

    /// Whether it is a MOS transistor.
    pub fn is_mos(self) -> bool {
        matches!(self, Kind::Nmos | Kind::Pmos)
    }
}

/// How a device's size follows from its parameters. Absent expressions leave that size unknown.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Size {
    /// Metres that one unit of the evaluated width and length stands for; none: metres, after `.option scale`.
    pub unit: Option<f64>,
    /// Total drawn width of one copy.
    pub width: Option<Expr>,
    /// Channel length.
    pub length: Option<Expr>,
    /// Number of fingers of one copy.
    pub fingers: Option<Expr>,
    /// Number of copies; none: the parameter `m`, 1 where it is left out.
    pub copies: Option<Expr>,
    /// Values of parameters that instance and header both leave out.
    pub defaults: Vec<(String, f64)>,
}

/// What the process asks of a device's fingers.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Fingers {
    /// Smallest number.
    pub min: Option<u32>,
    /// The number is a multiple of this.
    pub multiple_of: Option<u32>,
    /// Range of one finger's width, metres.
    pub width: Option<Range>,
}

/// The voltage that a pair of pins may bear.
#[derive(Clone, Debug, PartialEq)]
pub struct Rating {
    /// As written: `vds`, `v(iso,s)`.
    pub name: String,
    /// Index in `Class::pins` of the pin whose voltage counts positive.
    pub plus: usize,
    /// Index of the pin it is measured against.
    pub minus: usize,
    /// Volts.
    pub range: Range,
    /// Where the deck says so.
    pub place: Span,
}

/// Limits for being on and at high voltage together.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct OnState {
    /// |VDS| above this is high, volts.
    pub vds: f64,
    /// Current per width that may flow all the time, A/m.
    pub density: Option<f64>,
    /// Share of time, 0 to 1.
    pub duty: Option<f64>,
    /// Watts.
    pub power: Option<f64>,
    /// Where the deck says so.
    pub place: Span,
}

/// One of the nets that a pin may share.
#[derive(Clone, Debug, PartialEq)]
pub enum TieTarget {
    /// The net of another pin, by index in `Class::pins`.
    Pin(usize),
    /// A net or rail of the design, by name.
    Net(String),
}

/// The nets that a pin may share: any of them will do.
#[derive(Clone, Debug, PartialEq)]
pub struct Tie {
    /// The pin that is tied, by index in `Class::pins`.
    pub pin: usize,
    /// What it may be tied to.
    pub targets: Vec<TieTarget>,
    /// Where the deck says so.
    pub place: Span,
}

/// The drift region that holds the drain's voltage.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Drift {
    /// Metres.
    pub length: Option<f64>,
    /// Dopants per cubic metre.
    pub doping: Option<f64>,
}

/// A kind of device of the process.
#[derive(Clone, Debug, PartialEq)]
pub struct Class {
    /// Its name in the deck.
    pub name: String,
    /// Where the deck names it.
    pub place: Span,
    /// What it is.
    pub kind: Kind,
    /// The model or subcircuit names that mean it.
    pub models: Vec<Glob>,
    /// Pin names in netlist order, lower case.
    pub pins: Vec<String>,
    /// Whether it is drain-extended or otherwise made for high voltage.
    pub high_voltage: bool,
    /// Whether drain and source differ.
    pub asymmetric: bool,
    /// Whether the process qualifies it for matched or gain use.
    pub matched_use: bool,
    /// How sizes follow from parameters.
    pub size: Size,
    /// What is asked of fingers.
    pub fingers: Option<Fingers>,
    /// Allowed channel length, metres.
    pub length: Option<Range>,
    /// Gate threshold, volts, positive for enhancement, also of PMOS.
    pub threshold: Option<Range>,
    /// Rated pairs, in the order of the deck.
    pub ratings: Vec<Rating>,
    /// On-state limits.
    pub on_state: Option<OnState>,
    /// The tie of pin `b`.
    pub body: Option<Tie>,
    /// Ties of other pins.
    pub ties: Vec<Tie>,
    /// The drift region.
    pub drift: Option<Drift>,
    /// Range in which V(k,a) stays by design, volts.
    pub clamp: Option<Range>,
    /// A published source for its values, where the deck names one.
    pub source: Option<String>,
}

impl Class {
    /// The index of a pin.
    pub fn pin(&self, name: &str) -> Option<usize> {
        self.pins.iter().position(|pin| pin.eq_ignore_ascii_case(name))
    }
}

/// One end of a rail's range.
#[derive(Clone, Debug, PartialEq)]
pub enum End {
    /// Against ground.
    Volts(f64),
    /// Another net's own end, plus an offset in volts.
    Net {
        /// The net, by exact name or path.
        net: String,
        /// Volts to add.
        offset: f64,
    },
}

/// A net whose voltage the designer declares.
#[derive(Clone, Debug, PartialEq)]
pub struct Rail {
    /// The nets it means: names, globs, or paths with dots.
    pub net: Glob,
    /// Lowest voltage.
    pub low: End,
    /// Highest voltage.
    pub high: End,
    /// Its name in the YAML.
    pub place: Span,
    /// Its value in the YAML.
    pub value_place: Span,
}

/// A named set of rail values: one state of operation.
#[derive(Clone, Debug, PartialEq)]
pub struct Mode {
    /// Its name.
    pub name: String,
    /// The rails it overrides.
    pub rails: Vec<Rail>,
    /// Where it stands.
    pub place: Span,
}

/// A change from one mode to another.
#[derive(Clone, Debug, PartialEq)]
pub struct Transition {
    /// Index of the mode before.
    pub from: usize,
    /// Index of the mode after.
    pub to: usize,
    /// Seconds that it takes.
    pub takes: f64,
    /// How often in a second it happens.
    pub rate: f64,
    /// Where it stands.
    pub place: Span,
}

/// A current that the designer declares.
#[derive(Clone, Debug, PartialEq)]
pub struct DeclaredCurrent {
    /// A net it enters (`into`), or the instance path of a device it flows through.
    pub at: Glob,
    /// Amperes.
    pub amps: Range,
    /// Where it stands.
    pub place: Span,
}

/// What a rule ranges over.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
#[allow(missing_docs)]
pub enum Subject {
    Device,
    Net,
    Instance,
    Mirror,
    Pair,
    Class,
    /// The run itself: found by the program, with a page for its words.
    Run,
}

impl Subject {
    /// All subjects with their names in decks.
    pub const ALL: [(Subject, &'static str); 7] = [
        (Subject::Device, "device"),
        (Subject::Net, "net"),
        (Subject::Instance, "instance"),
        (Subject::Mirror, "mirror"),
        (Subject::Pair, "pair"),
        (Subject::Class, "class"),
        (Subject::Run, "run"),
    ];

    /// Its name in decks.
    pub fn word(self) -> &'static str {
        Subject::ALL.iter().find(|(subject, _)| *subject == self).map_or("run", |(_, word)| word)
    }
}

/// The two small netlists on a rule's page.
#[derive(Clone, Debug, PartialEq)]
pub struct Examples {
    /// Deck text that both use (classes, rails).
    pub deck: String,
    /// The rule fires on this one.
    pub fires: String,
    /// The rule stays quiet on this one.
    pub quiet: String,
}

/// A rule in force.
#[derive(Clone, Debug, PartialEq)]
pub struct Rule {
    /// Its id, `lower-case-with-hyphens`.
    pub id: String,
    /// Where it stands.
    pub place: Span,
    /// What it ranges over.
    pub subject: Subject,
    /// Which subjects it looks at; none: all.
    pub applies: Option<Expr>,
    /// What must hold; none only for rules about the run.
    pub require: Option<Expr>,
    /// Severity where violated.
    pub severity: Severity,
    /// Severity where unproven.
    pub unproven: Severity,
    /// One line: what it is about.
    pub title: String,
    /// The message where violated.
    pub say: Template,
    /// The message where unproven; none: made from `title`.
    pub say_unproven: Option<Template>,
    /// Labels at places of the card: place name and words. The first one is the finding's own place.
    pub point: Vec<(String, Template)>,
    /// What to do where violated.
    pub help: Option<Template>,
    /// What to declare where unproven.
    pub settle: Option<Template>,
    /// Why the rule exists, in a paragraph.
    pub why: String,
    /// Where the reason can be read.
    pub cite: Option<String>,
    /// Its example netlists; rules of teams may have none.
    pub examples: Option<Examples>,
}

/// Everything that the decks of a run declare, merged.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Deck {
    /// Netlists to read when none is named, with their places; paths as usable from here.
    pub netlists: Vec<(String, Span)>,
    /// The top cell, where one is named.
    pub top: Option<(String, Span)>,
    /// Folders beside the netlist's and the deck's own that includes may come from; paths as usable from here.
    pub include_roots: Vec<String>,
    /// Includes that are left out without complaint.
    pub include_skips: Vec<Glob>,
    /// Classes in the order of the decks.
    pub classes: Vec<Class>,
    /// Rails in the order of the decks.
    pub rails: Vec<Rail>,
    /// Modes in the order of the decks.
    pub modes: Vec<Mode>,
    /// Transitions.
    pub transitions: Vec<Transition>,
    /// Currents that enter nets.
    pub currents_into: Vec<DeclaredCurrent>,
    /// Currents through devices.
    pub currents_through: Vec<DeclaredCurrent>,
    /// Rules in force, ordered by id.
    pub rules: Vec<Rule>,
    /// Waivers, in the order of the decks.
    pub waivers: Vec<Waiver>,
    /// The files that are the run's own decks (not those that came with `use`).
    pub own_files: Vec<crate::source::FileId>,
}
