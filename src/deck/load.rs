//! Which files make up a run's decks, and in which order: each deck after those that it uses.
//!
//! A deck that is used from several sides is read and laid down once, at its first use: laid down again it would undo what
//! stands above it.

use super::merge::{complain_of_same_nets, lay_over};
use super::node::{self, Entry, Node, Shape};
use super::pages;
use crate::diag::Diagnostic;
use crate::names::nearest;
use crate::source::{FileId, LARGEST_TEXT, SourceMap, Span};
use std::collections::HashMap;
use std::io;
use std::path::{Component, Path, PathBuf};

/// Decks that use one another in a chain may be this many.
const LONGEST_CHAIN: usize = 64;
/// What decks inside the program are called by.
const BUILTIN: &str = "builtin:";

/// Where deck files come from.
pub trait DeckFiles {
    /// All bytes of the file at `path`.
    fn read(&self, path: &Path) -> io::Result<Vec<u8>>;
}

/// All decks of a run, laid over one another.
pub(crate) struct Loaded {
    /// The merged tree.
    pub(crate) tree: Node,
    /// The run's own decks.
    pub(crate) own: Vec<FileId>,
    /// The folder that paths in a file are relative to.
    pub(crate) folders: HashMap<FileId, PathBuf>,
}

/// Reads `own` decks and all that they use; none: `builtin:ldmos`.
pub(crate) fn load(
    files: &dyn DeckFiles,
    own: &[PathBuf],
    sources: &mut SourceMap,
    complaints: &mut Vec<Diagnostic>,
) -> Loaded {
    let empty = Node { span: Span::new(FileId(0), 0, 0), shape: Shape::Map(Vec::new()) };
    let loaded = Loaded { tree: empty, own: Vec::new(), folders: HashMap::new() };
    let mut loader = Loader { files, sources, complaints, loaded, state: HashMap::new(), chain: Vec::new() };
    if own.is_empty() {
        loader.builtin("ldmos", None);
    }
    for path in own {
        match path.to_str().and_then(|path| path.strip_prefix(BUILTIN)) {
            Some(name) => loader.builtin(name, None),
            None => loader.file(&tidy(path), None),
        }
    }
    loader.loaded
}

#[derive(Clone, Copy, PartialEq)]
enum State {
    Open,
    Laid(Option<FileId>),
}

struct Loader<'a> {
    files: &'a dyn DeckFiles,
    sources: &'a mut SourceMap,
    complaints: &'a mut Vec<Diagnostic>,
    loaded: Loaded,
    state: HashMap<String, State>,
    /// The decks being read, and the place of the `use` that asked for each.
    chain: Vec<(String, Option<Span>)>,
}

