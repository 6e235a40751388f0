//! Decks with faults, each marked where it must be reported.
//!
//! A line `#   ^^^ message => help` says that the line above it gets this message under the carets (`#^` begins in column 1).

use super::fixture::{InMemory, load, words};
use super::*;
use crate::declared::{End, Kind, Range, TieTarget};
use std::fmt::Write as _;

/// Loads a deck, and compares what is said about it with the marks in it.
fn check(marked: &str) -> Deck {
    let clean: String = marked.lines().filter(|line| !is_mark(line)).flat_map(|line| [line, "\n"]).collect();
    let mut sources = SourceMap::new();
    let files = [("deck.yaml", clean.as_str()), ("process.yaml", PROCESS)];
    let (deck, complaints) = load(&files, &["deck.yaml"], &mut sources);
    let mut found = String::new();
    for (at, line) in clean.lines().enumerate() {
        writeln!(found, "{line}").unwrap();
        for complaint in complaints.iter().filter(|complaint| sources.start(complaint.span).line as usize == at + 1) {
            assert_eq!(sources.file(complaint.span.file).path(), "deck.yaml", "{}", complaint.message);
            writeln!(found, "{}", mark(line, complaint, &sources)).unwrap();
        }
    }
    let marked: String = marked.lines().flat_map(|line| [line, "\n"]).collect();
    assert_eq!(found, marked, "\nwhat came:\n{found}\nwhat was expected:\n{marked}");
    deck
}

fn is_mark(line: &str) -> bool {
    line.strip_prefix('#').is_some_and(|rest| rest.trim_start().starts_with('^'))
}

fn mark(line: &str, complaint: &Diagnostic, sources: &SourceMap) -> String {
    let (start, end) = (sources.start(complaint.span), sources.end(complaint.span));
    let end = if end.line == start.line { end.column } else { line.chars().count() as u32 + 1 };
    let (start, end) = (start.column as usize - 1, (end.max(start.column + 1)) as usize - 1);
    let carets = "^".repeat(end - start);
    let carets = if start == 0 {
        format!("#{}", &carets[..carets.len() - 1])
    } else {
        format!("#{}{carets}", " ".repeat(start - 1))
    };
    let help = complaint.help.as_ref().map(|help| format!(" => {help}")).unwrap_or_default();
    format!("{carets} {}{help}", complaint.message)
}

/// A small process of the irrigation-valve driver.
const PROCESS: &str = "
use: [builtin:ldmos]
classes:
  ldn60:
    kind: nmos
    models: [ldn60, 'ldn60_*']
    pins: [d, g, s, b, iso]
    high_voltage: true
    asymmetric: true
    size: {unit: um, width: w * nf, length: l, fingers: nf, copies: m, defaults: {nf: 1}}
    fingers: {min: 2, multiple_of: 2, width: 5um..60um}
    length: 0.5um..0.5um
    threshold: 0.6V..1.1V
    ratings: {vds: -0.5V..60V, vgs: -5.5V..5.5V, 'v(iso,s)': -0.5V..60V}
    on_state: {vds: 12V, density: 3uA/um, duty: 1%, power: 500mW}
    body: {tie: s}
    ties: {iso: [d, VIN]}
    drift: {length: 3um, doping: 1e16/cm3}
";

