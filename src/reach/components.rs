//! Strongly connected components of a graph given by its edges (R. E. Tarjan, "Depth-first search and linear graph algorithms", SIAM
//! J. Comput. 1(2), 1972, with a list in place of recursion: logic is deeper than a stack).

/// Edges by the node that they leave.
pub(super) struct Edges {
    first: Vec<u32>,
    to: Vec<u32>,
}

impl Edges {
    /// Sorts edges `(from, to)` among `nodes` nodes.
    pub(super) fn new(nodes: usize, edges: &[(u32, u32)]) -> Edges {
        let mut first = vec![0u32; nodes + 1];
        for &(from, _) in edges {
            first[from as usize + 1] += 1;
        }
        for at in 1..first.len() {
            first[at] += first[at - 1];
        }
        let (mut to, mut next) = (vec![0; edges.len()], first.clone());
        for &(from, target) in edges {
            to[next[from as usize] as usize] = target;
            next[from as usize] += 1;
        }
        Edges { first, to }
    }

    /// Where the edges of a node lead.
    pub(super) fn from(&self, node: u32) -> &[u32] {
        &self.to[self.first[node as usize] as usize..self.first[node as usize + 1] as usize]
    }

    pub(super) fn is_empty(&self) -> bool {
        self.to.is_empty()
    }

    /// How many nodes there are.
    pub(super) fn nodes(&self) -> usize {
        self.first.len() - 1
    }
}

const NOT_YET: u32 = u32::MAX;

/// For each node its component, numbered so that every edge stays in its component or leads to a lower number.
pub(super) fn components(edges: &Edges) -> Vec<u32> {
    let nodes = edges.nodes();
    let (mut order, mut low, mut component) = (vec![NOT_YET; nodes], vec![0u32; nodes], vec![NOT_YET; nodes]);
    let (mut visited, mut closed) = (0u32, 0u32);
    let mut waiting: Vec<u32> = Vec::new();
    // Nodes on the way, each with the next of its edges to follow.
    let mut way: Vec<(u32, usize)> = Vec::new();
    for start in 0..nodes as u32 {
        if order[start as usize] == NOT_YET {
            way.push((start, 0));
        }
        while let Some(&(node, next)) = way.last() {
            let at = node as usize;
            if next == 0 && order[at] == NOT_YET {
                (order[at], low[at]) = (visited, visited);
                visited += 1;
                waiting.push(node);
            }
            if let Some(&target) = edges.from(node).get(next) {
                if let Some(last) = way.last_mut() {
                    last.1 += 1;
                }
                if order[target as usize] == NOT_YET {
                    way.push((target, 0));
                } else if component[target as usize] == NOT_YET {
                    low[at] = low[at].min(order[target as usize]);
                }
                continue;
            }
            way.pop();
            if let Some(&(above, _)) = way.last() {
                low[above as usize] = low[above as usize].min(low[at]);
            }
            if low[at] == order[at] {
                while let Some(member) = waiting.pop() {
                    component[member as usize] = closed;
                    if member == node {
                        break;
                    }
                }
                closed += 1;
            }
        }
    }
    component
}

#[cfg(test)]
mod tests {
    use super::*;
    use petgraph::algo::kosaraju_scc;
    use petgraph::graph::DiGraph;
    use proptest::prelude::*;

    proptest! {
        /// Against another algorithm of another author: the library petgraph's, after Kosaraju.
        #[test]
        fn components_are_those_of_another_algorithm(list in prop::collection::vec((0u32..24, 0u32..24), 0..60)) {
            let ours = components(&Edges::new(24, &list));
            let mut graph = DiGraph::<(), ()>::new();
            let nodes: Vec<_> = (0..24).map(|_| graph.add_node(())).collect();
            for &(from, to) in &list {
                graph.add_edge(nodes[from as usize], nodes[to as usize], ());
                prop_assert!(ours[to as usize] <= ours[from as usize]);
            }
            let mut theirs = [usize::MAX; 24];
            for (number, members) in kosaraju_scc(&graph).into_iter().enumerate() {
                members.into_iter().for_each(|member| theirs[member.index()] = number);
            }
            for a in 0..24 {
                for b in 0..24 {
                    prop_assert_eq!(ours[a] == ours[b], theirs[a] == theirs[b]);
                }
            }
        }
    }

    #[test]
    fn a_long_chain_needs_no_stack() {
        let chain: Vec<(u32, u32)> = (0..999_999).map(|at| (at, at + 1)).collect();
        assert_eq!(components(&Edges::new(1_000_000, &chain))[999_999], 0);
    }
}
