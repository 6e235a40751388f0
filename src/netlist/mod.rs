//! Reads SPICE netlists: from raw text to a tree of cells, and from an element card to its terminals.
//!
//! Two speeds: [`structure`] goes over the lines once and keeps only where the element cards stand; [`fields`] and
//! [`letters`] read one card when somebody asks for it. Nothing here opens a file: [`structure::Builder`] stops at each
//! include and says what it wants.

pub mod fields;
pub mod letters;
pub mod remarks;
pub mod structure;
pub mod tree;
pub mod values;
pub mod waveforms;

mod comments;
mod directives;
mod dots;
mod frames;
mod lex;

#[cfg(test)]
pub(crate) mod carets;

use crate::diag::Diagnostic;
use crate::source::{FileId, Span};

/// Why a card cannot be read, with the place in its file.
#[derive(Clone, Debug, PartialEq)]
pub struct Complaint {
    /// First byte of the place.
    pub start: u32,
    /// Past its last byte.
    pub end: u32,
    /// What is wrong, one sentence.
    pub message: String,
    /// What to do about it.
    pub help: Option<String>,
}

impl Complaint {
    pub(crate) fn new(start: usize, end: usize, message: impl Into<String>) -> Complaint {
        Complaint { start: start as u32, end: end as u32, message: message.into(), help: None }
    }

    pub(crate) fn with_help(mut self, help: impl Into<String>) -> Complaint {
        self.help = Some(help.into());
        self
    }

    /// As an error with the code `card`.
    pub fn diagnostic(self, file: FileId) -> Diagnostic {
        let error = Diagnostic::error("card", Span::new(file, self.start, self.end), self.message);
        match self.help {
            Some(help) => error.with_help(help),
            None => error,
        }
    }
}
