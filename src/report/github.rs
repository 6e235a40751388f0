//! Annotations for a workflow of GitHub Actions: workflow commands, which the runner reads from the job's output and shows at the
//! lines of a change.
//!
//! Form and escapes follow GitHub's published page "Workflow commands for GitHub Actions" and the open toolkit that writes such
//! commands (both from memory): `::error file=…,line=…,col=…,endLine=…,endColumn=…,title=…::message`; `%`, carriage return and line
//! feed are escaped everywhere, `:` and `,` in properties too. A step shows ten annotations of a kind; more would be dropped in
//! silence, so the rest is counted.

use super::visible::visible;
use super::{CAUTION, Report, Setting};
use crate::diag::{Diagnostic, Severity, Verdict};
use crate::source::SourceMap;
use std::io::{self, Write};

/// At most this many annotations of a kind are shown of one step.
pub const MOST_OF_A_KIND: usize = 10;

const KINDS: [(Severity, &str); 3] =
    [(Severity::Error, "error"), (Severity::Warning, "warning"), (Severity::Note, "notice")];

/// Writes the annotations, errors first, one line that counts the rest, and the summary as plain lines of the job's output. What
/// somebody accepted is never annotated.
pub fn write(report: &Report, sources: &SourceMap, setting: &Setting, out: &mut dyn Write) -> io::Result<()> {
    let mut rest = Vec::new();
    for (severity, kind) in KINDS {
        let all = report.diagnostics.iter().filter(|one| one.waived.is_none() && one.severity == severity);
        let mut left = 0usize;
        for (count, diagnostic) in all.enumerate() {
            if count < MOST_OF_A_KIND {
                writeln!(out, "::{kind} {}::{}", properties(diagnostic, sources, setting), data(&words(diagnostic)))?;
            } else {
                left += 1;
            }
        }
        if left > 0 {
            rest.push(super::summary::plural(left as u64, kind));
        }
    }
    if !rest.is_empty() {
        writeln!(
            out,
            "drainwise: {} more without an annotation, since a step shows {MOST_OF_A_KIND} of a kind: `drainwise lint` lists all",
            rest.join(", ")
        )?;
    }
    for line in report.summary.lines() {
        writeln!(out, "drainwise: {}", output(&line))?;
    }
    writeln!(out, "drainwise: {CAUTION}")
}

/// Columns only where the place lies on one line: the runner takes them for that alone.
fn properties(diagnostic: &Diagnostic, sources: &SourceMap, setting: &Setting) -> String {
    let title = property(&diagnostic.code);
    let shown = sources.file(diagnostic.span.file).path();
    if setting.base.uri(shown).is_none_or(|(_, counts)| !counts) {
        return format!("title={title}");
    }
    let (start, end) = (sources.start(diagnostic.span), sources.end(diagnostic.span));
    let columns = match start.line == end.line {
        true => format!(",col={},endColumn={}", start.column, end.column),
        false => String::new(),
    };
    let file = property(&setting.base.path(shown));
    format!("file={file},line={},endLine={}{columns},title={title}", start.line, end.line)
}

fn words(diagnostic: &Diagnostic) -> String {
    let mut words = diagnostic.message.clone();
    if let Some(finding) = &diagnostic.finding {
        if finding.verdict == Verdict::Unproven {
            words.insert_str(0, "unproven: ");
        }
        if finding.instances > 1 {
            words.push_str(&format!(" ({} instances, the worst {})", finding.instances, finding.worst.path));
        }
    }
    if let Some(help) = &diagnostic.help {
        words.push('\n');
        words.push_str(help);
    }
    words
}

/// What stands behind the second `::`.
fn data(text: &str) -> String {
    let kept = text.replace('%', "%25").replace('\r', "%0D").replace('\n', "%0A");
    visible(&kept).into_owned()
}

/// What stands behind the `=` of a property.
fn property(text: &str) -> String {
    data(text).replace(':', "%3A").replace(',', "%2C")
}

/// A plain line of the job's output. The runner obeys `##[…]` anywhere in a line (an older form), so a name never makes one.
fn output(text: &str) -> String {
    visible(&text.replace(['\r', '\n'], " ").replace("##[", "## [")).into_owned()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The escapes of the toolkit's `escapeData` and `escapeProperty` (from memory).
    #[test]
    fn escapes() {
        assert_eq!(data("50% a:b,c\r\nd"), "50%25 a:b,c%0D%0Ad");
        assert_eq!(property("a:b,c%\n"), "a%3Ab%2Cc%25%0A");
        assert_eq!(output("##[add-mask]x\n::error::y"), "## [add-mask]x ::error::y");
        assert_eq!(data("a\u{1b}[1m"), "a\u{241b}[1m");
    }
}
