//! What the netlist files say, before anything is evaluated: cells, their parameters, and where their cards stand.
//!
//! Element cards are kept as offsets into the text alone: a design of a million devices has a million cards, and each is
//! read field by field (see [`super::fields`]) when its cell is elaborated. Everything that shapes the design (headers,
//! parameters, models, conditions) is rare, and is kept parsed.

use crate::expr::Expr;
use crate::names::Sym;
use crate::source::{FileId, Span};

/// Index of a cell in [`Tree::cells`]; cell 0 is the top level.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct CellIx(pub u32);

/// Index of a guard in [`Cell::guards`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct GuardIx(pub u32);

/// A name where it stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Named {
    /// The name.
    pub name: Sym,
    /// Its place.
    pub span: Span,
}

/// A parameter's value as written.
#[derive(Clone, Debug, PartialEq)]
pub struct Operand {
    /// The text of the expression, without quotes or braces; `expr.places` count from `span.start`.
    pub span: Span,
    /// The expression; none where it could not be read (that has been reported), or is a text in double quotes.
    pub expr: Option<Expr>,
}

/// `name = value`.
#[derive(Clone, Debug, PartialEq)]
pub struct Param {
    /// The parameter.
    pub name: Named,
    /// Its value.
    pub value: Operand,
    /// The condition it stands under.
    pub guard: Option<GuardIx>,
}

/// A `.func name(a, b) {body}`.
#[derive(Clone, Debug, PartialEq)]
pub struct Function {
    /// Its name.
    pub name: Named,
    /// Its formal parameters.
    pub formals: Vec<Sym>,
    /// Its value.
    pub body: Operand,
}

/// A `.model` card.
#[derive(Clone, Debug, PartialEq)]
pub struct Model {
    /// The model.
    pub name: Named,
    /// Its type as written, lower case: `nmos`, `vdmos`, `d`, `r`.
    pub kind: String,
    /// The condition it stands under.
    pub guard: Option<GuardIx>,
}

/// One branch of an `.if`: it holds where its enclosing guard holds, its own condition does, and those of the earlier
/// branches do not.
#[derive(Clone, Debug, PartialEq)]
pub struct Guard {
    /// The guard of the `.if` that this `.if` stands in.
    pub outer: Option<GuardIx>,
    /// The earlier branches of the same `.if`.
    pub earlier: Vec<GuardIx>,
    /// Its own condition; none for `.else`.
    pub condition: Option<Operand>,
}

/// Element cards of a cell that follow one another in one file under one guard.
#[derive(Clone, Debug, PartialEq)]
pub struct Run {
    /// The file.
    pub file: FileId,
    /// Index in [`Cell::cards`] of the first; the run ends where the next one begins.
    pub first: u32,
    /// The condition they stand under.
    pub guard: Option<GuardIx>,
}

/// A `.subckt`, or the top level.
#[derive(Clone, Debug, PartialEq)]
pub struct Cell {
    /// Its name; the top level has the name `""` and the first file's start as place.
    pub name: Named,
    /// The cell whose text it stands in.
    pub parent: Option<CellIx>,
    /// The condition that its definition stands under, of the parent's guards.
    pub guard: Option<GuardIx>,
    /// Its ports in order.
    pub ports: Vec<Named>,
    /// Parameters of its header.
    pub formals: Vec<Param>,
    /// `.param` cards inside it.
    pub params: Vec<Param>,
    /// `.model` cards inside it.
    pub models: Vec<Model>,
    /// Conditions inside it.
    pub guards: Vec<Guard>,
    /// Offset of the first byte of each element card (its letter).
    pub cards: Vec<u32>,
    /// Which file and guard those belong to.
    pub runs: Vec<Run>,
    /// Cells defined inside it.
    pub inner: Vec<CellIx>,
    /// Whether its text ended with `.ends` (a cell cut short is kept, and was reported).
    pub closed: bool,
}

/// All that the files of a design say.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Tree {
    /// Cells; the first is the top level.
    pub cells: Vec<Cell>,
    /// Names of `.global` cards.
    pub globals: Vec<Named>,
    /// `.func` cards.
    pub functions: Vec<Function>,
    /// `.option scale=…`, the last one.
    pub scale: Option<Operand>,
    /// Pairs of names that a `*.EQUIV a=b` comment makes one net or model name (`b` is written, `a` is meant).
    pub equivalents: Vec<(Sym, Sym)>,
    /// Nets of the top level that comments name as its pins (`**.subckt`, `*.ipin`, `*.PININFO` outside a cell).
    pub interface: Vec<Named>,
    /// Files in which `*.MEGA` makes the suffix `M` mean 1e6.
    pub mega: Vec<FileId>,
    /// Cards seen (elements and directives), for the summary.
    pub card_count: u64,
}

/// Bytes `start..end` of the file that a card stands in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Word {
    /// First byte.
    pub start: u32,
    /// Past the last byte. For expressions the quotes or braces are outside.
    pub end: u32,
    /// Whether it stood in quotes or braces.
    pub quoted: bool,
}

impl Word {
    /// The word in its text.
    pub fn of(self, text: &str) -> &str {
        &text[self.start as usize..self.end as usize]
    }

    /// As a span of `file`.
    pub fn span(self, file: FileId) -> Span {
        Span { file, start: self.start, end: self.end }
    }
}

/// The fields of one element card. The buffer is reused from card to card.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Fields {
    /// The words before the first `key=value`, the element's own name first.
    pub words: Vec<Word>,
    /// `key=value` pairs, in order. A positional word after a pair (`m=2 off`) is in neither list.
    /// Sizes of export comments (`$W=2`) are here too, where the card itself does not give them.
    pub params: Vec<(Word, Word)>,
    /// The model of a `$[model]` export comment.
    pub bracket_model: Option<Word>,
    /// The net of a `$SUB=net` export comment.
    pub substrate: Option<Word>,
    /// Index in `words` of the word that followed a lone `/` (the slash itself is no word).
    pub after_slash: Option<usize>,
    /// The first positional word after a pair: harmless flags (`off`), or the rest of a formula written without quotes.
    pub stray: Option<Word>,
    /// Past the last byte of the card's last field.
    pub end: u32,
}
