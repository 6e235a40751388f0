//! Paths: where an include may lie, and how a path is shown.

use super::files::Files;
use std::path::{Component, Path, PathBuf};

/// The folder that a file stands in; empty for the folder one is in.
pub(super) fn folder(path: &Path) -> PathBuf {
    path.parent().map(Path::to_owned).unwrap_or_default()
}

/// A path without `.`, and without `..` where a folder goes before it.
pub fn flat(path: &Path) -> PathBuf {
    let mut out = PathBuf::new();
    for part in path.components() {
        match part {
            Component::CurDir => {}
            Component::ParentDir if matches!(out.components().next_back(), Some(Component::Normal(_))) => {
                out.pop();
            }
            Component::ParentDir if out.has_root() => {}
            _ => out.push(part),
        }
    }
    out
}

/// Where an include may lie, in the order to try: beside the file `from` that holds it, then in each folder. Backslashes
/// count as slashes if the path as written names no file.
pub(super) fn candidates(written: &Path, from: &Path, folders: &[PathBuf]) -> Vec<PathBuf> {
    let mut spellings = vec![written.to_owned()];
    if let Some(text) = written.to_str().filter(|text| text.contains('\\')) {
        spellings.push(PathBuf::from(text.replace('\\', "/")));
    }
    let mut out: Vec<PathBuf> = Vec::new();
    for spelling in spellings {
        let bases = std::iter::once(folder(from)).chain(folders.iter().cloned());
        for path in bases.map(|base| base.join(&spelling)) {
            if !out.contains(&path) {
                out.push(path);
            }
        }
    }
    out
}

/// A path as messages show it: with forward slashes, and never absolute.
pub(super) fn shown(path: &Path, files: &dyn Files) -> String {
    flat(&relative(path, files)).to_string_lossy().replace('\\', "/")
}

/// The same file by a path that counts from the folder one is in, so that nothing of the machine gets into a report. That folder is
/// free of links, so going up from it is safe.
pub fn relative(path: &Path, files: &dyn Files) -> PathBuf {
    let Some(here) = files.here().filter(|_| path.is_absolute()) else { return path.to_owned() };
    let path = flat(path);
    let same = path.components().zip(here.components()).take_while(|(a, b)| a == b).count();
    if same == 0 {
        return path;
    }
    let up = here.components().skip(same).map(|_| Component::ParentDir);
    up.chain(path.components().skip(same)).collect()
}
