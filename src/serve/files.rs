//! Files as the editor has them: the text in an open window goes before the disk.

use crate::load::{Disk, Files, flat};
use lsp_types::Uri;
use std::collections::BTreeMap;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// A document that is open in the editor.
#[derive(Clone)]
pub(super) struct Document {
    /// As the editor calls it.
    pub(super) uri: Uri,
    /// Its number among the states of the document.
    pub(super) version: i32,
    /// Its language, as the editor calls it.
    pub(super) language: String,
    /// All of it.
    pub(super) text: Arc<str>,
}

/// The open documents and the disk below them, at one moment.
#[derive(Clone, Default)]
pub(super) struct Desk {
    /// The folder that paths are shown against.
    pub(super) root: PathBuf,
    /// The open documents by [`Desk::key`].
    pub(super) open: BTreeMap<PathBuf, Document>,
}

impl Desk {
    /// The one path of a file, whatever links lead to it; also of one that only the editor has.
    pub(super) fn key(&self, path: &Path) -> PathBuf {
        let path = self.root.join(path);
        let beside = || Some(Disk.canonical(path.parent()?).ok()?.join(path.file_name()?));
        Disk.canonical(&path).ok().or_else(beside).unwrap_or_else(|| flat(&path))
    }

    /// The URI of a file, by the path that a run knows it under.
    pub(super) fn uri(&self, path: &str) -> Option<Uri> {
        match self.document(Path::new(path)) {
            Some(open) => Some(open.uri.clone()),
            None => super::places::uri_of(&flat(&self.root.join(path))),
        }
    }

    /// The open document at a path.
    pub(super) fn document(&self, path: &Path) -> Option<&Document> {
        self.open.get(&self.key(path))
    }
}

impl Files for Desk {
    fn read(&self, path: &Path) -> io::Result<Vec<u8>> {
        match self.document(path) {
            Some(open) => Ok(open.text.as_bytes().to_vec()),
            None => Disk.read(&self.root.join(path)),
        }
    }

    fn size(&self, path: &Path) -> io::Result<u64> {
        match self.document(path) {
            Some(open) => Ok(open.text.len() as u64),
            None => Disk.size(&self.root.join(path)),
        }
    }

    fn canonical(&self, path: &Path) -> io::Result<PathBuf> {
        match self.document(path) {
            Some(_) => Ok(self.key(path)),
            None => Disk.canonical(&self.root.join(path)),
        }
    }

    fn is_file(&self, path: &Path) -> bool {
        self.document(path).is_some() || Disk.is_file(&self.root.join(path))
    }

    fn exists(&self, path: &Path) -> bool {
        self.document(path).is_some() || Disk.exists(&self.root.join(path))
    }

    fn here(&self) -> Option<PathBuf> {
        Some(self.root.clone())
    }
}
