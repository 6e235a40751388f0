//! The report for people at a terminal, drawn by miette in a theme of our own. The only file that knows miette.
//!
//! Snippets show the lines that labels touch and nothing else; long lines are cut around the label, and what a terminal would
//! obey is shown as a visible sign.

use super::cut::{Cut, floor};
use super::visible::visible;
use super::{CAUTION, Report};
use crate::diag::{Diagnostic, Severity, Verdict};
use crate::source::{FileId, SourceMap, Span};
use miette::{
    GraphicalReportHandler, GraphicalTheme, LabeledSpan, MietteSpanContents, SourceCode, SourceSpan, SpanContents,
    ThemeCharacters, ThemeStyles,
};
use owo_colors::Style;
use std::collections::HashMap;
use std::fmt;
use std::io::{self, Write};

/// How the report is to look.
#[derive(Clone, Copy, Debug)]
pub struct Look {
    /// Columns of the terminal.
    pub width: usize,
    /// Whether to use colours.
    pub colour: bool,
}

/// At most this many findings of one rule are drawn; the rest are counted.
pub const MOST_OF_A_RULE: usize = 100;

/// Writes all findings that are to be listed, the summary, and the caution.
pub fn write(report: &Report, sources: &SourceMap, look: Look, out: &mut dyn Write) -> io::Result<()> {
    let handler = GraphicalReportHandler::new_themed(theme(look.colour))
        .with_width(look.width.max(40))
        .with_context_lines(0)
        .with_links(false)
        .without_syntax_highlighting();
    let mut drawn: HashMap<&str, usize> = HashMap::new();
    for diagnostic in report.listed() {
        let count = drawn.entry(diagnostic.code.as_str()).or_insert(0);
        *count += 1;
        if *count > MOST_OF_A_RULE {
            continue;
        }
        let mut page = String::new();
        let shown = Shown::new(diagnostic, sources);
        handler.render_report(&mut page, &shown).map_err(io::Error::other)?;
        writeln!(out, "{}", page.trim_matches('\n'))?;
        for other in &shown.elsewhere {
            writeln!(out, "{}", picture_alone(&handler, other)?)?;
        }
        writeln!(out)?;
    }
    let mut more: Vec<(&str, usize)> = drawn.into_iter().filter(|(_, count)| *count > MOST_OF_A_RULE).collect();
    more.sort_unstable();
    for (rule, count) in more {
        writeln!(
            out,
            "and {} more of {rule}: see them all with `--format short`, or these alone with `--only {rule}`\n",
            count - MOST_OF_A_RULE
        )?;
    }
    let strong = if look.colour { Style::new().bold() } else { Style::new() };
    for line in report.summary.lines() {
        let (head, rest) = line.split_at(line.find("  ").unwrap_or(10).min(10).min(line.len()));
        writeln!(out, "{}{}", strong.style(head), visible(rest))?;
    }
    writeln!(out, "\n{CAUTION}")
}

/// The picture of places in another file, without a head of its own.
fn picture_alone(handler: &GraphicalReportHandler, shown: &Shown) -> io::Result<String> {
    let mut page = String::new();
    handler.render_report(&mut page, shown).map_err(io::Error::other)?;
    let picture: Vec<&str> = page.lines().skip_while(|line| !line.contains('╭')).collect();
    Ok(picture.join("\n"))
}

fn theme(colour: bool) -> GraphicalTheme {
    let mut characters = ThemeCharacters::unicode();
    characters.error = "!!".into();
    characters.warning = "! ".into();
    characters.advice = "? ".into();
    let mut styles = if colour { ThemeStyles::ansi() } else { ThemeStyles::none() };
    if colour {
        styles.error = Style::new().red().bold();
        styles.warning = Style::new().yellow().bold();
        styles.advice = Style::new().blue().bold();
        styles.help = Style::new().green();
        styles.linum = Style::new().dimmed();
        styles.highlights =
            vec![Style::new().red(), Style::new().yellow(), Style::new().blue(), Style::new().magenta()];
    }
    GraphicalTheme { characters, styles }
}

