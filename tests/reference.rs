//! The lists of the reference page are those of the program: keys of decks, rules, and names that rules may use.
//!
//! They stand between markers in `rules/README.md`. `DRAINWISE_BLESS=1 cargo test --test reference` writes them anew.

#![allow(clippy::unwrap_used, clippy::panic, reason = "helpers of tests may fail")]

use drainwise::deck::keys::SECTIONS;
use drainwise::load::Memory;
use drainwise::pipeline::{Job, read_decks};
use drainwise::reference::{name_tables, rule_table};
use std::fmt::Write;

const PAGE: &str = concat!(env!("CARGO_MANIFEST_DIR"), "/rules/README.md");

/// Every generated part: its name in the markers, and what it must hold.
fn parts() -> Vec<(String, String)> {
    let (deck, outcome) = read_decks(&Memory::new(), &Job { decks: vec!["builtin:ldmos".into()], ..Job::default() });
    assert!(!outcome.could_not, "{:?}", outcome.report.diagnostics);
    let mut parts = vec![("rules".to_owned(), rule_table(&deck.rules)), ("names".to_owned(), name_tables())];
    for section in SECTIONS {
        let mut table = "| key | value | meaning |\n|---|---|---|\n".to_owned();
        for key in section.keys {
            let (name, value, doc) = (key.name, key.holds.in_words(), key.doc.replace('|', "\\|"));
            writeln!(table, "| `{name}` | {value} | {doc} |").unwrap();
        }
        parts.push((format!("keys of {}", section.name.replace('`', "")), table));
    }
    parts
}

/// Where a part stands in the page: behind its first marker, up to its second.
fn place(page: &str, name: &str) -> std::ops::Range<usize> {
    let (begin, end) = (format!("<!-- begin generated: {name} -->\n"), format!("<!-- end generated: {name} -->"));
    let start =
        page.find(&begin).unwrap_or_else(|| panic!("rules/README.md has no marker `{}`", begin.trim())) + begin.len();
    let stop = page[start..].find(&end).unwrap_or_else(|| panic!("rules/README.md has no marker `{end}`")) + start;
    start..stop
}

#[test]
fn the_reference_page_is_fresh() {
    let mut page = std::fs::read_to_string(PAGE).unwrap();
    let bless = std::env::var_os("DRAINWISE_BLESS").is_some();
    for (name, wanted) in parts() {
        let at = place(&page, &name);
        let wanted = format!("\n{}\n\n", wanted.trim_end());
        if bless {
            page.replace_range(at, &wanted);
        } else {
            assert_eq!(page[at], wanted, "`{name}` is stale: run DRAINWISE_BLESS=1 cargo test --test reference");
        }
    }
    if bless {
        std::fs::write(PAGE, page).unwrap();
    }
}

#[test]
fn every_marker_has_its_part() {
    let page = std::fs::read_to_string(PAGE).unwrap();
    let parts = parts();
    for line in page.lines() {
        let Some(name) = line.strip_prefix("<!-- begin generated: ").and_then(|rest| rest.strip_suffix(" -->")) else {
            continue;
        };
        assert!(parts.iter().any(|(known, _)| known == name), "nothing generates `{name}`");
    }
}
