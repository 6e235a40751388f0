//! Published limits of open processes, held by the decks inside the program, and the arithmetic of duty.
//!
//! Sources: SKY130 PDK documentation, device details of nfet_g5v0d16v0 ("11V/16V NMOS": VDS up to 16 V at VGS = 0, up to 11 V above
//! it; VGS up to 5.5 V); GF180MCU PDK documentation, electrical specifications of the 10 V LDMOS (VDS 10 V, VGS 6 V) and design
//! manual rules MDN.13a to MDN.13c (fingers of 4 to 50 µm, both sides ended by a source).
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, reason = "a test that cannot go on must stop")]

use drainwise::diag::Verdict;
use drainwise::load::Memory;
use drainwise::pipeline::{Job, Progress, lint};

struct Quiet;

impl Progress for Quiet {
    fn stage(&self, _: &str) {}
}

/// Rules and verdicts found about device `device` of a netlist under a deck.
fn found(deck: &str, netlist: &str, device: &str) -> Vec<(String, Verdict)> {
    let files = Memory::new().with("block.sp", format!("* block\n{netlist}\n")).with("deck.yaml", deck);
    let job = Job { netlists: vec!["block.sp".into()], decks: vec!["deck.yaml".into()], ..Job::default() };
    let outcome = lint(&files, &job, &Quiet);
    assert!(!outcome.could_not, "{:?}", outcome.report.diagnostics);
    let findings = outcome.report.diagnostics.iter().filter_map(|diagnostic| {
        let finding = diagnostic.finding.as_ref().filter(|finding| finding.device == device)?;
        Some((diagnostic.code.clone(), finding.verdict))
    });
    findings.collect()
}

fn has(found: &[(String, Verdict)], rule: &str, verdict: Verdict) -> bool {
    found.iter().any(|(id, of)| id == rule && *of == verdict)
}

const SKY: &str = "X1 COIL GATE VSS VSS sky130_fd_pr__nfet_g5v0d16v0 w=20 l=0.7";

/// The threshold is the team's to add: the published table gives one value, no range.
fn sky(rails: &str) -> String {
    format!(
        "use: [builtin:sky130]\nclasses: {{sky130_nfet_g5v0d16v0: {{threshold: 0.6V..0.9V}}}}\nrails: {{VSS: 0V, {rails}}}\n"
    )
}

#[test]
fn sixteen_volts_at_zero_gate_voltage_and_no_more() {
    let off = found(&sky("COIL: 0V..16V, GATE: 0V"), SKY, "X1");
    assert!(!has(&off, "over-rating", Verdict::Violated), "{off:?}");
    assert!(!off.iter().any(|(rule, _)| rule == "on-state-overlap"), "{off:?}");
    let above = found(&sky("COIL: 0V..16.5V, GATE: 0V"), SKY, "X1");
    assert!(has(&above, "over-rating", Verdict::Violated), "{above:?}");
    let gate = found(&sky("COIL: 0V..11V, GATE: 0V..6V"), SKY, "X1");
    assert!(has(&gate, "over-rating", Verdict::Violated), "{gate:?}");
}

#[test]
fn eleven_volts_when_on() {
    let below = found(&sky("COIL: 0V..11V, GATE: 0V..5V"), SKY, "X1");
    assert!(!below.iter().any(|(rule, _)| rule == "on-state-overlap"), "{below:?}");
    let possible = found(&sky("COIL: 0V..16V, GATE: 0V..5V"), SKY, "X1");
    assert!(has(&possible, "on-state-overlap", Verdict::Unproven), "{possible:?}");
    let certain = found(&sky("COIL: 12V..16V, GATE: 5V"), SKY, "X1");
    assert!(has(&certain, "on-state-overlap", Verdict::Violated), "{certain:?}");
}

#[test]
fn the_ten_volt_ldmos() {
    let card = |nf: u32, w: &str| format!("X1 COIL GATE VSS VSS nfet_10v0_asym w={w} l=0.6u nf={nf}");
    let deck = |volts: &str| format!("use: [builtin:gf180mcu]\nrails: {{VSS: 0V, COIL: 0V..{volts}, GATE: 0V..6V}}\n");
    let sound = found(&deck("10V"), &card(2, "40u"), "X1");
    assert!(!sound.iter().any(|(_, verdict)| *verdict == Verdict::Violated), "{sound:?}");
    for (volts, nf, w, rule) in [
        ("10.5V", 2, "40u", "over-rating"),
        ("10V", 3, "40u", "finger-count"),
        ("10V", 2, "120u", "finger-width"),
        ("10V", 2, "7u", "finger-width"),
    ] {
        let broken = found(&deck(volts), &card(nf, w), "X1");
        assert!(has(&broken, rule, Verdict::Violated), "{rule}: {broken:?}");
    }
}

/// 5 ns at 2 MHz is 1 % of the time, although 5e-9 · 2e6 is not 0.01 in binary (common practice, no source).
#[test]
fn five_nanoseconds_at_two_megahertz_are_one_percent() {
    let deck = |takes: &str| {
        format!(
            "use: [builtin:ldmos]\nclasses:\n  ldn60: {{kind: nmos, high_voltage: true, threshold: 0.7V..1.1V, on_state: {{vds: 12V, duty: 1%}}}}\n\
             rails: {{VSS: 0V, COIL: 0V..48V, GATE: 0V..5V}}\nmodes:\n  rest: {{COIL: 48V, GATE: 0V}}\n  pull: {{COIL: 0V..1V, GATE: 5V}}\n\
             transitions: [{{from: rest, to: pull, takes: {takes}, rate: 2MHz}}]\n"
        )
    };
    let card = "M1 COIL GATE VSS VSS ldn60";
    assert!(found(&deck("5ns"), card, "M1").is_empty());
    assert!(has(&found(&deck("5.1ns"), card, "M1"), "on-state-overlap", Verdict::Violated));
}
