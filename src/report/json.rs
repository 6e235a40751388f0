//! The report as one JSON object: `findings` and `summary`, for programs.

use super::{Report, Summary};
use crate::diag::{Accepted, Diagnostic, Label, Verdict, Waived};
use crate::source::{SourceMap, Span};
use serde::Serialize;
use serde::ser::{SerializeMap, Serializer};
use std::collections::BTreeMap;
use std::io::{self, Write};

/// Writes the report. Errors of reading stand among the findings, their code as `rule`, so that nothing is lost.
pub fn write(report: &Report, sources: &SourceMap, out: &mut dyn Write) -> io::Result<()> {
    let object = Object { report, sources };
    serde_json::to_writer_pretty(&mut *out, &object).map_err(io::Error::from)?;
    writeln!(out)
}

struct Object<'r> {
    report: &'r Report,
    sources: &'r SourceMap,
}

impl Serialize for Object<'_> {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        let mut map = serializer.serialize_map(Some(2))?;
        map.serialize_entry("findings", &Findings(self))?;
        map.serialize_entry("summary", &SummaryShape::of(&self.report.summary))?;
        map.end()
    }
}

/// Serialised one by one, so that a million findings need no second copy.
struct Findings<'f>(&'f Object<'f>);

impl Serialize for Findings<'_> {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_seq(self.0.report.diagnostics.iter().map(|diagnostic| Shape::of(diagnostic, self.0.sources)))
    }
}

#[derive(Serialize)]
struct Shape<'d> {
    rule: &'d str,
    verdict: &'static str,
    severity: &'static str,
    message: &'d str,
    cell: Option<&'d str>,
    device: Option<&'d str>,
    instances: u64,
    worst: WorstShape<'d>,
    pairs: &'d [String],
    modes: &'d [String],
    #[serde(flatten)]
    place: Place<'d>,
    labels: Vec<LabelShape<'d>>,
    nets: BTreeMap<&'d str, &'d str>,
    help: Option<&'d str>,
    cite: Option<&'d str>,
    fingerprint: &'d str,
    waiver: Option<WaiverShape<'d>>,
    known: bool,
}

#[derive(Serialize)]
struct WorstShape<'d> {
    path: &'d str,
    mode: Option<&'d str>,
    values: BTreeMap<&'d str, &'d str>,
}

#[derive(Serialize)]
struct Place<'d> {
    file: &'d str,
    line: u32,
    column: u32,
    end_line: u32,
    end_column: u32,
}

#[derive(Serialize)]
struct LabelShape<'d> {
    #[serde(flatten)]
    place: Place<'d>,
    text: &'d str,
}

#[derive(Serialize)]
struct WaiverShape<'d> {
    reason: &'d str,
    by: Option<&'d str>,
    until: Option<&'d str>,
}

impl<'d> Place<'d> {
    fn of(span: Span, sources: &'d SourceMap) -> Place<'d> {
        let (start, end) = (sources.start(span), sources.end(span));
        Place {
            file: sources.file(span.file).path(),
            line: start.line,
            column: start.column,
            end_line: end.line,
            end_column: end.column,
        }
    }
}

impl<'d> Shape<'d> {
    fn of(diagnostic: &'d Diagnostic, sources: &'d SourceMap) -> Shape<'d> {
        let finding = diagnostic.finding.as_deref();
        let label = |label: &'d Label| LabelShape { place: Place::of(label.span, sources), text: &label.text };
        Shape {
            rule: &diagnostic.code,
            verdict: finding.map_or(Verdict::Violated, |finding| finding.verdict).word(),
            severity: diagnostic.severity.word(),
            message: &diagnostic.message,
            cell: finding.map(|finding| finding.cell.as_str()),
            device: finding.map(|finding| finding.device.as_str()),
            instances: finding.map_or(1, |finding| finding.instances),
            worst: WorstShape {
                path: finding.map_or("", |finding| &finding.worst.path),
                mode: finding.and_then(|finding| finding.worst.mode.as_deref()),
                values: finding.map_or_else(BTreeMap::new, |finding| {
                    finding.worst.values.iter().map(|(name, value)| (name.as_str(), value.as_str())).collect()
                }),
            },
            pairs: finding.map_or(&[], |finding| &finding.pairs),
            modes: finding.map_or(&[], |finding| &finding.modes),
            place: Place::of(diagnostic.span, sources),
            labels: own_label(diagnostic, sources).into_iter().chain(diagnostic.labels.iter().map(label)).collect(),
            nets: finding.map_or_else(BTreeMap::new, |finding| {
                finding.nets.iter().map(|(pin, net)| (pin.as_str(), net.as_str())).collect()
            }),
            help: diagnostic.help.as_deref(),
            cite: diagnostic.cite.as_deref(),
            fingerprint: &diagnostic.fingerprint,
            known: diagnostic.waived.as_ref().is_some_and(known),
            waiver: diagnostic.waived.as_ref().filter(|waived| !known(waived)).map(|waived| WaiverShape {
                reason: &waived.reason,
                by: waived.by.as_deref(),
                until: waived.until.as_deref(),
            }),
        }
    }
}

fn known(waived: &Waived) -> bool {
    waived.how == Accepted::Baseline
}

/// The words at the finding's own place, as the first of its labels.
fn own_label<'d>(diagnostic: &'d Diagnostic, sources: &'d SourceMap) -> Option<LabelShape<'d>> {
    let text = Some(diagnostic.label.as_str()).filter(|text| !text.is_empty())?;
    Some(LabelShape { place: Place::of(diagnostic.span, sources), text })
}

#[derive(Serialize)]
pub(super) struct SummaryShape<'s> {
    files: u64,
    cards: u64,
    cards_skipped: u64,
    cells: u64,
    devices: u64,
    high_voltage_devices: u64,
    classes: BTreeMap<&'s str, u64>,
    pairs: Option<PairsShape>,
    findings: CountsShape,
    not_looked_at: &'s [String],
    not_listed: &'s [String],
    netlists: &'s [String],
    decks: &'s [String],
    tops: &'s [String],
    modes: &'s [String],
}

#[derive(Serialize)]
struct PairsShape {
    proven: u64,
    violated: u64,
    unproven: u64,
}

#[derive(Serialize)]
struct CountsShape {
    error: u64,
    warning: u64,
    note: u64,
    waived: u64,
    #[serde(skip_serializing_if = "Option::is_none")]
    known: Option<u64>,
}

impl<'s> SummaryShape<'s> {
    pub(super) fn of(summary: &'s Summary) -> SummaryShape<'s> {
        let counts = summary.findings;
        SummaryShape {
            files: summary.files,
            cards: summary.cards,
            cards_skipped: summary.cards_skipped,
            cells: summary.cells,
            devices: summary.devices,
            high_voltage_devices: summary.high_voltage_devices,
            classes: summary.classes.iter().map(|(name, count)| (name.as_str(), *count)).collect(),
            pairs: summary.pairs.map(|pairs| PairsShape {
                proven: pairs.proven,
                violated: pairs.violated,
                unproven: pairs.unproven,
            }),
            findings: CountsShape {
                error: counts.error,
                warning: counts.warning,
                note: counts.note,
                waived: counts.waived,
                known: Some(counts.known).filter(|known| *known > 0),
            },
            not_looked_at: &summary.not_looked_at,
            not_listed: &summary.not_listed,
            netlists: &summary.judged.netlists,
            decks: &summary.judged.decks,
            tops: &summary.judged.tops,
            modes: &summary.judged.modes,
        }
    }
}
