//! Circuits that keep a state can be in any of their states: a range must hold them all, and no more than the inputs leave open.
//!
//! What latches do: N. Weste, D. Harris, "CMOS VLSI Design", chapter on sequential circuits; A. Sedra, K. Smith, "Microelectronic
//! Circuits", chapter on memory (both from memory). Two crossed inverters rest with either output high and the other low.
//! A latch of two NOR gates is set by S, reset by R, keeps either state while both are low, and has both outputs low while both
//! are high. An odd ring of inverters swings between its supplies.
#![allow(clippy::unwrap_used, clippy::panic, reason = "a test that cannot go on must stop")]

use drainwise::load::Memory;
use drainwise::pipeline::{Job, Progress, lint};
use drainwise::tracing::trace;
use std::collections::BTreeMap;

struct Quiet;

impl Progress for Quiet {
    fn stage(&self, _: &str) {}
}

const CELLS: &str = "
.subckt inv a y p n
MP y a p p p5 w=4u l=1u
MN y a n n n5 w=2u l=1u
.ends
.subckt nor2 a b y p n
MPA x a p p p5 w=4u l=1u
MPB y b x p p5 w=4u l=1u
MNA y a n n n5 w=2u l=1u
MNB y b n n n5 w=2u l=1u
.ends
";

const DECK: &str = "
top: top
classes:
  n5: {kind: nmos, threshold: 0.6V..0.9V}
  p5: {kind: pmos, threshold: 0.6V..0.9V}
  nd: {kind: nmos, threshold: -1.2V..-0.8V}
";

/// By net and mode (empty: the deck has none), lowest and highest voltage in each frame.
type Reaches = BTreeMap<(String, String), BTreeMap<String, (f64, f64)>>;

fn reaches(top: &str, rails: &str) -> Reaches {
    let files = Memory::new()
        .with("t.sp", format!("* t\n{CELLS}.subckt top {top}\n.ends\n"))
        .with("d.yaml", format!("{DECK}{rails}\n"));
    let job = Job { netlists: vec!["t.sp".into()], decks: vec!["d.yaml".into()], ..Job::default() };
    let (outcome, found) = trace(&files, &job, &Quiet, &[]);
    assert!(!outcome.could_not, "{:?}", outcome.report.diagnostics);
    let rows = found.unwrap().into_iter().map(|net| {
        let frames = net.reach.into_iter().map(|(frame, range)| (frame, (range.lo, range.hi)));
        ((net.path, net.mode.unwrap_or_default()), frames.collect())
    });
    rows.collect()
}

#[track_caller]
fn holds(all: &Reaches, net: &str, mode: &str, frame: &str, expected: (f64, f64)) {
    let found = all[&(net.to_owned(), mode.to_owned())][frame];
    assert_eq!(found, expected, "{net} in mode `{mode}` against {frame}");
}

const FIVE: &str = "rails: {VSS: 0V, VDD: 5V}";

#[test]
fn crossed_inverters_hold_either_state() {
    let devices = "VDD VSS
MP1 q qb VDD VDD p5 w=4u l=1u
MN1 q qb VSS VSS n5 w=2u l=1u
MP2 qb q VDD VDD p5 w=4u l=1u
MN2 qb q VSS VSS n5 w=2u l=1u
XO q out VDD VSS inv";
    let cells = "VDD VSS\nX1 q qb VDD VSS inv\nX2 qb q VDD VSS inv\nXO q out VDD VSS inv";
    for netlist in [devices, cells] {
        let all = reaches(netlist, FIVE);
        for net in ["q", "qb", "out"] {
            holds(&all, net, "", "0", (0.0, 5.0));
        }
    }
}

#[test]
fn a_latch_of_nors_is_what_its_inputs_leave_open() {
    let all = reaches(
        "VDD VSS S R\nXA R qb q VDD VSS nor2\nXB S q qb VDD VSS nor2\nXO q out VDD VSS inv",
        "rails: {VSS: 0V, VDD: 5V, S: 0V..5V, R: 0V..5V}
modes: {set: {S: 5V, R: 0V}, reset: {S: 0V, R: 5V}, keep: {S: 0V, R: 0V}, both: {S: 5V, R: 5V}}",
    );
    let (low, high, either) = ((0.0, 0.0), (5.0, 5.0), (0.0, 5.0));
    for (mode, q, qb) in [("set", high, low), ("reset", low, high), ("keep", either, either), ("both", low, low)] {
        holds(&all, "q", mode, "0", q);
        holds(&all, "qb", mode, "0", qb);
    }
    holds(&all, "out", "set", "0", low);
    holds(&all, "out", "keep", "0", either);
}

