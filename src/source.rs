//! Texts and places in them.
//!
//! Every message of Drainwise points at a place in a file that somebody wrote. This module owns those texts and
//! the compact way to name a place: a [`Span`] of 12 bytes. Lines and columns are worked out only when someone looks.

use std::ops::Range;
use std::sync::OnceLock;

/// The number of a text in its [`SourceMap`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct FileId(pub u32);

/// A piece of a text: bytes `start..end` of the file, on character boundaries.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Span {
    /// The text it lies in.
    pub file: FileId,
    /// Offset of its first byte.
    pub start: u32,
    /// Offset just past its last byte.
    pub end: u32,
}

impl Span {
    /// The bytes `start..end` of `file`.
    pub fn new(file: FileId, start: u32, end: u32) -> Span {
        Span { file, start, end }
    }

    /// The smallest span that holds both; `self` alone where they lie in different files.
    pub fn to(self, other: Span) -> Span {
        if self.file != other.file {
            return self;
        }
        Span { file: self.file, start: self.start.min(other.start), end: self.end.max(other.end) }
    }

    /// As a range of byte offsets, for slicing the text.
    pub fn range(self) -> Range<usize> {
        self.start as usize..self.end as usize
    }
}

/// A line and column, both counted from 1; the column counts characters, not bytes.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct LineColumn {
    /// Line, from 1.
    pub line: u32,
    /// Column in characters, from 1.
    pub column: u32,
}

/// The largest text that spans can address, in bytes.
pub const LARGEST_TEXT: u64 = u32::MAX as u64 - 1;

/// One text and the path under which people know it.
#[derive(Debug)]
pub struct SourceFile {
    path: String,
    text: String,
    line_starts: OnceLock<Vec<u32>>,
}

impl SourceFile {
    /// The path as shown in messages: with forward slashes, relative where it was given so.
    pub fn path(&self) -> &str {
        &self.path
    }

    /// The whole text.
    pub fn text(&self) -> &str {
        &self.text
    }

    fn line_starts(&self) -> &[u32] {
        self.line_starts.get_or_init(|| {
            std::iter::once(0).chain(memchr::memchr_iter(b'\n', self.text.as_bytes()).map(|at| at as u32 + 1)).collect()
        })
    }

    /// Where the byte `offset` stands; offsets past the end count as the end, offsets inside a character as its start.
    pub fn line_column(&self, offset: u32) -> LineColumn {
        let mut offset = (offset as usize).min(self.text.len());
        while !self.text.is_char_boundary(offset) {
            offset -= 1;
        }
        let starts = self.line_starts();
        let line = starts.partition_point(|&start| start as usize <= offset);
        let start = starts[line - 1] as usize;
        LineColumn { line: line as u32, column: self.text[start..offset].chars().count() as u32 + 1 }
    }

    /// Offset of the first byte of a line (from 1); the text's length past the last line.
    pub fn line_start(&self, line: u32) -> u32 {
        let at = (line as usize).checked_sub(1).and_then(|index| self.line_starts().get(index)).copied();
        at.unwrap_or(self.text.len() as u32)
    }

    /// The text of a line (from 1) without its line end; empty past the last line.
    pub fn line(&self, line: u32) -> &str {
        let starts = self.line_starts();
        let Some(&start) = (line as usize).checked_sub(1).and_then(|index| starts.get(index)) else { return "" };
        let end = starts.get(line as usize).map_or(self.text.len(), |&next| next as usize);
        self.text[start as usize..end].trim_end_matches(['\n', '\r'])
    }
}

/// All texts of a run.
#[derive(Debug, Default)]
pub struct SourceMap {
    files: Vec<SourceFile>,
}

impl SourceMap {
    /// An empty map.
    pub fn new() -> SourceMap {
        SourceMap::default()
    }

    /// Takes a text in. Texts longer than [`LARGEST_TEXT`] must be refused before.
    pub fn add(&mut self, path: impl Into<String>, text: impl Into<String>) -> FileId {
        let id = FileId(self.files.len() as u32);
        self.files.push(SourceFile { path: path.into(), text: text.into(), line_starts: OnceLock::new() });
        id
    }

    /// The file with this number.
    pub fn file(&self, id: FileId) -> &SourceFile {
        &self.files[id.0 as usize]
    }

    /// The whole text of a file.
    pub fn text(&self, id: FileId) -> &str {
        &self.file(id).text
    }

    /// The text under a span; empty where the span does not fit the file.
    pub fn slice(&self, span: Span) -> &str {
        self.text(span.file).get(span.range()).unwrap_or("")
    }

    /// Where a span begins.
    pub fn start(&self, span: Span) -> LineColumn {
        self.file(span.file).line_column(span.start)
    }

    /// Where a span ends (just past its last character).
    pub fn end(&self, span: Span) -> LineColumn {
        self.file(span.file).line_column(span.end)
    }

    /// All files with their numbers, in the order they were read.
    pub fn files(&self) -> impl Iterator<Item = (FileId, &SourceFile)> {
        self.files.iter().enumerate().map(|(index, file)| (FileId(index as u32), file))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_and_columns_count_characters() {
        let mut map = SourceMap::new();
        let id = map.add("a.sp", "* µm\r\nM1 a b\n");
        let place = |offset| (map.file(id).line_column(offset).line, map.file(id).line_column(offset).column);
        assert_eq!(place(0), (1, 1));
        assert_eq!(place(4), (1, 4), "µ is two bytes and one column");
        assert_eq!(place(7), (2, 1));
        assert_eq!(place(999), (3, 1));
        assert_eq!(map.file(id).line(1), "* µm");
        assert_eq!(map.file(id).line(9), "");
    }
}
