//! Rules for mirrors and pairs: one subject for each output of a mirror, one for each pair.

use super::finding::{in_cell, word};
use super::fold::{Folded, Folds};
use super::verdict::{Asked, ask};
use crate::declared::{Kind, Rule, Subject};
use crate::design::DeviceIx;
use crate::diag::Diagnostic;
use crate::facts::{DeviceView, Evidence, GroupView, World};
use crate::reach::ReachIx;
use crate::source::Span;
use std::rc::Rc;

/// Asks the rules of one of these subjects.
pub(super) fn judge(world: World<'_>, rules: &[&Rule], subject: Subject, asked: &[u32]) -> Vec<Diagnostic> {
    let mut folds: Folds<(ReachIx, DeviceIx)> = Folds::new();
    let walks = Rc::default();
    for at in world.reach.indices() {
        let template = world.design.template(world.context(at).variant);
        for device in template.devices() {
            let kind = world.design.device_type(template, device);
            let Some(class) = kind.class.filter(|_| kind.element.is_mos()) else { continue };
            let class = &world.deck.classes[class as usize];
            if !may_be(world, at, device, subject) {
                continue;
            }
            let mut view = DeviceView::for_verdict(world, at, device, class).sharing(&walks);
            loop {
                view = match group(subject, view) {
                    Ok(group) => {
                        for &rule in asked {
                            let answer = ask(rules[rule as usize], &group).filter(|_| !group.main().must_look_above());
                            if let Some((verdict, mut evidence)) = answer {
                                let (file, start) = template.device_card(device);
                                let standing = group.main().standing().clone();
                                evidence.standing = Some(standing.clone());
                                let statement = (rule, verdict, Span::new(file, start, start));
                                folds.add(statement, standing, group.main().instances(), (at, device), evidence);
                            }
                        }
                        group.into_main()
                    }
                    Err(view) => *view,
                };
                if !view.next_surroundings() {
                    break;
                }
            }
        }
    }
    folds.all.into_iter().filter_map(|folded| of_group(world, rules, subject, folded)).collect()
}

/// Whether a glance leaves it possible that a device belongs to such a structure.
fn may_be(world: World<'_>, at: ReachIx, device: DeviceIx, subject: Subject) -> bool {
    let template = world.design.template(world.context(at).variant);
    let Some(class) = world.design.class(template, device) else { return false };
    let net = |pin: &str| class.pin(pin).and_then(|pin| template.device_pins(device).get(pin)).copied();
    let (context, n) = (world.reach.get(at).context, class.kind == Kind::Nmos);
    match subject {
        Subject::Mirror => net("g").is_some_and(|gate| world.roles.may_mirror(context, gate, n)),
        _ => [net("s"), net("d")].into_iter().flatten().any(|source| world.roles.may_pair(context, source, n)),
    }
}

fn group<'w>(subject: Subject, view: DeviceView<'w>) -> Result<GroupView<'w>, Box<DeviceView<'w>>> {
    match subject {
        Subject::Mirror => GroupView::mirror(view),
        _ => GroupView::pair(view),
    }
}

fn of_group(
    world: World<'_>,
    rules: &[&Rule],
    subject: Subject,
    folded: Folded<(ReachIx, DeviceIx)>,
) -> Option<Diagnostic> {
    let ((at, device), brief) = &folded.worst;
    let template = world.design.template(world.context(*at).variant);
    let class = world.design.class(template, *device)?;
    let view = DeviceView::seen_from(world, *at, *device, class, brief.standing.as_ref());
    let group = group(subject, view).ok()?;
    let main = group.main();
    let nets = class.pins.iter().enumerate().map(|(pin, name)| (name.clone(), main.net_text(pin).to_owned())).collect();
    let mut finding = in_cell(world, rules, *at, main.name(), &folded, brief);
    finding.nets = nets;
    finding.worst.path = main.path();
    let (rule, verdict, statement) = folded.statement;
    Some(word(rules[rule as usize], verdict, &group, brief, finding, statement))
}

impl Asked for GroupView<'_> {
    fn notes(&self) -> Evidence {
        self.take_evidence()
    }

    fn place(&self, key: &str) -> Option<Span> {
        self.place_of_member(key)
    }

    fn pin_places(&self, _: &Evidence) -> Vec<(Span, String, String)> {
        Vec::new()
    }
}
