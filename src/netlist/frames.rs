//! The cells and conditions that are open while a netlist is read, and what becomes of them when they close.

use super::structure::Builder;
use super::tree::{Cell, CellIx, Guard, GuardIx, Named, Operand, Param, Run};
use crate::diag::Diagnostic;
use crate::names::{Sym, nearest};
use crate::source::{FileId, SourceMap, Span};
use std::collections::HashMap;

/// How deep cells and conditions may nest.
pub(super) const DEEPEST: usize = 200;

/// How many branches an `.if` may have.
const MOST_BRANCHES: usize = 256;

/// A cell whose `.ends` has not come yet; the outermost frame is the top level.
pub(super) struct Frame {
    pub(super) cell: CellIx,
    ifs: Vec<OpenIf>,
}

struct OpenIf {
    outer: Option<GuardIx>,
    branches: Vec<GuardIx>,
    has_else: bool,
    place: Span,
}

/// Where a cell's text stands, to compare it with another of the same name.
#[derive(Clone, Copy)]
pub(super) struct Extent {
    start: Span,
    end: Option<Span>,
}

impl Extent {
    pub(super) fn none(place: Span) -> Extent {
        Extent { start: place, end: None }
    }
}

impl Frame {
    pub(super) fn new(cell: CellIx) -> Frame {
        Frame { cell, ifs: Vec::new() }
    }
}

pub(super) fn empty_cell(name: Named, parent: Option<CellIx>, guard: Option<GuardIx>) -> Cell {
    Cell {
        name,
        parent,
        guard,
        ports: Vec::new(),
        formals: Vec::new(),
        params: Vec::new(),
        models: Vec::new(),
        guards: Vec::new(),
        cards: Vec::new(),
        runs: Vec::new(),
        inner: Vec::new(),
        closed: false,
    }
}

