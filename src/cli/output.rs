//! Where output goes: standard output, or a file that is written whole or not at all.

use crate::report::text::Look;
use std::fs::{self, File};
use std::io::{self, BufWriter, IsTerminal, Write};
use std::path::{Path, PathBuf};

/// An open output.
pub(super) struct Output {
    to: To,
}

enum To {
    Terminal(BufWriter<io::Stdout>),
    File {
        writer: BufWriter<File>,
        partial: Partial,
        target: PathBuf,
    },
    /// What is there already and is no file (`/dev/null`, a named pipe): written into, never replaced.
    Device {
        writer: BufWriter<File>,
        target: PathBuf,
    },
}

/// A file that is removed again unless it was finished.
struct Partial {
    path: PathBuf,
    kept: bool,
}

impl Drop for Partial {
    fn drop(&mut self) {
        if !self.kept {
            let _ = fs::remove_file(&self.path);
        }
    }
}

impl Output {
    /// Opens standard output, or a file beside `target` that takes its place when finished. A file of an earlier run is removed at
    /// once, so that it cannot look like this one's.
    pub(super) fn open(target: Option<&Path>) -> io::Result<Output> {
        let Some(target) = target else {
            return Ok(Output { to: To::Terminal(BufWriter::with_capacity(1 << 16, io::stdout())) });
        };
        let named =
            |error: io::Error| io::Error::new(error.kind(), format!("cannot write {}: {error}", target.display()));
        if fs::metadata(target).is_ok_and(|there| !there.is_file()) {
            let writer = BufWriter::new(File::options().write(true).open(target).map_err(named)?);
            return Ok(Output { to: To::Device { writer, target: target.to_owned() } });
        }
        let name = target.file_name().map_or_else(|| "report".into(), |name| name.to_string_lossy().into_owned());
        let path = target.with_file_name(format!(".{name}.{}.part", std::process::id()));
        let writer = BufWriter::with_capacity(1 << 16, File::create(&path).map_err(named)?);
        let partial = Partial { path, kept: false };
        if target.is_file() {
            fs::remove_file(target).map_err(named)?;
        }
        Ok(Output { to: To::File { writer, partial, target: target.to_owned() } })
    }

    /// Width and colour for what stands at the other end.
    pub(super) fn look(&self) -> Look {
        let terminal = matches!(self.to, To::Terminal(_)) && io::stdout().is_terminal();
        Look { width: if terminal { width() } else { 100 }, colour: colour(terminal) }
    }

    /// Writes; a reader that has gone away is no error.
    pub(super) fn write(&mut self, work: impl FnOnce(&mut dyn Write) -> io::Result<()>) -> io::Result<()> {
        match &mut self.to {
            To::Terminal(writer) => forgiving(work(writer)),
            To::File { writer, target, .. } | To::Device { writer, target } => work(writer)
                .map_err(|error| io::Error::new(error.kind(), format!("cannot write {}: {error}", target.display()))),
        }
    }

    /// Puts a file in its place.
    pub(super) fn finish(self) -> io::Result<()> {
        match self.to {
            To::Terminal(mut writer) => forgiving(writer.flush()),
            To::Device { mut writer, target } => writer
                .flush()
                .map_err(|error| io::Error::new(error.kind(), format!("cannot write {}: {error}", target.display()))),
            To::File { mut writer, mut partial, target } => {
                let named = |error: io::Error| {
                    io::Error::new(error.kind(), format!("cannot write {}: {error}", target.display()))
                };
                writer.flush().map_err(named)?;
                writer.get_ref().sync_all().map_err(named)?;
                fs::rename(&partial.path, &target).map_err(named)?;
                partial.kept = true;
                Ok(())
            }
        }
    }
}

/// A closed pipe is no error: whoever read has seen enough.
pub(super) fn forgiving(result: io::Result<()>) -> io::Result<()> {
    match result {
        Err(error) if error.kind() == io::ErrorKind::BrokenPipe => Ok(()),
        other => other,
    }
}

/// Columns of the terminal, by `COLUMNS` or what it says of itself; 100 where nobody knows.
pub(super) fn width() -> usize {
    let said = std::env::var("COLUMNS").ok().and_then(|columns| columns.parse().ok());
    said.or_else(|| terminal_size::terminal_size().map(|(width, _)| usize::from(width.0))).unwrap_or(100)
}

/// Colours only on a terminal, and not where `NO_COLOR` is set to something.
pub(super) fn colour(terminal: bool) -> bool {
    terminal && std::env::var_os("NO_COLOR").is_none_or(|value| value.is_empty())
}
