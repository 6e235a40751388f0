//! Every key that a deck may have, section by section, with what it holds: the one table that checking, "did you mean", the
//! reference, the schema for editors and the language server read.

use crate::declared::{Kind, Subject};
use crate::diag::Severity;
use crate::quantity::Dim;
use Holds::{
    Condition, Count, Day, Expression, List, Map, Message, Number, Part, Quantity, Rail, Range, Text, Texts, Truth,
    Unit, Word,
};

/// A map of the deck whose keys are fixed.
#[derive(Clone, Copy, Debug)]
pub struct Section {
    /// What messages call it.
    pub name: &'static str,
    /// Keys that it cannot do without, however decks lie over one another.
    pub needs: &'static [&'static str],
    /// Its keys.
    pub keys: &'static [Key],
}

/// One key.
#[derive(Clone, Copy, Debug)]
pub struct Key {
    /// As written.
    pub name: &'static str,
    /// What kind of value it has.
    pub holds: Holds,
    /// A line that says what it means.
    pub doc: &'static str,
}

const fn key(name: &'static str, holds: Holds, doc: &'static str) -> Key {
    Key { name, holds, doc }
}

/// What kind of value stands at a key.
#[derive(Clone, Copy, Debug)]
pub enum Holds {
    /// One text.
    Text,
    /// A list of texts, or one alone.
    Texts,
    /// `true` or `false`.
    Truth,
    /// A whole number from 1.
    Count,
    /// A number as a netlist has it: `1`, `0.5u`.
    Number,
    /// A unit of length.
    Unit,
    /// A day of the calendar.
    Day,
    /// One of these words.
    Word(fn() -> Vec<&'static str>),
    /// A quantity above zero.
    Quantity(Wanted),
    /// A range `a..b` of a quantity, either end of which may be left out; or one value.
    Range(Wanted),
    /// The voltage of a rail: ends are voltages, or nets give or take a voltage.
    Rail,
    /// An expression over the parameters of a card.
    Expression,
    /// A condition over names of the rule's subject.
    Condition,
    /// Words with expressions in braces.
    Message,
    /// A map with fixed keys.
    Part(&'static Section),
    /// A list of such maps.
    List(&'static Section),
    /// A map whose keys are names.
    Map(Named, &'static Holds),
}

/// What the free keys of a map name.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs)]
pub enum Named {
    Class,
    /// A net, or a glob of nets.
    Net,
    Mode,
    Rule,
    /// Two pins of a class: `vds`, `v(iso,s)`.
    Pair,
    Pin,
    Parameter,
    /// An instance path.
    Path,
    /// A place on a card.
    Place,
}

impl Named {
    /// What messages and the reference call it.
    pub fn word(self) -> &'static str {
        match self {
            Named::Class => "class",
            Named::Net => "net",
            Named::Mode => "mode",
            Named::Rule => "rule",
            Named::Pair => "pair of pins",
            Named::Pin => "pin",
            Named::Parameter => "parameter",
            Named::Path => "instance path",
            Named::Place => "place",
        }
    }
}

impl Holds {
    /// In words, for the reference and the schema.
    pub fn in_words(self) -> String {
        match self {
            Text => "text".to_owned(),
            Texts => "list of texts, or one".to_owned(),
            Truth => "`true` or `false`".to_owned(),
            Count => "whole number from 1".to_owned(),
            Number => "number as in the netlist".to_owned(),
            Unit => "unit of length".to_owned(),
            Day => "day, as 2027-03-01".to_owned(),
            Word(words) => format!("one of {}", words().join(" ")),
            Quantity(wanted) => format!("{}, such as {}", wanted.words, wanted.example),
            Range(wanted) => format!("range `a..b` of {}", wanted.words),
            Rail => "voltage, range of voltages, or other nets give or take one".to_owned(),
            Expression => "expression over the card's parameters".to_owned(),
            Condition => "condition".to_owned(),
            Message => "words, with expressions in braces".to_owned(),
            Part(_) => "map".to_owned(),
            List(_) => "list of maps".to_owned(),
            Map(named, &Part(_)) => format!("map by {}", named.word()),
            Map(named, below) => format!("map by {}: {}", named.word(), below.in_words()),
        }
    }
}

/// What kind of quantity a place asks for.
#[derive(Clone, Copy, Debug)]
pub struct Wanted {
    /// Its dimension.
    pub dim: Dim,
    /// In words, with an article.
    pub words: &'static str,
    /// As decks write one.
    pub example: &'static str,
}

pub(crate) const VOLTAGE: Wanted = Wanted { dim: Dim::VOLT, words: "a voltage", example: "5.5V" };
pub(crate) const CURRENT: Wanted = Wanted { dim: Dim::AMPERE, words: "a current", example: "10uA" };
pub(crate) const LENGTH: Wanted = Wanted { dim: Dim::METRE, words: "a length", example: "0.5um" };
pub(crate) const TIME: Wanted = Wanted { dim: Dim::SECOND, words: "a time", example: "5ns" };
pub(crate) const RATE: Wanted = Wanted { dim: Dim::HERTZ, words: "a frequency", example: "2MHz" };
pub(crate) const POWER: Wanted = Wanted { dim: Dim::WATT, words: "a power", example: "500mW" };
pub(crate) const DENSITY: Wanted = Wanted { dim: Dim::DENSITY, words: "a current per width", example: "3uA/um" };
pub(crate) const DOPING: Wanted = Wanted { dim: Dim::DOPING, words: "a doping", example: "1e16/cm3" };
pub(crate) const SHARE: Wanted = Wanted { dim: Dim::NONE, words: "a share of time", example: "1%" };

/// What rules may be.
pub(crate) const SEVERITIES: [Severity; 4] = [Severity::Error, Severity::Warning, Severity::Note, Severity::Silent];

fn kinds() -> Vec<&'static str> {
    Kind::ALL.iter().map(|(_, word)| *word).collect()
}

fn subjects() -> Vec<&'static str> {
    Subject::ALL.iter().map(|(_, word)| *word).collect()
}

fn severities() -> Vec<&'static str> {
    SEVERITIES.iter().map(|severity| severity.word()).collect()
}

