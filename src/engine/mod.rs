//! Rules over subjects: verdicts, words, and the folding of instances into one finding a statement.
//!
//! A rule is asked of every subject in every context, never of every instance; what fails in several contexts is one finding
//! with the number of its instances, the worst of them named. Words are made once, for that one.

mod devices;
mod finding;
mod fold;
mod groups;
mod hygiene;
mod others;
mod quick;
mod verdict;

pub use fold::MOST_FINDINGS;
pub use hygiene::{adopt, hygiene, rails_unmatched, waivers};

use crate::declared::{Rule, Subject};
use crate::diag::{Diagnostic, Severity, Verdict};
use crate::facts::World;

/// Asks all rules about all subjects. Findings come in no particular order; their severities are those of the rules.
pub fn judge(world: World<'_>, rules: &[&Rule]) -> Judged {
    let (mut findings, left_out) = devices::judge(world, rules);
    findings.extend(others::judge(world, rules));
    for subject in [Subject::Mirror, Subject::Pair] {
        let asked = others::of_subject(rules, subject);
        if !asked.is_empty() {
            findings.extend(groups::judge(world, rules, subject, &asked));
        }
    }
    let beyond = left_out.into_iter().map(|(rule, verdict, instances)| {
        let rule = rules[rule as usize];
        let severity = if verdict == Verdict::Violated { rule.severity } else { rule.unproven };
        Beyond { rule: rule.id.clone(), severity, instances }
    });
    Judged { findings, beyond: beyond.collect() }
}

/// What the rules found.
pub struct Judged {
    /// Findings, in no particular order; at most [`MOST_FINDINGS`] statements of one rule and verdict.
    pub findings: Vec<Diagnostic>,
    /// What lies beyond that.
    pub beyond: Vec<Beyond>,
}

/// Findings that are counted and not listed.
pub struct Beyond {
    /// The rule's id.
    pub rule: String,
    /// Their severity.
    pub severity: Severity,
    /// How many instances.
    pub instances: u64,
}
