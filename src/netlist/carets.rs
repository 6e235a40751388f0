//! A check for tests: the messages expected stand in the netlist itself, as comments under the text they are about.
//!
//! ```text
//! .ends y
//! *     ^ names no open cell
//! ```

use super::Complaint;
use super::structure::{Builder, Opening, Step};
use super::tree::Tree;
use crate::diag::Diagnostic;
use crate::names::Names;
use crate::source::SourceMap;

/// Reads a text as the only file of a design; includes are passed over.
pub(crate) fn read(text: &str) -> (Tree, Vec<Diagnostic>, Names, SourceMap) {
    let (mut names, mut sources) = (Names::new(), SourceMap::new());
    let file = sources.add("test.sp", text);
    let mut builder = Builder::new(&mut names);
    let mut reading = builder.open(file, Opening::Root);
    while builder.resume(text, &mut reading) != Step::Done {}
    let (tree, diagnostics) = builder.finish(&sources);
    (tree, diagnostics, names, sources)
}

/// Checks that a text gives exactly the messages that its caret comments announce: `*   ^^^ words` stands under the
/// place and holds a part of the message.
pub(crate) fn check(text: &str) {
    let (_, diagnostics, _, sources) = read(text);
    let found: Vec<_> = diagnostics
        .iter()
        .map(|one| {
            let (start, end) = (sources.start(one.span), sources.end(one.span));
            assert_eq!(start.line, end.line, "{}", one.message);
            (start.line, start.column, end.column, one.message.clone())
        })
        .collect();
    compare(text, found);
}

/// The same for the complaints of single cards.
pub(crate) fn check_complaints(text: &str, complaints: &[Complaint]) {
    let mut sources = SourceMap::new();
    let file = sources.add("test.sp", text);
    let place = |at| sources.file(file).line_column(at);
    let found = complaints
        .iter()
        .map(|one| (place(one.start).line, place(one.start).column, place(one.end).column, one.message.clone()))
        .collect();
    compare(text, found);
}

fn compare(text: &str, mut found: Vec<(u32, u32, u32, String)>) {
    let mut above = 0;
    for (index, line) in text.lines().enumerate() {
        let Some((start, rest)) = line.starts_with('*').then(|| line.split_once('^')).flatten() else {
            above = index as u32 + 1;
            continue;
        };
        let carets = rest.len() - rest.trim_start_matches('^').len() + 1;
        let (start, words) = (start.chars().count() as u32 + 1, rest.trim_start_matches('^').trim());
        let wanted = |one: &(u32, u32, u32, String)| {
            (one.0, one.1, one.2) == (above, start, start + carets as u32) && one.3.contains(words)
        };
        match found.iter().position(wanted) {
            Some(position) => {
                found.remove(position);
            }
            None => panic!("line {above}, column {start}: no message with `{words}` there, but {found:#?}"),
        }
    }
    assert!(found.is_empty(), "messages that nobody announced: {found:#?}");
}
