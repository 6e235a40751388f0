//! What the check prints, and the figures it holds whatever the program under test says. Its own alarm is tested here as
//! well, without a simulator: a reach made too narrow must be found.

use crate::compare::{self, Case, Figures, Reaches};
use crate::spice::Outcome;
use std::collections::BTreeMap;

pub(crate) fn total(parts: impl Iterator<Item = Figures>) -> Figures {
    let mut sum = Figures::default();
    for p in parts {
        sum.circuits += p.circuits;
        sum.devices += p.devices;
        sum.nodes += p.nodes;
        sum.vectors += p.vectors;
        sum.failed += p.failed;
        sum.outside += p.outside;
        sum.floating += p.floating;
        sum.driven += p.driven;
        sum.unknown += p.unknown;
        sum.compared += p.compared;
        sum.in_ground += p.in_ground;
        sum.escapes.extend(p.escapes);
        sum.widths.extend(p.widths);
        sum.naive.extend(p.naive);
        sum.capped += p.capped;
        sum.narrowed.extend(p.narrowed);
        sum.trouble.extend(p.trouble);
    }
    sum
}

/// Prints everything and gives the median of reach width over simulated width.
pub(crate) fn print(f: &Figures) -> f64 {
    println!("circuits {}, devices {}, nets {}, vectors {}", f.circuits, f.devices, f.nodes, f.vectors);
    println!("vectors discarded: {} did not converge, {} left compliance or clamps", f.failed, f.outside);
    println!("net values: {} driven, {} floating (skipped)", f.driven, f.floating);
    println!("compared: {} ({} against ground); driven but unknown: {}", f.compared, f.in_ground, f.unknown);
    println!("escapes: {}", f.escapes.len());
    let mut nets = BTreeMap::new();
    for e in &f.escapes {
        nets.entry((e.seed, &e.net)).or_insert((e, 0)).1 += 1;
    }
    for (e, count) in nets.values().take(60) {
        println!("  {} ({count} times)", e.text);
    }
    if nets.len() > 60 {
        println!("  and {} more nets: escapes.txt in target/simulated", nets.len() - 60);
    }
    for line in f.trouble.iter().take(20) {
        println!("  {line}");
    }
    let of = |list: &[(&str, f64)]| compare::median(&mut list.iter().map(|w| w.1).collect::<Vec<_>>());
    println!("width over simulated width, median: {:.2} of {} nets", of(&f.widths), f.widths.len());
    println!("  (from supply to supply it would be {:.2} of {} nets)", of(&f.naive), f.naive.len());
    let half = |of: fn(&(f64, f64)) -> f64| compare::median(&mut f.narrowed.iter().map(of).collect::<Vec<_>>());
    println!("nets that currents cap: {}", f.capped);
    println!(
        "  their width over simulated width, median of {}: {:.2} with the caps, {:.2} without",
        f.narrowed.len(),
        half(|w| w.0),
        half(|w| w.1)
    );
    by_pattern(f);
    of(&f.widths)
}

fn by_pattern(f: &Figures) {
    let mut table: BTreeMap<&str, (Vec<f64>, Vec<f64>)> = BTreeMap::new();
    for (kind, w) in &f.naive {
        table.entry(kind).or_default().1.push(*w);
    }
    for (kind, w) in &f.widths {
        table.entry(kind).or_default().0.push(*w);
    }
    println!("  {:<20}{:>8}{:>10}{:>18}", "pattern", "nets", "median", "supply to supply");
    for (kind, (reach, naive)) in &mut table {
        let (median, whole) = (compare::median(reach), compare::median(naive));
        println!("  {kind:<20}{:>8}{median:>10.2}{whole:>18.2}", naive.len());
    }
}

/// At most one vector in twenty may be discarded.
pub(crate) fn simulations_hold(f: &Figures) {
    let discarded = f.failed + f.outside;
    assert!(f.vectors > 0 && discarded * 20 <= f.vectors, "{discarded} of {} vectors were discarded", f.vectors);
}

