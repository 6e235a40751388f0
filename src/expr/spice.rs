//! What a netlist's parameter is worth, or why it has no value; and where simulators would disagree about it.

use super::functions::{FUNCTIONS, function};
use super::walk::{Algebra, walk};
use super::{Binary, Expr, Fault, Node, Unary};
use crate::names::nearest;
use crate::quantity::{Dim, show, spice_number};
use std::ops::Range;

/// Gives the names of a netlist's expression their values. Names are handed over as written; comparing them without case is
/// the scope's affair.
pub trait Parameters {
    /// The value of a parameter; `Ok(None)` if there is none of this name.
    ///
    /// # Errors
    /// Why a parameter that exists has no value, in one line.
    fn name(&self, name: &str) -> Result<Option<f64>, String>;

    /// The value of a user's function (`.func`); `Ok(None)` if there is none of this name. It goes before the built-in ones.
    ///
    /// # Errors
    /// Why the call has no value, in one line.
    fn call(&self, name: &str, args: &[f64]) -> Result<Option<f64>, String> {
        let _ = (name, args);
        Ok(None)
    }

    /// Names to offer for a misspelt one; asked only when something is wrong.
    fn names(&self) -> Vec<String> {
        Vec::new()
    }
}

/// The value of a netlist's expression. Comparisons are exact; a logical result is 1 or 0, and what is not zero is true.
/// What a decided condition leaves out (`x == 0 ? 0 : 1/x`) is not looked at.
///
/// # Errors
/// Why it has no value, with the place in the expression's text: an unknown name or function, a wrong number of arguments, a
/// division by zero, a function outside its domain, a number too large.
pub fn evaluate_spice(expr: &Expr, parameters: &dyn Parameters) -> Result<f64, Fault> {
    walk(expr, &Spice { expr, parameters }).unwrap_or_else(|| Err(Fault::new(0..0, "the expression is empty")))
}

struct Spice<'a> {
    expr: &'a Expr,
    parameters: &'a dyn Parameters,
}

impl Spice<'_> {
    fn fault(&self, at: u32, message: impl Into<String>) -> Fault {
        Fault::new(self.expr.places.get(at as usize).cloned().unwrap_or_default(), message)
    }

    fn finite(&self, at: u32, value: f64) -> Result<f64, Fault> {
        match value {
            _ if value.is_finite() => Ok(value),
            _ if value.is_nan() => Err(self.fault(at, "this has no value")),
            _ => Err(self.fault(at, "the value of this is too large")),
        }
    }

    fn unknown_name(&self, at: u32, name: &str) -> Fault {
        let lower = name.to_ascii_lowercase();
        if ["time", "temper", "hertz"].contains(&lower.as_str()) {
            return self.fault(at, format!("`{name}` has a value only while a simulation runs"));
        }
        if let Some(probe) = self.probe_around(at) {
            return self.unknown_function(probe.0, probe.1);
        }
        let fault = self.fault(at, format!("there is no parameter `{name}` here"));
        suggest(fault, name, &self.parameters.names())
    }

    /// The `v(…)` or `i(…)` that a net's or device's name stands in.
    fn probe_around(&self, at: u32) -> Option<(u32, &str)> {
        (0u32..).zip(&self.expr.nodes).find_map(|(call, node)| match node {
            Node::Call { name, args } if is_probe(name) && args.contains(&at) => Some((call, name.as_str())),
            _ => None,
        })
    }

    fn unknown_function(&self, at: u32, name: &str) -> Fault {
        if is_probe(name) {
            return self.fault(at, format!("`{name}(…)` has a value only while a simulation runs"));
        }
        let known: Vec<String> = FUNCTIONS.iter().map(|function| function.name.to_string()).collect();
        suggest(self.fault(at, format!("there is no function `{name}`")), name, &known)
    }
}

fn is_probe(name: &str) -> bool {
    name.eq_ignore_ascii_case("v") || name.eq_ignore_ascii_case("i")
}

fn suggest(fault: Fault, name: &str, known: &[String]) -> Fault {
    match nearest(name, known.iter().map(String::as_str)) {
        Some(near) => fault.help(format!("did you mean `{near}`?")),
        None => fault,
    }
}

