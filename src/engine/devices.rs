//! Rules for devices.

use super::finding;
use super::fold::Folds;
use super::verdict::{Asked, ask};
use crate::declared::{Class, Rule, Subject};
use crate::design::DeviceIx;
use crate::diag::Diagnostic;
use crate::expr::{Arg, Scope, Value, evaluate};
use crate::facts::{DeviceView, Evidence, World, vocabulary};
use crate::reach::ReachIx;
use crate::source::Span;

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
pub(super) fn judge(world: World<'_>, rules: &[&Rule]) -> Vec<Diagnostic> {
    let by_class: Vec<Vec<u32>> = world.deck.classes.iter().map(|class| rules_for(class, rules)).collect();
    let mut folds: Folds<(ReachIx, DeviceIx)> = Folds::new();
    for at in world.reach.indices() {
        let (context, count) = (world.context(at), world.reach.get(at).count);
        let template = world.design.template(context.variant);
        for device in template.devices() {
            let Some(class) = world.design.device_type(template, device).class else { continue };
            let asked = &by_class[class as usize];
            if asked.is_empty() {
                continue;
            }
            let view = DeviceView::new(world, at, device, &world.deck.classes[class as usize]);
            for &rule in asked {
                if let Some((verdict, evidence)) = ask(rules[rule as usize], &view) {
                    let (file, start) = template.device_card(device);
                    let statement = (rule, verdict, Span::new(file, start, start));
                    folds.add(statement, at, count, (at, device), evidence);
                }
            }
        }
    }
    folds.all.into_iter().map(|folded| finding::of_device(world, rules, folded)).collect()
}

/// The rules that can apply to a class at all: those whose `where` is not false whatever the instance is.
fn rules_for(class: &Class, rules: &[&Rule]) -> Vec<u32> {
    let may = |rule: &Rule| match &rule.applies {
        Some(applies) => {
            let scope = ClassOnly { class, undeclared: std::cell::Cell::new(false) };
            evaluate(applies, &scope) != Value::Bool(false) && !scope.undeclared.get()
        }
        None => true,
    };
    let found = rules.iter().enumerate().filter(|(_, rule)| rule.subject == Subject::Device && may(rule));
    found.map(|(index, _)| index as u32).collect()
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
