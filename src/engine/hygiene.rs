//! Findings about the run itself: what could not be matched, and what the decks say in vain. The program finds them; severity,
//! words and reason stand on the rule's page.

use crate::declared::{Deck, Rule};
use crate::design::{Design, Oddity};
use crate::diag::{Diagnostic, Finding, Verdict, Worst};
use crate::expr::{Arg, Scope, Value};
use crate::graph::{Contexts, all_rails};
use crate::names::nearest;
use crate::source::Span;
use crate::waiver;
use std::collections::BTreeMap;

/// What elaboration noticed: leaves without a class, cards with the wrong number of terminals; and whether the design has a
/// high-voltage device at all. `devices` is how many devices it has.
pub fn hygiene(
    design: &Design<'_>,
    contexts: &Contexts,
    deck: &Deck,
    rules: &[&Rule],
    devices: u64,
) -> Vec<Diagnostic> {
    let mut found: Vec<Diagnostic> =
        design.oddities.iter().filter_map(|oddity| of_oddity(design, oddity, rules)).collect();
    found.extend(no_high_voltage(design, contexts, deck, rules, devices));
    found
}

/// Gives a diagnostic of the loader the severity and reason of the rule that it is about.
pub fn adopt(mut diagnostic: Diagnostic, rules: &[&Rule]) -> Option<Diagnostic> {
    let rule = rules.iter().find(|rule| rule.id == diagnostic.code)?;
    diagnostic.severity = rule.severity;
    diagnostic.cite = rule.cite.clone();
    diagnostic.finding = Some(Box::new(finding("", &diagnostic.label, 1)));
    Some(diagnostic)
}

fn of_oddity(design: &Design<'_>, oddity: &Oddity, rules: &[&Rule]) -> Option<Diagnostic> {
    match oddity {
        Oddity::UnknownModel { model, span, cell, device, statements, near } => {
            let uses = if *statements == 1 { String::new() } else { format!(" and {} more", statements - 1) };
            let values = [("model", design.names.text(*model).to_owned()), ("name", device.clone()), ("others", uses)];
            let made =
                make(rules, "unknown-model", *span, &values, finding(design.cell_name(*cell), device, *statements))?;
            Some(match near {
                Some(near) => made.with_help(format!("did you mean `{near}`?")),
                None => made,
            })
        }
        Oddity::PinCount { span, model_span, cell, device, model, has, needs, defined } => {
            let (found, wanted, pins) = (has.to_string(), needs.len().to_string(), needs.join(" "));
            let values = [
                ("name", device.clone()),
                ("found", found),
                ("class", model.clone()),
                ("wanted", wanted),
                ("pins", pins),
            ];
            let made = make(rules, "pin-count", *span, &values, finding(design.cell_name(*cell), device, 1))?;
            Some(
                made.with_place(*model_span, format!("needs {}", needs.join(" ")))
                    .with_place(*defined, "declared here"),
            )
        }
    }
}

fn finding(cell: &str, device: &str, instances: u64) -> Finding {
    Finding {
        verdict: Verdict::Violated,
        cell: cell.to_owned(),
        device: device.to_owned(),
        instances,
        worst: Worst { path: device.to_owned(), ..Worst::default() },
        paths: vec![device.to_owned()],
        paths_complete: true,
        nets: BTreeMap::new(),
        pairs: Vec::new(),
        modes: Vec::new(),
    }
}

/// The words of a finding about the run, by name.
struct Words<'v>(&'v [(&'static str, String)]);

impl Scope for Words<'_> {
    fn name(&self, name: &str) -> Value {
        self.0.iter().find(|(key, _)| *key == name).map_or(Value::Unknown, |(_, value)| Value::Text(value.clone()))
    }

    fn call(&self, _: &str, _: &[Arg<'_>]) -> Option<Value> {
        None
    }
}

/// A diagnostic of a rule about the run, in the words of its page; none where that rule is not in force.
fn make(
    rules: &[&Rule],
    id: &str,
    span: Span,
    values: &[(&'static str, String)],
    finding: Finding,
) -> Option<Diagnostic> {
    let rule = rules.iter().find(|rule| rule.id == id)?;
    let words = Words(values);
    let mut made = Diagnostic::new(id, rule.severity, span, rule.say.fill(&words));
    made.label = rule.point.first().map(|(_, point)| point.fill(&words)).unwrap_or_default();
    made.help = rule.help.as_ref().map(|help| help.fill(&words));
    made.cite = rule.cite.clone();
    made.finding = Some(Box::new(finding));
    Some(made)
}

fn no_high_voltage(
    design: &Design<'_>,
    contexts: &Contexts,
    deck: &Deck,
    rules: &[&Rule],
    devices: u64,
) -> Option<Diagnostic> {
    let high = |class: u32| deck.classes[class as usize].high_voltage;
    let occurs = contexts.all.iter().any(|context| {
        let template = design.template(context.variant);
        template.types.iter().any(|kind| design.types[kind.0 as usize].class.is_some_and(high))
    });
    if occurs || design.tops.is_empty() {
        return None;
    }
    let cell = design.template(*design.tops.first()?).cell?;
    let span = design.tree.cells[cell.0 as usize].name.span;
    make(rules, "no-high-voltage", span, &[("devices", devices.to_string())], finding("", "", 0))
}

/// Rails of the block's own decks that name no net.
pub fn rails_unmatched(design: &Design<'_>, contexts: &Contexts, deck: &Deck, rules: &[&Rule]) -> Vec<Diagnostic> {
    if design.tops.is_empty() {
        return Vec::new();
    }
    let own = |span: Span| deck.own_files.contains(&span.file);
    let unmatched = all_rails(deck).filter(|(slot, rail)| own(rail.place) && !contexts.marks.is_matched(*slot));
    let nets: Vec<&str> = design
        .tops
        .iter()
        .flat_map(|&top| design.template(top).nets.iter().take(5000).map(|&net| design.names.text(net)))
        .collect();
    let made = unmatched.filter_map(|(_, rail)| {
        let name = rail.net.text();
        let near =
            nearest(name, nets.iter().copied()).map_or(String::new(), |near| format!("; did you mean `{near}`?"));
        make(rules, "rail-unmatched", rail.place, &[("name", name.to_owned()), ("near", near)], finding("", name, 1))
    });
    made.collect()
}

/// Waivers that hide nothing, and those past their date.
pub fn waivers(complaints: Vec<waiver::Complaint>, rules: &[&Rule]) -> Vec<Diagnostic> {
    let made = complaints.into_iter().filter_map(|complaint| {
        let id = match complaint.kind {
            waiver::Fault::Stale => "waiver-stale",
            waiver::Fault::Expired => "waiver-expired",
        };
        let waiver = complaint.waiver;
        let until = waiver.until.map_or(String::new(), |date| date.to_string());
        let at = waiver.shown_at().to_owned();
        let values =
            [("rule", waiver.rule.clone()), ("at", at.clone()), ("until", until), ("reason", waiver.reason.clone())];
        let mut made = make(rules, id, waiver.place, &values, finding("", &at, 1))?;
        if complaint.hint.is_some() {
            made.help = complaint.hint;
        } else if complaint.kind == waiver::Fault::Stale && waiver.in_comment() {
            made.help = Some("take this comment out, or put it at the card that it is meant for".to_owned());
        }
        Some(made)
    });
    made.collect()
}
