//! The open documents, the designs that they belong to, and what was last shown for each file.

use super::files::{Desk, Document};
use super::is_yaml;
use super::places::{Lines, path_of};
use super::worker::{Ask, Judged, Question, Which};
use crate::deck::schema;
use crate::load::{Disk, Files, relative};
use crate::pipeline::deck_above;
use lsp_server::RequestId;
use lsp_types::{
    Diagnostic, PublishDiagnosticsParams, TextDocumentContentChangeEvent, TextDocumentItem, Uri,
    VersionedTextDocumentIdentifier,
};
use std::collections::{BTreeMap, BTreeSet};
use std::io;
use std::path::{Path, PathBuf};
use std::sync::mpsc::Sender;

/// The usual endings of netlists.
const ENDINGS: [&str; 14] =
    ["sp", "spi", "spice", "cir", "ckt", "net", "cdl", "lib", "sub", "subckt", "ngspice", "hsp", "inc", "mod"];
/// Languages that netlists are called by editors.
const LANGUAGES: [&str; 3] = ["spice", "netlist", "cdl"];
/// The name of decks that are found by themselves.
const DECK: &str = "drainwise.yaml";

/// A design that is being judged, or was.
struct Running {
    serial: u64,
    asks: Sender<Ask>,
    /// What its last finished run found.
    judged: Option<Judged>,
}

/// What was shown for a file.
#[derive(Default)]
struct Shown {
    uri: Option<Uri>,
    version: Option<i32>,
    diagnostics: Vec<Diagnostic>,
}

/// Everything that the server knows of one client.
#[derive(Default)]
pub(super) struct Session {
    desk: Desk,
    designs: BTreeMap<Which, Running>,
    /// Documents that changed and were not handed on yet.
    changed: BTreeSet<PathBuf>,
    /// Whether any file may have changed.
    all_changed: bool,
    shown: BTreeMap<PathBuf, Shown>,
    /// Questions about documents whose design is not known yet.
    waiting: Vec<Question>,
    /// How many workers there were.
    workers: u64,
    /// Whether there may be something new to show.
    news: bool,
}

impl Session {
    /// Paths are shown against this folder (default: the one that the program runs in).
    pub(super) fn open_folder(&mut self, folder: Option<PathBuf>) {
        let here = || Disk.here().unwrap_or_default();
        let folder = folder.unwrap_or_else(here);
        self.desk.root = Disk.canonical(&folder).unwrap_or(folder);
    }

    /// The one path of a file.
    pub(super) fn key(&self, path: &Path) -> PathBuf {
        self.desk.key(path)
    }

    pub(super) fn opened(&mut self, item: TextDocumentItem) {
        let Some(path) = path_of(&item.uri) else { return };
        let (key, language) = (self.key(&path), item.language_id);
        let document = Document { uri: item.uri, version: item.version, language, text: item.text.into() };
        self.desk.open.insert(key.clone(), document);
        self.changed.insert(key);
    }

    pub(super) fn changed(
        &mut self,
        named: VersionedTextDocumentIdentifier,
        changes: Vec<TextDocumentContentChangeEvent>,
    ) {
        let Some(key) = path_of(&named.uri).map(|path| self.key(&path)) else { return };
        let Some(document) = self.desk.open.get_mut(&key) else { return };
        document.version = named.version;
        for change in changes {
            document.text = match change.range {
                None => change.text.into(),
                // The server asks for whole texts; a client that sends parts all the same is understood.
                Some(range) => {
                    let lines = Lines::of(&document.text);
                    let (start, end) = (lines.offset(range.start), lines.offset(range.end));
                    let (before, after) = (&document.text[..start], &document.text[end.max(start)..]);
                    format!("{before}{}{after}", change.text).into()
                }
            };
        }
        self.changed.insert(key);
    }

    pub(super) fn closed(&mut self, uri: &Uri) {
        let Some(key) = path_of(uri).map(|path| self.key(&path)) else { return };
        if self.desk.open.remove(&key).is_some() {
            self.changed.insert(key);
        }
    }

    pub(super) fn disk_changed(&mut self) {
        self.all_changed = true;
    }

    /// Hands a question to a design that has its document. Where that is not known yet, the question waits. Whether anybody may answer.
    pub(super) fn ask(&mut self, question: Question) -> bool {
        let has_it = |which: &Which, running: &Running| match &running.judged {
            Some(judged) => judged.shown.contains_key(&question.document),
            None => which.netlist.as_ref().is_some_and(|path| self.key(path) == question.document),
        };
        match self.designs.iter().find(|(which, running)| has_it(which, running)) {
            Some((_, running)) => running.asks.send(Ask::Answer(question)).is_ok(),
            None if self.designs.values().any(|running| running.judged.is_none()) => {
                self.waiting.push(question);
                true
            }
            None => false,
        }
    }

    /// Asks again what had to wait, and gives the questions that nobody will answer.
    pub(super) fn ask_again(&mut self) -> Vec<RequestId> {
        let waiting = std::mem::take(&mut self.waiting);
        waiting.into_iter().filter_map(|question| (!self.ask(question.clone())).then_some(question.id)).collect()
    }

    /// Takes what a run found.
    pub(super) fn judged(&mut self, judged: Judged) {
        if let Some(running) = self.designs.get_mut(&judged.which).filter(|running| running.serial == judged.serial) {
            running.judged = Some(judged);
            self.news = true;
        }
    }

