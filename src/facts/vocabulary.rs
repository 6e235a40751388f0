//! The names that rules may use: one table of subject, name, type, one-line explanation and getter. The deck checker, the
//! evaluator, suggestions and the reference page all read it.

use super::{ClassView, DeviceView, GroupView, InstanceView, MIRROR, NetView, PAIR, ROLES};
use crate::declared::{Class, Rule, Subject};
use crate::expr::{Arg, ArgType, Expr, Node, Piece, Scope, Template, Type, Value, Vocabulary};
use crate::quantity::Dim;
use hashbrown::HashMap;
use std::sync::OnceLock;

/// How a name gets its value.
#[derive(Clone, Copy)]
pub(super) enum Get {
    Device(fn(&DeviceView<'_>) -> Value),
    /// From a device's class alone; none where the class does not declare it.
    OfClass(fn(&Class) -> Option<Value>),
    Net(fn(&NetView<'_>) -> Value),
    Instance(fn(&InstanceView<'_>) -> Value),
    Group(fn(&GroupView<'_>) -> Value),
    Class(fn(&ClassView<'_>) -> Option<Value>),
    /// Filled in by the finding itself.
    Noted,
}

/// A name that rules may use.
#[derive(Clone, Copy)]
pub struct Attribute {
    /// For which subject.
    pub subject: Subject,
    /// The name.
    pub name: &'static str,
    /// What it is.
    pub kind: Type,
    /// One line for the reference page.
    pub doc: &'static str,
    pub(super) get: Get,
}

/// A function that rules may call.
#[derive(Clone, Copy)]
pub struct Function {
    /// For which subjects.
    pub subjects: &'static [Subject],
    /// How it is called.
    pub call: &'static str,
    /// What it gives.
    pub kind: Type,
    /// One line for the reference page.
    pub doc: &'static str,
}

const VOLTS: Type = Type::Number(Dim::VOLT);
const AMPERES: Type = Type::Number(Dim::AMPERE);
const METRES: Type = Type::Number(Dim::METRE);
const PLAIN: Type = Type::Number(Dim::NONE);

/// The kinds of device, as words.
const KINDS: &[&str] =
    &["nmos", "pmos", "npn", "pnp", "njf", "pjf", "diode", "resistor", "capacitor", "inductor", "box"];

fn number(value: f64, dim: Dim) -> Value {
    Value::Number { value, dim }
}

fn text(text: &str) -> Value {
    Value::Text(text.to_owned())
}

const fn device(name: &'static str, kind: Type, doc: &'static str, get: fn(&DeviceView<'_>) -> Value) -> Attribute {
    Attribute { subject: Subject::Device, name, kind, doc, get: Get::Device(get) }
}

const fn of_class(name: &'static str, kind: Type, doc: &'static str, get: fn(&Class) -> Option<Value>) -> Attribute {
    Attribute { subject: Subject::Device, name, kind, doc, get: Get::OfClass(get) }
}

const fn noted(subject: Subject, name: &'static str, doc: &'static str) -> Attribute {
    Attribute { subject, name, kind: Type::Text, doc, get: Get::Noted }
}

/// All names.
pub const ATTRIBUTES: &[Attribute] = &[
    device("name", Type::Text, "the device's own name", |view| text(view.name())),
    device("cell", Type::Text, "the cell that holds it, empty at top level", |view| text(view.cell())),
    device("path", Type::Text, "its dotted instance path", |view| Value::Text(view.path())),
    device("model", Type::Text, "the model on its card", |view| text(view.model())),
    of_class("class.name", Type::Text, "its class", |class| Some(text(&class.name))),
    of_class("class.kind", Type::Word(KINDS), "the kind of its class", |class| Some(text(class.kind.word()))),
    of_class("class.high_voltage", Type::Bool, "whether its class is for high voltage", |class| {
        Some(Value::Bool(class.high_voltage))
    }),
    of_class("class.asymmetric", Type::Bool, "whether drain and source of its class differ", |class| {
        Some(Value::Bool(class.asymmetric))
    }),
    of_class("class.matched_use", Type::Bool, "whether the process qualifies its class for matched use", |class| {
        Some(Value::Bool(class.matched_use))
    }),
    of_class("class.fingers.min", PLAIN, "smallest number of fingers", |class| {
        class.fingers?.min.map(|min| number(min.into(), Dim::NONE))
    }),
    of_class("class.fingers.multiple_of", PLAIN, "the number of fingers is a multiple of it", |class| {
        class.fingers?.multiple_of.map(|of| number(of.into(), Dim::NONE))
    }),
    of_class("class.fingers.width.min", METRES, "smallest width of a finger", |class| low(class.fingers?.width)),
    of_class("class.fingers.width.max", METRES, "largest width of a finger", |class| high(class.fingers?.width)),
    of_class("class.length.min", METRES, "smallest channel length", |class| low(class.length)),
    of_class("class.length.max", METRES, "largest channel length", |class| high(class.length)),
    of_class("class.threshold.min", VOLTS, "smallest threshold", |class| volts(class.threshold?.lo)),
    of_class("class.threshold.max", VOLTS, "largest threshold", |class| volts(class.threshold?.hi)),
    of_class("class.on_state.vds", VOLTS, "the voltage above which it counts as high", |class| {
        volts(class.on_state?.vds)
    }),
    device("width", METRES, "total drawn width of one copy", |view| view.reading(&view.sizes().width, Dim::METRE)),
    device("length", METRES, "channel length", |view| view.reading(&view.sizes().length, Dim::METRE)),
    device("fingers", PLAIN, "number of fingers of one copy", |view| view.reading(&view.sizes().fingers, Dim::NONE)),
    device("copies", PLAIN, "copies in parallel, with those of the instances above", |view| {
        view.reading(&view.sizes().copies, Dim::NONE)
    }),
    device("finger_width", METRES, "width of one finger", |view| view.finger_width()),
    device("dummy", Type::Bool, "drain and source are one net: it can do nothing", |view| Value::Bool(view.is_dummy())),
    device("idle", Type::Bool, "gate and source are one net: it never turns on", |view| Value::Bool(view.is_idle())),
    device("body_held", Type::Bool, "the body is on one of the nets that its class allows", |view| {
        match &view.class.body {
            Some(tie) => Value::Bool(view.body_held(tie)),
            None => view.undeclared(),
        }
    }),
    device("ties_held", Type::Bool, "every other tied pin is on one of the nets that its class allows", |view| {
        if view.class.ties.is_empty() { view.undeclared() } else { Value::Bool(view.ties_held()) }
    }),
    device("body_ties", Type::Text, "the nets that its class allows for the body, in words", |view| {
        match &view.class.body {
            Some(tie) => Value::Text(view.tie_words(tie)),
            None => view.undeclared(),
        }
    }),
    device("off_ties", Type::Text, "the pins that are off their nets, in words", |view| Value::Text(view.off_ties())),
    device("ratings_held", Type::Bool, "every rated pair stays inside its rating in every mode", |view| {
        view.ratings_held()
    }),
    device(
        "swapped",
        Type::Bool,
        "its drain never is on the blocking side of its source, and can be on the other",
        |view| view.is_swapped(),
    ),
    device("gate_driven", Type::Bool, "something drives its gate, in every mode", |view| view.gate_driven()),
    device(
        "overlap_held",
        Type::Bool,
        "it keeps out of being on and at high voltage together, beyond what its class exempts",
        |view| view.overlap_held(),
    ),
    device("power_held", Type::Bool, "its known power while on stays below the limit of its class", |view| {
        view.power_held()
    }),
    device("role", Type::Word(ROLES), "its main role in the circuit", |view| text(view.role())),
    device("roles", Type::Text, "all its roles, in words", |view| {
        let roles: Vec<&str> = view.roles().iter().map(|played| played.role.word()).collect();
        text(&roles.join(", "))
    }),
    device("mirrored", Type::Bool, "it is reference or output of a current mirror", |view| view.is_mirrored()),
    device("amplifies", Type::Bool, "it is half of a differential pair or a common-source gain stage", |view| {
        view.is_amplifying()
    }),
    device("current", AMPERES, "the current through its channel, or the most that it can be", |view| {
        view.current_value()
    }),
    device("density", Type::Number(Dim::DENSITY), "that current for each metre of its width", |view| {
        view.density_value()
    }),
    device("power", Type::Number(Dim::WATT), "that current at its highest drain-source voltage", |view| {
        view.power_value()
    }),
    device("on", Type::Bool, "its gate can turn it on, in some mode", |view| view.can_be_on()),
    device(
        "duty",
        PLAIN,
        "the share of time it spends between modes that have it on and modes that have it high",
        |view| view.duty(),
    ),
    noted(Subject::Device, "part", "what it is in a mirror or stage, in words"),
    noted(Subject::Device, "partners", "the other devices of that mirror or stage, in words"),
    noted(Subject::Device, "pair", "the rated pair that is farthest outside"),
    noted(Subject::Device, "range", "the range of that pair's voltage"),
    noted(Subject::Device, "extreme", "the end of that range that is outside"),
    noted(Subject::Device, "rating", "the rating of that pair"),
    noted(Subject::Device, "excess", "by how much it is outside"),
    noted(Subject::Device, "in_mode", "` in mode …`, or nothing where there are no modes"),
    noted(Subject::Device, "also", "the other pairs outside, in words"),
    noted(Subject::Device, "frame", "the reference net whose view of the pair is narrowest"),
    noted(Subject::Device, "plus", "the pin whose voltage counts positive in that pair"),
    noted(Subject::Device, "plus_net", "the net on it"),
    noted(Subject::Device, "plus_reach", "what that net can have against ground"),
    noted(Subject::Device, "minus", "the other pin of that pair"),
    noted(Subject::Device, "minus_net", "the net on it"),
    noted(Subject::Device, "minus_reach", "what that net can have against ground"),
    noted(Subject::Device, "pairs_open", "the rated pairs that could not be decided"),
    noted(Subject::Device, "vds_range", "the range of the drain-source voltage"),
    noted(Subject::Device, "d_reach", "what the drain's net can have against ground"),
    noted(Subject::Device, "s_reach", "what the source's net can have against ground"),
    noted(Subject::Device, "how", "how the gate is left without a driver"),
    noted(Subject::Device, "what", "the state that is beyond the class's limits"),
    noted(Subject::Device, "why", "why something is not known"),
    noted(Subject::Device, "pin", "in a label at `pins`: the pin"),
    noted(Subject::Device, "net", "in a label at `pins`: the net on it"),
    Attribute {
        subject: Subject::Net,
        name: "name",
        kind: Type::Text,
        doc: "its name in its cell",
        get: Get::Net(|view| text(view.name())),
    },
    Attribute {
        subject: Subject::Net,
        name: "is_rail",
        kind: Type::Bool,
        doc: "whether a deck declares it",
        get: Get::Net(|view| Value::Bool(view.is_rail())),
    },
    Attribute {
        subject: Subject::Net,
        name: "is_port",
        kind: Type::Bool,
        doc: "whether it is a port of its cell",
        get: Get::Net(|view| Value::Bool(view.is_port())),
    },
    Attribute {
        subject: Subject::Net,
        name: "reach.min",
        kind: VOLTS,
        doc: "lowest voltage against ground, in any mode",
        get: Get::Net(|view| view.extreme(false)),
    },
    Attribute {
        subject: Subject::Net,
        name: "reach.max",
        kind: VOLTS,
        doc: "highest voltage against ground, in any mode",
        get: Get::Net(|view| view.extreme(true)),
    },
    Attribute {
        subject: Subject::Mirror,
        name: "name",
        kind: Type::Text,
        doc: "its output's own name",
        get: Get::Group(|view| text(view.main().name())),
    },
    Attribute {
        subject: Subject::Mirror,
        name: "ratio",
        kind: PLAIN,
        doc: "by how much the output repeats the reference's current: width × copies / length of both",
        get: Get::Group(|view| view.ratio()),
    },
    Attribute {
        subject: Subject::Pair,
        name: "name",
        kind: Type::Text,
        doc: "the name of its left device",
        get: Get::Group(|view| text(view.main().name())),
    },
    Attribute {
        subject: Subject::Instance,
        name: "name",
        kind: Type::Text,
        doc: "its own name",
        get: Get::Instance(|view| text(view.name())),
    },
    Attribute {
        subject: Subject::Instance,
        name: "calls",
        kind: Type::Text,
        doc: "the cell that it calls",
        get: Get::Instance(|view| text(view.cell())),
    },
    Attribute {
        subject: Subject::Class,
        name: "name",
        kind: Type::Text,
        doc: "its name",
        get: Get::Class(|view| Some(text(&view.class.name))),
    },
    Attribute {
        subject: Subject::Class,
        name: "kind",
        kind: Type::Word(KINDS),
        doc: "its kind",
        get: Get::Class(|view| Some(text(view.class.kind.word()))),
    },
    Attribute {
        subject: Subject::Class,
        name: "rating.vds",
        kind: VOLTS,
        doc: "highest rated drain-source voltage in the blocking direction",
        get: Get::Class(|view| volts(view.blocking_rating()?)),
    },
    Attribute {
        subject: Subject::Class,
        name: "drift.length",
        kind: METRES,
        doc: "length of its drift region",
        get: Get::Class(|view| Some(number(view.class.drift?.length?, Dim::METRE))),
    },
    Attribute {
        subject: Subject::Class,
        name: "drift.doping",
        kind: Type::Number(Dim::DOPING),
        doc: "doping of its drift region",
        get: Get::Class(|view| Some(number(view.class.drift?.doping?, Dim::DOPING))),
    },
    Attribute {
        subject: Subject::Class,
        name: "drift.limit",
        kind: VOLTS,
        doc: "what a drift region of this length can hold, at 30 V/µm",
        get: Get::Class(|view| volts(view.drift_limit()?)),
    },
    Attribute {
        subject: Subject::Class,
        name: "junction.limit",
        kind: VOLTS,
        doc: "what a one-sided junction of this doping can hold",
        get: Get::Class(|view| volts(view.junction_limit()?)),
    },
    noted(Subject::Run, "name", "the device or rail concerned"),
    noted(Subject::Run, "model", "the model that no class names"),
    noted(Subject::Run, "others", "` and N more` where several statements use it"),
    noted(Subject::Run, "class", "the class or cell concerned"),
    noted(Subject::Run, "found", "terminals on the card"),
    noted(Subject::Run, "wanted", "pins of the class"),
    noted(Subject::Run, "pins", "names of these pins"),
    noted(Subject::Run, "file", "the file that was not read"),
    noted(Subject::Run, "near", "a near name, in words"),
    noted(Subject::Run, "rule", "the rule that was waived"),
    noted(Subject::Run, "at", "what the waiver names"),
    noted(Subject::Run, "until", "the last day of the waiver"),
    noted(Subject::Run, "reason", "the reason given"),
    noted(Subject::Run, "devices", "how many devices the design has"),
];

const EVERY: &[Subject] = &[Subject::Device, Subject::Instance, Subject::Class];

/// All functions beyond the mathematical ones.
pub const FUNCTIONS: &[Function] = &[
    Function {
        subjects: EVERY,
        call: "has(name)",
        kind: Type::Bool,
        doc: "whether the class declares what `name` stands for",
    },
    Function {
        subjects: &[Subject::Device],
        call: "tied(b, s)",
        kind: Type::Bool,
        doc: "whether two pins share a net, through drawn shorts too",
    },
    Function {
        subjects: &[Subject::Device],
        call: "plays(\"cascode\")",
        kind: Type::Bool,
        doc: "whether one of its roles is this",
    },
    Function {
        subjects: &[Subject::Device, Subject::Instance],
        call: "param(\"x\")",
        kind: Type::AnyNumber,
        doc: "a parameter of the card, as evaluated there",
    },
];

/// The names of a device that are made from a pin or a pair of pins, for the reference page.
pub const PATTERNS: &[(&str, &str, Type)] = &[
    ("d.net", "the net on a pin: `d`, `g`, `s`, `b`; other pins as `pin.iso.net`", Type::Text),
    ("d.is_rail", "whether a deck declares that net", Type::Bool),
    ("d.reach.min", "lowest voltage of that net against ground, in any mode", VOLTS),
    ("d.reach.max", "highest voltage of that net against ground, in any mode", VOLTS),
    ("vds.min", "lowest voltage of a pair of pins, in any mode; other pins as `v(iso, s).min`", VOLTS),
    ("vds.max", "highest voltage of that pair, in any mode", VOLTS),
];

/// The devices that a rule for mirrors or pairs may name; what follows their name is an attribute of the device.
pub fn members(subject: Subject) -> &'static [&'static str] {
    match subject {
        Subject::Mirror => &MIRROR,
        Subject::Pair => &PAIR,
        _ => &[],
    }
}

/// An attribute of a device of a structure (`ref.width`): the attribute.
fn of_member(subject: Subject, name: &str) -> Option<&str> {
    let (member, rest) = name.split_once('.')?;
    members(subject).contains(&member).then_some(rest)
}

fn volts(value: f64) -> Option<Value> {
    value.is_finite().then(|| number(value, Dim::VOLT))
}

fn low(range: Option<crate::declared::Range>) -> Option<Value> {
    range.filter(|range| range.lo.is_finite()).map(|range| number(range.lo, Dim::METRE))
}

fn high(range: Option<crate::declared::Range>) -> Option<Value> {
    range.filter(|range| range.hi.is_finite()).map(|range| number(range.hi, Dim::METRE))
}

fn find(subject: Subject, name: &str) -> Option<&'static Attribute> {
    static INDEX: OnceLock<HashMap<(Subject, &'static str), &'static Attribute>> = OnceLock::new();
    let index = INDEX
        .get_or_init(|| ATTRIBUTES.iter().map(|attribute| ((attribute.subject, attribute.name), attribute)).collect());
    index.get(&(subject, name)).copied()
}

/// The value of a device's attribute that its class alone decides: none where the name is another kind of attribute, `Some(None)`
/// where the class does not declare it.
pub fn class_attribute(class: &Class, name: &str) -> Option<Option<Value>> {
    match find(Subject::Device, name)?.get {
        Get::OfClass(get) => Some(get(class)),
        _ => None,
    }
}

/// `has(name)` for a device of a class.
pub fn has(class: &Class, args: &[Arg<'_>]) -> Value {
    let Some(name) = args.first().and_then(|arg| arg.name) else { return Value::Unknown };
    if let Some(value) = class_attribute(class, name) {
        return Value::Bool(value.is_some());
    }
    Value::Bool(match name {
        "body_held" | "body_ties" => class.body.is_some(),
        "ties_held" | "off_ties" => !class.ties.is_empty(),
        "ratings_held" => !class.ratings.is_empty(),
        "overlap_held" => class.on_state.is_some(),
        "power_held" => class.on_state.is_some_and(|limits| limits.power.is_some()),
        "width" | "finger_width" => class.size.width.is_some(),
        "length" => class.size.length.is_some(),
        "fingers" => class.size.fingers.is_some(),
        _ => true,
    })
}

/// A name made from a pin: which pin, and what of it.
fn pin_name(name: &str) -> Option<(&str, &str)> {
    if let Some(rest) = name.strip_prefix("pin.") {
        return rest.split_once('.');
    }
    let (pin, rest) = name.split_once('.')?;
    matches!(pin, "d" | "g" | "s" | "b").then_some((pin, rest))
}

/// A name made from a pair of pins: plus, minus, and whether the highest or lowest is meant.
fn pair_name(name: &str) -> Option<(&str, &str, bool)> {
    let (pair, end) = name.split_once('.')?;
    let highest = match end {
        "max" => true,
        "min" => false,
        _ => return None,
    };
    let pins = pair.strip_prefix('v')?;
    let known = |pin: &str| matches!(pin, "d" | "g" | "s" | "b" | "c" | "e" | "a" | "k");
    (pins.len() == 2 && pins.is_ascii() && known(&pins[..1]) && known(&pins[1..]))
        .then(|| (&pins[..1], &pins[1..], highest))
}

fn pin_type(what: &str) -> Option<Type> {
    match what {
        "net" => Some(Type::Text),
        "is_rail" => Some(Type::Bool),
        "reach.min" | "reach.max" => Some(VOLTS),
        _ => None,
    }
}

/// Whether a rule asks for a voltage, or for something that follows from one.
pub fn asks_for_voltages(rule: &Rule) -> bool {
    if matches!(rule.subject, Subject::Mirror | Subject::Pair) {
        return true;
    }
    let of_part = |name: &str| {
        matches!(
            name,
            "role" | "roles" | "plays" | "mirrored" | "amplifies" | "current" | "density" | "power" | "on" | "duty"
        )
    };
    let of_voltage = |name: &str| {
        of_part(name)
            || matches!(
                name,
                "ratings_held" | "swapped" | "gate_driven" | "overlap_held" | "power_held" | "v.min" | "v.max"
            )
            || name.contains("reach.")
            || pair_name(name).is_some()
    };
    let in_template = |template: &Template| {
        template.pieces.iter().any(|piece| match piece {
            Piece::Expr { expr, .. } => asks(expr, &of_voltage),
            Piece::Text(_) => false,
        })
    };
    let conditions = rule.applies.iter().chain(&rule.require).any(|expr| asks(expr, &of_voltage));
    let words = [Some(&rule.say), rule.say_unproven.as_ref(), rule.help.as_ref(), rule.settle.as_ref()];
    conditions
        || words.into_iter().flatten().any(in_template)
        || rule.point.iter().any(|(_, template)| in_template(template))
}

fn asks(expr: &Expr, of_voltage: &dyn Fn(&str) -> bool) -> bool {
    expr.nodes.iter().any(|node| match node {
        Node::Name(name) | Node::Call { name, .. } => of_voltage(name),
        _ => false,
    })
}

/// The vocabulary of a subject, for checking rules.
pub struct Words(pub Subject);

impl Vocabulary for Words {
    fn name(&self, name: &str) -> Option<Type> {
        if let Some(attribute) = find(self.0, name) {
            return Some(attribute.kind);
        }
        if let Some(rest) = of_member(self.0, name) {
            return Words(Subject::Device).name(rest);
        }
        if self.0 != Subject::Device {
            return None;
        }
        if let Some((_, what)) = pin_name(name) {
            return pin_type(what);
        }
        pair_name(name).map(|_| VOLTS)
    }

    fn call(&self, name: &str, args: &[ArgType<'_>]) -> Option<Result<Type, String>> {
        let function = FUNCTIONS
            .iter()
            .find(|function| function.call.split('(').next() == Some(name) && function.subjects.contains(&self.0));
        if let Some(function) = function {
            return Some(self.arguments(name, args).map(|()| function.kind));
        }
        match name {
            "v.min" | "v.max" if self.0 == Subject::Device => Some(self.two_pins(name, args).map(|()| VOLTS)),
            _ => None,
        }
    }

    fn names(&self) -> Vec<String> {
        let mut names: Vec<String> = ATTRIBUTES
            .iter()
            .filter(|attribute| attribute.subject == self.0)
            .map(|attribute| attribute.name.to_owned())
            .collect();
        for member in members(self.0) {
            names.extend(Words(Subject::Device).names().into_iter().map(|name| format!("{member}.{name}")));
        }
        if self.0 == Subject::Device {
            names.extend(PATTERNS.iter().map(|(name, ..)| (*name).to_owned()));
            for pair in ["vgs", "vgd", "vsb", "vsd", "vsg", "vdb", "vgb"] {
                names.extend([format!("{pair}.min"), format!("{pair}.max")]);
            }
            for pin in ["g", "s", "b"] {
                names.extend([
                    format!("{pin}.net"),
                    format!("{pin}.is_rail"),
                    format!("{pin}.reach.max"),
                    format!("{pin}.reach.min"),
                ]);
            }
        }
        names
    }

    fn functions(&self) -> Vec<String> {
        let own = FUNCTIONS.iter().filter(|function| function.subjects.contains(&self.0));
        own.filter_map(|function| function.call.split('(').next()).map(str::to_owned).collect()
    }
}

impl Words {
    fn arguments(&self, name: &str, args: &[ArgType<'_>]) -> Result<(), String> {
        match name {
            "tied" => self.two_pins(name, args),
            "has" => match args {
                [arg] if arg.name.is_some_and(|name| Vocabulary::name(self, name).is_some()) => Ok(()),
                [arg] => {
                    Err(format!("`has` asks about a name that rules may use; `{}` is none", arg.name.unwrap_or("this")))
                }
                _ => Err("`has` takes one name, as in `has(class.length.min)`".to_owned()),
            },
            "plays" => match args {
                [ArgType { kind: Some(Type::Text), .. }] => Ok(()),
                _ => Err(format!("`plays` takes one role in quotes: {}", ROLES.join(", "))),
            },
            _ => match args {
                [arg] if arg.kind == Some(Type::Text) => Ok(()),
                _ => Err(format!("`{name}` takes one text in quotes, as in `{name}(\"w\")`")),
            },
        }
    }

    fn two_pins(&self, name: &str, args: &[ArgType<'_>]) -> Result<(), String> {
        match args {
            [a, b] if a.name.is_some() && b.name.is_some() => Ok(()),
            _ => Err(format!(
                "`{name}` takes two pins, as in `{}`",
                if name == "tied" { "tied(b, s)" } else { "v(iso, s).max" }
            )),
        }
    }
}

/// The vocabularies of all subjects.
pub fn vocabulary(subject: Subject) -> &'static dyn Vocabulary {
    const ALL: [Words; 7] = [
        Words(Subject::Device),
        Words(Subject::Net),
        Words(Subject::Instance),
        Words(Subject::Mirror),
        Words(Subject::Pair),
        Words(Subject::Class),
        Words(Subject::Run),
    ];
    static WORDS: [Words; 7] = ALL;
    WORDS.iter().find(|words| words.0 == subject).unwrap_or(&WORDS[0])
}

impl Scope for DeviceView<'_> {
    fn name(&self, name: &str) -> Value {
        if let Some(attribute) = find(Subject::Device, name) {
            return match attribute.get {
                Get::Device(get) => get(self),
                Get::OfClass(get) => get(self.class).unwrap_or_else(|| self.undeclared()),
                _ => Value::Unknown,
            };
        }
        if let Some((pin, what)) = pin_name(name) {
            return self.of_pin(pin, what);
        }
        match pair_name(name) {
            Some((plus, minus, highest)) => self.of_pair(plus, minus, highest),
            None => Value::Unknown,
        }
    }

    fn call(&self, name: &str, args: &[Arg<'_>]) -> Option<Value> {
        let pins = || Some((args.first()?.name?, args.get(1)?.name?));
        match name {
            "has" => Some(has(self.class, args)),
            "tied" => {
                let (a, b) = pins()?;
                Some(self.tied(a, b).map_or_else(|| self.undeclared(), Value::Bool))
            }
            "param" => match &args.first()?.value {
                Value::Text(name) => Some(self.param(name)),
                _ => None,
            },
            "plays" => match &args.first()?.value {
                Value::Text(name) => Some(self.plays(name)),
                _ => None,
            },
            "v.min" | "v.max" => {
                let (plus, minus) = pins()?;
                Some(self.of_pair(plus, minus, name == "v.max"))
            }
            _ => None,
        }
    }
}

impl DeviceView<'_> {
    fn of_pin(&self, pin: &str, what: &str) -> Value {
        let Some(pin) = self.class.pin(pin) else { return self.undeclared() };
        match what {
            "net" => text(self.net_text(pin)),
            "is_rail" => Value::Bool(self.is_rail(pin)),
            "reach.max" => self.extreme(pin, None, true),
            "reach.min" => self.extreme(pin, None, false),
            _ => Value::Unknown,
        }
    }

    fn of_pair(&self, plus: &str, minus: &str, highest: bool) -> Value {
        match (self.class.pin(plus), self.class.pin(minus)) {
            (Some(plus), Some(minus)) => self.extreme(plus, Some(minus), highest),
            _ => self.undeclared(),
        }
    }

    /// The highest or lowest voltage of a pin against another or ground, in any mode.
    fn extreme(&self, plus: usize, minus: Option<usize>, highest: bool) -> Value {
        let mut extreme: Option<f64> = None;
        for mode in 0..self.world.reach.modes.len() {
            let range = match (minus, self.net(plus)) {
                (Some(minus), _) => self.voltage(mode, plus, minus),
                (None, Some(net)) => self.world.reach.of(self.at, mode, net, 0),
                (None, None) => return Value::Unknown,
            };
            let end = if highest { range.hi } else { range.lo };
            if !end.is_finite() {
                self.note_unknown_nets(&minus.into_iter().chain([plus]).collect::<Vec<_>>());
                return Value::Unknown;
            }
            extreme = Some(match extreme {
                Some(other) if highest => other.max(end),
                Some(other) => other.min(end),
                None => end,
            });
        }
        extreme.map_or(Value::Unknown, |value| number(value, Dim::VOLT))
    }
}

impl Scope for NetView<'_> {
    fn name(&self, name: &str) -> Value {
        match find(Subject::Net, name).map(|attribute| attribute.get) {
            Some(Get::Net(get)) => get(self),
            _ => Value::Unknown,
        }
    }

    fn call(&self, _: &str, _: &[Arg<'_>]) -> Option<Value> {
        None
    }
}

impl Scope for GroupView<'_> {
    fn name(&self, name: &str) -> Value {
        let subject = if self.member(MIRROR[1]).is_some() { Subject::Mirror } else { Subject::Pair };
        match find(subject, name).map(|attribute| attribute.get) {
            Some(Get::Group(get)) => get(self),
            _ => self.of_member(name).unwrap_or(Value::Unknown),
        }
    }

    fn call(&self, _: &str, _: &[Arg<'_>]) -> Option<Value> {
        None
    }
}

impl Scope for InstanceView<'_> {
    fn name(&self, name: &str) -> Value {
        match find(Subject::Instance, name).map(|attribute| attribute.get) {
            Some(Get::Instance(get)) => get(self),
            _ => Value::Unknown,
        }
    }

    fn call(&self, name: &str, args: &[Arg<'_>]) -> Option<Value> {
        match (name, args.first().map(|arg| &arg.value)) {
            ("param", Some(Value::Text(name))) => Some(self.param(name)),
            _ => None,
        }
    }
}

impl Scope for ClassView<'_> {
    fn name(&self, name: &str) -> Value {
        match find(Subject::Class, name).map(|attribute| attribute.get) {
            Some(Get::Class(get)) => get(self).unwrap_or_else(|| {
                self.undeclared();
                Value::Unknown
            }),
            _ => Value::Unknown,
        }
    }

    fn call(&self, name: &str, args: &[Arg<'_>]) -> Option<Value> {
        let asked = args.first().and_then(|arg| arg.name)?;
        match (name, find(Subject::Class, asked)?.get) {
            ("has", Get::Class(get)) => Some(Value::Bool(get(self).is_some())),
            _ => None,
        }
    }
}
