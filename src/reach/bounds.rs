//! What clamps and body diodes say of the voltage between two nets: a small table that grows, for what comes from outside a cell,
//! and a packed one of a cell's own structure, in which a rail with a million devices on it costs no more than any net.

use super::interval::Interval;
use crate::design::NetIx;
use hashbrown::HashMap;

/// Bounds of pairs, looked up by the pair.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct PairBounds {
    by_pair: HashMap<(NetIx, NetIx), Interval>,
}

impl PairBounds {
    /// V(x) − V(y) stays in the range, too.
    pub(super) fn add(&mut self, x: NetIx, y: NetIx, range: Interval) {
        if x == y {
            return;
        }
        let (key, range) = if x < y { ((x, y), range) } else { ((y, x), range.negated()) };
        let known = self.by_pair.entry(key).or_insert(Interval::ANY);
        *known = known.and(range);
    }

    /// What is known of V(x) − V(y).
    pub(super) fn between(&self, x: NetIx, y: NetIx) -> Interval {
        if self.by_pair.is_empty() {
            return Interval::ANY;
        }
        let found = |x: NetIx, y: NetIx| self.by_pair.get(&(x, y)).copied();
        if x < y { found(x, y) } else { found(y, x).map(Interval::negated) }.unwrap_or(Interval::ANY)
    }

    pub(super) fn is_empty(&self) -> bool {
        self.by_pair.is_empty()
    }

    /// All pairs, in no particular order: V(x) − V(y) is in the range.
    pub(super) fn iter(&self) -> impl Iterator<Item = (NetIx, NetIx, Interval)> + '_ {
        self.by_pair.iter().map(|(&(x, y), &range)| (x, y, range))
    }
}

/// Ranges by number: a design has few different ones.
#[derive(Debug, Default)]
struct Ranges {
    all: Vec<Interval>,
    known: HashMap<(u64, u64), u32>,
}

impl Ranges {
    fn number(&mut self, range: Interval) -> u32 {
        let new = self.all.len() as u32;
        let number = *self.known.entry((range.lo.to_bits(), range.hi.to_bits())).or_insert(new);
        if number == new {
            self.all.push(range);
        }
        number
    }
}

/// Bounds in the making: `(x, y, number of a range)`, with x < y. 12 bytes each.
#[derive(Debug, Default)]
pub(super) struct PairList {
    pairs: Vec<(u32, u32, u32)>,
    ranges: Ranges,
}

impl PairList {
    /// V(x) − V(y) stays in the range, too.
    pub(super) fn add(&mut self, x: NetIx, y: NetIx, range: Interval) {
        if x == y {
            return;
        }
        let (x, y, range) = if x < y { (x.0, y.0, range) } else { (y.0, x.0, range.negated()) };
        let number = self.ranges.number(range);
        self.pairs.push((x, y, number));
    }

    /// Packs the list for a cell of so many nets.
    pub(super) fn pack(mut self, nets: usize) -> PairTable {
        if self.pairs.is_empty() {
            return PairTable::default();
        }
        let mut degree = vec![0u32; nets];
        for &(x, y, _) in &self.pairs {
            degree[x as usize] += 1;
            degree[y as usize] += 1;
        }
        // Each pair stands with that of its nets which has fewer, so that no list is long.
        let owner = |x: u32, y: u32| if degree[x as usize] <= degree[y as usize] { (x, y) } else { (y, x) };
        let mut first = vec![0u32; nets + 1];
        self.pairs.iter().for_each(|&(x, y, _)| first[owner(x, y).0 as usize + 1] += 1);
        for at in 1..first.len() {
            first[at] += first[at - 1];
        }
        let mut next = first.clone();
        let mut entries = vec![(0, 0); self.pairs.len()];
        for &(x, y, range) in &self.pairs {
            let (owner, other) = owner(x, y);
            entries[next[owner as usize] as usize] = (other, range);
            next[owner as usize] += 1;
        }
        self.pairs = Vec::new();
        let mut kept = 0;
        for net in 0..nets {
            let range = first[net] as usize..first[net + 1] as usize;
            first[net] = kept as u32;
            entries[range.clone()].sort_unstable();
            for at in range.clone() {
                let (other, number) = entries[at];
                if at > range.start && kept > first[net] as usize && entries[kept - 1].0 == other {
                    let both = self.ranges.all[entries[kept - 1].1 as usize].and(self.ranges.all[number as usize]);
                    entries[kept - 1].1 = self.ranges.number(both);
                } else {
                    entries[kept] = (other, number);
                    kept += 1;
                }
            }
        }
        first[nets] = kept as u32;
        entries.truncate(kept);
        entries.shrink_to_fit();
        let speaks = degree.iter().map(|&pairs| pairs > 0).collect();
        PairTable { first, entries, ranges: self.ranges.all, speaks }
    }
}

