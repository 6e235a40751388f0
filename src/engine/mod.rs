//! Rules over subjects: verdicts, words, and the folding of instances into one finding a statement.
//!
//! A rule is asked of every subject in every context, never of every instance; what fails in several contexts is one finding
//! with the number of its instances, the worst of them named. Words are made once, for that one.

mod devices;
mod finding;
mod fold;
mod hygiene;
mod others;
mod verdict;

pub use hygiene::{adopt, hygiene, rails_unmatched, waivers};

use crate::declared::Rule;
use crate::diag::Diagnostic;
use crate::facts::World;

/// Asks all rules about all subjects. Findings come in no particular order; their severities are those of the rules.
pub fn judge(world: World<'_>, rules: &[&Rule]) -> Vec<Diagnostic> {
    let mut findings = devices::judge(world, rules);
    findings.extend(others::judge(world, rules));
    findings
}
