//! Reads expressions, by operator precedence with a stack of its own: no text, however deep or long, can exhaust the
//! program's stack.

use super::lex::{Kind, Lexer, Token};
use super::{Binary, Expr, Node, Unary};
use std::ops::Range;

/// Which literals and words an expression may have.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Syntax {
    /// A netlist's parameter: numbers with scale factors, braces as brackets, lines that go on behind `+`.
    Spice {
        /// Whether a lone `M` is 1e6 (`*.MEGA`).
        mega: bool,
    },
    /// A deck's rule: quantities with units, texts in quotes, names with dots, `and`, `or`, `not`, `if(c, a, b)`.
    Rule,
}

/// What is wrong with an expression, and where.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// Bytes in the expression's own text, on character boundaries.
    pub at: Range<u32>,
    /// What is wrong, in one line.
    pub message: String,
    /// What to do instead.
    pub help: Option<String>,
}

impl Fault {
    /// A fault without help.
    pub fn new(at: Range<u32>, message: impl Into<String>) -> Fault {
        Fault { at, message: message.into(), help: None }
    }

    /// The same with help.
    pub fn help(self, help: impl Into<String>) -> Fault {
        Fault { help: Some(help.into()), ..self }
    }
}

/// Deepest nesting of brackets.
const DEPTH: usize = 250;
/// Longest text, bytes.
const LENGTH: usize = 4 << 20;

/// Reads a whole text as one expression.
///
/// A name behind a call's bracket belongs to the call: `v(iso, s).max` is a call of `v.max`. `if(c, a, b)` of rules and
/// `ternary_fcn(c, a, b)` become [`Node::Choose`].
///
/// # Errors
/// The first thing that is wrong with it. Nesting deeper than 250 brackets and texts above 4 MiB are faults too.
pub fn parse(text: &str, syntax: Syntax) -> Result<Expr, Fault> {
    if text.len() > LENGTH {
        return Err(Fault::new(0..0, "this expression is longer than 4 MB"));
    }
    let mut parser = Parser {
        lexer: Lexer::new(text, syntax),
        syntax,
        expr: Expr { nodes: Vec::new(), places: Vec::new() },
        operands: Vec::new(),
        pending: Vec::new(),
        brackets: 0,
    };
    let mut before = None;
    loop {
        let token = parser.operand(before)?;
        before = parser.after_operand(token)?;
        if before.is_none() {
            return Ok(parser.expr);
        }
    }
}

/// An operand that is ready: its node, and its extent with the brackets around it.
struct Operand {
    node: u32,
    extent: Range<u32>,
}

/// What waits for its right operand or its closing bracket.
enum Pending {
    Prefix { unary: Option<Unary>, level: u8, start: u32 },
    Binary(Binary),
    Question(Range<u32>),
    Colon,
    Group { open: char, at: Range<u32> },
    Call { name: String, args: Vec<u32>, start: u32, at: Range<u32> },
}

struct Parser<'a> {
    lexer: Lexer<'a>,
    syntax: Syntax,
    expr: Expr,
    operands: Vec<Operand>,
    pending: Vec<Pending>,
    brackets: usize,
}

