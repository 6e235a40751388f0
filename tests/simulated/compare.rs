//! Holds simulated voltages against the reach that the program states, and keeps the figures.

use crate::builder::Builder;
use crate::rails::Vector;
use crate::spice::Outcome;
use serde_json::Value;
use std::collections::HashMap;

/// How far a simulated value may lie outside of a reach: V.
pub(crate) const TOLERANCE: f64 = 0.05;

/// Nets whose simulated width is below this say nothing about tightness: V.
pub(crate) const WIDE: f64 = 0.1;

/// `[lo, hi]` in one frame; an end may be unknown.
type Range = (Option<f64>, Option<f64>);

/// What `drainwise trace --format json` says: by net and mode, the range in each frame.
pub(crate) type Reaches = HashMap<(String, Option<String>), Vec<(String, Range)>>;

/// Reads the program's output. `Err` says what is wrong with it.
pub(crate) fn reaches(json: &str) -> Result<Reaches, String> {
    let doc: Value = serde_json::from_str(json).map_err(|e| format!("no JSON: {e}"))?;
    let nets = doc.get("nets").and_then(Value::as_array).ok_or("no list `nets`")?;
    let mut out = Reaches::new();
    for net in nets {
        let path = net.get("path").and_then(Value::as_str).ok_or("a net without `path`")?.to_ascii_lowercase();
        let mode = net.get("mode").and_then(Value::as_str).map(str::to_string);
        let mut frames = Vec::new();
        for (frame, range) in net.get("reach").and_then(Value::as_object).into_iter().flatten() {
            let end = |i: usize| range.get(i).and_then(Value::as_f64);
            if !range.is_null() && range.as_array().is_none_or(|r| r.len() != 2) {
                return Err(format!("the reach of {path} in frame {frame} is {range}, no pair"));
            }
            frames.push((frame.to_ascii_lowercase(), (end(0), end(1))));
        }
        out.insert((path, mode), frames);
    }
    Ok(out)
}

/// A simulated value outside of its reach.
pub(crate) struct Escape {
    pub(crate) seed: u64,
    pub(crate) net: String,
    pub(crate) text: String,
}

