//! From a folded result to a diagnostic: its words, places and values, made for the worst instance.

use super::fold::Folded;
use super::verdict::{Asked, ask};
use crate::declared::Rule;
use crate::design::DeviceIx;
use crate::diag::{Diagnostic, Finding, Label, Verdict, Worst};
use crate::expr::{Arg, Scope, Template, Value};
use crate::facts::{DeviceView, Evidence, World};
use crate::reach::ReachIx;
use crate::roles::Standing;
use crate::source::Span;
use std::collections::BTreeMap;

/// At most this many instance paths are kept with a finding, for waivers.
const MOST_PATHS: usize = 1000;

/// Words a finding about a device.
pub(super) fn of_device(world: World<'_>, rules: &[&Rule], folded: Folded<(ReachIx, DeviceIx)>) -> Diagnostic {
    let (rule, verdict, statement) = folded.statement;
    let rule = rules[rule as usize];
    let ((at, device), brief) = &folded.worst;
    let template = world.design.template(world.context(*at).variant);
    let Some(class) = world.design.class(template, *device) else {
        return Diagnostic::new(rule.id.clone(), rule.severity, statement, rule.title.clone());
    };
    let view = DeviceView::seen_from(world, *at, *device, class, brief.standing.as_ref());
    let evidence = &ask(rule, &view).map_or_else(|| brief.clone(), |(_, evidence)| evidence);
    let nets = class.pins.iter().enumerate().map(|(pin, name)| (name.clone(), view.net_text(pin).to_owned())).collect();
    let mut finding = Finding { nets, ..in_cell(world, rules, *at, view.name(), &folded, evidence) };
    finding.worst.path = view.path();
    word(rule, verdict, &view, evidence, finding, statement)
}

/// The parts of a finding about something that stands in a cell.
pub(super) fn in_cell<S>(
    world: World<'_>,
    rules: &[&Rule],
    at: ReachIx,
    name: &str,
    folded: &Folded<S>,
    evidence: &Evidence,
) -> Finding {
    let above = world.reach.path(at);
    let path = if above.is_empty() { name.to_owned() } else { format!("{above}.{name}") };
    let cell = world.design.template(world.context(at).variant).cell;
    let id = &rules[folded.statement.0 as usize].id;
    // Only waivers read the list of paths, and making it is what a finding costs most.
    let (paths, paths_complete) = match world.deck.waivers.iter().any(|waiver| waiver.rule == *id) {
        true => paths(world, &folded.places, name),
        false => (vec![path.clone()], folded.instances <= 1),
    };
    Finding {
        verdict: folded.statement.1,
        cell: cell.map_or("", |cell| world.design.cell_name(cell)).to_owned(),
        device: name.to_owned(),
        instances: folded.instances,
        worst: Worst { path, mode: evidence.mode.clone(), values: evidence.values.clone() },
        paths,
        paths_complete,
        nets: BTreeMap::new(),
        pairs: folded.pairs.clone(),
        modes: evidence.modes.clone(),
    }
}

/// Paths of the concerned instances, as far as they are listed.
fn paths(world: World<'_>, places: &[Standing], name: &str) -> (Vec<String>, bool) {
    let mut all = Vec::new();
    let mut complete = true;
    for place in places {
        let (found, whole) = world.reach.paths(place.anchor, MOST_PATHS - all.len());
        complete &= whole;
        let below = world.reach.path_down(place.anchor, &place.path);
        let path = |above: String| {
            let parts = [above.as_str(), below.as_str(), name];
            parts.into_iter().filter(|part| !part.is_empty()).collect::<Vec<_>>().join(".")
        };
        all.extend(found.into_iter().map(path));
    }
    (all, complete)
}

