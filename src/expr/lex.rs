//! Cuts the text of an expression into tokens, each with its place.
//!
//! A netlist's expression may run over several cards' lines: the slice then holds the line ends, comment lines and `+`
//! signs as they stand in the file, and they are skipped here, so that every place stays true.

use super::{Binary, Fault, Syntax};
use crate::quantity::{Dim, glued_quantity, spice_number};
use nom::bytes::complete::{tag, take_while, take_while1};
use nom::character::complete::{char, satisfy};
use nom::combinator::recognize;
use nom::multi::many0_count;
use nom::sequence::{delimited, pair, preceded};
use nom::{IResult, Parser};
use std::ops::Range;

#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Kind<'a> {
    Number {
        value: f64,
        dim: Dim,
    },
    Text(&'a str),
    Name(&'a str),
    /// `+` and `-` come as binary operators, whatever they are.
    Operator(Binary),
    /// `!`
    Not,
    /// The word `not`, which reaches over comparisons.
    NotWord,
    Question,
    Colon,
    Comma,
    Open(char),
    Close(char),
    End,
}

#[derive(Clone, Debug)]
pub(super) struct Token<'a> {
    pub(super) kind: Kind<'a>,
    pub(super) at: Range<u32>,
}

#[derive(Clone)]
pub(super) struct Lexer<'a> {
    text: &'a str,
    at: usize,
    syntax: Syntax,
}

impl<'a> Lexer<'a> {
    pub(super) fn new(text: &'a str, syntax: Syntax) -> Lexer<'a> {
        Lexer { text, at: 0, syntax }
    }

    /// The next token; [`Kind::End`] for ever at the end.
    pub(super) fn next(&mut self) -> Result<Token<'a>, Fault> {
        match self.syntax {
            Syntax::Spice { .. } => self.skip_lines(),
            Syntax::Rule => self.skip_while(char::is_whitespace),
        }
        let start = self.at;
        let rest = &self.text[start..];
        let Some(first) = rest.chars().next() else { return Ok(self.take(Kind::End, 0)) };
        if first.is_ascii_digit() || (first == '.' && rest[1..].starts_with(|c: char| c.is_ascii_digit())) {
            return self.number(rest);
        }
        if let Some((operator, length)) = operator(rest) {
            return Ok(self.take(operator, length));
        }
        if let Ok((_, name)) = self.name(rest) {
            return Ok(self.take(self.word(name), name.len()));
        }
        match first {
            '"' | '\'' if first == '"' || self.syntax == Syntax::Rule => self.quoted(rest, first),
            '{' | '}' if self.syntax != Syntax::Rule => {
                let kind = if first == '{' { Kind::Open('{') } else { Kind::Close('}') };
                Ok(self.take(kind, 1))
            }
            _ => Err(self.stray(first)),
        }
    }

