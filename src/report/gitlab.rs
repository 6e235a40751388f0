//! A report in the code quality format that GitLab shows beside a merge request: a JSON array of objects.
//!
//! Fields are those that GitLab documents for a "Code Quality report format" (from memory): `description`, `check_name`,
//! `fingerprint` (unique), `location.path`, `location.lines.begin`, and `severity`, one of info, minor, major, critical, blocker.

use super::{Report, Setting};
use crate::diag::{Diagnostic, Severity, Verdict};
use crate::source::SourceMap;
use serde::Serialize;
use serde::ser::Serializer;
use std::io::{self, Write};

/// Writes the array. What somebody accepted is left out, for the format has no word for it.
pub fn write(report: &Report, sources: &SourceMap, setting: &Setting, out: &mut dyn Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, &Issues { report, sources, setting }).map_err(io::Error::from)?;
    writeln!(out)
}

struct Issues<'r> {
    report: &'r Report,
    sources: &'r SourceMap,
    setting: &'r Setting,
}

impl Serialize for Issues<'_> {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        let open = self.report.diagnostics.iter().filter(|diagnostic| diagnostic.waived.is_none());
        serializer.collect_seq(open.map(|diagnostic| Issue::of(diagnostic, self)))
    }
}

#[derive(Serialize)]
struct Issue<'d> {
    description: String,
    check_name: &'d str,
    fingerprint: &'d str,
    severity: &'static str,
    location: Location,
}

#[derive(Serialize)]
struct Location {
    path: String,
    lines: Lines,
}

#[derive(Serialize)]
struct Lines {
    begin: u32,
}

impl<'d> Issue<'d> {
    fn of(diagnostic: &'d Diagnostic, issues: &Issues<'_>) -> Issue<'d> {
        Issue {
            description: description(diagnostic),
            check_name: &diagnostic.code,
            fingerprint: &diagnostic.fingerprint,
            severity: severity(diagnostic),
            location: Location {
                path: issues.setting.base.path(issues.sources.file(diagnostic.span.file).path()),
                lines: Lines { begin: issues.sources.start(diagnostic.span).line },
            },
        }
    }
}

fn description(diagnostic: &Diagnostic) -> String {
    let finding = diagnostic.finding.as_deref();
    let open = finding.filter(|finding| finding.verdict == Verdict::Unproven).map_or("", |_| "unproven: ");
    let times = finding
        .filter(|finding| finding.instances > 1)
        .map_or(String::new(), |finding| format!(" ({} instances)", finding.instances));
    format!("{open}{}{times}", diagnostic.message)
}

/// What cannot be read blocks the whole job.
fn severity(diagnostic: &Diagnostic) -> &'static str {
    match diagnostic.severity {
        Severity::Error if diagnostic.finding.is_none() => "blocker",
        Severity::Error => "critical",
        Severity::Warning => "minor",
        Severity::Note | Severity::Silent => "info",
    }
}
