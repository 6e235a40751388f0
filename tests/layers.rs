//! Holds the floors of the house: a module imports only from modules on floors below its own.
//!
//! `src/lib.rs` lists the modules from the ground up; a blank line ends a floor. A path `crate::module` anywhere in the
//! sources (imports, qualified names, tests beside the code) must name a module of an earlier floor, or the module's own.
//! Comments are not looked at: documentation may point anywhere.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::print_stdout)]

use std::collections::HashMap;
use std::fs;
use std::path::{Path, PathBuf};

fn root() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("src")
}

/// The floor of each module, counted from the ground.
fn floors(lib: &str) -> HashMap<String, usize> {
    let mut floors = HashMap::new();
    let mut floor = 0;
    let mut used = false;
    for line in lib.lines().map(str::trim) {
        if let Some(name) = line.strip_prefix("pub mod ").and_then(|rest| rest.strip_suffix(';')) {
            floors.insert(name.to_owned(), floor);
            used = true;
        } else if line.is_empty() && used {
            floor += 1;
            used = false;
        }
    }
    floors
}

/// All Rust files under a folder, ordered.
fn sources(folder: &Path, found: &mut Vec<PathBuf>) {
    let mut entries: Vec<PathBuf> = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().path()).collect();
    entries.sort();
    for entry in entries {
        if entry.is_dir() {
            sources(&entry, found);
        } else if entry.extension().is_some_and(|extension| extension == "rs") {
            found.push(entry);
        }
    }
}

/// The module at the top of the crate that a file belongs to; none for `lib.rs` and `main.rs`.
fn module(file: &Path) -> Option<String> {
    let first = file.strip_prefix(root()).unwrap().components().next().unwrap();
    let name = first.as_os_str().to_str().unwrap().trim_end_matches(".rs");
    (name != "lib" && name != "main").then(|| name.to_owned())
}

/// Blanks out comments, keeping every line where it is. A `//` inside a text literal is taken for a comment as well, which
/// loses no import: none stands behind a literal on one line.
fn without_comments(text: &str) -> String {
    text.lines().map(|line| line.find("//").map_or(line, |at| &line[..at])).collect::<Vec<_>>().join("\n")
}

/// The modules that a text names, each with the offset of its name: `crate::x`, and the heads inside `crate::{x::y, z}`.
fn named(text: &str) -> Vec<(usize, String)> {
    let mut found = Vec::new();
    for (at, _) in text.match_indices("crate::") {
        let before = text[..at].chars().next_back();
        if before.is_some_and(|c| c.is_alphanumeric() || c == '_' || c == '$') {
            continue;
        }
        let start = at + "crate::".len();
        match text[start..].strip_prefix('{') {
            Some(_) => found.extend(heads(text, start + 1)),
            None => found.push((start, word(&text[start..]))),
        }
    }
    found
}

/// The first words of the members of a braced import whose inside begins at `start`.
fn heads(text: &str, start: usize) -> Vec<(usize, String)> {
    let mut found = Vec::new();
    let mut depth = 0;
    let mut fresh = true;
    for (at, c) in text[start..].char_indices() {
        match c {
            '}' if depth == 0 => break,
            '{' => depth += 1,
            '}' => depth -= 1,
            ',' if depth == 0 => fresh = true,
            c if fresh && (c.is_alphabetic() || c == '_') => {
                found.push((start + at, word(&text[start + at..])));
                fresh = false;
            }
            _ => {}
        }
    }
    found
}

fn word(text: &str) -> String {
    text.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect()
}

/// Imports of one file that look up or sideways, as `line: words`.
fn complaints(text: &str, own: &str, floors: &HashMap<String, usize>) -> Vec<(usize, String)> {
    let text = without_comments(text);
    let mut complaints = Vec::new();
    for (at, name) in named(&text) {
        let line = text[..at].matches('\n').count() + 1;
        let Some(&there) = floors.get(&name).filter(|_| name != own) else { continue };
        let here = floors[own];
        if there == here {
            complaints.push((line, format!("`{own}` names its sister `{name}`")));
        } else if there > here {
            complaints.push((line, format!("`{own}` looks up to `{name}`")));
        }
    }
    complaints
}

#[test]
fn imports_only_look_down() {
    let floors = floors(&fs::read_to_string(root().join("lib.rs")).unwrap());
    assert!(floors.len() > 10, "lib.rs lists the modules: {floors:?}");
    let mut files = Vec::new();
    sources(&root(), &mut files);
    let mut wrong = Vec::new();
    let mut looked_at = 0;
    for file in &files {
        let Some(own) = module(file) else { continue };
        assert!(floors.contains_key(&own), "{}: `{own}` stands on no floor of lib.rs", file.display());
        let text = fs::read_to_string(file).unwrap();
        looked_at += named(&without_comments(&text)).len();
        let shown = file.strip_prefix(env!("CARGO_MANIFEST_DIR")).unwrap();
        wrong.extend(
            complaints(&text, &own, &floors)
                .into_iter()
                .map(|(line, words)| format!("{}:{line}: {words}", shown.display())),
        );
    }
    assert!(looked_at > 100, "only {looked_at} paths were found: the search is broken");
    assert!(wrong.is_empty(), "{} imports do not look down:\n{}", wrong.len(), wrong.join("\n"));
}

#[test]
fn the_search_finds_what_looks_up() {
    let floors = floors("pub mod low;\npub mod sister;\n\npub mod middle;\n\n\npub mod high;\n");
    assert_eq!((floors["low"], floors["sister"], floors["middle"], floors["high"]), (0, 0, 1, 2));
    let check = |text: &str| complaints(text, "middle", &floors).into_iter().map(|(line, _)| line).collect::<Vec<_>>();
    assert_eq!(check("use crate::low::Thing;\nuse crate::middle::Own;\n"), Vec::<usize>::new());
    assert_eq!(check("\nuse crate::high::Thing;\n"), [2]);
    assert_eq!(check("use crate::{low::{A, B}, high};\n"), [1]);
    assert_eq!(check("use crate::{\n    low,\n    high::C,\n};\n"), [3]);
    assert_eq!(check("// see crate::high\nfn f() { crate::high::g() }\n"), [2]);
    assert_eq!(complaints("use crate::sister::S;", "low", &floors).len(), 1, "sisters never meet");
}
