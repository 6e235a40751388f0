//! One rule asked of one subject.

use crate::declared::Rule;
use crate::diag::Verdict;
use crate::expr::{Scope, Value, evaluate};
use crate::facts::Evidence;
use crate::source::Span;

/// A subject that rules can be asked of.
pub(super) trait Asked: Scope {
    /// The notes made since the last time.
    fn notes(&self) -> Evidence;
    /// The place that a `point` key means.
    fn place(&self, key: &str) -> Option<Span>;
    /// The pins concerned by the notes: place, pin and net.
    fn pin_places(&self, evidence: &Evidence) -> Vec<(Span, String, String)>;
}

/// The rule's answer, with what was noted on the way; none where it does not apply or holds.
///
/// `require` false is violated, unknown is unproven; where it is unknown whether the rule applies, what does not surely hold is
/// unproven. A rule does not apply where it asks for something that the class does not declare.
pub(super) fn ask(rule: &Rule, subject: &impl Asked) -> Option<(Verdict, Evidence)> {
    let applies = match &rule.applies {
        Some(applies) => evaluate(applies, subject),
        None => Value::Bool(true),
    };
    let before = subject.notes();
    if before.undeclared || applies == Value::Bool(false) {
        return None;
    }
    let required = rule.require.as_ref().map_or(Value::Bool(true), |require| evaluate(require, subject));
    let mut evidence = subject.notes();
    if applies != Value::Bool(true) {
        evidence.why.extend(before.why);
    }
    match required {
        Value::Bool(true) => None,
        Value::Bool(false) if applies == Value::Bool(true) => Some((Verdict::Violated, evidence)),
        Value::Bool(false) => Some((Verdict::Unproven, evidence)),
        _ if evidence.undeclared && evidence.why.is_empty() => None,
        _ => Some((Verdict::Unproven, evidence)),
    }
}
