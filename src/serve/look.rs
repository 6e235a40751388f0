//! What a question from the editor is answered from: the last run's texts and deck, and its world where it came to one.

use super::files::Desk;
use crate::declared::Deck;
use crate::design::{DeviceIx, NetIx, Template};
use crate::facts::World;
use crate::names::Sym;
use crate::netlist::tree::CellIx;
use crate::reach::ReachIx;
use crate::source::{FileId, SourceMap};
use std::path::Path;

/// A finished run.
#[derive(Clone, Copy)]
pub(super) struct Look<'w> {
    /// The documents as they were.
    pub(super) desk: &'w Desk,
    /// All texts of the run.
    pub(super) sources: &'w SourceMap,
    /// What the decks declare; empty where one has an error.
    pub(super) deck: &'w Deck,
    /// Everything that was computed; none where the run ended before.
    pub(super) world: Option<World<'w>>,
}

impl<'w> Look<'w> {
    /// The text of a document.
    pub(super) fn file(&self, document: &Path) -> Option<FileId> {
        let is_it = |path: &str| super::told::is_file(path) && self.desk.key(Path::new(path)) == document;
        self.sources.files().find(|(_, file)| is_it(file.path())).map(|(id, _)| id)
    }
}

/// The places of a cell in the design: each a context, which may stand for many instances.
pub(super) fn places(world: World<'_>, cell: CellIx) -> impl Iterator<Item = ReachIx> {
    world.reach.indices().filter(move |&at| template(world, at).cell == Some(cell))
}

/// The connections of the cell of a context.
pub(super) fn template<'w>(world: World<'w>, at: ReachIx) -> &'w Template {
    world.design.template(world.context(at).variant)
}

/// A net of a context by its name.
pub(super) fn net(world: World<'_>, at: ReachIx, name: Sym) -> Option<NetIx> {
    template(world, at).nets.iter().position(|&net| net == name).map(|net| NetIx(net as u32))
}

/// A device of a context by its card.
pub(super) fn device(world: World<'_>, at: ReachIx, card: (FileId, u32)) -> Option<DeviceIx> {
    let template = template(world, at);
    template.devices().find(|&device| template.device_card(device) == card)
}
