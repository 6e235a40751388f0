//! Numbers of the trade: physical dimensions, units and prefixes of decks, scale suffixes of netlists, and how to print
//! a number for people.

/// A physical dimension as powers of metre, second, volt and ampere (enough for circuits: Ω = V/A, W = V·A, F = A·s/V, Hz = 1/s).
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Default)]
pub struct Dim {
    /// Power of metre.
    pub metre: i8,
    /// Power of second.
    pub second: i8,
    /// Power of volt.
    pub volt: i8,
    /// Power of ampere.
    pub ampere: i8,
}

impl Dim {
    /// A plain number.
    pub const NONE: Dim = Dim { metre: 0, second: 0, volt: 0, ampere: 0 };
    /// Volts.
    pub const VOLT: Dim = Dim { volt: 1, ..Dim::NONE };
    /// Amperes.
    pub const AMPERE: Dim = Dim { ampere: 1, ..Dim::NONE };
    /// Metres.
    pub const METRE: Dim = Dim { metre: 1, ..Dim::NONE };
    /// Seconds.
    pub const SECOND: Dim = Dim { second: 1, ..Dim::NONE };
    /// Hertz.
    pub const HERTZ: Dim = Dim { second: -1, ..Dim::NONE };
    /// Watts.
    pub const WATT: Dim = Dim { volt: 1, ampere: 1, ..Dim::NONE };
    /// Amperes per metre of width.
    pub const DENSITY: Dim = Dim { ampere: 1, metre: -1, ..Dim::NONE };
    /// Dopants per cubic metre.
    pub const DOPING: Dim = Dim { metre: -3, ..Dim::NONE };
}
