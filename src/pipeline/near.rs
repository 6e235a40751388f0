//! What lies around a run's files: the nearest deck upward, and the root of the repository.

use super::Job;
use crate::load::{Files, relative};
use crate::report::Base;
use std::path::{Path, PathBuf};

/// The decks that a job names, else the nearest.
pub(super) fn decks_of(files: &dyn Files, job: &Job) -> Vec<PathBuf> {
    let decks = if job.decks.is_empty() { nearest_deck(files, job) } else { job.decks.clone() };
    decks.iter().map(|path| relative(path, files)).collect()
}

/// Where paths count from in reports that are read elsewhere: the nearest folder upward that holds a `.git`, else the folder one
/// is in.
pub fn base(files: &dyn Files) -> Base {
    let Some(here) = files.here() else { return Base::default() };
    let root = here.ancestors().find(|folder| files.exists(&folder.join(".git"))).unwrap_or(&here).to_owned();
    Base::new(root, here)
}

/// The deck that a netlist belongs to: the nearest `drainwise.yaml` upward.
pub fn deck_of(files: &dyn Files, netlist: &Path) -> Option<PathBuf> {
    let job = Job { netlists: vec![netlist.to_owned()], ..Job::default() };
    nearest_deck(files, &job).into_iter().next()
}

/// The nearest `drainwise.yaml` upward from the first netlist, or from here.
fn nearest_deck(files: &dyn Files, job: &Job) -> Vec<PathBuf> {
    let start = job.netlists.first().and_then(|path| path.parent()).unwrap_or(Path::new(""));
    deck_above(files, start).into_iter().collect()
}

/// The `drainwise.yaml` in a folder or the nearest one above it.
pub fn deck_above(files: &dyn Files, folder: &Path) -> Option<PathBuf> {
    let mut folder = folder.to_owned();
    for _ in 0..64 {
        let candidate = folder.join("drainwise.yaml");
        if files.is_file(&candidate) {
            return Some(candidate);
        }
        folder = match folder.file_name() {
            Some(name) if name != ".." => folder.parent().map(Path::to_owned).unwrap_or_default(),
            _ => folder.join(".."),
        };
        if files
            .canonical(if folder.as_os_str().is_empty() { Path::new(".") } else { &folder })
            .is_ok_and(|path| path.parent().is_none())
        {
            break;
        }
    }
    None
}