impl Builder<'_> {
    /// The cell that cards now belong to.
    pub(super) fn cell(&mut self) -> &mut Cell {
        let index = self.frames.last().map_or(0, |frame| frame.cell.0);
        &mut self.tree.cells[index as usize]
    }

    /// The condition that cards now stand under.
    pub(super) fn guard(&self) -> Option<GuardIx> {
        let open = self.frames.last()?.ifs.last()?;
        open.branches.last().copied()
    }

    /// Makes sure that the cell's last run is of this file and condition.
    pub(super) fn begin_run(&mut self, file: FileId) {
        let guard = self.guard();
        let cell = self.cell();
        let first = cell.cards.len() as u32;
        match cell.runs.last_mut() {
            Some(run) if run.file == file && run.guard == guard => {}
            Some(run) if run.first == first => *run = Run { file, first, guard },
            _ => cell.runs.push(Run { file, first, guard }),
        }
    }

    pub(super) fn open_cell(&mut self, name: Named, ports: Vec<Named>, formals: Vec<Param>, card: Span) {
        if self.frames.len() > DEEPEST {
            self.too_deep += 1;
            if self.too_deep == 1 {
                let message = format!("cells are nested more than {DEEPEST} deep here");
                self.report(
                    Diagnostic::error("netlist", name.span, message).with_help("an `.ends` is probably missing above"),
                );
            }
            return;
        }
        let parent = self.frames.last().map_or(CellIx(0), |frame| frame.cell);
        let guard = self.guard();
        let index = CellIx(self.tree.cells.len() as u32);
        let mut cell = empty_cell(name, Some(parent), guard);
        (cell.ports, cell.formals) = (ports, formals);
        self.tree.cells.push(cell);
        self.extents.push(Extent { start: card, end: None });
        let nameless = name.span.start == name.span.end;
        match self.defined.get(&(parent, name.name, guard)) {
            _ if nameless => self.dropped.push(index),
            Some(&first) => {
                self.duplicates.push((first, index));
                self.dropped.push(index);
            }
            None => {
                self.defined.insert((parent, name.name, guard), index);
                self.tree.cells[parent.0 as usize].inner.push(index);
            }
        }
        self.frames.push(Frame::new(index));
    }

    /// An `.ends` at `place`, with a name or without. `only_one`: a nameless one leaves the outer cells open.
    pub(super) fn close_cells(&mut self, named: Option<(Sym, Span)>, place: Span, only_one: bool) {
        if self.too_deep > 0 {
            self.too_deep -= 1;
            return;
        }
        if self.frames.len() < 2 {
            let message = "this `.ends` ends nothing: no `.subckt` is open here";
            self.report(
                Diagnostic::error("netlist", place, message)
                    .with_help("take it out, or look for a lost `.subckt` above"),
            );
            return;
        }
        let Some((name, span)) = named else {
            let keep = if only_one { self.frames.len() - 1 } else { 1 };
            while self.frames.len() > keep {
                self.close_innermost(place);
            }
            return;
        };
        let matching =
            self.frames.iter().skip(1).rposition(|frame| self.tree.cells[frame.cell.0 as usize].name.name == name);
        match matching {
            Some(depth) => {
                while self.frames.len() > depth + 2 {
                    self.report_unclosed(Some(place));
                    self.close_innermost(place);
                }
                self.close_innermost(place);
            }
            None => {
                self.report_wrong_name(name, span);
                self.close_innermost(place);
            }
        }
    }

    fn report_wrong_name(&mut self, name: Sym, span: Span) {
        let open: Vec<Named> =
            self.frames.iter().skip(1).map(|frame| self.tree.cells[frame.cell.0 as usize].name).collect();
        let Some(&innermost) = open.last() else { return };
        let spelled = self.names.text(name).to_owned();
        let current = self.names.text(innermost.name).to_owned();
        let near = nearest(&spelled, open.iter().map(|cell| self.names.text(cell.name)));
        let help = format!("write `.ends {}`", near.unwrap_or(&current));
        let message = format!("`.ends {spelled}` names no open cell; it is taken to end `{current}`");
        self.report(
            Diagnostic::error("netlist", span, message).with_place(innermost.span, "begins here").with_help(help),
        );
    }

    fn report_unclosed(&mut self, before: Option<Span>) {
        let name = self.cell().name;
        let spelled = self.names.text(name.name).to_owned();
        let message = format!("cell `{spelled}` is not ended: its `.ends` is missing");
        let mut error = Diagnostic::error("netlist", name.span, message)
            .with_label("begins here")
            .with_help(format!("write `.ends {spelled}` after its last card"));
        if let Some(before) = before {
            error = error.with_place(before, "should stand before this line");
        }
        self.report(error);
    }

    fn close_innermost(&mut self, place: Span) {
        let Some(frame) = self.frames.pop() else { return };
        self.report_open_ifs(&frame);
        self.tree.cells[frame.cell.0 as usize].closed = true;
        self.extents[frame.cell.0 as usize].end = Some(place);
        self.fresh = true;
    }

    fn report_open_ifs(&mut self, frame: &Frame) {
        for open in &frame.ifs {
            let error = Diagnostic::error("netlist", open.place, "this `.if` is not ended: its `.endif` is missing")
                .with_help("write `.endif` after the last card that depends on it, before the cell ends");
            self.report(error);
        }
    }

    /// After a file of the command line: what is still open was never closed.
    pub(super) fn close_all(&mut self) {
        while self.frames.len() > 1 {
            self.report_unclosed(None);
            if let Some(frame) = self.frames.pop() {
                self.report_open_ifs(&frame);
            }
        }
        let top = std::mem::replace(&mut self.frames[0], Frame::new(CellIx(0)));
        self.report_open_ifs(&top);
        self.too_deep = 0;
        self.fresh = true;
    }

    pub(super) fn open_if(&mut self, condition: Operand, place: Span) {
        let outer = self.guard();
        let depth = self.frames.last().map_or(0, |frame| frame.ifs.len());
        if depth >= DEEPEST {
            let message = format!("`.if` cards are nested more than {DEEPEST} deep here");
            self.report(
                Diagnostic::error("netlist", place, message).with_help("an `.endif` is probably missing above"),
            );
            self.lost_ifs += 1;
            return;
        }
        let branch = self.add_guard(Guard { outer, earlier: Vec::new(), condition: Some(condition) });
        let open = OpenIf { outer, branches: vec![branch], has_else: false, place };
        if let Some(frame) = self.frames.last_mut() {
            frame.ifs.push(open);
        }
    }

    fn add_guard(&mut self, guard: Guard) -> GuardIx {
        self.fresh = true;
        let guards = &mut self.cell().guards;
        guards.push(guard);
        GuardIx(guards.len() as u32 - 1)
    }

    /// An `.elseif` (with a condition) or `.else` (without).
    pub(super) fn next_branch(&mut self, condition: Option<Operand>, place: Span) {
        if self.lost_ifs > 0 {
            return;
        }
        let word = if condition.is_some() { "elseif" } else { "else" };
        let Some(open) = self.frames.last().and_then(|frame| frame.ifs.last()) else {
            let message = format!("this `.{word}` belongs to no `.if`");
            self.report(
                Diagnostic::error("netlist", place, message).with_help("look for a lost `.if` above, in the same cell"),
            );
            return;
        };
        let (outer, earlier, first) = (open.outer, open.branches.clone(), open.place);
        if open.has_else {
            let message = format!("this `.{word}` comes after the `.else` of the same `.if`");
            self.report(Diagnostic::error("netlist", place, message).with_place(first, "the `.if`"));
        } else if earlier.len() >= MOST_BRANCHES {
            let message = format!("an `.if` has more than {MOST_BRANCHES} branches");
            self.report(Diagnostic::error("netlist", place, message).with_place(first, "the `.if`"));
            return;
        }
        let has_else = condition.is_none();
        let branch = self.add_guard(Guard { outer, earlier, condition });
        if let Some(open) = self.frames.last_mut().and_then(|frame| frame.ifs.last_mut()) {
            open.branches.push(branch);
            open.has_else |= has_else;
        }
    }

    pub(super) fn close_if(&mut self, place: Span) {
        if self.lost_ifs > 0 {
            self.lost_ifs -= 1;
            return;
        }
        self.fresh = true;
        if self.frames.last_mut().and_then(|frame| frame.ifs.pop()).is_none() {
            let message = "this `.endif` ends nothing: no `.if` is open here";
            self.report(
                Diagnostic::error("netlist", place, message).with_help("look for a lost `.if` above, in the same cell"),
            );
        }
    }

    /// Reports cells that are defined twice with different texts, and takes every second definition out of the tree.
    pub(super) fn settle_duplicates(&mut self, sources: &SourceMap) {
        for (first, second) in std::mem::take(&mut self.duplicates) {
            let (one, other) = (self.extents[first.0 as usize], self.extents[second.0 as usize]);
            if one.start == other.start {
                continue;
            }
            let (kept, left) = (self.tree.cells[first.0 as usize].name, self.tree.cells[second.0 as usize].name);
            let name = self.names.text(kept.name).to_owned();
            let place = Diagnostic::new("netlist", crate::diag::Severity::Error, left.span, "");
            let same = body(sources, one).is_some_and(|text| body(sources, other) == Some(text));
            let report = if same {
                Diagnostic {
                    severity: crate::diag::Severity::Note,
                    message: format!("cell `{name}` is defined twice, in the same words"),
                    ..place
                }
            } else {
                Diagnostic { message: format!("cell `{name}` is defined twice; the first definition is used"), ..place }
                    .with_help("take one of them out, or give it another name")
            };
            self.report(report.with_place(kept.span, "first defined here"));
        }
        drop_cells(&mut self.tree.cells, &self.dropped);
    }
}

