//! Known findings: reading a baseline, hiding what it knows, and making one.

use super::{Job, Outcome};
use crate::diag::Diagnostic;
use crate::engine;
use crate::load::{Files, relative};
use crate::source::{SourceMap, Span};
use crate::waiver::baseline::{self, Known};
use std::path::Path;

/// Hides the findings that are known; says of the other known ones that are `asked` for that they are no longer there.
pub(super) fn forgive(outcome: &mut Outcome, known: &[Known], asked: impl Fn(&Known) -> bool) {
    if known.is_empty() {
        return;
    }
    let gone = baseline::apply(&mut outcome.report.diagnostics, known);
    outcome.report.diagnostics.extend(gone.into_iter().filter(|known| asked(known)).map(baseline::gone));
    outcome.report.sort(&outcome.sources);
    outcome.report.summary.count(&outcome.report.diagnostics);
}

/// The text of a baseline that knows all findings of a run, which then no longer fail; `path` is where it will stand. An error says
/// why there can be none.
pub fn accept_all(files: &dyn Files, outcome: &mut Outcome, path: &Path) -> Result<String, String> {
    if outcome.could_not {
        return Err("not everything could be read, so findings would be missing from it".to_owned());
    }
    if outcome.report.summary.unlisted.worst().is_some() {
        let most = engine::MOST_FINDINGS;
        return Err(format!("a rule has more than {most} findings, and those beyond would be missing from it"));
    }
    let text = baseline::text(&outcome.report.diagnostics);
    let file = outcome.sources.add(relative(path, files).display().to_string(), text.clone());
    let known = baseline::read(&outcome.sources, file).map_err(|fault| fault.message)?;
    forgive(outcome, &known, |_| false);
    Ok(text)
}

/// The known findings of a job's baseline, if it names one.
pub(super) fn read(files: &dyn Files, job: &Job, sources: &mut SourceMap) -> Result<Vec<Known>, Box<Diagnostic>> {
    let Some(path) = &job.baseline else { return Ok(Vec::new()) };
    let path = relative(path, files);
    let shown = path.display().to_string();
    let text = match files.read(&path).map(String::from_utf8) {
        Ok(Ok(text)) => text,
        Ok(Err(_)) => String::new(),
        Err(_) => {
            let file = sources.add(shown.clone(), "");
            let fault =
                Diagnostic::error("baseline", Span::new(file, 0, 0), format!("baseline `{shown}` cannot be read"));
            return Err(Box::new(fault.with_help(format!("write one with `--write-baseline {shown}`"))));
        }
    };
    let file = sources.add(shown, text);
    baseline::read(sources, file)
}
