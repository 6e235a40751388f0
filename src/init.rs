//! What `drainwise init` writes: a starter deck for a netlist, with what was found there and what is left to fill in. Guesses
//! are marked as such; the deck loads as it stands.

use crate::deck::{builtin_names, load_decks, schema};
use crate::declared::Deck;
use crate::design::{Element, NetIx, Oddity};
use crate::facts::{World, vocabulary::vocabulary};
use crate::graph::PinTable;
use crate::load::Files;
use crate::netlist::tree::CellIx;
use crate::pipeline::{self, Decks, Job, Outcome, Progress};
use crate::reach::ReachIx;
use crate::source::SourceMap;
use std::fmt::Write;
use std::path::Path;

/// Reads a netlist and proposes a deck for it.
pub fn propose(files: &dyn Files, netlist: &Path, progress: &dyn Progress) -> (Outcome, Option<String>) {
    let plain = Job {
        netlists: vec![netlist.to_owned()],
        decks: vec!["builtin:ldmos".into()],
        all_voltages: true,
        ..Job::default()
    };
    let models = match with_deck(files, &plain, progress, models) {
        Ok((_, models)) => models,
        Err(outcome) => return (*outcome, None),
    };
    let process = process_of(files, &models);
    let job = Job {
        decks: process.iter().map(|name| format!("builtin:{name}").into()).chain(plain.decks.clone()).collect(),
        ..plain
    };
    match with_deck(files, &job, progress, |world| write(world, netlist, process)) {
        Ok((outcome, text)) => (outcome, Some(text)),
        Err(outcome) => (*outcome, None),
    }
}

fn with_deck<R>(
    files: &dyn Files,
    job: &Job,
    progress: &dyn Progress,
    work: impl FnOnce(World<'_>) -> R,
) -> Result<(Outcome, R), Box<Outcome>> {
    let loaded = pipeline::read(files, job, progress)?;
    let (sources, (diagnostics, result)) =
        pipeline::with_world(loaded, job, progress, |world, seen| (seen.diagnostics, work(world)));
    Ok((pipeline::checked(sources, diagnostics), result))
}

fn models(world: World<'_>) -> Vec<String> {
    let unknown = world.design.oddities.iter().filter_map(|oddity| match oddity {
        Oddity::UnknownModel { model, .. } => Some(world.design.names.text(*model).to_owned()),
        Oddity::PinCount { .. } => None,
    });
    unknown.collect()
}

/// The process inside the program whose classes name most of the models, if any names one.
fn process_of(files: &dyn Files, models: &[String]) -> Option<&'static str> {
    let named = |deck: &Deck| {
        models
            .iter()
            .filter(|model| deck.classes.iter().any(|class| class.models.iter().any(|glob| glob.matches(model))))
            .count()
    };
    let counts = builtin_names().filter(|name| *name != "ldmos").map(|name| {
        let (deck, _) =
            load_decks(&Decks(files), &[format!("builtin:{name}").into()], &mut SourceMap::new(), &|subject| {
                vocabulary(subject)
            });
        (named(&deck), name)
    });
    counts.filter(|(count, _)| *count > 0).max_by_key(|(count, _)| *count).map(|(_, name)| name)
}

fn write(world: World<'_>, netlist: &Path, process: Option<&str>) -> String {
    // The first line is how YAML editors are told of a schema; they read nothing else of it.
    let mut text = format!(
        "# yaml-language-server: $schema={0}\n# (an editor wants that file beside this one: drainwise schema --out {0})\n",
        schema::FILE
    );
    text.push_str("# A starter deck. Lines with `fill in` want your values; guesses are marked.\n");
    let _ = writeln!(text, "use: [builtin:{}]", process.unwrap_or("ldmos"));
    let name = netlist.file_name().map_or_else(String::new, |name| name.to_string_lossy().into_owned());
    let _ = writeln!(text, "netlists: [{}]", quoted(&name));
    let tops: Vec<&str> = world
        .design
        .tops
        .iter()
        .filter_map(|&top| world.design.template(top).cell)
        .map(|cell| world.design.cell_name(cell))
        .filter(|name| !name.is_empty())
        .collect();
    match tops.as_slice() {
        [] => {}
        [top] => {
            let _ = writeln!(text, "top: {}", quoted(top));
        }
        tops => {
            let _ = writeln!(text, "# top: one of {}", tops.join(" "));
        }
    }
    classes(world, &mut text);
    rails(world, &mut text);
    text
}

fn classes(world: World<'_>, text: &mut String) {
    let mut any = false;
    for oddity in &world.design.oddities {
        let Oddity::UnknownModel { model, .. } = oddity else { continue };
        if !std::mem::replace(&mut any, true) {
            text.push_str("\nclasses:\n");
        }
        let name = world.design.names.text(*model);
        let kind = world.design.types.iter().find(|kind| kind.model == Some(*model));
        let pins = pins_of(world, *model);
        let (kind, guess) = guess(kind.map_or(Element::Opaque, |kind| kind.element), name, pins);
        let names = if kind == "box" {
            format!("[{}]", (1..=pins).map(|pin| format!("p{pin}")).collect::<Vec<_>>().join(", "))
        } else {
            usual_pins(kind, pins)
        };
        let lower = name.to_ascii_lowercase();
        let high = matches!(kind, "nmos" | "pmos") && HIGH_VOLTAGE.iter().any(|word| lower.contains(word));
        let (more, missing) = match high {
            true => (", high_voltage: true, asymmetric: true", "size, ratings, threshold …"),
            false => ("", "high_voltage, size, ratings …"),
        };
        let name = quoted(name);
        let _ = writeln!(text, "  {name}: {{kind: {kind}, pins: {names}{more}}}   # {guess}; fill in {missing}");
    }
}

