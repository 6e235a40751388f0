//! Is the reach sound? Random circuits are simulated with ngspice, and no net that something drives may stand outside the
//! reach that `drainwise trace` states for it, in any frame, in any mode. How wide the reaches are is measured too, so that
//! "everything is possible" does not pass for an answer.
//!
//! The guarantee under test: if every rail stays in its declared range, current sources stay within their compliance, and no
//! capacitor or inductor kicks a net, a quasi-static simulation never shows a driven net outside its reach. `bench.rs` says what
//! the models are and how "driven" is decided; `patterns.rs` lists what the circuits are made of.
//!
//! Circuits that keep a state of their own (latches) are a test apart: a least fixpoint builds every voltage up from the rails, and
//! so would miss a state that only holds itself.
//!
//! Environment: `DRAINWISE_SIMULATED_SEED` (first seed, 1), `DRAINWISE_SIMULATED_COUNT` (circuits, 320),
//! `DRAINWISE_SIMULATED_ONLY` (one seed: prints netlist, deck, voltages and reaches). Offending circuits are left in
//! `target/simulated/`.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::print_stdout, clippy::print_stderr)]

mod analog;
mod bench;
mod builder;
mod compare;
mod limited;
mod logic;
mod narrowed;
mod patterns;
mod power;
mod rails;
mod report;
mod rng;
mod spice;

use builder::Builder;
use compare::{Case, Figures, Reaches};
use rails::Vector;
use spice::Outcome;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::Mutex;
use std::sync::atomic::{AtomicU64, Ordering};

fn setting(name: &str) -> Option<u64> {
    let text = std::env::var(name).ok()?;
    Some(text.parse().unwrap_or_else(|_| panic!("{name}={text} is no number")))
}

/// Where one test writes its circuits and benches: tests run side by side.
fn folder(test: &str) -> PathBuf {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).parent().expect("target").join("simulated").join(test);
    std::fs::create_dir_all(&folder).expect("target/simulated can be made");
    folder
}

fn circuit(seed: u64, memory: bool) -> (Builder, Vec<Vector>) {
    let b = patterns::grow(seed, memory);
    let mut rng = rng::Rng::new(seed ^ 0xF00D);
    let vectors = b.world.vectors(&mut rng);
    (b, vectors)
}

/// Runs `each` on every circuit, on as many threads as there are cores. The figures come out in the order of the seeds.
fn every_circuit(count: u64, memory: bool, folder: &Path, each: impl Fn(&Case, &mut Figures) + Sync) -> Figures {
    let first = setting("DRAINWISE_SIMULATED_SEED").unwrap_or(1);
    let next = AtomicU64::new(0);
    let done = Mutex::new(Vec::new());
    let work = || {
        loop {
            let i = next.fetch_add(1, Ordering::Relaxed);
            if i >= count {
                break;
            }
            let seed = first + i;
            let (builder, vectors) = circuit(seed, memory);
            let outcomes = spice::simulate(&builder, seed, &vectors, folder);
            let mut figures = Figures::default();
            let case = Case { seed, builder: &builder, vectors: &vectors, outcomes: &outcomes };
            compare::count(&case, &mut figures);
            each(&case, &mut figures);
            if figures.failed == 0 {
                let _ = std::fs::remove_file(folder.join(format!("bench{seed}.cir")));
            }
            done.lock().expect("no thread panicked").push((seed, figures));
        }
    };
    let threads = std::thread::available_parallelism().map_or(1, usize::from);
    std::thread::scope(|scope| {
        for _ in 0..threads {
            scope.spawn(work);
        }
    });
    let mut done = done.into_inner().expect("no thread panicked");
    done.sort_by_key(|(seed, _)| *seed);
    report::total(done.into_iter().map(|(_, figures)| figures))
}

/// The reaches that the program states. The netlist and the deck stay in the folder where they were needed.
fn trace(case: &Case, folder: &Path) -> Result<Reaches, String> {
    let (netlist, deck) = (folder.join(format!("c{}.sp", case.seed)), folder.join(format!("c{}.yaml", case.seed)));
    std::fs::write(&netlist, bench::netlist(case.builder, case.seed)).map_err(|e| e.to_string())?;
    std::fs::write(&deck, bench::deck(case.builder)).map_err(|e| e.to_string())?;
    let out = Command::new(env!("CARGO_BIN_EXE_drainwise"))
        .arg("trace")
        .arg(&netlist)
        .arg("--deck")
        .arg(&deck)
        .args(["--format", "json"])
        .output()
        .map_err(|e| e.to_string())?;
    if !out.status.success() {
        let said = String::from_utf8_lossy(&out.stderr);
        return Err(format!(
            "trace ended with {}: {}",
            out.status,
            said.lines().take(12).collect::<Vec<_>>().join(" / ")
        ));
    }
    compare::reaches(&String::from_utf8_lossy(&out.stdout))
}

fn tidy(seed: u64, folder: &Path) {
    for end in ["sp", "yaml"] {
        let _ = std::fs::remove_file(folder.join(format!("c{seed}.{end}")));
    }
}

#[test]
#[ignore = "needs ngspice; run by .ci/run"]
fn no_driven_net_leaves_its_reach() {
    let Some(figures) = reaches_hold(320, false) else { return };
    if figures.circuits >= 300 {
        assert!(figures.in_ground >= 10_000, "only {} values compared against ground", figures.in_ground);
    }
}

