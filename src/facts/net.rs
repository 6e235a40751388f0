//! One net of one cell in its surroundings.

use super::{Evidence, World};
use crate::design::NetIx;
use crate::expr::Value;
use crate::graph::Mark;
use crate::quantity::Dim;
use crate::reach::ReachIx;
use crate::source::Span;
use std::cell::RefCell;

/// A net, as rules see it.
pub struct NetView<'w> {
    /// Everything that is known.
    pub world: World<'w>,
    /// The context of its cell.
    pub at: ReachIx,
    /// The net in its cell.
    pub net: NetIx,
    evidence: RefCell<Evidence>,
}

impl<'w> NetView<'w> {
    /// Looks at a net.
    pub fn new(world: World<'w>, at: ReachIx, net: NetIx) -> NetView<'w> {
        NetView { world, at, net, evidence: RefCell::default() }
    }

    /// Its name in its cell.
    pub fn name(&self) -> &'w str {
        let template = self.world.design.template(self.world.context(self.at).variant);
        self.world.design.net_name(template, self.net)
    }

    /// Whether it is a declared rail.
    pub fn is_rail(&self) -> bool {
        self.world.marks_of(self.at, self.net).iter().any(|mark| matches!(mark, Mark::Rail(_)))
    }

    /// Whether it is a port of its cell.
    pub fn is_port(&self) -> bool {
        let template = self.world.design.template(self.world.context(self.at).variant);
        self.net.0 < template.ports
    }

    /// Its highest or lowest voltage against ground, in any mode.
    pub(super) fn extreme(&self, highest: bool) -> Value {
        let reach = self.world.reach;
        let ranges = (0..reach.modes.len()).map(|mode| reach.of(self.at, mode, self.net, 0));
        let end = match highest {
            true => ranges.map(|range| range.hi).fold(f64::NEG_INFINITY, f64::max),
            false => ranges.map(|range| range.lo).fold(f64::INFINITY, f64::min),
        };
        if end.is_finite() {
            return Value::Number { value: end, dim: Dim::VOLT };
        }
        let why = (0..reach.modes.len()).find_map(|mode| reach.unknown(self.at, mode, self.net));
        self.evidence.borrow_mut().unknown(why.map_or("its voltage is not known", |why| why.words()));
        Value::Unknown
    }

    /// Where the net stands first: as a port of its cell, else on the first card that touches it.
    pub fn first_place(&self) -> Option<Span> {
        let (design, context) = (self.world.design, self.world.context(self.at));
        let template = design.template(context.variant);
        if self.is_port() {
            let cell = &design.tree.cells[template.cell?.0 as usize];
            return cell.ports.get(self.net.0 as usize).map(|port| port.span);
        }
        let touches = |device: &crate::design::DeviceIx| {
            template.device_pins(*device).iter().any(|&net| context.same(net, self.net))
        };
        let card = match template.devices().find(touches) {
            Some(device) => design.device_card(context.variant, device),
            None => {
                let instance = template
                    .instance_indices()
                    .find(|&i| template.instance_pins(i).iter().any(|&net| context.same(net, self.net)))?;
                let instance = &template.instances[instance.0 as usize];
                design.card(instance.file, instance.card)
            }
        };
        let word = card.fields.words.iter().skip(1).find(|word| word.of(card.text).eq_ignore_ascii_case(self.name()));
        Some(word.map_or(card.span(), |word| word.span(card.file)))
    }

    /// Takes the notes made so far.
    pub fn take_evidence(&self) -> Evidence {
        self.evidence.take()
    }
}
