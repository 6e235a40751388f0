//! Which cells the design needs, their connections, and the order in which they stand on one another.

use super::template::{Built, Guarded, Reader};
use super::{Design, NetIx, Template};
use crate::diag::Diagnostic;
use crate::names::{Sym, nearest};
use crate::netlist::tree::CellIx;
use crate::source::Span;
use hashbrown::HashMap;
use petgraph::algo::tarjan_scc;
use petgraph::graph::{DiGraph, NodeIndex};

/// What elaboration of variants starts from.
#[derive(Default)]
pub(super) struct Cells {
    /// For each cell, its template before conditions; none for cells that nothing needs.
    pub(super) template: Vec<Option<u32>>,
    /// By template: what stands under conditions.
    pub(super) guarded: Vec<Vec<Guarded>>,
    /// The cells that are judged.
    pub(super) tops: Vec<CellIx>,
}

/// Reads the cells that the tops reach.
pub(super) fn build(design: &mut Design<'_>, top: Option<(&str, Span)>) -> Cells {
    let tree = std::mem::take(&mut design.tree);
    let names = std::mem::take(&mut design.names);
    let mut reader = Reader::new(&tree, design.sources, names, design.classes);
    let mut cells = Cells { template: vec![None; tree.cells.len()], ..Cells::default() };
    let mut built: Vec<Built> = Vec::new();
    let named = top.map(|(name, span)| (find_top(&mut reader, name, span), span));
    let seeds = seeds(&mut reader, named.map(|(cell, _)| cell));
    let mut waiting = seeds.clone();
    while let Some(cell) = waiting.pop() {
        if cells.template[cell.0 as usize].is_some() {
            continue;
        }
        cells.template[cell.0 as usize] = Some(built.len() as u32);
        let done = reader.read_cell(cell);
        waiting.extend(done.template.instances.iter().map(|instance| instance.cell));
        built.push(done);
    }
    let graph = InstanceGraph::new(&cells, &built);
    cells.tops = if top.is_some() || seeds == [CellIx(0)] { seeds } else { graph.roots(&cells, &seeds) };
    graph.cut_cycles(&mut built, &mut reader);
    let order = graph.bottom_up();
    for at in order {
        share_upward(&mut built, &cells, at);
    }
    design.names = reader.names;
    design.types = reader.types;
    design.diagnostics = reader.diagnostics;
    design.oddities = reader.oddities;
    design.cards_skipped = reader.cards_skipped;
    design.tree = tree;
    for done in built {
        design.templates.push(done.template);
        cells.guarded.push(done.guarded);
    }
    cells
}

fn find_top(reader: &mut Reader<'_>, name: &str, span: Span) -> Option<CellIx> {
    let found = reader.names.find(name).and_then(|name| reader.find_cell(CellIx(0), name));
    if found.is_none() {
        let known: Vec<&str> = reader.tree.cells.iter().skip(1).map(|cell| reader.names.text(cell.name.name)).collect();
        let near = nearest(name, known.iter().copied());
        let help = match (near, known.as_slice()) {
            (Some(near), _) => format!("did you mean `{near}`?"),
            (None, []) => {
                "the netlist defines no cell: leave `top` out to judge the statements at top level".to_owned()
            }
            (None, all) => format!("the netlist defines {}", list(all)),
        };
        let fault = Diagnostic::error("top", span, format!("no cell is called `{name}`")).with_help(help);
        reader.diagnostics.push(fault);
    }
    found
}

fn list(all: &[&str]) -> String {
    let shown: Vec<String> = all.iter().take(8).map(|name| format!("`{name}`")).collect();
    let more = if all.len() > 8 { format!(" and {} more", all.len() - 8) } else { String::new() };
    shown.join(", ") + &more
}

/// The cells to begin reading with: the named top, the top level where it holds statements, else every cell.
fn seeds(reader: &mut Reader<'_>, named: Option<Option<CellIx>>) -> Vec<CellIx> {
    let tree = reader.tree;
    match named {
        Some(found) => found.into_iter().collect(),
        None if tree.cells.first().is_some_and(|top| !top.cards.is_empty()) => vec![CellIx(0)],
        None => {
            let outer = |&index: &usize| tree.cells[index].parent == Some(CellIx(0));
            let cells: Vec<CellIx> = (1..tree.cells.len()).filter(outer).map(|index| CellIx(index as u32)).collect();
            cells.into_iter().filter(|cell| reader.is_leaf(tree.cells[cell.0 as usize].name.name).is_none()).collect()
        }
    }
}

/// Which cells call which. Nodes are templates; an edge for each pair of cells, however many instances.
struct InstanceGraph {
    graph: DiGraph<CellIx, ()>,
    components: Vec<Vec<NodeIndex>>,
}

