//! Instances of one statement are one finding.

use crate::diag::Verdict;
use crate::facts::Evidence;
use crate::roles::Standing;
use crate::source::Span;
use hashbrown::HashMap;

/// Which finding something belongs to: rule (by index), verdict, and the place of its statement.
pub(super) type Statement = (u32, Verdict, Span);

/// What was found about one statement, over all contexts.
pub(super) struct Folded<S> {
    pub(super) statement: Statement,
    /// Instances concerned, saturating.
    pub(super) instances: u64,
    /// Where the instances concerned stand, in the order found.
    pub(super) places: Vec<Standing>,
    /// The worst subject and its notes.
    pub(super) worst: (S, Evidence),
    badness: f64,
    /// All pairs that were concerned in some context.
    pub(super) pairs: Vec<String>,
}

/// More statements than this are not listed for one rule and verdict: the rest are counted.
pub const MOST_FINDINGS: usize = 10_000;

/// Findings by statement, in the order in which they were first met.
pub(super) struct Folds<S> {
    index: HashMap<Statement, usize>,
    counts: HashMap<(u32, Verdict), (usize, u64)>,
    pub(super) all: Vec<Folded<S>>,
}

impl<S> Folds<S> {
    pub(super) fn new() -> Folds<S> {
        Folds { index: HashMap::new(), counts: HashMap::new(), all: Vec::new() }
    }

    /// For each rule and verdict with more findings than are listed: how many instances were left out.
    pub(super) fn left_out(&self) -> Vec<(u32, Verdict, u64)> {
        let mut left: Vec<_> = self
            .counts
            .iter()
            .filter(|(_, (_, left))| *left > 0)
            .map(|(&(rule, verdict), &(_, left))| (rule, verdict, left))
            .collect();
        left.sort_by_key(|&(rule, verdict, _)| (rule, verdict.word()));
        left
    }

    /// Counts a failing statement that is not listed, because more than are listed were found before it; false for all others,
    /// which have to be added with what was noted.
    pub(super) fn beyond(&mut self, statement: Statement, count: u64) -> bool {
        let Some((listed, left_out)) = self.counts.get_mut(&(statement.0, statement.1)) else { return false };
        if *listed < MOST_FINDINGS || self.index.contains_key(&statement) {
            return false;
        }
        *left_out = left_out.saturating_add(count);
        true
    }

    /// Adds what was found where `count` instances stand.
    pub(super) fn add(&mut self, statement: Statement, place: Standing, count: u64, subject: S, evidence: Evidence) {
        let badness = evidence.badness;
        let Some(&at) = self.index.get(&statement) else {
            let (listed, left_out) = self.counts.entry((statement.0, statement.1)).or_default();
            if *listed >= MOST_FINDINGS {
                *left_out = left_out.saturating_add(count);
                return;
            }
            *listed += 1;
            self.index.insert(statement, self.all.len());
            let pairs = evidence.pairs.clone();
            self.all.push(Folded {
                statement,
                instances: count,
                places: vec![place],
                worst: (subject, evidence),
                badness,
                pairs,
            });
            return;
        };
        let folded = &mut self.all[at];
        folded.instances = folded.instances.saturating_add(count);
        folded.places.push(place);
        for pair in &evidence.pairs {
            if !folded.pairs.contains(pair) {
                folded.pairs.push(pair.clone());
            }
        }
        if badness > folded.badness {
            folded.badness = badness;
            folded.worst = (subject, evidence);
        }
    }
}