#[test]
fn a_sound_deck_says_nothing() {
    let deck = check(
        r#"use: [process.yaml]
netlists: [valve_driver.sp, ../lib/cells.sp]
top: valve_driver
includes: {roots: [.., lib], skip: ["*models*"]}
rails:
  VSS: 0V
  VDD: 4.5V..5.5V
  SW: -1V .. VIN + 1V
  VIN: 6V..48V
  BST: SW .. SW + 5.5V
  HG: SW .. BST
  "D*_OUT": 0V..5.5V
  'IN+': 0V..5V
  'S<1>': 0V .. net("IN+")
  OFF: 0V
  NO: 0V .. Y
  Y: 5V
  1E3: -5V..5V
  0: 0
  net("A B"): 1V
modes:
  fill: {SW: 0V..0.3V, LG: 5V, HG: SW}
  hold: {SW: 24V, LG: 0V, HG: SW}
transitions:
  - {from: hold, to: fill, takes: 5ns, rate: 2MHz}
currents:
  into: {IB_2U: 2uA}
  through: {xls.m7: 1uA..4uA}
rules:
  finger-count: {severity: warning}
  no-wide-nldmos:
    for: device
    where: class.kind == nmos && class.high_voltage
    require: width <= 2000um
    say: "{name} is {width} wide"
    point: {size: "total width {width}"}
waivers:
  - {rule: finger-count, at: "xbias.m4", reason: "trimmed at test", by: "analog team", until: 2027-03-01}
"#,
    );
    assert_eq!(deck.netlists[1].0, "../lib/cells.sp");
    assert_eq!(deck.include_roots, ["..", "lib"]);
    let class = &deck.classes[0];
    assert_eq!((class.kind, class.pins.len(), class.models.len()), (Kind::Nmos, 5, 2));
    assert_eq!(class.size.unit, Some(1e-6));
    assert_eq!(class.length.map(|range| (range.lo * 1e9).round()), Some(500.0));
    assert_eq!(class.ratings[0].range, Range { lo: -0.5, hi: 60.0 });
    assert_eq!((class.ratings[2].plus, class.ratings[2].minus), (4, 2));
    assert_eq!(class.on_state.and_then(|on| on.duty), Some(0.01));
    assert_eq!(class.ties[0].targets, [TieTarget::Pin(0), TieTarget::Net("VIN".into())]);
    let rail = |name: &str| deck.rails.iter().find(|rail| rail.net.text() == name).unwrap();
    assert_eq!(rail("SW").high, End::Net { net: "VIN".into(), offset: 1.0 });
    assert_eq!(rail("S<1>").high, End::Net { net: "IN+".into(), offset: 0.0 });
    assert_eq!(rail("1E3").low, End::Volts(-5.0));
    assert_eq!(rail("A B").low, End::Volts(1.0));
    assert!(rail("D*_OUT").net.is_wild());
    assert_eq!(deck.modes[0].rails[2].low, End::Net { net: "SW".into(), offset: 0.0 });
    assert_eq!((deck.transitions[0].from, deck.transitions[0].to), (1, 0));
    assert_eq!(deck.currents_through[0].at.text(), "xls.m7");
    let finger_count = deck.rules.iter().find(|rule| rule.id == "finger-count").unwrap();
    assert_eq!(finger_count.severity, Severity::Warning);
    assert!(finger_count.examples.is_some(), "the rest of the page stays");
    assert_eq!(deck.waivers[0].until.map(|date| (date.year, date.month, date.day)), Some((2027, 3, 1)));
    assert_eq!(deck.own_files.len(), 1);
}

#[test]
fn unknown_keys_are_offered_their_nearest() {
    check(
        r#"rail: {VSS: 0V}
#^^^ a deck has no key `rail` => did you mean `rails`?
classes:
  n5: {kind: nmos, pin: [d, g, s, b]}
#                  ^^^ a class has no key `pin` => did you mean `pins`?
  p5: {kind: pmoss}
#            ^^^^^ there is no kind of device `pmoss` => did you mean `pmos`?
  zz: {models: [zz]}
# ^^ class `zz` has no `kind` => say what it is: nmos pmos npn pnp njf pjf diode resistor capacitor inductor box; or mind the spelling, if it is meant to change a class of another deck
"#,
    );
}

#[test]
fn duplicate_keys_are_errors() {
    check(
        r#"rails:
  VDD: 5V
  VDD: 4V
# ^^^ `VDD` stands here a second time => keep one of them: which one counts would be a guess
  vdd: 3V
# ^^^ `vdd` stands here a second time => keep one of them: which one counts would be a guess
"#,
    );
}

#[test]
fn quantities_have_the_dimension_of_their_place() {
    check(
        r#"classes:
  n5:
    kind: nmos
    pins: [d, g, s, b]
    ratings: {vds: 5uA..6V, vgs: -5.5..5.5V, vgd: ..60V, vsb: 5V}
#                  ^^^ a voltage is needed here, 5uA is a current
#                                ^^^^ a voltage is needed here, -5.5 has no unit (such as 5.5V)
#                                                             ^^ a rating is a range: one value alone would forbid every other voltage => write -0.3V..5V, or ..5V if there is no lower limit
    length: 0.5um..
    threshold: 1.1V..0.6V
#              ^^^^^^^^^^ this range is upside down: 1.1V is above 0.6V => write 0.6V..1.1V
    on_state: {vds: -12V, duty: 150%, power: lots}
#                   ^^^^ a voltage above zero is needed here, not -12V
#                               ^^^^ a share of time is at most 100%
#                                            ^^^^ a power is needed here, such as 500mW; `lots` is none
    fingers: {min: 2.5, width: ..}
#                  ^^^ a whole number from 1 is needed here, not `2.5`
#                              ^^ a range needs one end at least
    high_voltage: yes
#                 ^^^ `true` or `false` is needed here, not `yes`
    size: {unit: V}
#                ^ a unit of length is needed here: um, nm or m, not `V`
"#,
    );
}