/// The bounds of a cell's own clamps and body diodes: 5 bytes a net and 8 a pair, nothing where there are none.
#[derive(Debug, Default)]
pub(super) struct PairTable {
    first: Vec<u32>,
    /// The other net, and the number of the range of V(lower net) − V(higher net).
    entries: Vec<(u32, u32)>,
    ranges: Vec<Interval>,
    speaks: Vec<bool>,
}

impl PairTable {
    pub(super) fn is_empty(&self) -> bool {
        self.entries.is_empty()
    }

    /// Whether some pair speaks of a net.
    pub(super) fn speaks_of(&self, net: NetIx) -> bool {
        self.speaks.get(net.0 as usize).is_some_and(|&speaks| speaks)
    }

    /// What is known of V(x) − V(y).
    pub(super) fn between(&self, x: NetIx, y: NetIx) -> Interval {
        if !self.speaks_of(x) || !self.speaks_of(y) || x == y {
            return Interval::ANY;
        }
        let Some(number) = self.held_by(x, y).or_else(|| self.held_by(y, x)) else { return Interval::ANY };
        let range = self.ranges[number as usize];
        if x < y { range } else { range.negated() }
    }

    fn held_by(&self, owner: NetIx, other: NetIx) -> Option<u32> {
        let list = self.list(owner.0);
        list.binary_search_by_key(&other.0, |entry| entry.0).ok().map(|at| list[at].1)
    }

    fn list(&self, owner: u32) -> &[(u32, u32)] {
        &self.entries[self.first[owner as usize] as usize..self.first[owner as usize + 1] as usize]
    }

    /// All pairs, in no particular order: V(x) − V(y) is in the range, x before y.
    pub(super) fn iter(&self) -> impl Iterator<Item = (NetIx, NetIx, Interval)> + '_ {
        let owners = 0..self.first.len().saturating_sub(1) as u32;
        owners.flat_map(move |owner| {
            self.list(owner).iter().map(move |&(other, number)| {
                (NetIx(owner.min(other)), NetIx(owner.max(other)), self.ranges[number as usize])
            })
        })
    }
}

/// What clamps and body diodes against rails hold nets to: for each frame, the highest voltage and the negated lowest one. 4 bytes a
/// net, nothing where there are none.
#[derive(Clone, Debug, Default)]
pub(super) struct Caps {
    /// One more than the net's place among those that have caps.
    place: Vec<u32>,
    values: Vec<f64>,
    ends: usize,
}

impl Caps {
    /// The caps of a net, if it has some.
    pub(super) fn of(&self, net: NetIx) -> Option<&[f64]> {
        match self.place.get(net.0 as usize) {
            None | Some(0) => None,
            Some(&place) => Some(&self.values[(place as usize - 1) * self.ends..place as usize * self.ends]),
        }
    }

    /// The caps of a net to be lowered, in a cell of so many nets and with so many ends (two for each frame).
    pub(super) fn lower(&mut self, net: NetIx, nets: usize, ends: usize) -> &mut [f64] {
        if self.place.is_empty() {
            self.place = vec![0; nets];
            self.ends = ends;
        }
        let place = &mut self.place[net.0 as usize];
        if *place == 0 {
            self.values.resize(self.values.len() + ends, f64::INFINITY);
            *place = (self.values.len() / ends) as u32;
        }
        let end = *place as usize * ends;
        &mut self.values[end - ends..end]
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The packed table says what the growing one says, whichever net of a pair is asked about first.
    #[test]
    fn packed_bounds_say_the_same() {
        let mut state = 7u64;
        let mut next = |below: u64| {
            state = state.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
            (state >> 33) % below
        };
        for _ in 0..200 {
            let nets = 2 + next(12) as u32;
            let (mut growing, mut list) = (PairBounds::default(), PairList::default());
            for _ in 0..next(40) {
                let (x, y) = (NetIx(next(nets.into()) as u32), NetIx(next(nets.into()) as u32));
                let lo = -(next(5) as f64);
                let hi = if next(3) == 0 { f64::INFINITY } else { next(5) as f64 };
                growing.add(x, y, Interval { lo, hi });
                list.add(x, y, Interval { lo, hi });
            }
            let packed = list.pack(nets as usize);
            for x in (0..nets).map(NetIx) {
                for y in (0..nets).map(NetIx) {
                    assert_eq!(packed.between(x, y), growing.between(x, y));
                }
            }
            let mut all: Vec<_> = packed.iter().map(|(x, y, range)| (x, y, range.lo, range.hi)).collect();
            let mut wanted: Vec<_> = growing.iter().map(|(x, y, range)| (x, y, range.lo, range.hi)).collect();
            all.sort_by_key(|&(x, y, ..)| (x, y));
            wanted.sort_by_key(|&(x, y, ..)| (x, y));
            assert_eq!(all, wanted);
        }
    }
}
