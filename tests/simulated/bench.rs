//! Turns a circuit into the three texts of the check: the netlist and the deck that the program under test reads, and the
//! test bench that ngspice runs.
//!
//! **The models** are level 1 (Shichman and Hodges) with gamma = 0: a threshold that moved with the body's voltage could leave
//! the range that the class declares. VTO is drawn inside that range, two variants a class and circuit. Lambda is not zero, so
//! no device is an ideal current source. Junctions have is = 1e-15 A: at the currents of these devices (below 1 A) they drop
//! less than 0.9 V. There is no channel below threshold in level 1, so "off" is off.
//!
//! **What is driven.** Every vector is simulated twice: once each internal net leaks through 1 TΩ to 1 V below the lowest rail of its
//! domain, once to 1 V above the highest. A net that moves by more than 20 mV between the two is held by nothing but the leak: it floats,
//! and is skipped. (40 V over 1 TΩ is 40 pA; a net that a gigaohm still drives does not move so far.) The values compared
//! are the means of the two runs. A net of 1 fF keeps steps finite where crossed pairs flip; it follows the leak in a millisecond.
//!
//! **The run** is a transient: supplies, inputs and sources rise together from 0 in 10 ms and hold for 10 ms; the last point counts.

use crate::builder::{Builder, Card};
use crate::rails::Vector;
use crate::rng::Rng;
use std::fmt::Write;

/// The classes that the models below stand for.
const CLASSES: &str = "\
classes:
  n5:
    kind: nmos
    models: [n5, n5_x]
    pins: [d, g, s, b]
    size: {width: w, length: l, copies: m}
    threshold: 0.6V..0.9V
    ratings: {vds: -5.5V..5.5V, vgs: -5.5V..5.5V}
  p5:
    kind: pmos
    models: [p5, p5_x]
    pins: [d, g, s, b]
    size: {width: w, length: l, copies: m}
    threshold: 0.6V..1.0V
    ratings: {vds: -5.5V..5.5V, vgs: -5.5V..5.5V}
  ldn60:
    kind: nmos
    models: [ldn60, ldn60_x]
    pins: [d, g, s, b]
    high_voltage: true
    asymmetric: true
    size: {width: w, length: l, copies: m}
    threshold: 0.7V..1.1V
    ratings: {vds: -1.2V..60V, vgs: -5.5V..5.5V}
    body: {tie: s}
  ldp60:
    kind: pmos
    models: [ldp60, ldp60_x]
    pins: [d, g, s, b]
    high_voltage: true
    asymmetric: true
    size: {width: w, length: l, copies: m}
    threshold: 0.7V..1.2V
    ratings: {vsd: -1.2V..60V, vsg: -5.5V..5.5V}
    body: {tie: s}
  dj: {kind: diode, models: [dj], pins: [a, k]}
  zg5: {kind: diode, models: [zg5], pins: [a, k], clamp: -0.9V..5.6V}
  qn: {kind: npn, models: [qn], pins: [c, b, e]}
  rpoly: {kind: resistor, models: [rpoly], pins: [a, b]}
";

/// The zeners' range as the deck has it: `V(k,a)`.
pub(crate) const CLAMP: (f64, f64) = (-0.9, 5.6);

const CELLS: &str = "\
.subckt inv a y vp vn
mp y a vp vp p5 w=4u l=1u
mn y a vn vn n5 w=2u l=1u
.ends inv
.subckt buf a y vp vn
x1 a ab vp vn inv
x2 ab y vp vn inv
.ends buf
.subckt nand a b y vp vn
mpa y a vp vp p5 w=4u l=1u
mpb y b vp vp p5 w=4u l=1u
mna y a mid vn n5 w=4u l=1u
mnb mid b vn vn n5 w=4u l=1u
.ends nand
";

/// The name of the cell under test.
pub(crate) const TOP: &str = "dut";

pub(crate) fn netlist(b: &Builder, seed: u64) -> String {
    let mut s = format!("* random circuit {seed}\n{CELLS}");
    cell(b, false, &mut s);
    s
}

pub(crate) fn deck(b: &Builder) -> String {
    format!("top: {TOP}\n{CLASSES}{}", b.world.yaml())
}

