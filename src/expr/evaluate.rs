//! What a rule's expression is worth: with *unknown* as a value, so that a rule never claims what the analysis did not find.

use super::functions::{Dims, FUNCTIONS, function};
use super::walk::{Algebra, walk};
use super::{Binary, Expr, Node, Unary};
use crate::quantity::{Dim, show_percent};
use std::convert::Infallible;

/// What an expression is worth.
#[derive(Clone, Debug, PartialEq)]
pub enum Value {
    /// It could not be determined.
    Unknown,
    /// A truth value.
    Bool(bool),
    /// A number in base units.
    Number {
        /// In base units.
        value: f64,
        /// What it measures.
        dim: Dim,
    },
    /// A text or a word.
    Text(String),
}

/// An argument of a function.
#[derive(Clone, Debug, PartialEq)]
pub struct Arg<'a> {
    /// Its value; [`Value::Unknown`] if it is a name that the scope does not know as a value.
    pub value: Value,
    /// Its text if it is a bare name, such as `b` in `tied(b, s)`.
    pub name: Option<&'a str>,
}

/// Gives names their values. The answers must not depend on how often or in which order is asked.
pub trait Scope {
    /// The value of a name; [`Value::Unknown`] for one that has none.
    fn name(&self, name: &str) -> Value;

    /// The value of a function's call; none for functions that the scope does not know. `v(iso, s).max` is a call of
    /// `v.max`. The scope is asked before the functions of this module.
    fn call(&self, name: &str, args: &[Arg<'_>]) -> Option<Value> {
        let _ = (name, args);
        None
    }
}

/// Numbers nearer than this part of the larger one count as equal in rules: 5 ns × 2 MHz is 1 %.
pub const TOLERANCE: f64 = 1e-9;

/// The value of a rule's expression.
///
/// Logic is three-valued after Kleene (S. C. Kleene, *Introduction to Metamathematics*, 1952, section 64; from memory):
/// `false && unknown` is false, `true && unknown` is unknown. Numbers are compared with a relative tolerance of
/// [`TOLERANCE`]: `<=` holds for equal ones, `<` does not. Texts are compared without regard to ASCII case. What has no
/// value (a division by zero, a comparison of a voltage with a current) is unknown.
pub fn evaluate(expr: &Expr, scope: &dyn Scope) -> Value {
    match walk(expr, &Rules { expr, scope }) {
        Some(Ok(value)) => value,
        None => Value::Unknown,
    }
}

struct Rules<'a> {
    expr: &'a Expr,
    scope: &'a dyn Scope,
}

impl Algebra for Rules<'_> {
    type Value = Value;
    type Error = Infallible;

    fn leaf(&self, at: u32) -> Result<Value, Infallible> {
        Ok(match &self.expr.nodes[at as usize] {
            Node::Number { value, dim } => Value::Number { value: *value, dim: *dim },
            Node::Text(text) => Value::Text(text.clone()),
            Node::Name(name) => named(self.scope, name),
            _ => Value::Unknown,
        })
    }

    fn unary(&self, at: u32, operand: Value) -> Result<Value, Infallible> {
        Ok(match (&self.expr.nodes[at as usize], operand) {
            (Node::Unary(Unary::Negate, _), Value::Number { value, dim }) => Value::Number { value: -value, dim },
            (Node::Unary(Unary::Not, _), Value::Bool(holds)) => Value::Bool(!holds),
            _ => Value::Unknown,
        })
    }

    fn binary(&self, at: u32, left: Value, right: Value) -> Result<Value, Infallible> {
        let Node::Binary(operator, ..) = self.expr.nodes[at as usize] else { return Ok(Value::Unknown) };
        Ok(combine(operator, &left, &right))
    }

    fn call(&self, at: u32, values: Vec<Value>) -> Result<Value, Infallible> {
        let Node::Call { name, args } = &self.expr.nodes[at as usize] else { return Ok(Value::Unknown) };
        let bare = |&arg: &u32| match &self.expr.nodes[arg as usize] {
            Node::Name(name) => Some(name.as_str()),
            _ => None,
        };
        let args: Vec<Arg<'_>> = args.iter().zip(values).map(|(arg, value)| Arg { value, name: bare(arg) }).collect();
        Ok(self.scope.call(name, &args).unwrap_or_else(|| built_in(name, &args)))
    }

    fn holds(&self, value: &Value) -> Option<bool> {
        match value {
            Value::Bool(holds) => Some(*holds),
            _ => None,
        }
    }

    fn truth(&self, holds: bool) -> Value {
        Value::Bool(holds)
    }

    fn either(&self, yes: Value, no: Value) -> Value {
        if yes == no { yes } else { Value::Unknown }
    }
}

fn named(scope: &dyn Scope, name: &str) -> Value {
    match scope.name(name) {
        Value::Unknown if name.eq_ignore_ascii_case("true") => Value::Bool(true),
        Value::Unknown if name.eq_ignore_ascii_case("false") => Value::Bool(false),
        value => value,
    }
}

