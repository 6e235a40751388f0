//! What `drainwise survey` shows: what is in a netlist, by the classes of its deck; rails found and rails that seem missing.

use crate::declared::Class;
use crate::design::{DeviceIx, NetIx, Oddity};
use crate::facts::{DeviceView, ROLES, World};
use crate::graph::{Mark, PinTable, all_rails};
use crate::load::Files;
use crate::pipeline::{self, Job, Outcome, Progress};
use crate::quantity::{Dim, show};
use crate::reach::ReachIx;
use crate::report::Summary;
use crate::roles::UNCLASSIFIED;
use serde::Serialize;
use std::collections::BTreeMap;
use std::io::{self, Write};
use std::rc::Rc;

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
    /// Transistors, by path.
    pub devices: Vec<SurveyDevice>,
    /// For each role, how many transistors play it (over all instances).
    pub roles: Vec<(&'static str, u64)>,
    /// Instances of transistors that are not listed, beyond [`MOST_DEVICES`] statements.
    pub not_listed: u64,
}

/// One transistor in one kind of surroundings.
#[derive(Clone, Debug)]
pub struct SurveyDevice {
    /// Path of the first instance.
    pub path: String,
    /// Class.
    pub class: String,
    /// Whether that class is for high voltage.
    pub high_voltage: bool,
    /// Instances in the same surroundings.
    pub instances: u64,
    /// Its roles, each with the paths of the devices that show it.
    pub roles: Vec<(&'static str, Vec<String>)>,
    /// The current through its channel, amperes, and whether that is exact (else the most that it can be).
    pub current: Option<(f64, bool)>,
    /// That current for each metre of width.
    pub density: Option<f64>,
}

/// At most this many transistors are listed.
const MOST_DEVICES: usize = 100_000;

/// At most this many devices are named as evidence of one role.
const MOST_EVIDENCE: usize = 8;

/// At most this many nets are listed as undetermined.
const MOST_NETS: usize = 200;

/// Runs the analyses and looks around.
pub fn survey(files: &dyn Files, job: &Job, progress: &dyn Progress) -> (Outcome, Option<Survey>) {
    let job = &Job { all_voltages: true, ..job.clone() };
    let loaded = match pipeline::read(files, job, progress) {
        Ok(loaded) => loaded,
        Err(outcome) => return (*outcome, None),
    };
    let (sources, (diagnostics, found)) = pipeline::with_world(loaded, job, progress, |world, mut seen| {
        let diagnostics = std::mem::take(&mut seen.diagnostics);
        let summary = pipeline::summarise(world, &seen);
        let mut found = Survey {
            summary,
            unmatched: unmatched(world),
            rails: rails(world),
            missing: missing(world),
            undetermined: undetermined(world),
            ..Survey::default()
        };
        look_at_devices(world, &mut found);
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

/// One device of a context, in each kind of surroundings.
pub fn of_device(world: World<'_>, at: ReachIx, device: DeviceIx, class: &Class) -> Vec<SurveyDevice> {
    let mut found = Vec::new();
    if class.kind.is_mos() {
        in_surroundings(DeviceView::new(world, at, device, class), class, &mut |seen| found.push(seen));
    }
    found
}

/// Looks at a transistor in each kind of surroundings that matters to what it does.
fn in_surroundings(mut view: DeviceView<'_>, class: &Class, each: &mut dyn FnMut(SurveyDevice)) {
    loop {
        let seen = look_at(&view, class);
        let must_look_above = view.must_look_above();
        if !must_look_above {
            each(seen);
        }
        if !view.next_surroundings() {
            return;
        }
    }
}

fn look_at_devices(world: World<'_>, found: &mut Survey) {
    let walks = Rc::default();
    let mut counts: BTreeMap<&'static str, u64> = BTreeMap::new();
    for at in world.reach.indices() {
        let template = world.design.template(world.context(at).variant);
        for device in template.devices() {
            let Some(class) = world.design.class(template, device).filter(|class| class.kind.is_mos()) else {
                continue;
            };
            let view = DeviceView::new(world, at, device, class).sharing(&walks);
            in_surroundings(view, class, &mut |seen| {
                let roles = seen.roles.iter().map(|(role, _)| *role);
                for role in roles.chain(seen.roles.is_empty().then_some(UNCLASSIFIED)) {
                    let count = counts.entry(role).or_default();
                    *count = count.saturating_add(seen.instances);
                }
                if found.devices.len() < MOST_DEVICES {
                    found.devices.push(seen);
                } else {
                    found.not_listed = found.not_listed.saturating_add(seen.instances);
                }
            });
        }
    }
    let order = |role: &str| ROLES.iter().position(|known| *known == role);
    found.roles = counts.into_iter().collect();
    found.roles.sort_by_key(|(role, _)| order(role));
}

fn look_at(view: &DeviceView<'_>, class: &Class) -> SurveyDevice {
    let played = view.roles();
    let roles = played.iter().map(|played| {
        let with = played.with.iter().take(MOST_EVIDENCE).map(|&unit| view.path_of(unit)).collect();
        (played.role.word(), with)
    });
    let roles = roles.collect();
    let current = view.current().map(|current| (current.amps, current.exact));
    SurveyDevice {
        roles,
        current,
        density: view.density(),
        path: view.path(),
        class: class.name.clone(),
        high_voltage: class.high_voltage,
        instances: view.instances(),
    }
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
    section(out, "High-voltage devices", found.devices.iter().filter(|device| device.high_voltage).map(in_words))?;
    section(out, "Roles of all transistors", found.roles.iter().map(|(role, count)| format!("{role}  {count}")))
}

/// A device in one line: path, class, instances, roles with their evidence, current.
fn in_words(device: &SurveyDevice) -> String {
    let mut line = format!("{}  {}", device.path, device.class);
    if device.instances != 1 {
        line += &format!(", {} instances", device.instances);
    }
    let roles: Vec<String> = device
        .roles
        .iter()
        .map(|(role, with)| match with.as_slice() {
            [] => (*role).to_owned(),
            with => format!("{role} (with {})", with.join(", ")),
        })
        .collect();
    line += "  ";
    line += &if roles.is_empty() { UNCLASSIFIED.to_owned() } else { roles.join("; ") };
    if let Some((amps, exact)) = device.current {
        let density = device.density.map_or(String::new(), |density| format!(", {}", show(density, Dim::DENSITY)));
        line += &format!("  {}{}{density}", if exact { "" } else { "at most " }, show(amps, Dim::AMPERE));
    }
    line
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
    devices_not_listed: u64,
    roles: BTreeMap<&'s str, u64>,
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
    roles: Vec<RoleShape<'s>>,
    current: Option<f64>,
    exact: Option<bool>,
    density: Option<f64>,
}

#[derive(Serialize)]
struct RoleShape<'s> {
    role: &'s str,
    with: &'s [String],
}

/// Writes the survey as one JSON object.
pub fn write_json(found: &Survey, out: &mut dyn Write) -> io::Result<()> {
    let shape = Shape {
        classes: found.summary.classes.iter().map(|(name, count)| (name.as_str(), *count)).collect(),
        devices: found
            .devices
            .iter()
            .map(|device| DeviceShape {
                path: &device.path,
                class: &device.class,
                instances: device.instances,
                roles: device.roles.iter().map(|(role, with)| RoleShape { role, with }).collect(),
                current: device.current.map(|(amps, _)| amps),
                exact: device.current.map(|(_, exact)| exact),
                density: device.density,
            })
            .collect(),
        devices_not_listed: found.not_listed,
        roles: found.roles.iter().copied().collect(),
        unmatched: found.unmatched.iter().map(|(name, count)| (name.as_str(), *count)).collect(),
        rails: found.rails.iter().map(|(name, nets)| (name.as_str(), nets.as_slice())).collect(),
        missing: found.missing.iter().map(|(name, count)| (name.as_str(), *count)).collect(),
        undetermined: found.undetermined.iter().map(|(name, why)| (name.as_str(), *why)).collect(),
    };
    serde_json::to_writer_pretty(&mut *out, &shape).map_err(io::Error::from)?;
    writeln!(out)
}
