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
