//! Holds simulated voltages against reaches, and keeps the figures: escapes, and how wide reaches are beside what was seen.

use super::bench::Vector;
use super::circuit::{Circuit, Net};
use serde_json::Value;
use std::collections::{BTreeMap, HashMap};
use std::path::Path;
use std::process::Command;

/// Volts by which a simulated value may pass a reach: what models add to the ideal (a mirror's slope, a resistor of 10¹² Ω).
const TOLERANCE: f64 = 0.05;
/// Nets that a simulation moves by less than this say nothing about how tight a reach is.
const MOVES: f64 = 0.1;

/// Reaches by mode (`None`: no modes) and net, each by frame.
pub(crate) type Reaches = HashMap<(Option<String>, String), BTreeMap<String, [Option<f64>; 2]>>;

/// The figures of a run.
#[derive(Default)]
pub(crate) struct Figures {
    pub(crate) circuits: usize,
    pub(crate) discarded: usize,
    pub(crate) nets: usize,
    pub(crate) vectors: usize,
    /// Net values of vectors in ground's frame.
    pub(crate) values: usize,
    /// Net values in other frames.
    pub(crate) in_frames: usize,
    pub(crate) floating: usize,
    /// Driven nets of which the program gives no end, or only one.
    pub(crate) unknown: usize,
    pub(crate) escapes: Vec<String>,
    /// By kind of pattern: reach width over simulated width.
    pub(crate) ratios: BTreeMap<&'static str, Vec<f64>>,
}

impl Figures {
    /// Adds another run's figures.
    pub(crate) fn add(&mut self, other: Self) {
        self.circuits += other.circuits;
        self.discarded += other.discarded;
        self.nets += other.nets;
        self.vectors += other.vectors;
        self.values += other.values;
        self.in_frames += other.in_frames;
        self.floating += other.floating;
        self.unknown += other.unknown;
        self.escapes.extend(other.escapes);
        for (kind, ratios) in other.ratios {
            self.ratios.entry(kind).or_default().extend(ratios);
        }
    }

    /// The median of all nets' reach width over simulated width.
    pub(crate) fn median(&self) -> f64 {
        median(self.ratios.values().flatten().copied().collect())
    }

    /// Prints the figures.
    pub(crate) fn print(&self) {
        println!("circuits   {:6}   discarded as not converged {}", self.circuits, self.discarded);
        println!("nets       {:6}   vectors {}", self.nets, self.vectors);
        println!("compared   {:6}   values to ground, {} in other frames", self.values, self.in_frames);
        println!("left out   {:6}   values of floating nets", self.floating);
        println!("unknown    {:6}   values of driven nets with an unknown end", self.unknown);
        println!("escapes    {:6}", self.escapes.len());
        for escape in &self.escapes {
            println!("  {escape}");
        }
        println!("reach width over simulated width, median: {:.3}", self.median());
        for (kind, ratios) in &self.ratios {
            println!("  {kind:18} {:7.3}   of {:5} nets", median(ratios.clone()), ratios.len());
        }
    }
}

fn median(mut of: Vec<f64>) -> f64 {
    of.sort_by(f64::total_cmp);
    match of.len() {
        0 => f64::NAN,
        n if n % 2 == 1 => of[n / 2],
        n => f64::midpoint(of[n / 2 - 1], of[n / 2]),
    }
}

/// Asks the program for all reaches of the circuit in a folder.
pub(crate) fn reaches(folder: &Path) -> Reaches {
    let output = Command::new(env!("CARGO_BIN_EXE_drainwise"))
        .current_dir(folder)
        .args(["trace", "circuit.sp", "--deck", "drainwise.yaml", "--format", "json"])
        .output()
        .expect("the program starts");
    let text = String::from_utf8_lossy(&output.stdout);
    let told = String::from_utf8_lossy(&output.stderr);
    let answer: Value =
        serde_json::from_str(&text).unwrap_or_else(|e| panic!("{}: {e}\n{text}\n{told}", folder.display()));
    let mut reaches = Reaches::new();
    for net in answer["nets"].as_array().unwrap() {
        let frames = net["reach"].as_object().unwrap();
        let ends = |v: &Value| [v[0].as_f64(), v[1].as_f64()];
        reaches.insert(
            (net["mode"].as_str().map(String::from), net["path"].as_str().unwrap().to_string()),
            frames.iter().map(|(frame, v)| (frame.clone(), ends(v))).collect(),
        );
    }
    reaches
}

/// Compares all values of a circuit. `label` says which circuit it is.
pub(crate) fn compare(
    label: &str,
    circuit: &Circuit,
    vectors: &[Vector],
    values: &[Vec<Option<f64>>],
    reaches: &Reaches,
) -> Figures {
    let mut figures = Figures { circuits: 1, nets: circuit.nets.len(), vectors: vectors.len(), ..Figures::default() };
    for (index, net) in circuit.nets.iter().enumerate() {
        let mut seen: Option<[f64; 2]> = None;
        for (number, (vector, row)) in vectors.iter().zip(values).enumerate() {
            let Some(volt) = row[index] else {
                figures.floating += 1;
                continue;
            };
            let [lo, hi] = seen.unwrap_or([volt; 2]);
            seen = Some([lo.min(volt), hi.max(volt)]);
            let frames = &reaches[&(vector.mode.map(String::from), net.path.clone())];
            for (frame, ends) in frames {
                let base = if frame == "0" { 0.0 } else { base_of(circuit, vector, row, frame) };
                if !base.is_nan() {
                    let label = format!("{label}, vector {number}, mode {}", vector.mode.unwrap_or("none"));
                    figures.one(&label, net, frame, volt - base, *ends);
                }
            }
        }
        if let (Some([lo, hi]), Some(reach)) = (seen, width(reaches, net))
            && hi - lo > MOVES
        {
            figures.ratios.entry(net.kind).or_default().push(reach / (hi - lo));
        }
    }
    figures
}

/// The voltage of a frame's net: a rail's, or a driven net's.
fn base_of(circuit: &Circuit, vector: &Vector, row: &[Option<f64>], frame: &str) -> f64 {
    let inner = || circuit.nets.iter().position(|n| n.path == frame).and_then(|i| row[i]);
    vector.volt(frame).or_else(inner).unwrap_or(f64::NAN)
}

/// The width of a net's reach to ground, over all modes.
fn width(reaches: &Reaches, net: &Net) -> Option<f64> {
    let mut of = reaches.iter().filter(|((_, path), _)| *path == net.path).map(|(_, frames)| frames["0"]);
    let [mut lo, mut hi] = [of.clone().next()?[0]?, of.clone().next()?[1]?];
    of.try_for_each(|[l, h]| {
        (lo, hi) = (lo.min(l?), hi.max(h?));
        Some(())
    })?;
    Some(hi - lo)
}

impl Figures {
    fn one(&mut self, label: &str, net: &Net, frame: &str, volt: f64, [lo, hi]: [Option<f64>; 2]) {
        if frame != "0" {
            self.in_frames += 1;
        } else if lo.is_none() || hi.is_none() {
            self.unknown += 1;
        } else {
            self.values += 1;
        }
        if lo.is_some_and(|lo| volt < lo - TOLERANCE) || hi.is_some_and(|hi| volt > hi + TOLERANCE) {
            let end = |end: Option<f64>| end.map_or("unknown".to_string(), |v| format!("{v:.3}"));
            self.escapes.push(format!(
                "{label}, net {} ({}), frame {frame}: {volt:.3} V, reach {} .. {}",
                net.path,
                net.kind,
                end(lo),
                end(hi)
            ));
        }
    }
}
