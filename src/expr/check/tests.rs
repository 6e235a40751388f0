use super::*;
use crate::expr::{Scope, Syntax, Value, evaluate, parse};
use proptest::prelude::*;

const KINDS: &[&str] = &["nmos", "pmos", "diode"];
const NAMES: [(&str, Type); 10] = [
    ("vds.max", Type::Number(Dim::VOLT)),
    ("current", Type::Number(Dim::AMPERE)),
    ("density", Type::Number(Dim::DENSITY)),
    ("width", Type::Number(Dim::METRE)),
    ("power", Type::Number(Dim::WATT)),
    ("duty", Type::Number(Dim::NONE)),
    ("on", Type::Bool),
    ("name", Type::Text),
    ("class.kind", Type::Word(KINDS)),
    ("diode", Type::Number(Dim::VOLT)),
];

struct Words;

impl Vocabulary for Words {
    fn name(&self, name: &str) -> Option<Type> {
        NAMES.iter().find(|(known, _)| *known == name).map(|(_, kind)| *kind)
    }

    fn call(&self, name: &str, args: &[ArgType<'_>]) -> Option<Result<Type, String>> {
        let pin = |arg: &ArgType<'_>| arg.name.is_some_and(|name| ["d", "g", "s", "b"].contains(&name));
        match name {
            "tied" if args.iter().all(pin) => Some(Ok(Type::Bool)),
            "tied" => Some(Err("`tied` takes pins, such as tied(b, s)".into())),
            "v.max" => Some(Ok(Type::Number(Dim::VOLT))),
            "param" => Some(match args {
                [ArgType { text: Some(_), .. }] => Ok(Type::AnyNumber),
                _ => Err("`param` takes a name in quotes".into()),
            }),
            _ => None,
        }
    }

    fn names(&self) -> Vec<String> {
        NAMES.iter().map(|(name, _)| (*name).into()).collect()
    }

    fn functions(&self) -> Vec<String> {
        ["tied", "v", "param"].map(String::from).to_vec()
    }
}

fn checked(text: &str) -> Result<Type, Fault> {
    check(&mut parse(text, Syntax::Rule).unwrap(), &Words)
}

#[test]
fn sound_rules() {
    let volt = Type::Number(Dim::VOLT);
    let plain = Type::Number(Dim::NONE);
    let table = [
        ("vds.max <= 40V", Type::Bool),
        ("vds.max > 0", Type::Bool),
        ("0 < vds.max", Type::Bool),
        ("vds.max > -0", Type::Bool),
        ("class.kind == nmos && on", Type::Bool),
        ("pmos != class.kind", Type::Bool),
        ("class.kind == \"NMOS\"", Type::Bool),
        ("class.kind == diode", Type::Bool),
        ("class.kind == class.kind", Type::Bool),
        ("name == 'xls.m7'", Type::Bool),
        ("name == class.kind", Type::Bool),
        ("not tied(b, s) or on", Type::Bool),
        ("on == false", Type::Bool),
        ("v(iso, s).max + 1V", volt),
        ("param('w') <= 20um", Type::Bool),
        ("param('w') * 2", Type::AnyNumber),
        ("vds.max * current <= power", Type::Bool),
        ("current / width > density", Type::Bool),
        ("vds.max / 2", volt),
        ("sqrt(vds.max * vds.max)", volt),
        ("sqrt(vds.max ** 2)", volt),
        ("vds.max ** -2 * 1V**2 * 1V", volt),
        ("min(vds.max, 5V, 0)", volt),
        ("max(0, vds.max)", volt),
        ("max(0, 0)", plain),
        ("vds.max % 1V", volt),
        ("floor(width / 1um)", plain),
        ("sgn(vds.max)", plain),
        ("if(on, vds.max, 0)", volt),
        ("on ? 0 : 5V", volt),
        ("on ? name : class.kind", Type::Text),
        ("duty <= 1%", Type::Bool),
        ("percent(duty)", Type::Text),
        ("-vds.max", volt),
        ("2 \\ 1", plain),
        ("limit(vds.max, 0.1)", volt),
    ];
    for (text, expected) in table {
        assert_eq!(checked(text), Ok(expected), "{text}");
    }
}

#[test]
fn mistakes_are_named() {
    let table = [
        ("vds.max <= 40uA", "vds.max <= 40uA", "a voltage cannot be compared with a current", ""),
        ("vds.max == 40uA", "vds.max == 40uA", "a voltage cannot be compared with a current", ""),
        ("width <= 2000", "width <= 2000", "a length cannot be compared with a plain number", "such as 2000um"),
        ("duty + width < 1", "duty + width", "a plain number cannot be added to a length", ""),
        ("density < current", "density < current", "a current per width cannot be compared with a current", ""),
        ("power - current", "power - current", "a power does not go into a difference with a current", ""),
        ("min(width, 5V)", "min(width, 5V)", "a length does not go into one list with a voltage", ""),
        ("min(0, width, 5V)", "min(0, width, 5V)", "a length does not go into one list with a voltage", ""),
        ("vds.mx > 0", "vds.mx", "there is no name `vds.mx` here", "did you mean `vds.max`?"),
        ("on and onn", "onn", "there is no name `onn`", "did you mean `on`?"),
        ("tide(b, s)", "tide", "there is no function `tide`", "did you mean `tied`?"),
        ("sqrt(bogus)", "bogus", "there is no name", ""),
        ("tied(b, x)", "tied(b, x)", "takes pins", ""),
        ("param(x)", "param(x)", "in quotes", ""),
        ("class.kind == nmoss", "nmoss", "none of the words", "did you mean `nmos`?"),
        ("class.kind == 'njf9'", "'njf9'", "none of the words", "nmos, pmos, diode"),
        ("class.kind == 5V", "class.kind == 5V", "a word cannot be compared with a voltage", ""),
        ("name == ldn60", "ldn60", "there is no name", "\"ldn60\""),
        ("vds.max && on", "vds.max", "a voltage is neither true nor false", ""),
        ("not width", "width", "a length is neither true nor false", ""),
        ("width ? 1 : 2", "width", "neither true nor false", ""),
        ("on ? 1V : 1A", "on ? 1V : 1A", "a voltage cannot stand in for a current", ""),
        ("on ? 1V : name", "on ? 1V : name", "cannot stand in for a text", ""),
        ("on + 1", "on", "a truth value is no number", ""),
        ("name < 'x'", "name", "a text is no number", ""),
        ("0V <= vds.max <= 5V", "0V <= vds.max", "a comparison is true or false", "&&"),
        ("sqrt(vds.max)", "vds.max", "a voltage has no square root", ""),
        ("exp(vds.max)", "vds.max", "`exp` takes a plain number, not a voltage", ""),
        ("2 ** width", "width", "a power must be a plain number, not a length", ""),
        ("width ** 0.5", "0.5", "whole number", ""),
        ("sqrt(1, 2)", "sqrt(1, 2)", "takes one value, not 2", ""),
        ("nowhere", "nowhere", "there is no name", ""),
    ];
    for (text, marked, message, help) in table {
        let fault = checked(text).expect_err(text);
        assert_eq!(&text[fault.at.start as usize..fault.at.end as usize], marked, "{text}: {}", fault.message);
        assert!(fault.message.contains(message), "{text}: {}", fault.message);
        assert!(fault.help.as_deref().unwrap_or("").contains(help), "{text}: {:?}", fault.help);
    }
}

struct Diode;

impl Scope for Diode {
    fn name(&self, name: &str) -> Value {
        match name {
            "class.kind" => Value::Text("diode".into()),
            "diode" => Value::Number { value: 0.7, dim: Dim::VOLT },
            _ => Value::Unknown,
        }
    }
}

#[test]
fn bare_words_become_texts() {
    for (text, expected) in
        [("class.kind == DIODE", true), ("nmos == class.kind", false), ("class.kind == diode", true)]
    {
        let mut expr = parse(text, Syntax::Rule).unwrap();
        assert_eq!(check(&mut expr, &Words), Ok(Type::Bool));
        assert_eq!(evaluate(&expr, &Diode), Value::Bool(expected), "{text}");
    }
}

#[test]
fn long_chains_work() {
    assert_eq!(checked(&format!("1V{}", "+1V".repeat(100_000))), Ok(Type::Number(Dim::VOLT)));
    let product = format!("1V{}", "*1V".repeat(100_000));
    assert_eq!(checked(&product), Ok(Type::Number(Dim { volt: 127, ..Dim::NONE })));
}

proptest! {
    #[test]
    fn any_expression_is_harmless(
        text in "(1V|2|x|on|0|'t'|width|class\\.kind|nmos|[-+*/%<>!(),?:]|\\*\\*|==|&&|\\|\\||sqrt\\(|min\\(|tied\\(){0,20}"
    ) {
        if let Ok(mut expr) = parse(&text, Syntax::Rule)
            && let Err(fault) = check(&mut expr, &Words)
        {
            prop_assert!(text.get(fault.at.start as usize..fault.at.end as usize).is_some());
        }
    }
}
