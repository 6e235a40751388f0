//! Connectivity: which nets are one, what stands on a net, and in which surroundings each cell occurs.
//!
//! A cell behaves by its surroundings: two of its ports may be one net outside, a port may be a declared rail. A [`Context`]
//! is a cell (with parameters) in one kind of surroundings. All instances that agree in them share it and are counted; work
//! goes by contexts, never by instances (after M. Sharir and A. Pnueli, "Two approaches to interprocedural data flow
//! analysis", 1981, from memory). Contexts form a graph without rings, from the tops down.

mod contexts;
mod joins;
mod marks;
pub mod paths;
mod pins;

pub use contexts::{Context, ContextIx, Contexts};
pub use marks::{Mark, MarkSet, Marks, RailSlot, all_rails, rail, rail_in_mode};
pub use pins::{Pin, PinTable};
