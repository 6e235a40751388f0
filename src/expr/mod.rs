//! The one expression language of Drainwise: for SPICE parameters and for rules.
//!
//! Precedence is that of SPICE parameter expressions (Ngspice User's Manual, version 39, section 2.9.5), each level left to
//! right, unary operators tightest: `-2**2` is 4, `2**3**2` is 64. A choice inside a choice belongs to the last branch, so
//! `a ? 1 : b ? 2 : 3` reads as it looks. Only number literals differ between the two syntaxes, and rules may also say `and`,
//! `or`, `if(c, a, b)` and `not`, which reaches over comparisons: `not width > 5um`.

use crate::quantity::Dim;
use std::ops::Range;

mod check;
mod evaluate;
mod functions;
mod lex;
mod parse;
mod spice;
mod template;
mod walk;

pub use check::{ArgType, Type, Vocabulary, check};
pub use evaluate::{Arg, Scope, TOLERANCE, Value, evaluate};
pub use parse::{Fault, Syntax, parse};
pub use spice::{Parameters, doubts, evaluate_spice};
pub use template::{Piece, Template};

/// An operator between two operands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs)]
pub enum Binary {
    Power,
    Multiply,
    Divide,
    Remainder,
    IntegerDivide,
    Add,
    Subtract,
    Equal,
    NotEqual,
    LessEqual,
    GreaterEqual,
    Less,
    Greater,
    And,
    Or,
}

/// An operator before its operand.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs)]
pub enum Unary {
    Negate,
    Not,
}

/// One node of an expression; operands are indices of earlier nodes.
#[derive(Clone, Debug, PartialEq)]
pub enum Node {
    /// A number in base units.
    Number {
        /// In base units.
        value: f64,
        /// What it measures; [`Dim::NONE`] in SPICE syntax.
        dim: Dim,
    },
    /// A text in quotes.
    Text(String),
    /// A name, with dots in rules: `w`, `vds.max`.
    Name(String),
    /// A function's call. Names as arguments (`tied(b, s)`) are `Name` nodes.
    Call {
        /// The function, as written.
        name: String,
        /// Its arguments.
        args: Vec<u32>,
    },
    /// An operator before its operand.
    Unary(Unary, u32),
    /// An operator between operands.
    Binary(Binary, u32, u32),
    /// `condition ? yes : no`, or `if(condition, yes, no)`.
    Choose(u32, u32, u32),
}

/// A parsed expression: a flat tree with the place of each node.
#[derive(Clone, Debug, PartialEq)]
pub struct Expr {
    /// Nodes, operands before operators; the last is the root.
    pub nodes: Vec<Node>,
    /// Byte ranges of the nodes in the text it was parsed from.
    pub places: Vec<Range<u32>>,
}

impl Expr {
    /// The index of the root node.
    pub fn root(&self) -> u32 {
        self.nodes.len() as u32 - 1
    }
}
