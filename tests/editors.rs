//! What the program writes for editors and shells: the schema of decks, completions, the manual page.
#![allow(clippy::unwrap_used, clippy::panic, reason = "a test that cannot go on must stop")]

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

const COMMANDS: [&str; 10] =
    ["lint", "trace", "survey", "rules", "init", "deck", "schema", "completions", "manual", "serve"];

fn drainwise(arguments: &[&str], folder: &Path) -> Output {
    Command::new(env!("CARGO_BIN_EXE_drainwise")).args(arguments).current_dir(folder).output().unwrap()
}

fn said(arguments: &[&str]) -> String {
    let ran = drainwise(arguments, Path::new("."));
    assert_eq!((ran.status.code(), ran.stderr.as_slice()), (Some(0), &b""[..]), "{arguments:?}");
    String::from_utf8(ran.stdout).unwrap()
}

#[test]
fn the_schema_is_the_committed_one() {
    let committed = Path::new(env!("CARGO_MANIFEST_DIR")).join("rules/drainwise.schema.json");
    assert!(said(&["schema"]) == fs::read_to_string(committed).unwrap());
    let folder = tempfile::tempdir().unwrap();
    let ran = drainwise(&["schema", "--out", "s.json"], folder.path());
    assert_eq!((ran.status.code(), ran.stdout.len()), (Some(0), 0));
    assert!(fs::read_to_string(folder.path().join("s.json")).unwrap() == said(&["schema"]));
}

/// The file that a deck's first line names is the one that its second line says how to write.
#[test]
fn a_starter_deck_names_its_schema() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("a.sp"), "* t\nM1 d g s s ldn60 w=1u l=1u\n").unwrap();
    let deck = String::from_utf8(drainwise(&["init", "a.sp"], folder.path()).stdout).unwrap();
    let mut lines = deck.lines();
    let named = lines.next().unwrap().strip_prefix("# yaml-language-server: $schema=").unwrap();
    let how = lines.next().unwrap().split_once("drainwise ").unwrap().1.trim_end_matches(')');
    drainwise(&how.split_whitespace().collect::<Vec<_>>(), folder.path());
    let schema: serde_json::Value =
        serde_json::from_str(&fs::read_to_string(folder.path().join(named)).unwrap()).unwrap();
    let deck: serde_json::Value = serde_saphyr::from_str(&deck).unwrap();
    assert!(jsonschema::draft7::is_valid(&schema, &deck), "{deck}");
}

#[test]
fn completions_name_every_command() {
    for shell in ["bash", "elvish", "fish", "powershell", "zsh"] {
        let text = said(&["completions", shell]);
        for command in COMMANDS {
            assert!(text.contains(command), "{shell} does not know {command}");
        }
    }
    let wrong = drainwise(&["completions", "csh"], Path::new("."));
    assert_eq!(wrong.status.code(), Some(2));
}

/// Asked as the shell asks (Bash Reference Manual, 8.6 "Programmable Completion": the words in `COMP_WORDS`, the answers in
/// `COMPREPLY`).
#[test]
fn bash_completes_by_them() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("complete"), said(&["completions", "bash"])).unwrap();
    let complete = |words: &str, at: usize| {
        let ask = format!(
            "set -e; source ./complete; COMP_WORDS=({words}); COMP_CWORD={at}; \
             _drainwise drainwise \"${{COMP_WORDS[{at}]}}\" \"${{COMP_WORDS[{}]}}\" || true; echo \"${{COMPREPLY[*]}}\"",
            at - 1
        );
        let ran = Command::new("bash").args(["-c", &ask]).current_dir(folder.path()).output();
        ran.ok().map(|ran| String::from_utf8(ran.stdout).unwrap().trim().to_owned())
    };
    let Some(surveys) = complete("drainwise su", 1) else { return };
    assert_eq!(surveys, "survey");
    assert_eq!(complete("drainwise lint --format s", 3).unwrap(), "short sarif");
}

/// The macros of manual pages: man(7), "Macros to use": `.TH` heads the page, `.SH` begins a section.
#[test]
fn the_manual_page_has_every_command() {
    let page = said(&["manual"]);
    assert!(page.lines().any(|line| line.starts_with(".TH drainwise 1")), "{page}");
    for command in COMMANDS {
        let head = format!(".SH \"DRAINWISE {}\"", command.to_uppercase());
        assert!(page.lines().any(|line| line == head), "{head}");
    }
    for words in ["fail\\-on", "write\\-baseline", "Exit codes"] {
        assert!(page.contains(words), "{words}");
    }
}

/// What a formatter of manual pages complains of, where there is one.
#[test]
fn the_manual_page_is_sound() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("d.1"), said(&["manual"])).unwrap();
    let ran = Command::new("groff").args(["-man", "-ww", "-Tascii", "d.1"]).current_dir(folder.path()).output();
    let Ok(ran) = ran else { return };
    assert_eq!(String::from_utf8_lossy(&ran.stderr), "");
    // A bold letter is struck twice.
    let struck = String::from_utf8_lossy(&ran.stdout);
    let letters: Vec<char> = struck.chars().collect();
    let page: String = (0..letters.len())
        .filter(|&at| letters[at] != '\u{8}' && letters.get(at + 1) != Some(&'\u{8}'))
        .map(|at| letters[at])
        .collect();
    assert!(page.contains("DRAINWISE LINT") && !page.contains("drainwise-lint(1)"), "{page}");
}
