//! Sixteen circuits from textbooks, each with a deck for a sound design and a list of mistakes one can make in it. The sound circuit must
//! be left in peace, and each mistake must be found where it was made: a check of the whole program against circuits that
//! it had no part in. The books are named in each netlist; the mistakes are arithmetic on the ratings in `family.yaml`.
//!
//! `mutations.tsv`: name, old line, new line, expected rows. An old or new text may be several lines, parted by `\n`: each new line
//! stands in place of its old one, what is over stands at the last, and old lines without a new one go. `none` as the
//! expected rows says that the change is a sound one. Names that begin with `roles-` need what recognises structures and
//! currents.

// Helpers of a test may fail as loudly as the test itself.
#![allow(clippy::unwrap_used, clippy::panic)]

use drainwise::diag::Verdict;
use drainwise::load::Disk;
use drainwise::pipeline::{Job, Outcome, Progress, lint};
use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

struct Silent;

impl Progress for Silent {
    fn stage(&self, _: &str) {}
}

struct Mutation {
    name: String,
    old: Vec<String>,
    new: Vec<String>,
    expected: BTreeSet<String>,
}

#[test]
fn sound_circuits_are_left_in_peace_and_mistakes_are_found() {
    let mut faults = Vec::new();
    let (mut run, mut sound_changes, mut roles) = (0, 0, 0);
    let folders = topologies();
    for folder in &folders {
        let name = folder.file_name().unwrap().to_string_lossy().into_owned();
        let sound = violated(&name, &lint_in(folder), &mut faults);
        if !sound.is_empty() {
            faults.push(format!("{name}: the sound circuit gives {sound:?}"));
        }
        for mutation in mutations(folder) {
            let place = format!("{name}, {}", mutation.name);
            let copy = tempfile::tempdir().unwrap();
            let changed = mutated(folder, copy.path(), &mutation, &place);
            let found = violated(&place, &lint_in(&changed), &mut faults);
            roles += usize::from(mutation.name.starts_with("roles-"));
            run += 1;
            if mutation.expected.is_empty() {
                sound_changes += 1;
                if !found.is_empty() {
                    faults.push(format!("{place}: a sound change gives {found:?}"));
                }
            }
            for row in &mutation.expected {
                if !found.contains(row) {
                    faults.push(format!("{place}: `{row}` is missing from {found:?}"));
                }
                if sound.contains(row) {
                    faults.push(format!("{place}: the sound circuit gives `{row}` too"));
                }
            }
        }
    }
    println!(
        "{} topologies; {run} mutations run, {sound_changes} of them sound changes; {roles} need roles or currents",
        folders.len()
    );
    assert!(faults.is_empty(), "\n{}", faults.join("\n"));
    assert_eq!(folders.len(), 16);
    assert!(run - sound_changes >= 20, "only {run} mutations, {sound_changes} of them sound changes");
}

fn topologies() -> Vec<PathBuf> {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/topologies");
    let entries = fs::read_dir(root).unwrap().map(|entry| entry.unwrap().path());
    let mut folders: Vec<PathBuf> = entries.filter(|path| path.is_dir()).collect();
    folders.sort();
    folders
}

fn mutations(folder: &Path) -> Vec<Mutation> {
    let text = fs::read_to_string(folder.join("mutations.tsv")).unwrap();
    let rows = text.lines().filter(|line| !line.starts_with('#'));
    rows.map(|line| {
        let cells: Vec<&str> = line.split('\t').collect();
        let [name, old, new, expected] = cells[..] else { panic!("{}: `{line}`", folder.display()) };
        let lines = |cell: &str| cell.split("\\n").filter(|line| !line.is_empty()).map(str::to_owned).collect();
        let rows = if expected == "none" { "" } else { expected };
        let expected: BTreeSet<String> =
            rows.split(';').map(str::trim).filter(|row| !row.is_empty()).map(str::to_owned).collect();
        assert!(!expected.is_empty() || cells[3] == "none", "{name} expects nothing");
        Mutation { name: name.to_owned(), old: lines(old), new: lines(new), expected }
    })
    .collect()
}

/// Copies the family and one folder, with the change made, and gives the copy's folder.
fn mutated(folder: &Path, copy: &Path, mutation: &Mutation, place: &str) -> PathBuf {
    for shared in ["family.sp", "family.yaml"] {
        fs::copy(folder.parent().unwrap().join(shared), copy.join(shared)).unwrap();
    }
    let changed = copy.join(folder.file_name().unwrap());
    fs::create_dir(&changed).unwrap();
    let mut made = 0;
    for file in ["netlist.sp", "drainwise.yaml"] {
        let text = fs::read_to_string(folder.join(file)).unwrap();
        let mut out = String::new();
        for line in text.lines() {
            let bare = line.trim_start();
            let indent = &line[..line.len() - bare.len()];
            let which = mutation.old.iter().position(|old| old == bare);
            made += usize::from(which.is_some());
            match which {
                None => out += &format!("{line}\n"),
                Some(which) => {
                    let last = which + 1 == mutation.old.len();
                    let take = if last { usize::MAX } else { 1 };
                    let new = mutation.new.iter().skip(which).take(take);
                    new.for_each(|new| out += &format!("{indent}{new}\n"));
                }
            }
        }
        fs::write(changed.join(file), out).unwrap();
    }
    assert_eq!(made, mutation.old.len(), "{place}: the old lines do not stand there, once each");
    changed
}

fn lint_in(folder: &Path) -> Outcome {
    let job =
        Job { netlists: vec![folder.join("netlist.sp")], decks: vec![folder.join("drainwise.yaml")], ..Job::default() };
    lint(&Disk, &job, &Silent)
}

/// The violated findings, each `rule device`. A run that could not be done, or that has anything else to complain about, is a fault.
fn violated(place: &str, outcome: &Outcome, faults: &mut Vec<String>) -> BTreeSet<String> {
    if outcome.could_not {
        faults.push(format!("{place}: the run could not be done"));
    }
    let mut rows = BTreeSet::new();
    for diagnostic in &outcome.report.diagnostics {
        match &diagnostic.finding {
            // Half of these circuits hold no high-voltage device, as their books draw them.
            _ if diagnostic.code == "no-high-voltage" => {}
            Some(finding) if finding.verdict == Verdict::Violated => {
                rows.insert(format!("{} {}", diagnostic.code, finding.device));
            }
            Some(_) => {}
            None => faults.push(format!("{place}: {} [{}]", diagnostic.message, diagnostic.code)),
        }
    }
    rows
}
