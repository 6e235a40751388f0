//! Which ports of a cell lead to which: the closure of its graph, seen from its boundary.

use super::components::{Edges, components};
use hashbrown::HashMap;

/// A node as its cell's surroundings count it: position at the boundary, twice, and the side.
pub(super) type PortNode = u32;

/// Cells of more ports than this are taken to lead from each port to all: finding out would take their number squared.
const MOST_PORTS: usize = 4096;

/// Which ends of ports lead to which, through the graph of the cell. Ends that lead to the same ones share an entry: in an array
/// of a thousand word and bit lines there is one.
pub(super) fn leads(edges: &Edges, ends: &[(PortNode, u32)]) -> Vec<(Vec<PortNode>, Vec<PortNode>)> {
    if edges.is_empty() || ends.is_empty() {
        return Vec::new();
    }
    if ends.len() > MOST_PORTS * 2 {
        let all: Vec<PortNode> = ends.iter().map(|&(port, _)| port).collect();
        return vec![(all.clone(), all)];
    }
    let component = components(edges);
    let mut own: HashMap<u32, Vec<usize>> = HashMap::new();
    for (index, &(_, node)) in ends.iter().enumerate() {
        own.entry(component[node as usize]).or_default().push(index);
    }
    let mut members: Vec<u32> = (0..edges.nodes() as u32).collect();
    members.sort_by_key(|&node| component[node as usize]);
    // For each component, the ends that it leads to, as a number of a set: edges lead to lower components, which are done.
    let mut sets = Sets::new(ends.len());
    let mut reached: Vec<u32> = Vec::new();
    for members in members.chunk_by(|&x, &y| component[x as usize] == component[y as usize]) {
        let this = reached.len() as u32;
        let mut next: Vec<u32> = members
            .iter()
            .flat_map(|&node| edges.from(node))
            .map(|&node| component[node as usize])
            .filter(|&component| component != this)
            .map(|component| reached[component as usize])
            .collect();
        next.sort_unstable();
        next.dedup();
        reached.push(sets.joined(&next, own.get(&this).map_or(&[], Vec::as_slice)));
    }
    let mut by_set: HashMap<u32, Vec<PortNode>> = HashMap::new();
    for &(port, node) in ends {
        by_set.entry(reached[component[node as usize] as usize]).or_default().push(port);
    }
    let mut leads: Vec<(Vec<PortNode>, Vec<PortNode>)> = by_set
        .into_iter()
        .map(|(set, from)| (from, sets.members(set).map(|index| ends[index].0).collect()))
        .filter(|(from, to): &(Vec<PortNode>, Vec<PortNode>)| from != to || from.len() > 1)
        .collect();
    leads.sort_unstable();
    leads
}

/// Sets of small numbers, each kept once. Number 0 is the empty one.
struct Sets {
    words: usize,
    all: Vec<Box<[u64]>>,
    known: HashMap<Box<[u64]>, u32>,
}

impl Sets {
    fn new(largest: usize) -> Sets {
        let words = largest.div_ceil(64);
        let empty = vec![0; words].into_boxed_slice();
        Sets { words, all: vec![empty.clone()], known: HashMap::from_iter([(empty, 0)]) }
    }

    /// What is in any of the sets, or among the further members.
    fn joined(&mut self, sets: &[u32], further: &[usize]) -> u32 {
        match (sets, further) {
            ([], []) => return 0,
            ([one], []) | ([0, one], []) => return *one,
            _ => {}
        }
        let mut joined = vec![0; self.words].into_boxed_slice();
        for &set in sets {
            joined.iter_mut().zip(&self.all[set as usize]).for_each(|(word, &other)| *word |= other);
        }
        for &member in further {
            joined[member / 64] |= 1 << (member % 64);
        }
        if let Some(&known) = self.known.get(&joined) {
            return known;
        }
        let number = self.all.len() as u32;
        self.all.push(joined.clone());
        self.known.insert(joined, number);
        number
    }

    fn members(&self, set: u32) -> impl Iterator<Item = usize> + '_ {
        let words = self.all[set as usize].iter().enumerate();
        words.flat_map(|(at, &word)| (0..64).filter(move |bit| word >> bit & 1 == 1).map(move |bit| at * 64 + bit))
    }
}
