//! Reach: which voltages every net can have, if every declared rail stays in its range.
//!
//! A least fixpoint over intervals, in every frame and every mode (the contract is in `rules/README.md`, "What the analyses
//! guarantee"). All transfers are raises: a net's state holds, for each frame, the highest voltage and the negated lowest one,
//! and both only grow. Rails are fixed and are never walked. The order of work does not change what comes out, since the
//! transfers are monotone; D. E. Knuth, "A generalization of Dijkstra's algorithm", Information Processing Letters 6(1), 1977,
//! has the theory of the ordering, A. Miné's zone domain that of keeping differences against reference nets.
//!
//! A least fixpoint finds what the rails force. Where a gate depends on what its own channel lets through (a ring: latches,
//! self-biased loops), the circuit may also be in states that only hold themselves. Gates in rings are therefore held open, and closed
//! only where the ranges that come out rule their conduction out, in rounds of the whole fixpoint: `rings.rs` finds the gates,
//! `held.rs` has the rounds and their bound. Without a ring there is one round.
//!
//! Work goes by contexts: inside its parent an instance behaves as one device that answers what it adds to its ports; answers
//! are remembered by what the ports bring. One mode costs O(P · F · k) for P pins on nets that are no rails, F frames, and k
//! raises of one net (at most twice the number of distinct rail ends and thresholds on its paths; 2 to 4 in practice).
//!
//! **Guarantee.** If every rail stays in its declared range, current sources stay within their compliance, and no capacitor or
//! inductor kicks an undeclared net, a quasi-static simulation never shows a driven net outside its reach.

mod bounds;
mod components;
mod expand;
mod frames;
mod held;
mod inputs;
mod interval;
mod leads;
mod pairs;
mod plan;
mod rings;
mod shared;
mod solve;
mod state;
mod terminals;
mod touch;
pub mod trace;
mod transfer;

pub use expand::{Reach, ReachContext, ReachIx};
pub use frames::{Frame, Frames};
pub use interval::Interval;
pub use pairs::Unknown;
pub use plan::Cap;
pub use state::{Side, State};
pub use terminals::{Terminals, table as terminals};
