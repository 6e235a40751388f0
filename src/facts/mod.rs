//! What rules can ask: a read-only view of one subject in its surroundings, and the vocabulary of names for it.
//!
//! Facts are computed below, rules only ask. Each view answers by the one table in [`vocabulary`], which the deck checker,
//! the evaluator, suggestions and the reference page read as well. While it answers it notes its evidence: which pins or
//! pairs were concerned, and why something is unknown.

mod class;
mod device;
mod evidence;
mod gates;
mod glance;
mod group;
mod instance;
mod net;
mod orientation;
mod overlap;
mod part;
mod place;
pub mod ratings;
mod ties;
pub mod vocabulary;

pub use class::ClassView;
pub use device::DeviceView;
pub use evidence::Evidence;
pub use glance::{Cells, Glance, Question, Shape, Truth, question};
pub use group::{GroupView, MIRROR, PAIR};
pub use instance::InstanceView;
pub use net::NetView;
pub use part::ROLES;

use crate::declared::Deck;
use crate::design::{Design, NetIx};
use crate::graph::{Context, Contexts, Mark};
use crate::reach::{Reach, ReachIx};
use crate::roles::Roles;

/// Everything that was computed about a design.
#[derive(Clone, Copy)]
pub struct World<'w> {
    /// What the decks declare.
    pub deck: &'w Deck,
    /// The elaborated design.
    pub design: &'w Design<'w>,
    /// Where its cells occur.
    pub contexts: &'w Contexts,
    /// Which voltages its nets can have.
    pub reach: &'w Reach<'w>,
    /// What its devices do there, asked on demand.
    pub roles: &'w Roles<'w>,
}

impl<'w> World<'w> {
    /// The structural context of a reach context.
    pub fn context(&self, at: ReachIx) -> &'w Context {
        self.contexts.get(self.reach.get(at).context)
    }

    /// What a net is known as from outside.
    pub fn marks_of(&self, at: ReachIx, net: NetIx) -> &'w [Mark] {
        self.contexts.marks_of(self.reach.get(at).context, net)
    }
}
