//! The report as Markdown for a comment at a change: a table to be read in a minute, details folded away with their netlist lines,
//! what was accepted, and what was not looked at.
//!
//! It is bounded: a comment on GitHub holds 65 536 characters, and one that is too long is refused as a whole. The table comes first,
//! details as far as there is room, and what is left out is counted.

mod escape;

use super::cut::{Cut, floor};
use super::visible::visible;
use super::{CAUTION, Report, Setting, summary::plural};
use crate::diag::{Accepted, Diagnostic, Severity, Verdict};
use crate::source::{FileId, SourceMap, Span};
use escape::{clipped, code, fenced, prose};
use std::io::{self, Write};

/// The whole report is no longer than this, in bytes.
pub const LONGEST: usize = 60_000;

/// The table's share of it, and those of the list of accepted findings and of each part of the foot.
const TABLE: usize = 14_000;
const WAIVED: usize = 8_000;
const FOOT: usize = 6_000;

/// Longer messages, names and lists are cut, in characters.
const LONGEST_TEXT: usize = 400;

/// More places of one finding are counted.
const MOST_PLACES: usize = 12;

/// Writes the comment.
pub fn write(report: &Report, sources: &SourceMap, setting: &Setting, out: &mut dyn Write) -> io::Result<()> {
    let sight = Sight { sources, setting };
    let mut open: Vec<&Diagnostic> = report.diagnostics.iter().filter(|one| one.waived.is_none()).collect();
    open.sort_by_key(|one| std::cmp::Reverse(one.severity));
    let (head, tail) = (head(report) + &sight.table(&open), sight.waived(report) + &foot(report));
    let details = sight.details(&open, LONGEST.saturating_sub(head.len() + tail.len()));
    out.write_all(head.as_bytes())?;
    out.write_all(details.as_bytes())?;
    out.write_all(tail.as_bytes())
}

fn head(report: &Report) -> String {
    let counts = report.summary.findings;
    let parts: Vec<String> = [(counts.error, "error"), (counts.warning, "warning"), (counts.note, "note")]
        .into_iter()
        .filter(|(count, _)| *count > 0)
        .map(|(count, what)| plural(count, what))
        .collect();
    let found = if parts.is_empty() { "no findings".to_owned() } else { parts.join(", ") };
    let known = match counts.known {
        0 => String::new(),
        known => format!("{known} more {} known and not listed.\n\n", if known == 1 { "is" } else { "are" }),
    };
    let failed =
        if report.could_not { "**Some of it could not be read**, so this is not the whole of it.\n\n" } else { "" };
    format!("## Drainwise: {found}\n\n{failed}{known}")
}

/// As many blocks as fit, and how many are left.
fn fill(blocks: impl Iterator<Item = String>, room: usize) -> (String, usize) {
    let (mut text, mut left) = (String::new(), 0);
    for block in blocks {
        if left > 0 || text.len() + block.len() > room {
            left += 1;
        } else {
            text.push_str(&block);
        }
    }
    (text, left)
}

fn more(left: usize, what: &str) -> String {
    if left == 0 { String::new() } else { format!("\n… and {left} more {what}\n") }
}

#[derive(Clone, Copy)]
struct Sight<'r> {
    sources: &'r SourceMap,
    setting: &'r Setting,
}

