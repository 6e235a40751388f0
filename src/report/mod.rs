//! Writers: a finished report, as text for people or as data for machines. They need diagnostics and a summary, and know no
//! rule. Only the writers and `main` put anything out.

pub mod json;
pub mod short;
pub mod summary;
pub mod text;
mod visible;

pub use summary::{Counts, Judged, Pairs, Summary};

use crate::diag::{Diagnostic, Severity};
use crate::source::SourceMap;
use std::collections::HashMap;

/// The caution that every report ends with.
pub const CAUTION: &str = "High voltage can injure and destroy: the process's design manual, local codes and qualified review decide, not this program.";

/// Everything a run found, finished: ordered, with severities, waivers and fingerprints.
#[derive(Clone, Debug, Default)]
pub struct Report {
    /// Ordered by file, line, column and rule.
    pub diagnostics: Vec<Diagnostic>,
    /// Counts, and what was and was not looked at.
    pub summary: Summary,
}

impl Report {
    /// Orders the diagnostics and gives them their fingerprints.
    pub fn sort(&mut self, sources: &SourceMap) {
        self.diagnostics.sort_by(|a, b| {
            let key = |d: &Diagnostic| (sources.file(d.span.file).path().to_owned(), d.span.start, d.code.clone());
            key(a).cmp(&key(b)).then_with(|| a.message.cmp(&b.message))
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

    /// The gravest severity among diagnostics that no waiver hides.
    pub fn worst(&self) -> Option<Severity> {
        self.diagnostics
            .iter()
            .filter(|diagnostic| diagnostic.waived.is_none())
            .map(|diagnostic| diagnostic.severity)
            .max()
    }
}

/// What a diagnostic is about, without lines and numbers: it stays when the text above it changes.
fn fingerprint(diagnostic: &Diagnostic) -> u64 {
    let mut print = hash(0xcbf2_9ce4_8422_2325, diagnostic.code.as_bytes());
    match &diagnostic.finding {
        Some(finding) => {
            let parts = [finding.verdict.word(), &finding.cell, &finding.device];
            for part in parts.into_iter().chain(finding.pairs.iter().map(String::as_str)) {
                print = hash(hash(print, &[0]), part.to_ascii_lowercase().as_bytes());
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
