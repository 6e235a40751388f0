//! Waivers in comments of the netlists: found at their cards, read, and held against the rules that there are.

use crate::declared::Deck;
use crate::diag::Diagnostic;
use crate::names::{Glob, Names, nearest};
use crate::netlist::remarks::{Remark, remarks};
use crate::netlist::tree::{CellIx, Tree};
use crate::source::{SourceMap, Span};
use crate::waiver::Waiver;
use crate::waiver::comment::{MARK, Said, read};
use std::ops::Range;

/// The waivers of the netlists, which are the texts from number `first` on, and what is wrong with others.
pub(super) fn waivers(
    sources: &SourceMap,
    first: usize,
    tree: &Tree,
    names: &Names,
    deck: &Deck,
) -> (Vec<Waiver>, Vec<Diagnostic>) {
    let (mut waivers, mut faults) = (Vec::new(), Vec::new());
    for (file, source) in sources.files().skip(first) {
        for remark in remarks(tree, file, source.text(), MARK) {
            match waiver(sources, &remark, tree, names, deck) {
                Ok(waiver) => waivers.push(waiver),
                Err(fault) => faults.push(*fault),
            }
        }
    }
    (waivers, faults)
}

fn waiver(
    sources: &SourceMap,
    remark: &Remark,
    tree: &Tree,
    names: &Names,
    deck: &Deck,
) -> Result<Waiver, Box<Diagnostic>> {
    let within = |range: Range<usize>| {
        let start = remark.words.start;
        Span { start: start + range.start as u32, end: start + range.end as u32, ..remark.words }
    };
    let fault = |span, message, help| Box::new(Diagnostic::error("waiver", span, message).with_help(help));
    let said = read(sources.slice(remark.words)).map_err(|wrong| {
        let place = if wrong.place.is_empty() { remark.whole } else { within(wrong.place) };
        fault(place, wrong.message, wrong.help)
    })?;
    let Said { rule, rule_place, pair, until, reason } = said;
    if !deck.rules.iter().any(|known| known.id == rule) {
        let near = nearest(&rule, deck.rules.iter().map(|known| known.id.as_str()));
        let help = near.map_or("`drainwise rules` lists them".to_owned(), |near| format!("did you mean `{near}`?"));
        return Err(fault(within(rule_place), format!("there is no rule `{rule}`"), help));
    }
    let Some((cell, card)) = remark.card else {
        let message = "this waiver stands at no card".to_owned();
        let help =
            "put it on the line above the device's card, or behind a `$` or `;` at the end of the card".to_owned();
        return Err(fault(remark.whole, message, help));
    };
    let at = Glob::exact(format!("{}/{}", cell_name(tree, names, cell), name(sources, card)));
    Ok(Waiver { rule, at, pair, reason, by: None, until, place: remark.whole, card: Some(card) })
}

fn cell_name<'n>(tree: &Tree, names: &'n Names, cell: CellIx) -> &'n str {
    names.text(tree.cells[cell.0 as usize].name.name)
}

/// The card's first word.
fn name(sources: &SourceMap, card: Span) -> &str {
    sources
        .slice(card)
        .split(|now: char| now.is_whitespace() || matches!(now, '(' | ')' | ',' | '='))
        .next()
        .unwrap_or("")
}
