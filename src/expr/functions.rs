//! The functions that both syntaxes know (Ngspice User's Manual, version 39, section 2.9.5), as one table: how they
//! compute, and what they do to dimensions.

use std::ops::RangeInclusive;

/// What a function asks and gives, in dimensions.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Dims {
    /// Plain numbers give a plain number.
    Plain,
    /// All arguments share a dimension, which the result has.
    Same,
    /// Any dimension gives a plain number.
    Drop,
    /// The square root of the dimension.
    Root,
    /// The first argument's dimension to the power of the second.
    Power,
    /// The first argument's dimension; the others, which only spread it, are left alone.
    First,
}

pub(super) struct Function {
    pub(super) name: &'static str,
    pub(super) takes: RangeInclusive<usize>,
    pub(super) dims: Dims,
    pub(super) compute: fn(&[f64]) -> f64,
}

const fn one(name: &'static str, dims: Dims, compute: fn(&[f64]) -> f64) -> Function {
    Function { name, takes: 1..=1, dims, compute }
}

const fn more(name: &'static str, takes: RangeInclusive<usize>, dims: Dims, compute: fn(&[f64]) -> f64) -> Function {
    Function { name, takes, dims, compute }
}

/// Random functions give their nominal value: what a design means to have (common practice, no source).
pub(super) const FUNCTIONS: [Function; 33] = [
    one("sqrt", Dims::Root, |x| x[0].sqrt()),
    one("exp", Dims::Plain, |x| x[0].exp()),
    one("ln", Dims::Plain, |x| x[0].ln()),
    one("log", Dims::Plain, |x| x[0].ln()),
    one("log10", Dims::Plain, |x| x[0].log10()),
    one("abs", Dims::Same, |x| x[0].abs()),
    one("sgn", Dims::Drop, |x| if x[0] == 0.0 { 0.0 } else { x[0].signum() }),
    one("int", Dims::Plain, |x| x[0].trunc()),
    one("nint", Dims::Plain, |x| x[0].round_ties_even()),
    one("floor", Dims::Plain, |x| x[0].floor()),
    one("ceil", Dims::Plain, |x| x[0].ceil()),
    more("pow", 2..=2, Dims::Power, |x| x[0].powf(x[1])),
    more("pwr", 2..=2, Dims::Power, |x| x[0].abs().powf(x[1])),
    more("min", 2..=64, Dims::Same, |x| x.iter().copied().fold(f64::INFINITY, f64::min)),
    more("max", 2..=64, Dims::Same, |x| x.iter().copied().fold(f64::NEG_INFINITY, f64::max)),
    one("sin", Dims::Plain, |x| x[0].sin()),
    one("cos", Dims::Plain, |x| x[0].cos()),
    one("tan", Dims::Plain, |x| x[0].tan()),
    one("asin", Dims::Plain, |x| x[0].asin()),
    one("acos", Dims::Plain, |x| x[0].acos()),
    one("atan", Dims::Plain, |x| x[0].atan()),
    one("arctan", Dims::Plain, |x| x[0].atan()),
    one("sinh", Dims::Plain, |x| x[0].sinh()),
    one("cosh", Dims::Plain, |x| x[0].cosh()),
    one("tanh", Dims::Plain, |x| x[0].tanh()),
    one("asinh", Dims::Plain, |x| x[0].asinh()),
    one("acosh", Dims::Plain, |x| x[0].acosh()),
    one("atanh", Dims::Plain, |x| x[0].atanh()),
    more("agauss", 1..=4, Dims::First, |x| x[0]),
    more("gauss", 1..=4, Dims::First, |x| x[0]),
    more("aunif", 1..=3, Dims::First, |x| x[0]),
    more("unif", 1..=3, Dims::First, |x| x[0]),
    more("limit", 1..=2, Dims::First, |x| x[0]),
];

/// The function of this name, in any case.
pub(super) fn function(name: &str) -> Option<&'static Function> {
    FUNCTIONS.iter().find(|function| function.name.eq_ignore_ascii_case(name))
}

impl Function {
    /// A complaint about the number of arguments, if there is one.
    pub(super) fn refuses(&self, count: usize) -> Option<String> {
        if self.takes.contains(&count) {
            return None;
        }
        let (least, most) = (*self.takes.start(), *self.takes.end());
        let takes = match (least, most) {
            (1, 1) => "one value".to_string(),
            _ if least == most => format!("{least} values"),
            (_, 64) => format!("{least} values or more"),
            _ => format!("{least} to {most} values"),
        };
        Some(format!("`{}` takes {takes}, not {count}", self.name))
    }
}
