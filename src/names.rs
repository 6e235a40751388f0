//! Names: interned once, compared without case, shown as they were written; and the globs that decks match them with.

use hashbrown::HashTable;

/// An interned name. Two spellings that differ only in ASCII case are one name.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Sym(pub u32);

/// Keeps every name of a run once, in the spelling seen first.
#[derive(Debug, Default)]
pub struct Names {
    text: String,
    ends: Vec<u32>,
    table: HashTable<u32>,
}

fn fold_hash(name: &[u8]) -> u64 {
    const K: u64 = 0x517c_c1b7_2722_0a95;
    const CASE: u64 = 0x2020_2020_2020_2020;
    let mut hash = name.len() as u64;
    let mut chunks = name.chunks_exact(8);
    for chunk in &mut chunks {
        let mut word = [0u8; 8];
        word.copy_from_slice(chunk);
        hash = (hash.rotate_left(5) ^ (u64::from_le_bytes(word) | CASE)).wrapping_mul(K);
    }
    let mut last = 0u64;
    for &byte in chunks.remainder() {
        last = last << 8 | u64::from(byte | 0x20);
    }
    hash = (hash.rotate_left(5) ^ last).wrapping_mul(K);
    hash ^ hash >> 29
}

impl Names {
    /// An empty table.
    pub fn new() -> Names {
        Names::default()
    }

    /// The number of this name, new or known.
    pub fn intern(&mut self, name: &str) -> Sym {
        let hash = fold_hash(name.as_bytes());
        let (text, ends) = (&self.text, &self.ends);
        if let Some(&id) = self.table.find(hash, |&id| spelled(text, ends, id).eq_ignore_ascii_case(name)) {
            return Sym(id);
        }
        let id = self.ends.len() as u32;
        self.text.push_str(name);
        self.ends.push(self.text.len() as u32);
        let (text, ends) = (&self.text, &self.ends);
        self.table.insert_unique(hash, id, |&id| fold_hash(spelled(text, ends, id).as_bytes()));
        Sym(id)
    }

    /// The number of this name if it is known.
    pub fn find(&self, name: &str) -> Option<Sym> {
        let hash = fold_hash(name.as_bytes());
        self.table.find(hash, |&id| spelled(&self.text, &self.ends, id).eq_ignore_ascii_case(name)).map(|&id| Sym(id))
    }

    /// The spelling seen first.
    pub fn text(&self, name: Sym) -> &str {
        spelled(&self.text, &self.ends, name.0)
    }

    /// How many names there are.
    pub fn len(&self) -> usize {
        self.ends.len()
    }

    /// Whether there is none.
    pub fn is_empty(&self) -> bool {
        self.ends.is_empty()
    }
}

fn spelled<'a>(text: &'a str, ends: &[u32], id: u32) -> &'a str {
    let start = if id == 0 { 0 } else { ends[id as usize - 1] };
    &text[start as usize..ends[id as usize] as usize]
}

/// A pattern of a deck: `*` is any run of characters, `?` any one, all else itself, without regard to ASCII case.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Glob {
    text: String,
    wild: bool,
}

impl Glob {
    /// Reads a pattern in which `*` and `?` are wild.
    pub fn new(pattern: impl Into<String>) -> Glob {
        let text = pattern.into();
        let wild = text.contains(['*', '?']);
        Glob { text, wild }
    }

    /// A pattern that is exactly this name, whatever characters it has.
    pub fn exact(name: impl Into<String>) -> Glob {
        Glob { text: name.into(), wild: false }
    }

    /// As it was written.
    pub fn text(&self) -> &str {
        &self.text
    }

    /// Whether it may match more than one name.
    pub fn is_wild(&self) -> bool {
        self.wild
    }

    /// Whether a whole name matches. `*` and `?` match every character, dots too: for models and files.
    pub fn matches(&self, name: &str) -> bool {
        if !self.wild {
            return self.text.eq_ignore_ascii_case(name);
        }
        wild_match(self.text.as_bytes(), name.as_bytes(), Dots::Plain)
    }

    /// Whether a dotted path matches. `*` and `?` stop at dots, `**` crosses them.
    pub fn matches_path(&self, path: &str) -> bool {
        if !self.wild {
            return self.text.eq_ignore_ascii_case(path);
        }
        wild_match(self.text.as_bytes(), path.as_bytes(), Dots::Separate)
    }
}

#[derive(Clone, Copy, PartialEq)]
enum Dots {
    Plain,
    Separate,
}