impl Sight<'_> {
    fn table(self, open: &[&Diagnostic]) -> String {
        if open.is_empty() {
            return String::new();
        }
        let row = |one: &&Diagnostic| {
            format!(
                "| {} | {} | {} | {} |\n",
                grade(one),
                code(&self.place(one.span)),
                code(&one.code),
                prose(&clipped(&message(one), LONGEST_TEXT))
            )
        };
        let (rows, left) = fill(open.iter().map(row), TABLE);
        let more = more(left, "that do not fit here: `drainwise lint` lists all");
        format!("| | place | rule | what is wrong |\n|---|---|---|---|\n{rows}{more}\n")
    }

    fn details(self, open: &[&Diagnostic], room: usize) -> String {
        let more = |left| more(left, "without details here\n");
        let (details, left) =
            fill(open.iter().map(|one| self.detail(one)), room.saturating_sub(more(open.len()).len()));
        details + &more(left)
    }

    /// One finding, folded: its lines, what to do, and where the reason can be read.
    fn detail(self, one: &Diagnostic) -> String {
        let at = one.finding.as_ref().filter(|finding| !finding.worst.path.is_empty());
        let at =
            at.map_or(String::new(), |finding| format!(" at {}", code(&clipped(&finding.worst.path, LONGEST_TEXT))));
        let mut text = format!(
            "<details><summary>{} {}{at}, {}</summary>\n\n",
            grade(one).replace('*', ""),
            code(&one.code),
            code(&self.place(one.span))
        );
        text.push_str(&format!("{}.\n\n", prose(&clipped(&message(one), LONGEST_TEXT))));
        text.push_str(&fenced(&self.lines(one)));
        if let Some(help) = &one.help {
            text.push_str(&format!("\nWhat to do: {}.\n", prose(&clipped(help, 2 * LONGEST_TEXT))));
        }
        if let Some(cite) = &one.cite {
            text.push_str(&format!("\nSource: {}.\n", prose(&clipped(cite, LONGEST_TEXT))));
        }
        text.push_str("\n</details>\n\n");
        text
    }

    /// The netlist lines that the labels touch, each with what is pointed at below.
    fn lines(self, one: &Diagnostic) -> String {
        let mut places: Vec<(Span, &str)> = vec![(one.span, one.label.as_str())];
        places.extend(one.labels.iter().map(|label| (label.span, label.text.as_str())));
        let left = places.len().saturating_sub(MOST_PLACES);
        places.truncate(MOST_PLACES);
        let mut files: Vec<FileId> = Vec::new();
        for (span, _) in &places {
            if !files.contains(&span.file) {
                files.push(span.file);
            }
        }
        let mut text = String::new();
        for file in files {
            let source = self.sources.file(file);
            let line_of = |span: Span| source.line_column(span.start).line;
            let mut here: Vec<(Span, &str)> = places.iter().copied().filter(|(span, _)| span.file == file).collect();
            here.sort_by_key(|(span, _)| (line_of(*span), span.start));
            text.push_str(&format!("{}\n", visible(&self.setting.base.path(source.path()))));
            for group in here.chunk_by(|a, b| line_of(a.0) == line_of(b.0)) {
                text.push_str(&self.line(line_of(group[0].0), group));
            }
        }
        if left > 0 {
            text.push_str(&format!("and {}\n", plural(left as u64, "more place")));
        }
        text
    }

    fn line(self, number: u32, group: &[(Span, &str)]) -> String {
        let source = self.sources.file(group[0].0.file);
        let (line, begins) = (source.line(number), source.line_start(number) as usize);
        let within = |offset: u32| floor(line, (offset as usize).saturating_sub(begins).min(line.len()));
        let first = within(group[0].0.start);
        let last = group.iter().map(|(span, _)| within(span.end)).max().unwrap_or(first);
        let cut = Cut::new(line, first, last);
        let mut text = format!("{number:6}  {}\n", cut.text.replace('\t', " "));
        for (span, words) in group {
            let (from, to) = (cut.place(line, within(span.start)), cut.place(line, within(span.end)));
            let (lead, width) = (cut.text[..from].chars().count(), cut.text[from..to.max(from)].chars().count());
            let words = clipped(&words.replace('\n', " "), LONGEST_TEXT);
            text.push_str(&format!("        {}{} {}\n", " ".repeat(lead), "^".repeat(width.max(1)), visible(&words)));
        }
        text
    }

    /// File and line.
    fn place(self, span: Span) -> String {
        let path = self.setting.base.path(self.sources.file(span.file).path());
        format!("{}:{}", clipped(&path, LONGEST_TEXT), self.sources.start(span).line)
    }

    fn waived(self, report: &Report) -> String {
        let accepted = |one: &&Diagnostic| one.waived.as_ref().is_some_and(|waived| waived.how != Accepted::Baseline);
        let all: Vec<&Diagnostic> = report.diagnostics.iter().filter(accepted).collect();
        if all.is_empty() {
            return String::new();
        }
        let row = |one: &&Diagnostic| {
            let waived = one.waived.as_ref()?;
            let text = |text: &Option<String>| prose(&clipped(text.as_deref().unwrap_or(""), LONGEST_TEXT));
            Some(format!(
                "| {} | {} | {} | {} | {} |\n",
                code(&self.place(one.span)),
                code(&one.code),
                prose(&clipped(&waived.reason, LONGEST_TEXT)),
                text(&waived.by),
                text(&waived.until)
            ))
        };
        let (rows, left) = fill(all.iter().filter_map(row), WAIVED);
        format!(
            "<details><summary>{} waived</summary>\n\n| place | rule | because | by | until |\n|---|---|---|---|---|\n{rows}{}\n</details>\n\n",
            all.len(),
            more(left, "waived")
        )
    }
}

/// `error`, `note, unproven`.
fn grade(one: &Diagnostic) -> String {
    let open = one.finding.as_ref().is_some_and(|finding| finding.verdict == Verdict::Unproven);
    match (one.severity, open) {
        (Severity::Error, false) => "**error**".to_owned(),
        (severity, false) => severity.word().to_owned(),
        (severity, true) => format!("{}, unproven", severity.word()),
    }
}

fn message(one: &Diagnostic) -> String {
    match one.finding.as_ref().filter(|finding| finding.instances > 1) {
        Some(finding) => format!("{} ({} instances)", one.message, finding.instances),
        None => one.message.clone(),
    }
}

/// What was judged and what was not, and the caution.
fn foot(report: &Report) -> String {
    let summary = &report.summary;
    let mut text = String::new();
    let left_out: Vec<&String> = summary.not_looked_at.iter().chain(&summary.not_listed).collect();
    if !left_out.is_empty() {
        let item = |line: &&String| format!("- {}\n", prose(&clipped(line, LONGEST_TEXT)));
        let (items, left) = fill(left_out.iter().map(item), FOOT);
        text = format!("**Not looked at, or not listed**\n\n{items}{}\n", more(left, "such lines"));
    }
    let lines = summary.lines();
    let judged = lines.iter().skip(1).filter(|line| !line.starts_with("not "));
    let judged = judged.map(|line| {
        let (head, rest) = line.split_at(line.find("  ").unwrap_or(0));
        format!("{head}: {}  \n", prose(&clipped(rest.trim(), LONGEST_TEXT)))
    });
    let (judged, left) = fill(judged, FOOT);
    format!("{text}{judged}{}\n{CAUTION}\n", more(left, "such lines"))
}
