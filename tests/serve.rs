//! The language server as an editor meets it: a scripted client on its standard input and output.
//!
//! What is asked and answered follows the Language Server Protocol, specification 3.17, and JSON-RPC 2.0; the circuit is invented.
#![allow(clippy::unwrap_used, clippy::panic, reason = "a test that cannot go on must stop")]

use serde_json::{Value, json};
use std::fs;
use std::io::{BufRead, BufReader, Write};
use std::process::{Child, ChildStdin, Command, Stdio};
use std::sync::mpsc::{Receiver, channel};
use std::thread;
use std::time::Duration;
use tempfile::TempDir;

const DECK: &str = "\
use: [builtin:ldmos]
classes:
  ldn60:
    kind: nmos
    pins: [d, g, s, b]
    high_voltage: true
    size: {width: w, length: l, fingers: nf}
    fingers: {min: 2, multiple_of: 2}
    ratings: {vds: -0.5V..60V, vgs: -5.5V..5.5V}
    body: {tie: s}
  rpoly: {kind: resistor, pins: [a, b]}
rails: {VSS: 0V, VIN: 6V..48V, COIL: 0V..48V, CTL: 0V..5V}
currents: {into: {COIL: 10mA}}
";

/// Two findings: three fingers, and a gate pulled up to the battery.
const BLOCK: &str = "\
* coil switches µ
.param wide=60u
.subckt pull A B
R1 A B rpoly r=1meg
.ends
M1 COIL CTL VSS VSS ldn60 w=wide l=0.6u nf=3
XP VIN GATE pull
M2 COIL GATE VSS VSS ldn60 w={2*wide} l=0.6u nf=2
";

/// How long an answer may take on a busy machine.
const PATIENCE: Duration = Duration::from_secs(120);

struct Client {
    folder: TempDir,
    server: Child,
    input: Option<ChildStdin>,
    output: Receiver<Value>,
    asked: i64,
    version: i64,
}

fn message(output: &mut dyn BufRead) -> Option<Value> {
    let mut length = 0;
    loop {
        let mut line = String::new();
        if output.read_line(&mut line).ok()? == 0 {
            return None;
        }
        match line.trim_end() {
            "" => break,
            header => length = header.strip_prefix("Content-Length: ")?.parse().ok()?,
        }
    }
    let mut body = vec![0; length];
    output.read_exact(&mut body).ok()?;
    let value: Value = serde_json::from_slice(&body).unwrap();
    assert_eq!(value["jsonrpc"], "2.0");
    Some(value)
}

impl Client {
    /// A server in a folder with these files, not yet initialised.
    fn fresh(files: &[(&str, &str)]) -> Client {
        let folder = tempfile::tempdir().unwrap();
        for (name, text) in files {
            let path = folder.path().join(name);
            fs::create_dir_all(path.parent().unwrap()).unwrap();
            fs::write(path, text).unwrap();
        }
        let mut server = Command::new(env!("CARGO_BIN_EXE_drainwise"))
            .arg("serve")
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .unwrap();
        let (input, mut output) = (server.stdin.take(), BufReader::new(server.stdout.take().unwrap()));
        let (tell, received) = channel();
        thread::spawn(move || {
            while let Some(value) = message(&mut output) {
                let _ = tell.send(value);
            }
        });
        Client { folder, server, input, output: received, asked: 0, version: 0 }
    }

    /// The same, initialised.
    fn new(files: &[(&str, &str)]) -> Client {
        let mut client = Client::fresh(files);
        let folder = client.uri("");
        let answer = client.ask("initialize", json!({"processId": null, "rootUri": folder, "capabilities": {}}));
        assert_eq!(answer["result"]["serverInfo"]["name"], "drainwise");
        client.tell("initialized", json!({}));
        client
    }

    fn uri(&self, name: &str) -> String {
        let folder = self.folder.path().canonicalize().unwrap();
        format!("file://{}/{name}", folder.display()).trim_end_matches('/').to_owned()
    }

