//! Checks a rule's expression before any netlist is read: names, functions, truth values, words and physical dimensions. A
//! rule that compares a voltage with a current is a mistake in the deck, not a finding.

use super::evaluate::rule_functions;
use super::functions::{Dims, Function, function};
use super::{Binary, Expr, Fault, Node, Unary};
use crate::names::nearest;
use crate::quantity::Dim;

/// What an expression stands for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Type {
    /// A truth value.
    Bool,
    /// A number of this dimension.
    Number(Dim),
    /// A number that goes with every dimension, such as a netlist's parameter.
    AnyNumber,
    /// A text.
    Text,
    /// One of these words.
    Word(&'static [&'static str]),
}

/// An argument as the vocabulary sees it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ArgType<'a> {
    /// What it stands for; none if it is a bare name that is no value, such as `b` in `tied(b, s)`.
    pub kind: Option<Type>,
    /// Its text if it is a bare name.
    pub name: Option<&'a str>,
    /// Its text if it is in quotes, such as `x` in `param("x")`.
    pub text: Option<&'a str>,
}

/// The names and functions that a rule may use.
pub trait Vocabulary {
    /// What a name stands for; none if there is no such name.
    fn name(&self, name: &str) -> Option<Type>;

    /// What a function's call stands for; none for functions that the vocabulary does not know. `v(iso, s).max` is a call of
    /// `v.max`. The vocabulary is asked before the functions of this module.
    ///
    /// # Errors
    /// Inside: what is wrong with the arguments, in one line.
    fn call(&self, name: &str, args: &[ArgType<'_>]) -> Option<Result<Type, String>> {
        let _ = (name, args);
        None
    }

    /// All names, to offer one for a misspelt one; asked only when something is wrong.
    fn names(&self) -> Vec<String> {
        Vec::new()
    }

    /// All functions' names, for the same.
    fn functions(&self) -> Vec<String> {
        Vec::new()
    }
}

/// What a rule's expression stands for. A bare word that is compared with an attribute of words (`class.kind == nmos`) becomes a
/// [`Node::Text`], so that [`super::evaluate`] compares it.
///
/// # Errors
/// The first mistake in reading order of its operators: an unknown name or function, operands whose dimensions do not go
/// together, a number where a truth value belongs, a word that the attribute cannot be.
pub fn check(expr: &mut Expr, vocabulary: &dyn Vocabulary) -> Result<Type, Fault> {
    let mut checker = Checker { expr, vocabulary, types: Vec::with_capacity(expr.nodes.len()), words: Vec::new() };
    for (at, node) in (0u32..).zip(&expr.nodes) {
        let own = checker.node(at, node)?;
        checker.types.push(own);
    }
    let Some(root) = (expr.nodes.len() as u32).checked_sub(1) else {
        return Err(Fault::new(0..0, "the expression is empty"));
    };
    let known = checker.known(root)?;
    for at in checker.words {
        if let Some(Node::Name(word)) = expr.nodes.get(at as usize) {
            expr.nodes[at as usize] = Node::Text(word.clone());
        }
    }
    Ok(known)
}

#[derive(Clone, Copy, PartialEq)]
enum Found {
    Type(Type),
    /// A literal 0, which goes with every dimension.
    Zero,
    /// A name that the vocabulary does not know: a mistake, unless what is above makes it a word or an argument.
    UnknownName,
}

struct Checker<'a> {
    expr: &'a Expr,
    vocabulary: &'a dyn Vocabulary,
    types: Vec<Found>,
    words: Vec<u32>,
}

const TRUTH_WORDS: [&str; 2] = ["true", "false"];

impl<'a> Checker<'a> {
    fn node(&mut self, at: u32, node: &'a Node) -> Result<Found, Fault> {
        Ok(Found::Type(match node {
            Node::Number { value, dim: Dim::NONE } if *value == 0.0 => return Ok(Found::Zero),
            Node::Number { dim, .. } => Type::Number(*dim),
            Node::Text(_) => Type::Text,
            Node::Name(name) => match self.vocabulary.name(name) {
                Some(known) => known,
                None if TRUTH_WORDS.iter().any(|word| name.eq_ignore_ascii_case(word)) => Type::Bool,
                None => return Ok(Found::UnknownName),
            },
            Node::Call { name, args } => self.call(at, name, args)?,
            Node::Unary(Unary::Not, operand) => self.truth(*operand)?,
            Node::Unary(Unary::Negate, operand) => {
                if self.found(*operand) == Found::Zero {
                    return Ok(Found::Zero);
                }
                self.number(*operand)?
            }
            Node::Binary(operator, left, right) => self.binary(at, *operator, *left, *right)?,
            Node::Choose(condition, yes, no) => {
                self.truth(*condition)?;
                self.choice(at, *yes, *no)?
            }
        }))
    }

