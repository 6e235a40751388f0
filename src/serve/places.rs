//! Places as the protocol counts them: lines that end in `\n`, `\r\n` or `\r`, and columns in UTF-16 code units (specification
//! 3.17, "Position" and "Text documents"); and files as URIs (RFC 8089, RFC 3986).

use crate::source::Span;
use lsp_types::{Position, Range, Uri};
use std::path::{Path, PathBuf};
use std::str::FromStr;

/// The lines of a text.
pub(super) struct Lines<'t> {
    text: &'t str,
    starts: Vec<usize>,
}

impl<'t> Lines<'t> {
    /// Finds the lines.
    pub(super) fn of(text: &'t str) -> Lines<'t> {
        let bytes = text.as_bytes();
        let ends = |&(at, &byte): &(usize, &u8)| match byte {
            b'\n' => true,
            b'\r' => bytes.get(at + 1) != Some(&b'\n'),
            _ => false,
        };
        let starts = bytes.iter().enumerate().filter(ends).map(|(at, _)| at + 1);
        Lines { text, starts: std::iter::once(0).chain(starts).collect() }
    }

    /// The place of a byte; past the end is the end, inside a character is its start.
    pub(super) fn position(&self, offset: usize) -> Position {
        let mut offset = offset.min(self.text.len());
        while !self.text.is_char_boundary(offset) {
            offset -= 1;
        }
        let line = self.starts.partition_point(|&start| start <= offset) - 1;
        let units = self.text[self.starts[line]..offset].encode_utf16().count();
        Position::new(line as u32, units as u32)
    }

    /// The byte of a place; columns past a line's end count as its end, columns inside a character as its start.
    pub(super) fn offset(&self, at: Position) -> usize {
        let Some(&start) = self.starts.get(at.line as usize) else { return self.text.len() };
        let end = self.starts.get(at.line as usize + 1).copied().unwrap_or(self.text.len());
        let line = self.text[start..end].trim_end_matches(['\n', '\r']);
        let mut units = 0;
        for (byte, letter) in line.char_indices() {
            units += letter.len_utf16();
            if units > at.character as usize {
                return start + byte;
            }
        }
        start + line.len()
    }

    /// A span as a range.
    pub(super) fn range(&self, span: Span) -> Range {
        Range::new(self.position(span.start as usize), self.position(span.end as usize))
    }
}

/// The file that a URI names; none for other schemes and for files of other machines.
pub(super) fn path_of(uri: &Uri) -> Option<PathBuf> {
    let rest = uri.as_str().strip_prefix("file://")?;
    let path = rest.strip_prefix("localhost").filter(|rest| rest.starts_with('/')).unwrap_or(rest);
    let path = path.split(['?', '#']).next().filter(|path| path.starts_with('/'))?;
    let text = unescaped(path)?;
    let has_drive = text.as_bytes().get(2) == Some(&b':');
    Some(PathBuf::from(if cfg!(windows) && has_drive { &text[1..] } else { &text }))
}

fn unescaped(text: &str) -> Option<String> {
    let mut bytes = Vec::with_capacity(text.len());
    let mut rest = text.bytes();
    while let Some(byte) = rest.next() {
        if byte != b'%' {
            bytes.push(byte);
            continue;
        }
        let mut digit = || rest.next().and_then(|digit| (digit as char).to_digit(16));
        bytes.push((digit()? * 16 + digit()?) as u8);
    }
    String::from_utf8(bytes).ok()
}

/// The URI of a file by its absolute path.
pub(super) fn uri_of(path: &Path) -> Option<Uri> {
    let text = path.to_str()?.replace('\\', if cfg!(windows) { "/" } else { "\\" });
    let mut uri = String::from("file://");
    if !text.starts_with('/') {
        uri.push('/');
    }
    for byte in text.bytes() {
        match byte {
            b'A'..=b'Z' | b'a'..=b'z' | b'0'..=b'9' | b'-' | b'.' | b'_' | b'~' | b'/' => uri.push(byte as char),
            _ => uri += &format!("%{byte:02X}"),
        }
    }
    Uri::from_str(&uri).ok()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::source::FileId;
    use proptest::prelude::*;

    /// The example of the specification (3.17, "Text documents"): in `a𐐀b` the character offset of `a` is 0, that of `𐐀` 1, and that
    /// of `b` 3, because `𐐀` takes two units.
    #[test]
    fn columns_are_utf16_units() {
        let lines = Lines::of("µ\na𐐀b\r\nc\rd");
        let at = |offset| (lines.position(offset).line, lines.position(offset).character);
        assert_eq!([at(0), at(2), at(3), at(4), at(8), at(9)], [(0, 0), (0, 1), (1, 0), (1, 1), (1, 3), (1, 4)]);
        assert_eq!([at(11), at(13), at(99)], [(2, 0), (3, 0), (3, 1)]);
        let of = |line, character| lines.offset(Position::new(line, character));
        assert_eq!([of(1, 0), of(1, 1), of(1, 2), of(1, 3), of(1, 99), of(9, 0)], [3, 4, 4, 8, 9, 14]);
        assert_eq!(lines.range(Span::new(FileId(0), 4, 8)), Range::new(Position::new(1, 1), Position::new(1, 3)));
    }

    /// RFC 8089, appendix B, has the first form; the others are RFC 3986's percent signs.
    #[test]
    fn files_and_uris() {
        let path = |text: &str| path_of(&Uri::from_str(text).unwrap());
        assert_eq!(path("file:///path/to/file"), Some("/path/to/file".into()));
        assert_eq!(path("file://localhost/a%20b%C2%B5.sp"), Some("/a bµ.sp".into()));
        assert_eq!(
            (path("untitled:Untitled-1"), path("file://server/share"), path("file:///a%FF")),
            (None, None, None)
        );
        assert_eq!(uri_of(Path::new("/a bµ/c#1.sp")).unwrap().as_str(), "file:///a%20b%C2%B5/c%231.sp");
    }

    proptest! {
        #[test]
        fn every_character_has_its_place(text in "[a-zµ𐐀\r\n]{0,40}") {
            let lines = Lines::of(&text);
            for (offset, _) in text.char_indices().chain([(text.len(), ' ')]) {
                let ends_line = text[..offset].ends_with('\r') && text[offset..].starts_with('\n');
                if !ends_line {
                    prop_assert_eq!(lines.offset(lines.position(offset)), offset);
                }
            }
        }

        #[test]
        fn paths_come_back(path in "/[ -~µ]{0,30}") {
            let uri = uri_of(Path::new(&path)).unwrap();
            prop_assert_eq!(path_of(&uri), Some(PathBuf::from(path)));
        }
    }
}
