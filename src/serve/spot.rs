//! What stands at a place of a netlist: a net, a device, a model, a cell, a parameter.

use crate::design::{Card, Design};
use crate::names::Sym;
use crate::netlist::letters::interpret;
use crate::netlist::tree::{CellIx, Function, Named, Operand, Param, Word};
use crate::source::{FileId, Span};

/// The thing, in the cell whose text it stands in.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum What {
    /// A net, by its name in the cell.
    Net(Sym),
    /// The card of a device or of a call.
    Card(u32),
    /// A model that a card, or a `.model`, names.
    Model(Sym),
    /// A cell.
    Cell(CellIx),
    /// A parameter or function, as seen from the cell.
    Parameter(Sym),
}

/// A thing and its place.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Spot {
    /// The cell whose text it is.
    pub(super) cell: CellIx,
    /// The thing.
    pub(super) what: What,
    /// Its place.
    pub(super) span: Span,
}

/// What stands at byte `offset` of a file.
pub(super) fn spot(design: &Design<'_>, file: FileId, offset: u32) -> Option<Spot> {
    let looker = Looker { design, file, offset };
    looker.in_directives().or_else(|| looker.on_card())
}

struct Looker<'d> {
    design: &'d Design<'d>,
    file: FileId,
    offset: u32,
}

