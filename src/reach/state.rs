//! The state of one cell's nets in one mode: all values as raises from nothing.

use super::interval::Interval;
use crate::design::NetIx;

/// Which end of a range: the highest voltage, or the lowest one (kept negated, so that both ends grow upward).
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Side {
    /// Highest voltage.
    Hi,
    /// Negated lowest voltage.
    Lo,
}

impl Side {
    /// Both ends.
    pub const BOTH: [Side; 2] = [Side::Hi, Side::Lo];
    pub(super) fn index(self) -> usize {
        self as usize
    }

    pub(super) fn other(self) -> Side {
        match self {
            Side::Hi => Side::Lo,
            Side::Lo => Side::Hi,
        }
    }
}

/// No value yet: nothing has reached the net on that side.
pub(super) const NOTHING: f64 = f64::NEG_INFINITY;

/// Who set an end: nobody (a rail, or a value from outside the cell).
pub(super) const OUTSIDE: u32 = u32::MAX;
/// The mark of an instance's answer among setters.
pub(super) const ANSWER: u32 = 1 << 31;

/// Something conducting connects the net with a rail.
pub(super) const DRIVEN: u8 = 1;
/// The net is the gate of an n-channel device in a ring, and of a p-channel one: wherever it stands, one of them conducts.
pub(super) const OPENED_ABOVE: u8 = 2;
/// See [`OPENED_ABOVE`].
pub(super) const OPENED_BELOW: u8 = 4;

/// Values of all nets of one cell in all frames, in one mode.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct State {
    pub(super) frames: usize,
    /// For each net, frame and side.
    pub(super) values: Vec<f64>,
    /// Who set each value; empty where nobody asked to remember.
    pub(super) setters: Vec<u32>,
    /// For each net, what is known of its drive in this mode: [`DRIVEN`], [`OPENED_ABOVE`], [`OPENED_BELOW`].
    pub(super) drive: Vec<u8>,
    /// Rails, and nets of which nothing is known: never raised.
    pub(super) fixed: Vec<bool>,
    /// Answers of instances that raised something: the instance and the answer's number.
    pub(super) answers: Vec<(u32, u32)>,
}

impl State {
    pub(super) fn new(nets: usize, frames: usize, remember: bool) -> State {
        State {
            frames,
            values: vec![NOTHING; nets * frames * 2],
            setters: if remember { vec![OUTSIDE; nets * frames * 2] } else { Vec::new() },
            drive: vec![0; nets],
            fixed: vec![false; nets],
            answers: Vec::new(),
        }
    }

    pub(super) fn at(&self, net: NetIx, frame: usize, side: Side) -> usize {
        (net.0 as usize * self.frames + frame) * 2 + side.index()
    }

    pub(super) fn value(&self, net: NetIx, frame: usize, side: Side) -> f64 {
        self.values[self.at(net, frame, side)]
    }

    /// The reach of a (root) net in a frame; an end that nothing reached, or that is not known, is infinite.
    ///
    /// Where what pulls up ends below where what pulls down ends, neither conducts in between, and the net floats there: the
    /// range is that gap.
    pub fn reach(&self, net: NetIx, frame: usize) -> Interval {
        let (hi, lo) = (self.value(net, frame, Side::Hi), self.value(net, frame, Side::Lo));
        if hi != NOTHING && lo != NOTHING && -lo > hi {
            return Interval { lo: hi, hi: -lo };
        }
        Interval {
            lo: if lo == NOTHING { f64::NEG_INFINITY } else { -lo },
            hi: if hi == NOTHING { f64::INFINITY } else { hi },
        }
    }

    /// Whether something conducting connects the (root) net with a rail in this mode.
    pub fn is_driven(&self, net: NetIx) -> bool {
        self.drive[net.0 as usize] & DRIVEN != 0
    }

    /// Whether a (root) net's value is given: a rail, or a net of which nothing is known.
    pub fn is_fixed(&self, net: NetIx) -> bool {
        self.fixed[net.0 as usize]
    }
}
