//! Text from files made safe for a terminal: control characters become visible signs of the same width.

use std::borrow::Cow;

/// The text with every control character (but tab) as its Unicode picture, and bidirectional controls as `�`: one character
/// for one, so that columns hold.
pub(super) fn visible(text: &str) -> Cow<'_, str> {
    if !text.chars().any(is_hidden) {
        return Cow::Borrowed(text);
    }
    Cow::Owned(text.chars().map(|c| if is_hidden(c) { picture(c) } else { c }).collect())
}

fn is_hidden(c: char) -> bool {
    (c.is_control() && c != '\t' && c != '\n')
        || matches!(c, '\u{200e}' | '\u{200f}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}')
}

fn picture(c: char) -> char {
    match c as u32 {
        code @ 0..=0x1f => char::from_u32(0x2400 + code).unwrap_or('\u{fffd}'),
        0x7f => '\u{2421}',
        _ => '\u{fffd}',
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn escapes_are_shown_not_sent() {
        assert_eq!(visible("a\u{1b}[31mb"), "a\u{241b}[31mb");
        assert_eq!(visible("plain µ"), "plain µ");
        assert_eq!(visible("\u{9b}\u{202e}"), "\u{fffd}\u{fffd}");
    }
}
