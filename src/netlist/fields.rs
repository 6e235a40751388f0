//! Reads one element card into fields: words, `key=value` pairs, and the data that export comments carry.
//!
//! This is the hot path of a large design, called once a device: it goes over the bytes once, through continuation lines,
//! keeps only offsets, and allocates nothing once its buffers have grown.

use super::Complaint;
use super::lex::{
    Class, byte, class, continuation, in_word, is_gap, line_end, run_end, simple_value_end, skip_blanks, skip_gaps,
};
use super::tree::{Fields, Word};

/// Reads the card whose first byte is at `start` into `out` (which is emptied first). A complaint says why the card must
/// be left out; `out` then holds what came before the fault.
pub fn read_fields(text: &str, start: u32, out: &mut Fields) -> Option<Complaint> {
    out.clear();
    out.end = start;
    let letter = byte(text.as_bytes(), start as usize).to_ascii_lowercase();
    let mut reader = Reader { bytes: text.as_bytes(), at: start as usize, letter, out, last: Last::Other };
    reader.card().err()
}

impl Fields {
    /// Empties it, keeping its memory.
    pub fn clear(&mut self) {
        self.words.clear();
        self.params.clear();
        self.bracket_model = None;
        self.substrate = None;
        self.after_slash = None;
        self.stray = None;
        self.end = 0;
    }
}

/// What stood just before, for the sake of a coming `=`.
#[derive(Clone, Copy)]
enum Last {
    /// A bare word, which may turn out to be a key.
    Bare(Word),
    /// The value of a pair.
    Value,
    /// Anything else.
    Other,
}

struct Reader<'a> {
    bytes: &'a [u8],
    at: usize,
    letter: u8,
    out: &'a mut Fields,
    last: Last,
}