/// A diagnostic as miette draws it.
#[derive(Debug)]
struct Shown {
    head: String,
    code: String,
    severity: miette::Severity,
    help: Option<String>,
    window: Window,
    labels: Vec<LabeledSpan>,
    elsewhere: Vec<Shown>,
}

impl Shown {
    fn new(diagnostic: &Diagnostic, sources: &SourceMap) -> Shown {
        let own = diagnostic.span.file;
        let mut places: Vec<(Span, &str)> = vec![(diagnostic.span, diagnostic.label.as_str())];
        places.extend(diagnostic.labels.iter().map(|label| (label.span, label.text.as_str())));
        let here: Vec<(Span, &str)> = places.iter().copied().filter(|(span, _)| span.file == own).collect();
        let (window, labels) = Window::new(own, &here, sources);
        let mut others: Vec<FileId> = places.iter().map(|(span, _)| span.file).filter(|file| *file != own).collect();
        others.dedup();
        let elsewhere = others.into_iter().map(|file| {
            let there: Vec<(Span, &str)> = places.iter().copied().filter(|(span, _)| span.file == file).collect();
            let (window, labels) = Window::new(file, &there, sources);
            Shown {
                head: "with this".to_owned(),
                code: String::new(),
                severity: miette::Severity::Advice,
                help: None,
                window,
                labels,
                elsewhere: Vec::new(),
            }
        });
        Shown {
            head: visible(&diagnostic.message).into_owned(),
            code: code(diagnostic),
            severity: match diagnostic.severity {
                Severity::Error => miette::Severity::Error,
                Severity::Warning => miette::Severity::Warning,
                _ => miette::Severity::Advice,
            },
            help: help(diagnostic),
            elsewhere: elsewhere.collect(),
            window,
            labels,
        }
    }
}

/// `error finger-count`, with the number of instances and the modes.
fn code(diagnostic: &Diagnostic) -> String {
    let mut code = format!("{} {}", diagnostic.severity.word(), diagnostic.code);
    if let Some(waived) = &diagnostic.waived {
        code.push_str(&format!(", {}", waived.word()));
    }
    if let Some(finding) = &diagnostic.finding {
        if finding.verdict == Verdict::Unproven {
            code.push_str(", unproven");
        }
        if finding.instances > 1 {
            code.push_str(&format!(", {} instances, the worst {}", finding.instances, finding.worst.path));
        } else if finding.worst.path.contains('.') {
            code.push_str(&format!(", at {}", finding.worst.path));
        }
        if !finding.modes.is_empty() {
            code.push_str(&format!(", in {}", finding.modes.join(", ")));
        }
    }
    visible(&code).into_owned()
}

fn help(diagnostic: &Diagnostic) -> Option<String> {
    diagnostic.help.as_ref().map(|help| visible(help).into_owned())
}

impl fmt::Display for Shown {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.head)
    }
}

impl std::error::Error for Shown {}

impl miette::Diagnostic for Shown {
    fn code<'a>(&'a self) -> Option<Box<dyn fmt::Display + 'a>> {
        if self.code.is_empty() { None } else { Some(Box::new(&self.code)) }
    }

    fn severity(&self) -> Option<miette::Severity> {
        Some(self.severity)
    }

    fn help<'a>(&'a self) -> Option<Box<dyn fmt::Display + 'a>> {
        self.help.as_ref().map(|help| Box::new(help) as Box<dyn fmt::Display>)
    }

    fn source_code(&self) -> Option<&dyn SourceCode> {
        if self.window.lines.is_empty() { None } else { Some(&self.window) }
    }

    fn labels(&self) -> Option<Box<dyn Iterator<Item = LabeledSpan> + '_>> {
        Some(Box::new(self.labels.iter().cloned()))
    }
}

/// The lines of one file that labels touch, each made safe and cut to a bearable length.
#[derive(Debug)]
struct Window {
    name: String,
    lines: Vec<Line>,
    text: String,
}

#[derive(Debug)]
struct Line {
    /// Line number, from 1.
    number: u32,
    /// Where it begins in the window's text.
    start: usize,
}

