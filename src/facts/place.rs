//! Where on a card something stands, for labels.

use super::DeviceView;
use crate::expr::{Expr, Node};
use crate::source::Span;

impl DeviceView<'_> {
    /// The place that a `point` key of a rule means: `name`, `model`, `size`, `width`, `length`, `fingers`, a pin's name;
    /// none where the card has no such place.
    pub fn place(&self, key: &str) -> Option<Span> {
        let card = self.card();
        let word = |at: usize| card.fields.words.get(at).map(|word| word.span(card.file));
        match key {
            "name" => word(0),
            "model" => self.model_place(),
            "card" => Some(card.span()),
            "size" => self.size_place(&[&self.class.size.width, &self.class.size.length, &self.class.size.fingers]),
            "width" => self.size_place(&[&self.class.size.width]),
            "length" => self.size_place(&[&self.class.size.length]),
            "fingers" => self.size_place(&[&self.class.size.fingers]),
            pin => self.pin_place(self.class.pin(pin)?),
        }
    }

    /// Where a pin's net stands on the card.
    pub fn pin_place(&self, pin: usize) -> Option<Span> {
        let card = self.card();
        let order = self.device_type().order.as_ref();
        let at = order.map_or(Some(pin), |order| order.get(pin).map(|&at| at as usize))?;
        let nets = self.design().template(self.context().variant).device_pins(self.device).len();
        if at == nets - 1 && card.fields.substrate.is_some() && card.fields.words.len() < nets + 2 {
            return card.fields.substrate.map(|word| word.span(card.file));
        }
        card.fields.words.get(at + 1).map(|word| word.span(card.file))
    }

    fn model_place(&self) -> Option<Span> {
        let card = self.card();
        let model = self.design().names.text(self.device_type().model?);
        let words = card.fields.bracket_model.iter().chain(card.fields.words.iter().rev());
        words.copied().find(|word| word.of(card.text).eq_ignore_ascii_case(model)).map(|word| word.span(card.file))
    }

    /// The parameters on the card that the size expressions use; the model where it has none of them.
    fn size_place(&self, expressions: &[&Option<Expr>]) -> Option<Span> {
        let card = self.card();
        let names = expressions.iter().copied().flatten().flat_map(|expr| &expr.nodes).filter_map(|node| match node {
            Node::Name(name) => Some(name),
            _ => None,
        });
        let spans = names.filter_map(|name| card.param_span(name));
        spans.reduce(Span::to).or_else(|| self.model_place())
    }
}
