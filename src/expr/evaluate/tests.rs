use super::*;
use crate::expr::{Syntax, parse};
use proptest::prelude::*;

struct Device;

fn volts(value: f64) -> Value {
    Value::Number { value, dim: Dim::VOLT }
}

impl Scope for Device {
    fn name(&self, name: &str) -> Value {
        match name {
            "vds.max" => volts(40.0),
            "width" => Value::Number { value: 20e-6, dim: Dim::METRE },
            "fingers" => Value::Number { value: 4.0, dim: Dim::NONE },
            "takes" => Value::Number { value: 5e-9, dim: Dim::SECOND },
            "rate" => Value::Number { value: 2e6, dim: Dim::HERTZ },
            "class.kind" => Value::Text("nmos".into()),
            "on" => Value::Bool(true),
            "off" => Value::Bool(false),
            _ => Value::Unknown,
        }
    }

    fn call(&self, name: &str, args: &[Arg<'_>]) -> Option<Value> {
        match (name, args) {
            ("tied", [a, b]) => Some(Value::Bool((a.name, b.name) == (Some("b"), Some("s")))),
            ("v.max", [a, b]) if a.name.is_some() && b.name.is_some() => Some(volts(12.0)),
            ("param", [text]) if text.value == Value::Text("w".into()) => {
                Some(Value::Number { value: 20e-6, dim: Dim::NONE })
            }
            _ => None,
        }
    }
}

fn value(text: &str) -> Value {
    evaluate(&parse(text, Syntax::Rule).unwrap(), &Device)
}

/// Three-valued logic: S. C. Kleene, *Introduction to Metamathematics*, 1952, section 64 (from memory).
#[test]
fn kleene() {
    let table = [
        ("off && x", Value::Bool(false)),
        ("x && off", Value::Bool(false)),
        ("on && x", Value::Unknown),
        ("x && on", Value::Unknown),
        ("x && x", Value::Unknown),
        ("on || x", Value::Bool(true)),
        ("x || on", Value::Bool(true)),
        ("off || x", Value::Unknown),
        ("x || off", Value::Unknown),
        ("not x", Value::Unknown),
        ("not off and on", Value::Bool(true)),
        ("x == x", Value::Unknown),
        ("x < 5V", Value::Unknown),
        ("if(x, on, on)", Value::Bool(true)),
        ("if(x, on, off)", Value::Unknown),
        ("if(on, 5V, x)", volts(5.0)),
        ("off ? x : 5V", volts(5.0)),
        ("x + 1V", Value::Unknown),
        ("min(x, 1V)", Value::Unknown),
        ("true && !false", Value::Bool(true)),
    ];
    for (text, expected) in table {
        assert_eq!(value(text), expected, "{text}");
    }
}

#[test]
fn numbers_are_compared_with_a_tolerance() {
    let table = [
        ("takes * rate <= 1%", true),
        ("takes * rate >= 1%", true),
        ("takes * rate == 1%", true),
        ("takes * rate < 1%", false),
        ("takes * rate > 1%", false),
        ("takes * rate != 1%", false),
        ("0.1V + 0.2V <= 0.3V", true),
        ("1V < 1.000001V", true),
        ("1V == 1.000001V", false),
        ("vds.max <= 40V", true),
        ("vds.max <= 39.9V", false),
        ("0 == 0", true),
        ("vds.max > 0", true),
        ("width == 20um", true),
        ("param('w') <= 20um", true),
        ("fingers % 2 == 0", true),
        ("class.kind == \"NMOS\"", true),
        ("class.kind != \"nmos\"", false),
        ("tied(b, s)", true),
        ("tied(b, d)", false),
        ("v(iso, s).max == 12V", true),
        ("on == not off", true),
        ("(-2)**3 == -8", true),
    ];
    for (text, expected) in table {
        assert_eq!(value(text), Value::Bool(expected), "{text}");
    }
    let infinite = Value::Number { value: f64::INFINITY, dim: Dim::VOLT };
    assert_eq!(combine(Binary::Equal, &infinite, &volts(5.0)), Value::Bool(false));
    assert_eq!(combine(Binary::LessEqual, &infinite, &infinite), Value::Bool(true));
    assert_eq!(combine(Binary::LessEqual, &volts(5.0), &infinite), Value::Bool(true));
    assert_eq!(combine(Binary::Subtract, &infinite, &infinite), Value::Unknown);
}

#[test]
fn dimensions_follow() {
    let length = |value| Value::Number { value, dim: Dim::METRE };
    let plain = |value| Value::Number { value, dim: Dim::NONE };
    let table = [
        ("12V * 2A", Value::Number { value: 24.0, dim: Dim::WATT }),
        ("12V / 3A", Value::Number { value: 4.0, dim: Dim::OHM }),
        ("sqrt(3m * 12m)", length(6.0)),
        ("abs(-3m)", length(3.0)),
        ("max(1m, 2m, 0)", length(2.0)),
        ("(2m)**2", Value::Number { value: 4.0, dim: Dim::METRE.powi(2) }),
        ("sgn(-2V)", plain(-1.0)),
        ("nint(2.5)", plain(2.0)),
        ("percent(0.5)", Value::Text("50 %".into())),
        ("1V / 0", Value::Unknown),
        ("1V < 1A", Value::Unknown),
        ("1V + 1A", Value::Unknown),
        ("sqrt(-1)", Value::Unknown),
        ("sqrt(2V)", Value::Unknown),
        ("(2V)**0.5", Value::Unknown),
        ("nothing(1)", Value::Unknown),
        ("sqrt(1,2)", Value::Unknown),
        ("-on", Value::Unknown),
    ];
    for (text, expected) in table {
        assert_eq!(value(text), expected, "{text}");
    }
}

#[test]
fn long_chains_work() {
    assert_eq!(value(&format!("off{}", " or off".repeat(100_000))), Value::Bool(false));
    assert_eq!(value(&format!("1V{}", "+1V".repeat(100_000))), volts(100_001.0));
}

proptest! {
    #[test]
    fn any_expression_is_harmless(text in "(1V|2|x|on|0|'t'|[-+*/%<>!(),?:]|\\*\\*|==|&&|\\|\\||sqrt\\(|min\\(){0,20}") {
        if let Ok(expr) = parse(&text, Syntax::Rule) {
            let _ = evaluate(&expr, &Device);
        }
    }
}
