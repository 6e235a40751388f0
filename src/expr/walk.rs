//! Walks an expression as evaluation needs it: left to right, skipping what a decided condition leaves out, with a stack on the
//! heap, because a chain of 100 000 sums is 100 000 deep.

use super::{Binary, Expr, Node};

/// How a kind of value is made and combined. `at` is the index of the node.
pub(super) trait Algebra {
    type Value;
    type Error;
    fn leaf(&self, at: u32) -> Result<Self::Value, Self::Error>;
    fn unary(&self, at: u32, operand: Self::Value) -> Result<Self::Value, Self::Error>;
    fn binary(&self, at: u32, left: Self::Value, right: Self::Value) -> Result<Self::Value, Self::Error>;
    fn call(&self, at: u32, args: Vec<Self::Value>) -> Result<Self::Value, Self::Error>;
    /// Whether a condition holds, if that can be told.
    fn holds(&self, value: &Self::Value) -> Option<bool>;
    fn truth(&self, holds: bool) -> Self::Value;
    /// The value of a choice whose condition cannot be told.
    fn either(&self, yes: Self::Value, no: Self::Value) -> Self::Value;
}

enum Step {
    Enter(u32),
    Unary(u32),
    /// The left operand of `&&` or `||` is there.
    Left(u32),
    Binary(u32),
    Call(u32),
    /// The condition is there.
    Condition(u32),
    Either,
}

/// The root's value; `None` only for an expression whose indices do not hold together.
pub(super) fn walk<A: Algebra>(expr: &Expr, algebra: &A) -> Option<Result<A::Value, A::Error>> {
    if let [Node::Number { .. } | Node::Text(_) | Node::Name(_)] = expr.nodes[..] {
        return Some(algebra.leaf(0));
    }
    let mut steps = vec![Step::Enter(u32::try_from(expr.nodes.len()).ok()?.checked_sub(1)?)];
    let mut values = Vec::new();
    while let Some(step) = steps.pop() {
        match take(expr, algebra, step, &mut steps, &mut values)? {
            Ok(Some(value)) => values.push(value),
            Ok(None) => {}
            Err(error) => return Some(Err(error)),
        }
    }
    values.pop().map(Ok)
}

fn take<A: Algebra>(
    expr: &Expr,
    algebra: &A,
    step: Step,
    steps: &mut Vec<Step>,
    values: &mut Vec<A::Value>,
) -> Option<Result<Option<A::Value>, A::Error>> {
    let made = match step {
        Step::Enter(at) => match expr.nodes.get(at as usize)? {
            Node::Number { .. } | Node::Text(_) | Node::Name(_) => algebra.leaf(at),
            inner => {
                enter(at, inner, steps);
                return Some(Ok(None));
            }
        },
        Step::Unary(at) => algebra.unary(at, values.pop()?),
        Step::Left(at) => {
            let Node::Binary(operator, _, right) = expr.nodes.get(at as usize)? else { return None };
            let decided = *operator == Binary::Or;
            if algebra.holds(values.last()?) != Some(decided) {
                steps.extend([Step::Binary(at), Step::Enter(*right)]);
                return Some(Ok(None));
            }
            values.pop();
            Ok(algebra.truth(decided))
        }
        Step::Binary(at) => {
            let (right, left) = (values.pop()?, values.pop()?);
            algebra.binary(at, left, right)
        }
        Step::Call(at) => {
            let Node::Call { args, .. } = expr.nodes.get(at as usize)? else { return None };
            let args = values.split_off(values.len().checked_sub(args.len())?);
            algebra.call(at, args)
        }
        Step::Condition(at) => {
            let Node::Choose(_, yes, no) = expr.nodes.get(at as usize)? else { return None };
            match algebra.holds(&values.pop()?) {
                Some(true) => steps.push(Step::Enter(*yes)),
                Some(false) => steps.push(Step::Enter(*no)),
                None => steps.extend([Step::Either, Step::Enter(*no), Step::Enter(*yes)]),
            }
            return Some(Ok(None));
        }
        Step::Either => {
            let (no, yes) = (values.pop()?, values.pop()?);
            Ok(algebra.either(yes, no))
        }
    };
    Some(made.map(Some))
}

fn enter(at: u32, node: &Node, steps: &mut Vec<Step>) {
    match node {
        Node::Unary(_, operand) => steps.extend([Step::Unary(at), Step::Enter(*operand)]),
        Node::Binary(Binary::And | Binary::Or, left, _) => steps.extend([Step::Left(at), Step::Enter(*left)]),
        Node::Binary(_, left, right) => steps.extend([Step::Binary(at), Step::Enter(*right), Step::Enter(*left)]),
        Node::Call { args, .. } => {
            steps.push(Step::Call(at));
            steps.extend(args.iter().rev().map(|&arg| Step::Enter(arg)));
        }
        Node::Choose(condition, ..) => steps.extend([Step::Condition(at), Step::Enter(*condition)]),
        Node::Number { .. } | Node::Text(_) | Node::Name(_) => {}
    }
}