    fn raw(&mut self, bytes: &[u8]) {
        let input = self.input.as_mut().unwrap();
        input.write_all(bytes).unwrap();
        input.flush().unwrap();
    }

    fn send(&mut self, value: &Value) {
        let text = value.to_string();
        self.raw(format!("Content-Length: {}\r\n\r\n{text}", text.len()).as_bytes());
    }

    fn tell(&mut self, method: &str, params: Value) {
        self.send(&json!({"jsonrpc": "2.0", "method": method, "params": params}));
    }

    /// The next message that fits.
    #[track_caller]
    fn wait(&mut self, fits: impl Fn(&Value) -> bool) -> Value {
        loop {
            let Ok(value) = self.output.recv_timeout(PATIENCE) else { panic!("no such answer") };
            if fits(&value) {
                return value;
            }
        }
    }

    #[track_caller]
    fn ask(&mut self, method: &str, params: Value) -> Value {
        self.asked += 1;
        let id = self.asked;
        self.send(&json!({"jsonrpc": "2.0", "id": id, "method": method, "params": params}));
        self.wait(|value| value["id"] == id && value.get("method").is_none())
    }

    fn open(&mut self, name: &str, language: &str, text: &str) {
        self.version += 1;
        let document = json!({"uri": self.uri(name), "languageId": language, "version": self.version, "text": text});
        self.tell("textDocument/didOpen", json!({"textDocument": document}));
    }

    fn change(&mut self, name: &str, text: &str) {
        self.version += 1;
        let document = json!({"uri": self.uri(name), "version": self.version});
        self.tell("textDocument/didChange", json!({"textDocument": document, "contentChanges": [{"text": text}]}));
    }

    /// What is shown for the newest state of a document.
    #[track_caller]
    fn shown(&mut self, name: &str) -> Vec<Value> {
        let (uri, version) = (self.uri(name), self.version);
        let told = self.wait(|value| value["params"]["uri"] == *uri && value["params"]["version"] == version);
        assert_eq!(told["method"], "textDocument/publishDiagnostics");
        told["params"]["diagnostics"].as_array().unwrap().clone()
    }

    /// The place `ahead` UTF-16 units behind the start of the first `needle` in a text.
    fn place(&self, name: &str, text: &str, needle: &str, ahead: usize) -> Value {
        let at = text.find(needle).unwrap_or_else(|| panic!("no `{needle}`"));
        let line_start = text[..at].rfind('\n').map_or(0, |end| end + 1);
        let (line, column) = (text[..at].matches('\n').count(), text[line_start..at].encode_utf16().count() + ahead);
        json!({"textDocument": {"uri": self.uri(name)}, "position": {"line": line, "character": column}})
    }

    #[track_caller]
    fn hover(&mut self, name: &str, text: &str, needle: &str) -> String {
        let place = self.place(name, text, needle, 1);
        let answer = self.ask("textDocument/hover", place);
        answer["result"]["contents"]["value"].as_str().unwrap_or_default().to_owned()
    }

    /// Where a thing is defined, as `file:line:column`, counted from 1.
    #[track_caller]
    fn defined(&mut self, name: &str, text: &str, needle: &str, ahead: usize) -> Vec<String> {
        let place = self.place(name, text, needle, ahead);
        let answer = self.ask("textDocument/definition", place);
        let places = answer["result"].as_array().unwrap_or_else(|| panic!("{answer}")).iter();
        let from = |value: &Value| value.as_u64().unwrap() + 1;
        places
            .map(|place| {
                let (uri, start) = (place["uri"].as_str().unwrap(), &place["range"]["start"]);
                format!("{}:{}:{}", uri.rsplit('/').next().unwrap(), from(&start["line"]), from(&start["character"]))
            })
            .collect()
    }

