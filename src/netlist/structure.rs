//! The first pass over a netlist: cells, conditions, directives, and where the element cards stand.
//!
//! It goes over the lines once and never looks into an element card. It reads no files: at an include it stops and says
//! what it wants, and whoever drives it reads that text with the same [`Builder`] before it resumes the first. So files
//! may nest without recursion, and a file read in the middle of a cell belongs to that cell.

use super::frames::{Extent, Frame, empty_cell};
use super::lex::{STRANGE, byte, data_end, dot_word, is_comment_line, line_end, next_dot, next_line, skip_blanks};
use super::tree::{CellIx, Fields, GuardIx, Named, Tree};
use crate::diag::Diagnostic;
use crate::names::{Names, Sym};
use crate::source::{FileId, SourceMap, Span};
use std::collections::{HashMap, HashSet};

/// How a text is to be read.
#[derive(Clone, Debug, PartialEq)]
pub enum Opening {
    /// A file of the command line: its first line is a title.
    Root,
    /// In the place of an `.include` card.
    Include,
    /// Only what stands between `.lib section` and its `.endl`.
    Section(String),
}

/// How far a text has been read.
#[derive(Debug)]
pub struct Reading {
    pub(super) file: FileId,
    pub(super) at: usize,
    opening: Opening,
    begun: bool,
    pub(super) prior: Prior,
    /// The `.lib` card of the section that is being read.
    pub(super) section: Option<Span>,
    sections: Vec<String>,
    pub(super) mega: bool,
    pub(super) last_endl: Option<usize>,
    pub(super) lone_ends: Option<Vec<(usize, bool)>>,
}

/// What a `+` line would continue.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Prior {
    /// Nothing: an error.
    Nothing,
    /// A card that has seen to its own continuation.
    Card,
    /// A line that has been complained about already.
    Junk,
    /// A card that may not be continued.
    Include,
    /// A comment that lists pins.
    Pins,
}

impl Reading {
    /// Names of the library sections that were passed over: all of the file's, where the one wanted was not found.
    pub fn sections(&self) -> &[String] {
        &self.sections
    }

    /// Whether the section wanted was found; true where none was.
    pub fn found(&self) -> bool {
        self.section.is_some() || !matches!(self.opening, Opening::Section(_))
    }

    /// The text that is being read.
    pub fn file(&self) -> FileId {
        self.file
    }
}

/// A text that a netlist wants to have read in its place.
#[derive(Clone, Debug, PartialEq)]
pub struct Request {
    /// The path as written, without quotes.
    pub path: String,
    /// Where it is written.
    pub span: Span,
    /// The library section wanted, and where it is named.
    pub section: Option<(String, Span)>,
}

/// Why [`Builder::resume`] came back.
#[derive(Clone, Debug, PartialEq)]
pub enum Step {
    /// The text has been read.
    Done,
    /// This is to be read first.
    Include(Request),
}

/// Builds one tree from the texts of a design.
pub struct Builder<'n> {
    pub(super) names: &'n mut Names,
    pub(super) tree: Tree,
    pub(super) diagnostics: Vec<Diagnostic>,
    pub(super) frames: Vec<Frame>,
    pub(super) too_deep: usize,
    pub(super) lost_ifs: usize,
    pub(super) extents: Vec<Extent>,
    pub(super) defined: HashMap<(CellIx, Sym, Option<GuardIx>), CellIx>,
    pub(super) duplicates: Vec<(CellIx, CellIx)>,
    pub(super) dropped: Vec<CellIx>,
    pub(super) fields: Fields,
    /// Whether the next card must look at its run.
    pub(super) fresh: bool,
}