fn cell(b: &Builder, ramps: bool, s: &mut String) {
    let ports: Vec<&str> = b.world.rails.iter().map(|r| r.name.as_str()).collect();
    let _ = writeln!(s, ".subckt {TOP} {}", ports.join(" "));
    for card in &b.cards {
        let _ = match card {
            Card::Plain(text) => writeln!(s, "{text}"),
            Card::Source { name, p, n, value } if ramps => writeln!(s, "{name} {p} {n} pwl(0 0 10m {value:.4e})"),
            Card::Source { name, p, n, value } => writeln!(s, "{name} {p} {n} {value:.4e}"),
        };
    }
    let _ = writeln!(s, ".ends {TOP}");
}

/// Which way the nets leak.
pub(crate) const WAYS: [&str; 2] = ["l", "h"];

/// The name of an internal net in the bench.
pub(crate) fn net_name(vector: usize, way: &str, path: &str) -> String {
    format!("x{vector}{way}.{path}")
}

/// A bench for the vectors with these numbers; its result goes to `raw`.
pub(crate) fn bench(b: &Builder, seed: u64, vectors: &[Vector], which: &[usize], raw: &str) -> String {
    let mut s = format!("* bench of random circuit {seed}\n{CELLS}");
    models(&mut Rng::new(seed ^ 0xACE5), &mut s);
    cell(b, true, &mut s);
    for &v in which {
        vector(b, v, &vectors[v], &mut s);
    }
    s.push_str(".options reltol=1e-5 vntol=1e-7 abstol=1e-14 gmin=1e-15 itl1=500 itl4=200 rshunt=1e18\n");
    let _ = write!(s, ".tran 0.5m 20m 19m 0.5m\n.control\nset filetype=ascii\nrun\nwrite {raw}\nquit\n.endc\n.end\n");
    s
}

fn vector(b: &Builder, v: usize, vector: &Vector, s: &mut String) {
    let rails = &b.world.rails;
    let nodes: Vec<String> = rails.iter().map(|r| format!("{}_{v}", r.name)).collect();
    for (node, volts) in nodes.iter().zip(&vector.volts) {
        let _ = writeln!(s, "v{node} {node} 0 pwl(0 0 10m {volts})");
    }
    for way in WAYS {
        for (i, domain) in b.world.domains.iter().enumerate() {
            let volts = if way == "l" { vector.volts[domain.leak.0] - 1.0 } else { vector.volts[domain.leak.1] + 1.0 };
            let _ = writeln!(s, "vl{v}{way}{i} l{v}{way}{i} 0 pwl(0 0 10m {volts})");
        }
        let _ = writeln!(s, "x{v}{way} {} {TOP}", nodes.join(" "));
        for (i, net) in b.nets.iter().enumerate() {
            let name = net_name(v, way, &net.path);
            let _ = writeln!(s, "rl{v}{way}{i} {name} l{v}{way}{} 1e12", net.domain);
            let _ = writeln!(s, "cl{v}{way}{i} {name} 0 1f");
        }
    }
}

fn models(rng: &mut Rng, s: &mut String) {
    for (class, kind, sign, vt, kp) in [
        ("n5", "nmos", "", (0.61, 0.89), "40u"),
        ("p5", "pmos", "-", (0.61, 0.99), "16u"),
        ("ldn60", "nmos", "", (0.71, 1.09), "20u"),
        ("ldp60", "pmos", "-", (0.71, 1.19), "8u"),
    ] {
        for variant in ["", "_x"] {
            let (vto, lambda) = (rng.real(vt.0, vt.1), rng.pick(&[0.005, 0.01, 0.02]));
            let _ = writeln!(
                s,
                ".model {class}{variant} {kind}(level=1 vto={sign}{vto:.3} kp={kp} lambda={lambda} gamma=0 is=1e-15)"
            );
        }
    }
    let bv = rng.real(4.8, 5.3);
    let _ = writeln!(s, ".model dj d(is=1e-15)\n.model zg5 d(is=1e-15 bv={bv:.2} ibv=1e-4)");
    s.push_str(".model qn npn(is=1e-16 bf=100 br=2)\n.model rpoly r\n");
}
