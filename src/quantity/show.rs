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
    [number, " ", unit].concat()
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
    let (number, power) = scientific(value);
    let mut steps = power.div_euclid(3).clamp(powers.start() / 3, powers.end() / 3);
    let scaled = if number.is_zero() || power - 3 * steps < -3 {
        steps = 0;
        "0".into()
    } else {
        decimal_point(value < 0.0, number.text(), power - 3 * steps)
    };
    let prefix = usize::try_from(steps + 6).ok().and_then(|index| PREFIXES.get(index)).unwrap_or(&"");
    [&scaled, " ", prefix, unit].concat()
}

/// Without a prefix: whole numbers in full, others with four digits, very large and very small ones with an exponent.
fn plain(value: f64) -> String {
    if value == value.trunc() && value.abs() < 1e15 {
        let whole = value as i64;
        if whole.abs() < 1_000_000 || whole % 1_000_000 != 0 {
            return whole.to_string();
        }
    }
    let (number, power) = scientific(value);
    if (-4..6).contains(&power) || number.is_zero() {
        return decimal_point(number.negative, number.text(), power);
    }
    format!("{}e{power}", decimal_point(number.negative, number.text(), 0))
}

fn rounded(value: f64) -> String {
    let (number, power) = scientific(value);
    decimal_point(number.negative, number.text(), power)
}

/// Sign and significant digits without trailing zeros; zero has one digit and no sign.
struct Rounded {
    negative: bool,
    digits: [u8; DIGITS],
    count: usize,
}

impl Rounded {
    fn new(negative: bool, digits: [u8; DIGITS]) -> Rounded {
        let count = digits.iter().rposition(|&digit| digit != b'0').map_or(0, |last| last + 1);
        Rounded { negative: negative && count > 0, digits, count: count.max(1) }
    }

    fn is_zero(&self) -> bool {
        self.digits[0] == b'0'
    }

    fn text(&self) -> &str {
        std::str::from_utf8(&self.digits[..self.count]).unwrap_or("0")
    }
}

/// A number's digits, and the power of ten of the first one.
fn scientific(value: f64) -> (Rounded, i32) {
    let (whole, power) = four_digits(value.abs()).unwrap_or_else(|| by_formatting(value.abs()));
    let digit = |at: u32| b'0' + (whole / 10u16.pow(3 - at) % 10) as u8;
    let number = Rounded::new(value < 0.0, [digit(0), digit(1), digit(2), digit(3)]);
    let power = if number.is_zero() { 0 } else { power };
    (number, power)
}

/// The first four digits of a positive number of common size, rounded; none where one product cannot tell which way to round.
fn four_digits(size: f64) -> Option<(u16, i32)> {
    const TENS: [f64; 19] =
        [1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18];
    if !(1e-12..1e12).contains(&size) {
        return None;
    }
    let power = size.log10().floor() as i32;
    let by = TENS.get((3 - power).unsigned_abs() as usize)?;
    let scaled = if power <= 3 { size * by } else { size / by };
    let whole = scaled.round();
    if (scaled - scaled.floor() - 0.5).abs() < 1e-6 || !(1000.0..=10_000.0).contains(&whole) {
        return None;
    }
    Some(if whole == 10_000.0 { (1000, power + 1) } else { (whole as u16, power) })
}

/// The same by the standard library, which is exact and slow.
fn by_formatting(size: f64) -> (u16, i32) {
    let text = format!("{:.*e}", DIGITS - 1, size);
    let (mantissa, power) = text.split_once('e').unwrap_or((&text, "0"));
    let digits = mantissa.bytes().filter(u8::is_ascii_digit);
    (digits.fold(0, |whole, digit| whole * 10 + u16::from(digit - b'0')), power.parse().unwrap_or(0))
}

/// `digits` with the point behind the digit of power zero.
fn decimal_point(negative: bool, digits: &str, power: i32) -> String {
    let mut text = String::with_capacity(12);
    if negative {
        text.push('-');
    }
    let zeros = |text: &mut String, count: usize| (0..count).for_each(|_| text.push('0'));
    match usize::try_from(power + 1) {
        Ok(before @ 1..) if digits.len() <= before => {
            text.push_str(digits);
            zeros(&mut text, before - digits.len());
        }
        Ok(before @ 1..) => {
            text.push_str(&digits[..before]);
            text.push('.');
            text.push_str(&digits[before..]);
        }
        _ => {
            text.push_str("0.");
            zeros(&mut text, power.unsigned_abs() as usize - 1);
            text.push_str(digits);
        }
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// The quick way to round says what the standard library says.
    #[test]
    fn quick_digits_are_exact() {
        let mut state = 1u64;
        for round in 0..200_000 {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            let mantissa = (state >> 40) as f64 / if round % 2 == 0 { 1.0 } else { 16_777.216 };
            let size = mantissa * 10f64.powi((state % 23) as i32 - 14);
            if let Some(found) = four_digits(size) {
                assert_eq!(found, by_formatting(size), "{size:e}");
            }
        }
        for whole in 0..20_000 {
            for size in [f64::from(whole) / 1000.0, f64::from(whole) / 2.0, f64::from(whole) * 1e-6] {
                if let Some(found) = four_digits(size) {
                    assert_eq!(found, by_formatting(size), "{size:e}");
                }
            }
        }
    }

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
