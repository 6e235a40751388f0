//! The analysis over the hierarchy gives what the flattened netlist would give: random hierarchies are written out twice, once as
//! cells and once flat, and their reaches and findings are compared. The flat form is made here, by text, and shares no code with
//! the program. (An internal property, so it needs no outside source.)
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, reason = "a test that cannot go on must stop")]

use drainwise::load::Memory;
use drainwise::pipeline::{Job, Progress, lint};
use drainwise::tracing::trace;
use std::collections::BTreeMap;
use std::fmt::Write;

struct Quiet;

impl Progress for Quiet {
    fn stage(&self, _: &str) {}
}

/// A small generator of pseudo-random numbers (Marsaglia's xorshift, 64 bits; from memory).
struct Prng(u64);

impl Prng {
    fn next(&mut self, below: usize) -> usize {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        (self.0 >> 11) as usize % below
    }
}

/// A statement of a cell: a device card without its name, or a call; `{0}` … stand for nets.
enum Statement {
    Device { name: String, nets: Vec<String>, rest: &'static str },
    Call { name: String, nets: Vec<String>, cell: usize },
}

struct Cell {
    ports: Vec<String>,
    statements: Vec<Statement>,
}

const SUPPLIES: [&str; 4] = ["VSS", "VDD", "VIN", "BST"];

/// Devices by letter, number of nets and the rest of the card.
const KINDS: [(char, usize, &str); 9] = [
    ('M', 4, "n5 w=10u l=1u"),
    ('M', 4, "p5 w=10u l=1u"),
    ('M', 5, "ldn60 w=20u l=0.6u nf=2"),
    ('M', 4, "ldp60 w=20u l=0.6u nf=2"),
    ('R', 2, "10k"),
    ('R', 2, "0"),
    ('D', 2, "zg5"),
    ('D', 2, "dsub"),
    ('V', 2, "2"),
];

const DECK: &str = "
use: [builtin:ldmos]
top: top
classes:
  n5: {kind: nmos, threshold: 0.6V..0.9V, ratings: {vds: -5.5V..5.5V, vgs: -5.5V..5.5V}}
  p5: {kind: pmos, threshold: 0.6V..1V, ratings: {vds: -5.5V..5.5V, vgs: -5.5V..5.5V}}
  ldn60: {kind: nmos, pins: [d, g, s, b, iso], high_voltage: true, asymmetric: true, threshold: 0.7V..1.1V,
    ratings: {vds: -1.2V..40V, vgs: -5.5V..5.5V}, body: {tie: s}, ties: {iso: [d, VIN]}, on_state: {vds: 12V, duty: 1%}}
  ldp60: {kind: pmos, high_voltage: true, asymmetric: true, threshold: 0.7V..1.2V, ratings: {vsd: -1.2V..40V}, body: {tie: s}}
  zg5: {kind: diode, clamp: -0.9V..5.5V}
  dsub: {kind: diode}
rails: {VSS: 0V, VDD: 5V, VIN: 6V..48V, SW: 0V .. VIN, BST: SW .. SW + 5V, IN: 0V..5V}
modes:
  on: {IN: 5V}
  off: {IN: 0V, SW: 0V}
";

fn design(prng: &mut Prng) -> Vec<Cell> {
    let mut cells = vec![inverter()];
    let levels = 2 + prng.next(3);
    for level in 0..levels * 2 {
        let signals = 2 + prng.next(3);
        let mut ports: Vec<String> = (0..signals).map(|index| format!("p{index}")).collect();
        ports.extend(SUPPLIES.iter().take(2 + prng.next(3)).map(|name| (*name).to_owned()));
        let cell = Cell { statements: statements(prng, &ports, &cells, level), ports };
        cells.push(cell);
    }
    let ports: Vec<String> = ["VSS", "VDD", "VIN", "BST", "SW", "IN", "OUT"].map(str::to_owned).to_vec();
    let top = Cell { statements: statements(prng, &ports, &cells, 3), ports };
    cells.push(top);
    cells
}

/// Cell 0. Two of them crossed are a ring that goes through two instances.
fn inverter() -> Cell {
    let ports: Vec<String> = ["a", "y", "VSS", "VDD"].map(str::to_owned).to_vec();
    let mut statements = Vec::new();
    invert(["a", "y", "VSS", "VDD"], 0, &mut statements);
    Cell { ports, statements }
}

fn invert([a, y, low, high]: [&str; 4], first: usize, all: &mut Vec<Statement>) {
    for (offset, (supply, rest)) in [(low, "n5 w=10u l=1u"), (high, "p5 w=10u l=1u")].into_iter().enumerate() {
        let nets = [y, a, supply, supply].map(str::to_owned).to_vec();
        all.push(Statement::Device { name: format!("M{}", first + offset), nets, rest });
    }
}

/// Inverters that drive each other, two or three in a circle: as devices of this cell, as instances, or as both.
fn ring(prng: &mut Prng, nets: &[String], with_cells: bool, all: &mut Vec<Statement>) {
    let stages = 2 + prng.next(2);
    let members: Vec<String> = (0..stages).map(|_| nets[prng.next(nets.len())].clone()).collect();
    for stage in 0..stages {
        let (a, y) = (&members[stage], &members[(stage + 1) % stages]);
        let supply = |prng: &mut Prng, name: &str| {
            if prng.next(4) > 0 && nets.iter().any(|net| net == name) {
                name.to_owned()
            } else {
                nets[prng.next(nets.len())].clone()
            }
        };
        let (low, high) = (supply(prng, "VSS"), supply(prng, "VDD"));
        if with_cells && prng.next(2) == 0 {
            let pins = [a, y, &low, &high].map(String::clone).to_vec();
            all.push(Statement::Call { name: format!("XR{stage}"), nets: pins, cell: 0 });
        } else {
            invert([a, y, &low, &high], 100 + 2 * stage, all);
        }
    }
}

fn statements(prng: &mut Prng, ports: &[String], cells: &[Cell], level: usize) -> Vec<Statement> {
    let mut nets: Vec<String> = ports.to_vec();
    nets.extend((0..3).map(|index| format!("n{index}")));
    nets.push("0".to_owned());
    let mut all = Vec::new();
    for index in 0..2 + prng.next(5) {
        // Shorts and sources are rare, else everything is one net.
        let kind = if prng.next(8) == 0 { prng.next(KINDS.len()) } else { [0, 1, 2, 3, 4, 6, 7][prng.next(7)] };
        let (letter, count, rest) = KINDS[kind];
        let mut pins: Vec<String> = (0..count).map(|_| nets[prng.next(nets.len())].clone()).collect();
        if letter == 'M' && prng.next(3) > 0 {
            pins[3] = pins[2].clone();
        }
        all.push(Statement::Device { name: format!("{letter}{index}"), nets: pins, rest });
    }
    if level > 0 && !cells.is_empty() {
        for index in 0..1 + prng.next(3) {
            let cell = prng.next(cells.len());
            let pins = cells[cell].ports.iter().map(|port| {
                if prng.next(2) == 0 && nets.contains(port) {
                    port.clone()
                } else {
                    nets[prng.next(nets.len())].clone()
                }
            });
            all.push(Statement::Call { name: format!("X{index}"), nets: pins.collect(), cell });
        }
    }
    if prng.next(2) == 0 {
        ring(prng, &nets, level > 0, &mut all);
    }
    all
}

fn cell_name(cells: &[Cell], index: usize) -> String {
    if index + 1 == cells.len() { "top".to_owned() } else { format!("cell{index}") }
}

fn as_cells(cells: &[Cell]) -> String {
    let mut text = String::from("* as cells\n");
    for (index, cell) in cells.iter().enumerate() {
        let _ = writeln!(text, ".subckt {} {}", cell_name(cells, index), cell.ports.join(" "));
        for statement in &cell.statements {
            let _ = match statement {
                Statement::Device { name, nets, rest } => writeln!(text, "{name} {} {rest}", nets.join(" ")),
                Statement::Call { name, nets, cell } => {
                    writeln!(text, "{name} {} {}", nets.join(" "), cell_name(cells, *cell))
                }
            };
        }
        text.push_str(".ends\n");
    }
    text
}

fn flat(cells: &[Cell]) -> String {
    let top = cells.len() - 1;
    let mut text = format!("* flat\n.subckt top {}\n", cells[top].ports.join(" "));
    let same: BTreeMap<String, String> = cells[top].ports.iter().map(|port| (port.clone(), port.clone())).collect();
    flatten(cells, top, "", &same, &mut text);
    text.push_str(".ends\n");
    text
}

fn flatten(cells: &[Cell], index: usize, prefix: &str, outer: &BTreeMap<String, String>, text: &mut String) {
    let name = |net: &String| match net.as_str() {
        "0" => "0".to_owned(),
        _ => outer.get(net).cloned().unwrap_or_else(|| format!("{prefix}{net}")),
    };
    for statement in &cells[index].statements {
        match statement {
            Statement::Device { name: device, nets, rest } => {
                let nets: Vec<String> = nets.iter().map(name).collect();
                let letter = &device[..1];
                let _ = writeln!(text, "{letter}_{prefix}{device} {} {rest}", nets.join(" "));
            }
            Statement::Call { name: instance, nets, cell } => {
                let below = cells[*cell].ports.iter().cloned().zip(nets.iter().map(name)).collect();
                flatten(cells, *cell, &format!("{prefix}{instance}."), &below, text);
            }
        }
    }
}

fn files(netlist: &str) -> Memory {
    Memory::new().with("design.sp", netlist).with("deck.yaml", DECK)
}

fn job() -> Job {
    Job { netlists: vec!["design.sp".into()], decks: vec!["deck.yaml".into()], ..Job::default() }
}

/// Whether sources and rails of a flat netlist form a loop: such a netlist contradicts itself, and which of its cards is believed depends
/// on their order.
fn sources_form_a_loop(flat: &str) -> bool {
    let mut group: BTreeMap<String, String> = BTreeMap::new();
    fn find(group: &BTreeMap<String, String>, net: &str) -> String {
        let rails = ["vss", "vdd", "vin", "bst", "sw", "in"];
        let mut net = if rails.contains(&net.to_lowercase().as_str()) { "0" } else { net };
        while let Some(next) = group.get(net) {
            net = next;
        }
        net.to_owned()
    }
    let of_kind = |source: bool| flat.lines().filter(move |line| line.starts_with('V') == source);
    let shorts = of_kind(false).filter(|line| line.starts_with('R') && line.ends_with(" 0"));
    for line in shorts.chain(of_kind(true)) {
        let words: Vec<&str> = line.split(' ').collect();
        let (a, b) = (find(&group, words[1]), find(&group, words[2]));
        match (a == b, line.starts_with('V')) {
            (true, true) => return true,
            (true, false) => {}
            (false, _) => _ = group.insert(if a == "0" { b.clone() } else { a.clone() }, if a == "0" { a } else { b }),
        }
    }
    false
}

/// Lowest and highest voltage in microvolts, by path, mode and frame.
type Reaches = BTreeMap<(String, Option<String>, String), (i64, i64)>;

/// Reach of every net in every mode and frame, rounded.
fn reaches(netlist: &str) -> Option<Reaches> {
    let (outcome, found) = trace(&files(netlist), &job(), &Quiet, &[]);
    if outcome.could_not {
        return None;
    }
    let rounded = |volts: f64| if volts.is_finite() { (volts * 1e6).round() as i64 } else { i64::MAX };
    let rows = found.unwrap_or_default().into_iter().flat_map(|net| {
        let (path, mode) = (net.path.to_lowercase(), net.mode.clone());
        net.reach
            .into_iter()
            .map(move |(frame, range)| ((path.clone(), mode.clone(), frame), (rounded(range.lo), rounded(range.hi))))
            .collect::<Vec<_>>()
    });
    Some(rows.collect())
}

/// How many instances each rule and verdict finds, by the device's own statement name at the end of its path.
fn findings(netlist: &str) -> BTreeMap<(String, &'static str), u64> {
    let outcome = lint(&files(netlist), &job(), &Quiet);
    let mut counts = BTreeMap::new();
    for diagnostic in &outcome.report.diagnostics {
        let Some(finding) = diagnostic.finding.as_ref().filter(|finding| !finding.nets.is_empty()) else { continue };
        *counts.entry((diagnostic.code.clone(), finding.verdict.word())).or_insert(0) += finding.instances;
    }
    counts
}

#[test]
fn the_hierarchy_gives_what_the_flat_netlist_gives() {
    let (mut nets, mut found, mut refused) = (0, 0, 0);
    for seed in 1..=300u64 {
        let cells = design(&mut Prng(seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1));
        let (hierarchy, flattened) = (as_cells(&cells), flat(&cells));
        if sources_form_a_loop(&flattened) {
            refused += 1;
            continue;
        }
        let (of_cells, of_flat) = (reaches(&hierarchy), reaches(&flattened));
        // A random short can join two rails, which is an error either way.
        let (Some(of_cells), Some(of_flat)) = (&of_cells, &of_flat) else {
            assert_eq!(of_cells.is_some(), of_flat.is_some(), "seed {seed}\n{hierarchy}\n{flattened}");
            refused += 1;
            continue;
        };
        for (key, range) in of_flat {
            assert_eq!(of_cells.get(key), Some(range), "seed {seed}, {key:?}\n{hierarchy}\n{flattened}");
        }
        let (by_cells, by_flat) = (findings(&hierarchy), findings(&flattened));
        assert_eq!(by_cells, by_flat, "seed {seed}\n{hierarchy}\n{flattened}");
        nets += of_flat.len();
        found += by_flat.values().sum::<u64>();
    }
    assert!(refused < 120, "{refused} of 300 designs were refused");
    assert!(nets > 5000 && found > 500, "{nets} values and {found} findings are too few to say anything");
}
