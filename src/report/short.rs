//! One line a finding, for editors and for searching.

use super::visible::visible;
use super::{CAUTION, Report};
use crate::diag::Waived;
use crate::source::SourceMap;
use std::io::{self, Write};

/// Writes `file:line:column: severity: message [rule]` for every finding that is to be listed, then the summary, each of its
/// lines behind `drainwise: `.
pub fn write(report: &Report, sources: &SourceMap, out: &mut dyn Write) -> io::Result<()> {
    for diagnostic in report.listed() {
        let place = sources.start(diagnostic.span);
        let file = sources.file(diagnostic.span.file).path();
        let times = match diagnostic.finding.as_ref().map_or(1, |finding| finding.instances) {
            0 | 1 => String::new(),
            count => format!(" ({count} instances)"),
        };
        let severity = diagnostic.waived.as_ref().map_or(diagnostic.severity.word(), Waived::word);
        let message = diagnostic.message.replace('\n', " ");
        writeln!(
            out,
            "{}:{}:{}: {severity}: {}{times} [{}]",
            visible(file),
            place.line,
            place.column,
            visible(&message),
            diagnostic.code
        )?;
    }
    for line in report.summary.lines() {
        writeln!(out, "drainwise: {}", visible(&line))?;
    }
    writeln!(out, "drainwise: {CAUTION}")
}
