//! Drainwise checks that the high-voltage transistors of a SPICE netlist are used as their process allows.
#![warn(missing_docs)]

pub mod source;
pub mod names;
pub mod quantity;
pub mod diag;
pub mod expr;
pub mod waiver;
pub mod declared;
pub mod netlist;
pub mod load;
pub mod deck;
pub mod catalogue;