/// Crossed inverters hold either state, whatever set them: what was written in another mode, or while the supplies rose.
#[test]
#[ignore = "needs ngspice; run by .ci/run"]
fn no_driven_net_leaves_its_reach_where_circuits_keep_a_state() {
    reaches_hold(100, true);
}

/// Holds the reaches of so many circuits (the environment may ask for others); nothing where only one circuit was asked for.
fn reaches_hold(circuits: u64, memory: bool) -> Option<Figures> {
    let folder = folder(if memory { "memory" } else { "plain" });
    if let Some(seed) = setting("DRAINWISE_SIMULATED_ONLY") {
        one(seed, memory, &folder);
        return None;
    }
    let count = setting("DRAINWISE_SIMULATED_COUNT").unwrap_or(circuits);
    let figures = every_circuit(count, memory, &folder, |case, figures| match trace(case, &folder) {
        Ok(reaches) => {
            let escapes = compare::compare(case, &reaches, figures);
            compare::widths(case, Some(&reaches), figures);
            let file = |end: &str| folder.join(format!("c{}.{end}", case.seed));
            narrowed::count(case, &reaches, &file("sp"), &file("yaml"), figures);
            if escapes == 0 && figures.trouble.is_empty() {
                tidy(case.seed, &folder);
            }
        }
        Err(why) => figures.trouble.push(format!("circuit {}: {why}", case.seed)),
    });
    let median = report::print(&figures);
    let all: Vec<&str> = figures.escapes.iter().map(|e| e.text.as_str()).collect();
    std::fs::write(folder.join("escapes.txt"), all.join("\n")).expect("the folder of the check can be written");
    report::simulations_hold(&figures);
    assert!(figures.trouble.is_empty(), "{} circuits without an answer to compare", figures.trouble.len());
    assert!(figures.escapes.is_empty(), "{} values escape their reach", figures.escapes.len());
    assert!(
        figures.unknown * 10 <= figures.driven,
        "{} of {} driven values have no reach",
        figures.unknown,
        figures.driven
    );
    assert!(median <= 1.5, "the median of reach width over simulated width is {median:.2}, above 1.5");
    assert_eq!(figures.circuits as u64, count);
    assert!(figures.in_ground as u64 >= 30 * count, "only {} values compared against ground", figures.in_ground);
    Some(figures)
}

/// The circuits alone: do they simulate, and does every driven net stand between the supplies, give or take a junction?
#[test]
#[ignore = "needs ngspice; run by .ci/run"]
fn random_circuits_simulate_and_stay_between_their_supplies() {
    let count = setting("DRAINWISE_SIMULATED_COUNT").unwrap_or(40);
    let figures = every_circuit(count, true, &folder("circuits"), |case, figures| {
        assert!((5..=60).contains(&case.builder.devices), "circuit {}: {} devices", case.seed, case.builder.devices);
        compare::widths(case, None, figures);
        between_supplies(case, figures);
    });
    report::print(&figures);
    report::simulations_hold(&figures);
    assert!(figures.trouble.is_empty(), "{} nets stand beyond the supplies", figures.trouble.len());
    assert!(figures.driven as u64 >= 30 * count, "only {} driven values", figures.driven);
}

fn between_supplies(case: &Case, figures: &mut Figures) {
    // A voltage source between nets may lift one of them; each was made with at most 1.5 V.
    let lift = 1.5
        * case
            .builder
            .cards
            .iter()
            .filter(|c| matches!(c, builder::Card::Source { name, .. } if name.starts_with('v')))
            .count() as f64;
    for (vector, outcome) in case.vectors.iter().zip(case.outcomes) {
        let Outcome::Nets(nets) = outcome else { continue };
        let lo = vector.volts.iter().copied().fold(0.0, f64::min) - 0.9 - lift;
        let hi = vector.volts.iter().copied().fold(0.0, f64::max) + 0.9 + lift;
        for (net, v) in case.builder.nets.iter().zip(nets) {
            if let Some(v) = v.filter(|v| !(lo..=hi).contains(v)) {
                figures.trouble.push(format!("circuit {}: {} ({}) stands at {v:.3} V", case.seed, net.path, net.kind));
            }
        }
    }
}

/// One circuit, told in full.
fn one(seed: u64, memory: bool, folder: &Path) {
    let (builder, vectors) = circuit(seed, memory);
    println!("{}\n{}", bench::netlist(&builder, seed), bench::deck(&builder));
    let outcomes = spice::simulate(&builder, seed, &vectors, folder);
    let case = Case { seed, builder: &builder, vectors: &vectors, outcomes: &outcomes };
    let reaches = trace(&case, folder);
    report::tell(&case, reaches.as_ref().ok());
    let mut figures = Figures::default();
    compare::count(&case, &mut figures);
    let reaches = reaches.unwrap_or_else(|why| panic!("{why}"));
    compare::compare(&case, &reaches, &mut figures);
    compare::widths(&case, Some(&reaches), &mut figures);
    report::print(&figures);
    assert!(figures.trouble.is_empty() && figures.escapes.is_empty(), "circuit {seed} fails");
}
