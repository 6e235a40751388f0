//! Rules for nets, instance calls and classes.

use super::finding::{in_cell, word};
use super::fold::{Folded, Folds};
use super::verdict::{Asked, ask};
use crate::declared::{Class, Rule, Subject};
use crate::design::{InstanceIx, NetIx};
use crate::diag::{Diagnostic, Finding, Worst};
use crate::facts::{ClassView, Evidence, InstanceView, NetView, World};
use crate::reach::ReachIx;
use crate::roles::Standing;
use crate::source::Span;
use std::collections::BTreeMap;

/// Asks the rules for nets, instances and classes.
pub(super) fn judge(world: World<'_>, rules: &[&Rule]) -> Vec<Diagnostic> {
    let of = |subject: Subject| of_subject(rules, subject);
    let mut findings = Vec::new();
    let (nets, instances, classes) = (of(Subject::Net), of(Subject::Instance), of(Subject::Class));
    if !nets.is_empty() {
        findings.extend(judge_nets(world, rules, &nets));
    }
    if !instances.is_empty() {
        findings.extend(judge_instances(world, rules, &instances));
    }
    findings.extend(judge_classes(world, rules, &classes));
    findings
}

/// The rules for one subject, by index.
pub(super) fn of_subject(rules: &[&Rule], subject: Subject) -> Vec<u32> {
    rules.iter().enumerate().filter(|(_, rule)| rule.subject == subject).map(|(index, _)| index as u32).collect()
}

fn judge_nets(world: World<'_>, rules: &[&Rule], asked: &[u32]) -> Vec<Diagnostic> {
    let mut folds: Folds<(ReachIx, NetIx)> = Folds::new();
    for at in world.reach.indices() {
        let (context, count) = (world.context(at), world.reach.get(at).count);
        let template = world.design.template(context.variant);
        let inner = if context.parents.is_empty() { 0 } else { template.ports };
        for net in (inner..template.nets.len() as u32).map(NetIx).filter(|&net| context.root(net) == net) {
            let view = NetView::new(world, at, net);
            for &rule in asked {
                if let (Some((verdict, evidence)), Some(place)) =
                    (ask(rules[rule as usize], &view), Asked::place(&view, "name"))
                {
                    folds.add(
                        (rule, verdict, place),
                        Standing { anchor: at, path: Vec::new() },
                        count,
                        (at, net),
                        evidence,
                    );
                }
            }
        }
    }
    folds.all.into_iter().map(|folded| of_net(world, rules, folded)).collect()
}

fn of_net(world: World<'_>, rules: &[&Rule], folded: Folded<(ReachIx, NetIx)>) -> Diagnostic {
    let (at, net) = folded.worst.0;
    let view = NetView::new(world, at, net);
    let finding = in_cell(world, rules, at, view.name(), &folded, &folded.worst.1);
    let (rule, verdict, statement) = folded.statement;
    word(rules[rule as usize], verdict, &view, &folded.worst.1, finding, statement)
}

fn judge_instances(world: World<'_>, rules: &[&Rule], asked: &[u32]) -> Vec<Diagnostic> {
    let mut folds: Folds<(ReachIx, InstanceIx)> = Folds::new();
    for at in world.reach.indices() {
        let (context, count) = (world.context(at), world.reach.get(at).count);
        let template = world.design.template(context.variant);
        for instance in template.instance_indices() {
            let view = InstanceView::new(world, at, instance);
            for &rule in asked {
                if let Some((verdict, evidence)) = ask(rules[rule as usize], &view) {
                    let card = &template.instances[instance.0 as usize];
                    let statement = (rule, verdict, Span::new(card.file, card.card, card.card));
                    folds.add(statement, Standing { anchor: at, path: Vec::new() }, count, (at, instance), evidence);
                }
            }
        }
    }
    folds.all.into_iter().map(|folded| of_instance(world, rules, folded)).collect()
}

fn of_instance(world: World<'_>, rules: &[&Rule], folded: Folded<(ReachIx, InstanceIx)>) -> Diagnostic {
    let (at, instance) = folded.worst.0;
    let view = InstanceView::new(world, at, instance);
    let finding = in_cell(world, rules, at, view.name(), &folded, &folded.worst.1);
    let (rule, verdict, statement) = folded.statement;
    word(rules[rule as usize], verdict, &view, &folded.worst.1, finding, statement)
}

fn judge_classes(world: World<'_>, rules: &[&Rule], asked: &[u32]) -> Vec<Diagnostic> {
    let mut findings = Vec::new();
    for class in used_classes(world) {
        let view = ClassView::new(class);
        for &rule in asked {
            if let Some((verdict, evidence)) = ask(rules[rule as usize], &view) {
                let finding = Finding {
                    verdict,
                    cell: String::new(),
                    device: class.name.clone(),
                    instances: 1,
                    worst: Worst { path: class.name.clone(), mode: None, values: evidence.values.clone() },
                    paths: vec![class.name.clone()],
                    paths_complete: true,
                    nets: BTreeMap::new(),
                    pairs: evidence.pairs.clone(),
                    modes: Vec::new(),
                };
                findings.push(word(rules[rule as usize], verdict, &view, &evidence, finding, class.place));
            }
        }
    }
    findings
}

/// The classes that some device of the design has: a library's other classes are nobody's concern here.
fn used_classes(world: World<'_>) -> Vec<&Class> {
    let mut used: Vec<u32> = world.design.types.iter().filter_map(|kind| kind.class).collect();
    used.sort_unstable();
    used.dedup();
    used.into_iter().map(|class| &world.deck.classes[class as usize]).collect()
}

impl Asked for NetView<'_> {
    fn notes(&self) -> Evidence {
        self.take_evidence()
    }

    /// A net stands where its cell names it as a port, else on the first card that touches it.
    fn place(&self, key: &str) -> Option<Span> {
        if key != "name" {
            return None;
        }
        self.first_place()
    }

    fn pin_places(&self, _: &Evidence) -> Vec<(Span, String, String)> {
        Vec::new()
    }
}

impl Asked for InstanceView<'_> {
    fn notes(&self) -> Evidence {
        self.take_evidence()
    }

    fn place(&self, key: &str) -> Option<Span> {
        let card = self.card();
        match key {
            "name" => card.fields.words.first().map(|word| word.span(card.file)),
            "card" => Some(card.span()),
            "model" => card
                .fields
                .after_slash
                .and_then(|at| card.fields.words.get(at))
                .or(card.fields.words.last())
                .map(|word| word.span(card.file)),
            param => card.param_span(param),
        }
    }

    fn pin_places(&self, _: &Evidence) -> Vec<(Span, String, String)> {
        Vec::new()
    }
}

impl Asked for ClassView<'_> {
    fn notes(&self) -> Evidence {
        self.take_evidence()
    }

    fn place(&self, key: &str) -> Option<Span> {
        match key {
            "name" => Some(self.class.place),
            "rating.vds" => self.rating_place(),
            _ => None,
        }
    }

    fn pin_places(&self, _: &Evidence) -> Vec<(Span, String, String)> {
        Vec::new()
    }
}
