//! Numbers as netlists write them: scale factors without regard to case, and letters behind them that mean nothing.

use super::decimal::Decimal;

/// A number at the start of a netlist token.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SpiceNumber {
    /// With the scale factor applied, rounded once.
    pub value: f64,
    /// How many bytes the number and its scale factor take; letters behind them are decoration.
    pub rest: usize,
    /// Why tools may disagree about it.
    pub doubtful: Option<&'static str>,
}

const ATTO: &str = "some simulators read the suffix `a` as 1e-18, others ignore it: here it is ignored";
const INFIX: &str = "the digits behind the letter are ignored here; some simulators read 4k7 as 4.7k";
const SMALL_M: &str = "after `*.MEGA` the suffix M is 1e6; a small `m` is read as 1e-3 here";

/// Reads a number with an optional sign and scale factor: `10`, `-2.5e3`, `12.5u`, `1MEGohm`. Letters that are no scale
/// factor are decoration, so `10V` is 10 and `1F` is 1e-15; `M` is 1e-3, but a capital `M` is 1e6 if `mega`
/// (`*.MEGA` of CDL). None if there is no digit. (Ngspice User's Manual, version 39, sections 2.1.4.2 and 2.1.4.3.)
#[inline]
pub fn spice_number(text: &str, mega: bool) -> Option<SpiceNumber> {
    let sign = usize::from(matches!(text.as_bytes().first(), Some(b'+' | b'-')));
    let (number, used) = Decimal::read(&text[sign..])?;
    let tail = &text.as_bytes()[sign + used..];
    let scale = scale(tail, mega);
    let magnitude = number.times(scale.factor, scale.exponent);
    let value = if text.starts_with('-') { -magnitude } else { magnitude };
    let doubtful = doubt(tail, &scale, mega);
    Some(SpiceNumber { value, rest: sign + used + scale.length, doubtful })
}

struct Scale {
    factor: u64,
    exponent: i32,
    length: usize,
}

fn scale(tail: &[u8], mega: bool) -> Scale {
    let plain = |exponent, length| Scale { factor: 1, exponent, length };
    let Some(&first) = tail.first() else { return plain(0, 0) };
    match first {
        b'm' | b'M' => match tail.get(1..3) {
            Some(next) if next.eq_ignore_ascii_case(b"eg") => plain(6, 3),
            Some(next) if next.eq_ignore_ascii_case(b"il") => Scale { factor: 254, exponent: -7, length: 3 },
            _ if mega && first == b'M' => plain(6, 1),
            _ => plain(-3, 1),
        },
        b't' | b'T' => plain(12, 1),
        b'g' | b'G' => plain(9, 1),
        b'k' | b'K' => plain(3, 1),
        b'u' | b'U' => plain(-6, 1),
        b'n' | b'N' => plain(-9, 1),
        b'p' | b'P' => plain(-12, 1),
        b'f' | b'F' => plain(-15, 1),
        // A micro sign of either alphabet, as exported netlists have it.
        0xc2 if tail.get(1) == Some(&0xb5) => plain(-6, 2),
        0xce if tail.get(1) == Some(&0xbc) => plain(-6, 2),
        _ => plain(0, 0),
    }
}

