//! What single bytes mean on a card, where comments begin, and how a card runs on over lines.
//!
//! All offsets are into the raw text: cards are never joined, so every place stays true. Rules from the Ngspice User's
//! Manual, version 39, sections 2.1 and 2.3; that blank and comment lines may stand before a `+` line is common practice.

use memchr::memchr;

/// What a byte is to the reader of fields.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Class {
    /// Part of a word.
    Plain,
    /// Part of a word, but where it begins one, it may begin something else: quotes, `{`, `$`, `/`.
    Special,
    /// A blank, or another control character that counts as one.
    Blank,
    /// `(`, `)` or `,`.
    Separator,
    Equals,
    Newline,
    /// `;`, which begins a comment wherever it stands.
    Semicolon,
    Backslash,
}

const CLASSES: [Class; 256] = classes();

const fn classes() -> [Class; 256] {
    let mut table = [Class::Plain; 256];
    let mut byte = 0;
    while byte < 33 {
        table[byte] = Class::Blank;
        byte += 1;
    }
    table[b'\'' as usize] = Class::Special;
    table[b'"' as usize] = Class::Special;
    table[b'{' as usize] = Class::Special;
    table[b'$' as usize] = Class::Special;
    table[b'/' as usize] = Class::Special;
    table[b'\n' as usize] = Class::Newline;
    table[b'(' as usize] = Class::Separator;
    table[b')' as usize] = Class::Separator;
    table[b',' as usize] = Class::Separator;
    table[b'=' as usize] = Class::Equals;
    table[b';' as usize] = Class::Semicolon;
    table[b'\\' as usize] = Class::Backslash;
    table
}

pub(super) fn class(byte: u8) -> Class {
    CLASSES[byte as usize]
}

/// The byte at `at`; a line end past the end of the text.
pub(super) fn byte(bytes: &[u8], at: usize) -> u8 {
    bytes.get(at).copied().unwrap_or(b'\n')
}

/// Whether a byte may stand inside a word.
pub(super) fn in_word(byte: u8) -> bool {
    matches!(class(byte), Class::Plain | Class::Special | Class::Backslash)
}

const ONES: u64 = 0x0101_0101_0101_0101;
const HIGHS: u64 = 0x8080_8080_8080_8080;

/// Marks the bytes of `chunk` that are `wanted`; above the first mark there may be false ones.
const fn marks(chunk: u64, wanted: u8) -> u64 {
    let zero = chunk ^ (ONES * wanted as u64);
    zero.wrapping_sub(ONES) & !zero & HIGHS
}

/// Marks blanks, line ends, separators, `=`, `;` and backslashes.
const fn word_ends(chunk: u64) -> u64 {
    let blanks = chunk.wrapping_sub(ONES * 0x21) & !chunk & HIGHS;
    let brackets = marks(chunk & (ONES * 0xfe), b'(');
    blanks | brackets | marks(chunk, b',') | marks(chunk, b'=') | marks(chunk, b';') | marks(chunk, b'\\')
}

/// Marks quotes, braces and slashes.
const fn formula_marks(chunk: u64) -> u64 {
    marks(chunk, b'\'') | marks(chunk, b'"') | marks(chunk, b'{') | marks(chunk, b'}') | marks(chunk, b'/')
}

/// The first byte at or after `at` that cannot stand in a word, or is a backslash. Eight bytes at a time: words are short,
/// and where one ends cannot be foreseen.
#[inline]
pub(super) fn run_end(bytes: &[u8], mut at: usize) -> usize {
    while let Some(chunk) = bytes.get(at..).and_then(|rest| rest.first_chunk::<8>()) {
        let found = word_ends(u64::from_le_bytes(*chunk));
        if found != 0 {
            return at + (found.trailing_zeros() / 8) as usize;
        }
        at += 8;
    }
    while at < bytes.len() && matches!(class(bytes[at]), Class::Plain | Class::Special) {
        at += 1;
    }
    at
}

/// Where a value ends that is no more than a number or a name: at a blank, line end, comma or closing bracket. None where
/// it is a formula, which takes more care.
#[inline]
pub(super) fn simple_value_end(bytes: &[u8], start: usize) -> Option<usize> {
    let mut at = start;
    while let Some(chunk) = bytes.get(at..).and_then(|rest| rest.first_chunk::<8>()) {
        let chunk = u64::from_le_bytes(*chunk);
        let found = word_ends(chunk) | formula_marks(chunk);
        if found != 0 {
            at += (found.trailing_zeros() / 8) as usize;
            let simple = matches!(class(bytes[at]), Class::Blank | Class::Newline) || matches!(bytes[at], b',' | b')');
            return (simple && at > start).then_some(at);
        }
        at += 8;
    }
    None
}

