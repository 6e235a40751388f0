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
pub enum Fault {
    Stale,
    Expired,
}
pub struct Complaint {
    pub kind: Fault,
    pub waiver: Waiver,
    pub near: Option<String>,
}
pub fn apply(_d: &mut Vec<crate::diag::Diagnostic>, _w: &[Waiver], _t: Date) -> Vec<Complaint> {
    vec![]
}
pub fn today() -> Date {
    Date { year: 2026, month: 1, day: 1 }
}
impl std::fmt::Display for Date {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "x")
    }
}
