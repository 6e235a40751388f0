//! Supplies, inputs and modes of a random circuit, and the vectors (one value per rail) drawn from them. A rail's end may be
//! another rail plus an offset, so that domains that float on a switching node are part of the check.

use crate::rng::Rng;
use std::fmt::Write;

/// One end of a rail's range.
#[derive(Clone)]
pub(crate) enum End {
    Volts(f64),
    /// An earlier rail (by index) plus an offset in volts.
    On(usize, f64),
}

#[derive(Clone)]
pub(crate) struct Rail {
    pub(crate) name: String,
    pub(crate) lo: End,
    pub(crate) hi: End,
    /// A supply carries bodies and sources; the others are inputs.
    pub(crate) supply: bool,
}

/// Two rails or nets between which cells stand.
#[derive(Clone)]
pub(crate) struct Domain {
    pub(crate) lo: String,
    pub(crate) hi: String,
    /// Rails (by index) that lie below and above every net of the domain: leaks go there.
    pub(crate) leak: (usize, usize),
    pub(crate) kind: DomainKind,
    /// At least 3 V apart in every vector, so that current sources have their compliance.
    pub(crate) solid: bool,
    /// Inputs made for this domain, by index into the rails.
    pub(crate) inputs: Vec<usize>,
}

#[derive(Clone, Copy, PartialEq)]
pub(crate) enum DomainKind {
    Low,
    High,
    Floating,
}

/// A mode: rails (by index) with the range that replaces theirs.
#[derive(Clone)]
pub(crate) struct Mode {
    pub(crate) name: String,
    pub(crate) set: Vec<(usize, End, End)>,
}

pub(crate) struct Vector {
    pub(crate) mode: Option<usize>,
    /// One value per rail, in the order of the rails.
    pub(crate) volts: Vec<f64>,
}

pub(crate) struct World {
    pub(crate) rails: Vec<Rail>,
    pub(crate) domains: Vec<Domain>,
    pub(crate) modes: Vec<Mode>,
}

pub(crate) fn world(rng: &mut Rng) -> World {
    let mut w = World { rails: Vec::new(), domains: Vec::new(), modes: Vec::new() };
    let vss = w.supply("vss", End::Volts(0.0), End::Volts(0.0));
    let (lo, hi) = *rng.pick(&[(4.5, 5.5), (3.0, 5.5), (5.0, 5.0), (3.3, 5.0), (4.5, 5.5), (0.0, 5.5)]);
    let vdd = w.supply("vdd", End::Volts(lo), End::Volts(hi));
    let low = w.domain(vss, vdd, DomainKind::Low, lo >= 3.0);
    logic_inputs(&mut w, rng, low, vdd);
    if rng.chance(0.3) {
        let v = rng.volts(0.9, 1.8);
        let spread = *rng.pick(&[0.0, 0.1, 0.3]);
        w.input("vb", End::Volts(v), End::Volts(v + spread), low);
    }
    if rng.chance(0.15) {
        let vneg = w.supply("vneg", End::Volts(-5.0), End::Volts(*rng.pick(&[-5.0, -4.5, -3.0])));
        w.domain(vneg, vss, DomainKind::Low, true);
    }
    if rng.chance(0.75) {
        high_side(&mut w, rng, vss, vdd);
    }
    if rng.chance(0.4) {
        modes(&mut w, rng, vdd);
    }
    w
}

fn logic_inputs(w: &mut World, rng: &mut Rng, low: usize, vdd: usize) {
    for i in 0..rng.int(1, 3) {
        let hi = match rng.int(0, 3) {
            0 => End::Volts(5.0),
            1 => End::Volts(3.0),
            _ => End::On(vdd, 0.0),
        };
        w.input(&format!("in{i}"), End::Volts(0.0), hi, low);
    }
}

/// The supply of 60 V devices, and the domains that hang from it or float below it.
fn high_side(w: &mut World, rng: &mut Rng, vss: usize, vdd: usize) {
    let (lo, hi) = *rng.pick(&[(6.0, 48.0), (12.0, 58.0), (24.0, 24.0), (8.0, 40.0), (20.0, 28.0)]);
    let vin = w.supply("vin", End::Volts(lo), End::Volts(hi));
    let high = w.domain(vss, vin, DomainKind::High, true);
    if rng.chance(0.4) {
        w.input("hin", End::Volts(0.0), End::On(vin, 0.0), high);
    }
    if rng.chance(0.25) {
        let drop = *rng.pick(&[4.5, 5.0]);
        let vh = w.supply("vh", End::On(vin, -drop - *rng.pick(&[0.0, 0.5, 1.0])), End::On(vin, -drop));
        let d = w.domain(vh, vin, DomainKind::Floating, true);
        w.input("hb", End::On(vh, 0.0), End::On(vin, 0.0), d);
    }
    if rng.chance(0.6) {
        let top = match rng.int(0, 2) {
            0 => End::Volts(lo.max(6.0)),
            _ => End::On(vin, *rng.pick(&[0.0, 0.5])),
        };
        let sw = w.supply("sw", End::Volts(*rng.pick(&[0.0, -0.5])), top);
        let (lo, hi) = *rng.pick(&[(4.5, 5.5), (5.0, 5.0), (4.0, 5.5)]);
        let bst = w.supply("bst", End::On(sw, lo), End::On(sw, hi));
        let d = w.domain(sw, bst, DomainKind::Floating, true);
        if rng.chance(0.7) {
            w.input("hs", End::On(sw, 0.0), End::On(bst, 0.0), d);
        }
    }
    let _ = vdd;
}

