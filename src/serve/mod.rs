//! What `drainwise serve` does: a language server (Language Server Protocol 3.17) over a stream. While somebody types in a netlist or
//! deck, it shows what `lint` would say to the design, and answers what stands at the cursor and where that is defined.
//!
//! One loop owns the open documents and hands them to the designs that they belong to, each on a thread of its own ([`worker`]).

mod decks;
mod definition;
mod files;
mod hover;
mod look;
mod places;
mod session;
mod spot;
mod told;
mod wire;
mod worker;

use lsp_server::{ErrorCode, Message, Notification, Request, RequestId, Response};
use lsp_types::{
    DidChangeTextDocumentParams, DidCloseTextDocumentParams, DidOpenTextDocumentParams, HoverProviderCapability,
    InitializeParams, InitializeResult, OneOf, ServerCapabilities, ServerInfo, TextDocumentPositionParams,
    TextDocumentSyncCapability, TextDocumentSyncKind, TextDocumentSyncOptions, Uri,
};
use places::path_of;
use serde::de::DeserializeOwned;
use serde_json::Value;
use session::Session;
use std::io::{self, BufRead, BufReader, Read, Write};
use std::path::{Path, PathBuf};
use std::sync::mpsc::{Receiver, RecvTimeoutError, SyncSender, sync_channel};
use std::thread;
use std::time::{Duration, Instant};
use wire::Incoming;
use worker::{Asked, Question, Told};

/// A change is judged when nothing was typed for so long.
const PAUSE: Duration = Duration::from_millis(150);
/// Events that may wait.
const QUEUE: usize = 256;

/// What the loop learns of.
enum Event {
    Came(Incoming),
    /// The client's stream has ended.
    Ended,
    Told(Told),
}

/// Serves until the client ends it. Gives the exit code: 0 where it was shut down in order, else 1.
///
/// # Errors
/// Those of writing.
pub fn serve(input: impl Read + Send + 'static, output: &mut dyn Write) -> io::Result<u8> {
    let (tell, events) = sync_channel(QUEUE);
    let reader = tell.clone();
    thread::Builder::new().name("reader".to_owned()).spawn(move || read_all(&mut BufReader::new(input), &reader))?;
    let mut server = Server { output, tell, session: Session::default(), state: State::Fresh, due: None };
    match server.run(&events) {
        // The client is gone: nothing is left to say.
        Err(error) if error.kind() == io::ErrorKind::BrokenPipe => Ok(1),
        ended => ended,
    }
}

fn read_all(input: &mut dyn BufRead, tell: &SyncSender<Event>) {
    while let Ok(Some(incoming)) = wire::read(input) {
        if tell.send(Event::Came(incoming)).is_err() {
            return;
        }
    }
    let _ = tell.send(Event::Ended);
}

/// Whether a document is YAML, by its name.
fn is_yaml(path: &Path) -> bool {
    path.extension().is_some_and(|ending| ending.eq_ignore_ascii_case("yaml") || ending.eq_ignore_ascii_case("yml"))
}

#[derive(Clone, Copy, PartialEq)]
enum State {
    /// Before `initialize`.
    Fresh,
    Running,
    /// After `shutdown`.
    Ending,
}

struct Server<'o> {
    output: &'o mut dyn Write,
    tell: SyncSender<Event>,
    session: Session,
    state: State,
    /// When changes are to be judged.
    due: Option<Instant>,
}

