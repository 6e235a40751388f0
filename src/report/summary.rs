//! The summary of a run: counts, and what was and was not looked at. A run that looked at nothing must not look clean.

use crate::diag::{Accepted, Diagnostic, Severity};

/// Rated terminal pairs of high-voltage devices, over all instances (saturating).
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Pairs {
    /// They stay inside their ratings.
    pub proven: u64,
    /// They can leave them.
    pub violated: u64,
    /// They could not be decided.
    pub unproven: u64,
}

/// Findings by severity.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Counts {
    /// Errors that no waiver hides.
    pub error: u64,
    /// Warnings that no waiver hides.
    pub warning: u64,
    /// Notes that no waiver hides.
    pub note: u64,
    /// Findings that a waiver hides.
    pub waived: u64,
    /// Findings that a baseline knows.
    pub known: u64,
}

impl Counts {
    /// The gravest severity that is counted.
    pub fn worst(&self) -> Option<Severity> {
        let all = [(self.error, Severity::Error), (self.warning, Severity::Warning), (self.note, Severity::Note)];
        all.into_iter().find(|(count, _)| *count > 0).map(|(_, severity)| severity)
    }

    /// Counts further findings of one severity.
    pub fn add(&mut self, severity: Severity, count: u64) {
        let slot = match severity {
            Severity::Error => &mut self.error,
            Severity::Warning => &mut self.warning,
            Severity::Note => &mut self.note,
            Severity::Silent => return,
        };
        *slot = slot.saturating_add(count);
    }
}

/// What was judged.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Judged {
    /// Netlists as named.
    pub netlists: Vec<String>,
    /// Decks as named; empty where the program's own rules applied alone.
    pub decks: Vec<String>,
    /// Top cells.
    pub tops: Vec<String>,
    /// Modes; empty where the deck has none.
    pub modes: Vec<String>,
}

/// Counts of a run.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Summary {
    /// Netlist files read.
    pub files: u64,
    /// Cards read.
    pub cards: u64,
    /// Cards that could not be read.
    pub cards_skipped: u64,
    /// Cells defined.
    pub cells: u64,
    /// Devices, over all instances (saturating).
    pub devices: u64,
    /// Of these, of high-voltage classes.
    pub high_voltage_devices: u64,
    /// Devices by class, in the order of the decks.
    pub classes: Vec<(String, u64)>,
    /// Rated pairs of high-voltage devices; none where the run did not get that far.
    pub pairs: Option<Pairs>,
    /// Findings.
    pub findings: Counts,
    /// What was not looked at, a line each.
    pub not_looked_at: Vec<String>,
    /// Findings that are counted and not listed, a line each.
    pub not_listed: Vec<String>,
    /// Those by severity.
    pub unlisted: Counts,
    /// What was judged.
    pub judged: Judged,
}

impl Summary {
    /// Counts findings by severity, those that are not listed too.
    pub fn count(&mut self, diagnostics: &[Diagnostic]) {
        let mut counts = self.unlisted;
        for diagnostic in diagnostics {
            let slot = match diagnostic.severity {
                _ if diagnostic.waived.as_ref().is_some_and(|waived| waived.how == Accepted::Baseline) => {
                    &mut counts.known
                }
                _ if diagnostic.waived.is_some() => &mut counts.waived,
                Severity::Error => &mut counts.error,
                Severity::Warning => &mut counts.warning,
                Severity::Note => &mut counts.note,
                Severity::Silent => continue,
            };
            *slot = slot.saturating_add(1);
        }
        self.findings = counts;
    }

    /// The summary in lines for people.
    pub fn lines(&self) -> Vec<String> {
        let mut lines = Vec::new();
        let counts = self.findings;
        let hidden = [(counts.waived, "waived"), (counts.known, "known")].into_iter().filter(|(count, _)| *count > 0);
        let hidden: String = hidden.map(|(count, what)| format!(", {count} {what}")).collect();
        lines.push(format!(
            "found      {}, {}, {}{hidden}",
            plural(counts.error, "error"),
            plural(counts.warning, "warning"),
            plural(counts.note, "note")
        ));
        if self.judged.tops.is_empty() {
            return lines;
        }
        let skipped = if self.cards_skipped > 0 {
            format!(", {} skipped", plural(self.cards_skipped, "card"))
        } else {
            String::new()
        };
        let modes = if self.judged.modes.is_empty() {
            "no modes".to_owned()
        } else {
            format!("modes {}", self.judged.modes.join(", "))
        };
        let decks = if self.judged.decks.is_empty() {
            "no deck: the program's own rules alone".to_owned()
        } else {
            format!("deck {}", self.judged.decks.join(", "))
        };
        lines.push(format!("judged     {} ({}; {modes})", self.judged.tops.join(", "), decks));
        lines.push(format!(
            "read       {}, {}{skipped}, {}",
            plural(self.files, "file"),
            plural(self.cards, "card"),
            plural(self.cells, "cell")
        ));
        let classes: Vec<String> = self.classes.iter().map(|(name, count)| format!("{name} {count}")).collect();
        let classes = if classes.is_empty() { String::new() } else { format!(": {}", classes.join(", ")) };
        lines.push(format!("devices    {}, {} of them high-voltage{classes}", self.devices, self.high_voltage_devices));
        if let Some(pairs) = self.pairs {
            lines.push(format!(
                "ratings    of high-voltage devices: {} pairs proven, {} violated, {} unproven",
                pairs.proven, pairs.violated, pairs.unproven
            ));
        }
        for line in &self.not_looked_at {
            lines.push(format!("not judged {line}"));
        }
        for line in &self.not_listed {
            lines.push(format!("not listed {line}"));
        }
        lines
    }
}

/// `1 error`, `2 errors`, `no errors`.
pub fn plural(count: u64, what: &str) -> String {
    match count {
        0 => format!("no {what}s"),
        1 => format!("1 {what}"),
        _ => format!("{count} {what}s"),
    }
}
