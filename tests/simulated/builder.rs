//! Grows a random circuit card by card. Patterns ask it for nets, signals and devices; it keeps what the check must know of
//! each net (which pattern made it, where its leaks go, what may be hung on it).

use crate::rails::{Domain, DomainKind, World};
use crate::rng::Rng;

/// An internal net.
pub(crate) struct Net {
    /// As seen from inside the top cell: `w7`, `x3.mid`.
    pub(crate) path: String,
    /// The pattern that made it.
    pub(crate) kind: &'static str,
    pub(crate) domain: usize,
    /// Feeds a gate only: whatever else hung on it would take a current source out of its compliance.
    pub(crate) gates_only: bool,
}

/// A card of the top cell.
pub(crate) enum Card {
    Plain(String),
    /// An I or V element. In the simulation it ramps with the supplies.
    Source {
        name: String,
        p: String,
        n: String,
        value: f64,
    },
}

#[derive(Clone, Copy, PartialEq)]
pub(crate) enum Pol {
    N,
    P,
}

impl Pol {
    pub(crate) fn other(self) -> Pol {
        if self == Pol::N { Pol::P } else { Pol::N }
    }
}

pub(crate) struct Builder {
    pub(crate) rng: Rng,
    pub(crate) world: World,
    pub(crate) cards: Vec<Card>,
    pub(crate) nets: Vec<Net>,
    pub(crate) zeners: Vec<(String, String)>,
    pub(crate) devices: usize,
    /// The pattern at work.
    pub(crate) kind: &'static str,
    /// `Some` while devices have to match: all take this variant of their class's model.
    pub(crate) matched: Option<&'static str>,
    /// Signals of each domain: a gate may stand on them, a channel may pass them on.
    signals: Vec<Vec<String>>,
    serial: usize,
}

impl Builder {
    pub(crate) fn new(rng: Rng, world: World) -> Builder {
        let signals =
            world.domains.iter().map(|d| d.inputs.iter().map(|&i| world.rails[i].name.clone()).collect()).collect();
        Builder {
            rng,
            world,
            cards: Vec::new(),
            nets: Vec::new(),
            zeners: Vec::new(),
            devices: 0,
            kind: "",
            matched: None,
            signals,
            serial: 0,
        }
    }

    fn number(&mut self) -> usize {
        self.serial += 1;
        self.serial
    }

    // Nets

    /// A net inside a pattern, no signal for others.
    pub(crate) fn node(&mut self, domain: usize) -> String {
        // Not `n7`: ngspice takes a net `n5` for the model of that name.
        let path = format!("w{}", self.number());
        self.nets.push(Net { path: path.clone(), kind: self.kind, domain, gates_only: false });
        path
    }

    /// A net that other patterns take as a signal.
    pub(crate) fn output(&mut self, domain: usize) -> String {
        let net = self.node(domain);
        self.signals[domain].push(net.clone());
        net
    }

    /// A net that a current source holds: gates may stand on it, nothing else.
    pub(crate) fn held(&mut self, domain: usize) -> String {
        let net = self.node(domain);
        self.nets.last_mut().expect("just made").gates_only = true;
        net
    }

    /// A net inside the instance of a cell.
    pub(crate) fn inner(&mut self, instance: &str, net: &str, domain: usize) {
        self.nets.push(Net { path: format!("{instance}.{net}"), kind: self.kind, domain, gates_only: false });
    }

    pub(crate) fn lo(&self, domain: usize) -> String {
        self.world.domains[domain].lo.clone()
    }

    pub(crate) fn hi(&self, domain: usize) -> String {
        self.world.domains[domain].hi.clone()
    }

    /// The supply that a source of this polarity stands on, and the opposite one.
    pub(crate) fn ends(&self, pol: Pol, domain: usize) -> (String, String) {
        match pol {
            Pol::N => (self.lo(domain), self.hi(domain)),
            Pol::P => (self.hi(domain), self.lo(domain)),
        }
    }

    /// A signal of the domain, the late ones more often; a supply where there is none yet.
    pub(crate) fn signal(&mut self, domain: usize) -> String {
        let from = &self.signals[domain];
        if from.is_empty() {
            let d = &self.world.domains[domain];
            return if self.rng.chance(0.5) { d.lo.clone() } else { d.hi.clone() };
        }
        let skip = if self.rng.chance(0.5) { from.len() / 2 } else { 0 };
        self.rng.pick(&from[skip..]).clone()
    }

    pub(crate) fn domains(&self, fits: impl Fn(&Domain) -> bool) -> Vec<usize> {
        (0..self.world.domains.len()).filter(|&i| fits(&self.world.domains[i])).collect()
    }

    /// The low-voltage domain on ground and vdd.
    pub(crate) fn low(&self) -> usize {
        0
    }

