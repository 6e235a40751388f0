//! Conditions of rules made ready for a first look: most devices hold most rules, and a few comparisons show it.

use crate::declared::Rule;
use crate::diag::Verdict;
use crate::expr::{Binary, Expr, Node, Unary};
use crate::facts::{Glance, Question, Truth, question};

/// A condition as far as a glance can answer it.
enum Test {
    Known(Truth),
    Ask(Question),
    Not(Box<Test>),
    Both(Box<Test>, Box<Test>),
    Either(Box<Test>, Box<Test>),
    /// Takes a closer look.
    Closer,
}

/// What a glance says of a rule.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Seen {
    /// It holds, or does not apply.
    Fine,
    /// It applies, and does not hold or is not known to.
    Fails(Verdict),
    /// A closer look is needed.
    Unsure,
}

/// A rule's conditions.
pub(super) struct Quick {
    applies: Test,
    require: Test,
    /// Whether all questions of `applies` are always answered, so that nothing undeclared hides in it.
    decided: bool,
    /// Whether `require` is one question, whose answer *unknown* is the rule's.
    single: bool,
}

impl Quick {
    pub(super) fn new(rule: &Rule) -> Quick {
        let test =
            |expr: &Option<Expr>| expr.as_ref().map_or(Test::Known(Truth::Yes), |expr| made(expr, expr.root(), 0));
        let names = |expr: &Expr| {
            expr.nodes.iter().all(|node| match node {
                Node::Name(name) => matches!(name.as_str(), "dummy" | "idle" | "true"),
                Node::Unary(Unary::Not, _) | Node::Binary(Binary::And | Binary::Or, ..) => true,
                _ => false,
            })
        };
        let (applies, require) = (test(&rule.applies), test(&rule.require));
        let single =
            matches!(&require, Test::Ask(_)) || matches!(&require, Test::Not(inner) if matches!(**inner, Test::Ask(_)));
        Quick { applies, require, decided: rule.applies.as_ref().is_none_or(names), single }
    }

    /// What a glance at a device says. It agrees with the rule asked in full wherever it is sure.
    pub(super) fn see(&self, glance: &Glance<'_>) -> Seen {
        let applies = self.applies.answer(glance);
        if applies == Some(Truth::No) {
            return Seen::Fine;
        }
        let decided = applies == Some(Truth::Yes) && self.decided;
        match self.require.answer(glance) {
            Some(Truth::Yes) => Seen::Fine,
            Some(Truth::No) if decided => Seen::Fails(Verdict::Violated),
            Some(Truth::Unknown) if decided && self.single => Seen::Fails(Verdict::Unproven),
            _ => Seen::Unsure,
        }
    }
}

/// Conditions nested deeper than this are left to the closer look.
const DEEPEST: u32 = 50;

fn made(expr: &Expr, at: u32, depth: u32) -> Test {
    let inner = |at: u32| Box::new(made(expr, at, depth + 1));
    match &expr.nodes[at as usize] {
        _ if depth > DEEPEST => Test::Closer,
        Node::Name(name) => match (question(name), name.as_str()) {
            (Some(question), _) => Test::Ask(question),
            (None, "true") => Test::Known(Truth::Yes),
            (None, "false") => Test::Known(Truth::No),
            _ => Test::Closer,
        },
        &Node::Unary(Unary::Not, operand) => Test::Not(inner(operand)),
        &Node::Binary(Binary::And, left, right) => Test::Both(inner(left), inner(right)),
        &Node::Binary(Binary::Or, left, right) => Test::Either(inner(left), inner(right)),
        _ => Test::Closer,
    }
}

impl Test {
    fn answer(&self, glance: &Glance<'_>) -> Option<Truth> {
        match self {
            Test::Known(truth) => Some(*truth),
            Test::Ask(question) => question(glance),
            Test::Not(inner) => inner.answer(glance).map(opposite),
            Test::Both(left, right) => both(left.answer(glance), || right.answer(glance), Truth::No),
            Test::Either(left, right) => both(left.answer(glance), || right.answer(glance), Truth::Yes),
            Test::Closer => None,
        }
    }
}

fn opposite(truth: Truth) -> Truth {
    match truth {
        Truth::Yes => Truth::No,
        Truth::No => Truth::Yes,
        Truth::Unknown => Truth::Unknown,
    }
}

/// Both of two, or either: `decides` by itself is the answer.
fn both(left: Option<Truth>, right: impl FnOnce() -> Option<Truth>, decides: Truth) -> Option<Truth> {
    if left == Some(decides) {
        return left;
    }
    match (left, right()) {
        (_, Some(right)) if right == decides => Some(decides),
        (Some(Truth::Unknown), Some(_)) | (Some(_), Some(Truth::Unknown)) => Some(Truth::Unknown),
        (Some(_), Some(right)) => Some(right),
        _ => None,
    }
}
