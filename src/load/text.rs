//! From bytes to text: packed files, character encodings, and what is no text at all.

use super::files::Files;
use super::plainly;
use crate::source::LARGEST_TEXT;
use flate2::read::MultiGzDecoder;
use std::io::Read;
use std::path::Path;

/// The largest text that a packed file may unpack to, in bytes.
const LARGEST_UNPACKED: u64 = 2 << 30;

/// How many times larger than the file an unpacked text may be, where it is above [`SMALL_UNPACKED`].
const LARGEST_RATIO: u64 = 1000;

/// Texts up to this size may be packed at any ratio.
const SMALL_UNPACKED: u64 = 64 << 20;

/// Why a text cannot be used, and where.
pub(super) struct Trouble {
    pub(super) start: u32,
    pub(super) end: u32,
    pub(super) message: &'static str,
}

/// All bytes of a file, unpacked if they are packed. The error is the end of a sentence about the file.
pub(super) fn read(files: &dyn Files, path: &Path) -> Result<Vec<u8>, String> {
    let size = files.size(path).map_err(|error| format!("cannot be read: {}", plainly(&error)))?;
    let too_large = || format!("is larger than {} GiB, the most that is read", (LARGEST_TEXT + 2) >> 30);
    if size > LARGEST_TEXT {
        return Err(too_large());
    }
    let bytes = files.read(path).map_err(|error| format!("cannot be read: {}", plainly(&error)))?;
    if bytes.len() as u64 > LARGEST_TEXT {
        return Err(too_large());
    }
    if bytes.starts_with(&[0x1f, 0x8b]) { unpack(&bytes) } else { Ok(bytes) }
}

fn unpack(packed: &[u8]) -> Result<Vec<u8>, String> {
    let by_ratio = (packed.len() as u64).saturating_mul(LARGEST_RATIO).max(SMALL_UNPACKED);
    let bound = by_ratio.min(LARGEST_UNPACKED);
    let mut bytes = Vec::new();
    let read = MultiGzDecoder::new(packed).take(bound + 1).read_to_end(&mut bytes);
    read.map_err(|error| format!("cannot be unpacked: {}", plainly(&error)))?;
    if bytes.len() as u64 <= bound {
        return Ok(bytes);
    }
    Err(match bound == LARGEST_UNPACKED {
        true => format!("unpacks to more than {} GiB, the most that is read", LARGEST_UNPACKED >> 30),
        false => {
            format!("unpacks to more than {} MiB, over {LARGEST_RATIO} times its size: it is not read", bound >> 20)
        }
    })
}

/// The text of a file: UTF-8 as it is, UTF-16 with a byte order mark, or else Latin-1. A text that holds zero bytes is
/// returned too, for the sake of the place, with the trouble named.
pub(super) fn decode(bytes: Vec<u8>) -> (String, Option<Trouble>) {
    if let Some(text) = utf16(&bytes) {
        return (text, None);
    }
    let text = match String::from_utf8(bytes) {
        Ok(text) => text,
        Err(error) => error.into_bytes().into_iter().map(char::from).collect(),
    };
    if text.len() as u64 > LARGEST_TEXT {
        let message = "this file is larger than 4 GiB as text, the most that is read";
        return (String::new(), Some(Trouble { start: 0, end: 0, message }));
    }
    let zero = memchr::memchr(0, text.as_bytes()).map(|at| Trouble {
        start: at as u32,
        end: at as u32 + 1,
        message: "this file is no text: it holds a zero byte here, so none of it is read",
    });
    (text, zero)
}

fn utf16(bytes: &[u8]) -> Option<String> {
    let unit: fn([u8; 2]) -> u16 = match bytes.get(..2)? {
        [0xff, 0xfe] => u16::from_le_bytes,
        [0xfe, 0xff] => u16::from_be_bytes,
        _ => return None,
    };
    let units: Vec<u16> = bytes[2..].chunks_exact(2).map(|pair| unit([pair[0], pair[1]])).collect();
    let text = String::from_utf16_lossy(&units);
    (!text.contains('\0')).then_some(text)
}
