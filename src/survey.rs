//! What `drainwise survey` shows: what is in a netlist, by the classes of its deck; rails found and rails that seem missing.

use crate::design::{NetIx, Oddity};
use crate::facts::{DeviceView, World};
use crate::graph::{Mark, PinTable, all_rails};
use crate::load::Files;
use crate::pipeline::{self, Job, Outcome, Progress};
use crate::reach::ReachIx;
use crate::report::Summary;
use serde::Serialize;
use std::collections::BTreeMap;
use std::io::{self, Write};

/// What was found.
#[derive(Clone, Debug, Default)]
pub struct Survey {
    /// Counts.
    pub summary: Summary,
    /// Models that no class names, with the number of statements and instances.
    pub unmatched: Vec<(String, u64)>,
    /// Declared rails: name, and nets of the top that it names.
    pub rails: Vec<(String, Vec<String>)>,
    /// Ports and globals of the top that look like supplies and are not declared: name, and how many pins stand on it.
    pub missing: Vec<(String, u64)>,
    /// Nets of the top whose voltage is not known, and why.
    pub undetermined: Vec<(String, &'static str)>,
    /// High-voltage devices, by path.
    pub devices: Vec<SurveyDevice>,
}

/// One high-voltage device.
#[derive(Clone, Debug)]
pub struct SurveyDevice {
    /// Path of the first instance.
    pub path: String,
    /// Class.
    pub class: String,
    /// Instances in the same surroundings.
    pub instances: u64,
}

/// At most this many nets are listed as undetermined.
const MOST_NETS: usize = 200;

/// Runs the analyses and looks around.
pub fn survey(files: &dyn Files, job: &Job, progress: &dyn Progress) -> (Outcome, Option<Survey>) {
    let loaded = match pipeline::read(files, job, progress) {
        Ok(loaded) => loaded,
        Err(outcome) => return (*outcome, None),
    };
    let (sources, (diagnostics, found)) = pipeline::with_world(loaded, job, progress, |world, mut seen| {
        let diagnostics = std::mem::take(&mut seen.diagnostics);
        let summary = pipeline::summarise(world, &seen);
        let found = Survey {
            summary,
            unmatched: unmatched(world),
            rails: rails(world),
            missing: missing(world),
            undetermined: undetermined(world),
            devices: devices(world),
        };
        (diagnostics, found)
    });
    (pipeline::checked(sources, diagnostics), Some(found))
}

fn unmatched(world: World<'_>) -> Vec<(String, u64)> {
    let models = world.design.oddities.iter().filter_map(|oddity| match oddity {
        Oddity::UnknownModel { model, statements, .. } => {
            Some((world.design.names.text(*model).to_owned(), *statements))
        }
        Oddity::PinCount { .. } => None,
    });
    models.collect()
}

fn tops(world: World<'_>) -> impl Iterator<Item = ReachIx> {
    world.reach.indices().filter(move |&at| world.reach.get(at).parents.is_empty())
}

fn rails(world: World<'_>) -> Vec<(String, Vec<String>)> {
    let mut found: BTreeMap<String, Vec<String>> =
        all_rails(world.deck).map(|(_, rail)| (rail.net.text().to_owned(), Vec::new())).collect();
    for at in tops(world) {
        let template = world.design.template(world.context(at).variant);
        for &(net, set) in world.context(at).marked() {
            for mark in world.contexts.marks.of(set) {
                if let Mark::Rail(slot) = mark {
                    let name = world.design.net_name(template, net).to_owned();
                    let nets = found.entry(crate::graph::rail(world.deck, *slot).net.text().to_owned()).or_default();
                    if !nets.contains(&name) {
                        nets.push(name);
                    }
                }
            }
        }
    }
    found.into_iter().collect()
}

/// Ports and globals of the top that carry bodies, sources, resistors or diodes, and that no rail declares.
fn missing(world: World<'_>) -> Vec<(String, u64)> {
    let mut found = Vec::new();
    for at in tops(world) {
        let context = world.context(at);
        let template = world.design.template(context.variant);
        let pins = PinTable::new(template);
        for net in template.boundary().map(|net| context.root(net)) {
            if world.reach.carries(at, net)
                && !(0..world.reach.modes.len()).any(|mode| world.reach.is_rail(at, mode, net))
            {
                found.push((world.design.net_name(template, net).to_owned(), pins.count(net) as u64));
            }
        }
    }
    found.sort_by(|a, b| b.1.cmp(&a.1).then_with(|| a.0.cmp(&b.0)));
    found.dedup();
    found
}

fn undetermined(world: World<'_>) -> Vec<(String, &'static str)> {
    let mut found = Vec::new();
    for at in tops(world) {
        let context = world.context(at);
        let template = world.design.template(context.variant);
        for net in (0..template.nets.len() as u32).map(NetIx).filter(|&net| context.root(net) == net) {
            let why = (0..world.reach.modes.len()).find_map(|mode| world.reach.unknown(at, mode, net));
            if let Some(why) = why {
                found.push((world.design.net_name(template, net).to_owned(), why.words()));
                if found.len() == MOST_NETS {
                    return found;
                }
            }
        }
    }
    found
}

fn devices(world: World<'_>) -> Vec<SurveyDevice> {
    let mut found = Vec::new();
    for at in world.reach.indices() {
        let template = world.design.template(world.context(at).variant);
        for device in template.devices() {
            let Some(class) = world.design.class(template, device).filter(|class| class.high_voltage) else { continue };
            let view = DeviceView::new(world, at, device, class);
            found.push(SurveyDevice {
                path: view.path(),
                class: class.name.clone(),
                instances: world.reach.get(at).count,
            });
        }
    }
    found
}

/// Writes the survey for people.
pub fn write_text(found: &Survey, out: &mut dyn Write) -> io::Result<()> {
    for line in found.summary.lines().iter().skip(1) {
        writeln!(out, "{line}")?;
    }
    section(
        out,
        "Models that no class names (statements)",
        found.unmatched.iter().map(|(name, count)| format!("{name}  {count}")),
    )?;
    section(
        out,
        "Rails declared",
        found.rails.iter().map(|(name, nets)| match nets.as_slice() {
            [] => format!("{name}  names no net of the top"),
            [net] if net.eq_ignore_ascii_case(name) => name.clone(),
            nets => format!("{name}  {}", nets.join(" ")),
        }),
    )?;
    section(
        out,
        "Ports and globals that carry bodies, sources or resistors, and that no rail declares (pins on them)",
        found.missing.iter().map(|(name, count)| format!("{name}  {count}")),
    )?;
    section(
        out,
        "Nets of the top whose voltage is not known",
        found.undetermined.iter().map(|(name, why)| format!("{name}  {why}")),
    )?;
    section(
        out,
        "High-voltage devices",
        found.devices.iter().map(|device| match device.instances {
            1 => format!("{}  {}", device.path, device.class),
            count => format!("{}  {}, {count} instances", device.path, device.class),
        }),
    )
}

fn section(out: &mut dyn Write, title: &str, lines: impl Iterator<Item = String>) -> io::Result<()> {
    let lines: Vec<String> = lines.collect();
    if lines.is_empty() {
        return Ok(());
    }
    writeln!(out, "\n{title}:")?;
    for line in lines {
        writeln!(out, "  {line}")?;
    }
    Ok(())
}

#[derive(Serialize)]
struct Shape<'s> {
    classes: BTreeMap<&'s str, u64>,
    devices: Vec<DeviceShape<'s>>,
    unmatched: BTreeMap<&'s str, u64>,
    rails: BTreeMap<&'s str, &'s [String]>,
    missing: BTreeMap<&'s str, u64>,
    undetermined: BTreeMap<&'s str, &'s str>,
}

#[derive(Serialize)]
struct DeviceShape<'s> {
    path: &'s str,
    class: &'s str,
    instances: u64,
}

/// Writes the survey as one JSON object.
pub fn write_json(found: &Survey, out: &mut dyn Write) -> io::Result<()> {
    let shape = Shape {
        classes: found.summary.classes.iter().map(|(name, count)| (name.as_str(), *count)).collect(),
        devices: found
            .devices
            .iter()
            .map(|device| DeviceShape { path: &device.path, class: &device.class, instances: device.instances })
            .collect(),
        unmatched: found.unmatched.iter().map(|(name, count)| (name.as_str(), *count)).collect(),
        rails: found.rails.iter().map(|(name, nets)| (name.as_str(), nets.as_slice())).collect(),
        missing: found.missing.iter().map(|(name, count)| (name.as_str(), *count)).collect(),
        undetermined: found.undetermined.iter().map(|(name, why)| (name.as_str(), *why)).collect(),
    };
    serde_json::to_writer_pretty(&mut *out, &shape).map_err(io::Error::from)?;
    writeln!(out)
}
