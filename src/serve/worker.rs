//! One design on a thread of its own: it is judged when its texts change, and what was computed is kept until they do, so that
//! questions about it are answered at once.

use super::files::Desk;
use super::look::Look;
use super::{decks, definition, hover, told};
use crate::declared::Deck;
use crate::pipeline::{self, Job, Progress};
use lsp_server::RequestId;
use lsp_types::{Diagnostic, Hover, HoverContents, Location, MarkupContent, MarkupKind, Position, Range};
use serde_json::Value;
use std::cell::RefCell;
use std::collections::BTreeMap;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::{Path, PathBuf};
use std::sync::mpsc::{Receiver, Sender, channel};
use std::thread;

/// The stack of a worker's thread, bytes: what the main thread of a program usually has.
const STACK: usize = 8 << 20;

/// Which design: the decks and netlists that a command line would name.
#[derive(Clone, Debug, Default, PartialEq, Eq, PartialOrd, Ord)]
pub(super) struct Which {
    /// The deck; none where no deck is found.
    pub(super) deck: Option<PathBuf>,
    /// The netlist; none: those that the deck names.
    pub(super) netlist: Option<PathBuf>,
}

/// A question of the editor about a place.
#[derive(Clone, Debug)]
pub(super) struct Question {
    /// Under which it is answered.
    pub(super) id: RequestId,
    /// What is asked.
    pub(super) about: Asked,
    /// The document, by the desk's key.
    pub(super) document: PathBuf,
    /// The place in it.
    pub(super) at: Position,
}

/// What may be asked about a place.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Asked {
    Hover,
    Definition,
}

/// What a worker is told.
pub(super) enum Ask {
    /// These are the texts now.
    Judge(Box<Desk>),
    /// Answer this.
    Answer(Question),
}

/// What a worker tells.
pub(super) enum Told {
    /// A run is over.
    Judged(Judged),
    /// The answer to a question.
    Answer(RequestId, Value),
}

/// What a run found.
#[derive(Clone, Debug, Default)]
pub(super) struct Judged {
    /// Of which design.
    pub(super) which: Which,
    /// By which worker: one that was ended may still tell something.
    pub(super) serial: u64,
    /// What is shown in each of its files, by the desk's key; files without anything to show are there too.
    pub(super) shown: BTreeMap<PathBuf, Vec<Diagnostic>>,
    /// Versions of the open documents that were read.
    pub(super) versions: BTreeMap<PathBuf, i32>,
}

/// Begins a worker, and gives the way to tell it something. It ends when that is dropped.
pub(super) fn begin(which: Which, serial: u64, tell: impl Fn(Told) + Send + 'static) -> std::io::Result<Sender<Ask>> {
    let (asks, received) = channel();
    let worker = Worker { which, serial, asks: received, held: RefCell::default(), tell: Box::new(tell) };
    thread::Builder::new().name("design".to_owned()).stack_size(STACK).spawn(move || worker.run())?;
    Ok(asks)
}

struct Worker {
    which: Which,
    serial: u64,
    asks: Receiver<Ask>,
    /// Questions that are answered after the coming run.
    held: RefCell<Vec<Question>>,
    tell: Box<dyn Fn(Told) + Send>,
}

struct Still;

impl Progress for Still {
    fn stage(&self, _: &str) {}
}

impl Worker {
    /// A fault of the program in one run must not end the editor's session: the next change begins afresh.
    fn run(&self) {
        let mut next = self.serve(None);
        while let Some(desk) = next {
            let desk = self.latest(desk);
            next = catch_unwind(AssertUnwindSafe(|| self.judge(&desk))).unwrap_or_else(|_| {
                self.judged(Judged { which: self.which.clone(), serial: self.serial, ..Judged::default() });
                self.serve(None)
            });
        }
    }

    /// The newest texts that are known: what was typed in between is never judged.
    fn latest(&self, mut desk: Box<Desk>) -> Box<Desk> {
        while let Ok(ask) = self.asks.try_recv() {
            match ask {
                Ask::Judge(newer) => desk = newer,
                Ask::Answer(question) => self.held.borrow_mut().push(question),
            }
        }
        desk
    }

    fn judged(&self, judged: Judged) {
        (self.tell)(Told::Judged(judged));
    }