/// Every net of one circuit: simulated values, and the reach against ground.
pub(crate) fn tell(case: &Case, reaches: Option<&Reaches>) {
    for (k, (vector, outcome)) in case.vectors.iter().zip(case.outcomes).enumerate() {
        let mode = vector.mode.map(|m| case.builder.world.modes[m].name.clone());
        let rails: Vec<String> =
            case.builder.world.rails.iter().zip(&vector.volts).map(|(r, v)| format!("{}={v}", r.name)).collect();
        println!("vector {k} mode {mode:?}: {}", rails.join(" "));
        let nets = match outcome {
            Outcome::Nets(nets) => nets,
            Outcome::Failed => {
                println!("  did not converge");
                continue;
            }
            Outcome::Outside => {
                println!("  left compliance or clamps");
                continue;
            }
        };
        for (net, v) in case.builder.nets.iter().zip(nets) {
            let v = v.map_or("floats".to_string(), |v| format!("{v:.4} V"));
            let reach = reaches.and_then(|r| r.get(&(net.path.clone(), mode.clone())));
            println!("  {:<10} {:<20} {v:<12} {reach:?}", net.path, net.kind);
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::compare::{self, Case, Figures};
    use crate::spice::Outcome;

    /// A circuit with every net at 1 V, held against the reach given for all of them.
    fn figures(lo: &str, hi: &str) -> Figures {
        let (builder, vectors) = crate::circuit(7, true);
        let outcomes: Vec<Outcome> =
            vectors.iter().map(|_| Outcome::Nets(vec![Some(1.0); builder.nets.len()])).collect();
        let case = Case { seed: 7, builder: &builder, vectors: &vectors, outcomes: &outcomes };
        let modes: Vec<String> = match builder.world.modes.len() {
            0 => vec!["null".to_string()],
            _ => builder.world.modes.iter().map(|m| format!("\"{}\"", m.name)).collect(),
        };
        let nets: Vec<String> = builder
            .nets
            .iter()
            .flat_map(|n| modes.iter().map(move |m| (n, m)))
            .map(|(n, m)| format!("{{\"path\":\"{}\",\"mode\":{m},\"reach\":{{\"0\":[{lo},{hi}]}}}}", n.path))
            .collect();
        let reaches = compare::reaches(&format!("{{\"nets\":[{}]}}", nets.join(","))).expect("well formed");
        let mut figures = Figures::default();
        compare::count(&case, &mut figures);
        compare::compare(&case, &reaches, &mut figures);
        figures
    }

    #[test]
    fn a_reach_that_is_too_narrow_is_an_escape() {
        let narrow = figures("0", "0.9");
        assert_eq!(narrow.escapes.len(), narrow.driven);
        assert!(narrow.driven > 0 && figures("1.06", "null").escapes.len() == narrow.driven);
        assert!(figures("0.98", "0.98").escapes.is_empty());
    }

    #[test]
    fn what_is_unknown_is_counted_and_not_compared() {
        let f = figures("null", "null");
        assert_eq!((f.compared, f.unknown), (0, f.driven));
    }

    #[test]
    fn a_seed_names_the_same_circuit_for_ever() {
        let (b, _) = crate::circuit(3, true);
        assert_eq!(crate::bench::netlist(&b, 3), crate::bench::netlist(&crate::circuit(3, true).0, 3));
    }

    #[test]
    fn every_pattern_appears_and_circuits_have_5_to_60_devices() {
        let mut kinds = std::collections::BTreeSet::new();
        for seed in 1..=320 {
            let (b, _) = crate::circuit(seed, true);
            assert!((5..=60).contains(&b.devices), "circuit {seed}: {} devices", b.devices);
            kinds.extend(b.nets.iter().map(|n| n.kind));
        }
        assert_eq!(kinds.len(), 41, "{kinds:?}");
    }

    #[test]
    fn output_that_is_no_answer_is_refused() {
        assert!(compare::reaches("{}").is_err());
        assert!(compare::reaches("{\"nets\":[{\"path\":\"n1\",\"mode\":null,\"reach\":{\"0\":3}}]}").is_err());
    }
}
