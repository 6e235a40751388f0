//! What each writer makes of one fixed report: the demo's, on a fixed day, in a folder of a repository.
#![allow(clippy::unwrap_used, reason = "a test that cannot go on must stop")]

use std::fs;
use std::path::Path;
use std::process::Command;
use tempfile::TempDir;

/// A repository that holds the demo in `chip/valve_driver`.
fn repository() -> TempDir {
    let repository = tempfile::tempdir().unwrap();
    fs::create_dir(repository.path().join(".git")).unwrap();
    let block = repository.path().join("chip/valve_driver");
    fs::create_dir_all(&block).unwrap();
    for entry in fs::read_dir(Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/valve_driver")).unwrap() {
        let entry = entry.unwrap();
        fs::copy(entry.path(), block.join(entry.file_name())).unwrap();
    }
    repository
}

fn demo(repository: &TempDir, format: &str) -> String {
    let mut command = Command::new(env!("CARGO_BIN_EXE_drainwise"));
    command.args(["lint", "valve_driver.sp", "--today", "2029-12-31"]).args(format.split_whitespace().skip(1));
    command.args(["--format", format.split_whitespace().next().unwrap()]);
    command.current_dir(repository.path().join("chip/valve_driver"));
    String::from_utf8(command.output().unwrap().stdout).unwrap()
}

#[test]
fn the_writers() {
    let repository = repository();
    let version = format!("\"{}\"", env!("CARGO_PKG_VERSION"));
    for format in ["text", "short", "json", "sarif --with-waived", "github", "gitlab", "markdown"] {
        insta::with_settings!({
            snapshot_path => "golden",
            prepend_module_to_snapshot => false,
            omit_expression => true,
            filters => [(regex_of(&version).as_str(), "\"VERSION\"")],
        }, {
            insta::assert_snapshot!(format.split_whitespace().next().unwrap(), demo(&repository, format));
        });
    }
}

fn regex_of(text: &str) -> String {
    text.replace('.', "\\.")
}
