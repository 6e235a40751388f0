//! Rules for devices.

use super::finding;
use super::fold::Folds;
use super::quick::{Quick, Seen};
use super::verdict::{Asked, ask};
use crate::declared::{Class, Rule, Subject};
use crate::design::DeviceIx;
use crate::diag::{Diagnostic, Verdict};
use crate::expr::{Arg, Expr, Node, Scope, Value, evaluate, specialise};
use crate::facts::{Cells, DeviceView, Evidence, Shape, World, vocabulary};
use crate::reach::ReachIx;
use crate::source::Span;
use std::rc::Rc;

impl Asked for DeviceView<'_> {
    fn notes(&self) -> Evidence {
        self.take_evidence()
    }

    fn place(&self, key: &str) -> Option<Span> {
        DeviceView::place(self, key)
    }

    fn pin_places(&self, evidence: &Evidence) -> Vec<(Span, String, String)> {
        let place = |&pin: &usize| {
            self.pin_place(pin).map(|span| (span, self.class.pins[pin].clone(), self.net_text(pin).to_owned()))
        };
        evidence.pins.iter().filter_map(place).collect()
    }
}

/// Asks the device rules of every device in every context.
pub(super) fn judge(world: World<'_>, rules: &[&Rule]) -> (Vec<Diagnostic>, Vec<(u32, Verdict, u64)>) {
    let by_class: Vec<(Shape<'_>, Vec<Ready>)> =
        world.deck.classes.iter().map(|class| (Shape::of(class), rules_for(class, rules))).collect();
    let mut folds: Folds<(ReachIx, DeviceIx)> = Folds::new();
    let walks = Rc::default();
    for at in world.reach.indices() {
        let (context, count) = (world.context(at), world.reach.get(at).count);
        let (template, around) = (world.design.template(context.variant), Cells::new(world, at));
        for device in template.devices() {
            let Some(class) = world.design.device_type(template, device).class else { continue };
            let (shape, asked) = &by_class[class as usize];
            if asked.is_empty() {
                continue;
            }
            let glance = around.glance(device, *shape);
            let mut view = None;
            for ready in asked {
                let seen = ready.quick.see(&glance);
                debug_assert!(
                    agrees(seen, &ready.page, &DeviceView::for_verdict(world, at, device, shape.class())),
                    "{} says {seen:?} of {} at a glance",
                    ready.page.id,
                    world.design.device_name(template, device)
                );
                if seen == Seen::Fine {
                    continue;
                }
                let (file, start) = template.device_card(device);
                let place = Span::new(file, start, start);
                if let Seen::Fails(verdict) = seen
                    && folds.beyond((ready.rule, verdict, place), count)
                {
                    continue;
                }
                let class = &world.deck.classes[class as usize];
                let view =
                    view.get_or_insert_with(|| DeviceView::for_verdict(world, at, device, class).sharing(&walks));
                loop {
                    let answer = ask(&ready.page, view).filter(|_| !view.must_look_above());
                    if let Some((verdict, mut evidence)) = answer {
                        evidence.standing = Some(view.standing().clone());
                        let (standing, instances) = (view.standing().clone(), view.instances());
                        folds.add((ready.rule, verdict, place), standing, instances, (at, device), evidence);
                    }
                    if !view.next_surroundings() {
                        break;
                    }
                }
            }
        }
    }
    let left_out = folds.left_out();
    (folds.all.into_iter().map(|folded| finding::of_device(world, rules, folded)).collect(), left_out)
}

/// Whether a glance says what the rule says when it is asked in full. Held in builds for tests.
fn agrees(seen: Seen, rule: &Rule, view: &DeviceView<'_>) -> bool {
    let verdict = ask(rule, view).map(|(verdict, _)| verdict);
    if view.must_look_above() {
        return true;
    }
    match seen {
        Seen::Fine => verdict.is_none(),
        Seen::Fails(expected) => verdict == Some(expected),
        Seen::Unsure => true,
    }
}

/// The rules that can apply to a class at all, those whose `where` is not false whatever the instance is; each with its
/// conditions made shorter by what the class decides.
fn rules_for(class: &Class, rules: &[&Rule]) -> Vec<Ready> {
    let devices = rules.iter().enumerate().filter(|(_, rule)| rule.subject == Subject::Device);
    let ready = |(index, rule): (usize, &&Rule)| {
        let page = for_class(class, rule)?;
        Some(Ready { rule: index as u32, quick: Quick::new(&page), page })
    };
    devices.filter_map(ready).collect()
}

/// A rule made ready for a class: its number, and its page with the conditions that are left.
struct Ready {
    rule: u32,
    quick: Quick,
    page: Rule,
}

fn for_class(class: &Class, rule: &Rule) -> Option<Rule> {
    let known = |expr: &Expr| {
        let scope = ClassOnly { class, undeclared: std::cell::Cell::new(false) };
        let value = evaluate(expr, &scope);
        if scope.undeclared.get() { Value::Unknown } else { value }
    };
    let mut own = rule.clone();
    if let Some(applies) = &rule.applies {
        let scope = ClassOnly { class, undeclared: std::cell::Cell::new(false) };
        if evaluate(applies, &scope) == Value::Bool(false) || scope.undeclared.get() {
            return None;
        }
        own.applies = Some(specialise(applies, &known))
            .filter(|short| !matches!(short.nodes.as_slice(), [Node::Name(name)] if name == "true"));
    }
    own.require = rule.require.as_ref().map(|require| specialise(require, &known));
    Some(own)
}

/// What is known of a device from its class alone; all else is unknown.
struct ClassOnly<'c> {
    class: &'c Class,
    undeclared: std::cell::Cell<bool>,
}

impl Scope for ClassOnly<'_> {
    fn name(&self, name: &str) -> Value {
        match vocabulary::class_attribute(self.class, name) {
            Some(Some(value)) => value,
            Some(None) => {
                self.undeclared.set(true);
                Value::Unknown
            }
            None => Value::Unknown,
        }
    }

    fn call(&self, name: &str, args: &[Arg<'_>]) -> Option<Value> {
        match name {
            "has" => Some(vocabulary::has(self.class, args)),
            _ => Some(Value::Unknown),
        }
    }
}