#[derive(Default)]
pub(crate) struct Figures {
    pub(crate) circuits: usize,
    pub(crate) devices: usize,
    pub(crate) nodes: usize,
    pub(crate) vectors: usize,
    pub(crate) failed: usize,
    pub(crate) outside: usize,
    pub(crate) floating: usize,
    /// Values of driven nets, one a net and vector.
    pub(crate) driven: usize,
    /// Driven values of which the program knows neither end against ground.
    pub(crate) unknown: usize,
    /// Values of driven nets held against a reach with at least one known end, each frame counted.
    pub(crate) compared: usize,
    pub(crate) in_ground: usize,
    pub(crate) escapes: Vec<Escape>,
    /// Driven nets with a simulated width above 0.1 V: their pattern, reach width over simulated width.
    pub(crate) widths: Vec<(&'static str, f64)>,
    /// The same for "anything between the lowest and the highest supply", which is what no analysis at all would say.
    pub(crate) naive: Vec<(&'static str, f64)>,
    /// Nets that currents cap, over all circuits.
    pub(crate) capped: usize,
    /// Of those that a simulation moves, in each mode: reach width over simulated width, with the caps and without.
    pub(crate) narrowed: Vec<(f64, f64)>,
    pub(crate) trouble: Vec<String>,
}

/// One circuit with its simulated vectors.
pub(crate) struct Case<'a> {
    pub(crate) seed: u64,
    pub(crate) builder: &'a Builder,
    pub(crate) vectors: &'a [Vector],
    pub(crate) outcomes: &'a [Outcome],
}

/// Counts the simulations of a circuit, without any reach.
pub(crate) fn count(case: &Case, figures: &mut Figures) {
    figures.circuits += 1;
    figures.devices += case.builder.devices;
    figures.nodes += case.builder.nets.len();
    for outcome in case.outcomes {
        figures.vectors += 1;
        match outcome {
            Outcome::Failed => figures.failed += 1,
            Outcome::Outside => figures.outside += 1,
            Outcome::Nets(nets) => {
                let driven = nets.iter().flatten().count();
                figures.driven += driven;
                figures.floating += nets.len() - driven;
            }
        }
    }
}

/// Holds every driven value against the reaches; gives the number of escapes of this circuit.
pub(crate) fn compare(case: &Case, reaches: &Reaches, figures: &mut Figures) -> usize {
    let before = figures.escapes.len();
    for (vector, outcome) in case.vectors.iter().zip(case.outcomes) {
        let Outcome::Nets(nets) = outcome else { continue };
        for (i, value) in nets.iter().enumerate() {
            if let Some(v) = *value {
                compare_value(case, reaches, (i, vector, v), figures);
            }
        }
    }
    figures.escapes.len() - before
}

fn compare_value(case: &Case, reaches: &Reaches, (i, vector, v): (usize, &Vector, f64), figures: &mut Figures) {
    let net = &case.builder.nets[i];
    let mode = vector.mode.map(|m| case.builder.world.modes[m].name.clone());
    let Some(frames) = reaches.get(&(net.path.clone(), mode.clone())) else {
        figures.trouble.push(format!("circuit {}: net {} in mode {mode:?} is not in the output", case.seed, net.path));
        return;
    };
    let known = |r: &Range| r.0.is_some() || r.1.is_some();
    if !frames.iter().any(|(f, r)| f == "0" && known(r)) {
        figures.unknown += 1;
    }
    for (frame, (lo, hi)) in frames.iter().filter(|(_, r)| known(r)) {
        let rail = case.builder.world.rails.iter().position(|r| r.name == *frame);
        let base = match (frame.as_str(), rail) {
            ("0", _) => 0.0,
            (_, Some(rail)) => vector.volts[rail],
            _ => {
                figures.trouble.push(format!("circuit {}: frame {frame} is no rail", case.seed));
                continue;
            }
        };
        figures.compared += 1;
        figures.in_ground += usize::from(frame == "0");
        let against = v - base;
        if lo.is_some_and(|lo| against < lo - TOLERANCE) || hi.is_some_and(|hi| against > hi + TOLERANCE) {
            let rails: Vec<String> =
                case.builder.world.rails.iter().zip(&vector.volts).map(|(r, v)| format!("{}={v}", r.name)).collect();
            let text = format!(
                "circuit {} net {} ({}) mode {} frame {frame}: simulated {against:.4} V, reach [{}, {}] V, at {}",
                case.seed,
                net.path,
                net.kind,
                mode.as_deref().unwrap_or("-"),
                show(*lo),
                show(*hi),
                rails.join(" ")
            );
            figures.escapes.push(Escape { seed: case.seed, net: net.path.clone(), text });
        }
    }
}

fn show(end: Option<f64>) -> String {
    end.map_or("unknown".to_string(), |v| format!("{v:.4}"))
}

/// Width of the reach over the width that the vectors showed, for each driven net and mode, against ground.
pub(crate) fn widths(case: &Case, reaches: Option<&Reaches>, figures: &mut Figures) {
    let modes: Vec<Option<usize>> = match case.builder.world.modes.len() {
        0 => vec![None],
        n => (0..n).map(Some).collect(),
    };
    for (i, net) in case.builder.nets.iter().enumerate() {
        for &mode in &modes {
            let Some((lo, hi)) = seen(case, i, mode) else { continue };
            if hi - lo <= WIDE {
                continue;
            }
            figures.naive.push((net.kind, naive(case, i, mode) / (hi - lo)));
            let name = mode.map(|m| case.builder.world.modes[m].name.clone());
            let frames = reaches.and_then(|r| r.get(&(net.path.clone(), name)));
            let ground = frames.and_then(|f| f.iter().find(|(frame, _)| frame == "0"));
            if let Some((_, (Some(low), Some(high)))) = ground {
                figures.widths.push((net.kind, (high - low) / (hi - lo)));
            }
        }
    }
}

fn in_mode<'a>(case: &'a Case, mode: Option<usize>) -> impl Iterator<Item = (&'a Vector, &'a Outcome)> {
    case.vectors.iter().zip(case.outcomes).filter(move |(v, _)| v.mode == mode)
}

pub(crate) fn seen(case: &Case, net: usize, mode: Option<usize>) -> Option<(f64, f64)> {
    let values = in_mode(case, mode).filter_map(|(_, outcome)| match outcome {
        Outcome::Nets(nets) => nets[net],
        _ => None,
    });
    values.fold(None, |seen, v| Some(seen.map_or((v, v), |(lo, hi): (f64, f64)| (lo.min(v), hi.max(v)))))
}

/// From the lowest to the highest rail of the net's domain over the vectors.
fn naive(case: &Case, net: usize, mode: Option<usize>) -> f64 {
    let leak = case.builder.world.domains[case.builder.nets[net].domain].leak;
    let (mut lo, mut hi) = (f64::INFINITY, f64::NEG_INFINITY);
    for (v, _) in in_mode(case, mode) {
        lo = lo.min(v.volts[leak.0]);
        hi = hi.max(v.volts[leak.1]);
    }
    hi - lo
}

pub(crate) fn median(values: &mut [f64]) -> f64 {
    values.sort_by(f64::total_cmp);
    values.get(values.len() / 2).copied().unwrap_or(f64::NAN)
}
