//! Comments that are meant for this program, and the card that each belongs to: the one on whose lines it stands, or the next one
//! below if only comments and blank lines stand between.
//!
//! The reader of cards skips comments and knows nothing of these. They are looked for once in each file, and a file that has none costs one
//! search.

use super::lex::{continuation, data_end, is_comment_line, line_end, next_line, skip_blanks};
use super::tree::{CellIx, Tree};
use crate::source::{FileId, Span};
use memchr::memmem;

/// A comment for this program.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Remark {
    /// What is said: from behind the mark to the line's end.
    pub words: Span,
    /// The mark and what is said.
    pub whole: Span,
    /// The card it belongs to, all of its lines; none where it stands at no card.
    pub card: Option<(CellIx, Span)>,
}

/// The comments of a file that begin with `mark`. Those at cards that were not read (a library section that nobody asked for) are left
/// out.
pub fn remarks(tree: &Tree, file: FileId, text: &str, mark: &str) -> Vec<Remark> {
    let mut hits = memmem::find_iter(text.as_bytes(), mark).peekable();
    if hits.peek().is_none() {
        return Vec::new();
    }
    let mut finder = Finder { bytes: text.as_bytes(), cards: cards_of(tree, file), below: (0, 0), extent: (0, 0) };
    let (mut found, mut done) = (Vec::new(), 0);
    for at in hits {
        if at < done {
            continue; // only the first of a line can begin a comment
        }
        let line = memchr::memrchr(b'\n', &text.as_bytes()[done..at]).map_or(done, |end| done + end + 1);
        done = next_line(text.as_bytes(), at);
        let Some(stand) = finder.stand(line, at) else { continue };
        let card = match stand {
            Stand::Card(at) => Some((finder.cards[at].1, finder.span(at, file))),
            Stand::Nowhere => None,
        };
        let end = at + text[at..line_end(text.as_bytes(), at)].trim_end().len();
        let span = |from: usize| Span::new(file, from as u32, end.max(from) as u32);
        found.push(Remark { words: span(at + mark.len()), whole: span(at), card });
    }
    found
}

/// The cards of a file in the order of its text, each with its cell.
fn cards_of(tree: &Tree, file: FileId) -> Vec<(u32, CellIx)> {
    let mut all = Vec::new();
    for (index, cell) in tree.cells.iter().enumerate() {
        for (at, run) in cell.runs.iter().enumerate().filter(|(_, run)| run.file == file) {
            let end = cell.runs.get(at + 1).map_or(cell.cards.len(), |next| next.first as usize);
            all.extend(cell.cards[run.first as usize..end].iter().map(|&card| (card, CellIx(index as u32))));
        }
    }
    all.sort_unstable_by_key(|&(card, cell)| (card, cell.0));
    all
}

enum Stand {
    /// At a card, by index.
    Card(usize),
    /// Above no card.
    Nowhere,
}

struct Finder<'t> {
    bytes: &'t [u8],
    cards: Vec<(u32, CellIx)>,
    /// A line that is looked at, and the first line below it that is neither blank nor a comment: it holds for all lines between.
    below: (usize, usize),
    /// A card's index plus one, and how far its lines were followed.
    extent: (usize, usize),
}

impl Finder<'_> {
    /// Where the comment belongs whose mark stands at `at` on the line; none where it is no comment, does not begin with the mark, or
    /// stands at a card that was not read.
    fn stand(&mut self, line: usize, at: usize) -> Option<Stand> {
        let first = skip_blanks(self.bytes, line);
        let signs = |from: usize| {
            self.bytes[from..at].iter().all(|now| matches!(now, b'*' | b'$' | b';' | b'/' | b' ' | b'\t'))
        };
        if is_comment_line(self.bytes, first) {
            return if signs(first) { self.of_line(at) } else { None };
        }
        let data = data_end(self.bytes, line);
        if data >= at || !signs(data) {
            return None;
        }
        self.around(at).map(Stand::Card)
    }

    /// For a comment that has a line of its own.
    fn of_line(&mut self, at: usize) -> Option<Stand> {
        if !(self.below.0 <= at && at < self.below.1) {
            self.below = (at, self.next_card_line(at));
        }
        let next = self.below.1;
        match self.bytes.get(next) {
            Some(b'+') => self.around(at).map(Stand::Card),
            Some(now) if now.is_ascii_alphabetic() => {
                self.cards.binary_search_by_key(&(next as u32), |&(card, _)| card).ok().map(Stand::Card)
            }
            _ if self.is_read_in_parts() => None,
            _ => Some(Stand::Nowhere),
        }
    }

    /// The first character of the next line that is neither blank nor a comment; past the end where there is none.
    fn next_card_line(&self, at: usize) -> usize {
        let mut line = next_line(self.bytes, at);
        while line < self.bytes.len() {
            let first = skip_blanks(self.bytes, line);
            match self.bytes.get(first) {
                Some(b'\n') => line = first + 1,
                Some(_) if is_comment_line(self.bytes, first) => line = next_line(self.bytes, first),
                _ => return first,
            }
        }
        self.bytes.len()
    }

    /// The card on whose lines `at` stands.
    fn around(&mut self, at: usize) -> Option<usize> {
        let index = self.cards.partition_point(|&(card, _)| card as usize <= at).checked_sub(1)?;
        (self.follow(index, at) >= at).then_some(index)
    }

    /// The end of the card's line that lies at or behind `at`, or of its last one. What was followed before is not followed again.
    fn follow(&mut self, index: usize, at: usize) -> usize {
        if self.extent.0 != index + 1 {
            self.extent = (index + 1, line_end(self.bytes, self.cards[index].0 as usize));
        }
        while self.extent.1 < at {
            match continuation(self.bytes, self.extent.1) {
                Some(more) => self.extent.1 = line_end(self.bytes, more),
                None => break,
            }
        }
        self.extent.1
    }

    fn span(&mut self, index: usize, file: FileId) -> Span {
        let start = self.cards[index].0;
        let end = self.follow(index, self.bytes.len());
        Span::new(file, start, end as u32)
    }

    /// Whether the file has parts that may not have been read.
    fn is_read_in_parts(&self) -> bool {
        [".endl", ".ENDL", ".endc", ".ENDC"].iter().any(|word| memmem::find(self.bytes, word.as_bytes()).is_some())
    }
}