fn body(sources: &SourceMap, extent: Extent) -> Option<&str> {
    let end = extent.end.filter(|end| end.file == extent.start.file)?;
    sources.text(end.file).get(extent.start.start as usize..end.start as usize).map(str::trim_end)
}

/// Takes cells, and what is defined inside them, out of the list, and renumbers the rest.
fn drop_cells(cells: &mut Vec<Cell>, dropped: &[CellIx]) {
    if dropped.is_empty() {
        return;
    }
    let mut gone = vec![false; cells.len()];
    for cell in dropped {
        gone[cell.0 as usize] = true;
    }
    for index in 1..cells.len() {
        // Parents come before what they hold.
        gone[index] |= cells[index].parent.is_some_and(|parent| gone[parent.0 as usize]);
    }
    let mut renumbered = HashMap::new();
    for index in (0..cells.len()).filter(|&index| !gone[index]) {
        renumbered.insert(CellIx(index as u32), CellIx(renumbered.len() as u32));
    }
    let mut index = 0;
    cells.retain(|_| {
        index += 1;
        !gone[index - 1]
    });
    for cell in cells {
        cell.parent = cell.parent.and_then(|parent| renumbered.get(&parent).copied());
        cell.inner = cell.inner.iter().filter_map(|inner| renumbered.get(inner).copied()).collect();
    }
}
