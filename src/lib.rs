//! Drainwise checks that the high-voltage transistors of a SPICE netlist are used as their process allows.
#![warn(missing_docs)]

pub mod declared;
pub mod diag;
pub mod expr;
pub mod load;
pub mod names;
pub mod netlist;
pub mod quantity;
pub mod source;
pub mod waiver;
