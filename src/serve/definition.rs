//! Where the thing at the cursor in a netlist is defined: cells and parameters in netlists, classes and rails in decks.

use super::look::{Look, net, places};
use super::spot::{Spot, What, spot};
use super::told::is_file;
use crate::facts::World;
use crate::graph::{Mark, rail};
use crate::names::Sym;
use crate::netlist::tree::{CellIx, Param};
use crate::reach::ReachIx;
use crate::source::{FileId, Span};
use std::collections::BTreeSet;

/// At most this many places are given.
const MOST: usize = 20;
/// At most this many surroundings of a cell are asked for rails.
const MOST_SEEN: usize = 2000;

/// The places that define what stands at byte `offset` of a file.
pub(super) fn definition(look: &Look<'_>, file: FileId, offset: u32) -> Vec<Span> {
    let Some(world) = look.world else { return Vec::new() };
    let Some(spot) = spot(world.design, file, offset) else { return Vec::new() };
    match spot.what {
        What::Net(name) => of_net(world, look, spot.cell, name),
        What::Card(card) => called(world, spot, card).map(|cell| cell_place(world, cell)).into_iter().collect(),
        What::Model(name) => of_model(world, look, spot.cell, name).into_iter().collect(),
        What::Cell(cell) => vec![cell_place(world, cell)],
        What::Parameter(name) => of_parameter(world, spot.cell, name),
    }
}

fn cell_place(world: World<'_>, cell: CellIx) -> Span {
    world.design.tree.cells[cell.0 as usize].name.span
}

fn called(world: World<'_>, spot: Spot, card: u32) -> Option<CellIx> {
    let calls = world.design.templates.iter().filter(|template| template.cell == Some(spot.cell));
    let mut calls = calls.flat_map(|template| &template.instances);
    calls.find(|call| (call.file, call.card) == (spot.span.file, card)).map(|call| call.cell)
}

/// The rails that a net is, else the port of its cell.
fn of_net(world: World<'_>, look: &Look<'_>, cell: CellIx, name: Sym) -> Vec<Span> {
    let in_file = |span: &Span| is_file(look.sources.file(span.file).path());
    let rails_at = |at: ReachIx| {
        let marks = net(world, at, name).map_or(&[][..], |net| world.marks_of(at, net));
        marks.iter().filter_map(|mark| match mark {
            Mark::Rail(slot) => Some(rail(world.deck, *slot).place),
            Mark::Named(_) => None,
        })
    };
    let rails: BTreeSet<Span> =
        places(world, cell).take(MOST_SEEN).flat_map(rails_at).filter(in_file).take(MOST).collect();
    if !rails.is_empty() {
        return rails.into_iter().collect();
    }
    let ports = &world.design.tree.cells[cell.0 as usize].ports;
    ports.iter().filter(|port| port.name == name).map(|port| port.span).take(1).collect()
}

/// The class of a model, else its `.model` card or its cell.
fn of_model(world: World<'_>, look: &Look<'_>, from: CellIx, name: Sym) -> Option<Span> {
    let text = world.design.names.text(name);
    let tree = &world.design.tree;
    let classes = world.deck.classes.iter().filter(|class| class.models.iter().any(|glob| glob.matches(text)));
    let class = classes.map(|class| class.place).find(|place| is_file(look.sources.file(place.file).path()));
    let model = |cell: CellIx| tree.cells[cell.0 as usize].models.iter().find(|model| model.name.name == name);
    let inner = |cell: CellIx| tree.cells.iter().find(|inner| inner.parent == Some(cell) && inner.name.name == name);
    class
        .or_else(|| around(world, from).find_map(|cell| model(cell).map(|model| model.name.span)))
        .or_else(|| around(world, from).find_map(|cell| inner(cell).map(|inner| inner.name.span)))
}

/// A cell and those that its text stands in.
fn around(world: World<'_>, cell: CellIx) -> impl Iterator<Item = CellIx> {
    let tree = &world.design.tree;
    std::iter::successors(Some(cell), move |cell| tree.cells[cell.0 as usize].parent)
}

/// A parameter of the cell, else of a caller, else of the top level, else a function: in the order in which names are looked up.
fn of_parameter(world: World<'_>, cell: CellIx, name: Sym) -> Vec<Span> {
    let tree = &world.design.tree;
    let own = |cell: CellIx| -> Vec<Span> {
        let cell = &tree.cells[cell.0 as usize];
        let is_it = |param: &&Param| param.name.name == name;
        cell.params.iter().chain(&cell.formals).filter(is_it).map(|param| param.name.span).take(MOST).collect()
    };
    let callers =
        || callers(world, cell).into_iter().flat_map(own).collect::<BTreeSet<_>>().into_iter().take(MOST).collect();
    let functions = || tree.functions.iter().filter(|function| function.name.name == name);
    let steps: [&dyn Fn() -> Vec<Span>; 4] = [&|| own(cell), &callers, &|| own(CellIx(0)), &|| {
        functions().map(|function| function.name.span).take(1).collect()
    }];
    steps.iter().map(|step| step()).find(|found| !found.is_empty()).unwrap_or_default()
}

/// The cells that call one, directly or through others.
fn callers(world: World<'_>, cell: CellIx) -> BTreeSet<CellIx> {
    let mut found = BTreeSet::from([cell]);
    let mut new = vec![cell];
    while let Some(next) = new.pop() {
        for template in &world.design.templates {
            let calls = template.instances.iter().any(|call| call.cell == next);
            if let Some(caller) = template.cell.filter(|_| calls)
                && found.insert(caller)
            {
                new.push(caller);
            }
        }
    }
    found.remove(&cell);
    found.remove(&CellIx(0));
    found
}