/// The whole deck.
pub const DECK: Section = Section {
    name: "a deck",
    needs: &[],
    keys: &[
        key("use", Texts, "decks that this one builds upon: paths relative to this file, or `builtin:` names"),
        key("netlists", Texts, "netlists to check when none is named"),
        key("top", Text, "the cell to check from"),
        key("includes", Part(&INCLUDES), "where included files may come from, and which are left out"),
        key("classes", Map(Named::Class, &Part(&CLASS)), "the devices of the process, by name"),
        key("rails", Map(Named::Net, &Rail), "the voltages of nets, by name or glob"),
        key("modes", Map(Named::Mode, &Map(Named::Net, &Rail)), "states of operation: each sets some rails"),
        key("transitions", List(&TRANSITION), "changes from one mode to another"),
        key("currents", Part(&CURRENTS), "known currents"),
        key("rules", Map(Named::Rule, &Part(&RULE)), "rules: changes to those that came with `use`, and new ones"),
        key("waivers", List(&WAIVER), "findings that were accepted, with their reasons"),
    ],
};

/// `includes`.
pub const INCLUDES: Section = Section {
    name: "`includes`",
    needs: &[],
    keys: &[
        key("roots", Texts, "folders that included files may come from, beside those of the netlist and the deck"),
        key("skip", Texts, "globs of included files that are left out without complaint"),
    ],
};

/// One class.
pub const CLASS: Section = Section {
    name: "a class",
    needs: &[],
    keys: &[
        key("kind", Word(kinds), "what it is"),
        key("models", Texts, "model or subcircuit names that mean it; globs; left out: the class's own name"),
        key("pins", Texts, "its pins in netlist order; left out: those of the element's card"),
        key("high_voltage", Truth, "whether it is drain-extended or otherwise made for high voltage"),
        key("asymmetric", Truth, "whether drain and source differ"),
        key("matched_use", Truth, "whether the process qualifies it for matched or gain use"),
        key("size", Part(&SIZE), "how width, length, fingers and copies follow from the card's parameters"),
        key("fingers", Part(&FINGERS), "what is asked of its fingers"),
        key("length", Range(LENGTH), "allowed channel length"),
        key("threshold", Range(VOLTAGE), "range of the gate threshold, positive for enhancement"),
        key("ratings", Map(Named::Pair, &Range(VOLTAGE)), "allowed voltage of pairs of pins: vds, vgs, v(iso,s) …"),
        key("on_state", Part(&ON_STATE), "limits for being on at high voltage"),
        key("body", Part(&BODY), "the net that its body must share"),
        key("ties", Map(Named::Pin, &Texts), "the nets that other pins must share"),
        key("drift", Part(&DRIFT), "its drift region, for a check of the ratings"),
        key("clamp", Range(VOLTAGE), "range in which V(k,a) stays by design"),
        key("source", Text, "where its values are published"),
    ],
};