impl<'a> Parser<'a> {
    /// Reads prefixes, opening brackets and one value. Gives the token behind it.
    fn operand(&mut self, mut before: Option<Token<'a>>) -> Result<Token<'a>, Fault> {
        loop {
            let token = self.lexer.next()?;
            let start = token.at.start;
            match token.kind {
                Kind::Number { value, dim } => return self.leaf(Node::Number { value, dim }, token.at),
                Kind::Text(text) => return self.leaf(Node::Text(text.into()), token.at),
                Kind::Name(name) => {
                    let next = self.lexer.next()?;
                    if next.kind != Kind::Open('(') {
                        self.push(Node::Name(name.into()), token.at.clone(), token.at);
                        return Ok(next);
                    }
                    self.deeper(&next.at)?;
                    self.pending.push(Pending::Call {
                        name: name.into(),
                        args: Vec::new(),
                        start,
                        at: next.at.clone(),
                    });
                    if let Some(close) = self.no_arguments()? {
                        return self.close(close, true);
                    }
                    before = Some(next);
                    continue;
                }
                Kind::Open(open) => {
                    self.deeper(&token.at)?;
                    self.pending.push(Pending::Group { open, at: token.at.clone() });
                }
                Kind::Operator(Binary::Subtract) => self.prefix(Some(Unary::Negate), 8, start),
                Kind::Operator(Binary::Add) => self.prefix(None, 8, start),
                Kind::Not => self.prefix(Some(Unary::Not), 8, start),
                Kind::NotWord => self.prefix(Some(Unary::Not), 3, start),
                _ => return Err(self.no_value(&token, before.as_ref())),
            }
            before = Some(token);
        }
    }

    /// After an operand: closes brackets, and takes the operator or comma that asks for the next operand. Gives that token,
    /// or none at the end.
    fn after_operand(&mut self, mut token: Token<'a>) -> Result<Option<Token<'a>>, Fault> {
        loop {
            match token.kind {
                Kind::End => {
                    self.reduce_to_bracket()?;
                    return match self.pending.last() {
                        Some(Pending::Group { open, at }) => Err(unclosed(*open, at)),
                        Some(Pending::Call { at, .. }) => Err(unclosed('(', at)),
                        _ => Ok(None),
                    };
                }
                Kind::Close(_) => {
                    token = self.close(token, false)?;
                    continue;
                }
                Kind::Operator(operator) => {
                    self.reduce(level(operator));
                    self.pending.push(Pending::Binary(operator));
                }
                Kind::Question => {
                    self.reduce(1);
                    self.pending.push(Pending::Question(token.at.clone()));
                }
                Kind::Colon => self.colon(&token)?,
                Kind::Comma => self.comma(&token)?,
                Kind::Number { .. } | Kind::Text(_) | Kind::Name(_) | Kind::Open(_) | Kind::Not | Kind::NotWord => {
                    let shown = self.shown(&token.at);
                    return Err(Fault::new(token.at, format!("an operator is missing before {shown}")));
                }
            }
            return Ok(Some(token));
        }
    }

    fn colon(&mut self, token: &Token<'a>) -> Result<(), Fault> {
        self.reduce(0);
        match self.pending.last_mut() {
            Some(waiting @ Pending::Question(_)) => {
                *waiting = Pending::Colon;
                Ok(())
            }
            _ => Err(Fault::new(token.at.clone(), "this `:` has no `?` before it")),
        }
    }

    fn comma(&mut self, token: &Token<'a>) -> Result<(), Fault> {
        self.reduce_to_bracket()?;
        match (self.pending.last_mut(), self.operands.pop()) {
            (Some(Pending::Call { args, .. }), Some(operand)) => {
                args.push(operand.node);
                Ok(())
            }
            _ => Err(Fault::new(token.at.clone(), "a comma stands only between the arguments of a function")),
        }
    }

    /// Closes the innermost bracket and gives the token behind it.
    fn close(&mut self, token: Token<'a>, empty: bool) -> Result<Token<'a>, Fault> {
        if !empty {
            self.reduce_to_bracket()?;
        }
        let Kind::Close(close) = token.kind else { return Ok(token) };
        match self.pending.pop() {
            Some(Pending::Group { open, at }) if (open == '(') == (close == ')') => {
                if let Some(operand) = self.operands.last_mut() {
                    operand.extent = at.start..token.at.end;
                }
            }
            Some(Pending::Call { name, mut args, start, .. }) if close == ')' => {
                if !empty {
                    args.extend(self.operands.pop().map(|operand| operand.node));
                }
                self.call(name, args, start)?;
            }
            Some(Pending::Group { open, at }) => return Err(unclosed(open, &at)),
            Some(Pending::Call { at, .. }) => return Err(unclosed('(', &at)),
            _ => return Err(Fault::new(token.at, format!("this `{close}` closes nothing"))),
        }
        self.brackets -= 1;
        self.lexer.next()
    }

    fn call(&mut self, mut name: String, args: Vec<u32>, start: u32) -> Result<(), Fault> {
        let rule = self.syntax == Syntax::Rule;
        if rule && let Some(member) = self.lexer.member() {
            name.push('.');
            name.push_str(member);
        }
        let place = start..self.lexer.position();
        let is_if = rule && name.eq_ignore_ascii_case("if");
        let node = match args[..] {
            [condition, yes, no] if is_if || name.eq_ignore_ascii_case("ternary_fcn") => {
                Node::Choose(condition, yes, no)
            }
            _ if is_if => {
                return Err(
                    Fault::new(place, "`if` takes a condition and two values").help("write it as in if(on, 5V, 48V)")
                );
            }
            _ => Node::Call { name, args },
        };
        self.push(node, place.clone(), place);
        Ok(())
    }

    fn leaf(&mut self, node: Node, at: Range<u32>) -> Result<Token<'a>, Fault> {
        self.push(node, at.clone(), at);
        self.lexer.next()
    }

    fn push(&mut self, node: Node, place: Range<u32>, extent: Range<u32>) {
        let index = self.expr.nodes.len() as u32;
        self.expr.nodes.push(node);
        self.expr.places.push(place);
        self.operands.push(Operand { node: index, extent });
    }

    fn prefix(&mut self, unary: Option<Unary>, level: u8, start: u32) {
        self.pending.push(Pending::Prefix { unary, level, start });
    }

    fn deeper(&mut self, at: &Range<u32>) -> Result<(), Fault> {
        self.brackets += 1;
        match self.brackets > DEPTH {
            true => Err(Fault::new(at.clone(), format!("more than {DEPTH} brackets are open here"))
                .help("split the expression into parameters")),
            false => Ok(()),
        }
    }

    /// Looks whether the arguments end before they began.
    fn no_arguments(&mut self) -> Result<Option<Token<'a>>, Fault> {
        let here = self.lexer.clone();
        let token = self.lexer.next()?;
        if token.kind == Kind::Close(')') {
            return Ok(Some(token));
        }
        self.lexer = here;
        Ok(None)
    }

    /// Builds everything that waits and binds at least as tightly as `level`; at level 0 choices too.
    fn reduce(&mut self, level: u8) {
        loop {
            let ready = match self.pending.last() {
                Some(Pending::Prefix { level: own, .. }) => *own >= level,
                Some(Pending::Binary(operator)) => self::level(*operator) >= level,
                Some(Pending::Colon) => level == 0,
                _ => false,
            };
            if !ready {
                return;
            }
            match (self.pending.pop(), self.operands.pop()) {
                (Some(Pending::Prefix { unary, start, .. }), Some(operand)) => {
                    self.finish_prefix(unary, start, operand)
                }
                (Some(Pending::Binary(operator)), Some(right)) => {
                    let Some(left) = self.operands.pop() else { return };
                    let place = left.extent.start..right.extent.end;
                    self.push(Node::Binary(operator, left.node, right.node), place.clone(), place);
                }
                (Some(Pending::Colon), Some(no)) => {
                    let (Some(yes), Some(condition)) = (self.operands.pop(), self.operands.pop()) else { return };
                    let place = condition.extent.start..no.extent.end;
                    self.push(Node::Choose(condition.node, yes.node, no.node), place.clone(), place);
                }
                _ => return,
            }
        }
    }

    fn finish_prefix(&mut self, unary: Option<Unary>, start: u32, operand: Operand) {
        let place = start..operand.extent.end;
        match unary {
            Some(unary) => self.push(Node::Unary(unary, operand.node), place.clone(), place),
            None => self.operands.push(Operand { node: operand.node, extent: place }),
        }
    }

    fn reduce_to_bracket(&mut self) -> Result<(), Fault> {
        self.reduce(0);
        match self.pending.last() {
            Some(Pending::Question(at)) => {
                Err(Fault::new(at.clone(), "this `?` has no `:` behind it").help("write it as in condition ? 1 : 2"))
            }
            _ => Ok(()),
        }
    }

    fn no_value(&self, token: &Token<'a>, before: Option<&Token<'a>>) -> Fault {
        match (&token.kind, before) {
            (Kind::End, None) => Fault::new(token.at.clone(), "the expression is empty"),
            (Kind::End, Some(before)) => {
                let shown = self.shown(&before.at);
                Fault::new(before.at.clone(), format!("a value is missing behind {shown}"))
            }
            _ => {
                let shown = self.shown(&token.at);
                Fault::new(token.at.clone(), format!("a value is missing before {shown}"))
            }
        }
    }

    fn shown(&self, at: &Range<u32>) -> String {
        let mut shown: String = self.lexer.slice(at).chars().take(40).collect();
        if shown.len() < at.len() {
            shown.push('…');
        }
        format!("`{shown}`")
    }
}

fn unclosed(open: char, at: &Range<u32>) -> Fault {
    Fault::new(at.clone(), format!("this `{open}` is not closed"))
}

/// How tightly an operator binds (Ngspice User's Manual, version 39, section 2.9.5). Prefixes are 8, the word `not` is 3.
fn level(operator: Binary) -> u8 {
    match operator {
        Binary::Power => 7,
        Binary::Multiply | Binary::Divide | Binary::Remainder | Binary::IntegerDivide => 6,
        Binary::Add | Binary::Subtract => 5,
        Binary::Equal
        | Binary::NotEqual
        | Binary::LessEqual
        | Binary::GreaterEqual
        | Binary::Less
        | Binary::Greater => 4,
        Binary::And => 2,
        Binary::Or => 1,
    }
}

#[cfg(test)]
mod tests;
