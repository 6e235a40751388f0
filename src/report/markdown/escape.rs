//! Names and messages as text in Markdown: whatever they hold, it makes no link, no table cell, no tag and calls nobody.
//!
//! Signs that mean something are written as character references, which CommonMark (its section 2.5) never reads as structure. What
//! code hosts find in finished text all the same (`@name`, `#12`) is broken up by an empty comment.

use crate::report::visible::visible;

/// A text in a sentence or a table cell. What stands between backticks becomes code.
pub(super) fn prose(text: &str) -> String {
    let parts: Vec<&str> = text.split('`').collect();
    let mut out = String::new();
    for (at, part) in parts.iter().enumerate() {
        let closed = at % 2 == 1 && at + 1 < parts.len();
        if closed {
            out.push_str(&code(part));
        } else {
            if at % 2 == 1 {
                out.push_str("&#96;");
            }
            plain(part, &mut out);
        }
    }
    out
}

/// A name, set as code.
pub(super) fn code(text: &str) -> String {
    let mut out = "<code>".to_owned();
    plain(text, &mut out);
    out.push_str("</code>");
    out
}

fn plain(text: &str, out: &mut String) {
    let text = visible(text);
    let mut before = ' ';
    let mut rest = text.char_indices().peekable();
    while let Some((at, now)) = rest.next() {
        let after = rest.peek().map_or(' ', |&(_, after)| after);
        match now {
            '\n' | '\r' | '\t' => out.push(' '),
            '_' if before.is_alphanumeric() && after.is_alphanumeric() => out.push('_'),
            '@' => out.push_str("@<!-- -->"),
            '#' => out.push_str("&#35;<!-- -->"),
            ':' if text[at..].starts_with("://") => out.push_str("&#58;"),
            '.' if ends_in_www(&text[..at]) => out.push_str("&#46;"),
            '&' | '<' | '>' | '"' | '\'' | '`' | '*' | '_' | '[' | ']' | '\\' | '|' | '~' | '$' => {
                out.push_str(&format!("&#{};", now as u32));
            }
            _ => out.push(now),
        }
        before = now;
    }
}

fn ends_in_www(text: &str) -> bool {
    text.as_bytes().last_chunk::<3>().is_some_and(|last| last.eq_ignore_ascii_case(b"www"))
}

/// Lines as a block of code, in a fence that is longer than any in them.
pub(super) fn fenced(lines: &str) -> String {
    let longest = lines.split(|sign| sign != '`').map(str::len).max().unwrap_or(0);
    let fence = "`".repeat(longest.max(2) + 1);
    format!("{fence}text\n{}\n{fence}\n", lines.trim_end_matches('\n'))
}

/// At most `most` characters, and a sign where some are missing.
pub(super) fn clipped(text: &str, most: usize) -> String {
    match text.char_indices().nth(most) {
        Some((at, _)) => format!("{}…", &text[..at]),
        None => text.to_owned(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What these signs do is written in the GitHub Flavored Markdown Spec, version 0.29: tables 4.10, entity references 6.2, raw HTML
    /// 6.10, autolinks 6.9.
    #[test]
    fn nothing_means_anything() {
        assert_eq!(prose("a|b <script>"), "a&#124;b &#60;script&#62;");
        assert_eq!(prose("[x](http://e.example) ![y]"), "&#91;x&#93;(http&#58;//e.example) !&#91;y&#93;");
        assert_eq!(prose("net `a|b` and `"), "net <code>a&#124;b</code> and &#96;");
        assert_eq!(prose("XM_C _x_ *y*"), "XM_C &#95;x&#95; &#42;y&#42;");
        assert_eq!(prose("@all #12 www.x\ny"), "@<!-- -->all &#35;<!-- -->12 www&#46;x y");
        assert_eq!(code("a`b&amp;"), "<code>a&#96;b&#38;amp;</code>");
    }

    #[test]
    fn a_fence_is_longer_than_any_inside() {
        assert_eq!(fenced("a ```` b\n"), "`````text\na ```` b\n`````\n");
        assert_eq!(fenced("a"), "```text\na\n```\n");
        assert_eq!(clipped("µµµ", 2), "µµ…");
    }
}