/// `size` of a class.
pub const SIZE: Section = Section {
    name: "`size`",
    needs: &[],
    keys: &[
        key("unit", Unit, "what one unit of width and length is: um, nm, m"),
        key("width", Expression, "total drawn width of one copy"),
        key("length", Expression, "channel length"),
        key("fingers", Expression, "number of fingers of one copy"),
        key("copies", Expression, "number of copies; left out: the parameter m"),
        key("defaults", Map(Named::Parameter, &Number), "values of parameters that card and header leave out"),
    ],
};

/// `fingers` of a class.
pub const FINGERS: Section = Section {
    name: "`fingers`",
    needs: &[],
    keys: &[
        key("min", Count, "smallest number of fingers"),
        key("multiple_of", Count, "the number is a multiple of this"),
        key("width", Range(LENGTH), "range of the width of one finger"),
    ],
};

/// `on_state` of a class.
pub const ON_STATE: Section = Section {
    name: "`on_state`",
    needs: &[],
    keys: &[
        key("vds", Quantity(VOLTAGE), "|VDS| above this is high"),
        key("density", Quantity(DENSITY), "current per width that may flow at high VDS all the time"),
        key("duty", Quantity(SHARE), "share of time that it may be on at high VDS"),
        key("power", Quantity(POWER), "largest dissipation of one device"),
    ],
};

/// `body` of a class.
pub const BODY: Section = Section {
    name: "`body`",
    needs: &[],
    keys: &[key("tie", Texts, "the net that b must share: a pin, a rail, or a list of both")],
};

/// `drift` of a class.
pub const DRIFT: Section = Section {
    name: "`drift`",
    needs: &[],
    keys: &[
        key("length", Quantity(LENGTH), "length of the drift region"),
        key("doping", Quantity(DOPING), "its doping"),
    ],
};

/// One transition.
pub const TRANSITION: Section = Section {
    name: "a transition",
    needs: &["from", "to", "takes", "rate"],
    keys: &[
        key("from", Text, "the mode before"),
        key("to", Text, "the mode after"),
        key("takes", Quantity(TIME), "how long it takes"),
        key("rate", Quantity(RATE), "how often it happens"),
    ],
};

/// `currents`.
pub const CURRENTS: Section = Section {
    name: "`currents`",
    needs: &[],
    keys: &[
        key("into", Map(Named::Net, &Range(CURRENT)), "currents that enter nets"),
        key("through", Map(Named::Path, &Range(CURRENT)), "channel currents of devices, by instance path"),
    ],
};

/// One rule.
pub const RULE: Section = Section {
    name: "a rule",
    needs: &[],
    keys: &[
        key("id", Text, "its name, on the program's own pages"),
        key("title", Text, "one line: what it is about"),
        key("for", Word(subjects), "what it ranges over"),
        key("where", Condition, "which of them it looks at"),
        key("require", Condition, "what must hold"),
        key("severity", Word(severities), "how grave it is where broken"),
        key("unproven", Word(severities), "severity where the answer is unknown"),
        key("say", Message, "the message"),
        key("say_unproven", Message, "the message where the answer is unknown"),
        key("point", Map(Named::Place, &Message), "labels at places of the card"),
        key("help", Message, "what to do"),
        key("settle", Message, "what to declare where the answer is unknown"),
        key("why", Text, "why the rule exists"),
        key("cite", Text, "where the reason can be read"),
        key("examples", Part(&EXAMPLES), "two small netlists: one it fires on, one it stays quiet on"),
    ],
};

/// `examples` of a rule.
pub const EXAMPLES: Section = Section {
    name: "`examples`",
    needs: &[],
    keys: &[
        key("deck", Text, "deck text that both use"),
        key("fires", Text, "a netlist that the rule fires on"),
        key("quiet", Text, "a netlist that it stays quiet on"),
    ],
};

/// One waiver.
pub const WAIVER: Section = Section {
    name: "a waiver",
    needs: &["rule", "at", "reason"],
    keys: &[
        key("rule", Text, "the rule's id"),
        key("at", Text, "instance path with globs, or cell/device"),
        key("pair", Text, "only this terminal pair or pin"),
        key("reason", Text, "why the finding is accepted"),
        key("by", Text, "by whom"),
        key("until", Day, "last day that it holds"),
    ],
};

/// All sections, for the reference.
pub const SECTIONS: [&Section; 13] = [
    &DECK,
    &INCLUDES,
    &CLASS,
    &SIZE,
    &FINGERS,
    &ON_STATE,
    &BODY,
    &DRIFT,
    &TRANSITION,
    &CURRENTS,
    &RULE,
    &EXAMPLES,
    &WAIVER,
];
