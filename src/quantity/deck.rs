//! Quantities as decks write them: a number with an SI prefix and a unit, where case matters.

use super::decimal::Decimal;
use super::{Dim, Quantity};
use crate::names::nearest;
use nom::branch::alt;
use nom::bytes::complete::{tag, take_while1};
use nom::character::complete::{char, digit1, one_of};
use nom::combinator::{map_res, opt, recognize, success, value};
use nom::{IResult, Parser};

/// Symbols of units with their dimensions.
const UNITS: [(&str, Dim); 17] = [
    ("V", Dim::VOLT),
    ("A", Dim::AMPERE),
    ("m", Dim::METRE),
    ("s", Dim::SECOND),
    ("Hz", Dim::HERTZ),
    ("W", Dim::WATT),
    ("Ohm", Dim::OHM),
    ("ohm", Dim::OHM),
    ("Ω", Dim::OHM),
    // The ohm sign, which looks the same as the Greek letter.
    ("\u{2126}", Dim::OHM),
    ("F", Dim::FARAD),
    ("S", Dim { ampere: 1, volt: -1, ..Dim::NONE }),
    ("H", Dim { volt: 1, second: 1, ampere: -1, ..Dim::NONE }),
    ("J", Dim { volt: 1, ampere: 1, second: 1, ..Dim::NONE }),
    ("C", Dim { ampere: 1, second: 1, ..Dim::NONE }),
    ("%", Dim::NONE),
    ("ppm", Dim::NONE),
];

/// Prefixes with their powers of ten; `c` for centimetres alone.
const PREFIXES: [(&str, i32); 13] = [
    ("T", 12),
    ("G", 9),
    ("M", 6),
    ("k", 3),
    ("c", -2),
    ("m", -3),
    ("u", -6),
    ("µ", -6),
    ("μ", -6),
    ("n", -9),
    ("p", -12),
    ("f", -15),
    ("a", -18),
];

/// Reads a whole deck value such as `48V`, `-0.3 V`, `3uA/um`, `1e16/cm3`, `1%` or `2`. Case matters: `2MHz` is mega, `2mA`
/// is milli.
///
/// # Errors
/// What is wrong with it and what a right one looks like, in one sentence.
pub fn parse_quantity(text: &str) -> Result<Quantity, String> {
    let text = text.trim();
    let (negative, digits) = match text.strip_prefix('-') {
        Some(rest) => (true, rest),
        None => (false, text.strip_prefix('+').unwrap_or(text)),
    };
    let Some((number, used)) = Decimal::read(digits) else {
        return Err(format!(
            "`{text}` does not start with a number: write a number and its unit, such as 5.5V or 3uA/um"
        ));
    };
    let written = digits[used..].trim_start();
    let unit = read_unit(written, &digits[..used])?;
    let magnitude = finish(&number, unit.exponent, text)?;
    Ok(Quantity { value: if negative { -magnitude } else { magnitude }, dim: unit.dim })
}

/// Reads a quantity without a sign at the start of a rule expression: the unit must follow the number at once. Gives it
/// with its length in bytes. None if the text does not start with a digit or a dot and a digit.
///
/// # Errors
/// As [`parse_quantity`], with the length in bytes of the text that was taken for the quantity.
pub fn glued_quantity(text: &str) -> Option<Result<(Quantity, usize), (String, usize)>> {
    let (number, digits) = Decimal::read(text)?;
    let length = digits + unit_length(&text[digits..]);
    let read = read_unit(&text[digits..length], &text[..digits]).and_then(|unit| {
        let value = finish(&number, unit.exponent, &text[..length])?;
        Ok((Quantity { value, dim: unit.dim }, length))
    });
    Some(read.map_err(|message| (message, length)))
}

fn finish(number: &Decimal<'_>, exponent: i32, text: &str) -> Result<f64, String> {
    let magnitude = number.times(1, exponent);
    let too_large = || format!("`{}` is too large for a number", shorten(text));
    magnitude.is_finite().then_some(magnitude).ok_or_else(too_large)
}

/// Where a unit glued to a number ends. A `/` belongs to it only if a unit with letters follows at once and before any
/// blank: `3uA/um`, `1e16/cm3`, but `12V/2`, `6V/s.width`, `6/m`. A `%` is a unit only if no operand can follow: `1%`, but `7%3`.
fn unit_length(text: &str) -> usize {
    let starts_operand = |c: char| c.is_alphanumeric() || matches!(c, '.' | '(' | '_' | '"' | '\'');
    if let Some(after) = text.strip_prefix('%') {
        let operand = after.trim_start().chars().next().is_some_and(starts_operand) && !starts_word(after);
        return usize::from(!operand);
    }
    let word = |text: &str| {
        let letters = text.find(|c: char| !is_letter(c)).unwrap_or(text.len());
        let tail = &text[letters..];
        let powers = if letters > 0 { tail.find(|c: char| !is_power(c)).unwrap_or(tail.len()) } else { 0 };
        letters + powers
    };
    let mut length = word(text);
    loop {
        let Some(joint) = text[length..].chars().next().filter(|&c| c == '/' || c == '·') else { return length };
        let next = &text[length + joint.len_utf8()..];
        let more = word(next);
        let is_name = next[more..].starts_with(['.', '(']) || (length == 0 && !next[..more].ends_with(is_power));
        if more == 0 || is_name || unit(&next[..more]).is_none_or(|found| found.length < more) {
            return length;
        }
        length += joint.len_utf8() + more;
    }
}

