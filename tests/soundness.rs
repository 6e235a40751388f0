//! Holds reach against a circuit simulator: random circuits, each with supplies and inputs drawn inside its declared rails,
//! simulated by ngspice to the end of a slow ramp. No driven net may be outside its reach, in any frame, by more than 50 mV;
//! and reaches must be tight enough to be worth something.
//!
//! `DRAINWISE_SEED` and `DRAINWISE_CIRCUITS` change the run; `DRAINWISE_ONLY=17` runs circuit 17 alone. Circuits with an
//! escape stay in `target/soundness/`.

// A test may stop at what must not happen, and its figures are for people.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::print_stdout)]

#[path = "soundness/bench.rs"]
mod bench;
#[path = "soundness/circuit.rs"]
mod circuit;
#[path = "soundness/judge.rs"]
mod judge;
#[path = "soundness/patterns.rs"]
mod patterns;
#[path = "soundness/prng.rs"]
mod prng;

use circuit::Circuit;
use judge::Figures;
use prng::Prng;
use std::path::Path;
use std::sync::atomic::{AtomicUsize, Ordering};

/// A number from the environment.
fn setting(name: &str) -> Option<u64> {
    std::env::var(name).ok().map(|text| text.parse().unwrap_or_else(|_| panic!("{name} is no number: {text}")))
}

/// Draws, simulates and judges one circuit. Its files stay if it has an escape or is the only one asked for.
fn run_one(root: &Path, seed: u64, number: usize, keep: bool) -> Figures {
    let folder = root.join(format!("{seed}-{number}"));
    std::fs::create_dir_all(&folder).unwrap();
    let mut prng = Prng::new(seed, number);
    let circuit = Circuit::draw(&mut prng);
    let vectors = bench::vectors(&circuit, &mut prng);
    let testbench = bench::testbench(&circuit, &vectors, &mut prng);
    std::fs::write(folder.join("circuit.sp"), circuit.netlist()).unwrap();
    std::fs::write(folder.join("drainwise.yaml"), circuit.deck()).unwrap();
    let reaches = judge::reaches(&folder);
    let figures = match bench::simulate(&folder, &testbench, &circuit, &vectors) {
        Some(values) => {
            judge::compare(&format!("seed {seed}, circuit {number}"), &circuit, &vectors, &values, &reaches)
        }
        None => Figures { discarded: 1, ..Figures::default() },
    };
    if !keep && figures.escapes.is_empty() && figures.discarded == 0 {
        std::fs::remove_dir_all(&folder).unwrap();
    }
    figures
}

#[test]
#[ignore = "needs ngspice; run by .ci/run"]
fn no_driven_net_is_simulated_outside_its_reach() {
    let seed = setting("DRAINWISE_SEED").unwrap_or(1);
    let circuits = setting("DRAINWISE_CIRCUITS").unwrap_or(320) as usize;
    let only = setting("DRAINWISE_ONLY").map(|n| n as usize);
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("target/soundness");
    let _ = std::fs::remove_dir_all(&root);
    let numbers = only.map_or(0..circuits, |n| n..n + 1);
    let next = AtomicUsize::new(numbers.start);
    let work = || {
        let mut figures = Figures::default();
        loop {
            let number = next.fetch_add(1, Ordering::Relaxed);
            if number >= numbers.end {
                return figures;
            }
            figures.add(run_one(&root, seed, number, only.is_some()));
        }
    };
    let mut figures = Figures::default();
    std::thread::scope(|scope| {
        let threads: Vec<_> = (0..2).map(|_| scope.spawn(work)).collect();
        for thread in threads {
            figures.add(thread.join().expect("a thread of the run ends well"));
        }
    });
    figures.print();
    assert!(figures.escapes.is_empty(), "{} values escape their reach", figures.escapes.len());
    if only.is_some() {
        return;
    }
    assert!(figures.circuits >= 300.min(circuits * 19 / 20), "{} circuits are too few", figures.circuits);
    assert!(figures.values >= 10_000.min(circuits * 25), "{} values are too few", figures.values);
    assert!(figures.discarded * 20 <= circuits, "{} circuits did not converge", figures.discarded);
    assert!(figures.median() <= 1.5, "a median of {:.3} is too loose", figures.median());
}
