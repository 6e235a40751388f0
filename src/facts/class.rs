//! One class of a deck: is what it declares plausible?

use super::Evidence;
use crate::declared::{Class, Kind};
use std::cell::RefCell;

/// Silicon's critical field, V/m (30 V/µm: common practice).
const CRITICAL_FIELD: f64 = 30e6;
/// Permittivity of silicon, F/m: 11.7 times that of vacuum.
const SILICON: f64 = 11.7 * 8.854_187_8e-12;
/// Elementary charge, A·s.
const CHARGE: f64 = 1.602_177e-19;

/// A class, as rules see it.
pub struct ClassView<'w> {
    /// The class.
    pub class: &'w Class,
    evidence: RefCell<Evidence>,
}

impl<'w> ClassView<'w> {
    /// Looks at a class.
    pub fn new(class: &'w Class) -> ClassView<'w> {
        ClassView { class, evidence: RefCell::default() }
    }

    /// Highest rated drain-source voltage in the blocking direction, volts.
    pub fn blocking_rating(&self) -> Option<f64> {
        let (drain, source) = (self.class.pin("d")?, self.class.pin("s")?);
        let sign = if self.class.kind == Kind::Pmos { -1.0 } else { 1.0 };
        let rated = self.class.ratings.iter().filter_map(|rating| match (rating.plus, rating.minus) {
            (plus, minus) if (plus, minus) == (drain, source) => {
                Some(if sign > 0.0 { rating.range.hi } else { -rating.range.lo })
            }
            (plus, minus) if (plus, minus) == (source, drain) => {
                Some(if sign > 0.0 { -rating.range.lo } else { rating.range.hi })
            }
            _ => None,
        });
        rated.filter(|volts| volts.is_finite()).reduce(f64::max)
    }

    /// The rating that [`Self::blocking_rating`] comes from: where the deck says it.
    pub fn rating_place(&self) -> Option<crate::source::Span> {
        let pins = (self.class.pin("d")?, self.class.pin("s")?);
        let found = self
            .class
            .ratings
            .iter()
            .find(|rating| (rating.plus, rating.minus) == pins || (rating.minus, rating.plus) == pins);
        found.map(|rating| rating.place)
    }

    /// What a drift region of the declared length can hold, volts: critical field times length.
    pub fn drift_limit(&self) -> Option<f64> {
        self.class.drift?.length.map(|length| CRITICAL_FIELD * length)
    }

    /// What a one-sided junction of the declared doping can hold, volts: ε·Ec²/(2·q·N).
    pub fn junction_limit(&self) -> Option<f64> {
        self.class.drift?.doping.map(|doping| SILICON * CRITICAL_FIELD * CRITICAL_FIELD / (2.0 * CHARGE * doping))
    }

    /// Notes that the class does not declare what was asked for.
    pub(super) fn undeclared(&self) {
        self.evidence.borrow_mut().undeclared = true;
    }

    /// Takes the notes made so far.
    pub fn take_evidence(&self) -> Evidence {
        self.evidence.take()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// ε·Ec²/(2·q·N) for 1e16/cm³ and 30 V/µm is 29.1 V (arithmetic on the constants above; the form is in S. M. Sze and
    /// K. K. Ng, "Physics of Semiconductor Devices", 3rd ed., Wiley 2007, chapter 2, from memory).
    #[test]
    fn one_sided_junction() {
        let volts = SILICON * CRITICAL_FIELD * CRITICAL_FIELD / (2.0 * CHARGE * 1e22);
        assert!((volts - 29.1).abs() < 0.1, "{volts}");
    }
}
