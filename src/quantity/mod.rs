//! Numbers of the trade: physical dimensions, units and prefixes of decks, scale suffixes of netlists, and how to print
//! a number for people.
//!
//! Decks and netlists write the same number differently on purpose: a deck's `2MHz` is two megahertz, a netlist's is two
//! millihertz. Both are rounded once, from the digits as written, so that `20u`, `20um` and `2e-5` are the same `f64`.

mod decimal;
mod deck;
mod show;
mod spice;

pub use deck::{glued_quantity, parse_quantity};
pub use show::{show, show_percent};
pub use spice::{SpiceNumber, spice_number};

use std::fmt;
use std::ops::{Div, Mul};

/// A number with its dimension.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Quantity {
    /// In base SI units.
    pub value: f64,
    /// What it measures.
    pub dim: Dim,
}

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
    /// Ohms.
    pub const OHM: Dim = Dim { volt: 1, ampere: -1, ..Dim::NONE };
    /// Farads.
    pub const FARAD: Dim = Dim { ampere: 1, second: 1, volt: -1, ..Dim::NONE };

    /// The dimension of a whole power; powers beyond ±127 stay there.
    pub fn powi(self, power: i32) -> Dim {
        let by = |own: i8| i32::from(own).saturating_mul(power).clamp(-127, 127) as i8;
        Dim { metre: by(self.metre), second: by(self.second), volt: by(self.volt), ampere: by(self.ampere) }
    }

    /// The dimension of a square root, where every power is even.
    pub fn root(self) -> Option<Dim> {
        let Dim { metre, second, volt, ampere } = self;
        let even = [metre, second, volt, ampere].iter().all(|power| power % 2 == 0);
        even.then_some(Dim { metre: metre / 2, second: second / 2, volt: volt / 2, ampere: ampere / 2 })
    }

    /// What it measures, in words, with an article: `a voltage`, `a plain number`, `something in V²`.
    pub fn in_words(self) -> String {
        let known = NAMED.iter().find(|(dim, ..)| *dim == self);
        known.map_or_else(|| format!("something in {self}"), |(_, _, words)| (*words).to_string())
    }
}

impl Mul for Dim {
    type Output = Dim;

    fn mul(self, other: Dim) -> Dim {
        Dim {
            metre: self.metre.saturating_add(other.metre),
            second: self.second.saturating_add(other.second),
            volt: self.volt.saturating_add(other.volt),
            ampere: self.ampere.saturating_add(other.ampere),
        }
    }
}

impl Div for Dim {
    type Output = Dim;

    fn div(self, other: Dim) -> Dim {
        self * other.powi(-1)
    }
}

/// Dimensions with a name of their own: symbol (empty for plain numbers) and words.
const NAMED: [(Dim, &str, &str); 15] = [
    (Dim::NONE, "", "a plain number"),
    (Dim::VOLT, "V", "a voltage"),
    (Dim::AMPERE, "A", "a current"),
    (Dim::METRE, "m", "a length"),
    (Dim::SECOND, "s", "a time"),
    (Dim::HERTZ, "Hz", "a frequency"),
    (Dim::WATT, "W", "a power"),
    (Dim::OHM, "Ω", "a resistance"),
    (Dim::FARAD, "F", "a capacitance"),
    (Dim { ampere: 1, volt: -1, ..Dim::NONE }, "S", "a conductance"),
    (Dim { volt: 1, second: 1, ampere: -1, ..Dim::NONE }, "H", "an inductance"),
    (Dim { volt: 1, ampere: 1, second: 1, ..Dim::NONE }, "J", "an energy"),
    (Dim { ampere: 1, second: 1, ..Dim::NONE }, "C", "a charge"),
    (Dim::DENSITY, "A/m", "a current per width"),
    (Dim::DOPING, "1/m³", "a doping density"),
];

/// The unit's symbol: `V`, `Ω`, `V·s/m`, `1/(m·s)`; empty for a plain number.
impl fmt::Display for Dim {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        if let Some((_, symbol, _)) = NAMED.iter().find(|(dim, ..)| dim == self) {
            return out.write_str(symbol);
        }
        let powers = [("V", self.volt), ("A", self.ampere), ("m", self.metre), ("s", self.second)];
        let side = |sign: i32| {
            let factors = powers.iter().map(|&(symbol, power)| (symbol, i32::from(power) * sign));
            factors.filter(|&(_, power)| power > 0).map(|(s, p)| format!("{s}{}", raised(p))).collect::<Vec<_>>()
        };
        let (above, below) = (side(1), side(-1));
        out.write_str(if above.is_empty() { "1" } else { "" })?;
        out.write_str(&above.join("·"))?;
        match below.len() {
            0 => Ok(()),
            1 => write!(out, "/{}", below[0]),
            _ => write!(out, "/({})", below.join("·")),
        }
    }
}

fn raised(power: i32) -> String {
    const DIGITS: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    if power == 1 {
        return String::new();
    }
    power.to_string().bytes().map(|digit| DIGITS[usize::from(digit - b'0') % 10]).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Units by their definition in terms of V, A, m, s (International System of Units, 9th brochure, table 4; from memory).
    #[test]
    fn derived_units() {
        assert_eq!(Dim::VOLT * Dim::AMPERE, Dim::WATT);
        assert_eq!(Dim::VOLT / Dim::AMPERE, Dim::OHM);
        assert_eq!(Dim::AMPERE * Dim::SECOND / Dim::VOLT, Dim::FARAD);
        assert_eq!(Dim::NONE / Dim::SECOND, Dim::HERTZ);
        assert_eq!(Dim::METRE.powi(-3), Dim::DOPING);
        assert_eq!(Dim::VOLT.powi(2).root(), Some(Dim::VOLT));
        assert_eq!(Dim::VOLT.root(), None);
        assert_eq!(Dim::VOLT.powi(1000).volt, 127);
        assert_eq!((Dim::VOLT.powi(-127) / Dim::VOLT.powi(127)).volt, -128);
        assert_eq!(Dim { volt: -128, ..Dim::NONE }.powi(-1).volt, 127);
    }

    #[test]
    fn symbols() {
        let volt_second_per_metre = Dim::VOLT * Dim::SECOND / Dim::METRE;
        assert_eq!(volt_second_per_metre.to_string(), "V·s/m");
        assert_eq!((Dim::VOLT / Dim::METRE).to_string(), "V/m");
        assert_eq!(Dim::METRE.powi(2).to_string(), "m²");
        assert_eq!((Dim::HERTZ / Dim::METRE).to_string(), "1/(m·s)");
        assert_eq!(Dim::DENSITY.to_string(), "A/m");
        assert_eq!(Dim::NONE.to_string(), "");
        assert_eq!(Dim::VOLT.in_words(), "a voltage");
        assert_eq!(volt_second_per_metre.in_words(), "something in V·s/m");
    }
}