impl Looker<'_> {
    fn is_in(&self, span: Span) -> bool {
        span.file == self.file && span.start < span.end && (span.start..=span.end).contains(&self.offset)
    }

    fn in_directives(&self) -> Option<Spot> {
        let tree = &self.design.tree;
        let top = CellIx(0);
        let global = |named: &Named| self.is_in(named.span).then(|| self.net(top, named.name, named.span));
        let found = tree.globals.iter().chain(&tree.interface).find_map(global);
        let function = |function: &Function| {
            self.named(top, function.name, What::Parameter).or_else(|| self.in_operand(top, &function.body))
        };
        found
            .or_else(|| tree.functions.iter().find_map(function))
            .or_else(|| self.in_operand(top, tree.scale.as_ref()?))
            .or_else(|| (0..tree.cells.len() as u32).map(CellIx).find_map(|cell| self.in_cell(cell)))
    }

    fn in_cell(&self, at: CellIx) -> Option<Spot> {
        let cell = &self.design.tree.cells[at.0 as usize];
        let param = |of: CellIx| {
            move |param: &Param| {
                self.named(of, param.name, What::Parameter).or_else(|| self.in_operand(of, &param.value))
            }
        };
        self.named(at, cell.name, |_| What::Cell(at))
            .or_else(|| {
                cell.ports.iter().find(|port| self.is_in(port.span)).map(|port| self.net(at, port.name, port.span))
            })
            .or_else(|| cell.formals.iter().find_map(param(at)))
            .or_else(|| cell.params.iter().find_map(param(at)))
            .or_else(|| cell.models.iter().find_map(|model| self.named(at, model.name, What::Model)))
            .or_else(|| cell.guards.iter().find_map(|guard| self.in_operand(at, guard.condition.as_ref()?)))
    }

    fn named(&self, cell: CellIx, named: Named, what: impl Fn(Sym) -> What) -> Option<Spot> {
        self.is_in(named.span).then(|| Spot { cell, what: what(named.name), span: named.span })
    }

    fn net(&self, cell: CellIx, name: Sym, span: Span) -> Spot {
        let design = self.design;
        let ground = || design.names.find("0").filter(|_| design.names.text(name).eq_ignore_ascii_case("gnd"));
        let meant = design.tree.equivalents.iter().find(|(_, written)| *written == name).map(|(meant, _)| *meant);
        Spot { cell, what: What::Net(meant.or_else(ground).unwrap_or(name)), span }
    }

    fn in_operand(&self, cell: CellIx, operand: &Operand) -> Option<Spot> {
        self.is_in(operand.span).then(|| self.word_here(cell)).flatten()
    }

    /// The name in an expression that the place is on.
    fn word_here(&self, cell: CellIx) -> Option<Spot> {
        let bytes = self.design.sources.text(self.file).as_bytes();
        let in_name = |byte: &u8| byte.is_ascii_alphanumeric() || matches!(byte, b'_' | b'.') || !byte.is_ascii();
        let at = (self.offset as usize).min(bytes.len());
        let start = at - bytes[..at].iter().rev().take_while(|byte| in_name(byte)).count();
        let end = at + bytes[at..].iter().take_while(|byte| in_name(byte)).count();
        let span = Span::new(self.file, start as u32, end as u32);
        let name = self.design.names.find(self.design.sources.slice(span))?;
        Some(Spot { cell, what: What::Parameter(name), span })
    }

    /// The card that the place is on: that which begins last before it.
    fn card(&self) -> Option<(CellIx, u32)> {
        let mut best: Option<(u32, CellIx)> = None;
        for (index, cell) in self.design.tree.cells.iter().enumerate() {
            for (at, run) in cell.runs.iter().enumerate().filter(|(_, run)| run.file == self.file) {
                let end = cell.runs.get(at + 1).map_or(cell.cards.len(), |next| next.first as usize);
                let cards = &cell.cards[run.first as usize..end];
                let before = cards.iter().copied().filter(|&card| card <= self.offset).max();
                if let Some(card) = before.filter(|&card| best.is_none_or(|(known, _)| card > known)) {
                    best = Some((card, CellIx(index as u32)));
                }
            }
        }
        best.map(|(card, cell)| (cell, card))
    }

    fn on_card(&self) -> Option<Spot> {
        let (cell, start) = self.card()?;
        let card = self.design.card(self.file, start);
        let whole = Spot { cell, what: What::Card(start), span: card.span() };
        if !self.is_in(whole.span) {
            return None;
        }
        let on = |word: &Word| (word.start..=word.end).contains(&self.offset);
        let fields = &card.fields;
        if let Some((key, _)) = fields.params.iter().find(|(key, value)| on(key) || on(value)) {
            return self.in_pair(cell, &card, *key).or(Some(whole));
        }
        let named = |word: Word| self.design.names.find(word.of(card.text));
        if let Some(word) = fields.substrate.filter(|word| on(word)) {
            return Some(self.net(cell, named(word)?, word.span(self.file)));
        }
        let element = interpret(card.text, fields, &mut |word| self.is_model(word));
        let model = fields.bracket_model.or(element.as_ref().ok().and_then(|element| element.model));
        if let Some(word) = model.filter(|word| on(word)) {
            let name = named(word)?;
            let called = self.called(cell, &card).map(What::Cell);
            return Some(Spot { cell, what: called.unwrap_or(What::Model(name)), span: word.span(self.file) });
        }
        match fields.words.iter().position(on) {
            Some(0) => Some(Spot { span: fields.words[0].span(self.file), ..whole }),
            Some(at) if element.as_ref().is_ok_and(|element| element.nodes.contains(&at)) => {
                let word = fields.words[at];
                Some(self.net(cell, named(word)?, word.span(self.file)))
            }
            Some(at) if fields.words[at].quoted => self.word_here(cell).or(Some(whole)),
            _ => Some(whole),
        }
    }

    /// `key=value`: the key of a call is a parameter of the cell that it calls.
    fn in_pair(&self, cell: CellIx, card: &Card<'_>, key: Word) -> Option<Spot> {
        if (key.start..=key.end).contains(&self.offset) {
            let called = self.called(cell, card)?;
            let name = self.design.names.find(key.of(card.text))?;
            return Some(Spot { cell: called, what: What::Parameter(name), span: key.span(self.file) });
        }
        self.word_here(cell)
    }

    fn is_model(&self, word: &str) -> bool {
        let design = self.design;
        let is_class = design.classes.iter().any(|class| class.models.iter().any(|glob| glob.matches(word)));
        let name = design.names.find(word);
        let models = || design.tree.cells.iter().flat_map(|cell| &cell.models);
        is_class || name.is_some_and(|name| models().any(|model| model.name.name == name))
    }

    /// The cell that a card calls, as the elaboration understood it.
    fn called(&self, cell: CellIx, card: &Card<'_>) -> Option<CellIx> {
        let templates = self.design.templates.iter().filter(|template| template.cell == Some(cell));
        let mut calls = templates.flat_map(|template| &template.instances);
        calls.find(|call| (call.file, call.card) == (card.file, card.start)).map(|call| call.cell)
    }
}