/// What models of drain-extended transistors are often called (common practice, no source).
const HIGH_VOLTAGE: &[&str] = &["ldn", "ldp", "ldmos", "hvn", "hvp", "dmos"];

/// What ground is often called, whatever stands before it (common practice, no source).
const GROUNDS: &[&str] = &["gnd", "vss"];

/// The number of terminals on the first card with this model.
fn pins_of(world: World<'_>, model: crate::names::Sym) -> usize {
    let of = |template: &crate::design::Template| {
        let device =
            template.devices().find(|device| world.design.device_type(template, *device).model == Some(model))?;
        Some(template.device_pins(device).len())
    };
    world.design.templates.iter().find_map(of).unwrap_or(0)
}

/// A kind for a model: from its `.model` card, else from its name and number of terminals.
fn guess(element: Element, name: &str, pins: usize) -> (&'static str, &'static str) {
    let known = match element {
        Element::Nmos => Some("nmos"),
        Element::Pmos => Some("pmos"),
        Element::Npn => Some("npn"),
        Element::Pnp => Some("pnp"),
        Element::Njf => Some("njf"),
        Element::Pjf => Some("pjf"),
        Element::Diode => Some("diode"),
        _ => None,
    };
    if let Some(kind) = known.filter(|kind| usual_count(kind).contains(&pins)) {
        return (kind, "by its card");
    }
    let name = name.to_ascii_lowercase();
    let has = |words: &[&str]| words.iter().any(|word| name.contains(word));
    let kind = match pins {
        4 | 5 if has(&["pmos", "pfet", "pch", "ldp", "hvp"]) => "pmos",
        4 | 5 if has(&["nmos", "nfet", "nch", "ldn", "hvn"]) => "nmos",
        2 | 3 if has(&["res", "rp", "rn", "poly"]) => "resistor",
        2 | 3 if has(&["cap", "mim", "mom"]) => "capacitor",
        2 if has(&["dio", "zen"]) => "diode",
        _ => "box",
    };
    (kind, "a guess by its name")
}

fn usual_count(kind: &str) -> std::ops::RangeInclusive<usize> {
    match kind {
        "nmos" | "pmos" => 4..=5,
        "diode" => 2..=2,
        _ => 3..=4,
    }
}

fn usual_pins(kind: &str, pins: usize) -> String {
    let names: &[&str] = match kind {
        "nmos" | "pmos" => &["d", "g", "s", "b", "iso"],
        "npn" | "pnp" => &["c", "b", "e", "sub"],
        "njf" | "pjf" => &["d", "g", "s", "b"],
        "diode" => &["a", "k"],
        _ => &["a", "b", "sub"],
    };
    format!("[{}]", names.iter().take(pins.max(2)).copied().collect::<Vec<_>>().join(", "))
}

/// Ports and globals that carry bodies, sources or resistors: to be filled in.
fn rails(world: World<'_>, text: &mut String) {
    let tops: Vec<ReachIx> = world.reach.indices().filter(|&at| world.reach.get(at).parents.is_empty()).collect();
    let mut lines: Vec<(usize, String)> = Vec::new();
    for at in tops {
        let context = world.context(at);
        let template = world.design.template(context.variant);
        let pins = PinTable::new(template);
        // A flat netlist may name its pins in comments only.
        let interface = world.design.tree.interface.iter().filter(|_| template.cell == Some(CellIx(0)));
        let named = interface.filter_map(|pin| template.nets.iter().position(|&net| net == pin.name));
        let named = named.map(|net| NetIx(net as u32));
        for net in template.boundary().chain(named).map(|net| context.root(net)) {
            let name = world.design.net_name(template, net);
            if (0..world.reach.modes.len()).any(|mode| world.reach.is_rail(at, mode, net)) {
                // A source holds it: it needs no declaration.
                continue;
            }
            let lower = name.to_ascii_lowercase();
            let line = match (GROUNDS.iter().any(|word| lower.ends_with(word)), world.reach.carries(at, net)) {
                (true, _) => format!("  {}: 0V   # a guess by its name", quoted(name)),
                (_, true) => format!("  # {}: 0V..5V   # fill in", quoted(name)),
                (_, false) => format!("  # {}: 0V..5V   # fill in (an input or output)", quoted(name)),
            };
            if name != "0" && !lines.iter().any(|(_, other)| *other == line) {
                lines.push((if world.reach.carries(at, net) { pins.count(net) + 1_000_000 } else { 0 }, line));
            }
        }
    }
    lines.sort_by_key(|line| std::cmp::Reverse(line.0));
    text.push_str("\nrails:\n");
    for (_, line) in lines {
        text.push_str(&line);
        text.push('\n');
    }
}

/// A name as YAML takes it without taking it for something else.
fn quoted(name: &str) -> String {
    let plain = name.bytes().all(|byte| byte.is_ascii_alphanumeric() || matches!(byte, b'_' | b'.' | b'/'))
        && name.bytes().next().is_some_and(|byte| byte.is_ascii_alphabetic());
    if plain { name.to_owned() } else { format!("'{}'", name.replace('\'', "''")) }
}