impl Reader<'_> {
    fn card(&mut self) -> Result<(), Complaint> {
        while let Some(&now) = self.bytes.get(self.at) {
            match class(now) {
                Class::Blank => self.at += 1,
                Class::Plain if self.letter != b'a' => self.plain()?,
                Class::Plain | Class::Special | Class::Backslash => self.word(now)?,
                Class::Separator => {
                    self.last = Last::Other;
                    self.at += 1;
                }
                Class::Equals => self.equals()?,
                Class::Semicolon => self.at = line_end(self.bytes, self.at),
                Class::Newline => match continuation(self.bytes, self.at) {
                    Some(next) => self.at = next,
                    None => break,
                },
            }
        }
        Ok(())
    }

    /// The common case: words and simple pairs with one blank between them.
    fn plain(&mut self) -> Result<(), Complaint> {
        let bytes = self.bytes;
        let mut at = self.at;
        loop {
            let end = run_end(bytes, at);
            let word = Word { start: at as u32, end: end as u32, quoted: false };
            match byte(bytes, end) {
                b'=' if !self.out.words.is_empty() => match simple_value_end(bytes, end + 1) {
                    Some(past) => {
                        let value = Word { start: end as u32 + 1, end: past as u32, quoted: false };
                        self.out.params.push((word, value));
                        self.out.end = value.end;
                        self.last = Last::Value;
                        at = past;
                    }
                    None => {
                        self.at = end + 1;
                        return self.pair(word);
                    }
                },
                b'\\' => {
                    self.at = at;
                    let word = self.bare();
                    self.push(word);
                    self.last = Last::Bare(word);
                    return Ok(());
                }
                _ => {
                    self.push(word);
                    self.last = Last::Bare(word);
                    at = end;
                }
            }
            let one_blank = byte(bytes, at) == b' ' && class(byte(bytes, at + 1)) == Class::Plain;
            if !one_blank {
                self.at = at;
                return Ok(());
            }
            at += 1;
        }
    }

    fn word(&mut self, first: u8) -> Result<(), Complaint> {
        match first {
            b'\'' | b'"' | b'{' => {
                let word = self.quoted()?;
                self.push(word);
                self.last = Last::Other;
                return Ok(());
            }
            b'$' if self.dollar()? => return Ok(()),
            b'/' if byte(self.bytes, self.at + 1) == b'/' => {
                self.at = line_end(self.bytes, self.at);
                return Ok(());
            }
            b'/' if is_gap(self.bytes, self.at + 1) => {
                if self.out.params.is_empty() {
                    self.out.after_slash = Some(self.out.words.len());
                }
                self.at += 1;
                self.last = Last::Other;
                return Ok(());
            }
            _ if self.letter == b'a' && self.code_model_mark(first) => return Ok(()),
            _ => {}
        }
        let word = self.bare();
        self.push(word);
        self.last = Last::Bare(word);
        Ok(())
    }

    /// A run of bytes that separate nothing; a backslash takes the separator after it into the name.
    fn bare(&mut self) -> Word {
        let start = self.at;
        let mut at = run_end(self.bytes, start);
        while byte(self.bytes, at) == b'\\' {
            at += 1;
            at += usize::from(matches!(class(byte(self.bytes, at)), Class::Separator | Class::Equals));
            at = run_end(self.bytes, at);
        }
        if self.letter == b'a' {
            let marks = self.bytes[start..at].iter().position(|&now| matches!(now, b'[' | b']'));
            at = marks.map_or(at, |mark| start + mark);
        }
        self.at = at;
        Word { start: start as u32, end: at as u32, quoted: false }
    }

    /// Brackets, `~` and `%v` on a code model's card say how its ports are grouped, not what they are called.
    fn code_model_mark(&mut self, first: u8) -> bool {
        match first {
            b'[' | b']' | b'~' => self.at += 1,
            b'%' => {
                self.at += 1;
                self.bare();
            }
            _ => return false,
        }
        self.last = Last::Other;
        true
    }

    fn push(&mut self, word: Word) {
        self.out.end = word.end + u32::from(word.quoted);
        if self.out.params.is_empty() {
            self.out.words.push(word);
        } else if self.out.stray.is_none() {
            self.out.stray = Some(word);
        }
    }

    /// Text in quotes or braces, over lines if need be. `at` ends past the closing mark.
    fn quoted(&mut self) -> Result<Word, Complaint> {
        let open = self.at;
        let close = if self.bytes[open] == b'{' { b'}' } else { self.bytes[open] };
        match group_end(self.bytes, open) {
            Some(end) => {
                self.at = end;
                Ok(Word { start: open as u32 + 1, end: end as u32 - 1, quoted: true })
            }
            None => {
                let mark = self.bytes[open] as char;
                let end = line_end(self.bytes, open);
                self.at = self.bytes.len();
                let message = format!("the {mark} is never closed on this card");
                Err(Complaint::new(open, trimmed(self.bytes, open + 1, end), message)
                    .with_help(format!("write the closing {} where the expression ends", close as char)))
            }
        }
    }

    /// After `=`: makes the word before it a key and reads its value.
    fn equals(&mut self) -> Result<(), Complaint> {
        let place = self.at;
        self.at += 1;
        match std::mem::replace(&mut self.last, Last::Other) {
            Last::Bare(key) => self.pair(key),
            Last::Value if !takes_formulas(self.letter) => {
                let before = self.out.params.last().map(|(_, value)| *value);
                let start = before.map_or(place, |value| value.start as usize);
                Err(Complaint::new(start, place + 1, "two `=` signs in a row: a value is missing between them")
                    .with_help("put an expression that holds blanks or comparisons in single quotes"))
            }
            _ => Ok(()),
        }
    }

    fn pair(&mut self, key: Word) -> Result<(), Complaint> {
        if self.out.words.last() == Some(&key) {
            if self.out.words.len() == 1 {
                return Err(Complaint::new(key.start as usize, key.end as usize, "a card's name cannot have a value")
                    .with_help("an element card begins with its name and its nets, apart by blanks"));
            }
            self.out.words.pop();
        }
        if self.out.stray == Some(key) {
            self.out.stray = None;
        }
        let value = self.value(key)?;
        self.out.params.push((key, value));
        self.out.end = value.end + u32::from(value.quoted);
        self.last = Last::Value;
        Ok(())
    }

    fn value(&mut self, key: Word) -> Result<Word, Complaint> {
        self.at = skip_gaps(self.bytes, self.at);
        let start = self.at;
        if let Some(end) = simple_value_end(self.bytes, start) {
            self.at = end;
            return Ok(Word { start: start as u32, end: end as u32, quoted: false });
        }
        let first = byte(self.bytes, start);
        if matches!(first, b'\'' | b'"' | b'{') {
            let word = self.quoted()?;
            if !in_word(byte(self.bytes, self.at))
                || matches!(byte(self.bytes, self.at), b'$' | b'\'' | b'"' | b'{' | b'}')
            {
                return Ok(word);
            }
            self.at = start;
        }
        let end = formula_end(self.bytes, start).map_err(|open| {
            let end = trimmed(self.bytes, open + 1, line_end(self.bytes, open));
            Complaint::new(open, end, "this bracket is never closed").with_help("write the closing bracket")
        })?;
        if end == start {
            let name = String::from_utf8_lossy(&self.bytes[key.start as usize..key.end as usize]).into_owned();
            return Err(Complaint::new(key.start as usize, key.end as usize, format!("`{name}` has no value"))
                .with_help(format!("write `{name}=…` with a value, or leave `{name}` out")));
        }
        self.at = end;
        Ok(Word { start: start as u32, end: end as u32, quoted: false })
    }

    /// At a `$` where a word may begin. Returns whether it was dealt with; else it begins an ordinary name.
    fn dollar(&mut self) -> Result<bool, Complaint> {
        let start = self.at;
        if is_gap(self.bytes, start + 1) {
            self.at = line_end(self.bytes, start);
            return Ok(true);
        }
        if byte(self.bytes, start + 1) == b'[' {
            self.bracket_model();
            return Ok(true);
        }
        if self.export_pair()? {
            return Ok(true);
        }
        let comment = !self.out.params.is_empty() || self.out.words.len() >= words_before_comment(self.letter);
        if comment {
            self.at = line_end(self.bytes, start);
        }
        Ok(comment)
    }

    fn bracket_model(&mut self) {
        let inside = self.at + 2;
        let end = line_end(self.bytes, inside);
        let close = memchr::memchr(b']', &self.bytes[inside..end]).map(|found| inside + found);
        let start = skip_blanks(self.bytes, inside).min(close.unwrap_or(end));
        let last = trimmed(self.bytes, start, close.unwrap_or(end));
        if last > start {
            self.out.bracket_model = Some(Word { start: start as u32, end: last as u32, quoted: false });
            self.out.end = last as u32 + u32::from(close.is_some());
        }
        self.at = close.map_or(end, |close| close + 1);
        self.last = Last::Other;
    }

    /// `$SUB=net`, `$MODEL=name`, and sizes such as `$W=2`, which count where the card itself does not give them.
    fn export_pair(&mut self) -> Result<bool, Complaint> {
        let start = self.at;
        let mut end = start + 1;
        while matches!(byte(self.bytes, end), b'.' | b'_' | b'a'..=b'z' | b'A'..=b'Z' | b'0'..=b'9') {
            end += 1;
        }
        if end == start + 1 || byte(self.bytes, skip_blanks(self.bytes, end)) != b'=' {
            return Ok(false);
        }
        let key = Word { start: start as u32 + 1, end: end as u32, quoted: false };
        self.at = skip_blanks(self.bytes, end) + 1;
        let value = self.value(key)?;
        let bytes = self.bytes;
        let spelled = |word: &Word| &bytes[word.start as usize..word.end as usize];
        let name = spelled(&key);
        if name.eq_ignore_ascii_case(b"sub") {
            self.out.substrate = Some(value);
        } else if name.eq_ignore_ascii_case(b"model") || name.eq_ignore_ascii_case(b".model") {
            self.out.bracket_model = Some(value);
        } else if !self.out.params.iter().take(64).any(|(other, _)| spelled(other).eq_ignore_ascii_case(name)) {
            self.out.params.push((key, value));
        }
        self.out.end = value.end + u32::from(value.quoted);
        self.last = Last::Value;
        Ok(true)
    }
}

