//! Findings and errors as an editor shows them: a range, a message, and the places that belong to it.

use super::files::Desk;
use super::places::Lines;
use crate::diag::{Diagnostic, Label, Severity};
use crate::source::{FileId, SourceMap};
use lsp_types::{
    Diagnostic as Shown, DiagnosticRelatedInformation, DiagnosticSeverity, Location, NumberOrString, Range, Uri,
};
use std::collections::{BTreeMap, HashMap};
use std::path::{Path, PathBuf};

/// At most this many places belong to one message.
const MOST_PLACES: usize = 24;
/// At most this many messages are shown in one file; the rest is counted.
const MOST_SHOWN: usize = 1000;

/// Where texts of a run stand for the editor.
pub(super) struct Texts<'s> {
    desk: &'s Desk,
    sources: &'s SourceMap,
    lines: HashMap<FileId, Lines<'s>>,
    uris: HashMap<FileId, Option<Uri>>,
}

impl<'s> Texts<'s> {
    /// Over the texts of a run.
    pub(super) fn new(desk: &'s Desk, sources: &'s SourceMap) -> Texts<'s> {
        Texts { desk, sources, lines: HashMap::new(), uris: HashMap::new() }
    }

    /// The place of a span; none in texts that are no files.
    pub(super) fn location(&mut self, span: crate::source::Span) -> Option<Location> {
        let path = self.sources.file(span.file).path();
        let uri = self.uris.entry(span.file).or_insert_with(|| is_file(path).then(|| self.desk.uri(path)).flatten());
        Some(Location::new(uri.clone()?, self.range(span)))
    }

    /// The range of a span in its text.
    pub(super) fn range(&mut self, span: crate::source::Span) -> Range {
        self.lines.entry(span.file).or_insert_with(|| Lines::of(self.sources.text(span.file))).range(span)
    }
}

/// Whether a text of a run is a file, not a part of the program or its command line.
pub(super) fn is_file(path: &str) -> bool {
    !path.starts_with("builtin:") && path != "command line"
}

/// All files of a run, by the desk's key.
pub(super) fn files(desk: &Desk, sources: &SourceMap) -> Vec<PathBuf> {
    let own = sources.files().map(|(_, file)| file.path()).filter(|path| is_file(path));
    own.map(|path| desk.key(Path::new(path))).collect()
}

/// What is shown in each file of a run.
pub(super) fn shown<'d>(
    desk: &Desk,
    sources: &SourceMap,
    diagnostics: impl Iterator<Item = &'d Diagnostic>,
) -> BTreeMap<PathBuf, Vec<Shown>> {
    let mut texts = Texts::new(desk, sources);
    let mut keys: HashMap<FileId, PathBuf> = HashMap::new();
    let mut left_out: BTreeMap<PathBuf, usize> = BTreeMap::new();
    let mut all: BTreeMap<PathBuf, Vec<Shown>> =
        files(desk, sources).into_iter().map(|file| (file, Vec::new())).collect();
    for diagnostic in diagnostics {
        // What is wrong inside the program's own decks is shown at the first place that the designer can change.
        let places = std::iter::once(diagnostic.span).chain(diagnostic.labels.iter().map(|label| label.span));
        let Some(place) = places.into_iter().find(|place| is_file(sources.file(place.file).path())) else { continue };
        let key = || desk.key(Path::new(sources.file(place.file).path()));
        let file = keys.entry(place.file).or_insert_with(key);
        let shown = all.entry(file.clone()).or_default();
        if shown.len() < MOST_SHOWN {
            shown.push(one(&mut texts, diagnostic, place));
        } else {
            *left_out.entry(file.clone()).or_default() += 1;
        }
    }
    for (file, count) in left_out {
        let message = format!("{count} more messages about this file are not shown: `drainwise lint` shows all");
        let severity = Some(DiagnosticSeverity::INFORMATION);
        let source = Some("drainwise".to_owned());
        all.entry(file).or_default().push(Shown { message, severity, source, ..Shown::default() });
    }
    all
}

fn one(texts: &mut Texts<'_>, diagnostic: &Diagnostic, place: crate::source::Span) -> Shown {
    let related = |label: &Label| {
        let location = texts.location(label.span)?;
        Some(DiagnosticRelatedInformation { location, message: label.text.clone() })
    };
    let related: Vec<_> = diagnostic.labels.iter().filter_map(related).take(MOST_PLACES).collect();
    Shown {
        range: texts.range(place),
        severity: Some(match diagnostic.severity {
            Severity::Error => DiagnosticSeverity::ERROR,
            Severity::Warning => DiagnosticSeverity::WARNING,
            Severity::Note | Severity::Silent => DiagnosticSeverity::INFORMATION,
        }),
        code: Some(NumberOrString::String(diagnostic.code.clone())),
        source: Some("drainwise".to_owned()),
        message: words(diagnostic),
        related_information: (!related.is_empty()).then_some(related),
        ..Shown::default()
    }
}

/// The message, where it was seen, and what to do.
fn words(diagnostic: &Diagnostic) -> String {
    let mut words = diagnostic.message.clone();
    if let Some(finding) = &diagnostic.finding {
        let mut seen = Vec::new();
        if !finding.worst.path.is_empty() && finding.worst.path != finding.device {
            seen.push(format!("at {}", finding.worst.path));
        }
        seen.extend(finding.worst.mode.as_ref().map(|mode| format!("in mode {mode}")));
        if finding.instances > 1 {
            seen.push(format!("{} instances", finding.instances));
        }
        if !seen.is_empty() {
            words += &format!("\n{}", seen.join(", "));
        }
    }
    if let Some(help) = &diagnostic.help {
        words += &format!("\nhelp: {help}");
    }
    words
}
