//! Diagnostics as plain data: every stage makes the same struct, and none of them prints.
//!
//! The code of a diagnostic is an opaque string: this floor knows no rule. Evidence that some writer may draw rides
//! along as plain values.

use crate::source::Span;
use std::collections::BTreeMap;

/// How grave a diagnostic is. The order is the order of gravity.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Severity {
    /// Not reported at all.
    Silent,
    /// Worth knowing.
    Note,
    /// Should be looked at.
    Warning,
    /// Must be mended or waived.
    Error,
}

impl Severity {
    /// Its name in decks and reports.
    pub fn word(self) -> &'static str {
        match self {
            Severity::Silent => "silent",
            Severity::Note => "note",
            Severity::Warning => "warning",
            Severity::Error => "error",
        }
    }

    /// The severity with this name.
    pub fn from_word(word: &str) -> Option<Severity> {
        [Severity::Silent, Severity::Note, Severity::Warning, Severity::Error].into_iter().find(|s| s.word() == word)
    }
}

/// A second place that helps to understand the first.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Label {
    /// Where.
    pub span: Span,
    /// What stands there, in a few words.
    pub text: String,
}

/// Whether a rule was found broken, or could not be decided.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Verdict {
    /// The rule is broken.
    Violated,
    /// What is known does not decide; the finding's help says what would.
    Unproven,
}

impl Verdict {
    /// Its name in reports.
    pub fn word(self) -> &'static str {
        match self {
            Verdict::Violated => "violated",
            Verdict::Unproven => "unproven",
        }
    }
}

/// The instance in which a finding is worst.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Worst {
    /// Dotted instance path of the device from the top, without the top's name.
    pub path: String,
    /// The mode it is worst in; none where modes play no part.
    pub mode: Option<String>,
    /// Values that show it, by name, as people write them (`vgs.max` → `48 V`), in the order to be shown.
    pub values: Vec<(String, String)>,
}

/// What a rule's result has beyond a message.
#[derive(Clone, Debug, PartialEq)]
pub struct Finding {
    /// Broken or undecided.
    pub verdict: Verdict,
    /// The cell whose text holds the device; empty at top level.
    pub cell: String,
    /// The device (or instance, net, class) concerned.
    pub device: String,
    /// How many instances of it, in the whole design, have this finding.
    pub instances: u64,
    /// The instance to look at first.
    pub worst: Worst,
    /// Instance paths by which waivers may name it: the concerned instances' paths as far as they were listed.
    pub paths: Vec<String>,
    /// Whether `paths` names every concerned instance.
    pub paths_complete: bool,
    /// The nets on the device's pins in the worst instance, by pin name.
    pub nets: BTreeMap<String, String>,
    /// The terminal pairs or pins concerned (`vgs`, `iso`); empty where the rule is about the whole device.
    pub pairs: Vec<String>,
    /// The modes in which it fails; empty where modes play no part.
    pub modes: Vec<String>,
}

/// Where it was said that a finding is accepted.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Accepted {
    /// Among the waivers of a deck.
    Deck,
    /// In a comment at the card.
    Comment,
    /// In a baseline: known before, by nobody accepted in words.
    Baseline,
}

/// Where a waiver came from, on a diagnostic that it hides.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Waived {
    /// Where it was said.
    pub how: Accepted,
    /// The place of that.
    pub place: Span,
    /// Why it was accepted.
    pub reason: String,
    /// By whom, where that was said.
    pub by: Option<String>,
    /// Last day it holds, `YYYY-MM-DD`, where there is one.
    pub until: Option<String>,
}

impl Waived {
    /// What such a finding is called in reports.
    pub fn word(&self) -> &'static str {
        match self.how {
            Accepted::Deck | Accepted::Comment => "waived",
            Accepted::Baseline => "known",
        }
    }
}

/// One message with its place.
#[derive(Clone, Debug, PartialEq)]
pub struct Diagnostic {
    /// What it is about: a rule's id, or the short name of a kind of error (`deck`, `card`, `include`).
    pub code: String,
    /// How grave.
    pub severity: Severity,
    /// One sentence: what is wrong, with its numbers.
    pub message: String,
    /// The place.
    pub span: Span,
    /// A few words to stand at the place; may be empty.
    pub label: String,
    /// Further places.
    pub labels: Vec<Label>,
    /// Chains of steps that lead here, each in its order, from where it begins to the place itself: how a voltage comes from its
    /// rail. Their steps stand among the labels too.
    pub chains: Vec<Vec<Label>>,
    /// What to do about it.
    pub help: Option<String>,
    /// Where the reason can be read.
    pub cite: Option<String>,
    /// What a rule's finding adds; none for errors of reading.
    pub finding: Option<Box<Finding>>,
    /// Stable identity, which does not move when lines do; filled in by the late pass.
    pub fingerprint: String,
    /// Set by the late pass when somebody accepted it.
    pub waived: Option<Waived>,
}

impl Diagnostic {
    /// A message at a place; the other parts are added by the `with_…` methods.
    pub fn new(code: impl Into<String>, severity: Severity, span: Span, message: impl Into<String>) -> Diagnostic {
        Diagnostic {
            code: code.into(),
            severity,
            message: message.into(),
            span,
            label: String::new(),
            labels: Vec::new(),
            chains: Vec::new(),
            help: None,
            cite: None,
            finding: None,
            fingerprint: String::new(),
            waived: None,
        }
    }

    /// An error at a place.
    pub fn error(code: impl Into<String>, span: Span, message: impl Into<String>) -> Diagnostic {
        Diagnostic::new(code, Severity::Error, span, message)
    }

    /// A warning at a place.
    pub fn warning(code: impl Into<String>, span: Span, message: impl Into<String>) -> Diagnostic {
        Diagnostic::new(code, Severity::Warning, span, message)
    }

    /// A note at a place.
    pub fn note(code: impl Into<String>, span: Span, message: impl Into<String>) -> Diagnostic {
        Diagnostic::new(code, Severity::Note, span, message)
    }

    /// Adds the words at the place.
    pub fn with_label(mut self, text: impl Into<String>) -> Diagnostic {
        self.label = text.into();
        self
    }

    /// Adds a further place.
    pub fn with_place(mut self, span: Span, text: impl Into<String>) -> Diagnostic {
        self.labels.push(Label { span, text: text.into() });
        self
    }

    /// Adds what to do.
    pub fn with_help(mut self, help: impl Into<String>) -> Diagnostic {
        self.help = Some(help.into());
        self
    }
}
