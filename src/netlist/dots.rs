//! The dot cards: those that shape the design, and those of simulators that say nothing about it.

/// What a dot card is to the reader of structure.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Dot {
    Subckt,
    Ends,
    Include,
    Lib,
    Endl,
    Param,
    Func,
    Global,
    Model,
    Option,
    If,
    ElseIf,
    Else,
    EndIf,
    /// Ends the reading of its file.
    End,
    /// Begins lines that are no netlist, up to the card named.
    Block(&'static str),
    /// Closes a block that was not open here; harmless.
    Quiet,
    /// Says something about the circuit that Drainwise does not read.
    Unread(&'static str),
}

/// Names of the cards, from the Ngspice User's Manual, version 39 (sections 2 and 15), and from memory the ones that other
/// simulators add.
const CARDS: &[(&str, Dot)] = &[
    ("subckt", Dot::Subckt),
    ("macro", Dot::Subckt),
    ("ends", Dot::Ends),
    ("eom", Dot::Ends),
    ("include", Dot::Include),
    ("inc", Dot::Include),
    ("incl", Dot::Include),
    ("lib", Dot::Lib),
    ("endl", Dot::Endl),
    ("param", Dot::Param),
    ("params", Dot::Param),
    ("global_param", Dot::Param),
    ("func", Dot::Func),
    ("function", Dot::Func),
    ("global", Dot::Global),
    ("model", Dot::Model),
    ("option", Dot::Option),
    ("options", Dot::Option),
    ("opt", Dot::Option),
    ("if", Dot::If),
    ("elseif", Dot::ElseIf),
    ("else", Dot::Else),
    ("endif", Dot::EndIf),
    ("end", Dot::End),
    ("alter", Dot::End),
    ("control", Dot::Block("endc")),
    ("data", Dot::Block("enddata")),
    ("endc", Dot::Quiet),
    ("enddata", Dot::Quiet),
    ("connect", Dot::Unread("its two nets stay apart here")),
];

/// Cards about analyses, output and comfort.
const QUIET: &[&str] = &[
    "ac",
    "aliases",
    "backanno",
    "biaschk",
    "checksoa",
    "csparam",
    "dc",
    "dcvolt",
    "del",
    "disto",
    "distribution",
    "dout",
    "fft",
    "four",
    "fourier",
    "graph",
    "hb",
    "hdl",
    "ic",
    "icvs",
    "lin",
    "linearize",
    "load",
    "loadbias",
    "machine",
    "malias",
    "mc",
    "meas",
    "measure",
    "monte",
    "net",
    "nodeset",
    "noise",
    "op",
    "optimize",
    "pat",
    "plot",
    "preprocess",
    "print",
    "probe",
    "prot",
    "protect",
    "pss",
    "pz",
    "sample",
    "sampling",
    "save",
    "savebias",
    "sens",
    "snf",
    "sp",
    "spmodel",
    "step",
    "stim",
    "stimulus",
    "store",
    "temp",
    "tf",
    "title",
    "tnoise",
    "tran",
    "trannoise",
    "unprot",
    "unprotect",
    "va",
    "variation",
    "vec",
    "vector",
    "verilog",
    "watch",
    "wcase",
    "width",
];

/// The card with this name (lower case, without its dot).
pub(super) fn find(name: &str) -> Option<Dot> {
    let card = CARDS.iter().find(|(card, _)| *card == name).map(|&(_, dot)| dot);
    card.or_else(|| QUIET.contains(&name).then_some(Dot::Quiet))
}

/// The card nearest to a misspelt name.
pub(super) fn nearest(name: &str) -> Option<&'static str> {
    crate::names::nearest(name, CARDS.iter().map(|&(card, _)| card).chain(QUIET.iter().copied()))
}