fn combine(operator: Binary, left: &Value, right: &Value) -> Value {
    match (operator, left, right) {
        (Binary::And, Value::Bool(false), _) | (Binary::And, _, Value::Bool(false)) => Value::Bool(false),
        (Binary::Or, Value::Bool(true), _) | (Binary::Or, _, Value::Bool(true)) => Value::Bool(true),
        (Binary::And, Value::Bool(true), Value::Bool(true)) => Value::Bool(true),
        (Binary::Or, Value::Bool(false), Value::Bool(false)) => Value::Bool(false),
        (_, &Value::Number { value: l, dim: of_l }, &Value::Number { value: r, dim: of_r }) => {
            numbers(operator, (l, of_l), (r, of_r))
        }
        (Binary::Equal, Value::Bool(l), Value::Bool(r)) => Value::Bool(l == r),
        (Binary::NotEqual, Value::Bool(l), Value::Bool(r)) => Value::Bool(l != r),
        (Binary::Equal, Value::Text(l), Value::Text(r)) => Value::Bool(l.eq_ignore_ascii_case(r)),
        (Binary::NotEqual, Value::Text(l), Value::Text(r)) => Value::Bool(!l.eq_ignore_ascii_case(r)),
        _ => Value::Unknown,
    }
}

fn numbers(operator: Binary, (left, of_left): (f64, Dim), (right, of_right): (f64, Dim)) -> Value {
    let equal = nearly_equal(left, right);
    let shared = shared(of_left, of_right);
    let compared = |holds: bool| match shared.is_some() && !left.is_nan() && !right.is_nan() {
        true => Value::Bool(holds),
        false => Value::Unknown,
    };
    match operator {
        Binary::Equal => compared(equal),
        Binary::NotEqual => compared(!equal),
        Binary::LessEqual => compared(left < right || equal),
        Binary::GreaterEqual => compared(left > right || equal),
        Binary::Less => compared(left < right && !equal),
        Binary::Greater => compared(left > right && !equal),
        Binary::Add => number(left + right, shared),
        Binary::Subtract => number(left - right, shared),
        Binary::Remainder => number(left % right, shared),
        Binary::IntegerDivide => number((left / right).trunc(), Some(of_left / of_right)),
        Binary::Multiply => number(left * right, Some(of_left * of_right)),
        Binary::Divide if right == 0.0 => Value::Unknown,
        Binary::Divide => number(left / right, Some(of_left / of_right)),
        Binary::Power => number(left.powf(right), power_of(of_left, right)),
        Binary::And | Binary::Or => Value::Unknown,
    }
}

fn number(value: f64, dim: Option<Dim>) -> Value {
    match dim {
        Some(dim) if !value.is_nan() => Value::Number { value, dim },
        _ => Value::Unknown,
    }
}

/// The dimension of two numbers that stand side by side; a plain one (a parameter, a literal 0) takes the other's.
fn shared(left: Dim, right: Dim) -> Option<Dim> {
    match (left, right) {
        _ if left == right => Some(left),
        (Dim::NONE, other) | (other, Dim::NONE) => Some(other),
        _ => None,
    }
}

fn power_of(dim: Dim, power: f64) -> Option<Dim> {
    match dim {
        Dim::NONE => Some(dim),
        _ if power.fract() == 0.0 && power.abs() <= 127.0 => Some(dim.powi(power as i32)),
        _ => None,
    }
}

fn nearly_equal(left: f64, right: f64) -> bool {
    let size = left.abs().max(right.abs());
    left == right || (size.is_finite() && (left - right).abs() <= TOLERANCE * size)
}

fn built_in(name: &str, args: &[Arg<'_>]) -> Value {
    let mut numbers = Vec::with_capacity(args.len());
    let mut dims = Vec::with_capacity(args.len());
    for arg in args {
        let Value::Number { value, dim } = arg.value else { return Value::Unknown };
        numbers.push(value);
        dims.push(dim);
    }
    if let ("percent", [share]) = (name.to_ascii_lowercase().as_str(), &numbers[..]) {
        return Value::Text(show_percent(*share));
    }
    let Some(function) = function(name).filter(|function| function.refuses(numbers.len()).is_none()) else {
        return Value::Unknown;
    };
    let dim = match function.dims {
        Dims::Plain | Dims::Drop => Some(Dim::NONE),
        Dims::Same => dims.iter().try_fold(Dim::NONE, |sum, &dim| shared(sum, dim)),
        Dims::Root => dims[0].root(),
        Dims::Power => power_of(dims[0], numbers[1]),
        Dims::First => Some(dims[0]),
    };
    number((function.compute)(&numbers), dim)
}

/// The names of the functions that every rule knows.
pub(super) fn rule_functions() -> impl Iterator<Item = &'static str> {
    FUNCTIONS.iter().map(|function| function.name).chain(["percent", "if"])
}

#[cfg(test)]
mod tests;