    /// Begins and ends designs, and hands changed texts to those that they concern.
    pub(super) fn judge(&mut self, begin: &dyn Fn(Which, u64) -> io::Result<Sender<Ask>>) -> io::Result<()> {
        let wanted = self.wanted();
        let before = self.designs.len();
        self.designs.retain(|which, _| wanted.contains(which));
        self.news |= self.designs.len() != before;
        let changed = std::mem::take(&mut self.changed);
        let all = std::mem::take(&mut self.all_changed);
        for which in wanted {
            let desk = || Ask::Judge(Box::new(self.desk.clone()));
            if let Some(running) = self.designs.get(&which) {
                let is_told = !(all || concerns(running, &changed)) || running.asks.send(desk()).is_ok();
                if is_told {
                    continue;
                }
            }
            self.workers += 1;
            let running = Running { serial: self.workers, asks: begin(which.clone(), self.workers)?, judged: None };
            let _ = running.asks.send(Ask::Judge(Box::new(self.desk.clone())));
            self.designs.insert(which, running);
        }
        Ok(())
    }

    /// The designs of the open documents: that of the nearest deck, and for a netlist that this one does not have, one of its own.
    fn wanted(&self) -> BTreeSet<Which> {
        let mut wanted = BTreeSet::new();
        let mut alone = Vec::new();
        for (path, document) in &self.desk.open {
            let path = relative(path, &self.desk);
            let is_deck = path.file_name().is_some_and(|name| name == DECK);
            let above = || deck_above(&self.desk, path.parent().unwrap_or(Path::new("")));
            let deck = if is_deck { Some(path.clone()) } else { above() };
            let own = match is_yaml(&path) {
                true if is_deck => None,
                true => is_marked(&document.text).then(|| Which { deck: Some(path.clone()), netlist: None }),
                false => is_netlist(&path, document).then(|| Which { deck: deck.clone(), netlist: Some(path.clone()) }),
            };
            if let Some(deck) = deck {
                wanted.insert(Which { deck: Some(deck), netlist: None });
            }
            alone.extend(own);
        }
        wanted.extend(alone.iter().cloned());
        for own in alone {
            let document = own.netlist.as_ref().or(own.deck.as_ref()).map(|path| self.key(path)).unwrap_or_default();
            let has_it = |which: &&Which| match self.designs.get(*which).map(|running| &running.judged) {
                Some(Some(judged)) => judged.shown.contains_key(&document),
                // Its deck's design is not known yet: it may be part of it.
                _ => which.netlist.is_none() && which.deck == own.deck,
            };
            if wanted.iter().filter(|which| **which != own).any(|which| has_it(&which)) {
                wanted.remove(&own);
            }
        }
        wanted
    }

    /// What is to be shown anew.
    pub(super) fn take_news(&mut self) -> Vec<PublishDiagnosticsParams> {
        if !std::mem::take(&mut self.news) {
            return Vec::new();
        }
        let mut now: BTreeMap<PathBuf, Shown> = BTreeMap::new();
        for judged in self.designs.values().filter_map(|running| running.judged.as_ref()) {
            for (file, diagnostics) in &judged.shown {
                let shown = now.entry(file.clone()).or_default();
                shown.version = shown.version.max(judged.versions.get(file).copied());
                let new =
                    diagnostics.iter().filter(|one| !shown.diagnostics.contains(one)).cloned().collect::<Vec<_>>();
                shown.diagnostics.extend(new);
            }
        }
        let gone = self.shown.keys().filter(|file| !now.contains_key(*file)).cloned().collect::<Vec<_>>();
        now.extend(gone.into_iter().map(|file| (file, Shown::default())));
        let mut messages = Vec::new();
        for (file, mut shown) in now {
            let before = self.shown.remove(&file);
            shown.uri = match &before {
                Some(Shown { uri: Some(uri), .. }) => Some(uri.clone()),
                _ => file.to_str().and_then(|path| self.desk.uri(path)),
            };
            let before = before.unwrap_or_default();
            let is_new = shown.diagnostics != before.diagnostics || shown.version != before.version;
            if let (true, Some(uri)) = (is_new, shown.uri.clone()) {
                let (diagnostics, version) = (shown.diagnostics.clone(), shown.version);
                messages.push(PublishDiagnosticsParams { uri, diagnostics, version });
            }
            if !shown.diagnostics.is_empty() || shown.version.is_some() {
                self.shown.insert(file, shown);
            }
        }
        messages
    }
}

/// Whether a design has to be judged again: one of its texts changed, or a file that it may have missed.
fn concerns(running: &Running, changed: &BTreeSet<PathBuf>) -> bool {
    let Some(judged) = &running.judged else { return !changed.is_empty() };
    let misses = |one: &Diagnostic| matches!(&one.code, Some(lsp_types::NumberOrString::String(code)) if ["missing-include", "deck", "netlist"].contains(&code.as_str()));
    let has_gaps = || judged.shown.is_empty() || judged.shown.values().flatten().any(misses);
    changed.iter().any(|file| judged.shown.contains_key(file)) || (!changed.is_empty() && has_gaps())
}

/// Whether a YAML document says in its first line that it is a deck, as editors are told of a schema.
fn is_marked(text: &str) -> bool {
    text.lines().next().is_some_and(|line| line.contains("$schema=") && line.contains(schema::FILE))
}

fn is_netlist(path: &Path, document: &Document) -> bool {
    let language = document.language.to_ascii_lowercase();
    let ending = path.extension().map(|ending| ending.to_string_lossy().to_ascii_lowercase()).unwrap_or_default();
    LANGUAGES.iter().any(|known| language.contains(known)) || ENDINGS.contains(&ending.as_str())
}
