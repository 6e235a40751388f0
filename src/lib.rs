//! Drainwise checks that the high-voltage transistors of a SPICE netlist are used as their process allows.
//!
//! The story, from the ground up. Texts and places in them ([`source`]), names ([`names`]) and quantities ([`quantity`]) are what
//! everything stands on. Whatever is wrong becomes a [`diag::Diagnostic`]. One expression language ([`expr`]) serves netlists and
//! rules; [`report`] writes finished diagnostics for people and machines, after [`waiver`] has marked those that someone
//! accepted. Decks declare classes, rails and rules ([`declared`]); netlists say what is connected ([`netlist`]), read by [`load`]
//! and elaborated by [`design`] into a hierarchy whose surroundings [`graph`] tells apart. [`reach`] works out which voltages each
//! net can have, [`roles`] what each transistor does in its circuit, [`current`] what flows through it. Rules ask all of that
//! through [`facts`], and stand in decks ([`deck`], [`catalogue`]); [`engine`] asks them. [`pipeline`] is the whole program as one
//! function; [`changed`], [`survey`], [`tracing`], [`init`] and [`reference`] are what the other commands show, [`serve`] talks to
//! editors, [`cli`] is the command line.
//!
//! A module may only use modules above it in this list; `tests/layers.rs` holds the floors.
#![warn(missing_docs)]

pub mod names;
pub mod source;

pub mod quantity;

pub mod diag;

pub mod expr;
pub mod report;
pub mod waiver;

pub mod declared;
pub mod netlist;

pub mod design;
pub mod load;

pub mod graph;

pub mod reach;

pub mod roles;

pub mod current;

pub mod facts;

pub mod deck;

pub mod catalogue;

pub mod engine;

pub mod pipeline;

pub mod changed;
pub mod init;
pub mod reference;
pub mod survey;
pub mod tracing;

pub mod serve;

pub mod cli;