impl Window {
    /// The window over some places of a file, and the labels in its coordinates.
    fn new(file: FileId, places: &[(Span, &str)], sources: &SourceMap) -> (Window, Vec<LabeledSpan>) {
        let source = sources.file(file);
        let mut window = Window { name: visible(source.path()).into_owned(), lines: Vec::new(), text: String::new() };
        let mut by_line: Vec<(u32, Span, &str)> =
            places.iter().map(|&(span, text)| (source.line_column(span.start).line, span, text)).collect();
        by_line.sort_by_key(|&(line, span, _)| (line, span.start));
        let mut labels = Vec::new();
        for group in by_line.chunk_by(|a, b| a.0 == b.0) {
            let number = group[0].0;
            let line = source.line(number);
            let begins = source.line_start(number) as usize;
            let within = |offset: u32| floor(line, (offset as usize).saturating_sub(begins).min(line.len()));
            let first = within(group[0].1.start);
            let last = group.iter().map(|(_, span, _)| within(span.end)).max().unwrap_or(first);
            let cut = Cut::new(line, first, last);
            let start = window.text.len();
            window.lines.push(Line { number, start });
            window.text.push_str(&cut.text);
            window.text.push('\n');
            for &(_, span, text) in group {
                let (from, to) = (cut.place(line, within(span.start)), cut.place(line, within(span.end)));
                let words = if text.is_empty() { None } else { Some(visible(text).into_owned()) };
                labels.push(LabeledSpan::new(
                    words,
                    start + from,
                    to.saturating_sub(from).max(1).min(cut.text.len() - from + 1),
                ));
            }
        }
        (window, labels)
    }
}

impl SourceCode for Window {
    fn read_span<'a>(
        &'a self,
        span: &SourceSpan,
        _: usize,
        _: usize,
    ) -> Result<Box<dyn SpanContents<'a> + 'a>, miette::MietteError> {
        let (from, to) = (span.offset(), span.offset() + span.len().max(1) - 1);
        let line_of = |offset: usize| self.lines.partition_point(|line| line.start <= offset).saturating_sub(1);
        let (first, last) = (line_of(from), line_of(to.min(self.text.len().saturating_sub(1))));
        let start = self.lines.get(first).ok_or(miette::MietteError::OutOfBounds)?.start;
        let end = self.lines.get(last + 1).map_or(self.text.len(), |next| next.start) - 1;
        let whole: SourceSpan = (start, end - start).into();
        let number = self.lines[first].number as usize - 1;
        let data = &self.text.as_bytes()[start..end];
        Ok(Box::new(MietteSpanContents::new_named(self.name.clone(), data, whole, number, 0, last - first + 1)))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diag::Label;

    fn drawn(text: &str, span: std::ops::Range<u32>) -> String {
        let mut sources = SourceMap::new();
        let file = sources.add("valve.sp", text);
        let other = sources.add("drainwise.yaml", "rails: {VSS: 0V}\n");
        let mut diagnostic =
            Diagnostic::error("finger-count", Span::new(file, span.start, span.end), "M1 has 3 fingers")
                .with_label("3 here");
        diagnostic.labels.push(Label { span: Span::new(other, 8, 11), text: "this rail".into() });
        let report = Report { diagnostics: vec![diagnostic], ..Report::default() };
        let mut out = Vec::new();
        write(&report, &sources, Look { width: 80, colour: false }, &mut out).unwrap();
        String::from_utf8(out).unwrap()
    }

    #[test]
    fn labels_in_two_files_are_both_shown() {
        let text = drawn("* title\nM1 a b c d n nf=3\n", 20..24);
        for part in [
            "error finger-count",
            "M1 has 3 fingers",
            "valve.sp:2",
            "3 here",
            "drainwise.yaml:1",
            "this rail",
            "qualified review",
        ] {
            assert!(text.contains(part), "{part} is missing in\n{text}");
        }
    }

    #[test]
    fn long_lines_are_cut_and_escapes_shown() {
        let long = format!("M1 \u{1b}[31m{} nf=3 {}", "x".repeat(500_000), "y".repeat(500_000));
        let at = long.find("nf=3").unwrap() as u32;
        let text = drawn(&long, at..at + 4);
        assert!(text.len() < 4000, "{}", text.len());
        assert!(text.contains("nf=3") && !text.contains('\u{1b}'));
    }
}