/// Whether the words `and`, `or` follow, which may stand behind a percentage.
fn starts_word(after: &str) -> bool {
    let word = after.trim_start();
    let end = word.find(|c: char| !c.is_alphanumeric()).unwrap_or(word.len());
    matches!(&word[..end], "and" | "or")
}

fn is_letter(c: char) -> bool {
    c.is_alphabetic() || matches!(c, '_' | '\u{b5}' | '\u{2126}')
}

fn is_power(c: char) -> bool {
    c.is_ascii_digit() || matches!(c, '²' | '³')
}

#[derive(Clone, Copy)]
struct Unit {
    dim: Dim,
    exponent: i32,
    length: usize,
}

const NO_UNIT: Unit = Unit { dim: Dim::NONE, exponent: 0, length: 0 };

fn read_unit(text: &str, number: &str) -> Result<Unit, String> {
    match unit(text) {
        Some(unit) if unit.length == text.len() => Ok(unit),
        _ if text.is_empty() => Ok(NO_UNIT),
        found => {
            let good = found.map_or(0, |unit| unit.length);
            Err(complain(text[good..].trim_start_matches(['/', '*', '·']), number))
        }
    }
}

/// A product of units at the start of a text.
fn unit(text: &str) -> Option<Unit> {
    let first = factor(text).ok();
    let (mut rest, mut sum) = match first {
        Some((rest, unit)) => (rest, unit),
        None if text.starts_with('/') => (text, NO_UNIT),
        None => return None,
    };
    let next = |input| -> IResult<&str, (bool, (Dim, i32))> {
        let joint = alt((value(true, char('/')), value(false, one_of("*·"))));
        (joint, factor.map(|unit: Unit| (unit.dim, unit.exponent))).parse(input)
    };
    while let Ok((after, (below, (dim, exponent)))) = next(rest) {
        sum.dim = if below { sum.dim / dim } else { sum.dim * dim };
        sum.exponent += if below { -exponent } else { exponent };
        rest = after;
    }
    sum.length = text.len() - rest.len();
    (sum.length > 0).then_some(sum)
}

/// One unit with its prefix and power: `um`, `cm3`, `mm²`, `s^2`.
fn factor(text: &str) -> IResult<&str, Unit> {
    let letters = recognize(alt((tag("%"), take_while1(is_letter))));
    let symbol = map_res(letters, |word: &str| symbol(word).ok_or(()));
    let whole = map_res((opt(char('^')), digit1), |(_, digits): (_, &str)| digits.parse::<i32>());
    let power = alt((value(2, char('²')), value(3, char('³')), whole, success(1)));
    let bounded = map_res(power, |power: i32| if (1..=9).contains(&power) { Ok(power) } else { Err(()) });
    let build = |((dim, exponent), power): ((Dim, i32), i32)| Unit {
        dim: dim.powi(power),
        exponent: exponent * power,
        length: 0,
    };
    (symbol, bounded).map(build).parse(text)
}

/// A unit's symbol with or without a prefix; the symbol alone goes first (`m` is a metre).
fn symbol(word: &str) -> Option<(Dim, i32)> {
    let find = |symbol: &str| UNITS.iter().find(|(own, _)| *own == symbol);
    match word {
        "%" => return Some((Dim::NONE, -2)),
        "ppm" => return Some((Dim::NONE, -6)),
        _ => {}
    }
    if let Some((_, dim)) = find(word) {
        return Some((*dim, 0));
    }
    PREFIXES.iter().find_map(|(prefix, exponent)| {
        let symbol = word.strip_prefix(prefix)?;
        let (_, dim) = find(symbol)?;
        let plausible = *dim != Dim::NONE && (*prefix != "c" || *dim == Dim::METRE);
        plausible.then_some((*dim, *exponent))
    })
}

fn complain(unit: &str, number: &str) -> String {
    let number = shorten(number);
    let word: String = unit.chars().take_while(|c| !matches!(c, '/' | '*' | '·')).take(24).collect();
    if word.is_empty() {
        return format!("there is no unit behind the last sign of `{number}…`: write it as in 3uA/um or 1e16/cm3");
    }
    if PREFIXES.iter().any(|(prefix, _)| *prefix == word) {
        return format!("`{word}` is a prefix without a unit: write {number}{word}V, {number}{word}A … as meant");
    }
    let alike: Vec<String> = candidates().into_iter().filter(|known| known.eq_ignore_ascii_case(&word)).collect();
    if !alike.is_empty() {
        let alike: Vec<String> = alike.iter().map(|known| format!("{number}{known}")).collect();
        return format!("`{word}` is no unit: capitals count in a deck, so write {}", alike.join(" or "));
    }
    let known = candidates();
    match nearest(&word, known.iter().map(String::as_str)).filter(|_| word.len() > 2) {
        Some(near) => format!("`{word}` is no unit: did you mean {number}{near}?"),
        None => format!("`{word}` is no unit: use V, A, m, s, Hz, W, Ohm, F or %, with a prefix such as k, m, u or n"),
    }
}

