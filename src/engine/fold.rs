//! Instances of one statement are one finding.

use crate::diag::Verdict;
use crate::facts::Evidence;
use crate::reach::ReachIx;
use crate::source::Span;
use hashbrown::HashMap;

/// Which finding something belongs to: rule (by index), verdict, and the place of its statement.
pub(super) type Statement = (u32, Verdict, Span);

/// What was found about one statement, over all contexts.
pub(super) struct Folded<S> {
    pub(super) statement: Statement,
    /// Instances concerned, saturating.
    pub(super) instances: u64,
    /// Contexts concerned, in the order found.
    pub(super) contexts: Vec<ReachIx>,
    /// The worst subject and its notes.
    pub(super) worst: (S, Evidence),
    badness: f64,
    /// All pairs that were concerned in some context.
    pub(super) pairs: Vec<String>,
}

/// Findings by statement, in the order in which they were first met.
pub(super) struct Folds<S> {
    index: HashMap<Statement, usize>,
    pub(super) all: Vec<Folded<S>>,
}

impl<S> Folds<S> {
    pub(super) fn new() -> Folds<S> {
        Folds { index: HashMap::new(), all: Vec::new() }
    }

    /// Adds what was found in one context that stands for `count` instances.
    pub(super) fn add(&mut self, statement: Statement, context: ReachIx, count: u64, subject: S, evidence: Evidence) {
        let badness = evidence.badness;
        let Some(&at) = self.index.get(&statement) else {
            self.index.insert(statement, self.all.len());
            let pairs = evidence.pairs.clone();
            self.all.push(Folded {
                statement,
                instances: count,
                contexts: vec![context],
                worst: (subject, evidence),
                badness,
                pairs,
            });
            return;
        };
        let folded = &mut self.all[at];
        folded.instances = folded.instances.saturating_add(count);
        folded.contexts.push(context);
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