#[test]
fn pins_are_those_of_the_class() {
    check(
        r#"classes:
  ldn:
    kind: nmos
    pins: [d, g, s, b, iso]
    ratings: {vdx: ..5V, "v(isa,s)": ..60V, vddd: ..5V, vss: ..5V}
#             ^^^ class `ldn` has no pin `x` => did you mean `d`?
#                        ^^^^^^^^^^ class `ldn` has no pin `isa` => did you mean `iso`?
#                                           ^^^^ `vddd` is no pair of pins => write vds, vgs, vsb … for pins of one letter, and "v(iso,s)" for others
#                                                       ^^^ a rating is between two pins
    body: {tie: [s, b]}
#                   ^ pin `b` shares its own net always: another pin or a rail is needed here
    ties: {isol: d, b: s, iso: "VIN*"}
#          ^^^^ class `ldn` has no pin `isol` => did you mean `iso`?
#                   ^ the tie of b has a place of its own => write `body: {tie: s}`
#                              ^^^^^^ a pin of the class or one rail is needed here, not `VIN*`
  dio: {kind: diode, pins: [p, n]}
#                          ^^^^^ a class of kind diode lacks pin a and pin k => the pins of a diode are called a k, in the order of the netlist, others have free names
  two: {kind: nmos, pins: [d, g, s, D]}
#                                   ^ pin `d` is listed twice
  res: {kind: resistor, clamp: 0V..5V}
#                       ^^^^^ class `res` has no pin `k` => did you mean `a`?
"#,
    );
}

