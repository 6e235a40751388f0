//! Comments that say something after all: the notes that schematic and layout exports leave for netlist readers.
//!
//! `*.PININFO`, `*.GLOBAL`, `*.EQUIV` and `*.MEGA` are those of circuit description exports; `**.subckt` and `*.ipin`,
//! `*.opin`, `*.iopin` come from schematic capture (both as they stand in public netlists of open processes).

use super::lex::{data_end, line_end, skip_blanks};
use super::structure::{Builder, Prior, Reading};
use super::tree::Named;
use crate::source::Span;

impl Builder<'_> {
    /// A line whose first character is `*`, at `first`.
    pub(super) fn comment(&mut self, text: &str, first: usize, reading: &mut Reading) {
        let bytes = text.as_bytes();
        let stars = bytes[first..].iter().take_while(|&&now| now == b'*').count();
        let head = first + stars;
        if stars > 2 || head >= bytes.len() {
            return;
        }
        if bytes[head] == b'+' {
            if reading.prior == Prior::Pins {
                self.pins(text, head + 1, reading);
            }
            return;
        }
        if bytes[head] != b'.' {
            return;
        }
        let end = bytes[head + 1..].iter().take_while(|now| now.is_ascii_alphabetic()).count() + head + 1;
        let word = text[head + 1..end].to_ascii_lowercase();
        match (stars, word.as_str()) {
            (1, "pininfo" | "ipin" | "opin" | "iopin") => {
                self.pins(text, end, reading);
                reading.prior = Prior::Pins;
            }
            (2, "subckt") => {
                let name = skip_blanks(bytes, end);
                let past = bytes[name..].iter().take_while(|now| !now.is_ascii_whitespace()).count() + name;
                self.pins(text, past, reading);
                reading.prior = Prior::Pins;
            }
            (1, "global") => self.global_comment(text, end, reading),
            (1, "equiv") => self.equivalent(&text[end..data_end(bytes, end)]),
            (1, "mega") if !reading.mega => {
                reading.mega = true;
                self.tree.mega.push(reading.file);
            }
            _ => {}
        }
    }

    /// Names of pins from `at` to the line's end, with or without a direction (`A:I`). Only a top level has need of them.
    fn pins(&mut self, text: &str, at: usize, reading: &Reading) {
        if self.frames.len() > 1 {
            return;
        }
        for (name, span) in names_on_line(text, at, reading) {
            let bare = without_direction(name, &["I", "O", "B", "U", "IO", "OI", "C"]);
            let named = self.named_at(bare, span.start, reading);
            self.tree.interface.push(named);
        }
    }

    fn global_comment(&mut self, text: &str, at: usize, reading: &Reading) {
        for (name, span) in names_on_line(text, at, reading) {
            let bare = without_direction(name, &["P", "G", "S", "C"]);
            let named = self.named_at(bare, span.start, reading);
            self.tree.globals.push(named);
        }
    }

    fn named_at(&mut self, name: &str, start: u32, reading: &Reading) -> Named {
        Named { name: self.names.intern(name), span: Span::new(reading.file, start, start + name.len() as u32) }
    }

    /// `a=b`, several on a line, blanks around `=` or not.
    fn equivalent(&mut self, pairs: &str) {
        let spaced = pairs.replace('=', " = ");
        let words: Vec<&str> = spaced.split_ascii_whitespace().collect();
        for (index, _) in words.iter().enumerate().filter(|(_, word)| **word == "=") {
            let before = index.checked_sub(1).and_then(|index| words.get(index));
            if let (Some(meant), Some(written)) = (before, words.get(index + 1)) {
                let pair = (self.names.intern(meant), self.names.intern(written));
                self.tree.equivalents.push(pair);
            }
        }
    }
}

fn names_on_line<'t>(text: &'t str, at: usize, reading: &Reading) -> Vec<(&'t str, Span)> {
    let bytes = text.as_bytes();
    let end = line_end(bytes, at);
    let (mut here, mut found) = (skip_blanks(bytes, at), Vec::new());
    while here < end {
        let past = bytes[here..end].iter().take_while(|&&now| now > b' ').count() + here;
        if past == here {
            here += 1;
            continue;
        }
        found.push((&text[here..past], Span::new(reading.file, here as u32, past as u32)));
        here = skip_blanks(bytes, past);
    }
    found
}

fn without_direction<'t>(name: &'t str, directions: &[&str]) -> &'t str {
    match name.rsplit_once(':') {
        Some((bare, direction))
            if !bare.is_empty() && directions.iter().any(|known| direction.eq_ignore_ascii_case(known)) =>
        {
            bare
        }
        _ => name,
    }
}