/// Whether a word cannot go on at `at`.
pub(super) fn is_gap(bytes: &[u8], at: usize) -> bool {
    matches!(class(byte(bytes, at)), Class::Blank | Class::Newline)
}

/// Past the blanks at `at`, on the same line.
pub(super) fn skip_blanks(bytes: &[u8], mut at: usize) -> usize {
    while at < bytes.len() && class(bytes[at]) == Class::Blank {
        at += 1;
    }
    at
}

/// The offset of the line end at or after `at` (the end of the text for the last line).
pub(super) fn line_end(bytes: &[u8], at: usize) -> usize {
    match bytes.get(at..) {
        Some(rest) => memchr(b'\n', rest).map_or(bytes.len(), |found| at + found),
        None => bytes.len(),
    }
}

/// The start of the line after the one that `at` stands on; past the text's end after the last.
pub(super) fn next_line(bytes: &[u8], at: usize) -> usize {
    line_end(bytes, at) + 1
}

/// Characters that no card begins with: such a line is taken for a comment (Ngspice User's Manual, version 39, section
/// 2.1.1, which has `$` and `§` too).
pub(super) const STRANGE: &[u8] = b"=[]?()&%\"!:";

/// Whether the line whose first character stands at `at` is a comment.
pub(super) fn is_comment_line(bytes: &[u8], at: usize) -> bool {
    match bytes[at] {
        b'*' | b';' | b'$' => true,
        b'/' => byte(bytes, at + 1) == b'/',
        0xc2 => byte(bytes, at + 1) == 0xa7,
        first => STRANGE.contains(&first),
    }
}

/// Where a card goes on whose line ends at `end` (a line end, or the text's end): just past the `+` of its next line.
pub(super) fn continuation(bytes: &[u8], end: usize) -> Option<usize> {
    let mut at = end + 1;
    loop {
        at = skip_blanks(bytes, at);
        match *bytes.get(at)? {
            b'+' => return Some(at + 1),
            b'\n' => at += 1,
            _ if is_comment_line(bytes, at) => at = next_line(bytes, at),
            _ => return None,
        }
    }
}

/// Whether a comment begins at `at`, where a word might begin. Export comments (`$[model]`, `$SUB=net`) and names that
/// begin with `$` are not comments here.
pub(super) fn starts_comment(bytes: &[u8], at: usize) -> bool {
    match bytes[at] {
        b';' => true,
        b'$' => is_gap(bytes, at + 1),
        b'/' => byte(bytes, at + 1) == b'/',
        _ => false,
    }
}

/// Where the data of the line at `at` end: at a comment outside quotes or at the line's end, less trailing blanks.
pub(super) fn data_end(bytes: &[u8], at: usize) -> usize {
    let end = line_end(bytes, at);
    let (mut quote, mut here, mut fresh) = (None, at, true);
    while here < end {
        let now = bytes[here];
        match quote {
            Some(open) if now == open => quote = None,
            Some(_) => {}
            None if matches!(now, b'\'' | b'"') => quote = Some(now),
            None if now == b';' || (fresh && starts_comment(bytes, here)) => break,
            None => {}
        }
        fresh = class(now) == Class::Blank;
        here += 1;
    }
    while here > at && class(bytes[here - 1]) == Class::Blank {
        here -= 1;
    }
    here
}

/// The directive word (without its dot, lower case) of the line whose dot stands at `dot`, and the offset past it.
pub(super) fn dot_word(bytes: &[u8], dot: usize) -> (String, usize) {
    let start = dot + 1;
    let mut end = start;
    while end < bytes.len() && (bytes[end].is_ascii_alphanumeric() || bytes[end] == b'_') {
        end += 1;
    }
    (String::from_utf8_lossy(&bytes[start..end]).to_ascii_lowercase(), end)
}

/// The dot of the next line at or after the line start `at` that begins with one.
pub(super) fn next_dot(bytes: &[u8], mut at: usize) -> Option<usize> {
    while at < bytes.len() {
        let first = skip_blanks(bytes, at);
        if byte(bytes, first) == b'.' {
            return Some(first);
        }
        at = next_line(bytes, first);
    }
    None
}

/// Past blanks, comments and line joints, to the next word of the same card or its end.
pub(super) fn skip_gaps(bytes: &[u8], mut at: usize) -> usize {
    loop {
        at = skip_blanks(bytes, at);
        let Some(&now) = bytes.get(at) else { return at };
        if now == b'\n' {
            match continuation(bytes, at) {
                Some(next) => at = next,
                None => return at,
            }
        } else if starts_comment(bytes, at) {
            at = line_end(bytes, at);
        } else {
            return at;
        }
    }
}