    #[track_caller]
    fn end(mut self) {
        assert_eq!(self.ask("shutdown", Value::Null)["result"], Value::Null);
        self.tell("exit", Value::Null);
        assert_eq!(self.server.wait().unwrap().code(), Some(0));
    }
}

impl Drop for Client {
    fn drop(&mut self) {
        self.input = None;
        let _ = self.server.kill();
        let _ = self.server.wait();
    }
}

fn codes(diagnostics: &[Value]) -> Vec<&str> {
    diagnostics.iter().map(|one| one["code"].as_str().unwrap()).collect()
}

fn range(one: &Value) -> [u64; 4] {
    let at = |end: &str, part: &str| one["range"][end][part].as_u64().unwrap();
    [at("start", "line"), at("start", "character"), at("end", "line"), at("end", "character")]
}

#[track_caller]
fn says(text: &str, words: &[&str]) {
    for word in words {
        assert!(text.contains(word), "`{word}` is not in:\n{text}");
    }
}

fn bench() -> Client {
    Client::new(&[("drainwise.yaml", DECK), ("block.sp", "* as it was saved\n")])
}

#[test]
fn findings_follow_what_is_typed() {
    let mut client = bench();
    client.open("block.sp", "spice", BLOCK);
    let shown = client.shown("block.sp");
    assert_eq!(codes(&shown), ["finger-count", "over-rating"], "{shown:#?}");
    let fingers = &shown[0];
    assert_eq!(
        (range(fingers), &fingers["severity"], &fingers["source"]),
        ([5, 40, 5, 44], &json!(1), &json!("drainwise"))
    );
    says(fingers["message"].as_str().unwrap(), &["M1", "finger count of 3", "help: change the number of fingers"]);
    let related = shown[1]["relatedInformation"].as_array().unwrap();
    let files: Vec<&str> =
        related.iter().map(|one| one["location"]["uri"].as_str().unwrap().rsplit('/').next().unwrap()).collect();
    assert!(files.contains(&"block.sp") && files.contains(&"drainwise.yaml"), "{related:#?}");

    let mended = BLOCK.replace("nf=3", "nf=4");
    client.change("block.sp", &mended);
    assert_eq!(codes(&client.shown("block.sp")), ["over-rating"]);
    client.change("block.sp", &mended.replace("XP VIN", "XP CTL"));
    assert_eq!(client.shown("block.sp"), [] as [Value; 0]);

    client.tell("textDocument/didClose", json!({"textDocument": {"uri": client.uri("block.sp")}}));
    let uri = client.uri("block.sp");
    let last = client.wait(|value| value["params"]["uri"] == *uri);
    assert_eq!(last["params"]["diagnostics"], json!([]));
    client.end();
}

#[test]
fn a_deck_is_judged_as_it_is_typed() {
    let mut client = bench();
    fs::write(client.folder.path().join("block.sp"), BLOCK).unwrap();
    client.open("drainwise.yaml", "yaml", DECK);
    assert_eq!(client.shown("drainwise.yaml"), [] as [Value; 0]);
    client.change("drainwise.yaml", &DECK.replace("fingers: {min", "fingrs: {min"));
    let shown = client.shown("drainwise.yaml");
    assert_eq!((codes(&shown), range(&shown[0])), (vec!["deck"], [7, 4, 7, 10]), "{shown:#?}");
    says(shown[0]["message"].as_str().unwrap(), &["fingrs", "did you mean `fingers`?"]);

    // With the netlists that it names, the whole design is judged, also in files that nobody opened.
    client.change("drainwise.yaml", &format!("{DECK}netlists: [block.sp]\n"));
    assert_eq!(client.shown("drainwise.yaml"), [] as [Value; 0]);
    client.change(
        "drainwise.yaml",
        &format!("{DECK}netlists: [block.sp]\nrules: {{over-rating: {{severity: silent}}}}\n"),
    );
    let uri = client.uri("block.sp");
    let is_quieter = |value: &Value| value["params"]["diagnostics"].as_array().is_some_and(|all| all.len() == 1);
    let told = client.wait(|value| value["params"]["uri"] == *uri && is_quieter(value));
    assert_eq!(told["params"]["diagnostics"][0]["code"], "finger-count");

    // Other YAML is none of its business, but for a deck that says so.
    client.open("workflow.yaml", "yaml", "jobs: {}\n");
    client.open("process/other.yaml", "yaml", "# yaml-language-server: $schema=drainwise.schema.json\njobs: {}\n");
    assert_eq!(codes(&client.shown("process/other.yaml")), ["deck"]);
    client.end();
}

