//! Waivers: findings that someone accepted, with a reason and, where wanted, a date.

use crate::names::Glob;
use crate::source::Span;

/// A day of the calendar.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Date {
    /// Year.
    pub year: u16,
    /// Month, 1 to 12.
    pub month: u8,
    /// Day, 1 to 31.
    pub day: u8,
}

/// An accepted finding, or several.
#[derive(Clone, Debug, PartialEq)]
pub struct Waiver {
    /// The rule's id.
    pub rule: String,
    /// Instance path (`xbias.m4`, globs, `**` crosses dots) or `cell/device` for every instance.
    pub at: Glob,
    /// Only this terminal pair or pin.
    pub pair: Option<String>,
    /// Why.
    pub reason: String,
    /// By whom.
    pub by: Option<String>,
    /// Last day it holds.
    pub until: Option<Date>,
    /// Where it stands.
    pub place: Span,
}
