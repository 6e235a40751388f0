//! Decks in memory, for tests.

use super::*;
use crate::declared::Subject;
use crate::expr::Vocabulary;
use crate::facts::vocabulary::vocabulary;
use std::io;
use std::path::Path;

/// Files in memory: path and text.
pub(super) struct InMemory<'a>(pub(super) &'a [(&'a str, &'a [u8])]);

impl DeckFiles for InMemory<'_> {
    fn read(&self, path: &Path) -> io::Result<Vec<u8>> {
        let found = self.0.iter().find(|(name, _)| Path::new(name) == path);
        found.map(|(_, bytes)| bytes.to_vec()).ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))
    }
}

/// The vocabulary of each subject, as rules meet it.
pub(super) fn words(subject: Subject) -> &'static dyn Vocabulary {
    vocabulary(subject)
}

/// Loads `own` decks out of `files`.
pub(super) fn load(files: &[(&str, &str)], own: &[&str], sources: &mut SourceMap) -> (Deck, Vec<Diagnostic>) {
    let files: Vec<(&str, &[u8])> = files.iter().map(|(path, text)| (*path, text.as_bytes())).collect();
    let own: Vec<PathBuf> = own.iter().map(PathBuf::from).collect();
    load_decks(&InMemory(&files), &own, sources, &words)
}