/// The chain from VIN through R1 is an ideal circuit's: nothing else drives GATE.
#[test]
fn hovering_explains() {
    let mut client = bench();
    client.open("block.sp", "spice", BLOCK);
    let net = client.hover("block.sp", BLOCK, "GATE pull");
    says(
        &net,
        &[
            "net `GATE`",
            "6 V to 48 V",
            "highest",
            "48 V on `VIN`",
            "a declared rail (drainwise.yaml:12)",
            "R1: from `A`",
        ],
    );
    says(&client.hover("block.sp", BLOCK, "B rpoly"), &["net `B`** in cell `pull`", "6 V to 48 V"]);
    says(&client.hover("block.sp", BLOCK, "VSS VSS"), &["net `VSS`", "0 V"]);
    let device = client.hover("block.sp", BLOCK, "M1 COIL");
    says(
        &device,
        &["`M1`", "class `ldn60` (nmos, high voltage)", "current:", "vgs: 0 V to 5 V (rated -5.5 V to 5.5 V)"],
    );
    says(&client.hover("block.sp", BLOCK, "R1 A"), &["`R1`", "class `rpoly` (resistor)"]);
    says(&client.hover("block.sp", BLOCK, "pull\nM2"), &["cell `pull`", "1 instance", "`A` `B`"]);
    says(&client.hover("block.sp", BLOCK, "ldn60 w=wide"), &["model `ldn60`", "high voltage"]);
    assert_eq!(client.hover("block.sp", BLOCK, "* coil"), "");

    client.open("drainwise.yaml", "yaml", DECK);
    says(
        &client.hover("drainwise.yaml", DECK, "multiple_of"),
        &["the number is a multiple of this", "whole number from 1"],
    );
    says(&client.hover("drainwise.yaml", DECK, "ldn60"), &["class `ldn60`", "nmos, high voltage", "d g s b"]);
    says(&client.hover("drainwise.yaml", DECK, "VIN"), &["rail `VIN`", "6V..48V"]);
    let rules = format!(
        "{DECK}rules:\n  finger-count: {{severity: note}}\n  wide: {{for: device, require: fingers <= 9, say: wide}}\n"
    );
    client.change("drainwise.yaml", &rules);
    says(
        &client.hover("drainwise.yaml", &rules, "finger-count"),
        &["rule `finger-count`** (note)", "even number of fingers"],
    );
    says(&client.hover("drainwise.yaml", &rules, "fingers <="), &["`fingers`"]);
    client.end();
}