    /// Runs on the texts, and answers questions from what was computed, until there are other texts.
    fn judge(&self, desk: &Desk) -> Option<Box<Desk>> {
        let job = Job {
            decks: self.which.deck.iter().cloned().collect(),
            netlists: self.which.netlist.iter().cloned().collect(),
            all_voltages: true,
            ..Job::default()
        };
        let (deck, outcome) = pipeline::read_decks(desk, &job);
        if outcome.could_not || (deck.netlists.is_empty() && job.netlists.is_empty()) {
            return self.show(desk, &outcome.sources, &deck, outcome.report.listed());
        }
        let mut next = None;
        let mut came_to_a_world = false;
        let outcome = pipeline::lint_and(desk, &job, &Still, |world, report| {
            came_to_a_world = true;
            let sources = world.design.sources;
            self.judged(self.found(told::shown(desk, sources, report.listed()), desk));
            next = self.serve(Some(&Look { desk, sources, deck: world.deck, world: Some(world) }));
        });
        if came_to_a_world { next } else { self.show(desk, &outcome.sources, &deck, outcome.report.listed()) }
    }

    fn show<'d>(
        &self,
        desk: &Desk,
        sources: &crate::source::SourceMap,
        deck: &Deck,
        diagnostics: impl Iterator<Item = &'d crate::diag::Diagnostic>,
    ) -> Option<Box<Desk>> {
        self.judged(self.found(told::shown(desk, sources, diagnostics), desk));
        self.serve(Some(&Look { desk, sources, deck, world: None }))
    }

    fn found(&self, shown: BTreeMap<PathBuf, Vec<Diagnostic>>, desk: &Desk) -> Judged {
        let version = |file: &PathBuf| Some((file.clone(), desk.open.get(file)?.version));
        let versions = shown.keys().filter_map(version).collect();
        Judged { which: self.which.clone(), serial: self.serial, shown, versions }
    }

    /// Answers questions until the texts change; none where nobody asks any more.
    fn serve(&self, look: Option<&Look<'_>>) -> Option<Box<Desk>> {
        let answer = |question: Question| (self.tell)(Told::Answer(question.id.clone(), answer(look, &question)));
        self.held.take().into_iter().for_each(answer);
        while let Ok(ask) = self.asks.recv() {
            match ask {
                Ask::Judge(desk) => return Some(desk),
                Ask::Answer(question) => answer(question),
            }
        }
        None
    }
}

fn answer(look: Option<&Look<'_>>, question: &Question) -> Value {
    let found = look.and_then(|look| match question.about {
        Asked::Hover => hover_at(look, &question.document, question.at).map(serde_json::to_value),
        Asked::Definition => Some(serde_json::to_value(definition_at(look, &question.document, question.at))),
    });
    found.and_then(Result::ok).unwrap_or(Value::Null)
}

fn is_deck(document: &Path) -> bool {
    super::is_yaml(document)
}

fn hover_at(look: &Look<'_>, document: &Path, at: Position) -> Option<Hover> {
    let file = look.file(document)?;
    let offset = super::places::Lines::of(look.sources.text(file)).offset(at) as u32;
    let (words, span) = match is_deck(document) {
        true => decks::hover(look, file, offset)?,
        false => hover::hover(look, file, offset)?,
    };
    let range: Range = told::Texts::new(look.desk, look.sources).range(span);
    let contents = HoverContents::Markup(MarkupContent { kind: MarkupKind::Markdown, value: words });
    Some(Hover { contents, range: Some(range) })
}

fn definition_at(look: &Look<'_>, document: &Path, at: Position) -> Vec<Location> {
    let Some(file) = look.file(document) else { return Vec::new() };
    let offset = super::places::Lines::of(look.sources.text(file)).offset(at) as u32;
    let (spans, files) = match is_deck(document) {
        true => decks::definition(look, file, offset),
        false => (definition::definition(look, file, offset), Vec::new()),
    };
    let mut texts = told::Texts::new(look.desk, look.sources);
    let in_texts: Vec<Location> = spans.into_iter().filter_map(|span| texts.location(span)).collect();
    let whole = |path: PathBuf| Some(Location::new(look.desk.uri(path.to_str()?)?, Range::default()));
    in_texts.into_iter().chain(files.into_iter().filter_map(whole)).collect()
}
