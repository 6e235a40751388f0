//! Ranges of voltage, with ends that may be unknown.

/// A range of voltages in volts. An end that is not known is infinite; an empty range has `lo > hi`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interval {
    /// Lowest voltage, or `-∞`.
    pub lo: f64,
    /// Highest voltage, or `+∞`.
    pub hi: f64,
}

impl Interval {
    /// Anything: nothing is known.
    pub const ANY: Interval = Interval { lo: f64::NEG_INFINITY, hi: f64::INFINITY };

    /// One voltage.
    pub fn point(volts: f64) -> Interval {
        Interval { lo: volts, hi: volts }
    }

    /// What both say.
    pub fn and(self, other: Interval) -> Interval {
        Interval { lo: self.lo.max(other.lo), hi: self.hi.min(other.hi) }
    }

    /// The same range seen from the other side.
    pub fn negated(self) -> Interval {
        Interval { lo: -self.hi, hi: -self.lo }
    }

    /// Whether nothing is in it (beyond rounding).
    pub fn is_empty(self) -> bool {
        self.lo > self.hi + 1e-9
    }

    /// The lower end if it is known.
    pub fn known_lo(self) -> Option<f64> {
        self.lo.is_finite().then_some(self.lo)
    }

    /// The upper end if it is known.
    pub fn known_hi(self) -> Option<f64> {
        self.hi.is_finite().then_some(self.hi)
    }
}
