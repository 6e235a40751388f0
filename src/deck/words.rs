//! Expressions and messages inside scalars: parsed, checked, and their faults given a place in the file.

use super::node::Node;
use super::value::Checker;
use crate::diag::Diagnostic;
use crate::expr::{Expr, Fault, Syntax, Template, Type, Vocabulary, check, parse};

impl Checker<'_> {
    /// An expression over the parameters of a card.
    pub(crate) fn size_expression(&mut self, node: &Node) -> Option<Expr> {
        let text = self.text(node)?;
        let parsed = parse(text, Syntax::Spice);
        self.or_fault(node, parsed)
    }

    /// A condition of a rule: what is no truth value is complained of.
    pub(crate) fn condition(&mut self, node: &Node, vocabulary: &dyn Vocabulary) -> Option<Expr> {
        let text = self.text(node)?;
        let parsed = parse(text, Syntax::Rule);
        let expr = self.or_fault(node, parsed)?;
        let checked = check(&expr, vocabulary);
        match self.or_fault(node, checked)? {
            Type::Bool => Some(expr),
            other => {
                let message = format!("a condition is needed here, which is true or false; this is {other}");
                self.error(node.span, message);
                None
            }
        }
    }

    /// A message with expressions in braces.
    pub(crate) fn template(&mut self, node: &Node, vocabulary: &dyn Vocabulary) -> Option<Template> {
        let text = self.text(node)?;
        let parsed = Template::parse(text, vocabulary);
        self.or_fault(node, parsed)
    }

    fn or_fault<T>(&mut self, node: &Node, result: Result<T, Fault>) -> Option<T> {
        match result {
            Ok(value) => Some(value),
            Err(fault) => {
                let place = self.part(node, fault.place.start as usize..fault.place.end as usize);
                let error = Diagnostic::error("deck", place, fault.message);
                self.complaints.push(match fault.help {
                    Some(help) => error.with_help(help),
                    None => error,
                });
                None
            }
        }
    }
}
