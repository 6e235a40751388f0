//! Expressions and messages inside scalars: parsed, checked, and their faults given a place in the file.

use super::node::Node;
use super::value::Checker;
use crate::diag::Diagnostic;
use crate::expr::{Expr, Fault, Node as Operation, Piece, Syntax, Template, Type, Vocabulary, check, parse};

/// The names of a size's expression: parameters of the card, whatever they are called.
struct Parameters;

impl Vocabulary for Parameters {
    fn name(&self, _: &str) -> Option<Type> {
        Some(Type::AnyNumber)
    }
}

impl Checker<'_> {
    /// An expression over the parameters of a card.
    pub(crate) fn size_expression(&mut self, node: &Node) -> Option<Expr> {
        let text = self.text(node)?;
        let parsed = parse(text, Syntax::Spice { mega: false });
        let expr = self.or_fault(node, 0, parsed)?;
        // A netlist's truth values are numbers too, so of what the check finds only wrong calls count here.
        let is_call = |fault: &Fault| {
            let calls = expr.nodes.iter().zip(&expr.places).filter(|(node, _)| matches!(node, Operation::Call { .. }));
            calls.into_iter().any(|(_, place)| place.start == fault.at.start && fault.at.end <= place.end)
        };
        match check(&mut expr.clone(), &Parameters) {
            Err(fault) if is_call(&fault) => self.or_fault(node, 0, Err(fault)),
            _ => Some(expr),
        }
    }

    /// A condition of a rule: what is no truth value is complained of.
    pub(crate) fn condition(&mut self, node: &Node, vocabulary: &dyn Vocabulary) -> Option<Expr> {
        let text = self.text(node)?;
        let parsed = parse(text, Syntax::Rule);
        let mut expr = self.or_fault(node, 0, parsed)?;
        let checked = check(&mut expr, vocabulary);
        if self.or_fault(node, 0, checked)? == Type::Bool {
            return Some(expr);
        }
        let help = "compare it with something, as in `width <= 2000um`";
        self.error_with_help(node.span, "a condition is needed here, which is true or false", help);
        None
    }

    /// A message with expressions in braces.
    pub(crate) fn template(&mut self, node: &Node, vocabulary: &dyn Vocabulary) -> Option<Template> {
        let text = self.text(node)?;
        let parsed = Template::parse(text);
        let mut template = self.or_fault(node, 0, parsed)?;
        for piece in &mut template.pieces {
            if let Piece::Expr { expr, at } = piece {
                let checked = check(expr, vocabulary);
                self.or_fault(node, at.start as usize, checked)?;
            }
        }
        Some(template)
    }

    /// The value, or none after a complaint. A fault's place counts from byte `from` of the node's text.
    fn or_fault<T>(&mut self, node: &Node, from: usize, result: Result<T, Fault>) -> Option<T> {
        match result {
            Ok(value) => Some(value),
            Err(fault) => {
                let place = self.part(node, from + fault.at.start as usize..from + fault.at.end as usize);
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
