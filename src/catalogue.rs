//! The catalogue of the program's own rules: their pages as text, for `drainwise rules` and the documentation.
//!
//! The pages themselves lie lower down, with the decks inside the program, since `builtin:ldmos` is made of them.

pub use crate::deck::pages::{PAGES, Page, page};
