//! Messages with expressions in them: `{name} is {width} wide`.

use super::{Expr, Fault, Scope, Syntax, Value, evaluate, parse};
use crate::quantity::show;
use std::ops::Range;

/// A text with expressions in braces.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Template {
    /// Its parts in order.
    pub pieces: Vec<Piece>,
}

/// A part of a [`Template`].
#[derive(Clone, Debug, PartialEq)]
pub enum Piece {
    /// Text that stands as it is.
    Text(String),
    /// An expression in rule syntax, whose value stands in its place.
    Expr {
        /// The expression; its places count from `at.start`.
        expr: Expr,
        /// Its bytes in the template's text, without the braces.
        at: Range<u32>,
    },
}

impl Template {
    /// Reads a text in which `{…}` is an expression, and `{{` and `}}` are braces.
    ///
    /// # Errors
    /// A brace without its partner, or what is wrong with an expression; the place is in the template's text.
    pub fn parse(text: &str) -> Result<Template, Fault> {
        if u32::try_from(text.len()).is_err() {
            return Err(Fault::new(0..0, "this text is too long"));
        }
        let mut pieces = Vec::new();
        let mut plain = String::new();
        let mut at = 0;
        while let Some(brace) = text[at..].find(['{', '}']).map(|found| at + found) {
            plain.push_str(&text[at..brace]);
            let (sign, next) = (&text[brace..=brace], text[brace + 1..].chars().next());
            if next.is_some_and(|next| sign.starts_with(next)) {
                plain.push_str(sign);
                at = brace + 2;
                continue;
            }
            let here = brace as u32..brace as u32 + 1;
            if sign == "}" {
                return Err(Fault::new(here, "this } has no { before it").help("write }} for the sign itself"));
            }
            let Some(end) = closing(&text[brace + 1..]).map(|found| brace + 1 + found) else {
                return Err(Fault::new(here, "this { is not closed").help("write {{ for the sign itself"));
            };
            if !plain.is_empty() {
                pieces.push(Piece::Text(std::mem::take(&mut plain)));
            }
            pieces.push(expression(text, brace + 1..end)?);
            at = end + 1;
        }
        plain.push_str(&text[at..]);
        if !plain.is_empty() {
            pieces.push(Piece::Text(plain));
        }
        Ok(Template { pieces })
    }

    /// The text with every expression's value: numbers with their units, `yes` and `no`, `unknown`.
    pub fn fill(&self, scope: &dyn Scope) -> String {
        let mut filled = String::new();
        for piece in &self.pieces {
            match piece {
                Piece::Text(text) => filled.push_str(text),
                Piece::Expr { expr, .. } => filled.push_str(&shown(evaluate(expr, scope))),
            }
        }
        filled
    }
}

fn shown(value: Value) -> String {
    match value {
        Value::Unknown => "unknown".into(),
        Value::Bool(true) => "yes".into(),
        Value::Bool(false) => "no".into(),
        Value::Number { value, dim } => show(value, dim),
        Value::Text(text) => text,
    }
}

/// Where the expression's brace closes, leaving texts in quotes alone.
fn closing(text: &str) -> Option<usize> {
    let mut quote = None;
    for (at, byte) in text.bytes().enumerate() {
        match (byte, quote) {
            (b'"' | b'\'', None) => quote = Some(byte),
            (byte, Some(open)) if byte == open => quote = None,
            (b'}', None) => return Some(at),
            _ => {}
        }
    }
    // A quote that is not closed is the expression's fault to report.
    text.find('}')
}

fn expression(text: &str, at: Range<usize>) -> Result<Piece, Fault> {
    let place = at.start as u32..at.end as u32;
    match parse(&text[at], Syntax::Rule) {
        Ok(expr) => Ok(Piece::Expr { expr, at: place }),
        Err(fault) if fault.at.is_empty() => Err(Fault { at: place.start - 1..place.end + 1, ..fault }),
        Err(fault) => Err(Fault { at: place.start + fault.at.start..place.start + fault.at.end, ..fault }),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::quantity::Dim;
    use proptest::prelude::*;

    struct Device;

    impl Scope for Device {
        fn name(&self, name: &str) -> Value {
            match name {
                "name" => Value::Text("xls.m7".into()),
                "width" => Value::Number { value: 2.5e-3, dim: Dim::METRE },
                "class.high_voltage" => Value::Bool(true),
                "duty" => Value::Number { value: 0.01, dim: Dim::NONE },
                _ => Value::Unknown,
            }
        }
    }

    fn filled(text: &str) -> String {
        Template::parse(text).unwrap().fill(&Device)
    }

    #[test]
    fn values_stand_in_their_places() {
        assert_eq!(filled("{name} is {width} wide: split it"), "xls.m7 is 2500 µm wide: split it");
        assert_eq!(filled("{ width / 2 }"), "1250 µm");
        assert_eq!(filled("high voltage: {class.high_voltage}, {not class.high_voltage}"), "high voltage: yes, no");
        assert_eq!(filled("{density} at {percent(duty)}"), "unknown at 1 %");
        assert_eq!(filled("{{{name}}} µ }}{{"), "{xls.m7} µ }{");
        assert_eq!(filled("{\"}\"}{name}"), "}xls.m7");
        assert_eq!(filled(""), "");
        assert_eq!(Template::parse("").unwrap(), Template::default());
    }

    #[test]
    fn faults_point_into_the_template() {
        let table = [("a } b", "}"), ("ä {x", "{"), ("{}", "{}"), ("ä {1 + }", "+"), ("{a b}", "b"), ("{'x}", "'")];
        for (text, marked) in table {
            let fault = Template::parse(text).unwrap_err();
            assert_eq!(&text[fault.at.start as usize..fault.at.end as usize], marked, "{text}: {}", fault.message);
        }
    }

    #[test]
    fn pieces_know_their_place() {
        let text = "at {width}!";
        let template = Template::parse(text).unwrap();
        let Piece::Expr { at, .. } = &template.pieces[1] else { panic!("no expression") };
        assert_eq!(&text[at.start as usize..at.end as usize], "width");
    }

    proptest! {
        #[test]
        fn any_text_is_harmless(text in "(\\PC|[{}\"a ]){0,30}") {
            match Template::parse(&text) {
                Ok(template) => drop(template.fill(&Device)),
                Err(fault) => prop_assert!(text.get(fault.at.start as usize..fault.at.end as usize).is_some()),
            }
        }
    }
}