impl Algebra for Spice<'_> {
    type Value = f64;
    type Error = Fault;

    fn leaf(&self, at: u32) -> Result<f64, Fault> {
        match &self.expr.nodes[at as usize] {
            Node::Number { value, .. } => Ok(*value),
            Node::Name(name) => match self.parameters.name(name) {
                Ok(Some(value)) => Ok(value),
                Ok(None) => Err(self.unknown_name(at, name)),
                Err(message) => Err(self.fault(at, message)),
            },
            _ => Err(self.fault(at, "a text is no number")),
        }
    }

    fn unary(&self, at: u32, operand: f64) -> Result<f64, Fault> {
        Ok(match self.expr.nodes[at as usize] {
            Node::Unary(Unary::Not, _) => truth(operand == 0.0),
            _ => -operand,
        })
    }

    fn binary(&self, at: u32, left: f64, right: f64) -> Result<f64, Fault> {
        let Node::Binary(operator, _, right_at) = self.expr.nodes[at as usize] else {
            return Err(self.fault(at, "this has no value"));
        };
        let divides = matches!(operator, Binary::Divide | Binary::Remainder | Binary::IntegerDivide);
        if divides && right == 0.0 {
            return Err(self.fault(right_at, "division by zero: this is 0"));
        }
        let value = match operator {
            Binary::Power => power(left, right).map_err(|message| self.fault(at, message))?,
            Binary::Multiply => left * right,
            Binary::Divide => left / right,
            Binary::Remainder => left % right,
            Binary::IntegerDivide => (left / right).trunc(),
            Binary::Add => left + right,
            Binary::Subtract => left - right,
            Binary::Equal => truth(left == right),
            Binary::NotEqual => truth(left != right),
            Binary::LessEqual => truth(left <= right),
            Binary::GreaterEqual => truth(left >= right),
            Binary::Less => truth(left < right),
            Binary::Greater => truth(left > right),
            Binary::And => truth(left != 0.0 && right != 0.0),
            Binary::Or => truth(left != 0.0 || right != 0.0),
        };
        self.finite(at, value)
    }

    fn call(&self, at: u32, args: Vec<f64>) -> Result<f64, Fault> {
        let Node::Call { name, .. } = &self.expr.nodes[at as usize] else {
            return Err(self.fault(at, "this has no value"));
        };
        if let Some(value) = self.parameters.call(name, &args).map_err(|message| self.fault(at, message))? {
            return self.finite(at, value);
        }
        if name.eq_ignore_ascii_case("ternary_fcn") {
            return Err(self.fault(at, format!("`ternary_fcn` takes 3 values, not {}", args.len())));
        }
        let function = function(name).ok_or_else(|| self.unknown_function(at, name))?;
        if let Some(message) = function.refuses(args.len()) {
            return Err(self.fault(at, message));
        }
        let value = (function.compute)(&args);
        if value.is_finite() {
            return Ok(value);
        }
        let shown: Vec<String> = args.iter().map(|&arg| show(arg, Dim::NONE)).collect();
        Err(self.fault(at, format!("`{}({})` has no value", function.name, shown.join(", "))))
    }

    fn holds(&self, value: &f64) -> Option<bool> {
        Some(*value != 0.0)
    }

    fn truth(&self, holds: bool) -> f64 {
        truth(holds)
    }

    fn either(&self, yes: f64, _no: f64) -> f64 {
        yes
    }
}

fn truth(holds: bool) -> f64 {
    f64::from(u8::from(holds))
}

/// `left ** right`. With a negative base, simulators agree only about even whole powers: some use the base's magnitude
/// (observed with ngspice 39, where `(-2)**3` is 8), some its sign (-8).
fn power(left: f64, right: f64) -> Result<f64, &'static str> {
    if left < 0.0 && right % 2.0 != 0.0 {
        return Err("simulators disagree about this power of a negative number: write pow(x, y) or pwr(x, y)");
    }
    if left == 0.0 && right < 0.0 {
        return Err("division by zero: a negative power of 0");
    }
    Ok(left.powf(right))
}

const TOWER: &str = "this is read from left to right, (a**b)**c; some tools read a**(b**c): use brackets";
const SIGN: &str = "the sign is taken before the power here, (-a)**b; simulators may read -(a**b): use brackets";
const LOG: &str = "`log` is the natural logarithm here; some simulators take it to base 10: write ln or log10";
const SCALE: &str = "in expressions, simulators may not know the scale factors `t` and `mil`: write e12 or 25.4u";

/// Places in a netlist's expression that simulators do not agree about, with a text on each. `text` is what the expression was
/// parsed from.
pub fn doubts(expr: &Expr, text: &str) -> Vec<(Range<u32>, &'static str)> {
    let place = |at: u32| expr.places.get(at as usize).cloned().unwrap_or_default();
    let mut doubts = Vec::new();
    for (at, node) in (0u32..).zip(&expr.nodes) {
        let own = place(at);
        match node {
            // An operand in brackets starts behind its bracket.
            Node::Binary(Binary::Power, left, _) if place(*left).start == own.start => {
                match expr.nodes.get(*left as usize) {
                    Some(Node::Binary(Binary::Power, ..)) => doubts.push((own, TOWER)),
                    Some(Node::Unary(Unary::Negate, _)) => doubts.push((own, SIGN)),
                    _ => {}
                }
            }
            Node::Call { name, .. } if name.eq_ignore_ascii_case("log") => {
                doubts.push((own.start..own.start + name.len() as u32, LOG));
            }
            Node::Number { .. } => {
                let written = text.get(own.start as usize..own.end as usize).unwrap_or("");
                doubts.extend(number_doubt(written, expr.nodes.len() > 1).map(|doubt| (own, doubt)));
            }
            _ => {}
        }
    }
    doubts
}

fn number_doubt(written: &str, in_expression: bool) -> Option<&'static str> {
    let number = spice_number(written, false)?;
    let scaled = written.get(..number.rest)?.to_ascii_lowercase();
    let unlisted = in_expression && (scaled.ends_with('t') || scaled.ends_with("mil"));
    number.doubtful.or(unlisted.then_some(SCALE))
}

#[cfg(test)]
mod tests;
