//! What a commit's files ask for: the designs that they take part in, each once.
//!
//! A netlist belongs to the nearest deck upward. Where that deck names its design (`netlists:`) and the file takes part in it, the
//! design is judged. Any other netlist is judged alone with that deck, unless another of the files includes it. A deck that
//! names a design has it judged; any other deck is checked alone.

use crate::load::Files;
use crate::pipeline::{self, Job, Loaded, Outcome, Progress};
use std::collections::BTreeSet;
use std::path::{Path, PathBuf};

/// One thing to do for a set of changed files.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Task {
    /// Judge the design that a deck names.
    Design(PathBuf),
    /// Judge one netlist with its nearest deck.
    Alone(PathBuf),
    /// Check a deck alone.
    Deck(PathBuf),
}

impl Task {
    /// The run that does it; none where a deck is only checked.
    pub fn job(&self) -> Option<Job> {
        match self {
            Task::Design(deck) => Some(Job { decks: vec![deck.clone()], ..Job::default() }),
            Task::Alone(netlist) => Some(Job { netlists: vec![netlist.clone()], ..Job::default() }),
            Task::Deck(_) => None,
        }
    }
}

/// What there is to do for changed files, in a fixed order, nothing twice.
pub fn tasks(files: &dyn Files, changed: &[PathBuf], progress: &dyn Progress) -> Vec<Task> {
    let mut designs: BTreeSet<PathBuf> = BTreeSet::new();
    let mut netlists: BTreeSet<PathBuf> = BTreeSet::new();
    let mut tasks: BTreeSet<Task> = BTreeSet::new();
    for path in changed {
        let is_deck =
            path.extension().is_some_and(|end| end.eq_ignore_ascii_case("yaml") || end.eq_ignore_ascii_case("yml"));
        let deck = if is_deck { Some(path.clone()) } else { pipeline::deck_of(files, path) };
        match deck.filter(|deck| names_a_design(files, deck)) {
            Some(deck) => drop(designs.insert(deck)),
            None if is_deck => drop(tasks.insert(Task::Deck(path.clone()))),
            None => {}
        }
        if !is_deck {
            netlists.insert(path.clone());
        }
    }
    let mut covered: BTreeSet<PathBuf> = BTreeSet::new();
    for deck in designs {
        let task = Task::Design(deck);
        covered.extend(task.job().map(|job| read_by(files, &job, progress)).unwrap_or_default());
        tasks.insert(task);
    }
    let open: Vec<&PathBuf> = netlists.iter().filter(|path| !covered.contains(&real(files, path))).collect();
    let mut included: BTreeSet<PathBuf> = BTreeSet::new();
    for path in &open {
        let own = real(files, path);
        if !included.contains(&own) {
            let job = Job { netlists: vec![(*path).clone()], ..Job::default() };
            included.extend(read_by(files, &job, progress).into_iter().filter(|other| *other != own));
        }
    }
    let alone = open.into_iter().filter(|path| !included.contains(&real(files, path)));
    tasks.extend(alone.cloned().map(Task::Alone));
    tasks.into_iter().collect()
}

/// Whether a deck can be read and says which netlists make its design.
fn names_a_design(files: &dyn Files, deck: &Path) -> bool {
    let job = Job { decks: vec![deck.to_owned()], ..Job::default() };
    !pipeline::read_decks(files, &job).0.netlists.is_empty()
}

/// The files that a run reads.
fn read_by(files: &dyn Files, job: &Job, progress: &dyn Progress) -> Vec<PathBuf> {
    let sources = match pipeline::read(files, job, progress) {
        Ok(Loaded { sources, .. }) => sources,
        Err(outcome) => {
            let Outcome { sources, .. } = *outcome;
            sources
        }
    };
    sources.files().map(|(_, file)| real(files, Path::new(file.path()))).collect()
}

fn real(files: &dyn Files, path: &Path) -> PathBuf {
    files.canonical(path).unwrap_or_else(|_| path.to_owned())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::load::Memory;

    struct Silent;

    impl Progress for Silent {
        fn stage(&self, _: &str) {}
    }

    fn check(changed: &[&str], wanted: &[Task]) {
        let cell = "* valve\n.subckt cell a b\nR1 a b 1k\n.ends\n";
        let files = Memory::new()
            .with("valve/drainwise.yaml", "use: [builtin:ldmos]\nnetlists: [top.sp]\n")
            .with("valve/top.sp", "* top\n.include parts.sp\nX1 a b cell\n")
            .with("valve/parts.sp", cell)
            .with("valve/spare.sp", cell)
            .with("bench/drainwise.yaml", "use: [builtin:ldmos]\n")
            .with("bench/a.sp", "* a\n.include b.sp\nX1 a b cell\n")
            .with("bench/b.sp", cell);
        let changed: Vec<PathBuf> = changed.iter().map(PathBuf::from).collect();
        assert_eq!(tasks(&files, &changed, &Silent), wanted, "{changed:?}");
    }

    #[test]
    fn a_design_is_judged_once_whatever_part_of_it_changed() {
        let design = || Task::Design("valve/drainwise.yaml".into());
        check(&["valve/top.sp", "valve/parts.sp", "valve/drainwise.yaml"], &[design()]);
        check(&["valve/parts.sp"], &[design()]);
    }

    #[test]
    fn a_netlist_outside_of_the_design_is_judged_alone() {
        let alone = Task::Alone("valve/spare.sp".into());
        check(&["valve/spare.sp"], &[Task::Design("valve/drainwise.yaml".into()), alone]);
    }

    #[test]
    fn an_included_file_is_judged_where_it_is_included() {
        check(&["bench/b.sp", "bench/a.sp"], &[Task::Alone("bench/a.sp".into())]);
        check(&["bench/b.sp"], &[Task::Alone("bench/b.sp".into())]);
        check(&["bench/drainwise.yaml"], &[Task::Deck("bench/drainwise.yaml".into())]);
    }
}
