//! Writers: a finished report, as text for people or as data for machines. They need diagnostics and a summary, and know no
//! rule. Only the writers and `main` put anything out.

mod base;
mod cut;
pub mod github;
pub mod gitlab;
pub mod json;
pub mod markdown;
pub mod sarif;
pub mod short;
pub mod summary;
pub mod text;
mod visible;

pub use base::Base;
pub use summary::{Counts, Judged, Pairs, Summary};

use crate::diag::{Diagnostic, Severity};
use crate::source::{FileId, SourceMap};
use std::collections::HashMap;

/// The caution that every report ends with.
pub const CAUTION: &str = "High voltage can injure and destroy: the process's design manual, local codes and qualified review decide, not this program.";

/// What a report may say of a rule, from the rule's page.
#[derive(Clone, Debug, PartialEq)]
pub struct RuleText {
    /// Its id.
    pub id: String,
    /// What it ranges over: `device`, `net` …, `run` for rules about the run itself.
    pub about: &'static str,
    /// Severity where violated.
    pub severity: Severity,
    /// One line: what is wrong where it fires.
    pub title: String,
    /// Why it exists; may be empty.
    pub why: String,
    /// Where the reason can be read.
    pub cite: Option<String>,
    /// A netlist that it fires on and one that it stays quiet on.
    pub examples: Option<(String, String)>,
}

/// What writers must know beside the report.
#[derive(Clone, Debug, Default)]
pub struct Setting {
    /// Where paths count from in formats that are read elsewhere.
    pub base: Base,
    /// The exit code that the run ends with.
    pub exit_code: u8,
}

/// Everything a run found, finished: ordered, with severities, waivers and fingerprints.
#[derive(Clone, Debug, Default)]
pub struct Report {
    /// The rules that were asked, ordered by id.
    pub rules: Vec<RuleText>,
    /// Whether the job could not be done.
    pub could_not: bool,
    /// Whether findings that somebody accepted are listed, too.
    pub with_waived: bool,
    /// Ordered by file, line, column and rule.
    pub diagnostics: Vec<Diagnostic>,
    /// Counts, and what was and was not looked at.
    pub summary: Summary,
}

impl Report {
    /// Orders the diagnostics and gives them their fingerprints.
    pub fn sort(&mut self, sources: &SourceMap) {
        let mut files: Vec<(&str, FileId)> = sources.files().map(|(id, file)| (file.path(), id)).collect();
        files.sort_unstable();
        let mut rank = vec![0u32; files.len()];
        for (at, (_, id)) in files.iter().enumerate() {
            rank[id.0 as usize] = at as u32;
        }
        let place = |diagnostic: &Diagnostic| (rank[diagnostic.span.file.0 as usize], diagnostic.span.start);
        self.diagnostics.sort_by(|a, b| {
            place(a).cmp(&place(b)).then_with(|| a.code.cmp(&b.code)).then_with(|| a.message.cmp(&b.message))
        });
        let mut seen: HashMap<u64, u32> = HashMap::new();
        for diagnostic in &mut self.diagnostics {
            let print = fingerprint(diagnostic);
            let again = seen.entry(print).or_insert(0);
            diagnostic.fingerprint =
                format!("{:016x}", if *again == 0 { print } else { hash(print, &again.to_le_bytes()) });
            *again += 1;
        }
    }

    /// The diagnostics that are to be listed.
    pub fn listed(&self) -> impl Iterator<Item = &Diagnostic> {
        self.diagnostics.iter().filter(|diagnostic| self.with_waived || diagnostic.waived.is_none())
    }

    /// The gravest severity among findings that nobody accepted, whether they are listed or only counted.
    pub fn worst(&self) -> Option<Severity> {
        let open = self.diagnostics.iter().filter(|diagnostic| diagnostic.waived.is_none());
        open.map(|diagnostic| diagnostic.severity).max().max(self.summary.unlisted.worst())
    }
}

/// What a diagnostic is about, without lines and numbers: it stays when the text above it changes. Where it is about no device, its
/// words tell it from others of its rule.
fn fingerprint(diagnostic: &Diagnostic) -> u64 {
    let mut print = hash(0xcbf2_9ce4_8422_2325, diagnostic.code.as_bytes());
    match &diagnostic.finding {
        Some(finding) => {
            let parts = [finding.verdict.word(), &finding.cell, &finding.device];
            for part in parts.into_iter().chain(finding.pairs.iter().map(String::as_str)) {
                print = hash(hash(print, &[0]), part.to_ascii_lowercase().as_bytes());
            }
            if finding.device.is_empty() {
                let words: String = diagnostic.message.chars().filter(|now| !now.is_ascii_digit()).collect();
                print = hash(hash(print, &[0]), words.as_bytes());
            }
            print
        }
        None => hash(print, diagnostic.message.as_bytes()),
    }
}

/// FNV-1a, 64 bits (Fowler, Noll and Vo; from memory).
fn hash(start: u64, bytes: &[u8]) -> u64 {
    bytes.iter().fold(start, |hash, &byte| (hash ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01b3))
}