#[test]
fn definitions_are_found() {
    let mut client = bench();
    client.open("block.sp", "spice", BLOCK);
    assert_eq!(client.defined("block.sp", BLOCK, "pull\nM2", 1), ["block.sp:3:9"]);
    assert_eq!(client.defined("block.sp", BLOCK, "XP", 1), ["block.sp:3:9"]);
    assert_eq!(client.defined("block.sp", BLOCK, "w=wide", 3), ["block.sp:2:8"]);
    assert_eq!(client.defined("block.sp", BLOCK, "2*wide", 6), ["block.sp:2:8"]);
    assert_eq!(client.defined("block.sp", BLOCK, "ldn60 w={", 5), ["drainwise.yaml:3:3"]);
    assert_eq!(client.defined("block.sp", BLOCK, "CTL VSS", 0), ["drainwise.yaml:12:47"]);
    // A net inside a cell is the rail that it is outside; where it is none, it is a port.
    assert_eq!(client.defined("block.sp", BLOCK, "A B rpoly", 0), ["drainwise.yaml:12:18"]);
    assert_eq!(client.defined("block.sp", BLOCK, "B rpoly", 0), ["block.sp:3:16"]);
    assert_eq!(client.defined("block.sp", BLOCK, "* coil", 0), [] as [&str; 0]);

    let deck = format!(
        "{DECK}netlists: [block.sp]\nmodes: {{on: {{CTL: 0V .. VIN}}}}\nwaivers: [{{rule: own, at: m1, reason: tried}}]\nrules:\n  own: {{for: device, require: 'true', say: no}}\n"
    );
    client.open("drainwise.yaml", "yaml", &deck);
    assert_eq!(client.defined("drainwise.yaml", &deck, "VIN}", 1), ["drainwise.yaml:12:18"]);
    assert_eq!(client.defined("drainwise.yaml", &deck, "own, at", 1), ["drainwise.yaml:18:3"]);
    assert_eq!(client.defined("drainwise.yaml", &deck, "block.sp", 1), ["block.sp:1:1"]);
    client.end();
}

/// `𐐀` is two UTF-16 units and four bytes; lines may end in `\r\n` (specification 3.17, "Position").
#[test]
fn places_count_utf16_units() {
    let mut client = bench();
    let text = BLOCK.replace("M1 COIL CTL", "M1 COIL µ𐐀CTL").replace('\n', "\r\n");
    client.open("block.sp", "spice", &text);
    let shown = client.shown("block.sp");
    let fingers = shown.iter().find(|one| one["code"] == "finger-count").unwrap();
    assert_eq!(range(fingers), [5, 43, 5, 47]);
    let place = client.place("block.sp", &text, "CTL VSS", 2);
    let answer = client.ask("textDocument/hover", place);
    says(answer["result"]["contents"]["value"].as_str().unwrap(), &["net `µ𐐀CTL`"]);
    assert_eq!(range(&answer["result"]), [5, 8, 5, 14]);
    let deck = DECK.replace("rails: {", "rails: {'µ𐐀': 1V, ");
    client.open("drainwise.yaml", "yaml", &deck.replace("COIL: 0V..48V", "COIL: 0V..48X"));
    let shown = client.shown("drainwise.yaml");
    assert_eq!(range(&shown[0]), [11, 50, 11, 52], "{shown:#?}");
    client.end();
}

#[test]
fn a_file_belongs_to_the_design_that_includes_it() {
    let top = "* top\n.include parts/switch.sp\nX1 COIL CTL VSS switch\n";
    let part = ".subckt switch D G S\nM1 D G S S ldn60 w=60u l=0.6u nf=3\n.ends\n";
    let files = [("drainwise.yaml", DECK), ("top.sp", top), ("parts/switch.sp", part)];
    let mut client = Client::new(&files);
    client.open("top.sp", "spice", top);
    assert_eq!(client.shown("top.sp"), [] as [Value; 0]);
    client.open("parts/switch.sp", "spice", part);
    let shown = client.shown("parts/switch.sp");
    assert!(codes(&shown).contains(&"finger-count"), "{shown:#?}");
    says(&client.hover("parts/switch.sp", part, "G S S"), &["net `G`** in cell `switch`", "0 V to 5 V"]);
    assert_eq!(client.defined("top.sp", top, "switch.sp", 0), [] as [&str; 0], "an include names a file, not a cell");
    assert_eq!(client.defined("top.sp", top, "VSS switch", 5), ["switch.sp:1:9"]);
    // What is typed there and not saved counts for the whole design.
    client.change("parts/switch.sp", &part.replace("nf=3", "nf=2"));
    assert_eq!(client.shown("parts/switch.sp"), [] as [Value; 0]);
    // A file that only the editor has.
    client.open("new.sp", "spice", BLOCK);
    assert_eq!(codes(&client.shown("new.sp")), ["finger-count", "over-rating"]);
    client.end();
}