impl<'n> Builder<'n> {
    /// With an empty top level.
    pub fn new(names: &'n mut Names) -> Builder<'n> {
        let nowhere = Span::new(FileId(0), 0, 0);
        let top = empty_cell(Named { name: names.intern(""), span: nowhere }, None, None);
        Builder {
            names,
            tree: Tree { cells: vec![top], ..Tree::default() },
            diagnostics: Vec::new(),
            frames: vec![Frame::new(CellIx(0))],
            too_deep: 0,
            lost_ifs: 0,
            extents: vec![Extent::none(nowhere)],
            defined: HashMap::new(),
            duplicates: Vec::new(),
            dropped: Vec::new(),
            fields: Fields::default(),
            fresh: true,
        }
    }

    /// Begins to read a text.
    pub fn open(&mut self, file: FileId, opening: Opening) -> Reading {
        if self.extents.len() == 1 && self.tree.card_count == 0 {
            self.tree.cells[0].name.span = Span::new(file, 0, 0);
        }
        Reading {
            file,
            at: 0,
            opening,
            begun: false,
            prior: Prior::Nothing,
            section: None,
            sections: Vec::new(),
            mega: self.tree.mega.contains(&file),
            last_endl: None,
            lone_ends: None,
        }
    }

    /// Reads on, up to the next include or the end of the text. Once it is [`Step::Done`], it stays so.
    pub fn resume(&mut self, text: &str, reading: &mut Reading) -> Step {
        self.fresh = true;
        if !reading.begun {
            reading.begun = true;
            self.begin(text, reading);
        }
        let bytes = text.as_bytes();
        while reading.at < bytes.len() {
            self.element_lines(bytes, reading);
            let first = skip_blanks(bytes, reading.at);
            if first >= bytes.len() {
                break;
            }
            if let Some(step) = self.other_line(text, first, reading) {
                return step;
            }
        }
        if let Some(place) = reading.section.take() {
            let error =
                Diagnostic::error("netlist", place, "this library section is not ended: its `.endl` is missing");
            self.report(error.with_help("write `.endl` after its last card"));
            reading.section = Some(place);
        }
        self.finish_text(bytes, reading)
    }

    /// Ends a text: nothing more is read of it.
    pub(super) fn finish_text(&mut self, bytes: &[u8], reading: &mut Reading) -> Step {
        reading.at = bytes.len();
        if reading.opening == Opening::Root {
            self.close_all();
        }
        Step::Done
    }

    /// The tree and everything there is to complain about.
    pub fn finish(mut self, sources: &SourceMap) -> (Tree, Vec<Diagnostic>) {
        self.settle_duplicates(sources);
        self.tree.cells[0].closed = true;
        let mut seen = HashSet::new();
        self.tree.interface.retain(|pin| seen.insert(pin.name));
        let elements: u64 = self.tree.cells.iter().map(|cell| cell.cards.len() as u64).sum();
        self.tree.card_count += elements;
        (self.tree, self.diagnostics)
    }

    pub(super) fn report(&mut self, diagnostic: Diagnostic) {
        self.diagnostics.push(diagnostic);
    }

    fn begin(&mut self, text: &str, reading: &mut Reading) {
        if text.starts_with('\u{feff}') {
            reading.at = '\u{feff}'.len_utf8();
        }
        match &reading.opening {
            Opening::Root => self.title(text, reading),
            Opening::Include => {}
            Opening::Section(wanted) => {
                let wanted = wanted.clone();
                self.seek_section(text, reading, &wanted);
            }
        }
    }

    fn title(&mut self, text: &str, reading: &mut Reading) {
        let bytes = text.as_bytes();
        let first = skip_blanks(bytes, reading.at);
        if matches!(byte(bytes, first), b'.' | b'*' | b'+' | b'$' | b';' | b'/') {
            return;
        }
        let end = data_end(bytes, first);
        if looks_like_device(&text[first..end]) {
            let span = Span::new(reading.file, first as u32, end as u32);
            let note = Diagnostic::note("netlist", span, "the first line is the title, so this device is not read")
                .with_help("put a title line above it");
            self.report(note);
        }
        reading.at = next_line(bytes, first);
    }

    /// Goes to the line after `.lib wanted`, or to the end of the text.
    fn seek_section(&mut self, text: &str, reading: &mut Reading, wanted: &str) {
        let bytes = text.as_bytes();
        let mut line = reading.at;
        reading.at = bytes.len();
        while let Some(dot) = next_dot(bytes, line) {
            line = next_line(bytes, dot);
            if let Some((start, end)) = section_header(bytes, dot) {
                if text[start..end].eq_ignore_ascii_case(wanted) {
                    reading.section = Some(Span::new(reading.file, start as u32, end as u32));
                    reading.at = line;
                    return;
                }
                reading.sections.push(text[start..end].to_owned());
            }
        }
    }

    /// The hot loop: lines that are element cards, their continuations, blank or plain comments. Stops at any other.
    fn element_lines(&mut self, bytes: &[u8], reading: &mut Reading) {
        let first = skip_blanks(bytes, reading.at);
        if !byte(bytes, first).is_ascii_alphabetic() {
            return;
        }
        if self.fresh {
            self.begin_run(reading.file);
            self.fresh = false;
        }
        let cards = &mut self.cell().cards;
        let mut line = reading.at;
        while line < bytes.len() {
            let mut first = line;
            if !bytes[first].is_ascii_alphabetic() {
                first = skip_blanks(bytes, first);
            }
            match byte(bytes, first) {
                now if now.is_ascii_alphabetic() => cards.push(first as u32),
                b'\n' | b'+' => {}
                b'*' if !matches!(byte(bytes, first + 1), b'.' | b'*' | b'+') => {}
                _ => break,
            }
            line = next_line(bytes, first);
        }
        reading.at = line;
        reading.prior = Prior::Card;
    }

    /// A line that begins with no letter; `first` is its first character. A step where the reading must stop.
    fn other_line(&mut self, text: &str, first: usize, reading: &mut Reading) -> Option<Step> {
        let bytes = text.as_bytes();
        match bytes[first] {
            b'\n' => reading.at = first + 1,
            b'+' => self.joint(text, first, reading),
            b'.' => {
                self.tree.card_count += 1;
                return self.directive(text, first, reading);
            }
            b'*' => {
                self.comment(text, first, reading);
                reading.at = next_line(bytes, first);
            }
            _ if is_comment_line(bytes, first) => {
                self.strange(text, first, reading);
                reading.at = next_line(bytes, first);
            }
            now if now.is_ascii_alphabetic() => {}
            _ => self.junk(text, first, reading),
        }
        None
    }

    fn joint(&mut self, text: &str, first: usize, reading: &mut Reading) {
        let bytes = text.as_bytes();
        reading.at = next_line(bytes, first);
        let end = data_end(bytes, first);
        let (message, help) = match reading.prior {
            Prior::Nothing => ("this line continues nothing", "a `+` line must follow the card that it continues"),
            Prior::Include => ("a card that names a file cannot be continued", "write it on one line"),
            _ => return,
        };
        if end > first + 1 {
            let span = Span::new(reading.file, first as u32, end as u32);
            self.report(Diagnostic::error("card", span, message).with_help(help));
            reading.prior = Prior::Junk;
        }
    }

    fn strange(&mut self, text: &str, first: usize, reading: &Reading) {
        let mark = text[first..].chars().next().unwrap_or(' ');
        if mark == '§' || STRANGE.contains(&text.as_bytes()[first]) {
            let span = Span::new(
                reading.file,
                first as u32,
                data_end(text.as_bytes(), first).max(first + mark.len_utf8()) as u32,
            );
            let message = format!("a line that begins with `{mark}` is taken for a comment");
            self.report(Diagnostic::warning("card", span, message).with_help("begin comments with `*`"));
        }
    }

    /// Lines that are no cards; a run of them is one error.
    fn junk(&mut self, text: &str, first: usize, reading: &mut Reading) {
        let bytes = text.as_bytes();
        let (mut line, mut more) = (next_line(bytes, first), 0usize);
        while line < bytes.len() {
            let next = skip_blanks(bytes, line);
            let ends = next >= bytes.len()
                || matches!(bytes[next], b'.' | b'*' | b'+' | b'\n')
                || bytes[next].is_ascii_alphabetic();
            if ends || is_comment_line(bytes, next) {
                break;
            }
            more += 1;
            line = next_line(bytes, next);
        }
        let end = line_end(bytes, first).min(data_end(bytes, first).max(first + 1));
        let end = (end..=bytes.len()).find(|&end| text.is_char_boundary(end)).unwrap_or(first);
        let span = Span::new(reading.file, first as u32, end as u32);
        let message = match more {
            0 => "this line is no card".to_owned(),
            1 => "this line and the one after it are no cards".to_owned(),
            _ => format!("this line and the {more} after it are no cards"),
        };
        let help = "a card begins with a letter or a dot, a comment with `*`, a continued line with `+`";
        self.report(Diagnostic::error("card", span, message).with_help(help));
        reading.at = line;
        reading.prior = Prior::Junk;
    }
}

/// The section's name on a `.lib` card at `dot` that begins one; none on every other card.
pub(super) fn section_header(bytes: &[u8], dot: usize) -> Option<(usize, usize)> {
    let (word, past) = dot_word(bytes, dot);
    if word != "lib" {
        return None;
    }
    let mut start = skip_blanks(bytes, past);
    let mut end = data_end(bytes, past);
    if end > start + 1 && matches!(bytes[start], b'\'' | b'"') && bytes[end - 1] == bytes[start] {
        (start, end) = (start + 1, end - 1);
    }
    let one_word = start < end && !bytes[start..end].iter().any(|now| matches!(now, b' ' | b'\t' | b'\'' | b'"'));
    one_word.then_some((start, end))
}

/// Whether a title is more likely a device that stands on line 1.
fn looks_like_device(title: &str) -> bool {
    let words: Vec<&str> = title.split_ascii_whitespace().take(40).collect();
    let Some(name) = words.first() else { return false };
    let letter = name.as_bytes()[0].to_ascii_lowercase();
    let numbered = name.bytes().skip(1).any(|byte| byte.is_ascii_digit());
    let enough = match letter {
        b'r' | b'c' | b'l' | b'v' | b'i' | b'd' | b'x' => 4,
        b'q' | b'j' | b'm' => 5,
        _ => return false,
    };
    let last = words.last().is_some_and(|word| word.starts_with(|first: char| first.is_ascii_digit()));
    numbered
        && words.len() >= enough
        && (last || title.contains('=') || matches!(letter, b'x' | b'q' | b'j' | b'm' | b'd'))
}

#[cfg(test)]
mod tests {
    use super::super::carets::{check, read};
    use super::super::tree::{Cell, Tree};
    use super::*;
    use proptest::prelude::*;