fn modes(w: &mut World, rng: &mut Rng, vdd: usize) {
    let inputs: Vec<usize> = (0..w.rails.len()).filter(|&i| !w.rails[i].supply && w.rails[i].name != "vb").collect();
    for name in ["ma", "mb"] {
        let mut set = Vec::new();
        for &i in &inputs {
            if rng.chance(0.7) {
                let end = if rng.chance(0.5) { w.rails[i].lo.clone() } else { w.rails[i].hi.clone() };
                set.push((i, end.clone(), end));
            }
        }
        for (i, rail) in w.rails.iter().enumerate() {
            match rail.name.as_str() {
                "sw" if rng.chance(0.6) => {
                    let vin = End::On(w.index("vin"), 0.0);
                    let pick = rng.pick(&[(End::Volts(0.0), End::Volts(0.3)), (vin.clone(), vin)]).clone();
                    set.push((i, pick.0, pick.1));
                }
                "vin" if rng.chance(0.3) => set.push((i, End::Volts(24.0), End::Volts(26.0))),
                _ => {}
            }
        }
        if set.is_empty() {
            set.push((vdd, End::Volts(5.0), End::Volts(5.0)));
        }
        w.modes.push(Mode { name: name.to_string(), set });
    }
}

impl World {
    pub(crate) fn index(&self, name: &str) -> usize {
        self.rails.iter().position(|r| r.name == name).expect("a rail of this world")
    }

    fn supply(&mut self, name: &str, lo: End, hi: End) -> usize {
        self.rails.push(Rail { name: name.to_string(), lo, hi, supply: true });
        self.rails.len() - 1
    }

    fn input(&mut self, name: &str, lo: End, hi: End, domain: usize) {
        self.rails.push(Rail { name: name.to_string(), lo, hi, supply: false });
        self.domains[domain].inputs.push(self.rails.len() - 1);
    }

    fn domain(&mut self, lo: usize, hi: usize, kind: DomainKind, solid: bool) -> usize {
        let name = |i: usize| self.rails[i].name.clone();
        self.domains.push(Domain { lo: name(lo), hi: name(hi), leak: (lo, hi), kind, solid, inputs: Vec::new() });
        self.domains.len() - 1
    }

    /// Corners first, then random values; every mode gets its own. Relations between rails hold in each.
    pub(crate) fn vectors(&self, rng: &mut Rng) -> Vec<Vector> {
        let mut out = Vec::new();
        if self.modes.is_empty() {
            self.vectors_in(rng, None, 6, &mut out);
        }
        for mode in 0..self.modes.len() {
            self.vectors_in(rng, Some(mode), 5, &mut out);
        }
        out
    }

    fn vectors_in(&self, rng: &mut Rng, mode: Option<usize>, count: usize, out: &mut Vec<Vector>) {
        let bits: Vec<bool> = self.rails.iter().map(|_| rng.chance(0.5)).collect();
        for k in 0..count {
            let at: Vec<f64> = (0..self.rails.len())
                .map(|i| match k {
                    0 => 0.0,
                    1 if self.rails[i].supply => 1.0,
                    2 if self.rails[i].supply => 1.0,
                    1 => f64::from(u8::from(bits[i])),
                    2 => f64::from(u8::from(!bits[i])),
                    3 => f64::from(u8::from(rng.chance(0.5))),
                    4 => rng.unit(),
                    _ => 1.0,
                })
                .collect();
            out.push(Vector { mode, volts: self.volts(mode, &at) });
        }
    }

    /// `at` says for each rail where in its range it stands, from 0 to 1.
    fn volts(&self, mode: Option<usize>, at: &[f64]) -> Vec<f64> {
        let mut volts: Vec<f64> = Vec::new();
        for (i, rail) in self.rails.iter().enumerate() {
            let set = mode.and_then(|m| self.modes[m].set.iter().find(|s| s.0 == i));
            let (lo, hi) = set.map_or((&rail.lo, &rail.hi), |s| (&s.1, &s.2));
            let value = |end: &End| match end {
                End::Volts(v) => *v,
                End::On(base, by) => volts[*base] + by,
            };
            let (lo, hi) = (value(lo), value(hi).max(value(lo)));
            let v = lo + at[i] * (hi - lo);
            volts.push((v * 1e6).round() / 1e6);
        }
        volts
    }

    /// The `rails` and `modes` sections of a deck.
    pub(crate) fn yaml(&self) -> String {
        let mut s = String::from("rails:\n");
        for r in &self.rails {
            let _ = writeln!(s, "  {}: {} .. {}", r.name, self.end(&r.lo), self.end(&r.hi));
        }
        if !self.modes.is_empty() {
            s.push_str("modes:\n");
        }
        for m in &self.modes {
            let _ = writeln!(s, "  {}:", m.name);
            for (i, lo, hi) in &m.set {
                let _ = writeln!(s, "    {}: {} .. {}", self.rails[*i].name, self.end(lo), self.end(hi));
            }
        }
        s
    }

    fn end(&self, end: &End) -> String {
        match end {
            End::Volts(v) => format!("{v}V"),
            End::On(base, 0.0) => self.rails[*base].name.clone(),
            End::On(base, by) if *by < 0.0 => format!("{} - {}V", self.rails[*base].name, -by),
            End::On(base, by) => format!("{} + {by}V", self.rails[*base].name),
        }
    }
}