/// Each latch takes what the one before holds, so that each settles a round later.
#[test]
fn a_latch_that_is_forced_forces_the_next() {
    let mut netlist = String::from("VDD VSS S R\nXA0 R b0 q0 VDD VSS nor2\nXB0 S q0 b0 VDD VSS nor2");
    for at in 1..6 {
        let before = at - 1;
        netlist += &format!("\nXA{at} b{before} b{at} q{at} VDD VSS nor2\nXB{at} q{before} q{at} b{at} VDD VSS nor2");
    }
    let all = reaches(
        &netlist,
        "rails: {VSS: 0V, VDD: 5V, S: 0V..5V, R: 0V..5V}\nmodes: {set: {S: 5V, R: 0V}, keep: {S: 0V, R: 0V}}",
    );
    holds(&all, "q5", "set", "0", (5.0, 5.0));
    holds(&all, "b5", "set", "0", (0.0, 0.0));
    holds(&all, "q5", "keep", "0", (0.0, 5.0));
}

#[test]
fn a_ring_of_inverters_swings_between_its_supplies() {
    let all = reaches("VDD VSS\nX1 a b VDD VSS inv\nX2 b c VDD VSS inv\nX3 c a VDD VSS inv", FIVE);
    for net in ["a", "b", "c"] {
        holds(&all, net, "", "0", (0.0, 5.0));
    }
}

/// What a latch holds is wide against ground, and still no more than its own supply against the supply's low end.
#[test]
fn a_floating_latch_stays_in_its_domain() {
    let all = reaches("BST SW\nX1 q qb BST SW inv\nX2 qb q BST SW inv", "rails: {SW: 0V..48V, BST: SW .. SW + 5V}");
    holds(&all, "q", "", "SW", (0.0, 5.0));
    holds(&all, "qb", "", "0", (0.0, 53.0));
}

/// A current mirror of each polarity, each feeding the other, rests without current too (the state that start-up circuits are for).
#[test]
fn a_loop_that_biases_itself_needs_no_start() {
    let all = reaches(
        "VDD VSS
MP1 pb pb VDD VDD p5 w=4u l=1u
MP2 nb pb VDD VDD p5 w=4u l=1u
MN1 nb nb VSS VSS n5 w=4u l=1u
MN2 pb nb VSS VSS n5 w=4u l=1u",
        FIVE,
    );
    holds(&all, "nb", "", "0", (0.0, 5.0));
    holds(&all, "pb", "", "0", (0.0, 5.0));
}

/// By rule, the devices that `lint` finds.
fn found(top: &str, rails: &str, rule: &str) -> Vec<String> {
    let files = Memory::new()
        .with("t.sp", format!("* t\n{CELLS}.subckt top {top}\n.ends\n"))
        .with("d.yaml", format!("use: [builtin:ldmos]\n{DECK}{rails}\n"));
    let job = Job { netlists: vec!["t.sp".into()], decks: vec!["d.yaml".into()], ..Job::default() };
    let outcome = lint(&files, &job, &Quiet);
    assert!(!outcome.could_not, "{:?}", outcome.report.diagnostics);
    let of_rule = outcome.report.diagnostics.iter().filter(|diagnostic| diagnostic.code == rule);
    let mut devices: Vec<String> =
        of_rule.filter_map(|diagnostic| Some(diagnostic.finding.as_ref()?.device.clone())).collect();
    devices.sort();
    devices
}

/// Crossed inverters drive each other whatever they hold. A loop of mirrors without a start-up may drive nothing: no current, no state.
#[test]
fn a_latch_at_rest_does_not_float_and_a_loop_without_start_up_does() {
    let rails = "rails: {VSS: 0V, VDD: 5V, S: 0V..5V, R: 0V..5V}\nmodes: {set: {S: 5V, R: 0V}, keep: {S: 0V, R: 0V}}";
    let nors = "VDD VSS S R\nXA R qb q VDD VSS nor2\nXB S q qb VDD VSS nor2\nXO q out VDD VSS inv";
    assert_eq!(found(nors, rails, "gate-floats"), Vec::<String>::new());
    let keeper = "VDD VSS S R
MW S R q VSS n5 w=4u l=1u
X1 q qb VDD VSS inv
X2 qb q VDD VSS inv";
    assert_eq!(found(keeper, rails, "gate-floats"), Vec::<String>::new());
    let mirrors = "VDD VSS
MP1 pb pb VDD VDD p5 w=4u l=1u
MP2 nb pb VDD VDD p5 w=4u l=1u
MN1 nb nb VSS VSS n5 w=4u l=1u
MN2 pb nb VSS VSS n5 w=4u l=1u";
    assert_eq!(found(mirrors, FIVE, "gate-floats"), ["MN1", "MN2", "MP1", "MP2"]);
}

/// Depletion devices conduct with their gates on their sources: a load lifts its output to the supply.
#[test]
fn a_depletion_load_lifts_its_own_gate() {
    let all = reaches(
        "VDD VSS IN\nML VDD y y VSS nd w=4u l=1u\nMN y IN VSS VSS n5 w=2u l=1u",
        "rails: {VSS: 0V, VDD: 5V, IN: 0V..5V}",
    );
    holds(&all, "y", "", "0", (0.0, 5.0));
}
