//! Decks with faults, each marked where it must be reported.
//!
//! A line `#   ^^^ message => help` says that the line above it gets this message under the carets (`#^` begins in column 1).

use super::fixture::{load, words};
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
    let carets = if start == 0 { format!("#{}", &carets[..carets.len() - 1]) } else { format!("#{}{carets}", " ".repeat(start - 1)) };
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
  NEG: ..
#      ^^ a lower end is missing: a rail has both ends, or one voltage
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
