//! What each kind of device passes on: the table of transfers, each written once for both polarities.
//!
//! With the lowest voltage kept negated, a p-channel device does to one side what an n-channel device does to the other.

use super::solve::Solver;
use super::state::{DRIVEN, NOTHING, OPENED_ABOVE, OPENED_BELOW, Side};
use super::terminals::Terminals;
use crate::design::{DeviceIx, NetIx};

/// What opens a channel: the gate of a MOS, the base of a bipolar transistor.
#[derive(Clone, Copy)]
struct Gate {
    net: NetIx,
    /// The end of its range that opens the channel, and that limits how far the channel lifts that end of its nets.
    limited: Side,
    threshold: f64,
    /// Whether its condition is in a ring: then it conducts unless that was ruled out.
    held: bool,
}

impl Solver<'_> {
    /// Applies all transfers of a device.
    pub(super) fn apply(&mut self, device: DeviceIx) {
        let template = self.template;
        let pins = template.device_pins(device);
        let context = self.context;
        let root = |pin: u8| context.root(pins[pin as usize]);
        let by = device.0;
        match self.terminals[template.types[device.0 as usize].0 as usize] {
            Terminals::Mos { d, g, s, b, n, threshold } => {
                let limited = if n { Side::Hi } else { Side::Lo };
                let gate = Gate { net: root(g), limited, threshold, held: self.ring.holds(device) };
                self.channel(root(d), root(s), gate, by);
                if let Some(b) = b.map(root) {
                    for end in [root(d), root(s)] {
                        if n { self.diode(b, end, by) } else { self.diode(end, b, by) }
                    }
                }
            }
            Terminals::Bipolar { c, b, e, n } => {
                let limited = if n { Side::Hi } else { Side::Lo };
                let base = Gate { net: root(b), limited, threshold: 0.0, held: self.ring.holds(device) };
                self.bipolar(root(c), base, root(e), by);
            }
            Terminals::Jfet { d, g, s, n } => {
                self.through(root(d), root(s), by);
                for end in [root(d), root(s)] {
                    if n { self.diode(root(g), end, by) } else { self.diode(end, root(g), by) }
                }
            }
            // A zener in breakdown pulls its cathode down and its anode up. Where its breakdown begins is not declared, only
            // where it is sure to hold (the cap), so the whole way is taken.
            Terminals::Diode { a, k, breaks: true } => self.through(root(a), root(k), by),
            Terminals::Diode { a, k, breaks: false } => {
                self.diode(root(a), root(k), by);
                self.drive(root(a), root(k));
            }
            Terminals::Through { a, b, .. } => self.through(root(a), root(b), by),
            Terminals::Source { plus, minus } => {
                if let Some((lo, hi)) = self.source_range(device) {
                    self.source(root(plus), root(minus), lo, hi, by);
                }
            }
            Terminals::Inductor { .. } | Terminals::Mute => {}
        }
    }

    /// At which ends of its channel a finished run rules out that a device conducts: the gate never gets beyond its threshold there.
    pub(super) fn rules_out(&self, device: DeviceIx) -> [bool; 2] {
        let pins = self.template.device_pins(device);
        let root = |pin: u8| self.context.root(pins[pin as usize]);
        match self.terminals[self.template.types[device.0 as usize].0 as usize] {
            Terminals::Mos { d, g, s, n, threshold, .. } => {
                [root(d), root(s)].map(|end| root(g) != end && self.never_beyond(root(g), end, n, threshold))
            }
            Terminals::Bipolar { b, e, n, .. } => [self.never_beyond(root(b), root(e), n, 0.0), false],
            _ => [false; 2],
        }
    }

    fn never_beyond(&self, gate: NetIx, x: NetIx, n: bool, threshold: f64) -> bool {
        let (high, low) = if n { (gate, x) } else { (x, gate) };
        let most = |frame| self.state.reach(high, frame).hi - self.state.reach(low, frame).lo;
        (0..self.state.frames).any(|frame| most(frame) <= threshold)
    }

    /// A MOS channel. On the limited side (n: high) a net follows its neighbour up to a threshold from the gate; on the other
    /// side it follows fully, if the channel can conduct there.
    fn channel(&mut self, d: NetIx, s: NetIx, gate: Gate, by: u32) {
        let (limited, full) = (gate.limited, gate.limited.other());
        let (at_d, at_s) = (self.conducts(gate, d, (by, 0)), self.conducts(gate, s, (by, 1)));
        // A ring of depletion devices can hold itself up: each adds what it needs.
        let held = gate.held && gate.threshold <= 0.0;
        if (at_d || at_s) && self.passes_drive(gate) {
            self.drive(d, s);
        }
        for frame in 0..self.state.frames {
            let gate = self.gate_end(gate, held, frame) - gate.threshold;
            let (from_d, from_s) = (self.state.value(d, frame, limited), self.state.value(s, frame, limited));
            self.raise(s, frame, limited, from_d.min(gate), by);
            self.raise(d, frame, limited, from_s.min(gate), by);
            if at_d {
                let value = self.state.value(d, frame, full);
                self.raise(s, frame, full, value, by);
            }
            if at_s {
                let value = self.state.value(s, frame, full);
                self.raise(d, frame, full, value, by);
            }
        }
    }

    /// Whether the gate can pass its threshold against the channel's end `x`.
    fn conducts(&self, gate: Gate, x: NetIx, (device, end): (u32, usize)) -> bool {
        if gate.threshold == f64::NEG_INFINITY {
            return true;
        }
        if gate.net == x {
            return gate.threshold < 0.0;
        }
        if gate.held && self.is_ruled_out(DeviceIx(device), end) {
            return false;
        }
        // What clamps say is asked only where the frames alone would let it conduct.
        self.beyond(gate, x) > gate.threshold && self.bounded_beyond(gate, x) > gate.threshold
    }

    /// How far a gate can be beyond `x` in the sense that opens its channel, by the frames alone; [`NOTHING`] while one of them has no
    /// value yet.
    fn beyond(&self, gate: Gate, x: NetIx) -> f64 {
        let mut least = f64::INFINITY;
        for frame in 0..self.state.frames {
            let (end, against) =
                (self.gate_end(gate, gate.held, frame), self.state.value(x, frame, gate.limited.other()));
            if end == NOTHING || against == NOTHING {
                return NOTHING;
            }
            least = least.min(end + against);
        }
        least
    }

    /// The same by clamps and body diodes.
    fn bounded_beyond(&self, gate: Gate, x: NetIx) -> f64 {
        let (high, low) = if gate.limited == Side::Hi { (gate.net, x) } else { (x, gate.net) };
        self.pair_bound(high, low).hi
    }

    /// Whether a channel that can conduct counts as a driver: where its gate is driven. In a ring, it also does where its gate turns on
    /// a device of each polarity, so that it cannot help to open one of them: crossed inverters drive each other, while a loop of
    /// current mirrors can rest without current, all its gates floating.
    fn passes_drive(&mut self, gate: Gate) -> bool {
        if gate.held {
            self.set_drive(gate.net, if gate.limited == Side::Hi { OPENED_ABOVE } else { OPENED_BELOW });
        }
        let both = OPENED_ABOVE | OPENED_BELOW;
        let drive = self.state.drive[gate.net.0 as usize];
        drive & DRIVEN != 0 || drive & both == both || self.state.is_fixed(gate.net) || gate.threshold < 0.0
    }

    fn gate_end(&self, gate: Gate, held: bool, frame: usize) -> f64 {
        if held { f64::INFINITY } else { self.state.value(gate.net, frame, gate.limited) }
    }

    /// A junction: its cathode follows its anode up, its anode follows its cathode down.
    fn diode(&mut self, a: NetIx, k: NetIx, by: u32) {
        for frame in 0..self.state.frames {
            let (up, down) = (self.state.value(a, frame, Side::Hi), self.state.value(k, frame, Side::Lo));
            self.raise(k, frame, Side::Hi, up, by);
            self.raise(a, frame, Side::Lo, down, by);
        }
    }

    fn through(&mut self, a: NetIx, b: NetIx, by: u32) {
        self.drive(a, b);
        for frame in 0..self.state.frames {
            for side in Side::BOTH {
                let (from_a, from_b) = (self.state.value(a, frame, side), self.state.value(b, frame, side));
                self.raise(b, frame, side, from_a, by);
                self.raise(a, frame, side, from_b, by);
            }
        }
    }

    fn source(&mut self, plus: NetIx, minus: NetIx, lo: f64, hi: f64, by: u32) {
        self.drive(plus, minus);
        for frame in 0..self.state.frames {
            for (to, from, up, down) in [(plus, minus, hi, -lo), (minus, plus, -lo, hi)] {
                let (high, low) = (self.state.value(from, frame, Side::Hi), self.state.value(from, frame, Side::Lo));
                self.raise_bounded(to, frame, Side::Hi, high + up, by);
                self.raise_bounded(to, frame, Side::Lo, low + down, by);
            }
        }
    }

    fn bipolar(&mut self, c: NetIx, base: Gate, e: NetIx, by: u32) {
        let (b, limited, full) = (base.net, base.limited, base.limited.other());
        let on = b != e
            && !(base.held && self.is_ruled_out(DeviceIx(by), 0))
            && self.beyond(base, e).min(self.bounded_beyond(base, e)) > 0.0;
        if on && self.passes_drive(base) {
            self.drive(c, e);
            self.drive(b, e);
        }
        for frame in 0..self.state.frames {
            let (at_c, at_b) = (self.state.value(c, frame, limited), self.state.value(b, frame, limited));
            self.raise(e, frame, limited, at_c.min(at_b), by);
            if on {
                let value = self.state.value(e, frame, full);
                self.raise(c, frame, full, value, by);
                self.raise(b, frame, full, value, by);
            }
        }
        for end in [e, c] {
            if limited == Side::Hi { self.diode(b, end, by) } else { self.diode(end, b, by) }
        }
    }

    /// Something conducting between two nets: what drives one drives the other.
    fn drive(&mut self, a: NetIx, b: NetIx) {
        let both = (self.state.drive[a.0 as usize] | self.state.drive[b.0 as usize]) & DRIVEN;
        self.set_drive(a, both);
        self.set_drive(b, both);
    }
}
