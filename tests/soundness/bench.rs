//! The simulation of one circuit: one ngspice run holds, for each vector, two copies of the circuit on the same slowly rising
//! supplies; in one copy a resistor of 10¹² Ω draws every inner net to the lowest rail, in the other to the highest.
//!
//! A small capacitance on every node (`cshunt`) lets latches flip in finite time; it is long charged where the run ends.
//!
//! A net whose end values differ between the copies by more than [`FLOATING`] is driven by nothing but those resistors (or by
//! less current than a picoampere or so, as a diode's far side without a load): it floats, and nothing is claimed about it.
//! Level-1 models conduct nothing below their threshold (H. Shichman, D. A. Hodges, "Modeling and simulation of
//! insulated-gate field-effect transistor switching circuits", IEEE J. Solid-State Circuits, 1968; from memory), so the line is sharp.

use super::circuit::{Circuit, End, Rail};
use super::prng::Prng;
use std::collections::HashMap;
use std::fmt::Write as _;
use std::path::Path;
use std::process::Command;

/// Volts by which the two copies may differ on a driven net.
const FLOATING: f64 = 0.02;

/// One set of supply and input voltages.
pub(crate) struct Vector {
    /// The mode whose rails it lies in.
    pub(crate) mode: Option<&'static str>,
    /// The rails' voltages.
    pub(crate) volts: Vec<(&'static str, f64)>,
}

impl Vector {
    /// The voltage of a rail.
    pub(crate) fn volt(&self, name: &str) -> Option<f64> {
        self.volts.iter().find(|(rail, _)| *rail == name).map(|(_, volt)| *volt)
    }
}

/// Draws vectors: in every mode all rails at their low end, all at their high end, and random ones, mostly at ends.
pub(crate) fn vectors(circuit: &Circuit, prng: &mut Prng) -> Vec<Vector> {
    let modes: Vec<Option<usize>> =
        if circuit.modes.is_empty() { vec![None] } else { (0..circuit.modes.len()).map(Some).collect() };
    let each = if modes.len() == 1 { 8 } else { 4 };
    let mut vectors = Vec::new();
    for mode in modes {
        let mode = mode.map(|m| &circuit.modes[m]);
        for number in 0..each {
            let mut vector = Vector { mode: mode.map(|m| m.name), volts: Vec::new() };
            for rail in &circuit.rails {
                let rail = mode.and_then(|m| m.rails.iter().find(|r| r.name == rail.name)).unwrap_or(rail);
                let along = match number {
                    0 => 0.0,
                    1 => 1.0,
                    _ => along(prng),
                };
                let volt = place(rail, along, &vector);
                vector.volts.push((rail.name, volt));
            }
            vectors.push(vector);
        }
    }
    vectors
}

/// Four times of five an end of the range.
fn along(prng: &mut Prng) -> f64 {
    match prng.below(5) {
        0 | 1 => 0.0,
        2 | 3 => 1.0,
        _ => prng.unit(),
    }
}

/// The voltage at this part of a rail's range. The rails that its ends name come before it.
fn place(rail: &Rail, along: f64, vector: &Vector) -> f64 {
    let [lo, hi] = rail.ends.map(|end: End| end.base.map_or(0.0, |b| vector.volt(b).unwrap_or(0.0)) + end.plus);
    lo + (hi - lo) * along
}

/// The models, each with its threshold inside its class's range; the fast corner has the lower one.
fn models(prng: &mut Prng) -> String {
    let mut text = String::new();
    for (name, lo, hi) in [("n5", 0.6, 0.9), ("p5", 0.6, 1.0), ("n60", 0.7, 1.1), ("p60", 0.7, 1.2)] {
        let n = name.starts_with('n');
        for (corner, vto) in [("f", prng.between(lo, lo + 0.05)), ("s", prng.between(lo, hi))] {
            let _ = writeln!(
                text,
                ".model {name}_{corner} {} level=1 vto={:.4} kp={} lambda=0.02 gamma=0 is=1e-15 tox=1e-6",
                if n { "nmos" } else { "pmos" },
                if n { vto } else { -vto },
                if n { "100u" } else { "40u" },
            );
        }
    }
    text.push_str(".model dj d is=1e-15\n.model zg5 d is=1e-15 bv=5.0 ibv=1u\n.model rpoly r\n");
    text
}

/// The testbench: the circuit, its models, and two copies for each vector.
pub(crate) fn testbench(circuit: &Circuit, vectors: &[Vector], prng: &mut Prng) -> String {
    let mut bench = circuit.netlist();
    bench.push_str(&models(prng));
    for (number, vector) in vectors.iter().enumerate() {
        for (rail, volt) in &vector.volts {
            let _ = writeln!(bench, "V{number}_{rail} r{number}_{rail} 0 pwl(0 0 1 {volt:.6})");
        }
        let nodes: Vec<_> = vector.volts.iter().map(|(rail, _)| format!("r{number}_{rail}")).collect();
        let volts = || vector.volts.iter().map(|(_, volt)| *volt);
        let ends = [("l", volts().fold(f64::INFINITY, f64::min)), ("h", volts().fold(f64::NEG_INFINITY, f64::max))];
        for (copy, end) in ends {
            let _ = writeln!(bench, "X{copy}{number} {} top", nodes.join(" "));
            let _ = writeln!(bench, "VB{copy}{number} b{copy}{number} 0 pwl(0 0 1 {end:.6})");
            for (index, net) in circuit.nets.iter().enumerate() {
                let path = net.path.to_lowercase();
                let _ = writeln!(bench, "RB{copy}{number}_{index} x{copy}{number}.{path} b{copy}{number} 1e12");
            }
        }
    }
    bench.push_str(".options gmin=1e-15 cshunt=3e-14 method=gear itl4=100\n.tran 20m 3 2.9 50m\n.end\n");
    bench
}

/// Runs ngspice on a testbench in a folder. `None`: it did not converge.
///
/// Returns, for each vector, the driven nets' voltages in the order of the circuit's nets (`None`: floating).
pub(crate) fn simulate(
    folder: &Path,
    bench: &str,
    circuit: &Circuit,
    vectors: &[Vector],
) -> Option<Vec<Vec<Option<f64>>>> {
    std::fs::write(folder.join("bench.sp"), bench).unwrap();
    let raw = folder.join("bench.raw");
    let _ = std::fs::remove_file(&raw);
    let output = Command::new("ngspice")
        .current_dir(folder)
        .env("SPICE_ASCIIRAWFILE", "1")
        .args(["-b", "-n", "-r", "bench.raw", "bench.sp"])
        .output()
        .expect("ngspice starts");
    let mut log = output.stdout;
    log.extend(&output.stderr);
    std::fs::write(folder.join("bench.log"), &log).unwrap();
    if !output.status.success() {
        return None;
    }
    let ends = last_point(&std::fs::read_to_string(&raw).ok()?)?;
    let value =
        |copy: &str, number: usize, path: &str| ends.get(&format!("v(x{copy}{number}.{})", path.to_lowercase()));
    let mut values = Vec::new();
    for number in 0..vectors.len() {
        let mut row = Vec::new();
        for net in &circuit.nets {
            let (low, high) = (value("l", number, &net.path)?, value("h", number, &net.path)?);
            row.push(((low - high).abs() <= FLOATING).then_some((low + high) / 2.0));
        }
        values.push(row);
    }
    Some(values)
}

/// The last point of an ASCII raw file (its header names the variables in order; as ngspice 39 writes it), if it is the end of the run.
fn last_point(raw: &str) -> Option<HashMap<String, f64>> {
    let (head, values) = raw.split_once("Values:")?;
    let (_, names) = head.split_once("Variables:\n")?;
    let names: Vec<_> = names.lines().filter_map(|line| line.split_whitespace().nth(1)).collect();
    let mut last: Vec<f64> = values.split_whitespace().rev().take(names.len()).filter_map(|v| v.parse().ok()).collect();
    last.reverse();
    let complete = last.len() == names.len() && last.first().is_some_and(|time| (time - 3.0).abs() < 1e-6);
    complete.then(|| names.into_iter().map(str::to_lowercase).zip(last).collect())
}
