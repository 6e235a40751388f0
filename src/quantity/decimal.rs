//! Decimal digits with a power of ten that is still open: prefixes and scale factors are folded into the exponent before
//! the one and only rounding.

use std::fmt::Write;

/// An unsigned decimal number at the start of a text.
#[derive(Clone, Copy)]
pub(super) struct Decimal<'a> {
    digits: &'a str,
    mantissa: u64,
    /// Whether `mantissa` holds every digit.
    whole: bool,
    exponent: i64,
}

impl<'a> Decimal<'a> {
    /// Reads `12`, `.5`, `1.`, `1.5e-3` at the start of `text`; gives the number and its length in bytes. An `e` without
    /// digits behind it is left alone.
    pub(super) fn read(text: &'a str) -> Option<(Decimal<'a>, usize)> {
        let bytes = text.as_bytes();
        let (mut at, mut mantissa, mut whole, mut exponent) = (0, 0u64, true, 0i64);
        let (mut seen, mut dot) = (false, false);
        while let Some(&byte) = bytes.get(at) {
            match byte {
                b'0'..=b'9' => {
                    seen = true;
                    let next = mantissa.checked_mul(10).and_then(|m| m.checked_add(u64::from(byte - b'0')));
                    (mantissa, whole) = next.map_or((mantissa, false), |m| (m, whole));
                    exponent -= i64::from(dot);
                }
                b'.' if !dot => dot = true,
                _ => break,
            }
            at += 1;
        }
        if !seen {
            return None;
        }
        let digits = &text[..at];
        let (power, used) = exponent_at(&bytes[at..]);
        Some((Decimal { digits, mantissa, whole, exponent: exponent + power }, at + used))
    }

    /// The nearest `f64` to the number times `factor` times ten to `shift`. A `factor` must be a small whole number.
    pub(super) fn times(&self, factor: u64, shift: i32) -> f64 {
        let exponent = self.exponent + i64::from(shift);
        match self.mantissa.checked_mul(factor) {
            Some(mantissa) if self.whole => {
                exact(mantissa, exponent).unwrap_or_else(|| parse_parts(mantissa, exponent))
            }
            _ => self.parse_digits(exponent) * factor as f64,
        }
    }

    fn parse_digits(&self, exponent: i64) -> f64 {
        let mut text: String = self.digits.chars().filter(char::is_ascii_digit).collect();
        // Writing to a string cannot fail.
        let _ = write!(text, "e{exponent}");
        text.parse().unwrap_or(f64::NAN)
    }
}

fn exponent_at(bytes: &[u8]) -> (i64, usize) {
    if !matches!(bytes.first(), Some(b'e' | b'E')) {
        return (0, 0);
    }
    let sign = usize::from(matches!(bytes.get(1), Some(b'+' | b'-')));
    let digits = bytes[1 + sign..].iter().take_while(|byte| byte.is_ascii_digit());
    let (mut power, mut count) = (0i64, 0);
    for &digit in digits {
        power = (power * 10 + i64::from(digit - b'0')).min(1_000_000_000);
        count += 1;
    }
    match count {
        0 => (0, 0),
        _ => (if bytes[1] == b'-' { -power } else { power }, 1 + sign + count),
    }
}

/// One multiplication or division of two exactly representable numbers rounds correctly (W. D. Clinger, "How to read floating
/// point numbers accurately", PLDI 1990).
fn exact(mantissa: u64, exponent: i64) -> Option<f64> {
    const POWERS: [f64; 23] = [
        1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19,
        1e20, 1e21, 1e22,
    ];
    if mantissa > 1 << 53 {
        return None;
    }
    let power = POWERS.get(usize::try_from(exponent.unsigned_abs()).ok()?)?;
    let mantissa = mantissa as f64;
    Some(if exponent < 0 { mantissa / power } else { mantissa * power })
}

fn parse_parts(mantissa: u64, exponent: i64) -> f64 {
    format!("{mantissa}e{exponent}").parse().unwrap_or(f64::NAN)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        /// The standard library's parser, which rounds correctly, is the judge.
        #[test]
        fn rounds_once(text in "[0-9]{0,24}(\\.[0-9]{0,24})?(e[+-]?[0-9]{1,3})?", shift in -24i32..=12) {
            if let Some((number, used)) = Decimal::read(&text) {
                prop_assert_eq!(used, text.len());
                let (digits, power) = text.split_once('e').unwrap_or((&text, "0"));
                let power: i32 = power.parse().unwrap();
                let expected: f64 = format!("{digits}e{}", power + shift).parse().unwrap();
                prop_assert_eq!(number.times(1, shift), expected);
            }
        }

        #[test]
        fn arbitrary_text_is_harmless(text in "\\PC*") {
            if let Some((_, used)) = Decimal::read(&text) {
                prop_assert!(text.is_char_boundary(used));
            }
        }
    }

    #[test]
    fn endless_digits() {
        let text = format!("0.{}1e100001", "0".repeat(100_000));
        let (number, used) = Decimal::read(&text).unwrap();
        assert_eq!((number.times(1, 0), used), (1.0, text.len()));
        assert_eq!(Decimal::read("1e99999999999999999999").unwrap().0.times(1, 0), f64::INFINITY);
    }
}