/// Makes the diagnostic from the rule's page.
pub(super) fn word(
    rule: &Rule,
    verdict: Verdict,
    subject: &impl Asked,
    evidence: &Evidence,
    finding: Finding,
    statement: Span,
) -> Diagnostic {
    let scope = Noted { subject, evidence };
    let (severity, message, help) = match verdict {
        Verdict::Violated => (rule.severity, rule.say.fill(&scope), rule.help.as_ref().map(|help| help.fill(&scope))),
        Verdict::Unproven => (rule.unproven, unproven(rule, &scope), settle(rule, &scope)),
    };
    let mut labels = points(rule, verdict, subject, &scope);
    labels.extend(evidence.places.iter().map(|(span, text)| Label { span: *span, text: text.clone() }));
    let own = if labels.is_empty() { None } else { Some(labels.remove(0)) };
    let span = own.as_ref().map(|label| label.span).or_else(|| subject.place("name")).unwrap_or(statement);
    let mut diagnostic = Diagnostic::new(rule.id.clone(), severity, span, message);
    diagnostic.label = own.map(|label| label.text).unwrap_or_default();
    diagnostic.labels = labels;
    let step = |(span, text): &(Span, String)| Label { span: *span, text: text.clone() };
    diagnostic.chains = evidence.chains.iter().map(|chain| chain.iter().map(step).collect()).collect();
    diagnostic.help = help.filter(|help| !help.is_empty());
    diagnostic.cite = rule.cite.clone();
    diagnostic.finding = Some(Box::new(finding));
    subject.notes();
    diagnostic
}

fn unproven(rule: &Rule, scope: &Noted<'_, impl Asked>) -> String {
    match &rule.say_unproven {
        Some(say) => say.fill(scope),
        None => format!("cannot tell whether this holds: {}", rule.title),
    }
}

/// What to declare: the rule's own words, else the reasons noted.
fn settle(rule: &Rule, scope: &Noted<'_, impl Asked>) -> Option<String> {
    let why = scope.evidence.why.join("; ");
    let settle = rule.settle.as_ref().map(|settle| settle.fill(scope)).unwrap_or_default();
    match (why.is_empty(), settle.is_empty()) {
        (true, _) => Some(settle),
        (false, true) => Some(why),
        (false, false) => Some(format!("{why}: {settle}")),
    }
}

/// Labels at the places of the card that the rule points at; the first is the finding's own.
fn points(rule: &Rule, verdict: Verdict, subject: &impl Asked, scope: &Noted<'_, impl Asked>) -> Vec<Label> {
    let mut labels: Vec<Label> = Vec::new();
    for (key, template) in &rule.point {
        if key == "pins" {
            for (span, pin, net) in subject.pin_places(scope.evidence) {
                labels.push(Label { span, text: template.fill(&AtPin { inner: scope, pin, net }) });
            }
        } else if let Some(span) = subject.place(key)
            && !labels.iter().any(|label| label.span == span)
        {
            labels.push(Label {
                span,
                text: if verdict == Verdict::Violated { template.fill(scope) } else { unproven_label(template, scope) },
            });
        }
    }
    labels
}

/// A label's words where something is unknown: left out if they would only say so.
fn unproven_label(template: &Template, scope: &impl Scope) -> String {
    let text = template.fill(scope);
    if text.contains("unknown") { String::new() } else { text }
}

/// The subject's names, and those of the notes.
struct Noted<'n, S> {
    subject: &'n S,
    evidence: &'n Evidence,
}

impl<S: Asked> Scope for Noted<'_, S> {
    fn name(&self, name: &str) -> Value {
        match name {
            "why" => Value::Text(self.evidence.why.join("; ")),
            "pairs" => Value::Text(self.evidence.pairs.join(", ")),
            _ => match self.evidence.values.iter().find(|(key, _)| key == name) {
                Some((_, value)) => Value::Text(value.clone()),
                None => self.subject.name(name),
            },
        }
    }

    fn call(&self, name: &str, args: &[Arg<'_>]) -> Option<Value> {
        self.subject.call(name, args)
    }
}

/// The same at one concerned pin.
struct AtPin<'n, S> {
    inner: &'n S,
    pin: String,
    net: String,
}

impl<S: Scope> Scope for AtPin<'_, S> {
    fn name(&self, name: &str) -> Value {
        match name {
            "pin" => Value::Text(self.pin.clone()),
            "net" => Value::Text(self.net.clone()),
            _ => self.inner.name(name),
        }
    }

    fn call(&self, name: &str, args: &[Arg<'_>]) -> Option<Value> {
        self.inner.call(name, args)
    }
}
