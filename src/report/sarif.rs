//! The report as SARIF 2.1.0, the OASIS standard for results of static analysis: one run, rules with their texts, results with
//! places, chains as code flows, and errors of reading as notifications.
//!
//! Section numbers in this file are those of the standard. Two of its sentences shape the results: what could not be decided has
//! kind `open` (3.27.9), and with that kind the level is `none` (3.27.10). Where a team has raised the severity of unproven findings
//! above a note, not knowing is itself the fault: those have kind `fail` and that level.

mod shape;

use super::json::SummaryShape;
use super::{CAUTION, Report, RuleText, Setting};
use crate::diag::{Accepted, Diagnostic, Finding, Label, Severity, Verdict, Waived};
use crate::source::{SourceMap, Span};
use shape::*;
use std::collections::BTreeMap;
use std::io::{self, Write};

/// The schema that the log says it follows.
const SCHEMA: &str = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json";

/// Stands for the repository's root: URIs count from it, and whoever reads the log knows where it is (3.14.14).
const ROOT: &str = "%SRCROOT%";

/// Errors of reading, with what they are about; those of the first half are the user's to set right (3.20.21), the others were met
/// on the way (3.20.22).
const NOTIFICATIONS: [(&str, &str, bool); 7] = [
    ("arguments", "a word on the command line", true),
    ("baseline", "the list of known findings", true),
    ("deck", "a deck", true),
    ("waiver", "an accepted finding", true),
    ("card", "a card of a netlist", false),
    ("include", "an included file", false),
    ("netlist", "a netlist", false),
];

/// Writes the log. Findings that somebody accepted are left out, or suppressed results where the report wants them.
pub fn write(report: &Report, sources: &SourceMap, setting: &Setting, out: &mut dyn Write) -> io::Result<()> {
    let log = Sight { report, sources, setting }.log();
    serde_json::to_writer_pretty(&mut *out, &log).map_err(io::Error::from)?;
    writeln!(out)
}

/// What everything is made from.
#[derive(Clone, Copy)]
struct Sight<'r> {
    report: &'r Report,
    sources: &'r SourceMap,
    setting: &'r Setting,
}