fn doubt(tail: &[u8], scale: &Scale, mega: bool) -> Option<&'static str> {
    let first = *tail.first()?;
    if scale.length == 0 && !first.is_ascii_alphabetic() {
        return None;
    }
    if tail.get(scale.length.max(1)).is_some_and(u8::is_ascii_digit) {
        return Some(INFIX);
    }
    match first {
        b'a' | b'A' => Some(ATTO),
        b'm' if mega && scale.exponent == -3 => Some(SMALL_M),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn value(text: &str) -> f64 {
        spice_number(text, false).unwrap().value
    }

    /// Ngspice User's Manual v39, sections 2.1.4.2 and 2.1.4.3, table 2.2 and the examples below it ("M, MA, MSec, MMhos" are
    /// the same scale factor); same rule in the SPICE3 Version 3f3 User's Manual, section 2.1.
    #[test]
    fn published_examples() {
        for text in ["10", "10V", "10Volts", "10Hz"] {
            assert_eq!(value(text), 10.0, "{text}");
        }
        for text in ["1000", "1000.0", "1000Hz", "1e3", "1.0e3", "1kHz", "1k"] {
            assert_eq!(value(text), 1000.0, "{text}");
        }
        for text in ["1M", "1MA", "1MSec", "1MMhos"] {
            assert_eq!(value(text), 1e-3, "{text}");
        }
        assert_eq!(value("1e-14"), 1e-14);
        assert_eq!(value("2.65e3"), 2.65e3);
    }

    /// Ngspice User's Manual v39, section 2.1.4.3, table 2.2, and its sentences on letters that are ignored.
    #[test]
    fn scale_factors() {
        let table = [
            ("1T", 1e12),
            ("1t", 1e12),
            ("1G", 1e9),
            ("1MEG", 1e6),
            ("1Meg", 1e6),
            ("1meg", 1e6),
            ("1MEGOHM", 1e6),
            ("1K", 1e3),
            ("1mil", 25.4e-6),
            ("1MIL", 25.4e-6),
            ("2.5mil", 63.5e-6),
            ("1M", 1e-3),
            ("1m", 1e-3),
            ("1MV", 1e-3),
            ("1MHz", 1e-3),
            ("1u", 1e-6),
            ("1n", 1e-9),
            ("1p", 1e-12),
            ("1F", 1e-15),
            ("1FF", 1e-15),
            ("10f", 1e-14),
            ("10uF", 1e-5),
            ("1.0e4k", 1e7),
            ("20u", 2e-5),
            ("12.5u", 12.5e-6),
            ("-0.18u", -0.18e-6),
            ("+3", 3.0),
            (".5p", 0.5e-12),
            ("1.", 1.0),
            ("1e", 1.0),
            ("1e+", 1.0),
            ("1µm", 1e-6),
        ];
        for (text, expected) in table {
            assert_eq!(value(text), expected, "{text}");
            assert_eq!(spice_number(text, false).unwrap().doubtful, None, "{text}");
        }
    }

    /// Dialects disagree: no atto in table 2.2 of the Ngspice User's Manual v39; 4K7 is 4.7k only in the compatibility mode of
    /// its section 16.14.6.
    #[test]
    fn doubtful_numbers_keep_the_published_value() {
        for (text, expected) in [("1a", 1.0), ("1AC", 1.0), ("4K7", 4e3), ("2m5", 2e-3), ("4R7", 4.0), ("1meg5", 1e6)] {
            let number = spice_number(text, false).unwrap();
            assert_eq!(number.value, expected, "{text}");
            assert!(number.doubtful.is_some(), "{text}");
        }
    }

    #[test]
    fn the_number_ends_behind_its_scale_factor() {
        for (text, rest) in
            [("10", 2), ("10uF", 3), ("1MEGOHM", 4), ("-1.5e3k*2", 7), ("1e+x", 1), ("3*4", 1), ("2)", 1)]
        {
            assert_eq!(spice_number(text, false).unwrap().rest, rest, "{text}");
        }
        for text in ["", "M", "k", "-", ".", "e5", "x1", "+-1", "µ"] {
            assert_eq!(spice_number(text, false), None, "{text}");
        }
    }

    /// `*.MEGA` of CDL (from memory): M is 1e6.
    #[test]
    fn mega() {
        for (text, expected) in [("1M", 1e6), ("1MEG", 1e6), ("1mil", 25.4e-6), ("1m", 1e-3), ("1MOHM", 1e6)] {
            assert_eq!(spice_number(text, true).unwrap().value, expected, "{text}");
        }
        assert!(spice_number("1m", true).unwrap().doubtful.is_some());
        assert!(spice_number("1M", true).unwrap().doubtful.is_none());
    }

    proptest::proptest! {
        #[test]
        fn any_text_is_harmless(text in "[0-9.eE+-]{0,6}\\PC*") {
            if let Some(number) = spice_number(&text, true) {
                assert!(text.is_char_boundary(number.rest));
            }
        }
    }
}
