//! The table of patterns, the devices thrown in at random, and the loop that grows a circuit from both.

use crate::builder::{Builder, Pol};
use crate::rails::{self, DomainKind};
use crate::rng::Rng;
use crate::{analog, limited, logic, power};

/// Which domains a pattern may stand in.
#[derive(Clone, Copy, PartialEq)]
enum Place {
    Any,
    /// 5 V devices: the low and the floating domains.
    Small,
    Low,
    High,
    Floating,
    /// The supplies never come so near each other that a current source loses its compliance.
    Solid,
}

struct Pattern {
    name: &'static str,
    weight: usize,
    place: Place,
    build: fn(&mut Builder, usize),
}

const fn pattern(name: &'static str, weight: usize, place: Place, build: fn(&mut Builder, usize)) -> Pattern {
    Pattern { name, weight, place, build }
}

const PATTERNS: &[Pattern] = &[
    pattern("inverter", 10, Place::Any, logic::inverter),
    pattern("buffer", 5, Place::Small, logic::buffer),
    pattern("gate", 8, Place::Small, logic::gate),
    pattern("transmission", 5, Place::Any, logic::transmission),
    pattern("multiplexer", 4, Place::Small, logic::multiplexer),
    pattern("pass", 5, Place::Any, logic::pass),
    pattern("latch", 3, Place::Small, logic::latch),
    pattern("keeper", 3, Place::Small, logic::keeper),
    pattern("pulled", 6, Place::Any, logic::pulled),
    pattern("mirror", 6, Place::Any, analog::mirror),
    pattern("cascode-mirror", 3, Place::Any, analog::cascode_mirror),
    pattern("follower", 6, Place::Any, analog::follower),
    pattern("divider", 5, Place::Any, analog::divider),
    pattern("stack", 3, Place::Any, analog::stack),
    pattern("pair", 4, Place::Any, analog::pair),
    pattern("gain", 5, Place::Any, analog::gain),
    pattern("drop", 2, Place::Solid, analog::drop),
    pattern("npn-follower", 2, Place::Low, analog::npn_follower),
    pattern("npn-switch", 2, Place::Low, analog::npn_switch),
    pattern("offset", 2, Place::Any, analog::offset),
    pattern("low-side", 5, Place::High, power::low_side),
    pattern("shield", 5, Place::High, power::shield),
    pattern("shift-crossed", 3, Place::High, power::shift_crossed),
    pattern("high-side", 4, Place::High, power::high_side),
    pattern("regulator", 3, Place::High, power::regulator),
    pattern("diode-or", 3, Place::High, power::diode_or),
    pattern("back-to-back", 2, Place::High, power::back_to_back),
    pattern("back-to-back-held", 2, Place::High, power::back_to_back_held),
    pattern("start-up", 4, Place::High, power::start_up),
    pattern("shift-bounded", 5, Place::Floating, power::shift_bounded),
    pattern("shift-clamped", 5, Place::Floating, power::shift_clamped),
    pattern("shift-mirror", 4, Place::Floating, power::shift_mirror),
    pattern("bridge", 4, Place::Floating, power::bridge),
    pattern("degenerated", 5, Place::Any, limited::degenerated),
    pattern("degenerated-floating", 6, Place::Floating, limited::degenerated),
    pattern("opposed", 4, Place::Any, limited::opposed),
    pattern("sink", 6, Place::Any, limited::sink),
    pattern("fed", 4, Place::Solid, limited::fed),
    pattern("lopsided", 3, Place::Any, limited::lopsided),
    pattern("stray-resistor", 4, Place::Any, stray_resistor),
    pattern("stray-diode", 3, Place::Any, stray_diode),
    pattern("stray-mos", 5, Place::Any, stray_mos),
];

/// Patterns that keep a state of their own: what they hold depends on what came before, not on the rails of this vector alone.
const MEMORY: [&str; 2] = ["latch", "keeper"];

/// The circuit of one seed: 5 to 60 devices, with patterns that keep a state or without them.
pub(crate) fn grow(seed: u64, memory: bool) -> Builder {
    let mut rng = Rng::new(seed);
    let world = rails::world(&mut rng);
    let target = rng.int(5, 46);
    let mut b = Builder::new(rng, world);
    while b.devices < target {
        let total: usize = PATTERNS.iter().map(|p| p.weight).sum();
        let mut ticket = b.rng.int(0, total - 1);
        let chosen = PATTERNS.iter().find(|p| {
            let here = ticket < p.weight;
            ticket = ticket.wrapping_sub(p.weight);
            here
        });
        let Some(p) = chosen else { continue };
        let places = places(&b, p.place);
        if places.is_empty() || (MEMORY.contains(&p.name) && !memory) {
            continue;
        }
        let domain = *b.rng.pick(&places);
        b.kind = p.name;
        (p.build)(&mut b, domain);
    }
    b
}

fn places(b: &Builder, place: Place) -> Vec<usize> {
    b.domains(|d| match place {
        Place::Any => true,
        Place::Small => d.kind != DomainKind::High,
        Place::Low => d.kind == DomainKind::Low,
        Place::High => d.kind == DomainKind::High,
        Place::Floating => d.kind == DomainKind::Floating,
        Place::Solid => d.solid,
    })
}

/// Any internal net that may carry a current more, whatever its domain.
fn any_net(b: &mut Builder) -> Option<String> {
    let free: Vec<usize> =
        (0..b.nets.len()).filter(|&i| !b.nets[i].gates_only && !b.nets[i].path.contains('.')).collect();
    if free.is_empty() {
        return None;
    }
    let i = *b.rng.pick(&free);
    Some(b.nets[i].path.clone())
}

fn any_gate(b: &mut Builder) -> String {
    let free: Vec<String> = b
        .nets
        .iter()
        .filter(|n| !n.path.contains('.'))
        .map(|n| n.path.clone())
        .chain(b.world.rails.iter().map(|r| r.name.clone()))
        .collect();
    b.rng.pick(&free).clone()
}

fn any_end(b: &mut Builder) -> String {
    if b.rng.chance(0.5)
        && let Some(net) = any_net(b)
    {
        return net;
    }
    let i = b.rng.int(0, b.world.rails.len() - 1);
    b.world.rails[i].name.clone()
}

fn stray_resistor(b: &mut Builder, _: usize) {
    let Some(net) = any_net(b) else { return };
    let to = any_end(b);
    if to != net {
        b.res(&net, &to, 1e5, 5e6);
    }
}

/// Always behind a resistor: two supplies joined by junctions alone would carry any current.
fn stray_diode(b: &mut Builder, d: usize) {
    let Some(net) = any_net(b) else { return };
    let far = any_end(b);
    let near = b.node(d);
    b.res(&near, &net, 1e4, 1e6);
    if b.rng.chance(0.5) {
        b.diode(&near, &far);
    } else {
        b.diode(&far, &near);
    }
}

fn stray_mos(b: &mut Builder, d: usize) {
    let Some(net) = any_net(b) else { return };
    let (far, gate) = (any_end(b), any_gate(b));
    let near = b.node(d);
    b.res(&near, &net, 1e4, 1e6);
    let pol = if b.rng.chance(0.6) { Pol::N } else { Pol::P };
    let class = match (pol, b.rng.chance(0.5)) {
        (Pol::N, false) => "n5",
        (Pol::N, true) => "ldn60",
        (Pol::P, false) => "p5",
        (Pol::P, true) => "ldp60",
    };
    let (dr, s) = if b.rng.chance(0.5) { (&near, &far) } else { (&far, &near) };
    b.mos_with(class, [dr, &gate, s, s]);
}
