//! From a word of a card to a number or an expression.

use super::Complaint;
use super::fields::formula_end;
use super::lex::{byte, continuation, line_end};
use super::tree::{Operand, Word};
use crate::expr::{self, Expr, Syntax};
use crate::quantity::spice_number;
use crate::source::FileId;

/// The expression that a word holds. `mega` says whether the suffix `M` means 1e6 (see `Tree::mega`). The operand's
/// places count from its span's start.
pub fn operand(text: &str, word: Word, file: FileId, mega: bool) -> Result<Operand, Complaint> {
    Ok(Operand { span: word.span(file), expr: Some(expression(text, word, mega)?) })
}

/// The same without the wrapping; its places count from the word's start.
pub fn expression(text: &str, word: Word, mega: bool) -> Result<Expr, Complaint> {
    let raw = word.of(text);
    let plain = match raw.bytes().any(|byte| matches!(byte, b'\n' | b'{' | b'\'' | b'"')) {
        true => levelled(raw),
        false => std::borrow::Cow::Borrowed(raw),
    };
    expr::parse(&plain, Syntax::Spice { mega }).map_err(|fault| {
        let base = word.start as usize;
        let start = boundary(raw, fault.at.start as usize);
        let end = boundary(raw, (fault.at.end as usize).max(start));
        let complaint = Complaint::new(base + start, base + end, fault.message);
        match fault.help {
            Some(help) => complaint.with_help(help),
            None => complaint,
        }
    })
}

fn boundary(text: &str, at: usize) -> usize {
    let mut at = at.min(text.len());
    while !text.is_char_boundary(at) {
        at -= 1;
    }
    at
}

/// The text of an expression with line joints and comments blanked, and inner quotes and braces made brackets, so that
/// every offset stays what it was.
fn levelled(raw: &str) -> std::borrow::Cow<'_, str> {
    let mut bytes = raw.as_bytes().to_vec();
    let mut at = 0;
    while at < bytes.len() {
        match bytes[at] {
            b'\n' => {
                let next = continuation(&bytes, at).unwrap_or(bytes.len()).min(bytes.len());
                bytes[at..next].fill(b' ');
                at = next;
                continue;
            }
            b';' => {
                let end = line_end(&bytes, at);
                bytes[at..end].fill(b' ');
                continue;
            }
            mark @ (b'\'' | b'"') => {
                if let Some(found) = memchr::memchr(mark, &bytes[at + 1..]) {
                    bytes[at] = b'(';
                    bytes[at + 1 + found] = b')';
                }
            }
            b'{' => bytes[at] = b'(',
            b'}' => bytes[at] = b')',
            _ => {}
        }
        at += 1;
    }
    // Only whole lines and single ASCII bytes were overwritten, so this stays valid text.
    String::from_utf8(bytes).map_or(std::borrow::Cow::Borrowed(raw), std::borrow::Cow::Owned)
}

/// The word, or the whole call that begins with it: `max(1,2)` for `max`, where its bracket follows at once.
pub fn whole(text: &str, word: Word) -> Word {
    let bytes = text.as_bytes();
    if word.quoted || byte(bytes, word.end as usize) != b'(' {
        return word;
    }
    match formula_end(bytes, word.start as usize) {
        Ok(end) => Word { end: end as u32, ..word },
        Err(_) => word,
    }
}

/// The value of a word that is a plain number with a scale suffix (`2.2u`, `1MEG`, `5V`), without building an expression.
pub fn number(text: &str, word: Word, mega: bool) -> Option<f64> {
    let raw = word.of(text).trim();
    let number = spice_number(raw, mega)?;
    let decoration = |byte: &u8| byte.is_ascii_alphanumeric() || *byte >= 0x80;
    raw.as_bytes()[number.rest..].iter().all(decoration).then_some(number.value)
}

#[cfg(test)]
mod tests {
    use super::super::carets::check;
    use super::super::fields::read_fields;
    use super::super::tree::Fields;
    use super::*;
    use crate::expr::Node;
    use proptest::prelude::*;

    /// The expression of the first pair of a card, as an operand and as text.
    fn first(text: &str) -> (Operand, &str) {
        let mut fields = Fields::default();
        assert_eq!(read_fields(text, 0, &mut fields), None);
        let word = fields.params[0].1;
        (operand(text, word, FileId(0), false).unwrap(), word.of(text))
    }

    #[test]
    fn expressions_over_lines_keep_their_places() {
        let text = "R1 a b r='max(x, ; why\n* no ' here\n+ y)'\n";
        let (operand, _) = first(text);
        let expr = operand.expr.unwrap();
        let place = expr.nodes.iter().position(|node| *node == Node::Name("y".to_owned())).unwrap();
        let start = operand.span.start + expr.places[place].start;
        assert_eq!(&text[start as usize..start as usize + 1], "y");
        assert_eq!(expr.nodes.len(), 3);
    }

    #[test]
    fn braces_and_quotes_inside_are_brackets() {
        for (text, nodes) in [
            ("M1 d g s b n w={a}*2", 3),
            ("M1 d g s b n w='2*{a+1}'", 5),
            ("M1 d g s b n w=2*'a'", 3),
            ("M1 d g s b n w=-(1+2)", 4),
        ] {
            assert_eq!(first(text).0.expr.unwrap().nodes.len(), nodes, "{text}");
        }
    }

    #[test]
    fn faults_point_into_the_card() {
        let text = "M1 d g s b n w='2 + * 3'";
        let mut fields = Fields::default();
        assert_eq!(read_fields(text, 0, &mut fields), None);
        let complaint = operand(text, fields.params[0].1, FileId(0), false).unwrap_err();
        assert!(text[complaint.start as usize..].starts_with('*'), "{complaint:?}");
        check("t\n.param a=2 b='1 + )' c=\"some text\"\n*                 ^ a value is missing\n");
    }

    /// Ngspice User's Manual, version 39, section 2.1.4, table 2.2 and its examples; `*.MEGA` as circuit descriptions have it.
    #[test]
    fn plain_numbers_need_no_expression() {
        let value = |text: &str, mega| number(text, Word { start: 0, end: text.len() as u32, quoted: false }, mega);
        assert_eq!(value("1kHz", false), Some(1e3));
        assert_eq!(value("1MEGOHM", false), Some(1e6));
        assert_eq!(value("1M", false), Some(1e-3));
        assert_eq!(value("1M", true), Some(1e6));
        assert_eq!(value("2.2\u{b5}", false), Some(2.2e-6));
        for formula in ["2*3", "w", "1+", "(1)", ""] {
            assert_eq!(value(formula, false), None, "{formula}");
        }
    }

    proptest! {
        #[test]
        fn never_panics(text in "[ab1 +*(){}'\"\n;$µ]{0,40}") {
            let word = Word { start: 0, end: text.len() as u32, quoted: true };
            match expression(&text, word, false) {
                Ok(expr) => prop_assert!(!expr.nodes.is_empty()),
                Err(complaint) => prop_assert!(text.get(complaint.start as usize..complaint.end as usize).is_some()),
            }
            number(&text, word, false);
            whole(&text, word);
        }
    }
}
