//! Printing quantities for people: the unit and the prefix that a designer would write, and no digits that mean nothing.

use super::Dim;

const DIGITS: usize = 4;

/// A number for people: `48 V`, `-0.3 V`, `255 µA`, `3 µA/µm`, `30 µm`, `5 ns`, `0.5`. At most four significant digits (whole
/// plain numbers keep all of theirs), no trailing zeros, no `-0`; amounts too small to matter are `0`. An infinite value is
/// `any`, the end of a range that has none.
pub fn show(value: f64, dim: Dim) -> String {
    if value.is_nan() {
        return "unknown".into();
    }
    if value.is_infinite() {
        return "any".into();
    }
    match dim {
        Dim::NONE => plain(value),
        Dim::DENSITY => prefixed(value * 1e-6, "A/µm", -15..=3),
        Dim::DOPING => format!("{}/cm³", plain(value * 1e-6)),
        Dim::VOLT if (0.09995..1e3).contains(&value.abs()) => with_unit(&rounded(value), "V"),
        Dim::VOLT => prefixed(value, "V", -6..=6),
        Dim::METRE if (0.99995e-7..1e-2).contains(&value.abs()) => with_unit(&rounded(value * 1e6), "µm"),
        Dim::METRE => prefixed(value, "m", -9..=3),
        _ => match single_letters(dim) {
            Some(unit) => prefixed(value, &unit, -18..=12),
            None if dim == Dim::METRE.powi(2) => square(value),
            None => with_unit(&plain(value), &dim.to_string()),
        },
    }
}

/// A share as a percentage: `1 %`.
pub fn show_percent(value: f64) -> String {
    match value.is_finite() {
        true => with_unit(&plain(value * 100.0), "%"),
        false => show(value, Dim::NONE),
    }
}

/// The symbol of a unit that takes a prefix directly.
fn single_letters(dim: Dim) -> Option<String> {
    let symbol = dim.to_string();
    (!symbol.is_empty() && symbol.chars().all(char::is_alphabetic)).then_some(symbol)
}

fn with_unit(number: &str, unit: &str) -> String {
    format!("{number} {unit}")
}

fn square(value: f64) -> String {
    match value.abs() {
        0.0 => "0 µm²".into(),
        size if size < 1e-13 => with_unit(&plain(value * 1e18), "nm²"),
        size if size < 1e-6 => with_unit(&plain(value * 1e12), "µm²"),
        _ => with_unit(&plain(value * 1e6), "mm²"),
    }
}

/// With the prefix that leaves one to three digits before the point, from the powers of ten given.
fn prefixed(value: f64, unit: &str, powers: std::ops::RangeInclusive<i32>) -> String {
    const PREFIXES: [&str; 11] = ["a", "f", "p", "n", "µ", "m", "", "k", "M", "G", "T"];
    let (_, mut digits, power) = scientific(value);
    let mut steps = power.div_euclid(3).clamp(powers.start() / 3, powers.end() / 3);
    let mut scaled = decimal_point(value < 0.0, &digits, power - 3 * steps);
    if digits == "0" || power - 3 * steps < -3 {
        (digits, scaled, steps) = ("0".into(), "0".into(), 0);
    }
    debug_assert!(!digits.is_empty());
    let prefix = usize::try_from(steps + 6).ok().and_then(|index| PREFIXES.get(index)).unwrap_or(&"");
    format!("{scaled} {prefix}{unit}")
}

/// Without a prefix: whole numbers in full, others with four digits, very large and very small ones with an exponent.
fn plain(value: f64) -> String {
    if value == value.trunc() && value.abs() < 1e15 {
        let whole = value as i64;
        if whole.abs() < 1_000_000 || whole % 1_000_000 != 0 {
            return whole.to_string();
        }
    }
    let (negative, digits, power) = scientific(value);
    if (-4..6).contains(&power) || digits == "0" {
        return decimal_point(negative, &digits, power);
    }
    format!("{}e{power}", decimal_point(negative, &digits, 0))
}

fn rounded(value: f64) -> String {
    let (negative, digits, power) = scientific(value);
    decimal_point(negative, &digits, power)
}

/// Sign, significant digits without trailing zeros, and the power of ten of the first digit.
fn scientific(value: f64) -> (bool, String, i32) {
    let text = format!("{:.*e}", DIGITS - 1, value.abs());
    let (mantissa, power) = text.split_once('e').unwrap_or((&text, "0"));
    let digits: String = mantissa.chars().filter(char::is_ascii_digit).collect();
    match digits.trim_end_matches('0') {
        "" => (false, "0".into(), 0),
        digits => (value < 0.0, digits.into(), power.parse().unwrap_or(0)),
    }
}