    fn cell<'t>(tree: &'t Tree, names: &Names, name: &str) -> &'t Cell {
        let mut found = tree.cells.iter().filter(|cell| names.text(cell.name.name) == name);
        let cell = found.next().unwrap();
        assert!(found.next().is_none(), "{name} is there twice");
        cell
    }

    fn cards(text: &str, cell: &Cell) -> Vec<String> {
        let word = |&at: &u32| text[at as usize..].split_ascii_whitespace().next().unwrap().to_owned();
        cell.cards.iter().map(word).collect()
    }

    /// The cards of the top level of a text in which nothing is to be complained about.
    fn top_cards(text: &str) -> Vec<String> {
        let (tree, diagnostics, _, _) = read(text);
        assert!(diagnostics.is_empty(), "{diagnostics:#?}");
        cards(text, &tree.cells[0])
    }

    /// Ngspice User's Manual, version 39, section 2.3.1: the first line is the title, whatever it says. That a line that
    /// begins like a card, comment or directive is none is this program's own rule.
    #[test]
    fn title_lines() {
        assert_eq!(top_cards("Valve driver\nR1 a b 1k\n"), ["R1"]);
        assert_eq!(top_cards("\nR1 a b 1k\n.end\n"), ["R1"], "a blank line 1 is an empty title");
        assert_eq!(top_cards("\u{feff}title\r\nR1 a b 1k\r\n.END\r\n"), ["R1"]);
        assert_eq!(top_cards("* comment\nR1 a b 1k"), ["R1"]);
        assert_eq!(top_cards("; comment\nR1 a b 1k"), ["R1"]);
        assert_eq!(top_cards("// comment\nR1 a b 1k"), ["R1"]);
        assert_eq!(top_cards(".global vss\nR1 a b 1k"), ["R1"]);
        assert_eq!(top_cards("Ring of 3 inverters\nR1 a b 1k"), ["R1"]);
        check(" M1 d g s b n60 w=1u\n*^^^^^^^^^^^^^^^^^^^ so this device is not read\n");
    }

    #[test]
    fn continuations_reach_over_comments_and_blank_lines() {
        let text = "t\n.subckt a p\n* why\n\n+ q\n+\n+ r w=1\nR1 p q 1k\n* x\n+ tc=1\n.ends\nR2 a b 2\n";
        let (tree, diagnostics, names, _) = read(text);
        assert!(diagnostics.is_empty(), "{diagnostics:#?}");
        let a = cell(&tree, &names, "a");
        assert_eq!(a.ports.iter().map(|port| names.text(port.name)).collect::<Vec<_>>(), ["p", "q", "r"]);
        assert_eq!((a.formals.len(), a.closed), (1, true));
        assert_eq!(cards(text, a), ["R1"]);
        check("t\n.include x.sp\n + y\n*^^^ cannot be continued\n");
        check("* t\n + a b\n*^^^^^ continues nothing\n");
    }

    /// Ngspice User's Manual, version 39, section 2.5: cells nest; `.ends` without a name ends all of them. Simulators
    /// also take one nameless `.ends` for each cell (seen in ngspice 39).
    #[test]
    fn ends_of_cells() {
        let text = "t\n.subckt o a\n.subckt i b\nR1 b 0 1\n.ends\nR2 a 0 1\n.ends\nR3 c 0 1\n";
        assert_eq!(top_cards(text), ["R3"]);
        let (tree, _, names, _) = read(text);
        assert_eq!(cards(text, cell(&tree, &names, "o")), ["R2"]);
        assert_eq!(cell(&tree, &names, "o").inner.len(), 1);
        let text = "t\n.subckt o a\nR2 a 0 1\n.macro i b\nR1 b 0 1\n.ends\nR3 c 0 1\n.subckt p a\n.ends p\n";
        assert_eq!(top_cards(text), ["R3"]);
        check(
            "t
.subckt outer a
.subckt inner b
*       ^^^^^ its `.ends` is missing
R1 a b 1
.ends outer
 .ends
*^^^^^ ends nothing
",
        );
    }

    #[test]
    fn wrong_ends() {
        check(
            "t
.subckt pump a
R1 a b 1
.ends pumb
*     ^^^^ names no open cell; it is taken to end `pump`
R2 a b 1
.subckt late a
*       ^^^^ its `.ends` is missing
R1 a b 1
.end
R9 a b 1
",
        );
    }

    #[test]
    fn cells_defined_twice() {
        let text = "t\n.subckt c a\nR1 a 0 1\n.ends\n.subckt c a\nR2 a 0 1\n.ends\n.subckt d a\n.subckt c a\n.ends c\n.ends d\n";
        let (tree, diagnostics, names, _) = read(text);
        assert_eq!(diagnostics.len(), 1);
        assert_eq!((diagnostics[0].severity, diagnostics[0].labels.len()), (crate::diag::Severity::Error, 1));
        assert_eq!(tree.cells.len(), 4);
        assert_eq!(cards(text, &tree.cells[1]), ["R1"]);
        let inner = tree.cells.iter().find(|cell| cell.parent == Some(CellIx(2))).unwrap();
        assert_eq!(names.text(inner.name.name), "c");
        assert_eq!(tree.cells[0].inner, [CellIx(1), CellIx(2)]);
        assert_eq!(tree.cells[2].inner, [CellIx(3)]);
        let (_, diagnostics, _, _) = read("t\n.subckt c a\nR1 a 0 1\n.ends\n.subckt c a\nR1 a 0 1\n.ends c\n");
        assert_eq!(diagnostics[0].severity, crate::diag::Severity::Note);
    }

    /// Ngspice User's Manual, version 39, section 2.13.
    #[test]
    fn conditions_make_guards() {
        let text = "t\n.if (m==1)\nR1 a b 1\n.elseif (m==2)\nR2 a b 1\n.if (k)\nR3 a b 1\n.endif\n.else\nR4 a b 1\n.endif\nR5 a b 1\n";
        let (tree, diagnostics, _, _) = read(text);
        assert!(diagnostics.is_empty(), "{diagnostics:#?}");
        let top = &tree.cells[0];
        let guards: Vec<_> = top.runs.iter().map(|run| (run.first, run.guard.map(|guard| guard.0))).collect();
        assert_eq!(guards, [(0, Some(0)), (1, Some(1)), (2, Some(2)), (3, Some(3)), (4, None)]);
        assert_eq!(top.guards[2].outer, Some(GuardIx(1)));
        assert_eq!(top.guards[3].earlier, [GuardIx(0), GuardIx(1)]);
        assert!(top.guards[3].condition.is_none());
        check(
            "t
.subckt o a
 .if (a)
*^^^ its `.endif` is missing
.subckt x y
 .else
*^^^^^ belongs to no `.if`
 .endif
*^^^^^^ ends nothing
.ends
.ends
",
        );
    }

    #[test]
    fn what_is_no_netlist_is_passed_over() {
        let text = "t\n.control\nrun\nplot v(a)\nM1 x\n.endc\n.tran 1n 1u\n.meas tran t1 trig v(a) val=1\n.DATA d a b\n1 2\n3 4\n.enddata\nR1 a b 1\n.ends_of\n";
        let (tree, diagnostics, _, _) = read(text);
        assert_eq!(cards(text, &tree.cells[0]), ["R1"]);
        assert_eq!(diagnostics.len(), 1, "{diagnostics:#?}");
    }

    #[test]
    fn unknown_cards_offer_the_nearest() {
        let (_, diagnostics, _, _) = read("t\n.parm a=1\n12 a b\n# b\n'x'\nR1 a b 1\n=== a\n");
        let told: Vec<_> =
            diagnostics.iter().map(|one| (one.code.as_str(), one.severity, one.help.as_deref())).collect();
        use crate::diag::Severity::{Error, Warning};
        assert_eq!(told[0], ("card", Warning, Some("did you mean `.param`?")));
        assert_eq!((told[1].1, told.len()), (Error, 3));
        assert!(diagnostics[1].message.contains("the 2 after it"), "{}", diagnostics[1].message);
        // Ngspice User's Manual, version 39, section 2.1.1: such a line becomes a comment, with a warning.
        assert_eq!(told[2].1, Warning);
    }

    #[test]
    fn directives_are_kept() {
        let text = "t
.param a = 1u b={2*a} \"c\"=3
.func half(x, y) {x/2}
.param twice(x) = '2*x'
.global VSS vdd!
.model n60.1 NMOS (level=1 vto=0.7
+ kp=1u)
.model p60 ako:n60 PMOS
.option reltol=1e-3 scale = 1u
.if (a > 1)
.param c=2
.endif
";
        let (tree, diagnostics, names, sources) = read(&text.replace(" \"c\"=3", ""));
        assert!(diagnostics.is_empty(), "{diagnostics:#?}");
        let top = &tree.cells[0];
        let params: Vec<_> =
            top.params.iter().map(|param| (names.text(param.name.name), sources.slice(param.value.span))).collect();
        assert_eq!(params, [("a", "1u"), ("b", "2*a"), ("c", "2")]);
        assert_eq!(top.params[2].guard, Some(GuardIx(0)));
        assert_eq!(tree.functions.len(), 2);
        assert_eq!(tree.functions[0].formals.len(), 2);
        assert_eq!(sources.slice(tree.functions[0].body.span), "x/2");
        assert_eq!(sources.slice(tree.functions[1].body.span), "2*x");
        assert_eq!(tree.globals.iter().map(|global| names.text(global.name)).collect::<Vec<_>>(), ["VSS", "vdd!"]);
        let models: Vec<_> =
            top.models.iter().map(|model| (names.text(model.name.name), model.kind.as_str())).collect();
        assert_eq!(models, [("n60.1", "nmos"), ("p60", "pmos")]);
        assert_eq!(sources.slice(tree.scale.unwrap().span), "1u");
    }

    /// As circuit description and schematic exports of open processes write them.
    #[test]
    fn comments_that_say_something() {
        let text = "t\n**.subckt top A B<1>\n*.ipin C\n*.iopin a\n*.PININFO D:I E:B F<0>:O\n*+ G:I\n*.GLOBAL vdd!:P gnd!\n*.EQUIV n60=N60X\n*.MEGA\n.subckt s a\n*.PININFO a:I\n.ends\n**.ends\n* plain .ipin\n**** .subckt no\n";
        let (tree, diagnostics, names, _) = read(text);
        assert!(diagnostics.is_empty(), "{diagnostics:#?}");
        let interface: Vec<_> = tree.interface.iter().map(|pin| names.text(pin.name)).collect();
        assert_eq!(interface, ["A", "B<1>", "C", "D", "E", "F<0>", "G"]);
        assert_eq!(tree.globals.iter().map(|global| names.text(global.name)).collect::<Vec<_>>(), ["vdd!", "gnd!"]);
        assert_eq!(tree.equivalents, [(names.find("n60").unwrap(), names.find("N60X").unwrap())]);
        assert_eq!(tree.mega.len(), 1);
    }

    #[test]
    fn sections_nobody_asked_for_are_passed_over() {
        assert_eq!(top_cards("t\n.lib tt\nR1 a b 1\n.endl tt\nR2 a b 2\n"), ["R2"]);
        let text =
            "t\n.lib 'a b.lib' tt\n.lib x.lib ss\n.lib plain.lib\n.inc \"c d.sp\" $ why\n.include e f.sp ; why\n";
        let (mut names, mut asked) = (Names::new(), Vec::new());
        let mut builder = Builder::new(&mut names);
        let mut reading = builder.open(FileId(0), Opening::Root);
        while let Step::Include(request) = builder.resume(text, &mut reading) {
            asked.push((request.path, request.section.map(|(name, _)| name)));
        }
        let section = |name: &str| Some(name.to_owned());
        let wanted = [
            ("a b.lib".to_owned(), section("tt")),
            ("x.lib".to_owned(), section("ss")),
            ("plain.lib".to_owned(), None),
            ("c d.sp".to_owned(), None),
            ("e f.sp".to_owned(), None),
        ];
        assert_eq!(asked, wanted);
    }

    proptest! {
        #[test]
        fn never_panics_and_spans_stay_inside(lines in proptest::collection::vec(line(), 0..40)) {
            let text = lines.concat();
            let (_, diagnostics, _, _) = read(&text);
            for one in diagnostics {
                prop_assert!(text.get(one.span.range()).is_some(), "{one:?}");
                for label in one.labels {
                    prop_assert!(text.get(label.span.range()).is_some());
                }
            }
        }

        #[test]
        fn never_panics_on_any_text(text in "\\PC*|(.|\n)*") {
            read(&text);
        }
    }

    fn line() -> impl Strategy<Value = String> {
        let words = [
            ".subckt",
            ".ends",
            ".if (",
            ".else",
            ".elseif",
            ".endif",
            ".lib",
            ".endl",
            ".include",
            ".param",
            ".func",
            ".model",
            ".end",
            ".control",
            ".endc",
            ".global",
            ".option scale",
            "+",
            "*",
            "*.pininfo",
            "**.subckt",
            "*.equiv",
            "R1",
            "M1",
            " ",
            "a",
            "b",
            "=",
            "'",
            "\"",
            "{",
            "}",
            "(",
            ")",
            "\n",
            "\n",
            "\n",
            "\r\n",
            "$",
            ";",
            "//",
            "µ",
            "§",
            "=",
            "params:",
            "x.lib",
            "1u",
            "\u{feff}",
            "\\",
        ];
        proptest::collection::vec(proptest::sample::select(words.to_vec()), 1..6).prop_map(|words| words.join(" "))
    }
}