#[test]
fn half_typed_texts_are_harmless() {
    let mut client = bench();
    client.open("block.sp", "spice", "");
    client.open("drainwise.yaml", "yaml", "");
    for (name, text) in [("block.sp", BLOCK), ("drainwise.yaml", DECK)] {
        for (end, _) in text.char_indices().step_by(9).chain([(text.len(), ' ')]) {
            client.change(name, &text[..end]);
            let line = text[..end].matches('\n').count();
            for character in [0, 5, 9999] {
                let place = json!({"textDocument": {"uri": client.uri(name)}, "position": {"line": line, "character": character}});
                assert!(client.ask("textDocument/hover", place.clone()).get("error").is_none());
                assert!(client.ask("textDocument/definition", place).get("error").is_none());
            }
        }
    }
    assert_eq!(
        codes(&{
            client.change("block.sp", BLOCK);
            client.shown("block.sp")
        }),
        ["finger-count", "over-rating"]
    );
    client.end();
}

/// Codes of errors: JSON-RPC 2.0, section 5.1, and specification 3.17, "ErrorCodes".
#[test]
fn malformed_messages_are_answered_and_survived() {
    let mut client = Client::fresh(&[("drainwise.yaml", DECK)]);
    let early = client.ask("textDocument/hover", json!({}));
    assert_eq!(early["error"]["code"], -32002);
    client.raw(b"what is this\r\nContent-Length: 5\r\n\r\n{half");
    let garbage = client.wait(|value| value["error"]["code"] == -32700);
    assert_eq!(garbage["id"], Value::Null);
    client.send(&json!({"jsonrpc": "2.0", "id": 77, "what": "this"}));
    client.wait(|value| value["id"] == 77 && value["error"]["code"] == -32600);
    client.send(&json!(["a", "batch"]));
    client.wait(|value| value["id"] == Value::Null && value["error"]["code"] == -32600);
    assert_eq!(client.ask("initialize", json!({"capabilities": 5}))["error"]["code"], -32602);
    assert!(client.ask("initialize", json!({"capabilities": {}}))["result"]["capabilities"].is_object());
    assert_eq!(client.ask("initialize", json!({"capabilities": {}}))["error"]["code"], -32600);
    assert_eq!(client.ask("textDocument/hover", json!({"textDocument": 5}))["error"]["code"], -32602);
    assert_eq!(client.ask("textDocument/rename", json!({}))["error"]["code"], -32601);
    client.tell("textDocument/didOpen", json!({"textDocument": {"uri": 5}}));
    client.tell(
        "textDocument/didChange",
        json!({"textDocument": {"uri": "file:///none.sp", "version": 1}, "contentChanges": []}),
    );
    client.tell("$/unheardOf", json!({}));
    let nowhere = json!({"textDocument": {"uri": "untitled:1"}, "position": {"line": 0, "character": 0}});
    assert_eq!(client.ask("textDocument/hover", nowhere)["result"], Value::Null);
    client.ask("shutdown", Value::Null);
    assert_eq!(client.ask("textDocument/hover", json!({}))["error"]["code"], -32600);
    client.tell("exit", Value::Null);
    assert_eq!(client.server.wait().unwrap().code(), Some(0));
}

/// Specification 3.17, "Exit Notification": 1 where no `shutdown` came before.
#[test]
fn a_client_that_goes_away_ends_the_server() {
    let mut client = bench();
    client.tell("exit", Value::Null);
    assert_eq!(client.server.wait().unwrap().code(), Some(1));
    let mut client = bench();
    client.input = None;
    assert_eq!(client.server.wait().unwrap().code(), Some(1));
}