/// Iterative matching with one fallback for `*` and one for `**`: time is at most pattern × name.
fn wild_match(pattern: &[u8], name: &[u8], dots: Dots) -> bool {
    let (mut p, mut n) = (0, 0);
    let mut star: Option<(usize, usize)> = None;
    let mut double: Option<(usize, usize)> = None;
    loop {
        if p < pattern.len() && pattern[p] == b'*' {
            let run = pattern[p..].iter().take_while(|&&byte| byte == b'*').count();
            p += run;
            if dots == Dots::Separate && run == 1 {
                star = Some((p, n));
            } else {
                double = Some((p, n));
                star = None;
            }
            continue;
        }
        if n == name.len() && p == pattern.len() {
            return true;
        }
        let same = p < pattern.len()
            && n < name.len()
            && match pattern[p] {
                b'?' => dots == Dots::Plain || name[n] != b'.',
                byte => byte.eq_ignore_ascii_case(&name[n]),
            };
        if same {
            p += 1;
            n += if pattern[p - 1] == b'?' { char_len(name[n]) } else { 1 };
            continue;
        }
        if let Some((after, from)) = star
            && from < name.len()
            && name[from] != b'.'
        {
            star = Some((after, from + 1));
            (p, n) = (after, from + 1);
            continue;
        }
        if let Some((after, from)) = double
            && from < name.len()
        {
            double = Some((after, from + 1));
            star = None;
            (p, n) = (after, from + 1);
            continue;
        }
        return false;
    }
}

fn char_len(first: u8) -> usize {
    match first {
        0xf0.. => 4,
        0xe0.. => 3,
        0xc0.. => 2,
        _ => 1,
    }
}

/// The candidate nearest to a misspelt `word`, if one is near enough to be worth offering (Damerau-Levenshtein distance,
/// optimal string alignment; at most a third of the letters may differ).
pub fn nearest<'a>(word: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let allowed = (word.chars().count() / 3).max(1);
    candidates
        .into_iter()
        .map(|candidate| (distance(word, candidate), candidate))
        .filter(|&(distance, _)| distance <= allowed)
        .min_by_key(|&(distance, _)| distance)
        .map(|(_, candidate)| candidate)
}

fn distance(a: &str, b: &str) -> usize {
    let a: Vec<char> = a.chars().map(|c| c.to_ascii_lowercase()).take(64).collect();
    let b: Vec<char> = b.chars().map(|c| c.to_ascii_lowercase()).take(64).collect();
    let mut rows = vec![(0..=b.len()).collect::<Vec<usize>>()];
    for i in 1..=a.len() {
        let mut row = vec![i];
        for j in 1..=b.len() {
            let cost = usize::from(a[i - 1] != b[j - 1]);
            let mut best = (rows[i - 1][j] + 1).min(row[j - 1] + 1).min(rows[i - 1][j - 1] + cost);
            if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                best = best.min(rows[i - 2][j - 2] + 1);
            }
            row.push(best);
        }
        rows.push(row);
    }
    rows[a.len()][b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_fold_case_and_keep_the_first_spelling() {
        let mut names = Names::new();
        let vdd = names.intern("Vdd");
        assert_eq!(names.intern("VDD"), vdd);
        assert_ne!(names.intern("VD"), vdd);
        assert_eq!(names.text(vdd), "Vdd");
        assert_eq!(names.find("vdd"), Some(vdd));
        assert_eq!(names.find("vss"), None);
        for i in 0..5000 {
            let name = format!("net_{i}");
            let id = names.intern(&name);
            assert_eq!(names.text(id), name);
            assert_eq!(names.find(&name.to_uppercase()), Some(id));
        }
    }

    #[test]
    fn globs_stop_at_dots_only_in_paths() {
        assert!(Glob::new("ldn60_*").matches("LDN60_iso"));
        assert!(!Glob::new("ldn60_*").matches("ldn60"));
        assert!(Glob::new("s<?>").matches("S<1>"));
        assert!(Glob::new("d*_out").matches_path("D1_OUT"));
        assert!(!Glob::new("*").matches_path("x1.m1"));
        assert!(Glob::new("**").matches_path("x1.x2.m1"));
        assert!(Glob::new("**.m1").matches_path("x1.x2.m1"));
        assert!(Glob::new("x*.x?.m*").matches_path("x1.x2.m1"));
        assert!(!Glob::new("x?.m1").matches_path("x1.x2.m1"));
        assert!(Glob::new("**.a*b").matches_path("x.a.axb"));
    }

    #[test]
    fn near_names() {
        assert_eq!(nearest("finger-cuont", ["finger-width", "finger-count"]), Some("finger-count"));
        assert_eq!(nearest("zzz", ["finger-width"]), None);
    }
}
