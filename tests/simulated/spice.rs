//! Runs ngspice on a circuit's vectors and reads the last point back.

use crate::bench::{self, CLAMP, WAYS};
use crate::builder::{Builder, Card};
use crate::rails::Vector;
use std::collections::HashMap;
use std::path::Path;
use std::process::{Command, Stdio};

/// A net is driven when the way its leak goes moves it by no more than this.
const DRIVEN: f64 = 0.02;

/// What became of one vector.
pub(crate) enum Outcome {
    /// For each net of the builder its voltage, `None` where it floats.
    Nets(Vec<Option<f64>>),
    /// The simulator gave up.
    Failed,
    /// A current source left its compliance or a zener its clamp: outside of what the reach promises.
    Outside,
}

/// All vectors in one run; one by one where that run fails.
pub(crate) fn simulate(b: &Builder, seed: u64, vectors: &[Vector], folder: &Path) -> Vec<Outcome> {
    let all: Vec<usize> = (0..vectors.len()).collect();
    let together = run(b, seed, vectors, &all, folder);
    all.iter()
        .map(|&v| {
            let alone = if together.is_none() { run(b, seed, vectors, &[v], folder) } else { None };
            match together.as_ref().or(alone.as_ref()) {
                Some(values) => outcome(b, v, &vectors[v], values),
                None => Outcome::Failed,
            }
        })
        .collect()
}

fn run(b: &Builder, seed: u64, vectors: &[Vector], which: &[usize], folder: &Path) -> Option<HashMap<String, f64>> {
    let (cir, raw) = (folder.join(format!("bench{seed}.cir")), format!("bench{seed}.raw"));
    std::fs::write(&cir, bench::bench(b, seed, vectors, which, &raw)).expect("the folder of the check can be written");
    let _ = std::fs::remove_file(folder.join(&raw));
    Command::new("timeout")
        .args(["60", "ngspice", "-n", "-b"])
        .arg(&cir)
        .current_dir(folder)
        .stdin(Stdio::null())
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .status()
        .expect("ngspice and timeout are installed");
    let text = std::fs::read_to_string(folder.join(&raw)).ok()?;
    let _ = std::fs::remove_file(folder.join(&raw));
    let values = last_point(&text)?;
    (*values.get("time")? > 0.01999).then_some(values)
}

/// The last point of an ASCII raw file (Ngspice User's Manual, appendix on the raw file format).
fn last_point(raw: &str) -> Option<HashMap<String, f64>> {
    let (head, values) = raw.split_once("\nValues:\n")?;
    let names: Vec<&str> = head
        .split_once("\nVariables:\n")?
        .1
        .lines()
        .filter_map(|line| line.split_whitespace().nth(1))
        .map(|name| name.strip_prefix("v(").and_then(|n| n.strip_suffix(')')).unwrap_or(name))
        .collect();
    let numbers: Vec<&str> = values.split_whitespace().collect();
    let last = numbers.get(numbers.len().checked_sub(names.len())?..)?;
    names.iter().zip(last).map(|(n, v)| Some(((*n).to_string(), v.parse().ok()?))).collect()
}

fn outcome(b: &Builder, v: usize, vector: &Vector, values: &HashMap<String, f64>) -> Outcome {
    for way in WAYS {
        if !inside(b, v, way, vector, values) {
            return Outcome::Outside;
        }
    }
    let net = |path: &str| {
        let [low, high] = WAYS.map(|way| values.get(&bench::net_name(v, way, path)).copied().unwrap_or(f64::NAN));
        assert!(low.is_finite() && high.is_finite(), "the simulation says nothing of {path}");
        ((low - high).abs() <= DRIVEN).then_some((low + high) / 2.0)
    };
    Outcome::Nets(b.nets.iter().map(|n| net(&n.path)).collect())
}

/// Whether the circuit kept what it promises: compliance of its current sources, clamps of its zeners.
fn inside(b: &Builder, v: usize, way: &str, vector: &Vector, values: &HashMap<String, f64>) -> bool {
    let at = |net: &str| match b.world.rails.iter().position(|r| r.name == net) {
        Some(rail) => vector.volts[rail],
        None => values.get(&bench::net_name(v, way, net)).copied().unwrap_or(f64::NAN),
    };
    let sources = b.cards.iter().all(|card| match card {
        Card::Source { name, p, n, .. } if name.starts_with('i') => at(p) >= at(n),
        _ => true,
    });
    sources && b.zeners.iter().all(|(a, k)| (CLAMP.0..=CLAMP.1).contains(&(at(k) - at(a))))
}
