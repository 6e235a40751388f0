//! One random circuit: its rails, its devices, the nets that its patterns made, and the netlist and deck that say so.
//!
//! The process is invented (5 V and 60 V transistors, a 5 V zener, a poly resistor); thresholds lie inside the classes' ranges.

use super::patterns;
use super::prng::Prng;
use std::fmt::Write as _;

/// The deck's classes. Their models are `n5_s`, `n5_f` and so on: a slow and a fast corner inside one threshold range.
const CLASSES: &str = "\
classes:
  n5: {kind: nmos, models: ['n5_*'], pins: [d, g, s, b], threshold: 0.6V..0.9V, size: {width: w, length: l}}
  p5: {kind: pmos, models: ['p5_*'], pins: [d, g, s, b], threshold: 0.6V..1.0V, size: {width: w, length: l}}
  n60: {kind: nmos, models: ['n60_*'], pins: [d, g, s, b], threshold: 0.7V..1.1V, high_voltage: true, size: {width: w, length: l}}
  p60: {kind: pmos, models: ['p60_*'], pins: [d, g, s, b], threshold: 0.7V..1.2V, high_voltage: true, size: {width: w, length: l}}
  zg5: {kind: diode, models: [zg5], pins: [a, k], clamp: -0.9V..5.5V}
  dj: {kind: diode, models: [dj], pins: [a, k]}
  rpoly: {kind: resistor, models: [rpoly], pins: [a, b]}
";

/// One end of a rail's range: another rail, or ground, plus a voltage.
#[derive(Clone, Copy)]
pub(crate) struct End {
    pub(crate) base: Option<&'static str>,
    pub(crate) plus: f64,
}

/// A rail, with its range in every mode or in the only one.
pub(crate) struct Rail {
    pub(crate) name: &'static str,
    pub(crate) ends: [End; 2],
}

/// A mode: the rails that it narrows.
pub(crate) struct Mode {
    pub(crate) name: &'static str,
    pub(crate) rails: Vec<Rail>,
}

/// A net that a pattern made.
pub(crate) struct Net {
    /// Its path, in the netlist's spelling.
    pub(crate) path: String,
    /// The kind of pattern that made it.
    pub(crate) kind: &'static str,
}

/// Nets that a pattern may use as a signal, by the domain they live in.
#[derive(Default)]
pub(crate) struct Pools {
    /// Between VSS and VDD.
    pub(crate) low: Vec<String>,
    /// Anywhere between VSS and VIN.
    pub(crate) high: Vec<String>,
    /// Between SW and BST.
    pub(crate) floating: Vec<String>,
}

/// A random circuit.
#[derive(Default)]
pub(crate) struct Circuit {
    pub(crate) rails: Vec<Rail>,
    pub(crate) modes: Vec<Mode>,
    pub(crate) nets: Vec<Net>,
    pub(crate) pools: Pools,
    /// How many leaf devices it has.
    pub(crate) devices: usize,
    cards: String,
}

impl Circuit {
    /// Draws a circuit of 5 to 60 devices.
    pub(crate) fn draw(prng: &mut Prng) -> Self {
        let mut circuit = Self::default();
        circuit.declare(prng);
        let goal = 5 + prng.below(50);
        while circuit.devices < goal {
            patterns::add_one(&mut circuit, prng);
        }
        circuit
    }

    /// Whether there is a domain that floats on SW.
    pub(crate) fn floats(&self) -> bool {
        self.has("BST")
    }

    /// Whether there is a high supply.
    pub(crate) fn is_high(&self) -> bool {
        self.has("VIN")
    }

    fn has(&self, rail: &str) -> bool {
        self.rails.iter().any(|r| r.name == rail)
    }

    fn declare(&mut self, prng: &mut Prng) {
        let ground = |plus| End { base: None, plus };
        let on = |base, plus| End { base: Some(base), plus };
        let high = prng.chance(0.7);
        let floating = high && prng.chance(0.55);
        self.rail("VSS", ground(0.0), ground(0.0));
        self.rail("VDD", ground(4.5), ground(5.5));
        self.rail("A", ground(0.0), ground(5.0));
        self.rail("B", on("VSS", 0.0), on("VDD", 0.0));
        self.pools.low.extend(["A", "B"].map(String::from));
        if high {
            self.rail("VIN", ground(6.0), ground(48.0));
            self.pools.high.push("VIN".into());
        }
        if floating {
            self.rail("SW", ground(-0.5), on("VIN", 0.5));
            self.rail("BST", on("SW", if prng.chance(0.5) { 4.0 } else { 0.0 }), on("SW", 5.0));
            self.rail("H", on("SW", 0.0), on("BST", 0.0));
            self.pools.floating.push("H".into());
        }
        if prng.chance(0.4) {
            self.modes(floating);
        }
    }

