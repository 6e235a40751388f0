//! What each device of the sixteen textbook circuits does, device by device, and of their p-channel images. The books are named in
//! each netlist; which part a device plays is what the books say of it (from memory, as far as sections go).

// Helpers of a test may fail as loudly as the test itself.
#![allow(clippy::unwrap_used, clippy::panic)]

use drainwise::facts::{DeviceView, World};
use drainwise::load::{Disk, Files, Memory};
use drainwise::pipeline::{Job, Progress, read, with_world};
use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};

struct Silent;

impl Progress for Silent {
    fn stage(&self, _: &str) {}
}

/// The roles of all transistors of a circuit, by path.
fn roles(files: &dyn Files, folder: &Path) -> BTreeMap<String, String> {
    let job = Job {
        netlists: vec![folder.join("netlist.sp")],
        decks: vec![folder.join("drainwise.yaml")],
        all_voltages: true,
        ..Job::default()
    };
    let loaded = read(files, &job, &Silent).unwrap_or_else(|outcome| panic!("{:?}", outcome.report.diagnostics));
    with_world(loaded, &job, &Silent, |world, _| all_roles(world)).1
}

fn all_roles(world: World<'_>) -> BTreeMap<String, String> {
    let mut found = BTreeMap::new();
    for at in world.reach.indices() {
        let template = world.design.template(world.context(at).variant);
        for device in template.devices() {
            let Some(class) = world.design.class(template, device).filter(|class| class.kind.is_mos()) else {
                continue;
            };
            let view = DeviceView::new(world, at, device, class);
            let mut names: Vec<&str> = view.roles().iter().map(|played| played.role.word()).collect();
            names.sort_unstable();
            if names.is_empty() {
                names.push("unclassified");
            }
            found.insert(view.path(), names.join(","));
        }
    }
    found
}

/// Holds a circuit's roles against the list beside it.
fn differences(files: &dyn Files, folder: &Path) -> Vec<String> {
    let found = roles(files, folder);
    let text = fs::read_to_string(folder.join("roles.tsv")).unwrap();
    let mut wrong = Vec::new();
    for row in text.lines().filter(|row| !row.starts_with('#') && !row.is_empty()) {
        let (device, wanted) = row.split_once('\t').unwrap();
        let mut wanted: Vec<&str> = wanted.split(',').collect();
        wanted.sort_unstable();
        let wanted = wanted.join(",");
        let has = found.get(device).cloned().unwrap_or_default();
        if has != wanted {
            wrong.push(format!("{}/{device}: wanted {wanted}, found {has}", folder.file_name().unwrap().display()));
        }
    }
    wrong
}

fn folders() -> Vec<PathBuf> {
    let all = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/topologies");
    let mut folders: Vec<PathBuf> = fs::read_dir(all).unwrap().map(|entry| entry.unwrap().path()).collect();
    folders.retain(|path| path.join("roles.tsv").is_file());
    folders.sort();
    assert_eq!(folders.len(), 16);
    folders
}

#[test]
fn textbook_circuits_play_their_parts() {
    let wrong: Vec<String> = folders().iter().flat_map(|folder| differences(&Disk, folder)).collect();
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

/// The complementary image of a circuit has the same structure: each device by its counterpart, each voltage turned over.
#[test]
fn their_complementary_images_play_the_same_parts() {
    let wrong: Vec<String> = folders().iter().flat_map(|folder| differences(&image(folder), folder)).collect();
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

/// The files of a circuit's complementary image. The netlist stays, its models change kind: decks say what they are.
fn image(folder: &Path) -> Memory {
    let mut files = Memory::new();
    for path in [folder.join("netlist.sp"), folder.join("../family.sp")] {
        files = files.with(&path, fs::read(&path).unwrap());
    }
    for path in [folder.join("drainwise.yaml"), folder.join("../family.yaml")] {
        files = files.with(&path, turned_deck(&fs::read_to_string(&path).unwrap()).into_bytes());
    }
    files
}

fn turned_deck(deck: &str) -> String {
    let mut section = String::new();
    let mut turned = String::new();
    for line in deck.lines() {
        if line.ends_with(':') && !line.starts_with(' ') {
            section = line.to_owned();
        }
        let line = match section.as_str() {
            "classes:" => turned_class(line),
            "rails:" | "modes:" if !line.trim_start().starts_with('#') => turned_rails(line),
            _ => line.to_owned(),
        };
        turned.push_str(&line);
        turned.push('\n');
    }
    turned
}

fn turned_class(line: &str) -> String {
    let line = line.replace("kind: nmos", "kind: p-mos").replace("kind: pmos", "kind: nmos").replace("p-mos", "pmos");
    let line = line.replace("pins: [a, k]", "pins: [k, a]").replace("v(iso,b)", "v(b,iso)");
    // Only ratings turn; the limits of `on_state` are magnitudes.
    if !line.contains("ratings:") {
        return line;
    }
    let turned = [("vds: ", "v_sd: "), ("vgs: ", "v_sg: "), ("vsd: ", "v_ds: "), ("vsg: ", "v_gs: ")];
    turned.iter().fold(line, |line, (from, to)| line.replace(from, to)).replace("v_", "v")
}

/// `name: value` and `mode: {name: value, …}` with each value turned over.
fn turned_rails(line: &str) -> String {
    let Some((head, rest)) = line.split_once(": ") else { return line.to_owned() };
    let inner = rest.trim();
    match inner.strip_prefix('{').and_then(|inner| inner.strip_suffix('}')) {
        Some(inner) => {
            let all: Vec<String> = inner.split(", ").map(|entry| turned_rails(entry.trim())).collect();
            format!("{head}: {{{}}}", all.join(", "))
        }
        None => {
            let (lo, hi) = inner.split_once("..").unwrap_or((inner, inner));
            format!("{head}: {} .. {}", turned_end(hi.trim()), turned_end(lo.trim()))
        }
    }
}

fn turned_end(end: &str) -> String {
    if let Some((net, volts)) = end.split_once(" + ") {
        return format!("{net} - {volts}");
    }
    if let Some((net, volts)) = end.split_once(" - ") {
        return format!("{net} + {volts}");
    }
    match end.strip_prefix('-') {
        Some(volts) => volts.to_owned(),
        None if end.starts_with(|first: char| first.is_ascii_digit()) => format!("-{end}"),
        None => end.to_owned(),
    }
}