impl<'r> Sight<'r> {
    fn log(self) -> Log<'r> {
        let version = env!("CARGO_PKG_VERSION");
        let about = "Checks that the high-voltage transistors of a SPICE netlist are used as their process allows.";
        let driver = Driver {
            name: "Drainwise",
            version,
            semantic_version: version,
            short_description: plain(about),
            rules: self.report.rules.iter().map(rule).collect(),
            notifications: NOTIFICATIONS.iter().map(|(id, what, _)| notice(id, what)).collect(),
        };
        let root = BaseId { description: message("the root of the repository, or the folder that the program ran in") };
        let run = Run {
            tool: Tool { driver },
            invocations: [self.invocation()],
            original_uri_base_ids: BTreeMap::from([(ROOT, root)]),
            column_kind: "unicodeCodePoints",
            results: self.outcomes(),
            properties: RunProperties { summary: SummaryShape::of(&self.report.summary), caution: CAUTION },
        };
        Log { schema: SCHEMA, version: "2.1.0", runs: [run] }
    }

    fn invocation(self) -> Invocation<'r> {
        let reading = self.report.listed().filter(|diagnostic| diagnostic.finding.is_none());
        let of_user =
            |diagnostic: &&Diagnostic| NOTIFICATIONS.iter().any(|(id, _, own)| *own && *id == diagnostic.code);
        let (own, met): (Vec<&Diagnostic>, Vec<&Diagnostic>) = reading.partition(of_user);
        let notifications = |all: Vec<&'r Diagnostic>| all.into_iter().map(|one| self.notification(one)).collect();
        Invocation {
            execution_successful: !self.report.could_not,
            exit_code: self.setting.exit_code,
            exit_code_description: match self.setting.exit_code {
                0 => "nothing at or above the bar",
                1 => "findings at or above the bar",
                _ => "the job could not be done",
            },
            tool_configuration_notifications: notifications(own),
            tool_execution_notifications: notifications(met),
        }
    }

    fn notification(self, diagnostic: &'r Diagnostic) -> Notification<'r> {
        let index = NOTIFICATIONS.iter().position(|(id, ..)| *id == diagnostic.code);
        Notification {
            descriptor: Descriptor { id: &diagnostic.code, index },
            level: level(diagnostic.severity),
            message: message(&words(diagnostic)),
            locations: self.location(diagnostic.span, "").into_iter().collect(),
        }
    }

    fn outcomes(self) -> Vec<Outcome<'r>> {
        let listed = self.report.listed();
        listed.filter_map(|diagnostic| Some(self.outcome(diagnostic, diagnostic.finding.as_deref()?))).collect()
    }

    fn outcome(self, diagnostic: &'r Diagnostic, finding: &'r Finding) -> Outcome<'r> {
        let rule_index = self.report.rules.iter().position(|rule| rule.id == diagnostic.code);
        let open = finding.verdict == Verdict::Unproven && diagnostic.severity <= Severity::Note;
        let own = self.location(diagnostic.span, &diagnostic.label);
        let logical = logical(finding, rule_index.map_or("run", |at| self.report.rules[at].about));
        let related = diagnostic.labels.iter().filter_map(|label| self.location(label.span, &label.text));
        Outcome {
            rule_id: &diagnostic.code,
            rule_index,
            kind: if open { "open" } else { "fail" },
            level: if open { "none" } else { level(diagnostic.severity) },
            message: message(&words(diagnostic)),
            locations: own.map(|own| Location { logical_locations: logical, ..own }).into_iter().collect(),
            related_locations: related.enumerate().map(|(at, place)| Location { id: Some(at + 1), ..place }).collect(),
            code_flows: diagnostic.chains.iter().filter_map(|chain| self.flow(chain)).collect(),
            partial_fingerprints: BTreeMap::from([("drainwise/v1", diagnostic.fingerprint.as_str())]),
            suppressions: diagnostic.waived.iter().map(|waived| self.suppression(waived)).collect(),
            properties: OutcomeProperties {
                verdict: finding.verdict.word(),
                severity: diagnostic.severity.word(),
                instances: finding.instances,
                mode: finding.worst.mode.as_deref(),
                modes: &finding.modes,
                pairs: &finding.pairs,
                nets: finding.nets.iter().map(|(pin, net)| (pin.as_str(), net.as_str())).collect(),
            },
        }
    }

    /// A chain from where it begins to where it ends, whose last step says what it was about.
    fn flow(self, chain: &[Label]) -> Option<CodeFlow<'r>> {
        let last = chain.last()?;
        let steps = chain.iter().filter_map(|step| self.location(step.span, &step.text));
        let locations: Vec<Step<'_>> = steps.map(|location| Step { location }).collect();
        let thread_flows = [ThreadFlow { locations }];
        Some(CodeFlow { message: message(&format!("how the voltage gets here: {}", last.text)), thread_flows })
    }

    fn suppression(self, waived: &Waived) -> Suppression<'r> {
        let by = waived.by.as_ref().map_or(String::new(), |by| format!(", by {by}"));
        let until = waived.until.as_ref().map_or(String::new(), |until| format!(", until {until}"));
        Suppression {
            kind: if waived.how == Accepted::Comment { "inSource" } else { "external" },
            status: if waived.how == Accepted::Baseline { "underReview" } else { "accepted" },
            justification: format!("{}{by}{until}", waived.reason),
            location: self.location(waived.place, ""),
        }
    }

    /// None for places in what is no file.
    fn location(self, span: Span, words: &str) -> Option<Location<'r>> {
        let (uri, counts) = self.setting.base.uri(self.sources.file(span.file).path())?;
        let (start, end) = (self.sources.start(span), self.sources.end(span));
        let region =
            Region { start_line: start.line, start_column: start.column, end_line: end.line, end_column: end.column };
        let artifact_location = Artifact { uri, uri_base_id: counts.then_some(ROOT) };
        Some(Location {
            id: None,
            physical_location: Physical { artifact_location, region },
            logical_locations: Vec::new(),
            message: Some(words).filter(|words| !words.is_empty()).map(message),
        })
    }
}

