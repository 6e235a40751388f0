//! What is shown at the cursor in a netlist: a net's reach and why, a device's class, roles and current, a cell's ports.

use super::look::{Look, device, net, places, template};
use super::spot::{Spot, What, spot};
use crate::design::NetIx;
use crate::facts::ratings::range_text;
use crate::facts::{DeviceView, World};
use crate::names::Sym;
use crate::netlist::tree::CellIx;
use crate::quantity::{Dim, show};
use crate::reach::{Interval, ReachIx};
use crate::source::{FileId, SourceMap, Span};
use crate::survey::{self, SurveyDevice};
use crate::tracing::{self, Chain, NetReach};
use std::fmt::Write;

/// At most this many surroundings of a cell are told apart.
const MOST_PLACES: usize = 3;
/// Of so many surroundings at most.
const MOST_SEEN: usize = 200;
/// At most this many steps of a chain are shown.
const MOST_STEPS: usize = 12;

/// The words, in Markdown, and what they are about.
pub(super) fn hover(look: &Look<'_>, file: FileId, offset: u32) -> Option<(String, Span)> {
    let world = look.world?;
    let spot = spot(world.design, file, offset)?;
    let words = match spot.what {
        What::Net(name) => of_net(world, look.sources, spot.cell, name)?,
        What::Card(card) => of_card(world, spot, (spot.span.file, card))?,
        What::Model(name) => of_model(world, name)?,
        What::Cell(cell) => of_cell(world, cell),
        What::Parameter(_) => return None,
    };
    Some((words, spot.span))
}

/// A name as Markdown shows it as it is.
pub(super) fn code(name: &str) -> String {
    format!("`{}`", name.replace(['`', '\n', '\r'], "'"))
}

/// Words in which names stand between backticks, or bare: nothing else in them means anything to Markdown.
fn plain(words: &str) -> String {
    let mut is_code = false;
    let mut text = String::with_capacity(words.len());
    for letter in words.chars() {
        is_code ^= letter == '`';
        if !is_code && matches!(letter, '\\' | '*' | '_' | '[' | ']' | '<' | '>' | '#' | '|' | '!' | '&') {
            text.push('\\');
        }
        text.push(if letter.is_control() { ' ' } else { letter });
    }
    text
}

fn in_cell(world: World<'_>, cell: CellIx) -> String {
    match world.design.cell_name(cell) {
        "" => String::new(),
        name => format!(" in cell {}", code(name)),
    }
}

fn of_net(world: World<'_>, sources: &SourceMap, cell: CellIx, name: Sym) -> Option<String> {
    let mut text = format!("**net {}**{}\n", code(world.design.names.text(name)), in_cell(world, cell));
    let mut seen: Vec<(Vec<NetReach>, ReachIx, NetIx)> = Vec::new();
    let (mut looked_at, mut others) = (0, 0);
    for at in places(world, cell) {
        let Some(net) = net(world, at, name) else { continue };
        looked_at += 1;
        let path = world.reach.path(at);
        let reach = tracing::of_net(world, at, net, &path);
        let is_known = seen.iter().any(|(known, ..)| ranges(known) == ranges(&reach));
        match (is_known, seen.len() < MOST_PLACES) {
            (true, _) => {}
            (false, true) => seen.push((reach, at, net)),
            (false, false) => others += 1,
        }
        if looked_at == MOST_SEEN {
            break;
        }
    }
    if seen.is_empty() {
        text += "\nThe judged top does not use it, so no voltage is known.\n";
    }
    for (reach, at, net) in &seen {
        if seen.len() + others > 1 {
            let path = world.reach.path(*at);
            let _ = writeln!(text, "\nin {}:", if path.is_empty() { "the top".to_owned() } else { code(&path) });
        }
        table(reach, &mut text);
        why(world, sources, reach, *at, *net, &mut text);
    }
    if others > 0 {
        let _ = writeln!(text, "\n… and {others} more surroundings in which it differs");
    }
    Some(text)
}