/// `digits` with the point behind the digit of power zero.
fn decimal_point(negative: bool, digits: &str, power: i32) -> String {
    let sign = if negative { "-" } else { "" };
    let Ok(before) = usize::try_from(power + 1) else {
        let zeros = "0".repeat(power.unsigned_abs() as usize - 1);
        return format!("{sign}0.{zeros}{digits}");
    };
    match before {
        0 => format!("{sign}0.{digits}"),
        _ if digits.len() <= before => format!("{sign}{digits}{}", "0".repeat(before - digits.len())),
        _ => format!("{sign}{}.{}", &digits[..before], &digits[before..]),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// A space between number and unit, prefixes by thousands: International System of Units, 9th brochure, section 5.4 (from
    /// memory). The choice of V, µm and µA/µm where a designer expects them is common practice, no source.
    #[test]
    fn numbers_for_people() {
        let table = [
            (48.0, Dim::VOLT, "48 V"),
            (-0.3, Dim::VOLT, "-0.3 V"),
            (0.1 + 0.2, Dim::VOLT, "0.3 V"),
            (0.1 + 0.2 - 0.3, Dim::VOLT, "0 V"),
            (-0.0, Dim::VOLT, "0 V"),
            (0.05, Dim::VOLT, "50 mV"),
            (0.1, Dim::VOLT, "0.1 V"),
            (999.96, Dim::VOLT, "1000 V"),
            (1200.0, Dim::VOLT, "1.2 kV"),
            (-1e-13, Dim::VOLT, "0 V"),
            (255e-6, Dim::AMPERE, "255 µA"),
            (1e-15, Dim::AMPERE, "1 fA"),
            (0.99999e-3, Dim::AMPERE, "1 mA"),
            (0.0, Dim::AMPERE, "0 A"),
            (3.0, Dim::DENSITY, "3 µA/µm"),
            (1500.0, Dim::DENSITY, "1.5 mA/µm"),
            (30e-6, Dim::METRE, "30 µm"),
            (0.18e-6, Dim::METRE, "0.18 µm"),
            (2000e-6, Dim::METRE, "2000 µm"),
            (5e-8, Dim::METRE, "50 nm"),
            (5e-9, Dim::SECOND, "5 ns"),
            (2e6, Dim::HERTZ, "2 MHz"),
            (0.5, Dim::WATT, "500 mW"),
            (1e3, Dim::OHM, "1 kΩ"),
            (1e22, Dim::DOPING, "1e16/cm³"),
            (1.5e22, Dim::DOPING, "1.5e16/cm³"),
            (0.01, Dim::NONE, "0.01"),
            (2.0, Dim::NONE, "2"),
            (12345.0, Dim::NONE, "12345"),
            (1.0 / 3.0, Dim::NONE, "0.3333"),
            (-1e-9, Dim::NONE, "-1e-9"),
            (20e-12, Dim::METRE.powi(2), "20 µm²"),
            (2.5, Dim::VOLT * Dim::SECOND / Dim::METRE, "2.5 V·s/m"),
            (f64::INFINITY, Dim::VOLT, "any"),
            (f64::NAN, Dim::VOLT, "unknown"),
        ];
        for (value, dim, text) in table {
            assert_eq!(show(value, dim), text, "{value:e}");
        }
        assert_eq!(show_percent(0.01), "1 %");
        assert_eq!(show_percent(5e-9 * 2e6), "1 %");
        assert_eq!(show_percent(0.123456), "12.35 %");
    }

    proptest! {
        #[test]
        fn never_shows_a_negative_zero(value in proptest::num::f64::ANY, volt in -3i8..3, metre in -3i8..3) {
            let text = show(value, Dim { volt, metre, ..Dim::NONE });
            prop_assert!(!text.starts_with("-0 "), "{}", text);
            prop_assert!(text != "-0", "{}", text);
        }

        #[test]
        fn what_is_shown_is_near(value in -1e3f64..1e3) {
            let text = show(value, Dim::VOLT);
            let shown = crate::quantity::parse_quantity(&text).unwrap().value;
            prop_assert!((shown - value).abs() <= value.abs() * 5.1e-4 + 1e-9, "{} for {}", text, value);
        }
    }
}