/// What the place is in the circuit: the statement in its cell, as waivers name it, and the instance to look at first.
fn logical<'r>(finding: &'r Finding, about: &'static str) -> Vec<Logical<'r>> {
    let kind = match about {
        "run" | "mirror" | "pair" => "device",
        other => other,
    };
    if finding.device.is_empty() || (about == "run" && finding.cell.is_empty()) {
        return Vec::new();
    }
    let named = |name: String, kind| Logical { name: &finding.device, fully_qualified_name: name, kind };
    let mut places = vec![named(finding.worst.path.clone(), kind)];
    if !finding.cell.is_empty() {
        places.push(named(format!("{}/{}", finding.cell, finding.device), "statement"));
    }
    places
}

/// The message, how often it holds, and what to do.
fn words(diagnostic: &Diagnostic) -> String {
    let times = diagnostic.finding.as_ref().filter(|finding| finding.instances > 1);
    let times = times.map_or(String::new(), |finding| {
        format!(" ({} instances, the worst {})", finding.instances, finding.worst.path)
    });
    let help = diagnostic.help.as_ref().map_or(String::new(), |help| format!("\n\n{help}"));
    format!("{}{times}{help}", diagnostic.message)
}

/// A message's braces are doubled, since single ones hold places for arguments (3.11.5); and names never make a link (3.11.6).
fn message(words: &str) -> Message {
    Message { text: words.replace('{', "{{").replace('}', "}}").replace("](", "\\](") }
}

fn plain(text: &str) -> Text {
    Text { text: text.to_owned(), markdown: None }
}

fn level(severity: Severity) -> &'static str {
    match severity {
        Severity::Silent => "none",
        other => other.word(),
    }
}

fn notice<'r>(id: &'r str, what: &str) -> Rule<'r> {
    let short_description = plain(&format!("Something is wrong with {what}."));
    Rule { id, short_description, full_description: None, help: None, default_configuration: None, properties: None }
}

fn rule(rule: &RuleText) -> Rule<'_> {
    Rule {
        id: &rule.id,
        short_description: plain(&sentence(&rule.title)),
        full_description: Some(plain(format!("{} {}", sentence(&rule.title), rule.why).trim())),
        help: Some(Text { text: help(rule, false), markdown: Some(help(rule, true)) }),
        default_configuration: Some(Configuration { level: level(rule.severity) }),
        properties: Some(RuleProperties { about: rule.about, cite: rule.cite.as_deref() }),
    }
}

/// Why, the source, and the examples.
fn help(rule: &RuleText, markdown: bool) -> String {
    let mut parts = vec![if rule.why.is_empty() { sentence(&rule.title) } else { rule.why.trim().to_owned() }];
    parts.extend(rule.cite.as_ref().map(|cite| format!("Source: {cite}")));
    let fence = if markdown { "```" } else { "" };
    for (head, netlist) in
        rule.examples.iter().flat_map(|(fires, quiet)| [("It fires on", fires), ("It stays quiet on", quiet)])
    {
        parts.push(format!("{head}:\n\n{fence}\n{}\n{fence}", netlist.trim_end()).trim_end().to_owned());
    }
    parts.join("\n\n")
}

/// With a capital letter and a full stop.
fn sentence(title: &str) -> String {
    let mut letters = title.chars();
    let first = letters.next().map(|first| first.to_uppercase().to_string()).unwrap_or_default();
    format!("{first}{}.", letters.as_str().trim_end_matches('.'))
}
