//! A line of a netlist as reports show it: made safe, and cut to a bearable length around what is pointed at.

use super::visible::visible;

/// Longer lines are cut around what a label points at.
const LONGEST_LINE: usize = 160;

/// A line cut around what its labels point at.
pub(super) struct Cut {
    /// The text, made safe.
    pub(super) text: String,
    from: usize,
    to: usize,
    lead: usize,
}

impl Cut {
    /// Around the bytes `first..last` of the line.
    pub(super) fn new(line: &str, first: usize, last: usize) -> Cut {
        if line.len() <= LONGEST_LINE {
            return Cut { text: visible(line).into_owned(), from: 0, to: line.len(), lead: 0 };
        }
        let from = if first < LONGEST_LINE / 2 { 0 } else { floor(line, first - LONGEST_LINE / 4) };
        let to = floor(line, (last + LONGEST_LINE / 4).min(from + LONGEST_LINE).max(from).min(line.len()));
        let (head, tail) = (if from > 0 { "… " } else { "" }, if to < line.len() { " …" } else { "" });
        Cut { text: format!("{head}{}{tail}", visible(&line[from..to])), from, to, lead: head.len() }
    }

    /// Where an offset of the line stands in the cut text.
    pub(super) fn place(&self, line: &str, offset: usize) -> usize {
        let offset = offset.clamp(self.from, self.to);
        self.lead + visible(&line[self.from..offset]).len()
    }
}

/// The offset, or the one before it where a character begins.
pub(super) fn floor(text: &str, mut offset: usize) -> usize {
    while !text.is_char_boundary(offset) {
        offset -= 1;
    }
    offset
}
