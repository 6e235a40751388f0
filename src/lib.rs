//! Drainwise checks that the high-voltage transistors of a SPICE netlist are used as their process allows.
#![warn(missing_docs)]

pub mod catalogue;
pub mod deck;
pub mod declared;
pub mod diag;
pub mod expr;
pub mod names;
pub mod quantity;
pub mod source;
pub mod waiver;
