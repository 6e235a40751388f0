//! What `drainwise trace` shows: the reach of nets in each frame and mode, and the chain of devices that gives it.

use crate::design::{DeviceIx, NetIx};
use crate::diag::Diagnostic;
use crate::facts::World;
use crate::facts::ratings::range_text;
use crate::graph::rail;
use crate::load::Files;
use crate::names::nearest;
use crate::pipeline::{self, Job, Outcome, Progress};
use crate::quantity::{Dim, show};
use crate::reach::trace::{Step, StepBy, trace as chain};
use crate::reach::{Interval, ReachIx, Side};
use crate::report::text::Look;
use crate::source::{SourceMap, Span};
use serde::Serialize;
use std::collections::BTreeMap;
use std::io::{self, Write};

/// The reach of one net in one mode.
#[derive(Clone, Debug)]
pub struct NetReach {
    /// Dotted path.
    pub path: String,
    /// The mode; none where the deck has none.
    pub mode: Option<String>,
    /// Range in each frame, ground (`0`) first.
    pub reach: Vec<(String, Interval)>,
    /// Why an end is unknown.
    pub unknown: Option<&'static str>,
    /// The chains to its highest and lowest voltage, where asked for.
    pub chains: Vec<Chain>,
}

/// How one end of a range comes about.
#[derive(Clone, Debug)]
pub struct Chain {
    /// `highest` or `lowest`.
    pub end: &'static str,
    /// Steps, from the rail.
    pub steps: Vec<ShownStep>,
}

/// A step as it is shown.
#[derive(Clone, Debug)]
pub struct ShownStep {
    /// Where it stands.
    pub span: Option<Span>,
    /// What happens there.
    pub words: String,
    /// The net it leads to.
    pub net: String,
    /// The voltage after it, volts.
    pub volts: f64,
}

/// More nets than this are not listed unless they are named.
const MOST_NETS: usize = 100_000;

/// Runs the analyses and traces the nets named; without names, all nets without their chains.
pub fn trace(
    files: &dyn Files,
    job: &Job,
    progress: &dyn Progress,
    nets: &[String],
) -> (Outcome, Option<Vec<NetReach>>) {
    let job = &Job { all_voltages: true, ..job.clone() };
    let loaded = match pipeline::read(files, job, progress) {
        Ok(loaded) => loaded,
        Err(outcome) => return (*outcome, None),
    };
    let (mut sources, (mut diagnostics, found, missing)) =
        pipeline::with_world(loaded, job, progress, |world, seen| {
            let (found, missing) = if nets.is_empty() { (all(world), Vec::new()) } else { named(world, nets) };
            (seen.diagnostics, found, missing)
        });
    if !missing.is_empty() {
        let file = sources.add("command line", nets.join(" "));
        diagnostics.extend(missing.into_iter().map(|(name, near)| not_found(&sources, file, &name, near)));
    }
    (pipeline::checked(sources, diagnostics), Some(found))
}

fn not_found(sources: &SourceMap, file: crate::source::FileId, name: &str, near: Option<String>) -> Diagnostic {
    let at = sources.text(file).find(name).unwrap_or(0) as u32;
    let help = near.map_or("nets inside an instance are named by path, as in `xdriver.gate`".to_owned(), |near| {
        format!("did you mean `{near}`?")
    });
    Diagnostic::error("arguments", Span::new(file, at, at + name.len() as u32), format!("there is no net `{name}`"))
        .with_help(help)
}

fn all(world: World<'_>) -> Vec<NetReach> {
    let mut found = Vec::new();
    let mut stack: Vec<(ReachIx, String)> = tops(world).into_iter().rev().map(|top| (top, String::new())).collect();
    while let Some((at, prefix)) = stack.pop() {
        let context = world.context(at);
        let template = world.design.template(context.variant);
        let first = if prefix.is_empty() { 0 } else { template.ports };
        for net in (first..template.nets.len() as u32).map(NetIx) {
            if found.len() >= MOST_NETS {
                return found;
            }
            if !prefix.is_empty() && template.implicit.contains(&net) {
                continue;
            }
            let path = format!("{prefix}{}", world.design.net_name(template, net));
            found.extend(of_net(world, at, net, &path));
        }
        let below: Vec<_> = template.instance_indices().zip(&world.reach.get(at).children).collect();
        for (instance, &child) in below.into_iter().rev() {
            stack.push((child, format!("{prefix}{}.", world.design.instance_name(template, instance))));
        }
    }
    found
}