/// The units that circuits use, with their prefixes, for suggestions.
fn candidates() -> Vec<String> {
    let units = ["V", "A", "m", "s", "Hz", "W", "Ohm", "F"];
    let prefixes = ["", "G", "M", "k", "m", "u", "n", "p", "f"];
    let sensible = |prefix: &str, unit: &str| !(matches!(unit, "m" | "s" | "F") && matches!(prefix, "G" | "M" | "k"));
    let pair = |unit: &'static str| {
        prefixes.into_iter().filter(move |prefix| sensible(prefix, unit)).map(move |prefix| format!("{prefix}{unit}"))
    };
    units.into_iter().flat_map(pair).collect()
}

fn shorten(text: &str) -> String {
    let mut short: String = text.chars().take(32).collect();
    if short.len() < text.len() {
        short.push('…');
    }
    short
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// Prefixes and units of the International System of Units (9th brochure, tables 4 and 7; from memory). The examples are
    /// this program's own deck format.
    #[test]
    fn deck_values() {
        let table = [
            ("5.5V", 5.5, Dim::VOLT),
            ("-1V", -1.0, Dim::VOLT),
            ("-0.3 V", -0.3, Dim::VOLT),
            ("2MHz", 2e6, Dim::HERTZ),
            ("2mA", 2e-3, Dim::AMPERE),
            ("3uA/um", 3.0, Dim::DENSITY),
            ("3µA/µm", 3.0, Dim::DENSITY),
            ("1e16/cm3", 1e22, Dim::DOPING),
            ("1e16/cm³", 1e22, Dim::DOPING),
            ("1%", 0.01, Dim::NONE),
            ("2", 2.0, Dim::NONE),
            ("500mW", 0.5, Dim::WATT),
            ("5ns", 5e-9, Dim::SECOND),
            ("60um", 6e-5, Dim::METRE),
            ("20um", 2e-5, Dim::METRE),
            ("60μm", 6e-5, Dim::METRE),
            ("1kOhm", 1e3, Dim::OHM),
            ("1kΩ", 1e3, Dim::OHM),
            ("1m", 1.0, Dim::METRE),
            ("30V/um", 3e7, Dim::VOLT / Dim::METRE),
            ("98.49mΩ·mm2", 98.49e-9, Dim::OHM * Dim::METRE.powi(2)),
            ("1s^2", 1.0, Dim::SECOND.powi(2)),
            (" +4.5V ", 4.5, Dim::VOLT),
            ("10ppm", 1e-5, Dim::NONE),
        ];
        for (text, value, dim) in table {
            assert_eq!(parse_quantity(text), Ok(Quantity { value, dim }), "{text}");
        }
    }

    #[test]
    fn wrong_values_say_what_is_right() {
        let table = [
            ("2mhz", "2MHz or 2mHz"),
            ("5v", "write 5V"),
            ("5u", "prefix without a unit"),
            ("abc", "does not start with a number"),
            ("", "does not start with a number"),
            ("5Vx", "no unit"),
            ("5 Volt", "no unit"),
            ("5V/", "no unit behind"),
            ("1e999V", "too large"),
            ("inf", "does not start"),
            ("5V 6V", "no unit"),
            ("5cV", "no unit"),
            ("5V..6V", "no unit"),
            ("1m99", "no unit"),
        ];
        for (text, part) in table {
            let message = parse_quantity(text).unwrap_err();
            assert!(message.contains(part), "{text}: {message}");
        }
    }

    #[test]
    fn units_glued_to_numbers_in_expressions() {
        let table = [
            ("12V/2", "12V"),
            ("3uA/um*2", "3uA/um"),
            ("2000um)", "2000um"),
            ("1%", "1%"),
            ("1% && x", "1%"),
            ("1% or x", "1%"),
            ("7%3", "7"),
            ("7 % 3", "7"),
            ("7%x", "7"),
            ("1MHz<2", "1MHz"),
            ("12V/width", "12V"),
            ("1e16/cm3", "1e16/cm3"),
            ("6V/s.width", "6V"),
            ("6/m", "6"),
            ("6V/s", "6V/s"),
            ("2m/f(x)", "2m"),
            ("2*3", "2"),
        ];
        for (text, taken) in table {
            let (_, length) = glued_quantity(text).unwrap().unwrap();
            assert_eq!(&text[..length], taken, "{text}");
        }
        assert!(glued_quantity("x").is_none());
        assert!(glued_quantity("5mhz").unwrap().is_err());
    }

    proptest! {
        #[test]
        fn any_text_is_harmless(text in "[0-9.%]{0,3}\\PC*") {
            let _ = parse_quantity(&text);
            if let Some(Ok((_, length)) | Err((_, length))) = glued_quantity(&text) {
                prop_assert!(text.is_char_boundary(length));
            }
        }
    }
}
