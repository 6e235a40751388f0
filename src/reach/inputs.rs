//! What a cell is asked and what it answers, in one mode: the ranges that its surroundings bring to its ports, and those that it
//! adds. Both are values, so that equal instances are asked once.

use super::held::HeldIx;
use super::interval::Interval;
use super::rings::RingIx;
use super::state::{Side, State};
use crate::design::Template;
use crate::graph::{Context, ContextIx};

/// What the surroundings bring to a context in one mode, at its boundary positions. Positions that are one net agree.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Inputs {
    /// For each position, frame and side; as in [`State`].
    pub(super) values: Vec<f64>,
    pub(super) drive: Vec<u8>,
    /// Rails and nets of which nothing is known.
    pub(super) fixed: Vec<bool>,
    /// Whether something outside ties the port to a rail.
    pub(super) tied: Vec<bool>,
    /// Whether conducting paths outside lead from the port to an undeclared port or global of the top.
    pub(super) open: Vec<bool>,
    /// What clamps and body diodes outside hold the ports to: as `values`, infinite where they say nothing; empty where they say
    /// nothing of any port.
    pub(super) caps: Vec<f64>,
    /// Clamps outside between ports: positions and range of V(x) − V(y).
    pub(super) bounds: Vec<(u32, u32, Interval)>,
    /// The rings through the context and below.
    pub(super) ring: RingIx,
    /// What is ruled out in them.
    pub(super) held: HeldIx,
}

/// The inputs as a key: all of them as numbers, values by their bits, in one piece.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub(super) struct InputKey(Box<[u64]>);

impl Inputs {
    pub(super) fn key(&self, at: ContextIx, mode: u32) -> InputKey {
        let mut numbers = Vec::with_capacity(
            3 + self.values.len() + self.caps.len() + self.drive.len().div_ceil(8) + self.bounds.len() * 3,
        );
        let pair = |high: u32, low: u32| u64::from(high) << 32 | u64::from(low);
        // How many values, caps and bounds there are stands in front, so that no two inputs look alike.
        numbers.extend([
            pair(at.0, mode),
            pair(self.ring, self.held),
            pair(self.caps.len() as u32, self.bounds.len() as u32),
        ]);
        let bits = |value: &f64| if *value == 0.0 { 0 } else { value.to_bits() };
        numbers.extend(self.values.iter().map(bits));
        numbers.extend(self.caps.iter().map(bits));
        let mut flags = (0..self.drive.len()).map(|at| self.flags(at));
        while let Some(first) = flags.next() {
            let eight = flags.by_ref().take(7).fold(u64::from(first), |packed, flag| packed << 8 | u64::from(flag));
            numbers.push(eight);
        }
        for &(x, y, range) in &self.bounds {
            numbers.extend([pair(x, y), range.lo.to_bits(), range.hi.to_bits()]);
        }
        InputKey(numbers.into_boxed_slice())
    }

    /// These inputs after the context has added its answer.
    pub(super) fn with(&self, answer: &Answer) -> Inputs {
        let mut joined = self.clone();
        let per_port = self.values.len() / self.drive.len().max(1);
        for (at, value) in joined.values.iter_mut().enumerate() {
            if !self.fixed[at / per_port] {
                *value = value.max(answer.values[at]);
            }
        }
        for (drive, &answered) in joined.drive.iter_mut().zip(&answer.drive) {
            *drive |= answered;
        }
        joined
    }

    fn flags(&self, at: usize) -> u8 {
        u8::from(self.fixed[at]) | u8::from(self.tied[at]) << 1 | u8::from(self.open[at]) << 2 | self.drive[at] << 3
    }
}

/// What a context adds to its ports: values and what drives them, by boundary position.
#[derive(Clone, Debug, Default)]
pub(super) struct Answer {
    pub(super) values: Vec<f64>,
    pub(super) drive: Vec<u8>,
}

impl Answer {
    /// The boundary values of a finished state.
    pub(super) fn of(state: &State, template: &Template, context: &Context) -> Answer {
        let mut answer = Answer::default();
        for net in template.boundary() {
            let net = context.root(net);
            let from = state.at(net, 0, Side::Hi);
            answer.values.extend_from_slice(&state.values[from..from + state.frames * 2]);
            answer.drive.push(state.drive[net.0 as usize]);
        }
        answer
    }
}