impl Server<'_> {
    fn run(&mut self, events: &Receiver<Event>) -> io::Result<u8> {
        loop {
            let wait = self.due.map(|due| due.saturating_duration_since(Instant::now()));
            let event = match wait {
                Some(wait) => events.recv_timeout(wait),
                None => events.recv().map_err(|_| RecvTimeoutError::Disconnected),
            };
            match event {
                Ok(Event::Came(Incoming::Message(Message::Notification(told)))) if told.method == "exit" => {
                    return Ok(u8::from(self.state != State::Ending));
                }
                Ok(Event::Came(incoming)) => self.come(incoming)?,
                Ok(Event::Told(told)) => self.told(told)?,
                Ok(Event::Ended) | Err(RecvTimeoutError::Disconnected) => return Ok(1),
                Err(RecvTimeoutError::Timeout) => self.judge()?,
            }
        }
    }

    fn come(&mut self, incoming: Incoming) -> io::Result<()> {
        match incoming {
            Incoming::Garbage(id, code, words) => wire::refuse(self.output, id, code, &words),
            Incoming::Message(Message::Request(request)) => self.request(request),
            Incoming::Message(Message::Notification(told)) => {
                if self.state == State::Running {
                    self.notification(told);
                }
                Ok(())
            }
            Incoming::Message(Message::Response(_)) => Ok(()),
        }
    }

    fn send(&mut self, message: impl Into<Message>) -> io::Result<()> {
        wire::write(self.output, &message.into())
    }

    fn refuse(&mut self, id: RequestId, code: ErrorCode, words: impl Into<String>) -> io::Result<()> {
        self.send(Response::new_err(id, code as i32, words.into()))
    }

    fn answer(&mut self, id: RequestId, value: Value) -> io::Result<()> {
        self.send(Response { id, response_result: Ok(value) })
    }

    fn request(&mut self, request: Request) -> io::Result<()> {
        let about = match (request.method.as_str(), self.state) {
            ("initialize", State::Fresh) => return self.initialize(request),
            (_, State::Fresh) => {
                return self.refuse(request.id, ErrorCode::ServerNotInitialized, "`initialize` comes first");
            }
            (_, State::Ending) | ("initialize", _) => {
                return self.refuse(request.id, ErrorCode::InvalidRequest, "this is asked at the wrong time");
            }
            ("shutdown", State::Running) => {
                self.state = State::Ending;
                return self.answer(request.id, Value::Null);
            }
            ("textDocument/hover", _) => Asked::Hover,
            ("textDocument/definition", _) => Asked::Definition,
            (method, _) => {
                let words = format!("`{method}` is not served");
                return self.refuse(request.id, ErrorCode::MethodNotFound, words);
            }
        };
        let Some(place) = read::<TextDocumentPositionParams>(request.params) else {
            return self.refuse(request.id, ErrorCode::InvalidParams, "a document and a position are needed");
        };
        // What was typed before the question counts for its answer.
        self.judge()?;
        let asked = path_of(&place.text_document.uri).map(|path| self.session.key(&path)).is_some_and(|document| {
            let question = Question { id: request.id.clone(), about, document, at: place.position };
            self.session.ask(question)
        });
        if asked { Ok(()) } else { self.answer(request.id, Value::Null) }
    }

    fn initialize(&mut self, request: Request) -> io::Result<()> {
        let Some(params) = read::<InitializeParams>(request.params) else {
            return self.refuse(request.id, ErrorCode::InvalidParams, "these are no parameters of `initialize`");
        };
        self.state = State::Running;
        self.session.open_folder(folder_of(&params));
        let sync = TextDocumentSyncOptions {
            open_close: Some(true),
            change: Some(TextDocumentSyncKind::FULL),
            save: Some(true.into()),
            ..TextDocumentSyncOptions::default()
        };
        let capabilities = ServerCapabilities {
            text_document_sync: Some(TextDocumentSyncCapability::Options(sync)),
            hover_provider: Some(HoverProviderCapability::Simple(true)),
            definition_provider: Some(OneOf::Left(true)),
            ..ServerCapabilities::default()
        };
        let info = ServerInfo { name: "drainwise".to_owned(), version: Some(env!("CARGO_PKG_VERSION").to_owned()) };
        let result = InitializeResult { capabilities, server_info: Some(info) };
        self.answer(request.id, serde_json::to_value(result)?)
    }

    /// A notification that cannot be read has nobody to be told so.
    fn notification(&mut self, told: Notification) {
        match told.method.as_str() {
            "textDocument/didOpen" => {
                if let Some(params) = read::<DidOpenTextDocumentParams>(told.params) {
                    self.session.opened(params.text_document);
                }
            }
            "textDocument/didChange" => {
                if let Some(params) = read::<DidChangeTextDocumentParams>(told.params) {
                    self.session.changed(params.text_document, params.content_changes);
                }
            }
            "textDocument/didClose" => {
                if let Some(params) = read::<DidCloseTextDocumentParams>(told.params) {
                    self.session.closed(&params.text_document.uri);
                }
            }
            "textDocument/didSave" | "workspace/didChangeWatchedFiles" => self.session.disk_changed(),
            _ => return,
        }
        self.due = Some(Instant::now() + PAUSE);
    }

    fn told(&mut self, told: Told) -> io::Result<()> {
        match told {
            Told::Answer(id, value) => self.answer(id, value),
            Told::Judged(judged) => {
                self.session.judged(judged);
                self.judge()?;
                self.session.ask_again().into_iter().try_for_each(|id| self.answer(id, Value::Null))
            }
        }
    }

    /// Has everything judged that changed.
    fn judge(&mut self) -> io::Result<()> {
        self.due = None;
        let tell = &self.tell;
        self.session.judge(&|which, serial| {
            let tell = tell.clone();
            worker::begin(which, serial, move |told| {
                let _ = tell.send(Event::Told(told));
            })
        })?;
        for params in self.session.take_news() {
            let method = "textDocument/publishDiagnostics".to_owned();
            self.send(Notification { method, params: serde_json::to_value(params)? })?;
        }
        Ok(())
    }
}

fn read<T: DeserializeOwned>(params: Value) -> Option<T> {
    serde_json::from_value(params).ok()
}

/// The folder that the client works in.
fn folder_of(params: &InitializeParams) -> Option<PathBuf> {
    #[allow(deprecated, reason = "older clients name their folder so")]
    let old: Option<&Uri> = params.root_uri.as_ref();
    let folder = params.workspace_folders.as_ref().and_then(|folders| folders.first()).map(|folder| &folder.uri);
    folder.or(old).and_then(path_of)
}