fn tops(world: World<'_>) -> Vec<ReachIx> {
    world.reach.indices().filter(|&at| world.reach.get(at).parents.is_empty()).collect()
}

/// The reach of a net of a context in every mode, without chains.
pub fn of_net(world: World<'_>, at: ReachIx, net: NetIx, path: &str) -> Vec<NetReach> {
    (0..world.reach.modes.len()).map(|mode| one(world, at, mode, net, path)).collect()
}

fn one(world: World<'_>, at: ReachIx, mode: usize, net: NetIx, path: &str) -> NetReach {
    let frames = &world.reach.frames[world.reach.get(at).top as usize].all;
    NetReach {
        path: path.to_owned(),
        mode: world.reach.mode_name(mode).map(str::to_owned),
        reach: frames
            .iter()
            .enumerate()
            .map(|(frame, named)| (named.name.clone(), world.reach.of(at, mode, net, frame)))
            .collect(),
        unknown: world.reach.unknown(at, mode, net).map(|why| why.words()),
        chains: Vec::new(),
    }
}

/// The named nets with their chains, and the names that no net has.
fn named(world: World<'_>, nets: &[String]) -> (Vec<NetReach>, Vec<(String, Option<String>)>) {
    let mut found = Vec::new();
    let mut missing = Vec::new();
    for name in nets {
        match tops(world).into_iter().find_map(|top| find(world, top, name)) {
            Some((at, net)) => {
                for mode in 0..world.reach.modes.len() {
                    let mut reach = one(world, at, mode, net, name);
                    reach.chains = chains(world, at, mode, net);
                    found.push(reach);
                }
            }
            None => {
                let known: Vec<String> = all(world).into_iter().map(|net| net.path).take(20_000).collect();
                missing.push((name.clone(), nearest(name, known.iter().map(String::as_str)).map(str::to_owned)));
            }
        }
    }
    (found, missing)
}

/// The net of a path below a context. Names may hold dots themselves, so the longest name that fits goes first.
fn find(world: World<'_>, at: ReachIx, path: &str) -> Option<(ReachIx, NetIx)> {
    let template = world.design.template(world.context(at).variant);
    let net = template.nets.iter().position(|&net| world.design.names.text(net).eq_ignore_ascii_case(path));
    if let Some(net) = net {
        return Some((at, NetIx(net as u32)));
    }
    for (instance, &child) in template.instance_indices().zip(&world.reach.get(at).children) {
        let name = world.design.instance_name(template, instance);
        let rest = path
            .get(..name.len())
            .filter(|start| start.eq_ignore_ascii_case(name))
            .and_then(|_| path[name.len()..].strip_prefix('.'));
        if let Some(found) = rest.and_then(|rest| find(world, child, rest)) {
            return Some(found);
        }
    }
    None
}

/// How the highest and the lowest voltage of a net against ground come about in a mode.
pub fn chains(world: World<'_>, at: ReachIx, mode: usize, net: NetIx) -> Vec<Chain> {
    let make = |end, side| Chain {
        end,
        steps: chain(world.reach, at, mode, net, 0, side).into_iter().map(|step| shown(world, step)).collect(),
    };
    vec![make("highest", Side::Hi), make("lowest", Side::Lo)]
}

