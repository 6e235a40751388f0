//! The dot cards that shape a design, one function each.

use super::dots::{self, Dot};
use super::fields::{formula_end, group_end, read_fields};
use super::lex::{Class, byte, class, data_end, dot_word, in_word, next_dot, next_line, skip_blanks, skip_gaps};
use super::structure::{Builder, Prior, Reading, Request, Step, section_header};
use super::tree::{Fields, Function, Model, Named, Operand, Param, Word};
use super::values;
use crate::diag::Diagnostic;
use crate::source::Span;

impl Builder<'_> {
    /// The dot card at `dot`. A step where the reading must stop.
    pub(super) fn directive(&mut self, text: &str, dot: usize, reading: &mut Reading) -> Option<Step> {
        let bytes = text.as_bytes();
        let (word, past) = dot_word(bytes, dot);
        let place = Span::new(reading.file, dot as u32, past as u32);
        reading.at = next_line(bytes, dot);
        reading.prior = Prior::Card;
        let Some(card) = dots::find(&word) else {
            self.unknown_dot(text, dot, &word, reading);
            return None;
        };
        match card {
            Dot::Subckt => self.subckt(text, dot, reading),
            Dot::Ends => self.ends(text, dot, past, reading),
            Dot::Include => return self.include(text, past, place, reading),
            Dot::Lib => return self.lib(text, dot, past, place, reading),
            Dot::Endl if reading.section.is_some() => return Some(self.finish_text(bytes, reading)),
            Dot::Endl => {
                let error = Diagnostic::error("netlist", place, "this `.endl` ends no library section");
                self.report(error.with_help("look for a lost `.lib` above"));
            }
            Dot::Param => self.params(text, dot, past, reading),
            Dot::Func => self.function(text, past, place, reading),
            Dot::Global => self.globals(text, past, reading),
            Dot::Model => self.model(text, past, place, reading),
            Dot::Option => self.options(text, dot, reading),
            Dot::If | Dot::ElseIf | Dot::Else | Dot::EndIf => self.condition(card, text, past, place, reading),
            Dot::End => {
                if word == "alter" {
                    let message = "what follows `.alter` are variants of the circuit; they are not read";
                    self.report(Diagnostic::note("netlist", place, message));
                }
                return Some(self.finish_text(bytes, reading));
            }
            Dot::Block(last) => self.block(bytes, &word, last, place, reading),
            Dot::Quiet => {}
            Dot::Unread(why) => {
                self.report(Diagnostic::warning("netlist", place, format!("`.{word}` is not read: {why}")))
            }
        }
        None
    }

    fn unknown_dot(&mut self, text: &str, dot: usize, word: &str, reading: &Reading) {
        let bytes = text.as_bytes();
        let mut end = dot + 1;
        while end < bytes.len() && in_word(bytes[end]) {
            end += 1;
        }
        let span = Span::new(reading.file, dot as u32, end as u32);
        let warning =
            Diagnostic::warning("card", span, format!("`{}` is no card known here; it is not read", &text[dot..end]));
        self.report(match dots::nearest(word) {
            Some(near) => warning.with_help(format!("did you mean `.{near}`?")),
            None => warning,
        });
    }

    fn named(&mut self, text: &str, word: Word, reading: &Reading) -> Named {
        Named { name: self.names.intern(word.of(text)), span: word.span(reading.file) }
    }

    /// An operand; where it cannot be read, that is reported (a text in double quotes is no fault).
    fn operand(&mut self, text: &str, word: Word, reading: &Reading) -> Operand {
        match values::operand(text, word, reading.file, reading.mega) {
            Ok(operand) => operand,
            Err(complaint) => {
                if !(word.quoted && text.as_bytes()[word.start as usize - 1] == b'"') {
                    self.report(complaint.diagnostic(reading.file));
                }
                Operand { span: word.span(reading.file), expr: None }
            }
        }
    }

    fn param_list(&mut self, text: &str, pairs: &[(Word, Word)], reading: &Reading) -> Vec<Param> {
        let guard = self.guard();
        let param = |&(key, value): &(Word, Word)| Param {
            name: self.named(text, key, reading),
            value: self.operand(text, value, reading),
            guard,
        };
        pairs.iter().map(param).collect()
    }

    /// Reads the card at `dot` into the shared fields, which the caller gives back.
    fn card_fields(&mut self, text: &str, dot: usize, reading: &Reading) -> Fields {
        let mut fields = std::mem::take(&mut self.fields);
        if let Some(complaint) = read_fields(text, dot as u32, &mut fields) {
            self.report(complaint.diagnostic(reading.file));
        }
        fields
    }

    fn subckt(&mut self, text: &str, dot: usize, reading: &Reading) {
        let fields = self.card_fields(text, dot, reading);
        let header = fields.words[0].span(reading.file);
        let mut words = fields.words[1..].iter().copied().filter(|word| !is_params_mark(word.of(text)));
        let name = match words.next() {
            Some(word) => self.named(text, word, reading),
            None => {
                let help = "write `.subckt name`, then its nets";
                self.report(Diagnostic::error("card", header, "this cell has no name").with_help(help));
                let nowhere = Span::new(reading.file, header.start, header.start);
                Named { name: self.names.intern(""), span: nowhere }
            }
        };
        let ports: Vec<Word> = words.collect();
        let ports = ports.into_iter().map(|word| self.named(text, word, reading)).collect();
        let mut formals = self.param_list(text, &fields.params, reading);
        // A header's defaults hold whatever condition the cell is defined under; the cell carries that itself.
        formals.iter_mut().for_each(|formal| formal.guard = None);
        self.report_stray(text, &fields, reading);
        self.open_cell(name, ports, formals, header);
        self.fields = fields;
        self.fresh = true;
    }

    fn report_stray(&mut self, text: &str, fields: &Fields, reading: &Reading) {
        let Some(stray) = fields.stray.filter(|word| !is_params_mark(word.of(text))) else { return };
        let message = format!("`{}` is not read: it is no `name=value`", stray.of(text));
        let help = "put an expression that holds blanks in single quotes";
        self.report(Diagnostic::warning("card", stray.span(reading.file), message).with_help(help));
    }

    fn ends(&mut self, text: &str, dot: usize, past: usize, reading: &mut Reading) {
        let bytes = text.as_bytes();
        let words = plain_words(bytes, past, data_end(bytes, past), 1);
        let place = Span::new(reading.file, dot as u32, words.first().map_or(past as u32, |word| word.end));
        let named = words.first().map(|word| (self.names.intern(word.of(text)), word.span(reading.file)));
        let only_one = named.is_none() && self.frames.len() > 2 && is_one_of_several(bytes, dot, reading);
        self.close_cells(named, place, only_one);
    }

    fn include(&mut self, text: &str, past: usize, place: Span, reading: &mut Reading) -> Option<Step> {
        reading.prior = Prior::Include;
        let words = path_words(text.as_bytes(), past);
        let (Some(first), Some(last)) = (words.first(), words.last()) else {
            self.no_path(place);
            return None;
        };
        let path =
            Word { start: first.start, end: if first.quoted { first.end } else { last.end }, quoted: first.quoted };
        self.request(text, path, None, place, reading)
    }

    fn request(
        &mut self,
        text: &str,
        path: Word,
        section: Option<Word>,
        place: Span,
        reading: &Reading,
    ) -> Option<Step> {
        if path.of(text).trim().is_empty() {
            self.no_path(place);
            return None;
        }
        self.fresh = true;
        Some(Step::Include(Request {
            path: path.of(text).to_owned(),
            span: path.span(reading.file),
            section: section.map(|word| (word.of(text).to_owned(), word.span(reading.file))),
        }))
    }

    fn no_path(&mut self, place: Span) {
        let error = Diagnostic::error("include", place, "no file is named here");
        self.report(error.with_help("write the path after it, in quotes where it holds blanks"));
    }

    fn lib(&mut self, text: &str, dot: usize, past: usize, place: Span, reading: &mut Reading) -> Option<Step> {
        let bytes = text.as_bytes();
        let words = path_words(bytes, past);
        if words.len() > 1 {
            reading.prior = Prior::Include;
            let (first, last) = (words[0], words[words.len() - 1]);
            let section = if first.quoted { words[1] } else { last };
            let path_end = if first.quoted { first.end } else { words[words.len() - 2].end };
            return self.request(text, Word { end: path_end, ..first }, Some(section), place, reading);
        }
        let Some(header) = section_header(bytes, dot).filter(|&(start, end)| is_section(bytes, start, end, reading))
        else {
            return self.include(text, past, place, reading);
        };
        if let Some(open) = reading.section {
            let error = Diagnostic::error("netlist", open, "this library section is not ended: its `.endl` is missing");
            let next = Span::new(reading.file, dot as u32, header.1 as u32);
            self.report(error.with_place(next, "should stand before this line"));
            return Some(self.finish_text(bytes, reading));
        }
        // A section that nobody asked for.
        let mut line = reading.at;
        while let Some(dot) = next_dot(bytes, line) {
            line = next_line(bytes, dot);
            if dot_word(bytes, dot).0 == "endl" {
                break;
            }
        }
        reading.at = line;
        None
    }

    fn params(&mut self, text: &str, dot: usize, past: usize, reading: &Reading) {
        if is_function(text.as_bytes(), past) {
            let place = Span::new(reading.file, dot as u32, past as u32);
            return self.function(text, past, place, reading);
        }
        let fields = self.card_fields(text, dot, reading);
        let params = self.param_list(text, &fields.params, reading);
        for word in fields.words.iter().skip(1).filter(|word| !is_params_mark(word.of(text))) {
            let message = format!("parameter `{}` has no value", word.of(text));
            let error = Diagnostic::error("card", word.span(reading.file), message);
            self.report(error.with_help(format!("write `{}=…`", word.of(text))));
        }
        self.report_stray(text, &fields, reading);
        self.cell().params.extend(params);
        self.fields = fields;
    }

    /// `name(a, b) {body}`, with the body in quotes or not, after `=` or not.
    fn function(&mut self, text: &str, past: usize, place: Span, reading: &Reading) {
        let bytes = text.as_bytes();
        let start = skip_gaps(bytes, past);
        let end = word_end(bytes, start);
        let open = skip_gaps(bytes, end);
        let close =
            (byte(bytes, open) == b'(').then(|| memchr::memchr2(b')', b'\n', &bytes[open..]).map(|found| open + found));
        let Some(close) = close.flatten().filter(|&close| end > start && bytes[close] == b')') else {
            let error = Diagnostic::error("card", place, "this function cannot be read");
            return self.report(error.with_help("write `.func name(a, b) {expression}`"));
        };
        let name = self.named(text, Word { start: start as u32, end: end as u32, quoted: false }, reading);
        let formals = text[open + 1..close].split(',').map(str::trim).filter(|formal| !formal.is_empty());
        let formals = formals.map(|formal| self.names.intern(formal)).collect();
        let mut at = skip_gaps(bytes, close + 1);
        if byte(bytes, at) == b'=' {
            at = skip_gaps(bytes, at + 1);
        }
        let body = whole_formula(bytes, at);
        if body.end <= body.start {
            let message = format!("function `{}` has no expression", &text[start..end]);
            return self.report(
                Diagnostic::error("card", name.span, message).with_help("write `.func name(a, b) {expression}`"),
            );
        }
        let body = self.operand(text, body, reading);
        self.tree.functions.push(Function { name, formals, body });
    }

    fn globals(&mut self, text: &str, past: usize, reading: &Reading) {
        for word in plain_words(text.as_bytes(), past, text.len(), usize::MAX) {
            let named = self.named(text, word, reading);
            self.tree.globals.push(named);
        }
    }

    fn model(&mut self, text: &str, past: usize, place: Span, reading: &Reading) {
        let words = plain_words(text.as_bytes(), past, text.len(), 3);
        let kind = match words.get(1) {
            Some(word) if word.of(text).get(..4).is_some_and(|head| head.eq_ignore_ascii_case("ako:")) => words.get(2),
            kind => kind,
        };
        let (Some(name), Some(kind)) = (words.first(), kind) else {
            let span = words.first().map_or(place, |word| word.span(reading.file));
            let error = Diagnostic::error("card", span, "this model lacks a name or a type");
            return self.report(
                error.with_help("write `.model name type (parameters)`, for example `.model n1 nmos (level=1)`"),
            );
        };
        let model = Model {
            name: self.named(text, *name, reading),
            kind: kind.of(text).to_ascii_lowercase(),
            guard: self.guard(),
        };
        self.cell().models.push(model);
    }

    fn options(&mut self, text: &str, dot: usize, reading: &Reading) {
        let mut fields = std::mem::take(&mut self.fields);
        // What else stands on the card is the simulator's affair, readable or not.
        let _ = read_fields(text, dot as u32, &mut fields);
        let scale = fields.params.iter().rev().find(|(key, _)| key.of(text).eq_ignore_ascii_case("scale"));
        if let Some(&(_, value)) = scale {
            self.tree.scale = Some(self.operand(text, value, reading));
        }
        self.fields = fields;
    }

    fn condition(&mut self, card: Dot, text: &str, past: usize, place: Span, reading: &Reading) {
        let condition = matches!(card, Dot::If | Dot::ElseIf).then(|| {
            let formula = whole_formula(text.as_bytes(), skip_blanks(text.as_bytes(), past));
            if formula.start < formula.end {
                return self.operand(text, formula, reading);
            }
            self.report(
                Diagnostic::error("card", place, "this card has no condition").with_help("write `.if (condition)`"),
            );
            Operand { span: place, expr: None }
        });
        match (card, condition) {
            (Dot::If, Some(condition)) => self.open_if(condition, place),
            (Dot::EndIf, _) => self.close_if(place),
            (_, condition) => self.next_branch(condition, place),
        }
    }

    /// Lines that are no netlist, up to the card `last`.
    fn block(&mut self, bytes: &[u8], word: &str, last: &str, place: Span, reading: &mut Reading) {
        let mut line = reading.at;
        reading.prior = Prior::Junk;
        while let Some(dot) = next_dot(bytes, line) {
            line = next_line(bytes, dot);
            if dot_word(bytes, dot).0 == last {
                reading.at = line;
                return;
            }
        }
        reading.at = bytes.len();
        let message = format!("`.{word}` is not ended: nothing below it is read");
        self.report(Diagnostic::warning("netlist", place, message).with_help(format!("write `.{last}` where it ends")));
    }
}

