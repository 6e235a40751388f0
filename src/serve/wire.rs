//! The wire: frames of the Language Server Protocol on a byte stream (specification 3.17, "Base protocol": header lines, an empty
//! line, JSON), read so that no garbage stops the server and no promised length fills the memory.

use lsp_server::Message;
use serde_json::Value;
use std::io::{self, BufRead, Read, Write};

/// Longer messages are refused; they are read over.
const LONGEST: u64 = 256 << 20;
/// Longer header lines are cut.
const LONGEST_LINE: u64 = 8 << 10;

/// What came in.
pub(super) enum Incoming {
    /// A message.
    Message(Message),
    /// A frame that holds none: the id that it asks under, if one can be read, and what is wrong (with its JSON-RPC code).
    Garbage(Value, i32, String),
}

/// JSON-RPC 2.0, section 5.1: what could not be parsed, and what is no request.
const PARSE_ERROR: i32 = -32700;
const INVALID_REQUEST: i32 = -32600;

/// The next message; none where the stream ends.
pub(super) fn read(input: &mut dyn BufRead) -> io::Result<Option<Incoming>> {
    let Some(length) = header(input)? else { return Ok(None) };
    if length > LONGEST {
        io::copy(&mut input.take(length), &mut io::sink())?;
        let words = format!("a message of more than {} MiB is not read", LONGEST >> 20);
        return Ok(Some(Incoming::Garbage(Value::Null, INVALID_REQUEST, words)));
    }
    let mut body = Vec::new();
    if input.take(length).read_to_end(&mut body)? < length as usize {
        return Ok(None);
    }
    Ok(Some(message(&body)))
}

fn message(body: &[u8]) -> Incoming {
    let value: Value = match serde_json::from_slice(body) {
        Ok(value) => value,
        Err(error) => return Incoming::Garbage(Value::Null, PARSE_ERROR, format!("this is no JSON: {error}")),
    };
    let id = value.get("id").filter(|id| id.is_number() || id.is_string()).cloned().unwrap_or(Value::Null);
    // A list could be read as the fields of a request.
    let message = value.is_object().then(|| serde_json::from_value(value));
    match message {
        Some(Ok(message)) => Incoming::Message(message),
        Some(Err(_)) | None => {
            Incoming::Garbage(id, INVALID_REQUEST, "this is no request, response or notification".to_owned())
        }
    }
}

/// Reads header lines up to the empty one that ends them, and gives the length that they promise. Lines that are no header are read
/// over; so is a header without a length.
fn header(input: &mut dyn BufRead) -> io::Result<Option<u64>> {
    let mut length = None;
    let mut line = Vec::new();
    loop {
        line.clear();
        if input.take(LONGEST_LINE).read_until(b'\n', &mut line)? == 0 {
            return Ok(None);
        }
        let text = String::from_utf8_lossy(&line);
        match (text.trim(), length) {
            ("", Some(length)) => return Ok(Some(length)),
            (text, _) => {
                let value = text.split_once(':').filter(|(name, _)| name.trim().eq_ignore_ascii_case("content-length"));
                length = value.and_then(|(_, value)| value.trim().parse().ok()).or(length);
            }
        }
    }
}

/// Writes a message.
pub(super) fn write(output: &mut dyn Write, message: &Message) -> io::Result<()> {
    let mut value = serde_json::to_value(message)?;
    value["jsonrpc"] = "2.0".into();
    frame(output, &value)
}

/// Answers what was no message.
pub(super) fn refuse(output: &mut dyn Write, id: Value, code: i32, words: &str) -> io::Result<()> {
    frame(output, &serde_json::json!({"jsonrpc": "2.0", "id": id, "error": {"code": code, "message": words}}))
}

fn frame(output: &mut dyn Write, value: &Value) -> io::Result<()> {
    let text = value.to_string();
    write!(output, "Content-Length: {}\r\n\r\n{text}", text.len())?;
    output.flush()
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn all(mut bytes: &[u8]) -> Vec<String> {
        let mut found = Vec::new();
        while let Some(incoming) = read(&mut bytes).unwrap() {
            found.push(match incoming {
                Incoming::Message(Message::Request(request)) => format!("request {}", request.method),
                Incoming::Message(Message::Notification(told)) => format!("notification {}", told.method),
                Incoming::Message(Message::Response(_)) => "response".to_owned(),
                Incoming::Garbage(id, code, _) => format!("{code} for {id}"),
            });
        }
        found
    }

    #[test]
    fn frames_are_read_past_garbage() {
        let frame = |text: &str| format!("Content-Length: {}\r\n\r\n{text}", text.len());
        let good = frame(r#"{"jsonrpc":"2.0","method":"exit"}"#);
        let stream = [
            frame(r#"{"jsonrpc":"2.0","id":1,"method":"shutdown"}"#),
            frame("{half"),
            frame(r#"{"id":7,"what":1}"#),
            frame("[]"),
            "nonsense\r\n".to_owned(),
            "Content-Type: x\r\ncontent-length:33\r\n\r\n".to_owned() + r#"{"jsonrpc":"2.0","method":"exit"}"#,
            good.clone(),
            good[..30].to_owned(),
        ];
        assert_eq!(
            all(stream.concat().as_bytes()),
            [
                "request shutdown",
                "-32700 for null",
                "-32600 for 7",
                "-32600 for null",
                "notification exit",
                "notification exit"
            ]
        );
        assert!(all(b"Content-Length: 99999999999999\r\n\r\n{}").len() == 1, "its length is promised, not there");
        assert!(all(b"Content-Length: -5\r\n\r\n\r\n").is_empty());
    }

    proptest! {
        #[test]
        fn nothing_stops_the_reader(bytes in prop::collection::vec(any::<u8>(), 0..400), tail in "(Content-Length: [0-9]{0,3}\r\n){0,3}(\r\n)?\\PC{0,40}") {
            all(&bytes);
            all(tail.as_bytes());
        }
    }
}