/// Element cards on which a formula may hold `=` and blanks of its own.
fn takes_formulas(letter: u8) -> bool {
    matches!(letter, b'b' | b'e' | b'g' | b'.')
}

/// From how many words on a `$word` cannot be a net any more, so that it begins a comment.
fn words_before_comment(letter: u8) -> usize {
    match letter {
        b'r' | b'c' | b'l' | b'v' | b'i' | b'k' | b'd' => 4,
        b'm' => 6,
        _ => usize::MAX,
    }
}

/// `end` less the blanks before it, not below `start`.
fn trimmed(bytes: &[u8], start: usize, mut end: usize) -> usize {
    while end > start && class(bytes[end - 1]) == Class::Blank {
        end -= 1;
    }
    end
}

/// Past the mark that closes the quote or brace at `open`, over continuation lines.
pub(super) fn group_end(bytes: &[u8], open: usize) -> Option<usize> {
    let brace = bytes[open] == b'{';
    let (mut at, mut depth) = (open + 1, 1usize);
    while let Some(&now) = bytes.get(at) {
        match now {
            b'\n' => {
                at = continuation(bytes, at)?;
                continue;
            }
            b'{' if brace => depth += 1,
            b'}' if brace => {
                depth -= 1;
                if depth == 0 {
                    return Some(at + 1);
                }
            }
            _ if !brace && now == bytes[open] => return Some(at + 1),
            b';' => {
                at = line_end(bytes, at);
                continue;
            }
            _ => {}
        }
        at += 1;
    }
    None
}