fn shown(world: World<'_>, step: Step) -> ShownStep {
    let variant = world.contexts.get(step.context).variant;
    let net = if step.cell_path.is_empty() { step.net.clone() } else { format!("{}.{}", step.cell_path, step.net) };
    let (span, words) = match step.by {
        StepBy::Rail(Some(slot)) => (Some(rail(world.deck, slot).place), "a declared rail".to_owned()),
        StepBy::Rail(None) => (None, "ground, or a rail by a source".to_owned()),
        StepBy::Unknown => (None, "nothing more is known".to_owned()),
        StepBy::Device(device, why) => {
            let card = world.design.device_card(variant, device);
            let place =
                card.fields.words.first().map_or(card.span(), |word| Span::new(card.file, word.start, card.fields.end));
            (Some(place), format!("{}: {why}", device_name(world, &step.cell_path, variant, device)))
        }
    };
    ShownStep { span, words, net, volts: step.volts }
}

fn device_name(world: World<'_>, cell_path: &str, variant: crate::design::VariantIx, device: DeviceIx) -> String {
    let name = world.design.device_name(world.design.template(variant), device);
    if cell_path.is_empty() { name.to_owned() } else { format!("{cell_path}.{name}") }
}

/// Writes reaches and chains for people: each step with the place of its line.
pub fn write_text(found: &[NetReach], sources: &SourceMap, _look: Look, out: &mut dyn Write) -> io::Result<()> {
    for net in found {
        let mode = net.mode.as_ref().map_or(String::new(), |mode| format!(" in mode {mode}"));
        let against: Vec<String> =
            net.reach.iter().skip(1).map(|(frame, range)| format!("{} against {frame}", range_text(*range))).collect();
        let against = if against.is_empty() { String::new() } else { format!(" ({})", against.join(", ")) };
        let ground = net.reach.first().map_or(Interval::ANY, |(_, range)| *range);
        let why = net.unknown.map_or(String::new(), |why| format!(": {why}"));
        writeln!(out, "{}{mode}: {}{against}{why}", net.path, range_text(ground))?;
        for chain in &net.chains {
            writeln!(out, "  its {} voltage:", chain.end)?;
            for step in &chain.steps {
                let place = step.span.map_or(String::new(), |span| {
                    let (file, start) = (sources.file(span.file), sources.start(span));
                    format!("\n      {}:{}: {}", file.path(), start.line, file.line(start.line).trim())
                });
                let volts = if step.volts.is_finite() { show(step.volts, Dim::VOLT) } else { "unknown".to_owned() };
                writeln!(out, "    {:>8}  {} ({}){place}", volts, step.net, step.words)?;
            }
        }
    }
    Ok(())
}

#[derive(Serialize)]
struct Shape<'n> {
    nets: Vec<NetShape<'n>>,
}

#[derive(Serialize)]
struct NetShape<'n> {
    path: &'n str,
    mode: Option<&'n str>,
    reach: BTreeMap<&'n str, [Option<f64>; 2]>,
}

/// A voltage without the dust of binary arithmetic: to the nanovolt, and no negative zero.
fn tidy(volts: f64) -> f64 {
    (volts * 1e9).round() / 1e9 + 0.0
}

/// Writes `{nets: [{path, mode, reach: {FRAME: [lo, hi]}}]}`, `null` for unknown ends.
pub fn write_json(found: &[NetReach], out: &mut dyn Write) -> io::Result<()> {
    let net = |net: &'_ NetReach| -> BTreeMap<String, [Option<f64>; 2]> {
        net.reach
            .iter()
            .map(|(frame, range)| (frame.clone(), [range.known_lo().map(tidy), range.known_hi().map(tidy)]))
            .collect()
    };
    let reaches: Vec<BTreeMap<String, [Option<f64>; 2]>> = found.iter().map(net).collect();
    let nets = found.iter().zip(&reaches).map(|(net, reach)| NetShape {
        path: &net.path,
        mode: net.mode.as_deref(),
        reach: reach.iter().map(|(frame, ends)| (frame.as_str(), *ends)).collect(),
    });
    serde_json::to_writer_pretty(&mut *out, &Shape { nets: nets.collect() }).map_err(io::Error::from)?;
    writeln!(out)
}