/// `params:` and its kin, which only announce parameters.
pub(super) fn is_params_mark(word: &str) -> bool {
    word.ends_with(':')
        && ["params:", "param:", "optional:", "text:"].iter().any(|mark| word.eq_ignore_ascii_case(mark))
}

fn word_end(bytes: &[u8], mut at: usize) -> usize {
    while at < bytes.len() && in_word(bytes[at]) {
        at += 1;
    }
    at
}

/// At most `most` words of a card from `at` on, over continuation lines, but not past `limit`.
fn plain_words(bytes: &[u8], at: usize, limit: usize, most: usize) -> Vec<Word> {
    let (mut words, mut here) = (Vec::new(), at);
    while words.len() < most {
        here = skip_gaps(bytes, here);
        if here >= limit || bytes[here] == b'\n' {
            break;
        }
        let end = word_end(bytes, here);
        if end > here {
            words.push(Word { start: here as u32, end: end as u32, quoted: false });
        }
        here = end.max(here + 1);
    }
    words
}

/// The words of a line that names a file; quotes keep blanks together.
fn path_words(bytes: &[u8], past: usize) -> Vec<Word> {
    let end = data_end(bytes, past);
    let (mut words, mut at) = (Vec::new(), skip_blanks(bytes, past));
    while at < end {
        let mark = bytes[at];
        let close = matches!(mark, b'\'' | b'"').then(|| memchr::memchr(mark, &bytes[at + 1..end])).flatten();
        let (start, past) = match close {
            Some(found) => (at + 1, at + 1 + found),
            None => (at, at + bytes[at..end].iter().take_while(|&&now| class(now) != Class::Blank).count()),
        };
        words.push(Word { start: start as u32, end: past as u32, quoted: close.is_some() });
        at = skip_blanks(bytes, past + usize::from(close.is_some()));
    }
    words
}

