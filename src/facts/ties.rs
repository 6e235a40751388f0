//! Ties: the nets that a body or a pocket may share, and whether it does.

use super::DeviceView;
use crate::declared::{Tie, TieTarget};
use crate::graph::Mark;

impl DeviceView<'_> {
    /// Whether a pin shares its net with one of the tie's targets, through drawn shorts too.
    pub(super) fn holds(&self, tie: &Tie) -> bool {
        tie.targets.iter().any(|target| match target {
            TieTarget::Pin(other) => self.same_net(tie.pin, *other),
            TieTarget::Net(name) => self.is_on_net(tie.pin, name),
        })
    }

    /// Whether the body's tie holds; notes the body where it does not.
    pub(super) fn body_held(&self, tie: &Tie) -> bool {
        let held = self.holds(tie);
        if !held {
            self.concern(tie.pin);
        }
        held
    }

    fn same_net(&self, pin: usize, other: usize) -> bool {
        match (self.net(pin), self.net(other)) {
            (Some(a), Some(b)) => self.context().same(a, b),
            _ => false,
        }
    }

    /// Whether a pin stands on the net of this name: as the top knows it, or under a rail pattern written so.
    fn is_on_net(&self, pin: usize, name: &str) -> bool {
        let Some(net) = self.net(pin) else { return false };
        let wanted = self.world.contexts.marks.named(name);
        self.world.marks_of(self.at, net).iter().any(|&mark| match mark {
            Mark::Named(_) => Some(mark) == wanted,
            Mark::Rail(slot) => crate::graph::rail(self.world.deck, slot).net.text().eq_ignore_ascii_case(name),
        })
    }

    /// The targets of a tie in words: `s`, or `d or VIN`.
    pub(super) fn tie_words(&self, tie: &Tie) -> String {
        let names = tie.targets.iter().map(|target| match target {
            TieTarget::Pin(pin) => self.class.pins.get(*pin).cloned().unwrap_or_default(),
            TieTarget::Net(name) => name.clone(),
        });
        names.collect::<Vec<_>>().join(" or ")
    }

    /// Whether all ties of pins other than the body hold; notes those that do not.
    pub(super) fn ties_held(&self) -> bool {
        let failing: Vec<&Tie> = self.class.ties.iter().filter(|tie| !self.holds(tie)).collect();
        for tie in &failing {
            self.concern(tie.pin);
        }
        failing.is_empty()
    }

    /// The ties that do not hold, in words: `iso on VSS (may stand on d or VIN)`.
    pub(super) fn off_ties(&self) -> String {
        let failing = self.class.ties.iter().filter(|tie| !self.holds(tie));
        let words = failing.map(|tie| {
            let pin = self.class.pins.get(tie.pin).map_or("", String::as_str);
            format!("{pin} on {} (may stand on {})", self.net_text(tie.pin), self.tie_words(tie))
        });
        words.collect::<Vec<_>>().join(", ")
    }
}
