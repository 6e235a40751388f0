//! One call of a cell.

use super::{Evidence, World};
use crate::design::{Card, InstanceIx};
use crate::expr::Value;
use crate::quantity::Dim;
use crate::reach::ReachIx;
use std::cell::{OnceCell, RefCell};

/// An instance statement, as rules see it.
pub struct InstanceView<'w> {
    /// Everything that is known.
    pub world: World<'w>,
    /// The context of the cell that holds the statement.
    pub at: ReachIx,
    /// The statement.
    pub instance: InstanceIx,
    card: OnceCell<Card<'w>>,
    evidence: RefCell<Evidence>,
}

impl<'w> InstanceView<'w> {
    /// Looks at an instance.
    pub fn new(world: World<'w>, at: ReachIx, instance: InstanceIx) -> InstanceView<'w> {
        InstanceView { world, at, instance, card: OnceCell::new(), evidence: RefCell::default() }
    }

    /// Its own name, as written.
    pub fn name(&self) -> &'w str {
        let template = self.world.design.template(self.world.context(self.at).variant);
        self.world.design.instance_name(template, self.instance)
    }

    /// The name of the cell it calls.
    pub fn cell(&self) -> &'w str {
        let template = self.world.design.template(self.world.context(self.at).variant);
        self.world.design.cell_name(template.instances[self.instance.0 as usize].cell)
    }

    /// Its card.
    pub fn card(&self) -> &Card<'w> {
        self.card.get_or_init(|| {
            let template = self.world.design.template(self.world.context(self.at).variant);
            let instance = &template.instances[self.instance.0 as usize];
            self.world.design.card(instance.file, instance.card)
        })
    }

    /// A parameter of its card.
    pub(super) fn param(&self, name: &str) -> Value {
        let variant = self.world.context(self.at).variant;
        match self.world.design.parameter(variant, self.card(), name) {
            Some(Ok(value)) => Value::Number { value, dim: Dim::NONE },
            Some(Err(trouble)) => self.unknown(trouble.message),
            None => self.unknown(format!("the card does not give `{name}`")),
        }
    }

    fn unknown(&self, why: String) -> Value {
        self.evidence.borrow_mut().unknown(why);
        Value::Unknown
    }

    /// Takes the notes made so far.
    pub fn take_evidence(&self) -> Evidence {
        self.evidence.take()
    }
}
