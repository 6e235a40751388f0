//! Reads every netlist of a folder of published ones: no card of theirs is refused.
//!
//! The netlists are those of public repositories of open processes, as their authors simulate them; the project does not
//! carry them. Run with `cargo test --release --test real_netlists -- --ignored --nocapture`; `DRAINWISE_NETLISTS` names
//! the folder (default: `../shared/netlists` beside this project).
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::print_stdout)]

use serde_json::Value;
use std::fs::{self, File};
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::thread::sleep;
use std::time::{Duration, Instant};

/// How long one file may take.
const LIMIT: Duration = Duration::from_secs(20);

/// Exit code 2 that is right, by the end of the path and the reason. Nothing at present: templates aside, every file there is
/// accepted by its authors' simulator.
const LEGITIMATE: &[(&str, &str)] = &[];

fn folder() -> PathBuf {
    let default = Path::new(env!("CARGO_MANIFEST_DIR")).join("../shared/netlists");
    let folder = std::env::var_os("DRAINWISE_NETLISTS").map_or(default, PathBuf::from);
    assert!(folder.is_dir(), "{} is no folder: set DRAINWISE_NETLISTS to the folder of netlists", folder.display());
    folder
}

/// All netlist files under a folder, ordered.
fn netlists(folder: &Path, found: &mut Vec<PathBuf>) {
    let mut entries: Vec<PathBuf> = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().path()).collect();
    entries.sort();
    for entry in entries {
        if entry.is_dir() {
            netlists(&entry, found);
        } else if !entry.extension().is_some_and(|extension| extension == "md" || extension == "tsv") {
            found.push(entry);
        }
    }
}

/// The process that a netlist is for, by its path.
fn process(path: &Path) -> &'static str {
    let path = path.to_string_lossy().to_lowercase();
    match () {
        () if path.contains("gf180") => "gf180mcu",
        () if path.contains("sg13g2") || path.contains("ihp") => "sg13g2",
        () => "sky130",
    }
}

/// What a run ended with: its exit code (none: a signal, or out of time) and its report.
fn lint(path: &Path, deck: &Path, out: &Path) -> (Option<i32>, Option<Value>) {
    let mut child = Command::new(env!("CARGO_BIN_EXE_drainwise"))
        .arg("lint")
        .arg(path)
        .arg("--deck")
        .arg(deck)
        .args(["--format", "json"])
        .stdout(File::create(out).unwrap())
        .stderr(Stdio::inherit())
        .spawn()
        .unwrap();
    let began = Instant::now();
    let status = loop {
        match child.try_wait().unwrap() {
            Some(status) => break status,
            None if began.elapsed() > LIMIT => {
                child.kill().unwrap();
                break child.wait().unwrap();
            }
            None => sleep(Duration::from_millis(2)),
        }
    };
    (status.code(), serde_json::from_slice(&fs::read(out).unwrap()).ok())
}

/// The first few errors of reading, one a line.
fn errors(report: &Value) -> Vec<String> {
    let findings = report["findings"].as_array().unwrap();
    let reading = findings.iter().filter(|finding| finding["device"].is_null() && finding["severity"] == "error");
    reading.map(|finding| format!("{}:{}: {}", finding["line"], finding["column"], finding["message"])).collect()
}

#[test]
#[ignore = "needs a folder of published netlists"]
fn every_card_of_published_netlists_is_read() {
    let folder = folder();
    let temp = tempfile::tempdir().unwrap();
    for process in ["sky130", "gf180mcu", "sg13g2"] {
        fs::write(temp.path().join(format!("{process}.yaml")), format!("use: [builtin:{process}]\n")).unwrap();
    }
    let mut files = Vec::new();
    netlists(&folder, &mut files);
    let (mut cards, mut refused, mut templates) = (0, 0, 0);
    let mut wrong = Vec::new();
    for path in &files {
        let shown = path.strip_prefix(&folder).unwrap().display();
        let deck = temp.path().join(format!("{}.yaml", process(path)));
        let (code, report) = lint(path, &deck, &temp.path().join("report.json"));
        let Some(report) = report.filter(|_| matches!(code, Some(0..=2))) else {
            wrong.push(format!("{shown}: ended with {code:?} (none: a signal, or longer than {LIMIT:?})"));
            continue;
        };
        if String::from_utf8_lossy(&fs::read(path).unwrap()).contains("{{") {
            templates += 1;
            continue;
        }
        let errors = errors(&report);
        cards += report["summary"]["cards"].as_u64().unwrap();
        // a card with any error of reading counts, whether its device was kept or not
        let places: std::collections::BTreeSet<&str> = errors.iter().filter_map(|one| one.split(':').next()).collect();
        refused += (places.len() as u64).max(report["summary"]["cards_skipped"].as_u64().unwrap());
        let excused = LEGITIMATE.iter().any(|(end, _)| path.ends_with(end));
        if code == Some(2) && !excused {
            let few = errors.iter().take(3).cloned().collect::<Vec<_>>().join("\n    ");
            wrong.push(format!("{shown}: {} errors of reading\n    {few}", errors.len()));
        }
    }
    println!("{} files, {templates} of them templates; {cards} cards read, {refused} refused", files.len());
    assert!(files.len() > 100 && cards > 10_000, "the folder holds the netlists");
    assert!(wrong.is_empty() && refused == 0, "{} files:\n{}", wrong.len(), wrong.join("\n"));
}
