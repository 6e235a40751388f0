//! The demo block, an invented valve driver, holds eight planted faults. What the program calls violated there must be exactly what
//! `faults.tsv` lists: a missing row is a miss, an additional one a false alarm. The expectation is written down from the circuit's
//! intent, not from the program's output. Rows of rules that have no page in the catalogue are skipped.

use drainwise::catalogue::PAGES;
use serde_json::Value;
use std::collections::BTreeSet;
use std::path::PathBuf;
use std::process::Command;

type Row = (String, String);

fn folder() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("fixtures/valve_driver")
}

/// The rows of `faults.tsv`: rule and `[cell/]device`, in lower case, as SPICE names go.
fn planted() -> BTreeSet<Row> {
    let text = std::fs::read_to_string(folder().join("faults.tsv")).unwrap();
    let rows = text.lines().filter(|line| !line.is_empty() && !line.starts_with('#'));
    rows.map(|line| {
        let fields: Vec<&str> = line.split('\t').collect();
        assert_eq!(fields.len(), 3, "a row has three fields: {line}");
        assert_eq!(fields[0], "violated", "only violated findings are listed: {line}");
        (fields[1].to_owned(), fields[2].to_lowercase())
    })
    .collect()
}

fn run() -> Value {
    let output = Command::new(env!("CARGO_BIN_EXE_drainwise"))
        .args(["lint", "--format", "json", "--today", "2029-12-31", "--deck"])
        .arg(folder().join("drainwise.yaml"))
        .output()
        .unwrap();
    assert_eq!(output.status.code(), Some(1), "{}", String::from_utf8_lossy(&output.stderr));
    serde_json::from_slice(&output.stdout).unwrap()
}

fn place(finding: &Value) -> String {
    let device = finding["device"].as_str().unwrap_or("-");
    match finding["cell"].as_str() {
        Some(cell) => format!("{cell}/{device}").to_lowercase(),
        None => device.to_lowercase(),
    }
}

#[test]
fn exactly_the_planted_faults_are_found() {
    let known = |rule: &str| PAGES.iter().any(|page| page.id == rule);
    let expected: BTreeSet<Row> = planted().into_iter().filter(|(rule, _)| known(rule)).collect();
    let report = run();
    let findings = report["findings"].as_array().unwrap();
    let violated = findings.iter().filter(|finding| finding["verdict"] == "violated");
    let found: BTreeSet<Row> =
        violated.map(|finding| (finding["rule"].as_str().unwrap().to_owned(), place(finding))).collect();
    let missed: Vec<&Row> = expected.difference(&found).collect();
    let false_alarms: Vec<&Row> = found.difference(&expected).collect();
    assert!(missed.is_empty() && false_alarms.is_empty(), "missed {missed:?}, false alarms {false_alarms:?}");
}

#[test]
fn the_odd_finger_count_comes_from_two_instances() {
    let report = run();
    let finding = report["findings"].as_array().unwrap().iter().find(|finding| finding["rule"] == "finger-count");
    assert_eq!(finding.unwrap()["instances"], 2);
}

#[test]
fn the_waiver_hides_one_finding_and_little_else_is_open() {
    let report = run();
    let findings = report["findings"].as_array().unwrap();
    let waived = findings.iter().filter(|finding| !finding["waiver"].is_null());
    assert_eq!(waived.count(), 1);
    let open = findings.iter().filter(|finding| finding["verdict"] == "unproven" && finding["waiver"].is_null());
    assert!(open.count() <= 5, "a demo full of open notes shows nothing");
    assert_eq!(report["summary"]["cards_skipped"], 0);
}

/// What a designer would change, fault by fault: the text in `blocks.sp` and what replaces it.
const MENDS: [(&str, &str); 8] = [
    ("XM_LSS SW LG SNS VSS VIN", "XM_LSS SW LG SNS SNS VIN"),
    ("XCN   RTN VDD INN VDD", "XCN   RTN VDD INN VIN"),
    ("seg=3", "seg=4"),
    ("XM_FLT VSS FG FLT FLT VIN", "XM_FLT FLT FG VSS VSS VIN"),
    ("R_PU   VIN GW rpoly", "D_GW VSS GW zg5\nR_PU VIN GW rpoly"),
    ("XMC   LG MC_G", "XMC LG MCG"),
    ("XM_BLEED SW IREF VSS VSS VIN", "M_BLEED BL IREF VSS VSS n5 w=5u l=2u nf=4\nXM_BLEED SW VDD BL BL VIN"),
    ("XM_GM PG EA VSS VSS VIN", "M_GM GM EA VSS VSS n5 w=10u l=1u nf=4\nXM_GM PG VDD GM GM VIN"),
];

#[test]
fn the_mended_block_is_clean() {
    let copy = tempfile::tempdir().unwrap();
    for name in ["blocks.sp", "valve_driver.sp", "process.yaml", "drainwise.yaml"] {
        let mut text = std::fs::read_to_string(folder().join(name)).unwrap();
        if name == "blocks.sp" {
            for (fault, mend) in MENDS {
                assert!(text.contains(fault), "{fault}");
                text = text.replace(fault, mend);
            }
        }
        std::fs::write(copy.path().join(name), text).unwrap();
    }
    let output = Command::new(env!("CARGO_BIN_EXE_drainwise"))
        .args(["lint", "--format", "json", "--today", "2029-12-31", "--deck"])
        .arg(copy.path().join("drainwise.yaml"))
        .output()
        .unwrap();
    let report: Value = serde_json::from_slice(&output.stdout).unwrap();
    let findings = report["findings"].as_array().unwrap();
    let open: Vec<&Value> = findings.iter().filter(|finding| finding["waiver"].is_null()).collect();
    assert!(open.is_empty(), "{open:#?}");
    assert_eq!(output.status.code(), Some(0));
    assert_eq!(
        report["summary"]["devices"].as_u64().unwrap(),
        103,
        "a clamp and two 5 V devices more than the block's 100"
    );
}