#[test]
fn rails_are_voltages_or_nets() {
    check(
        r#"rails:
  A: 5uA
#    ^^^ a voltage is needed here, 5uA is a current => a net called so is written net("5uA")
  B: 5
#    ^ is this 5 V or a net called 5? write 5V, or net("5")
  C: 6V..5V
#    ^^^^^^ this range is upside down: 6V is above 5V => write 5V..6V
  D: A..B
#     ^^ `..` needs spaces around it where an end is a net => write `SW .. SW + 5V`
  E: A+1V
#    ^^^^ `A+1V` is no voltage and no net => write spaces, `A + 1V`; or net("A+1V") if a net is called so
  F: 0V .. IN+
#          ^^^ `IN+` is no voltage and no net => a net whose name ends in + or - is written net("IN+")
  G: 0V .. D*
#          ^^ `D*` is no voltage and no net => an end names one net, so globs have no place here; a net called so is written net("D*")
  H: 0V .. B + 1uA
#              ^^^ a voltage is needed here, 1uA is a current
  I: B + 2V .. B + 1V
#    ^^^^^^^^^^^^^^^^ this range is upside down: B + 2V is above B + 1V => write B + 1V..B + 2V
  J: 0V..
#    ^^^^ an upper end is missing: a rail has both ends, or one voltage
  K: two words
#    ^^^^^^^^^ `two words` is no voltage and no net => an end is a voltage, a net, or a net give or take a voltage: `VIN + 1V`; a net with a blank in its name is written net("two words")
  L: [0V, 5V]
#    ^^^^^^^ one value is needed here, not a list or a map
  M:
# ^ rail `M` has no voltage: write `M: 0V..5V`
  N: 5v
#    ^^ a voltage is needed here: `v` is no unit: capitals count in a deck, so write 5V
  P: 0V .. 3V3
#          ^^^ a voltage is needed here, 3V3 is something in V³ => a net called so is written net("3V3")
  Q: 0V .. 24V_IN
  O: net("x
#    ^^^^^^ `net("x` is no voltage and no net => write net("…") around the name of the net
"#,
    );
}

#[test]
fn rails_in_a_ring_are_errors() {
    check(
        r#"rails:
  A: B .. B + 1V
#    ^^^^^^^^^^^ these rails are held against one another in a ring: A → B → C* → A => give one of them a range in volts, or hold it against a rail outside the ring
  B: 0V .. C1
  "C*": A
  SELF: 0V .. self
#       ^^^^^^^^^^ rail SELF is held against itself => give one of them a range in volts, or hold it against a rail outside the ring
  SW: 0V..5V
  BST: SW .. SW + 5V
modes:
  up: {SW: BST}
#          ^^^ these rails are held against one another in a ring in mode up: SW → BST → SW => give one of them a range in volts, or hold it against a rail outside the ring
"#,
    );
}

#[test]
fn transitions_and_currents() {
    check(
        r#"modes: {hold: {SW: 24V}, fill: {SW: 0V}}
transitions:
  - {from: hold, to: fil, takes: 5ns, rate: 2MHz}
#                    ^^^ there is no mode `fil` => did you mean `fill`?
  - {from: hold, to: fill, takes: 5MHz, rate: 2MHz}
#                                 ^^^^ a time is needed here, 5MHz is a frequency
  - {from: hold, to: fill}
#   ^^^^^^^^^^^^^^^^^^^^^ this transition lacks takes and rate
  - {from: hold, to: hold, takes: 5ns, rate: 2MHz}
#   ^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^ a transition leads from one mode to another, this one stays in hold
currents:
  into: {IB: 5V}
#            ^^ a current is needed here, 5V is a voltage
  thru: {x1.m1: 5uA}
# ^^^^ `currents` has no key `thru` => there are: into, through
"#,
    );
}

#[test]
fn rules_are_whole_or_change_one_that_is_there() {
    check(
        r#"use: [builtin:ldmos]
rules:
  finger-cont: {severity: warning}
# ^^^^^^^^^^^ there is no rule `finger-cont` to change, and a new one needs `for`, `require` and `say` => did you mean `finger-count`?
  finger-count: {severity: warn}
#                          ^^^^ there is no severity `warn` => there are: error, warning, note, silent
  wide: {for: device, say: "wide"}
# ^^^^ rule `wide` lacks `require`
  Wide: {for: device, require: fingers > 2, say: "wide"}
# ^^^^ `Wide` is no name for a rule: lower case letters, digits and hyphens make one
  odd: {for: devices, require: fingers > 2, say: "wide"}
#            ^^^^^^^ there is no subject of rules `devices` => did you mean `device`?
  late: {for: run, say: "late"}
# ^^^^ a rule about the run is found by the program itself: a new one cannot be written
  spot: {for: device, require: fingers > 2, say: "few", point: {finger: "here"}}
#                                                               ^^^^^^ `finger` is no place that a label of this rule can stand at => did you mean `fingers`?
"#,
    );
}

#[test]
fn waivers_have_a_rule_a_place_and_a_reason() {
    check(
        r#"use: [builtin:ldmos]
waivers:
  - {rule: finger-cuont, at: m1, reason: "ok"}
#          ^^^^^^^^^^^^ there is no rule `finger-cuont` => did you mean `finger-count`?
  - {rule: finger-count, at: m1}
#   ^^^^^^^^^^^^^^^^^^^^^^^^^^^ this waiver lacks reason
  - {rule: finger-count, at: m1, reason: " "}
#                                        ^^^ `reason` is empty
  - {rule: finger-count, at: m1, reason: ok, until: 2027-02-29}
#                                                   ^^^^^^^^^^ a day of the calendar is needed here, such as 2027-03-01, not `2027-02-29`
"#,
    );
}

#[test]
fn used_decks_are_found_or_missed_at_their_path() {
    check(
        r#"use: [process.yaml, ../nowhere.yaml, builtin:ldmoss, deck.yaml]
#                   ^^^^^^^^^^^^^^^ there is no deck at `../nowhere.yaml` => paths are relative to the folder of the deck that names them
#                                    ^^^^^^^^^^^^^^ no deck `builtin:ldmoss` is inside the program => did you mean `builtin:ldmos`?
#                                                    ^^^^^^^^^ these decks use one another in a circle, back to `deck.yaml` => a deck may use another only one way: move what both need into a third one
"#,
    );
}

#[test]
fn shapes_that_do_not_fit() {
    check(
        r#"classes: [n5]
#        ^^^ a list of classes is a map: lines of `key: value`, or `{key: value}`
top: [a, b]
#    ^^^^^ one value is needed here, not a list or a map
netlists: {a: b}
#         ^^^^^ a list is needed here: `[one, two]`
transitions: {from: a}
#            ^^^^^^^^ transitions are a list: `- {from: hold, to: fill, takes: 5ns, rate: 2MHz}`
waivers: none
#        ^^^^ waivers are a list: `- {rule: finger-count, at: xbias.m4, reason: "…"}`
rails:
  ? [A]
#   ^^ a key must be a name
  : 5V
"#,
    );
}

/// What is said about a deck, one line a complaint: `line:column message`.
fn said(files: &[(&str, &[u8])], own: &[&str]) -> Vec<String> {
    let mut sources = SourceMap::new();
    let own: Vec<PathBuf> = own.iter().map(PathBuf::from).collect();
    let (_, complaints) = load_decks(&InMemory(files), &own, &mut sources, &words);
    let line = |complaint: &Diagnostic| {
        let (place, path) = (sources.start(complaint.span), sources.file(complaint.span.file).path());
        format!("{path}:{}:{} {}", place.line, place.column, complaint.message)
    };
    complaints.iter().map(line).collect()
}

#[test]
fn broken_yaml_has_a_place() {
    let bomb: String = (1..40).map(|n| format!("a{n}: &a{n} [*a{0}, *a{0}]\n", n - 1)).collect();
    let bomb = format!("a0: &a0 [x, x]\n{bomb}");
    let deep: String = (0..500).map(|n| " ".repeat(n) + "a:\n").collect();
    let brackets = "[".repeat(5000);
    for (text, expected) in [
        (
            "rails: {VSS: 0V\nclasses: {}\n",
            "2:8 this is not sound YAML: a `{` before this place is not closed, or a comma is missing",
        ),
        ("rails:\n\tVSS: 0V\n", "2:2 this is not sound YAML: a tab stands in the indentation, where YAML wants blanks"),
        ("top: 'VSS\n", "1:6 this is not sound YAML: a quote is opened and never closed"),
        (
            "top: b: c\n",
            "1:7 this is not sound YAML: a second `: ` in one value: it needs quotes, or a line of its own",
        ),
        ("top: *b\n", "1:6 this is not sound YAML: no `&` before this place has the name that `*` asks for"),
        ("top: @b\n", "1:6 this is not sound YAML: a value cannot begin with this sign: put it in quotes"),
        (
            "--- {}\n--- {}\n",
            "2:5 this is not sound YAML: a second document begins with `---`, and a deck is one document",
        ),
        ("top: &x [*x]\n", "1:10 this is not sound YAML: an alias stands inside what it repeats"),
        (bomb.as_str(), "16:12 this is not sound YAML: aliases repeat one another too often to be read"),
        (brackets.as_str(), "1:33 this is not sound YAML: maps and lists stand too deep in one another"),
        (
            deep.as_str(),
            "33:33 this is not sound YAML: the deck is too large, or maps and lists stand too deep in one another",
        ),
        ("just words\n", "1:1 a deck is a map of sections: `use:`, `classes:`, `rails:`, `rules:` …"),
    ] {
        assert_eq!(
            said(&[("deck.yaml", text.as_bytes())], &["deck.yaml"]),
            [format!("deck.yaml:{expected}")],
            "{text:.40}"
        );
    }
}

#[test]
fn bytes_that_are_no_text_have_a_place() {
    let latin: &[u8] = b"# 5 \xb5m\nrails: {VSS: 0V}\n";
    assert_eq!(said(&[("deck.yaml", latin)], &["deck.yaml"]), ["deck.yaml:1:5 byte 0xb5 here is no UTF-8 text"]);
    let marked: &[u8] = b"\xef\xbb\xbfrails: {VSS: 0uA}\r\n";
    assert_eq!(
        said(&[("deck.yaml", marked)], &["deck.yaml"]),
        ["deck.yaml:1:14 a voltage is needed here, 0uA is a current"]
    );
    assert_eq!(said(&[("deck.yaml", b"")], &["deck.yaml"]), [""; 0]);
    assert_eq!(said(&[], &["deck.yaml"]), ["deck.yaml:1:1 there is no deck at `deck.yaml`"]);
    assert_eq!(said(&[], &["builtin:sky13"]), ["builtin:sky13:1:1 no deck `builtin:sky13` is inside the program"]);
}

#[test]
fn an_error_points_at_the_deck_that_it_came_from() {
    let base: &[u8] = b"use: [builtin:ldmos]\nclasses:\n  n5: {kind: nmos, ratings: {vds: 5uA}}\n";
    let own: &[u8] =
        b"use: [lib/base.yaml]\nclasses:\n  n5: {ratings: {vgs: 1ns}}\nrules: {finger-count: {severity: bad}}\n";
    let files = [("blk/deck.yaml", own), ("blk/lib/base.yaml", base)];
    assert_eq!(
        said(&files, &["blk/deck.yaml"]),
        [
            "blk/deck.yaml:3:23 a voltage is needed here, 1ns is a time",
            "blk/deck.yaml:4:34 there is no severity `bad`",
            "blk/lib/base.yaml:3:35 a voltage is needed here, 5uA is a current",
        ]
    );
}

#[test]
fn later_decks_lie_over_earlier_ones() {
    let base: &[u8] = b"use: [builtin:ldmos]
netlists: [a.sp]
rails: {VDD: 5V, VSS: 0V}
classes: {n5: {kind: nmos, ratings: {vds: ..5V, vgs: ..5V}, ties: {b2: s}, pins: [d, g, s, b, b2], fingers: {min: 2}}, p5: {kind: pmos}}
transitions: [{from: a, to: b, takes: 1ns, rate: 1MHz}]
modes: {a: {VDD: 5V}, b: {VDD: 0V}}
waivers: [{rule: finger-count, at: m1, reason: seen}]
";
    let side: &[u8] = b"use: [base.yaml]\nrails: {VDD: 6V}\n";
    let own: &[u8] = b"use: [base.yaml, side.yaml, base.yaml]
rails: {vss: 0.1V}
classes: {n5: {ratings: {vgs: ..6V}, ties: {}, fingers: {}}, p5: {}}
modes: {a: {vdd: 4V}}
transitions: []
rules: {finger-count: {severity: note}, length-off: {}}
waivers: [{rule: length-off, at: m2, reason: seen}]
";
    let mut sources = SourceMap::new();
    let files: [(&str, &[u8]); 3] = [("d/own.yaml", own), ("d/base.yaml", base), ("d/side.yaml", side)];
    let (deck, complaints) = load_decks(&InMemory(&files), &["d/own.yaml".into()], &mut sources, &words);
    assert_eq!(complaints, []);
    let rails: Vec<_> = deck.rails.iter().map(|rail| (rail.net.text(), rail.high.clone())).collect();
    assert_eq!(rails, [("VDD", End::Volts(6.0)), ("vss", End::Volts(0.1))], "base is laid down once, below side");
    assert_eq!(deck.classes.len(), 1, "p5 was cleared");
    let class = &deck.classes[0];
    assert_eq!(class.ratings.iter().map(|rating| rating.range.hi).collect::<Vec<_>>(), [5.0, 6.0]);
    assert_eq!((class.ties.len(), class.fingers), (0, None));
    assert_eq!(deck.modes[0].rails.len(), 1);
    assert_eq!(deck.modes[0].rails[0].low, End::Volts(4.0));
    assert_eq!(deck.transitions, []);
    assert_eq!(deck.waivers.len(), 2);
    assert_eq!(deck.netlists[0].0, "d/a.sp");
    let severity = |id: &str| deck.rules.iter().find(|rule| rule.id == id).map(|rule| rule.severity);
    assert_eq!((severity("finger-count"), severity("length-off")), (Some(Severity::Note), None));
    let own: Vec<_> = deck.own_files.iter().map(|&file| sources.file(file).path()).collect();
    assert_eq!(own, ["d/own.yaml"]);
}

#[test]
fn decks_inside_the_program_are_sound() {
    for name in builtin_names() {
        let mut sources = SourceMap::new();
        let own = [PathBuf::from(format!("builtin:{name}"))];
        let (deck, complaints) = load_decks(&InMemory(&[]), &own, &mut sources, &words);
        assert_eq!(complaints, [], "builtin:{name}");
        assert_eq!(deck.rules.len(), pages::PAGES.len(), "builtin:{name}");
        assert_eq!(deck.classes.is_empty(), name == "ldmos");
        assert!(
            deck.classes.iter().all(|class| class.ratings.is_empty() || class.source.is_some()),
            "a rating names its source"
        );
        assert!(deck.own_files.is_empty());
    }
}

#[test]
fn without_a_deck_the_rules_apply_and_without_use_none_do() {
    let mut sources = SourceMap::new();
    let (deck, _) = load_decks(&InMemory(&[]), &[], &mut sources, &words);
    assert_eq!(deck.rules.len(), pages::PAGES.len());
    let (deck, _) = load(&[("deck.yaml", "rails: {VSS: 0V}\n")], &["deck.yaml"], &mut SourceMap::new());
    assert_eq!(deck.rules, []);
}

#[test]
fn every_page_is_whole_and_its_examples_have_sound_decks() {
    let (deck, complaints) = load_decks(&InMemory(&[]), &[], &mut SourceMap::new(), &words);
    assert_eq!(complaints, []);
    for rule in &deck.rules {
        let id = &rule.id;
        let examples = rule.examples.as_ref().unwrap_or_else(|| panic!("{id} has no examples"));
        assert!(!rule.why.is_empty() && rule.cite.is_some() && !rule.title.is_empty() && rule.help.is_some(), "{id}");
        assert_eq!(rule.require.is_none(), rule.subject == crate::declared::Subject::Run, "{id}");
        assert!(rule.unproven <= Severity::Note, "{id}");
        assert_ne!(examples.fires, examples.quiet, "{id}");
        let text = format!("use: [builtin:ldmos]\n{}", examples.deck);
        assert_eq!(said(&[("deck.yaml", text.as_bytes())], &["deck.yaml"]), [""; 0], "{id}");
        for netlist in [&examples.fires, &examples.quiet] {
            assert!(netlist.starts_with("* "), "{id}: an example begins with a comment that says what it is");
        }
    }
}

proptest::proptest! {
    /// Whatever a deck holds, reading it ends, and every complaint lies in its text.
    #[test]
    fn any_deck_is_harmless(parts in proptest::collection::vec(proptest::sample::select(PARTS.to_vec()), 0..40), tail in "\\PC{0,12}") {
        let text = parts.concat() + &tail;
        let mut sources = SourceMap::new();
        let (_, complaints) = load(&[("deck.yaml", &text), ("process.yaml", PROCESS)], &["deck.yaml"], &mut sources);
        for complaint in complaints {
            let length = sources.text(complaint.span.file).len();
            assert!(complaint.span.start <= complaint.span.end && complaint.span.end as usize <= length);
            assert!(sources.text(complaint.span.file).get(complaint.span.range()).is_some(), "on character boundaries");
        }
    }
}

const PARTS: [&str; 40] = [
    "rails:",
    "classes:",
    "modes:",
    "rules:",
    "waivers:",
    "currents:",
    "transitions:",
    "use: [process.yaml]",
    "top:",
    "includes:",
    "\n",
    "\n  ",
    "\n    ",
    "\n- ",
    "{",
    "}",
    "[",
    "]",
    ", ",
    ": ",
    "VSS",
    "0V",
    "5uA",
    "a..b",
    " .. ",
    " + 1V",
    "net(\"",
    "\")",
    "'",
    "\"",
    ">-\n  ",
    "|\n  ",
    "&x ",
    "*x",
    "kind: nmos",
    "pins: [d, g, s, b]",
    "µ",
    "ratings: {vds: ",
    "# c\n",
    "for: device",
];

#[test]
fn expressions_are_checked_where_they_stand() {
    check(
        r#"classes:
  n5:
    kind: nmos
    size: {width: w *, length: "mox(l, 1)", fingers: 'nf + (', copies: "(m>1)*max(m, mult)"}
#                   ^ a value is missing behind `*`
#                               ^^^ there is no function `mox` here => did you mean `max`?
#                                                          ^ a value is missing behind `(`
rules:
  too-wide:
    for: device
    where: class.kind == nmoss and class.high_voltage
#                        ^^^^^ `nmoss` is none of the words that can stand here => did you mean `nmos`? The words are nmos, pmos, npn, pnp, njf, pjf, diode, resistor, capacitor, inductor, box
    require: width <= 40uA
#            ^^^^^^^^^^^^^ a length cannot be compared with a current
    say: "{name} is {widht} wide"
#                    ^^^^^ there is no name `widht` here => did you mean `width`?
  folded:
    for: device
    require: >-
      fingers > 1 and
      (finger >= 5um)
#      ^^^^^^ there is no name `finger` here => did you mean `fingers`?
    say: "{name}"
  flat: {for: device, require: width, say: "{name"}
#                              ^^^^^ a condition is needed here, which is true or false => compare it with something, as in `width <= 2000um`
#                                           ^ this { is not closed => write {{ for the sign itself
"#,
    );
}