    fn found(&self, at: u32) -> Found {
        self.types.get(at as usize).copied().unwrap_or(Found::UnknownName)
    }

    fn fault(&self, at: u32, message: impl Into<String>) -> Fault {
        Fault::new(self.expr.places.get(at as usize).cloned().unwrap_or_default(), message)
    }

    fn bare(&self, at: u32) -> Option<&'a str> {
        match self.expr.nodes.get(at as usize) {
            Some(Node::Name(name)) => Some(name),
            _ => None,
        }
    }

    /// The type, where an unknown name is a mistake.
    fn known(&self, at: u32) -> Result<Type, Fault> {
        match self.found(at) {
            Found::Type(known) => Ok(known),
            Found::Zero => Ok(Type::Number(Dim::NONE)),
            Found::UnknownName => {
                let name = self.bare(at).unwrap_or("");
                let fault = self.fault(at, format!("there is no name `{name}` here"));
                Err(offer(fault, name, &self.vocabulary.names()))
            }
        }
    }

    fn truth(&self, at: u32) -> Result<Type, Fault> {
        match self.known(at)? {
            Type::Bool => Ok(Type::Bool),
            other => Err(self
                .fault(at, format!("{} is neither true nor false", in_words(other)))
                .help("compare it with something, as in `vds.max <= 40V`")),
        }
    }

    fn number(&self, at: u32) -> Result<Type, Fault> {
        match self.known(at)? {
            number @ (Type::Number(_) | Type::AnyNumber) => Ok(number),
            other => Err(self.fault(at, format!("{} is no number", in_words(other)))),
        }
    }

    fn binary(&mut self, at: u32, operator: Binary, left: u32, right: u32) -> Result<Type, Fault> {
        match operator {
            Binary::And | Binary::Or => {
                self.truth(left)?;
                self.truth(right)
            }
            Binary::Equal | Binary::NotEqual => self.equality(at, left, right),
            Binary::Less | Binary::LessEqual | Binary::Greater | Binary::GreaterEqual => {
                self.ordered(left)?;
                self.shared(at, left, right, "cannot be compared with")?;
                Ok(Type::Bool)
            }
            Binary::Add => self.shared(at, left, right, "cannot be added to"),
            Binary::Subtract => self.shared(at, left, right, "does not go into a difference with"),
            Binary::Remainder => self.shared(at, left, right, "has no remainder when divided by"),
            Binary::Multiply => self.product(left, right, |l, r| l * r),
            Binary::Divide | Binary::IntegerDivide => self.product(left, right, |l, r| l / r),
            Binary::Power => self.power(left, right),
        }
    }

    /// Points at `0V <= x <= 5V`.
    fn ordered(&self, left: u32) -> Result<(), Fault> {
        let Some(Node::Binary(inner, ..)) = self.expr.nodes.get(left as usize) else { return Ok(()) };
        match inner {
            Binary::Less | Binary::LessEqual | Binary::Greater | Binary::GreaterEqual => Err(self
                .fault(left, "a comparison is true or false, and cannot be compared with a number")
                .help("write both comparisons, as in `0V <= x && x <= 5V`")),
            _ => Ok(()),
        }
    }

    /// The type of two numbers side by side, which must be of one dimension.
    fn shared(&self, at: u32, left: u32, right: u32, verb: &str) -> Result<Type, Fault> {
        let (zero_left, zero_right) = (self.found(left) == Found::Zero, self.found(right) == Found::Zero);
        let (of_left, of_right) = (self.number(left)?, self.number(right)?);
        match (of_left, of_right) {
            _ if of_left == of_right || zero_right => Ok(of_left),
            _ if zero_left => Ok(of_right),
            (Type::AnyNumber, other) | (other, Type::AnyNumber) => Ok(other),
            _ => {
                let message = format!("{} {verb} {}", in_words(of_left), in_words(of_right));
                Err(self.with_unit(self.fault(at, message), (left, of_left), (right, of_right)))
            }
        }
    }

    /// Offers a unit where one side is a plain literal.
    fn with_unit(&self, fault: Fault, left: (u32, Type), right: (u32, Type)) -> Fault {
        let literal = |at: u32| match self.expr.nodes.get(at as usize) {
            Some(Node::Number { value, dim: Dim::NONE }) => Some(*value),
            _ => None,
        };
        let (value, other) = match (literal(left.0), literal(right.0)) {
            (Some(value), None) => (value, right.1),
            (None, Some(value)) => (value, left.1),
            _ => return fault,
        };
        let unit = match other {
            Type::Number(Dim::VOLT) => "V",
            Type::Number(Dim::AMPERE) => "uA",
            Type::Number(Dim::METRE) => "um",
            Type::Number(Dim::SECOND) => "ns",
            Type::Number(Dim::HERTZ) => "MHz",
            Type::Number(Dim::WATT) => "mW",
            Type::Number(Dim::DENSITY) => "uA/um",
            _ => return fault,
        };
        fault.help(format!("write the number with its unit, such as {value}{unit}"))
    }

    fn product(&self, left: u32, right: u32, dims: fn(Dim, Dim) -> Dim) -> Result<Type, Fault> {
        Ok(match (self.number(left)?, self.number(right)?) {
            (Type::Number(l), Type::Number(r)) => Type::Number(dims(l, r)),
            _ => Type::AnyNumber,
        })
    }

    fn power(&self, base: u32, exponent: u32) -> Result<Type, Fault> {
        let (of_base, of_exponent) = (self.number(base)?, self.number(exponent)?);
        if !matches!(of_exponent, Type::Number(Dim::NONE) | Type::AnyNumber) {
            return Err(self.fault(exponent, format!("a power must be a plain number, not {}", in_words(of_exponent))));
        }
        match of_base {
            Type::Number(Dim::NONE) | Type::AnyNumber => Ok(of_base),
            Type::Number(dim) => match self.whole(exponent) {
                Some(power) => Ok(Type::Number(dim.powi(power))),
                None => {
                    let message = format!("{} can only be raised to a whole number as it stands", in_words(of_base));
                    Err(self.fault(exponent, message).help("write the power as a number, such as 2"))
                }
            },
            other => Ok(other),
        }
    }

    /// A whole number as it stands, with or without a sign.
    fn whole(&self, at: u32) -> Option<i32> {
        let literal = |at: u32| match self.expr.nodes.get(at as usize)? {
            Node::Number { value, .. } if value.fract() == 0.0 && value.abs() <= 127.0 => Some(*value as i32),
            _ => None,
        };
        match self.expr.nodes.get(at as usize)? {
            Node::Unary(Unary::Negate, operand) => literal(*operand).map(|power| -power),
            _ => literal(at),
        }
    }

    fn equality(&mut self, at: u32, left: u32, right: u32) -> Result<Type, Fault> {
        for (attribute, other) in [(left, right), (right, left)] {
            if let (Found::Type(Type::Word(words)), Some(word)) = (self.found(attribute), self.bare(other)) {
                let listed = words.iter().any(|known| known.eq_ignore_ascii_case(word));
                if listed {
                    self.words.push(other);
                    return Ok(Type::Bool);
                }
                if self.found(other) == Found::UnknownName {
                    return Err(self.no_such_word(other, word, words));
                }
            }
        }
        self.quoted_word(left, right)?;
        self.quoted_word(right, left)?;
        match (self.loosely_known(left, right)?, self.loosely_known(right, left)?) {
            (Type::Bool, Type::Bool) => Ok(Type::Bool),
            (Type::Text | Type::Word(_), Type::Text | Type::Word(_)) => Ok(Type::Bool),
            (Type::Number(_) | Type::AnyNumber, Type::Number(_) | Type::AnyNumber) => {
                self.shared(at, left, right, "cannot be compared with").map(|_| Type::Bool)
            }
            (of_left, of_right) => {
                Err(self.fault(at, format!("{} cannot be compared with {}", in_words(of_left), in_words(of_right))))
            }
        }
    }

    /// The type; for an unknown name beside a text, the help says how to write a text.
    fn loosely_known(&self, at: u32, other: u32) -> Result<Type, Fault> {
        self.known(at).map_err(|fault| match (self.found(other), self.bare(at)) {
            (Found::Type(Type::Text), Some(name)) if fault.help.is_none() => {
                fault.help(format!("if it is a text, write it in quotes: \"{name}\""))
            }
            _ => fault,
        })
    }

    /// A text in quotes beside an attribute of words must be one of them too.
    fn quoted_word(&self, attribute: u32, other: u32) -> Result<(), Fault> {
        match (self.found(attribute), self.expr.nodes.get(other as usize)) {
            (Found::Type(Type::Word(words)), Some(Node::Text(text)))
                if !words.iter().any(|known| known.eq_ignore_ascii_case(text)) =>
            {
                Err(self.no_such_word(other, text, words))
            }
            _ => Ok(()),
        }
    }

    fn no_such_word(&self, at: u32, word: &str, words: &[&str]) -> Fault {
        let fault = self.fault(at, format!("`{word}` is none of the words that can stand here"));
        let all = words.join(", ");
        match nearest(word, words.iter().copied()) {
            Some(near) => fault.help(format!("did you mean `{near}`? The words are {all}")),
            None => fault.help(format!("the words are {all}")),
        }
    }

    fn choice(&self, at: u32, yes: u32, no: u32) -> Result<Type, Fault> {
        match (self.known(yes)?, self.known(no)?) {
            (Type::Number(_) | Type::AnyNumber, Type::Number(_) | Type::AnyNumber) => {
                self.shared(at, yes, no, "cannot stand in for")
            }
            (of_yes, of_no) if of_yes == of_no => Ok(of_yes),
            (Type::Text | Type::Word(_), Type::Text | Type::Word(_)) => Ok(Type::Text),
            (of_yes, of_no) => {
                Err(self.fault(at, format!("{} cannot stand in for {}", in_words(of_yes), in_words(of_no))))
            }
        }
    }

    fn call(&self, at: u32, name: &str, args: &[u32]) -> Result<Type, Fault> {
        let seen: Vec<ArgType<'_>> = args.iter().map(|&arg| self.argument(arg)).collect();
        if let Some(answer) = self.vocabulary.call(name, &seen) {
            return answer.map_err(|message| self.fault(at, message));
        }
        if name.eq_ignore_ascii_case("percent") && args.len() == 1 {
            return self.plain("percent", args[0]).map(|_| Type::Text);
        }
        let Some(function) = function(name) else {
            let mut known = self.vocabulary.functions();
            known.extend(rule_functions().map(String::from));
            let start = self.expr.places.get(at as usize).map_or(0, |place| place.start);
            let base = name.split('.').next().map_or(0, |base| base.len() as u32);
            let fault = Fault::new(start..start + base, format!("there is no function `{name}` here"));
            return Err(offer(fault, name, &known));
        };
        match function.refuses(args.len()) {
            Some(message) => Err(self.fault(at, message)),
            None => self.built_in(at, function, args),
        }
    }

    fn argument(&self, at: u32) -> ArgType<'a> {
        let kind = match self.found(at) {
            Found::UnknownName => None,
            Found::Zero => Some(Type::Number(Dim::NONE)),
            Found::Type(known) => Some(known),
        };
        let text = match self.expr.nodes.get(at as usize) {
            Some(Node::Text(text)) => Some(text.as_str()),
            _ => None,
        };
        ArgType { kind, name: self.bare(at), text }
    }

    fn built_in(&self, at: u32, function: &Function, args: &[u32]) -> Result<Type, Fault> {
        let first = args[0];
        match function.dims {
            Dims::Plain => {
                args.iter().try_for_each(|&arg| self.plain(function.name, arg).map(|_| ()))?;
                Ok(Type::Number(Dim::NONE))
            }
            Dims::Drop => self.number(first).map(|_| Type::Number(Dim::NONE)),
            Dims::First => self.number(first),
            Dims::Power => self.power(first, args[1]),
            Dims::Same => {
                let mut kept = (first, self.number(first)?);
                for &arg in &args[1..] {
                    let shared = self.shared(at, kept.0, arg, "does not go into one list with")?;
                    // What has a dimension is what the next one is held against.
                    kept = if shared == kept.1 && self.found(kept.0) != Found::Zero { kept } else { (arg, shared) };
                }
                Ok(kept.1)
            }
            Dims::Root => match self.number(first)? {
                Type::Number(dim) => dim
                    .root()
                    .map(Type::Number)
                    .ok_or_else(|| self.fault(first, format!("{} has no square root", in_words(Type::Number(dim))))),
                other => Ok(other),
            },
        }
    }

    fn plain(&self, name: &str, at: u32) -> Result<Type, Fault> {
        match self.number(at)? {
            plain @ (Type::Number(Dim::NONE) | Type::AnyNumber) => Ok(plain),
            other => Err(self
                .fault(at, format!("`{name}` takes a plain number, not {}", in_words(other)))
                .help("divide it by a unit first, as in `width / 1um`")),
        }
    }
}

fn in_words(kind: Type) -> String {
    match kind {
        Type::Bool => "a truth value".into(),
        Type::Number(dim) => dim.in_words(),
        Type::AnyNumber => "a number".into(),
        Type::Text => "a text".into(),
        Type::Word(_) => "a word".into(),
    }
}

fn offer(fault: Fault, name: &str, known: &[String]) -> Fault {
    match nearest(name, known.iter().map(String::as_str)) {
        Some(near) => fault.help(format!("did you mean `{near}`?")),
        None => fault,
    }
}

#[cfg(test)]
mod tests;
