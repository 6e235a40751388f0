use super::*;
use crate::expr::{Syntax, parse};
use proptest::prelude::*;

const SPICE: Syntax = Syntax::Spice { mega: false };

struct Few;

impl Parameters for Few {
    fn name(&self, name: &str) -> Result<Option<f64>, String> {
        match name {
            "zero" => Ok(Some(0.0)),
            "w" => Ok(Some(20e-6)),
            "nf" => Ok(Some(4.0)),
            "broken" => Err("`broken` is defined by itself".into()),
            _ => Ok(None),
        }
    }

    fn call(&self, name: &str, args: &[f64]) -> Result<Option<f64>, String> {
        match (name, args) {
            ("twice", [x]) => Ok(Some(2.0 * x)),
            ("twice", _) => Err("`twice` takes one value".into()),
            _ => Ok(None),
        }
    }

    fn names(&self) -> Vec<String> {
        vec!["zero".into(), "w".into(), "nf".into()]
    }
}

fn value(text: &str) -> Result<f64, Fault> {
    evaluate_spice(&parse(text, SPICE).unwrap(), &Few)
}

fn near(text: &str, expected: f64) {
    let found = value(text).unwrap_or_else(|fault| panic!("{text}: {fault:?}"));
    assert!((found - expected).abs() <= 1e-12 * expected.abs().max(1.0), "{text}: {found}, not {expected}");
}

/// Ngspice User's Manual v39, section 2.9.5: its examples, its table of precedence (`2**3**2`, `-2**2` follow from it) and its
/// table of functions.
#[test]
fn published_expressions() {
    let table = [
        ("1 || 0", 1.0),
        ("1 && 0", 0.0),
        ("!1", 0.0),
        ("!0", 1.0),
        ("5 % 3", 2.0),
        ("5 \\ 3", 1.0),
        ("2**3**2", 64.0),
        ("-2**2", 4.0),
        ("nint(2.5)", 2.0),
        ("nint(3.5)", 4.0),
        ("int(-2.7)", -2.0),
        ("floor(-2.7)", -3.0),
        ("ceil(-2.7)", -2.0),
        ("pwr(-2,2)", 4.0),
        ("pow(-2,2)", 4.0),
        ("pwr(-2,3)", 8.0),
        ("pow(-2,3)", -8.0),
        ("sgn(-3)", -1.0),
        ("sgn(0)", 0.0),
        ("log(10)", std::f64::consts::LN_10),
        ("ln(10)", std::f64::consts::LN_10),
        ("ternary_fcn(1,2,3)", 2.0),
        ("1?2:3", 2.0),
        ("0?2:3", 3.0),
        ("min(1,2)", 1.0),
        ("max(1,2)", 2.0),
    ];
    for (text, expected) in table {
        near(text, expected);
    }
}

/// Observed with the circuit simulator ngspice, version 39.
#[test]
fn as_a_simulator_computes() {
    let table = [
        ("-5 % 3", -2.0),
        ("-5 \\ 3", -1.0),
        ("5.7 % 3.2", 2.5),
        ("2^3^2", 64.0),
        ("!0 + 1", 2.0),
        ("1 || 0 && 0", 1.0),
        ("1 < 2 == 1", 1.0),
        ("2*-3", -6.0),
        ("2--3", 5.0),
        ("0?1:0?2:3", 3.0),
        ("1?2:0?3:4", 2.0),
        ("1>2?5:6", 6.0),
        ("3 <> 4", 1.0),
        ("5 != 5", 0.0),
        ("nint(-0.5)", 0.0),
        ("log10(100)", 2.0),
        ("atan(1)", std::f64::consts::FRAC_PI_4),
        ("arctan(1)", std::f64::consts::FRAC_PI_4),
        ("1meg", 1e6),
        ("1a", 1.0),
        ("1t", 1e12),
    ];
    for (text, expected) in table {
        near(text, expected);
    }
}

/// Values of elementary functions (M. Abramowitz and I. A. Stegun, *Handbook of Mathematical Functions*, 1964, chapter 4; from
/// memory), and nominal values of the random ones (common practice, no source).
#[test]
fn functions() {
    let table = [
        ("sqrt(2)", std::f64::consts::SQRT_2),
        ("exp(1)", std::f64::consts::E),
        ("abs(-3)", 3.0),
        ("sin(1)", 0.8414709848078965),
        ("cos(1)", 0.5403023058681398),
        ("tan(1)", 1.557407724654902),
        ("asin(1)", std::f64::consts::FRAC_PI_2),
        ("acos(-1)", std::f64::consts::PI),
        ("sinh(1)", 1.1752011936438014),
        ("cosh(1)", 1.5430806348152437),
        ("tanh(1)", 0.7615941559557649),
        ("asinh(0)", 0.0),
        ("acosh(1)", 0.0),
        ("atanh(0)", 0.0),
        ("SQRT(4)", 2.0),
        ("sgn(7)", 1.0),
        ("min(3,1,2)", 1.0),
        ("agauss(5,1,3)", 5.0),
        ("gauss(5,0.1,3)", 5.0),
        ("aunif(5,1)", 5.0),
        ("unif(5,0.1)", 5.0),
        ("limit(5,1)", 5.0),
        ("twice(w) * 1meg", 40.0),
        ("w/nf*1e6", 5.0),
        ("(-2)**2", 4.0),
        ("2**-1", 0.5),
    ];
    for (text, expected) in table {
        near(text, expected);
    }
}

