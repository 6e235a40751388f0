//! Runs the two example netlists of every rule page: the rule fires on one and stays quiet on the other.
//!
//! A page is the rule's only documentation, so its examples must be true. Each runs through the whole program with the page's
//! own deck. All that a reader would see counts: an example must be free of errors of reading, too.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::print_stdout)]

use drainwise::deck::pages::PAGES;
use drainwise::declared::Examples;
use drainwise::diag::{Diagnostic, Verdict};
use drainwise::load::Memory;
use drainwise::pipeline::{Job, Outcome, Progress, lint, read_decks};
use drainwise::waiver::Date;
use std::collections::{BTreeMap, BTreeSet};

struct Still;

impl Progress for Still {
    fn stage(&self, _: &str) {}
}

/// The examples of every rule that ships, by id.
fn examples() -> BTreeMap<String, Examples> {
    let job = Job { decks: vec!["builtin:ldmos".into()], ..Job::default() };
    let (deck, outcome) = read_decks(&Memory::new(), &job);
    assert!(!outcome.could_not, "{:?}", outcome.report.diagnostics);
    let examples = |rule: &drainwise::declared::Rule| rule.examples.clone().unwrap_or_else(|| panic!("{}", rule.id));
    deck.rules.iter().map(|rule| (rule.id.clone(), examples(rule))).collect()
}

/// Lints one example. The day is fixed, so that waivers' dates mean the same for ever.
fn run(deck: &str, netlist: &str) -> Outcome {
    let deck = format!("use: [builtin:ldmos]\n{deck}");
    let files = Memory::new().with("example/deck.yaml", deck).with("example/block.sp", netlist);
    let job = Job {
        netlists: vec!["example/block.sp".into()],
        decks: vec!["example/deck.yaml".into()],
        today: Some(Date { year: 2027, month: 1, day: 1 }),
        ..Job::default()
    };
    lint(&files, &job, &Still)
}

fn of_rule<'o>(outcome: &'o Outcome, id: &str) -> Vec<&'o Diagnostic> {
    outcome.report.diagnostics.iter().filter(|diagnostic| diagnostic.code == id).collect()
}

fn shown(outcome: &Outcome) -> String {
    let mut bytes = Vec::new();
    drainwise::report::short::write(&outcome.report, &outcome.sources, &mut bytes).unwrap();
    String::from_utf8(bytes).unwrap()
}

#[test]
fn every_page_has_a_rule_and_ids_are_unique() {
    let ids: BTreeSet<&str> = PAGES.iter().map(|page| page.id).collect();
    assert_eq!(ids.len(), PAGES.len());
    assert_eq!(ids.into_iter().map(str::to_owned).collect::<Vec<_>>(), examples().into_keys().collect::<Vec<_>>());
}

#[test]
fn every_rule_fires_on_its_example_and_is_quiet_on_the_other() {
    let mut wrong = Vec::new();
    let mut ran = 0;
    for (id, page) in examples() {
        for (which, netlist) in [("fires", &page.fires), ("quiet", &page.quiet)] {
            let outcome = run(&page.deck, netlist);
            ran += 1;
            if outcome.could_not {
                wrong.push(format!("{id}, `{which}`: errors of reading\n{}", shown(&outcome)));
            }
            let findings = of_rule(&outcome, &id);
            let violated = |one: &&Diagnostic| one.finding.as_ref().is_none_or(|f| f.verdict == Verdict::Violated);
            if which == "fires" && !findings.iter().any(violated) {
                wrong.push(format!("{id}, `fires`: no finding of the rule\n{}", shown(&outcome)));
            }
            if which == "quiet" && !findings.is_empty() {
                wrong.push(format!("{id}, `quiet`: {} findings of the rule\n{}", findings.len(), shown(&outcome)));
            }
        }
    }
    assert!(ran >= 2 * PAGES.len());
    assert!(wrong.is_empty(), "{} examples are wrong:\n\n{}", wrong.len(), wrong.join("\n"));
}