#[cfg(test)]
mod tests {
    use super::super::carets::read;
    use super::*;

    /// For each comment, the first word of its card (`-` for none), and what is said.
    fn found(text: &str) -> Vec<(String, String)> {
        let (tree, ..) = read(text);
        let all = remarks(&tree, FileId(0), text, "drainwise:");
        let word = |remark: &Remark| match remark.card {
            Some((_, span)) => text[span.range()].split_whitespace().next().unwrap().to_owned(),
            None => "-".to_owned(),
        };
        all.iter().map(|remark| (word(remark), text[remark.words.range()].trim().to_owned())).collect()
    }

    #[track_caller]
    fn expect(text: &str, wanted: &[(&str, &str)]) {
        let wanted: Vec<_> = wanted.iter().map(|(card, words)| ((*card).to_owned(), (*words).to_owned())).collect();
        assert_eq!(found(text), wanted, "{text}");
    }

    #[test]
    fn on_the_card_or_above_it() {
        expect("* t\n* drainwise: a\nM1 a b\nM2 a b\n", &[("M1", "a")]);
        expect("* t\n* drainwise: a\n\n* more\n  * drainwise: b\nM1 a b\n", &[("M1", "a"), ("M1", "b")]);
        expect(
            "* t\nM1 a b $ drainwise: a\nM2 a b ; drainwise: b\nM3 a b // drainwise: c\r\n",
            &[("M1", "a"), ("M2", "b"), ("M3", "c")],
        );
        expect("* t\nM1 a b\n+ c ; drainwise: a\n* drainwise: b\n+ d\nM2 a\n", &[("M1", "a"), ("M1", "b")]);
        expect("* t\n.subckt x a\n**drainwise: a\nM1 a b\n.ends\n", &[("M1", "a")]);
    }

    #[test]
    fn elsewhere() {
        expect("* t\nM1 a b\n* drainwise: a\n.ends\n", &[("-", "a")]);
        expect("* t\nM1 a b\n* drainwise: a", &[("-", "a")]);
        expect("* t\nM1 a b\n* see drainwise: a\n* x\n", &[]);
        expect("* t\nM1 a 'drainwise: a' $ see drainwise: b\n", &[]);
        expect("drainwise: title\nM1 a b\n", &[]);
        expect("* t\n.param x=1 ; drainwise: a\nM1 a b\n", &[]);
        expect("* t\n.control\n* drainwise: a\nM1 a b\n.endc\nM2 a b\n", &[]);
    }

    #[test]
    fn many_of_them_take_no_longer_than_their_text() {
        let began = std::time::Instant::now();
        let lines = "+ x ; drainwise: a\n* drainwise: b\n".repeat(50_000);
        assert_eq!(found(&format!("* t\nM1 a b\n{lines}")).len(), 100_000);
        found(&format!("* t\nM1 a b ; {}\n", "drainwise: a ".repeat(200_000)));
        found(&format!("* t\n{}M1 a b\n", "* drainwise: b\n".repeat(100_000)));
        assert!(began.elapsed().as_secs() < 20, "{:?}", began.elapsed());
    }

    #[test]
    fn files_without_any_cost_one_search() {
        let (tree, ..) = read("* t\nM1 a b\n");
        assert!(remarks(&tree, FileId(0), "* t\nM1 a b\n", "drainwise:").is_empty());
    }
}