    /// Two modes: inputs held at one end, and the floating domain at the bottom or at the top.
    fn modes(&mut self, floating: bool) {
        let at = |name, base, lo: f64, hi: f64| Rail { name, ends: [lo, hi].map(|plus| End { base, plus }) };
        let mut on = vec![at("A", None, 0.0, 0.0), at("B", Some("VDD"), 0.0, 0.0)];
        let mut off = vec![at("A", None, 5.0, 5.0), at("VDD", None, 4.9, 5.1)];
        if floating {
            on.extend([at("SW", None, -0.2, 0.3), at("H", Some("SW"), 0.0, 0.0)]);
            off.extend([at("SW", Some("VIN"), -0.3, 0.0), at("H", Some("BST"), 0.0, 0.0)]);
        }
        self.modes = vec![Mode { name: "on", rails: on }, Mode { name: "off", rails: off }];
    }

    fn rail(&mut self, name: &'static str, lo: End, hi: End) {
        self.rails.push(Rail { name, ends: [lo, hi] });
    }

    /// A new net of a pattern of this kind.
    pub(crate) fn net(&mut self, kind: &'static str) -> String {
        let path = format!("n{}", self.nets.len());
        self.nets.push(Net { path: path.clone(), kind });
        path
    }

    /// Adds a transistor: terminals d g s b.
    pub(crate) fn mos(&mut self, prng: &mut Prng, class: &str, [d, g, s, b]: [&str; 4]) {
        let width = *prng.pick(&[4.0, 10.0, 20.0]);
        self.mos_of_width(prng, class, [d, g, s, b], width);
    }

    /// Adds a transistor of this width in micrometres.
    pub(crate) fn mos_of_width(&mut self, prng: &mut Prng, class: &str, [d, g, s, b]: [&str; 4], width: f64) {
        let corner = *prng.pick(&["s", "f"]);
        let number = self.devices;
        self.card(&format!("M{number} {d} {g} {s} {b} {class}_{corner} w={width}u l=0.6u"), 1);
    }

    /// Adds a resistor.
    pub(crate) fn resistor(&mut self, a: &str, b: &str, ohms: f64) {
        self.card(&format!("R{} {a} {b} rpoly r={ohms:.0}", self.devices), 1);
    }

    /// Adds a diode of this model from `a` to `k`.
    pub(crate) fn diode(&mut self, a: &str, k: &str, model: &str) {
        self.card(&format!("D{} {a} {k} {model}", self.devices), 1);
    }

    /// Adds a current source that carries `amperes` from `from` to `to`.
    pub(crate) fn current(&mut self, from: &str, to: &str, amperes: f64) {
        self.card(&format!("I{} {from} {to} dc {amperes:e}", self.devices), 1);
    }

    /// Calls one of the cells of the netlist (`inv`, 2 devices; `nand` and `nor`, 4 devices and an inner net `m`).
    pub(crate) fn call(&mut self, cell: &str, pins: &[&str], kind: &'static str) {
        let name = format!("X{}", self.devices);
        if cell != "inv" {
            self.nets.push(Net { path: format!("{name}.m"), kind });
        }
        self.card(&format!("{name} {} {cell}", pins.join(" ")), if cell == "inv" { 2 } else { 4 });
    }

    fn card(&mut self, text: &str, devices: usize) {
        self.devices += devices;
        self.cards.push_str(text);
        self.cards.push('\n');
    }

    /// The netlist: small cells, and the cell `top`.
    pub(crate) fn netlist(&self) -> String {
        let ports: Vec<_> = self.rails.iter().map(|r| r.name).collect();
        format!(
            "* A random circuit.\n\
             .subckt inv a y p n\nM1 y a p p p5_s w=10u l=0.6u\nM2 y a n n n5_f w=5u l=0.6u\n.ends inv\n\
             .subckt nand a b y p n\nM1 y a p p p5_f w=10u l=0.6u\nM2 y b p p p5_s w=10u l=0.6u\n\
             M3 y a m n n5_s w=10u l=0.6u\nM4 m b n n n5_f w=10u l=0.6u\n.ends nand\n\
             .subckt nor a b y p n\nM1 m a p p p5_f w=20u l=0.6u\nM2 y b m p p5_s w=20u l=0.6u\n\
             M3 y a n n n5_s w=5u l=0.6u\nM4 y b n n n5_f w=5u l=0.6u\n.ends nor\n\
             .subckt top {}\n{}.ends top\n",
            ports.join(" "),
            self.cards
        )
    }

    /// The deck.
    pub(crate) fn deck(&self) -> String {
        let mut deck = String::from("top: top\n");
        deck.push_str(CLASSES);
        deck.push_str("rails:\n");
        for rail in &self.rails {
            let _ = writeln!(deck, "  {}: {}", rail.name, range(rail));
        }
        if !self.modes.is_empty() {
            deck.push_str("modes:\n");
        }
        for mode in &self.modes {
            let rails: Vec<_> = mode.rails.iter().map(|r| format!("{}: {}", r.name, range(r))).collect();
            let _ = writeln!(deck, "  '{}': {{{}}}", mode.name, rails.join(", "));
        }
        deck
    }
}

fn range(rail: &Rail) -> String {
    let [lo, hi] = rail.ends.map(|end| match end.base {
        Some(base) if end.plus == 0.0 => base.to_string(),
        Some(base) => format!("{base} {} {:?}V", if end.plus < 0.0 { '-' } else { '+' }, end.plus.abs()),
        None => format!("{:?}V", end.plus),
    });
    format!("{lo} .. {hi}")
}
