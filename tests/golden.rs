//! What each writer makes of one fixed report: the demo's, on a fixed day.
#![allow(clippy::unwrap_used, reason = "a test that cannot go on must stop")]

use std::process::Command;

fn demo(format: &str) -> String {
    let folder = concat!(env!("CARGO_MANIFEST_DIR"), "/fixtures/valve_driver");
    let mut command = Command::new(env!("CARGO_BIN_EXE_drainwise"));
    command.args(["lint", "valve_driver.sp", "--today", "2029-12-31", "--format", format]).current_dir(folder);
    String::from_utf8(command.output().unwrap().stdout).unwrap()
}

#[test]
fn the_writers() {
    for format in ["text", "short", "json"] {
        insta::with_settings!({snapshot_path => "golden", prepend_module_to_snapshot => false, omit_expression => true}, {
            insta::assert_snapshot!(format, demo(format));
        });
    }
}
