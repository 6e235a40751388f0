//! What each kind of device passes on: the table of transfers, each written once for both polarities.
//!
//! With the lowest voltage kept negated, a p-channel device does to one side what an n-channel device does to the other.

use super::solve::Solver;
use super::state::{NOTHING, Side};
use super::terminals::Terminals;
use crate::design::{DeviceIx, NetIx};

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
                self.channel(root(d), root(g), root(s), limited, threshold, by);
                if let Some(b) = b.map(root) {
                    for end in [root(d), root(s)] {
                        if n { self.diode(b, end, by) } else { self.diode(end, b, by) }
                    }
                }
            }
            Terminals::Bipolar { c, b, e, n } => self.bipolar(root(c), root(b), root(e), n, by),
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

    /// A MOS channel. On the limited side (n: high) a net follows its neighbour up to a threshold from the gate; on the other
    /// side it follows fully, if the channel can conduct there.
    fn channel(&mut self, d: NetIx, g: NetIx, s: NetIx, limited: Side, threshold: f64, by: u32) {
        let full = if limited == Side::Hi { Side::Lo } else { Side::Hi };
        let (at_d, at_s) = (self.conducts(g, d, limited, threshold), self.conducts(g, s, limited, threshold));
        if at_d || at_s {
            self.drive(d, s);
        }
        for frame in 0..self.state.frames {
            let gate = self.state.value(g, frame, limited) - threshold;
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
    fn conducts(&self, g: NetIx, x: NetIx, limited: Side, threshold: f64) -> bool {
        if threshold == f64::NEG_INFINITY {
            return true;
        }
        let drive = match limited {
            _ if g == x => 0.0,
            Side::Hi => self.highest(g, x),
            Side::Lo => self.highest(x, g),
        };
        drive > threshold
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

    fn bipolar(&mut self, c: NetIx, b: NetIx, e: NetIx, n: bool, by: u32) {
        let (limited, full) = if n { (Side::Hi, Side::Lo) } else { (Side::Lo, Side::Hi) };
        let on = if n { self.highest(b, e) } else { self.highest(e, b) } > 0.0 && b != e;
        if on {
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
            if n { self.diode(b, end, by) } else { self.diode(end, b, by) }
        }
    }

    /// Something conducting between two nets: what drives one drives the other.
    fn drive(&mut self, a: NetIx, b: NetIx) {
        let (at_a, at_b) = (self.state.driven[a.0 as usize], self.state.driven[b.0 as usize]);
        if at_a != at_b {
            self.set_driven(if at_a { b } else { a });
        }
    }

    /// The highest that `x` can be above `y`, by the frames and by clamps between them.
    pub(super) fn highest(&self, x: NetIx, y: NetIx) -> f64 {
        let by_frames = self.state.above(x, y);
        if by_frames == NOTHING { NOTHING } else { by_frames.min(self.pair_bound(x, y).hi) }
    }
}
