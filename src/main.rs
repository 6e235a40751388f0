//! The program `drainwise`: everything is in the library.

use std::process::ExitCode;

fn main() -> ExitCode {
    ExitCode::from(drainwise::cli::run())
}
