//! Every key that a deck may have, section by section: the one table that checking, "did you mean" and the reference read.

/// A map of the deck whose keys are fixed.
#[derive(Clone, Copy, Debug)]
pub struct Section {
    /// What messages call it.
    pub name: &'static str,
    /// Its keys, each with a line that says what it holds.
    pub keys: &'static [(&'static str, &'static str)],
}

/// The whole deck.
pub const DECK: Section = Section {
    name: "a deck",
    keys: &[
        ("use", "decks that this one builds upon: paths relative to this file, or `builtin:` names"),
        ("netlists", "netlists to check when none is named"),
        ("top", "the cell to check from"),
        ("includes", "where included files may come from, and which are left out"),
        ("classes", "the devices of the process, by name"),
        ("rails", "the voltages of nets, by name or glob"),
        ("modes", "states of operation: each sets some rails"),
        ("transitions", "changes from one mode to another"),
        ("currents", "known currents"),
        ("rules", "rules: changes to those that came with `use`, and new ones"),
        ("waivers", "findings that were accepted, with their reasons"),
    ],
};

/// `includes`.
pub const INCLUDES: Section = Section {
    name: "`includes`",
    keys: &[
        ("roots", "folders that included files may come from, beside those of the netlist and the deck"),
        ("skip", "globs of included files that are left out without complaint"),
    ],
};

/// One class.
pub const CLASS: Section = Section {
    name: "a class",
    keys: &[
        ("kind", "nmos pmos npn pnp njf pjf diode resistor capacitor inductor box"),
        ("models", "model or subcircuit names that mean it; globs; left out: the class's own name"),
        ("pins", "its pins in netlist order; left out: those of the element's card"),
        ("high_voltage", "true for drain-extended and other high-voltage devices"),
        ("asymmetric", "true where drain and source differ"),
        ("matched_use", "true where the process qualifies it for matched or gain use"),
        ("size", "how width, length, fingers and copies follow from the card's parameters"),
        ("fingers", "what is asked of its fingers"),
        ("length", "allowed channel length"),
        ("threshold", "range of the gate threshold, positive for enhancement"),
        ("ratings", "allowed voltage of pairs of pins: vds, vgs, v(iso,s) …"),
        ("on_state", "limits for being on at high voltage"),
        ("body", "the net that its body must share"),
        ("ties", "the nets that other pins must share"),
        ("drift", "its drift region, for a check of the ratings"),
        ("clamp", "range in which V(k,a) stays by design"),
        ("source", "where its values are published"),
    ],
};

/// `size` of a class.
pub const SIZE: Section = Section {
    name: "`size`",
    keys: &[
        ("unit", "what one unit of width and length is: um, nm, m"),
        ("width", "total drawn width of one copy"),
        ("length", "channel length"),
        ("fingers", "number of fingers of one copy"),
        ("copies", "number of copies; left out: the parameter m"),
        ("defaults", "values of parameters that card and header leave out"),
    ],
};

/// `fingers` of a class.
pub const FINGERS: Section = Section {
    name: "`fingers`",
    keys: &[
        ("min", "smallest number of fingers"),
        ("multiple_of", "the number is a multiple of this"),
        ("width", "range of the width of one finger"),
    ],
};

/// `on_state` of a class.
pub const ON_STATE: Section = Section {
    name: "`on_state`",
    keys: &[
        ("vds", "|VDS| above this is high"),
        ("density", "current per width that may flow at high VDS all the time"),
        ("duty", "share of time that it may be on at high VDS"),
        ("power", "largest dissipation of one device"),
    ],
};

/// `body` of a class.
pub const BODY: Section =
    Section { name: "`body`", keys: &[("tie", "the net that b must share: a pin, a rail, or a list of both")] };

/// `drift` of a class.
pub const DRIFT: Section = Section {
    name: "`drift`",
    keys: &[("length", "length of the drift region"), ("doping", "its doping, such as 1e16/cm3")],
};

/// One transition.
pub const TRANSITION: Section = Section {
    name: "a transition",
    keys: &[
        ("from", "the mode before"),
        ("to", "the mode after"),
        ("takes", "how long it takes"),
        ("rate", "how often it happens: 2MHz"),
    ],
};

/// `currents`.
pub const CURRENTS: Section = Section {
    name: "`currents`",
    keys: &[("into", "currents that enter nets"), ("through", "channel currents of devices, by instance path")],
};

/// One rule.
pub const RULE: Section = Section {
    name: "a rule",
    keys: &[
        ("id", "its name, on the program's own pages"),
        ("title", "one line: what it is about"),
        ("for", "what it ranges over: device net instance mirror pair class"),
        ("where", "which of them it looks at"),
        ("require", "what must hold"),
        ("severity", "error warning note silent"),
        ("unproven", "severity where the answer is unknown"),
        ("say", "the message"),
        ("say_unproven", "the message where the answer is unknown"),
        ("point", "labels at places of the card"),
        ("help", "what to do"),
        ("settle", "what to declare where the answer is unknown"),
        ("why", "why the rule exists"),
        ("cite", "where the reason can be read"),
        ("examples", "two small netlists: one it fires on, one it stays quiet on"),
    ],
};

/// `examples` of a rule.
pub const EXAMPLES: Section = Section {
    name: "`examples`",
    keys: &[
        ("deck", "deck text that both use"),
        ("fires", "a netlist that the rule fires on"),
        ("quiet", "a netlist that it stays quiet on"),
    ],
};

/// One waiver.
pub const WAIVER: Section = Section {
    name: "a waiver",
    keys: &[
        ("rule", "the rule's id"),
        ("at", "instance path with globs, or cell/device"),
        ("pair", "only this terminal pair or pin"),
        ("reason", "why the finding is accepted"),
        ("by", "by whom"),
        ("until", "last day that it holds: 2027-03-01"),
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