/// Whether a `.lib` card with one word begins a section, or names a file to be read whole.
fn is_section(bytes: &[u8], start: usize, end: usize, reading: &mut Reading) -> bool {
    if bytes[start..end].iter().any(|now| matches!(now, b'/' | b'\\' | b'.')) {
        return false;
    }
    let last = *reading.last_endl.get_or_insert_with(|| {
        let (mut line, mut last) = (0, 0);
        while let Some(dot) = next_dot(bytes, line) {
            line = next_line(bytes, dot);
            if dot_word(bytes, dot).0 == "endl" {
                last = dot;
            }
        }
        last
    });
    last > start
}

/// Whether a nameless `.ends` in a nested cell ends that cell alone. The Ngspice User's Manual (version 39, section 2.5)
/// has it end all open cells; simulators also take one for each cell. Which is meant shows in what follows: if an
/// `.ends` comes that no `.subckt` below opens, the outer cell is still open here.
fn is_one_of_several(bytes: &[u8], dot: usize, reading: &mut Reading) -> bool {
    let answers = reading.lone_ends.get_or_insert_with(|| {
        let (mut line, mut events) = (0, Vec::new());
        while let Some(dot) = next_dot(bytes, line) {
            line = next_line(bytes, dot);
            match dots::find(&dot_word(bytes, dot).0) {
                Some(Dot::Subckt) => events.push((dot, 1i64)),
                Some(Dot::Ends) => events.push((dot, -1)),
                Some(Dot::End) => break,
                _ => {}
            }
        }
        let (mut lowest, mut answers) = (0i64, Vec::new());
        for &(dot, change) in events.iter().rev() {
            answers.push((dot, lowest < 0));
            lowest = change + lowest.min(0);
        }
        answers.reverse();
        answers
    });
    answers.binary_search_by_key(&dot, |answer| answer.0).is_ok_and(|index| answers[index].1)
}

fn is_function(bytes: &[u8], past: usize) -> bool {
    let start = skip_gaps(bytes, past);
    let end = word_end(bytes, start);
    end > start && byte(bytes, end) == b'('
}

/// The formula at `at`: what stands in quotes or braces, or else the rest of the line.
fn whole_formula(bytes: &[u8], at: usize) -> Word {
    if matches!(byte(bytes, at), b'\'' | b'"' | b'{')
        && let Some(end) = group_end(bytes, at)
        && formula_end(bytes, at) == Ok(end)
    {
        return Word { start: at as u32 + 1, end: end as u32 - 1, quoted: true };
    }
    Word { start: at as u32, end: data_end(bytes, at).max(at) as u32, quoted: false }
}