    /// A name behind a dot that follows at once, as in `v(iso, s).max`.
    pub(super) fn member(&mut self) -> Option<&'a str> {
        let rest = &self.text[self.at..];
        let member: IResult<&str, &str> = preceded(char('.'), dotted).parse(rest);
        let (after, member) = member.ok()?;
        self.at = self.text.len() - after.len();
        Some(member)
    }

    pub(super) fn slice(&self, at: &Range<u32>) -> &'a str {
        &self.text[at.start as usize..at.end as usize]
    }

    pub(super) fn position(&self) -> u32 {
        self.at as u32
    }

    fn take(&mut self, kind: Kind<'a>, length: usize) -> Token<'a> {
        let start = self.at;
        self.at += length;
        Token { kind, at: start as u32..self.at as u32 }
    }

    fn skip_while(&mut self, skipped: fn(char) -> bool) {
        let rest = &self.text[self.at..];
        self.at = self.text.len() - rest.trim_start_matches(skipped).len();
    }

    /// White space, line ends and what follows them: blank lines, comment lines, one `+`; and comments at a line's end.
    fn skip_lines(&mut self) {
        loop {
            self.skip_while(|c| c != '\n' && c.is_whitespace());
            let rest = &self.text[self.at..];
            let comment = rest.starts_with([';']) || rest.starts_with("//") || lone_dollar(rest);
            if comment {
                self.skip_while(|c| c != '\n');
            } else if rest.starts_with('\n') {
                self.at += 1;
                self.skip_while(char::is_whitespace);
                match self.text.as_bytes().get(self.at) {
                    Some(b'*') => self.skip_while(|c| c != '\n'),
                    Some(b'+') => self.at += 1,
                    _ => {}
                }
            } else {
                return;
            }
        }
    }

    fn number(&mut self, rest: &'a str) -> Result<Token<'a>, Fault> {
        match self.syntax {
            Syntax::Spice { mega } => {
                let number = spice_number(rest, mega);
                let (value, used) = number.map_or((f64::NAN, 1), |number| (number.value, number.rest));
                let decoration = rest[used..].trim_start_matches(char::is_alphanumeric);
                let length = rest.len() - decoration.len();
                if !value.is_finite() {
                    let at = self.take(Kind::End, length).at;
                    return Err(Fault::new(at, "this number is too large"));
                }
                Ok(self.take(Kind::Number { value, dim: Dim::NONE }, length))
            }
            Syntax::Rule => match glued_quantity(rest) {
                Some(Ok((quantity, length))) => {
                    Ok(self.take(Kind::Number { value: quantity.value, dim: quantity.dim }, length))
                }
                Some(Err((message, length))) => Err(Fault::new(self.take(Kind::End, length).at, message)),
                None => Err(self.stray('.')),
            },
        }
    }

    fn name(&self, rest: &'a str) -> IResult<&'a str, &'a str> {
        match self.syntax {
            Syntax::Spice { .. } => recognize(pair(
                satisfy(|c| c.is_alphabetic() || matches!(c, '_' | '#' | '$' | '@')),
                take_while(|c: char| c.is_alphanumeric() || matches!(c, '_' | '.' | '#' | '$' | '@' | '[' | ']')),
            ))
            .parse(rest),
            Syntax::Rule => dotted(rest),
        }
    }

    fn word(&self, name: &'a str) -> Kind<'a> {
        if self.syntax == Syntax::Rule {
            let is = |word: &str| name.eq_ignore_ascii_case(word);
            if is("and") {
                return Kind::Operator(Binary::And);
            } else if is("or") {
                return Kind::Operator(Binary::Or);
            } else if is("not") {
                return Kind::NotWord;
            }
        }
        Kind::Name(name)
    }

    fn quoted(&mut self, rest: &'a str, quote: char) -> Result<Token<'a>, Fault> {
        let quoted: IResult<&str, &str> =
            delimited(char(quote), take_while(move |c| c != quote), char(quote)).parse(rest);
        match quoted {
            Ok((_, text)) => Ok(self.take(Kind::Text(text), text.len() + 2)),
            Err(_) => Err(Fault::new(self.take(Kind::End, 1).at, format!("this {quote} is not closed"))),
        }
    }

    fn stray(&mut self, first: char) -> Fault {
        let fault = Fault::new(self.take(Kind::End, first.len_utf8()).at, format!("`{first}` has no meaning here"));
        match first {
            '&' => fault.help("write `&&` where both must hold"),
            '|' => fault.help("write `||` where one of two must hold"),
            '=' => fault.help("write `==` to compare"),
            '.' => fault.help("a name or a digit stands on both sides of a dot"),
            '≤' => fault.help("write `<=`"),
            '≥' => fault.help("write `>=`"),
            '−' | '–' => fault.help("write the minus sign of the keyboard, `-`"),
            '\'' | '{' | '}' => fault.help("quotes and braces stand around an expression, not in it"),
            _ => fault,
        }
    }
}

/// A `$` with a blank behind it starts a comment.
fn lone_dollar(rest: &str) -> bool {
    rest.strip_prefix('$').is_some_and(|after| after.is_empty() || after.starts_with(char::is_whitespace))
}

/// `class.fingers.min`: parts of letters, digits and `_`; the first does not start with a digit.
fn dotted(rest: &str) -> IResult<&str, &str> {
    let part = |c: char| c.is_alphanumeric() || c == '_';
    let more = many0_count(pair(tag("."), take_while1(part)));
    recognize((satisfy(|c| c.is_alphabetic() || c == '_'), take_while(part), more)).parse(rest)
}

fn operator(rest: &str) -> Option<(Kind<'static>, usize)> {
    let bytes = rest.as_bytes();
    let two = match (bytes.first()?, bytes.get(1)) {
        (b'*', Some(b'*')) => Some(Binary::Power),
        (b'=', Some(b'=')) => Some(Binary::Equal),
        (b'!', Some(b'=')) | (b'<', Some(b'>')) => Some(Binary::NotEqual),
        (b'<', Some(b'=')) => Some(Binary::LessEqual),
        (b'>', Some(b'=')) => Some(Binary::GreaterEqual),
        (b'&', Some(b'&')) => Some(Binary::And),
        (b'|', Some(b'|')) => Some(Binary::Or),
        _ => None,
    };
    if let Some(operator) = two {
        return Some((Kind::Operator(operator), 2));
    }
    let one = match bytes[0] {
        b'^' => Kind::Operator(Binary::Power),
        b'*' => Kind::Operator(Binary::Multiply),
        b'/' => Kind::Operator(Binary::Divide),
        b'%' => Kind::Operator(Binary::Remainder),
        b'\\' => Kind::Operator(Binary::IntegerDivide),
        b'+' => Kind::Operator(Binary::Add),
        b'-' => Kind::Operator(Binary::Subtract),
        b'<' => Kind::Operator(Binary::Less),
        b'>' => Kind::Operator(Binary::Greater),
        b'!' => Kind::Not,
        b'?' => Kind::Question,
        b':' => Kind::Colon,
        b',' => Kind::Comma,
        b'(' => Kind::Open('('),
        b')' => Kind::Close(')'),
        _ => return None,
    };
    Some((one, 1))
}
