//! A baseline: a list of findings that are known, so that only new ones fail. It is a file of its own, made by the program, one
//! finding a line and sorted, so that a change of it can be reviewed. A finding is known by its fingerprint, which does not move when
//! lines do; what else stands there is for people.

use crate::diag::{Accepted, Diagnostic, Waived};
use crate::source::{FileId, SourceMap, Span};
use serde::{Deserialize, Serialize};
use std::collections::HashMap;

/// The form of the file; one of another form is not read.
const FORM: u32 = 1;

/// A known finding.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Known {
    /// The rule's id.
    pub rule: String,
    /// `cell/device`, or what it is about where that is no device in a cell.
    pub at: String,
    /// What it is known by.
    pub fingerprint: String,
    /// Where the file says so.
    pub place: Span,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Shape {
    drainwise_baseline: u32,
    findings: Vec<Entry>,
}

#[derive(Clone, Debug, Deserialize, PartialEq, Eq, PartialOrd, Ord, Serialize)]
#[serde(deny_unknown_fields)]
struct Entry {
    rule: String,
    at: String,
    verdict: String,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pairs: Vec<String>,
    fingerprint: String,
}

/// Reads a baseline that `sources` holds.
pub fn read(sources: &SourceMap, file: FileId) -> Result<Vec<Known>, Box<Diagnostic>> {
    let text = sources.text(file);
    let shape: Shape = serde_json::from_str(text).map_err(|error| Box::new(unreadable(sources, file, &error)))?;
    if shape.drainwise_baseline != FORM {
        let message = format!("this baseline has form {}, and only form {FORM} is known", shape.drainwise_baseline);
        return Err(Box::new(fault(Span::new(file, 0, 0), message)));
    }
    let mut lines: HashMap<&str, Span> = HashMap::new();
    let mut start = 0;
    for line in text.split_inclusive('\n') {
        let span = Span::new(file, start as u32, (start + line.trim_end().len()) as u32);
        lines.extend(line.split('"').filter(|word| word.len() == 16).map(|word| (word, span)));
        start += line.len();
    }
    let whole = Span::new(file, 0, 0);
    let known = |entry: Entry| Known {
        place: lines.get(entry.fingerprint.as_str()).copied().unwrap_or(whole),
        rule: entry.rule,
        at: entry.at,
        fingerprint: entry.fingerprint,
    };
    Ok(shape.findings.into_iter().map(known).collect())
}

fn fault(span: Span, message: String) -> Diagnostic {
    Diagnostic::error("baseline", span, message).with_help("write it anew with `--write-baseline`")
}

fn unreadable(sources: &SourceMap, file: FileId, error: &serde_json::Error) -> Diagnostic {
    let source = sources.file(file);
    let line = source.line_start(error.line() as u32) as usize;
    let mut at = (line + error.column().saturating_sub(1)).min(source.text().len());
    while !source.text().is_char_boundary(at) {
        at -= 1;
    }
    let said = error.to_string();
    let why = said.split(" at line ").next().unwrap_or_default();
    fault(Span::new(file, at as u32, at as u32), format!("this is no baseline: {why}"))
}

/// The text of a baseline that knows all findings which no waiver hides. Errors of reading are never known.
pub fn text(diagnostics: &[Diagnostic]) -> String {
    let mut entries: Vec<Entry> = diagnostics.iter().filter_map(entry).collect();
    entries.sort();
    let mut text = format!("{{\n  \"drainwise_baseline\": {FORM},\n  \"findings\": [");
    for (count, entry) in entries.iter().enumerate() {
        text.push_str(if count == 0 { "\n    " } else { ",\n    " });
        text.push_str(&serde_json::to_string(entry).unwrap_or_default());
    }
    text.push_str(if entries.is_empty() { "]\n}\n" } else { "\n  ]\n}\n" });
    text
}

fn entry(diagnostic: &Diagnostic) -> Option<Entry> {
    let finding = diagnostic.finding.as_ref()?;
    if diagnostic.waived.as_ref().is_some_and(|waived| waived.how != Accepted::Baseline) {
        return None;
    }
    let at = match (finding.cell.is_empty(), finding.device.is_empty()) {
        (false, _) => format!("{}/{}", finding.cell, finding.device),
        (true, false) => finding.device.clone(),
        (true, true) => diagnostic.message.clone(),
    };
    Some(Entry {
        rule: diagnostic.code.clone(),
        at,
        verdict: finding.verdict.word().to_owned(),
        pairs: finding.pairs.clone(),
        fingerprint: diagnostic.fingerprint.clone(),
    })
}

/// Marks the findings that are known, and gives those entries that no finding answers to. Findings must have their fingerprints.
pub fn apply<'k>(diagnostics: &mut [Diagnostic], known: &'k [Known]) -> Vec<&'k Known> {
    let mut by_print: HashMap<&str, (usize, bool)> =
        known.iter().enumerate().map(|(at, known)| (known.fingerprint.as_str(), (at, false))).collect();
    for diagnostic in diagnostics.iter_mut().filter(|diagnostic| diagnostic.finding.is_some()) {
        let Some((at, met)) = by_print.get_mut(diagnostic.fingerprint.as_str()) else { continue };
        *met = true;
        if diagnostic.waived.is_none() {
            diagnostic.waived = Some(Waived {
                how: Accepted::Baseline,
                place: known[*at].place,
                reason: "known: it stands in the baseline".to_owned(),
                by: None,
                until: None,
            });
        }
    }
    let met = |known: &&Known| by_print.get(known.fingerprint.as_str()).is_some_and(|(_, met)| *met);
    known.iter().filter(|known| !met(known)).collect()
}

/// What is said of an entry that no finding answers to.
pub fn gone(known: &Known) -> Diagnostic {
    let message = format!("this known finding of {} at {} is no longer there", known.rule, known.at);
    Diagnostic::note("baseline", known.place, message)
        .with_label("no longer there")
        .with_help("take it out of the baseline, or write that anew, so that it cannot come back unseen")
}

#[cfg(test)]
mod tests {
    use super::*;

    fn reads(text: &str) -> Result<Vec<Known>, Box<Diagnostic>> {
        let mut sources = SourceMap::new();
        let file = sources.add("known.json", text);
        read(&sources, file)
    }

    #[test]
    fn what_is_no_baseline_is_refused_with_its_place() {
        assert_eq!(reads(&text(&[])).unwrap(), []);
        for (text, at, words) in [
            ("", 0, "no baseline"),
            ("{\"findings\": []}", 15, "drainwise_baseline"),
            ("{\"drainwise_baseline\": 1,\n \"findings\": [{\"rule\": 1}]}", 49, "invalid type"),
            ("{\"drainwise_baseline\": 2, \"findings\": []}", 0, "form 2"),
            ("{\"drainwise_baseline\": 1, \"findings\": [], \"x\": µ}", 44, "unknown field `x`"),
        ] {
            let error = reads(text).unwrap_err();
            assert!(error.message.contains(words), "{text}: {}", error.message);
            assert_eq!(error.span.start, at, "{text}: {}", error.message);
        }
    }
}