impl InstanceGraph {
    fn new(cells: &Cells, built: &[Built]) -> InstanceGraph {
        let mut graph = DiGraph::with_capacity(built.len(), built.len());
        for done in built {
            graph.add_node(done.template.cell.unwrap_or(CellIx(0)));
        }
        for (index, done) in built.iter().enumerate() {
            let mut called: Vec<u32> = done
                .template
                .instances
                .iter()
                .filter_map(|instance| cells.template[instance.cell.0 as usize])
                .collect();
            called.sort_unstable();
            called.dedup();
            for child in called {
                graph.add_edge(NodeIndex::new(index), NodeIndex::new(child as usize), ());
            }
        }
        let components = tarjan_scc(&graph);
        InstanceGraph { graph, components }
    }

    /// Those of the cells that no other cell calls.
    fn roots(&self, cells: &Cells, of: &[CellIx]) -> Vec<CellIx> {
        let called = |cell: CellIx| {
            cells.template[cell.0 as usize].map(|node| NodeIndex::new(node as usize)).is_some_and(|node| {
                self.graph.neighbors_directed(node, petgraph::Direction::Incoming).any(|caller| caller != node)
            })
        };
        let roots: Vec<CellIx> = of.iter().copied().filter(|&cell| !called(cell)).collect();
        if roots.is_empty() { of.to_vec() } else { roots }
    }

    /// Templates from the leaves up (a component of Tarjan's algorithm comes after those it calls).
    fn bottom_up(&self) -> Vec<usize> {
        self.components.iter().flatten().map(|node| node.index()).collect()
    }

    /// Cells that contain themselves: the calls that close a ring are reported and taken out.
    fn cut_cycles(&self, built: &mut [Built], reader: &mut Reader<'_>) {
        for component in &self.components {
            let ring: Vec<CellIx> = component.iter().map(|&node| self.graph[node]).collect();
            for &node in component {
                let template = &mut built[node.index()].template;
                let inside =
                    |cell: CellIx| ring.contains(&cell) && (ring.len() > 1 || self.graph.contains_edge(node, node));
                let Some(first) = template.instances.iter().find(|instance| inside(instance.cell)).cloned() else {
                    continue;
                };
                let name = |cell: CellIx| reader.names.text(reader.tree.cells[cell.0 as usize].name.name).to_owned();
                let end =
                    reader.sources.text(first.file)[first.card as usize..].find(['\n', '\r']).map_or(0, |n| n as u32);
                let span = Span::new(first.file, first.card, first.card + end);
                let message = format!("the cell `{}` contains itself", name(self.graph[node]));
                let mut fault =
                    Diagnostic::error("netlist", span, message).with_label(format!("calls `{}`", name(first.cell)));
                for &other in ring.iter().filter(|&&other| other != self.graph[node]).take(8) {
                    fault = fault.with_place(
                        reader.tree.cells[other.0 as usize].name.span,
                        format!("by way of `{}`", name(other)),
                    );
                }
                reader.diagnostics.push(fault.with_help("break the ring: one of these calls must name another cell"));
                template.instances.retain(|instance| !inside(instance.cell));
            }
        }
    }
}

/// Gives a cell the shared nets that its inner cells use, and connects those to them.
fn share_upward(built: &mut [Built], cells: &Cells, at: usize) {
    let instances = std::mem::take(&mut built[at].template.instances);
    let mut done = std::mem::replace(&mut built[at], empty());
    let mut local: HashMap<Sym, NetIx> = done.shared.iter().copied().collect();
    let mut rewired = Vec::with_capacity(instances.len());
    for mut instance in instances {
        let child = cells.template[instance.cell.0 as usize].map(|child| &built[child as usize]);
        let shared: &[(Sym, NetIx)] = child.map_or(&[], |child| &child.shared);
        if !shared.is_empty() {
            let template = &mut done.template;
            let first = template.links.len() as u32;
            template.links.extend_from_within(instance.pins.start as usize..instance.pins.end as usize);
            for &(name, _) in shared {
                let net = *local.entry(name).or_insert_with(|| {
                    template.nets.push(name);
                    let net = NetIx(template.nets.len() as u32 - 1);
                    done.shared.push((name, net));
                    net
                });
                template.links.push(net);
            }
            instance.pins = first..template.links.len() as u32;
        }
        rewired.push(instance);
    }
    done.template.instances = rewired;
    done.template.implicit = done.shared.iter().map(|&(_, net)| net).collect();
    built[at] = done;
}

fn empty() -> Built {
    Built { template: Template::default(), guarded: Vec::new(), shared: Vec::new() }
}