/// Where a value without quotes ends that begins at `start`: at a blank, comma or `=` outside brackets. Blanks may stand
/// inside brackets. The error is the offset of a bracket that is never closed.
pub(super) fn formula_end(bytes: &[u8], start: usize) -> Result<usize, usize> {
    let (mut at, mut depth, mut outer) = (start, 0usize, start);
    while let Some(&now) = bytes.get(at) {
        match now {
            b'(' | b'{' => {
                if depth == 0 {
                    outer = at;
                }
                depth += 1;
            }
            b')' | b'}' if depth == 0 => break,
            b')' | b'}' => depth -= 1,
            b'\n' if depth > 0 => {
                at = continuation(bytes, at).ok_or(outer)?;
                continue;
            }
            b'\n' | b';' => break,
            b'\'' | b'"' => {
                at = group_end(bytes, at).ok_or(at)?;
                continue;
            }
            b'=' if depth == 0 => {
                let compares =
                    byte(bytes, at + 1) == b'=' || (at > start && matches!(bytes[at - 1], b'=' | b'<' | b'>' | b'!'));
                if !compares {
                    break;
                }
            }
            b',' if depth == 0 => break,
            b'/' if depth == 0 && byte(bytes, at + 1) == b'/' => break,
            _ if depth == 0 && class(now) == Class::Blank => break,
            _ => {}
        }
        at += 1;
    }
    if depth > 0 { Err(outer) } else { Ok(at) }
}

#[cfg(test)]
mod tests {
    use super::super::carets::check_complaints;
    use super::*;
    use proptest::prelude::*;

    /// Words, then pairs, as one line of text.
    fn shown(text: &str) -> String {
        let mut fields = Fields::default();
        let complaint = read_fields(text, 0, &mut fields);
        assert!(complaint.is_none(), "{complaint:?}");
        let mark = |word: &Word| if word.quoted { format!("<<{}>>", word.of(text)) } else { word.of(text).to_owned() };
        let words: Vec<String> = fields.words.iter().map(mark).collect();
        let pairs: Vec<String> =
            fields.params.iter().map(|(key, value)| format!("{}={}", key.of(text), mark(value))).collect();
        format!("{} | {}", words.join(" "), pairs.join(" "))
    }

    /// Separators and comments from the Ngspice User's Manual, version 39, sections 2.1.1 and 2.3; the rest as public
    /// netlists of open processes have it.
    #[test]
    fn cards_of_every_kind() {
        let table = [
            ("M1 d g s b n60 w=5u l = 0.6u\nR2", "M1 d g s b n60 | w=5u l=0.6u"),
            ("M1 (d,g s) b n60 w =5u, l= 1u", "M1 d g s b n60 | w=5u l=1u"),
            ("M$12 15|25|VSS \\$274 a#1 n/b x! S<1> q[0] n60", "M$12 15|25|VSS \\$274 a#1 n/b x! S<1> q[0] n60 | "),
            ("X1 B_reg\\[106\\] \\(a\\) top.x1:s c", "X1 B_reg\\[106\\] \\(a\\) top.x1:s c | "),
            ("V1 a 0 PULSE(0 5 1n 1n, 1n 5u 10u) ac=1", "V1 a 0 PULSE 0 5 1n 1n 1n 5u 10u | ac=1"),
            ("R1 a b 'r0 * 2' tc1={a + {b}} w=\"x y\"", "R1 a b <<r0 * 2>> | tc1=<<a + {b}>> w=<<x y>>"),
            ("X1 a c w=2*3 l=max(1, 2)*3 m=a==b n={x}*2", "X1 a c | w=2*3 l=max(1, 2)*3 m=a==b n={x}*2"),
            ("R1 a b\n* why\n\n+\n  + 1k ; x\n+ w=\n+ 2u $ end\n* x\n", "R1 a b 1k | w=2u"),
            ("R1 a b 1k\r\n+ tc=1\r\n", "R1 a b 1k | tc=1"),
            ("C1 a b 6.9f $ **FLOATING", "C1 a b 6.9f | "),
            ("C1 a b 6.9f $FLOATING x=1", "C1 a b 6.9f | "),
            ("M1 $N_1 $N_2 s b n60", "M1 $N_1 $N_2 s b n60 | "),
            ("M1 d g s b n60 w=1 $matched l=2", "M1 d g s b n60 | w=1"),
            ("R1 a b 1k // w=1", "R1 a b 1k | "),
            ("B1 a 0 V = 'x*(1 - v(y))'", "B1 a 0 | V=<<x*(1 - v(y))>>"),
            ("B1 a 0 v=v(a) == 1 ? 2 : 3", "B1 a 0 | v=v(a)"),
            ("E1 a 0 table {v(x)} = (0,0) (1,5)", "E1 a 0 table <<v(x)>> 0 0 1 5 | "),
            ("A1 [a ~b] %vd(c d) [e] gate", "A1 a b c d e gate | "),
            ("D1 a k dx m=2 off", "D1 a k dx | m=2"),
            ("X1 a / c", "X1 a c | "),
            ("R1 a b 1k $W=2u $L=5u $X=3", "R1 a b 1k | W=2u L=5u X=3"),
            ("M1 d g s b n60 w=2u $w=9u", "M1 d g s b n60 | w=2u"),
        ];
        for (text, wanted) in table {
            assert_eq!(shown(text), wanted, "{text}");
        }
    }