#[test]
fn comparisons_are_exact_and_numbers_are_truths() {
    near("0.1 + 0.2 == 0.3", 0.0);
    near("3 && -1", 1.0);
    near("!5", 0.0);
    near("0.5 ? 1 : 2", 1.0);
}

#[test]
fn what_is_left_out_is_not_looked_at() {
    near("zero == 0 ? 7 : 1/zero", 7.0);
    near("zero && nothing", 0.0);
    near("1 || 1/0", 1.0);
    near("ternary_fcn(zero, nothing, 3)", 3.0);
    assert!(value("1 && 1/0").is_err());
}

#[test]
fn faults_say_why() {
    let table = [
        ("1 + nff", "nff", "no parameter `nff`", Some("did you mean `nf`?")),
        ("2*sqr(2)", "sqr(2)", "no function `sqr`", Some("did you mean `sqrt`?")),
        ("1/(w-w)", "w-w", "division by zero", None),
        ("1 % zero", "zero", "division by zero", None),
        ("1 \\ zero", "zero", "division by zero", None),
        ("1 + sqrt(-4)", "sqrt(-4)", "`sqrt(-4)` has no value", None),
        ("ln(0)", "ln(0)", "has no value", None),
        ("exp(1000)", "exp(1000)", "has no value", None),
        ("1e300*1e300", "1e300*1e300", "too large", None),
        ("sqrt(1,2)", "sqrt(1,2)", "takes one value, not 2", None),
        ("min(1)", "min(1)", "2 values or more", None),
        ("ternary_fcn(1)", "ternary_fcn(1)", "3 values", None),
        ("agauss()", "agauss()", "1 to 4 values", None),
        ("2*broken", "broken", "defined by itself", None),
        ("twice(1,2)", "twice(1,2)", "takes one value", None),
        ("1+v(out)*2", "v(out)", "while a simulation runs", None),
        ("temper-27", "temper", "while a simulation runs", None),
        ("\"x\"", "\"x\"", "text", None),
        ("(-2)**3", "(-2)**3", "disagree", None),
        ("zero**-1", "zero**-1", "division by zero", None),
    ];
    for (text, marked, part, help) in table {
        let fault = value(text).unwrap_err();
        assert_eq!(&text[fault.at.start as usize..fault.at.end as usize], marked, "{text}: {}", fault.message);
        assert!(fault.message.contains(part), "{text}: {}", fault.message);
        if help.is_some() {
            assert_eq!(fault.help.as_deref(), help, "{text}");
        }
    }
}

#[test]
fn long_chains_work() {
    assert_eq!(value(&format!("1{}", "+1".repeat(100_000))), Ok(100_001.0));
    assert_eq!(value(&format!("{}7", "0?1:".repeat(100_000))), Ok(7.0));
    assert_eq!(value(&format!("{}7", "-".repeat(100_000))), Ok(7.0));
}

#[test]
fn doubtful_places() {
    let table: [(&str, &[&str]); 14] = [
        ("2**3**2", &["2**3**2"]),
        ("(2**3)**2", &[]),
        ("2**(3**2)", &[]),
        ("1 + -2**2", &["-2**2"]),
        ("(-2)**2", &[]),
        ("2**-2", &[]),
        ("2*log(x)", &["log"]),
        ("ln(x)", &[]),
        ("1a + 2", &["1a"]),
        ("4k7", &["4k7"]),
        ("2*1mil", &["1mil"]),
        ("2*1T", &["1T"]),
        ("1mil", &[]),
        ("10V + 5meg", &[]),
    ];
    for (text, expected) in table {
        let expr = parse(text, SPICE).unwrap();
        let found = doubts(&expr, text);
        let marked: Vec<&str> = found.iter().map(|(at, _)| &text[at.start as usize..at.end as usize]).collect();
        assert_eq!(marked, expected, "{text}");
    }
}

/// A tree whose value is computed beside it.
fn sums() -> impl Strategy<Value = (String, f64)> {
    let leaf = (1u32..20).prop_map(|number| (number.to_string(), f64::from(number)));
    leaf.prop_recursive(5, 40, 3, |inner| {
        prop_oneof![
            (inner.clone(), inner.clone()).prop_map(|((a, x), (b, y))| (format!("({a})+({b})"), x + y)),
            (inner.clone(), inner.clone()).prop_map(|((a, x), (b, y))| (format!("({a}) - ({b})"), x - y)),
            (inner.clone(), inner.clone()).prop_map(|((a, x), (b, y))| (format!("min({a},{b})"), x.min(y))),
            (inner.clone(), inner.clone()).prop_map(|((a, x), (b, y))| (format!("({a})<({b})"), truth(x < y))),
            inner.clone().prop_map(|(a, x)| (format!("-({a})"), -x)),
            (inner.clone(), inner.clone(), inner)
                .prop_map(|((a, x), (b, y), (c, z))| (format!("({a})?({b}):({c})"), if x != 0.0 { y } else { z })),
        ]
    })
}

proptest! {
    #[test]
    fn values_of_random_trees((text, expected) in sums()) {
        prop_assert_eq!(value(&text), Ok(expected));
    }

    #[test]
    fn no_value_but_no_panic(text in "(1|a|w|0|[-+*/%\\\\<>!(),?:]|\\*\\*|sqrt\\(|ln\\(){0,20}") {
        if let Ok(expr) = parse(&text, SPICE) {
            if let Err(fault) = evaluate_spice(&expr, &Few) {
                prop_assert!(text.get(fault.at.start as usize..fault.at.end as usize).is_some());
            }
            let _ = doubts(&expr, &text);
        }
    }
}