fn ranges(reach: &[NetReach]) -> Vec<&[(String, Interval)]> {
    reach.iter().map(|mode| mode.reach.as_slice()).collect()
}

/// A line a mode, a column a frame.
fn table(reach: &[NetReach], text: &mut String) {
    let Some(first) = reach.first() else { return };
    let frames: Vec<String> = first
        .reach
        .iter()
        .skip(1)
        .map(|(frame, _)| format!(" against {} |", code(frame).replace('|', "\\|")))
        .collect();
    let _ = write!(text, "\n| mode | against ground |{}\n|---|---|{}\n", frames.concat(), "---|".repeat(frames.len()));
    for mode in reach {
        let name = mode.mode.as_deref().map_or("(one)".to_owned(), code);
        let cells: Vec<String> = mode.reach.iter().map(|(_, range)| format!(" {} |", range_text(*range))).collect();
        let _ = writeln!(text, "| {name} |{}", cells.concat());
    }
    if let Some(unknown) = reach.iter().find_map(|mode| mode.unknown) {
        let _ = writeln!(text, "\nNot known because: {unknown}");
    }
}

/// The chains to the highest and lowest voltage of any mode.
fn why(world: World<'_>, sources: &SourceMap, reach: &[NetReach], at: ReachIx, net: NetIx, text: &mut String) {
    let ground = |mode: usize| reach[mode].reach.first().map_or(Interval::ANY, |(_, range)| *range);
    let modes = || 0..reach.len();
    let highest = modes().max_by(|&a, &b| ground(a).hi.total_cmp(&ground(b).hi).then(b.cmp(&a)));
    let lowest = modes().min_by(|&a, &b| ground(a).lo.total_cmp(&ground(b).lo).then(a.cmp(&b)));
    for (mode, end) in [(highest, "highest"), (lowest, "lowest")] {
        let Some(mode) = mode else { continue };
        let chains = tracing::chains(world, at, mode, net);
        if let Some(chain) = chains.iter().find(|chain| chain.end == end) {
            let mode = reach[mode].mode.as_deref().map_or(String::new(), |mode| format!(" in mode {}", code(mode)));
            of_chain(sources, chain, &mode, text);
        }
    }
}

fn of_chain(sources: &SourceMap, chain: &Chain, mode: &str, text: &mut String) {
    let _ = writeln!(text, "\nIts {} voltage{mode}:", chain.end);
    let left_out = chain.steps.len().saturating_sub(MOST_STEPS);
    for (index, step) in chain.steps.iter().enumerate() {
        if left_out > 0 && index == 1 {
            let _ = writeln!(text, "- … {left_out} steps …");
        }
        if (1..=left_out).contains(&index) {
            continue;
        }
        let volts = if step.volts.is_finite() { show(step.volts, Dim::VOLT) } else { "unknown".to_owned() };
        let place = step.span.map_or(String::new(), |span| {
            let file = sources.file(span.file);
            format!(" ({}:{})", file.path().rsplit('/').next().unwrap_or_default(), sources.start(span).line)
        });
        let _ = writeln!(text, "- {volts} on {}: {}{}", code(&step.net), plain(&step.words), plain(&place));
    }
}