    /// A supply made inside the circuit: cells can stand on it.
    pub(crate) fn new_domain(&mut self, lo: &str, hi: &str, leak: (usize, usize), kind: DomainKind) {
        let (lo, hi) = (lo.to_string(), hi.to_string());
        self.world.domains.push(Domain { lo, hi, leak, kind, solid: false, inputs: Vec::new() });
        self.signals.push(Vec::new());
    }

    // Devices

    fn class(&self, pol: Pol, high: bool) -> &'static str {
        match (pol, high) {
            (Pol::N, false) => "n5",
            (Pol::P, false) => "p5",
            (Pol::N, true) => "ldn60",
            (Pol::P, true) => "ldp60",
        }
    }

    /// A transistor of the domain's class; its body on its source or, for a 5 V one, on the domain's supply.
    pub(crate) fn mos(&mut self, pol: Pol, domain: usize, d: &str, g: &str, s: &str) {
        let high = self.world.domains[domain].kind == DomainKind::High;
        let body = if high || self.rng.chance(0.4) { s.to_string() } else { self.ends(pol, domain).0 };
        self.mos_with(self.class(pol, high), [d, g, s, &body]);
    }

    pub(crate) fn ldn(&mut self, d: &str, g: &str, s: &str) {
        self.mos_with("ldn60", [d, g, s, s]);
    }

    pub(crate) fn ldp(&mut self, d: &str, g: &str, s: &str) {
        self.mos_with("ldp60", [d, g, s, s]);
    }

    pub(crate) fn mos_with(&mut self, class: &str, [d, g, s, b]: [&str; 4]) {
        let variant = self.matched.unwrap_or_else(|| *self.rng.pick(&["", "_x"]));
        let (w, l) = (*self.rng.pick(&[2, 4, 5, 8, 10]), *self.rng.pick(&[1, 2]));
        let m = if self.rng.chance(0.15) { " m=2" } else { "" };
        let n = self.number();
        self.plain(format!("m{n} {d} {g} {s} {b} {class}{variant} w={w}u l={l}u{m}"));
    }

    pub(crate) fn res(&mut self, a: &str, b: &str, lo: f64, hi: f64) {
        let (n, r) = (self.number(), self.rng.decade(lo, hi).round());
        let value = if self.rng.chance(0.5) { format!("rpoly r={r}") } else { format!("{r}") };
        self.plain(format!("r{n} {a} {b} {value}"));
    }

    pub(crate) fn res_of(&mut self, a: &str, b: &str, ohms: f64) {
        let n = self.number();
        self.plain(format!("r{n} {a} {b} {}", ohms.round()));
    }

    pub(crate) fn diode(&mut self, a: &str, k: &str) {
        let n = self.number();
        self.plain(format!("d{n} {a} {k} dj"));
    }

    pub(crate) fn zener(&mut self, a: &str, k: &str) {
        let n = self.number();
        self.zeners.push((a.to_string(), k.to_string()));
        self.plain(format!("d{n} {a} {k} zg5"));
    }

    /// Only on nets that a resistor holds: what floats with a capacitor on it looks driven.
    pub(crate) fn cap(&mut self, a: &str, b: &str) {
        let n = self.number();
        self.plain(format!("c{n} {a} {b} 1p"));
    }

    pub(crate) fn npn(&mut self, c: &str, b: &str, e: &str) {
        let n = self.number();
        self.plain(format!("q{n} {c} {b} {e} qn"));
    }

    /// `amps` flow from `p` through the source into `n`.
    pub(crate) fn current(&mut self, p: &str, n: &str, amps: f64) {
        let name = format!("i{}", self.number());
        self.source(name, p, n, amps);
    }

    pub(crate) fn volt(&mut self, p: &str, n: &str, volts: f64) {
        let name = format!("v{}", self.number());
        self.source(name, p, n, volts);
    }

    fn source(&mut self, name: String, p: &str, n: &str, value: f64) {
        self.devices += 1;
        self.cards.push(Card::Source { name, p: p.to_string(), n: n.to_string(), value });
    }

    /// An instance of a cell with `devices` devices in it; gives the instance's name.
    pub(crate) fn cell(&mut self, cell: &str, nodes: &[&str], devices: usize) -> String {
        let name = format!("x{}", self.number());
        self.cards.push(Card::Plain(format!("{name} {} {cell}", nodes.join(" "))));
        self.devices += devices;
        name
    }

    fn plain(&mut self, card: String) {
        self.devices += 1;
        self.cards.push(Card::Plain(card));
    }

    /// Runs `f` with one model variant for every device it makes.
    pub(crate) fn matching(&mut self, f: impl FnOnce(&mut Builder)) {
        let before = self.matched;
        self.matched = Some(*self.rng.pick(&["", "_x"]));
        f(self);
        self.matched = before;
    }
}