impl Loader<'_> {
    /// Reads the deck called `name` from `read` unless it is known. `asked` is the place of the `use` that names it.
    fn once(&mut self, name: String, asked: Option<Span>, read: impl FnOnce(&mut Self) -> Option<FileId>) {
        match self.state.get(&name) {
            Some(State::Open) => self.circle(&name, asked),
            Some(&State::Laid(file)) => self.own(asked, file),
            None if self.chain.len() >= LONGEST_CHAIN => self.too_long(asked),
            None => {
                self.state.insert(name.clone(), State::Open);
                self.chain.push((name.clone(), asked));
                let file = read(self);
                self.own(asked, file);
                self.chain.pop();
                self.state.insert(name, State::Laid(file));
            }
        }
    }

    fn own(&mut self, asked: Option<Span>, file: Option<FileId>) {
        if let (None, Some(file)) = (asked, file)
            && !self.loaded.own.contains(&file)
            && !self.sources.file(file).path().starts_with(BUILTIN)
        {
            self.loaded.own.push(file);
        }
    }

    fn file(&mut self, path: &Path, asked: Option<Span>) {
        let name = shown(path);
        self.once(name.clone(), asked, |this| {
            let bytes = match this.files.read(path) {
                Ok(bytes) => bytes,
                Err(error) => {
                    this.unreadable(&name, asked, &error);
                    return None;
                }
            };
            let file = this.take_in(&name, bytes)?;
            this.loaded.folders.insert(file, path.parent().map(Path::to_path_buf).unwrap_or_default());
            this.lay(file);
            Some(file)
        });
    }

    fn builtin(&mut self, name: &str, asked: Option<Span>) {
        let Some(text) = super::builtin(name) else {
            let place = asked.unwrap_or_else(|| Span::new(self.sources.add(format!("{BUILTIN}{name}"), ""), 0, 0));
            self.complaints.push(no_builtin(name, place));
            return;
        };
        self.once(format!("{BUILTIN}{name}"), asked, |this| {
            let file = this.sources.add(format!("{BUILTIN}{name}"), text);
            if name == "ldmos" {
                this.lay_pages();
            }
            this.lay(file);
            Some(file)
        });
    }

    /// The rules of `builtin:ldmos`, each from its page.
    fn lay_pages(&mut self) {
        for page in pages::PAGES {
            let file = self.sources.add(format!("{BUILTIN}ldmos/{}.yaml", page.id), page.text);
            let tree = node::read(self.sources, file, self.complaints);
            let place = Span::new(file, 0, 0);
            let rule = Entry { key: page.id.to_string(), place: id_place(&tree).unwrap_or(place), value: tree };
            let rules = Node { span: place, shape: Shape::Map(vec![rule]) };
            let rules = Entry { key: "rules".to_string(), place, value: rules };
            lay_over(&mut self.loaded.tree, Node { span: place, shape: Shape::Map(vec![rules]) });
        }
    }

    /// Takes a text in; what is no UTF-8 is complained of.
    fn take_in(&mut self, name: &str, bytes: Vec<u8>) -> Option<FileId> {
        if bytes.len() as u64 > LARGEST_TEXT {
            let file = self.sources.add(name, "");
            self.complaints.push(Diagnostic::error("deck", Span::new(file, 0, 0), "this file is too large for a deck"));
            return None;
        }
        match String::from_utf8(bytes) {
            Ok(text) => Some(self.sources.add(name, text.strip_prefix('\u{feff}').unwrap_or(&text))),
            Err(error) => {
                let at = error.utf8_error().valid_up_to();
                let byte = error.as_bytes()[at];
                let file = self.sources.add(name, String::from_utf8_lossy(error.as_bytes()));
                let place = Span::new(file, at as u32, at as u32);
                self.complaints.push(
                    Diagnostic::error("deck", place, format!("byte {byte:#04x} here is no UTF-8 text")).with_help(
                        "save the deck as UTF-8 (without that letter, if the file is meant to be plain ASCII)",
                    ),
                );
                None
            }
        }
    }

    /// Lays a deck down, after the decks that it uses.
    fn lay(&mut self, file: FileId) {
        let tree = node::read(self.sources, file, self.complaints);
        complain_of_same_nets(&tree, self.complaints);
        match &tree.shape {
            Shape::Map(_) => {}
            Shape::Empty => return,
            _ => {
                let message = "a deck is a map of sections: `use:`, `classes:`, `rails:`, `rules:` …";
                self.complaints.push(Diagnostic::error("deck", tree.span, message));
                return;
            }
        }
        for (name, place) in self.uses(&tree) {
            self.used(&name, place, file);
        }
        lay_over(&mut self.loaded.tree, without_use(tree));
    }

    fn used(&mut self, name: &str, place: Span, from: FileId) {
        if let Some(name) = name.strip_prefix(BUILTIN) {
            return self.builtin(name, Some(place));
        }
        let folder = self.loaded.folders.get(&from).cloned().unwrap_or_default();
        self.file(&tidy(&folder.join(name)), Some(place));
    }

    fn uses(&mut self, tree: &Node) -> Vec<(String, Span)> {
        let Shape::Map(sections) = &tree.shape else { return Vec::new() };
        let Some(list) = sections.iter().find(|section| section.key == "use") else { return Vec::new() };
        let nodes = match &list.value.shape {
            Shape::List(nodes) => nodes.as_slice(),
            _ => std::slice::from_ref(&list.value),
        };
        let mut uses = Vec::new();
        for node in nodes {
            match &node.shape {
                Shape::Text(text) => uses.push((text.clone(), node.span)),
                Shape::Empty => {}
                _ => self.complaints.push(Diagnostic::error(
                    "deck",
                    node.span,
                    "the path of a deck is needed here, such as `../process/bcd60.yaml`, or a name such as `builtin:ldmos`",
                )),
            }
        }
        uses
    }

    fn circle(&mut self, name: &str, asked: Option<Span>) {
        let Some(place) = asked else { return };
        let from = self.chain.iter().position(|(open, _)| open == name).unwrap_or(0);
        let mut error =
            Diagnostic::error("deck", place, format!("these decks use one another in a circle, back to `{name}`"))
                .with_help("a deck may use another only one way: move what both need into a third one");
        for (open, place) in &self.chain[from + 1..] {
            if let Some(place) = place {
                error = error.with_place(*place, format!("`{open}` is used here"));
            }
        }
        self.complaints.push(error);
    }

    fn too_long(&mut self, asked: Option<Span>) {
        let Some(place) = asked else { return };
        let message = format!("more than {LONGEST_CHAIN} decks use one another in a chain");
        self.complaints.push(Diagnostic::error("deck", place, message));
    }

    fn unreadable(&mut self, name: &str, asked: Option<Span>, error: &io::Error) {
        let place = asked.unwrap_or_else(|| Span::new(self.sources.add(name, ""), 0, 0));
        let message = match error.kind() {
            io::ErrorKind::NotFound => format!("there is no deck at `{name}`"),
            _ => format!("the deck `{name}` cannot be read: {error}"),
        };
        let error = Diagnostic::error("deck", place, message);
        self.complaints.push(match asked {
            Some(_) => error.with_help("paths are relative to the folder of the deck that names them"),
            None => error,
        });
    }
}

fn no_builtin(name: &str, place: Span) -> Diagnostic {
    let known: Vec<&str> = super::BUILTINS.iter().map(|(known, _)| *known).collect();
    let error = Diagnostic::error("deck", place, format!("no deck `{BUILTIN}{name}` is inside the program"));
    match nearest(name, known.iter().copied()) {
        Some(near) => error.with_help(format!("did you mean `{BUILTIN}{near}`?")),
        None => error.with_help(format!("there are {BUILTIN}{}", known.join(&format!(", {BUILTIN}")))),
    }
}

fn id_place(page: &Node) -> Option<Span> {
    let Shape::Map(entries) = &page.shape else { return None };
    entries.iter().find(|entry| entry.key == "id").map(|entry| entry.value.span)
}

fn without_use(mut tree: Node) -> Node {
    if let Shape::Map(sections) = &mut tree.shape {
        sections.retain(|section| section.key != "use");
    }
    tree
}

/// Takes `.` and `..` out of a path as far as its text allows, so that one deck has one name.
pub(crate) fn tidy(path: &Path) -> PathBuf {
    let mut tidy = PathBuf::new();
    for part in path.components() {
        match part {
            Component::CurDir => {}
            Component::ParentDir if matches!(tidy.components().next_back(), Some(Component::Normal(_))) => {
                tidy.pop();
            }
            part => tidy.push(part),
        }
    }
    tidy
}

/// A path as messages show it.
pub(crate) fn shown(path: &Path) -> String {
    path.to_string_lossy().replace('\\', "/")
}