fn of_card(world: World<'_>, spot: Spot, card: (FileId, u32)) -> Option<String> {
    let mut seen: Vec<String> = Vec::new();
    let (mut head, mut others, mut looked_at) = (None, 0, 0);
    for at in places(world, spot.cell) {
        let template = template(world, at);
        if let Some(call) = template.instances.iter().find(|call| (call.file, call.card) == card) {
            return Some(of_cell(world, call.cell));
        }
        let Some(device) = device(world, at, card) else { continue };
        let Some(class) = world.design.class(template, device) else {
            let model = world.design.device_type(template, device).model;
            return model.map(|model| format!("No class of the deck names {}.", code(world.design.names.text(model))));
        };
        head.get_or_insert_with(|| {
            let name = world.design.device_name(template, device);
            format!("**{}**{}, {}\n", code(name), in_cell(world, spot.cell), of_class(class))
        });
        let found = survey::of_device(world, at, device, class);
        let pairs = pairs(&DeviceView::new(world, at, device, class));
        if found.is_empty() && seen.is_empty() {
            seen.push(format!("\n{pairs}"));
        }
        for one in found {
            match seen.len() < MOST_PLACES {
                true => seen.push(format!("{}{pairs}", of_part(&one))),
                false => others += 1,
            }
        }
        looked_at += 1;
        if looked_at == MOST_SEEN {
            break;
        }
    }
    let Some(mut text) = head else { return Some("The judged top has no such device.".to_owned()) };
    text += &seen.join("\n---\n");
    if others > 0 {
        let _ = writeln!(text, "\n… and {others} more surroundings in which it differs");
    }
    Some(text)
}

fn of_class(class: &crate::declared::Class) -> String {
    let voltage = if class.high_voltage { ", high voltage" } else { "" };
    let matched = if class.matched_use { ", qualified for matched use" } else { "" };
    format!("class {} ({}{voltage}{matched})", code(&class.name), class.kind.word())
}

fn of_part(device: &SurveyDevice) -> String {
    let mut text = String::new();
    let more = if device.instances > 1 { format!(" and {} more", device.instances - 1) } else { String::new() };
    let _ = writeln!(text, "\nat {}{more}", code(&device.path));
    for (role, with) in &device.roles {
        let with: Vec<String> = with.iter().map(|path| code(path)).collect();
        let with = if with.is_empty() { String::new() } else { format!(", shown by {}", with.join(", ")) };
        let _ = writeln!(text, "- role: {role}{with}");
    }
    if device.roles.is_empty() {
        text += "- no role that the program knows\n";
    }
    match device.current {
        Some((amps, exact)) => {
            let most = if exact { "" } else { "at most " };
            let density = device.density.map_or(String::new(), |density| format!(", {}", show(density, Dim::DENSITY)));
            let _ = writeln!(text, "- current: {most}{}{density}", show(amps, Dim::AMPERE));
        }
        None => text += "- current: not known\n",
    }
    text
}

/// What each rated pair of terminals can have, over all modes.
fn pairs(view: &DeviceView<'_>) -> String {
    let mut text = String::new();
    for rating in &view.class.ratings {
        let modes = (0..view.world.reach.modes.len()).map(|mode| view.voltage(mode, rating.plus, rating.minus));
        let all = modes.reduce(|a, b| Interval { lo: a.lo.min(b.lo), hi: a.hi.max(b.hi) });
        let Some(all) = all else { continue };
        let rated = range_text(Interval { lo: rating.range.lo, hi: rating.range.hi });
        let _ = writeln!(text, "- {}: {} (rated {rated})", rating.name, range_text(all));
    }
    text
}

fn of_model(world: World<'_>, name: Sym) -> Option<String> {
    let name = world.design.names.text(name);
    let class = world.deck.classes.iter().find(|class| class.models.iter().any(|glob| glob.matches(name)));
    Some(match class {
        Some(class) => format!("**model {}**: {}", code(name), of_class(class)),
        None => format!("**model {}**: no class of the deck names it", code(name)),
    })
}

fn of_cell(world: World<'_>, cell: CellIx) -> String {
    let ports = &world.design.tree.cells[cell.0 as usize].ports;
    let ports: Vec<String> = ports.iter().map(|port| code(world.design.names.text(port.name))).collect();
    let count = places(world, cell).fold(0u64, |count, at| count.saturating_add(world.reach.get(at).count));
    let used = match count {
        0 => "not used by the judged top".to_owned(),
        1 => "1 instance".to_owned(),
        _ => format!("{count} instances"),
    };
    format!("**cell {}**: {used}\n\nports: {}", code(world.design.cell_name(cell)), ports.join(" "))
}