    #[test]
    fn export_comments_are_data() {
        let text = "D1 a k $[dz 5] m=2 $SUB=vss w=1";
        let mut fields = Fields::default();
        assert_eq!(read_fields(text, 0, &mut fields), None);
        assert_eq!(fields.bracket_model.unwrap().of(text), "dz 5");
        assert_eq!(fields.substrate.unwrap().of(text), "vss");
        assert_eq!((fields.words.len(), fields.params.len(), fields.end as usize), (3, 2, text.len()));
        let text = "X1 a b / cell p=1 off";
        assert_eq!(read_fields(text, 0, &mut fields), None);
        assert_eq!((fields.after_slash, fields.bracket_model), (Some(3), None));
        assert_eq!(fields.stray.unwrap().of(text), "off");
    }

    #[test]
    fn complaints_have_a_place() {
        let text = "\
R1 a b 'r0 * 2
*      ^^^^^^^ the ' is never closed
M1 d g s b n60 w= l=2u
*                 ^^ two `=` signs
M1 d g s b n60 w=
*              ^ `w` has no value
M1 d g s b n60 w=max(1
*                   ^^ never closed
 R1=5 a b
*^^ a card's name
";
        let (mut fields, mut complaints, mut at) = (Fields::default(), Vec::new(), 0);
        for line in text.split_inclusive('\n') {
            if !line.starts_with('*') {
                let first = at + (line.len() - line.trim_start().len()) as u32;
                complaints.extend(read_fields(text, first, &mut fields));
            }
            at += line.len() as u32;
        }
        check_complaints(text, &complaints);
    }

    #[test]
    fn a_line_of_ten_megabytes_is_read_in_one_go() {
        for (piece, repeats) in
            [("net_12345 ", 1_000_000), ("w=1 ", 2_500_000), ("(", 10_000_000), ("$a=1 ", 2_000_000)]
        {
            let text = format!("x1 a {}", piece.repeat(repeats));
            let start = std::time::Instant::now();
            read_fields(&text, 0, &mut Fields::default());
            assert!(start.elapsed().as_secs() < 20, "{piece}");
        }
        let text = format!("x1 a w={}", "(".repeat(10_000_000));
        assert!(read_fields(&text, 0, &mut Fields::default()).is_some());
    }

    proptest! {
        #[test]
        fn never_panics_and_words_lie_on_characters(text in "[a-zA-Z](?s:.){0,60}|[a-zA-Z][ a1=(){}'\"$/;,+*\n\\\\\\[\\]µ~%<>.-]{0,60}") {
            let mut fields = Fields::default();
            if let Some(complaint) = read_fields(&text, 0, &mut fields) {
                prop_assert!(text.get(complaint.start as usize..complaint.end as usize).is_some(), "{complaint:?}");
            }
            let pairs = fields.params.iter().flat_map(|&(key, value)| [key, value]);
            for word in fields.words.iter().copied().chain(pairs).chain(fields.stray).chain(fields.bracket_model).chain(fields.substrate) {
                prop_assert!(text.get(word.start as usize..word.end as usize).is_some(), "{word:?}");
            }
            prop_assert!(text.is_char_boundary(fields.end as usize));
            match super::super::letters::interpret(&text, &fields, &mut |model| model.len() == 1) {
                Ok(element) => {
                    prop_assert!(fields.words.get(element.nodes.clone()).is_some(), "{element:?}");
                    super::super::waveforms::waveform(&text, &fields, &element);
                    super::super::waveforms::value_word(&text, &fields, &element);
                }
                Err(complaint) => {
                    prop_assert!(text.get(complaint.start as usize..complaint.end as usize).is_some(), "{complaint:?}");
                }
            }
        }
    }
}
