//! The program as it is met on a command line: exit codes, where output goes, and the shapes of what it writes.
//!
//! Everything here is invented: a coil switch of a made-up 60 V process. What is expected comes from the README (exit codes,
//! options) and from the reference page; no number here is a measurement.

#![allow(clippy::unwrap_used, clippy::panic, reason = "helpers of tests may fail")]

use assert_cmd::Command;
use serde_json::Value;
use std::path::Path;
use std::process::Stdio;
use tempfile::TempDir;

const DECK: &str = "\
use: [builtin:ldmos]
netlists: [block.sp]
classes:
  ldn60:
    kind: nmos
    pins: [d, g, s, b]
    high_voltage: true
    asymmetric: true
    size: {width: w, length: l, fingers: nf}
    fingers: {min: 2, multiple_of: 2}
    threshold: 0.6V..1.1V
    ratings: {vds: -0.5V..60V, vgs: -5.5V..5.5V}
    body: {tie: s}
rails: {VSS: 0V, VIN: 6V..48V, CTL: 0V..5V}
";

const FORMATS: [&str; 7] = ["text", "short", "json", "sarif", "github", "gitlab", "markdown"];

/// One finding: three fingers.
const BLOCK: &str = "\
* coil switch
.subckt coil_switch COIL CTL VSS
M1 COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3
.ends
X1 OUT CTL VSS coil_switch
RL VIN OUT 100
";

struct Bench {
    folder: TempDir,
}

struct Ran {
    code: i32,
    out: String,
    err: String,
}

impl Bench {
    /// A folder with the deck, and the netlists given.
    fn new(files: &[(&str, &str)]) -> Bench {
        let bench = Bench { folder: tempfile::tempdir().unwrap() };
        bench.put("drainwise.yaml", DECK);
        for (name, text) in files {
            bench.put(name, text);
        }
        bench
    }

    /// The same with the coil switch.
    fn with_block() -> Bench {
        Bench::new(&[("block.sp", BLOCK)])
    }

    fn put(&self, name: &str, text: &str) {
        std::fs::write(self.path(name), text).unwrap();
    }

    fn path(&self, name: &str) -> std::path::PathBuf {
        self.folder.path().join(name)
    }

    fn command(&self, line: &str) -> Command {
        let mut command = Command::cargo_bin("drainwise").unwrap();
        command
            .current_dir(self.folder.path())
            .args(line.split_whitespace())
            .env_remove("NO_COLOR")
            .env("COLUMNS", "100");
        command
    }

    fn run(&self, line: &str) -> Ran {
        let output = self.command(line).output().unwrap();
        let text = |bytes| String::from_utf8(bytes).unwrap();
        Ran { code: output.status.code().unwrap(), out: text(output.stdout), err: text(output.stderr) }
    }

    fn json(&self, line: &str) -> (i32, Value) {
        let ran = self.run(line);
        (ran.code, serde_json::from_str(&ran.out).unwrap_or_else(|error| panic!("{line}: {error}\n{}", ran.out)))
    }
}

#[track_caller]
fn says(text: &str, words: &[&str]) {
    for word in words {
        assert!(text.contains(word), "`{word}` is not in:\n{text}");
    }
}

/// The ids of the findings.
fn ids(report: &Value) -> Vec<&str> {
    report["findings"].as_array().unwrap().iter().map(|finding| finding["rule"].as_str().unwrap()).collect()
}

#[test]
fn help_and_version_are_no_errors() {
    let bench = Bench::new(&[]);
    let help = bench.run("--help");
    assert_eq!((help.code, help.err.as_str()), (0, ""));
    says(&help.out, &["lint", "trace", "survey", "rules", "init", "deck", "Exit codes"]);
    let version = bench.run("--version");
    assert_eq!((version.code, version.out), (0, format!("drainwise {}\n", env!("CARGO_PKG_VERSION"))));
    for command in ["lint", "trace", "survey", "rules", "init", "deck"] {
        assert_eq!(bench.run(&format!("{command} --help")).code, 0, "{command}");
    }
}

#[test]
fn bad_arguments_exit_with_2() {
    let bench = Bench::with_block();
    for (line, word) in [
        ("", "Usage"),
        ("lnt block.sp", "lint"),
        ("lint block.sp --frmat json", "--format"),
        ("lint block.sp --format yaml", "json"),
        ("lint block.sp --fail-on never", "warning"),
        ("lint block.sp --today 2027-02-29", "no day of the calendar"),
        ("rules finger-count --names", "cannot be used"),
        ("trace", "NETLIST"),
    ] {
        let ran = bench.run(line);
        assert_eq!(ran.code, 2, "`{line}`: {}", ran.err);
        assert_eq!(ran.out, "", "`{line}`");
        says(&ran.err, &[word]);
    }
}

#[test]
fn unknown_rules_modes_cells_and_nets_offer_what_there_is() {
    let bench = Bench::with_block();
    for (line, words) in [
        ("lint block.sp --only finger-cuont", ["no rule `finger-cuont`", "did you mean `finger-count`?"]),
        ("lint block.sp --mode fill", ["no mode `fill`", "the deck has no modes"]),
        ("lint block.sp --top coil_swich", ["`coil_swich`", "`coil_switch`"]),
        ("trace block.sp OTU", ["no net `OTU`", "did you mean `OUT`?"]),
        ("rules finger-cuont", ["no rule `finger-cuont`", "did you mean `finger-count`?"]),
        ("deck builtin:sky13", ["builtin:sky13", "did you mean `builtin:sky130`?"]),
    ] {
        let ran = bench.run(line);
        assert_eq!(ran.code, 2, "{line}");
        says(&(ran.out + &ran.err), &words);
    }
}

#[test]
fn findings_exit_with_1_and_a_clean_run_with_0() {
    let bench = Bench::with_block();
    let ran = bench.run("lint block.sp");
    assert_eq!(ran.code, 1, "{}", ran.out);
    says(&ran.out, &["finger-count", "block.sp:3", "M1", "found      1 error", "High voltage can injure"]);
    assert_eq!(ran.out.matches("qualified review").count(), 1, "the caution stands there once:\n{}", ran.out);

    bench.put("clean.sp", &BLOCK.replace("nf=3", "nf=4"));
    let ran = bench.run("lint clean.sp");
    assert_eq!(ran.code, 0, "{}", ran.out);
    says(&ran.out, &["no errors", "2 pairs proven", "qualified review"]);
}

#[test]
fn the_deck_names_the_netlists_that_the_command_does_not() {
    let bench = Bench::with_block();
    let (code, report) = bench.json("lint --format json");
    assert_eq!((code, ids(&report)), (1, vec!["finger-count"]));
}

#[test]
fn the_nearest_deck_upward_is_used() {
    let bench = Bench::new(&[]);
    std::fs::create_dir_all(bench.path("chip/blocks")).unwrap();
    bench.put("chip/blocks/coil.sp", BLOCK);
    let (code, report) = bench.json("lint chip/blocks/coil.sp --format json");
    assert_eq!((code, ids(&report)), (1, vec!["finger-count"]));
}

#[test]
fn fail_on_moves_the_bar() {
    let bench = Bench::with_block();
    for (severity, fails_on) in [("error", "error"), ("warning", "warning"), ("note", "note")] {
        bench.put("x.yaml", &format!("use: [drainwise.yaml]\nrules: {{finger-count: {{severity: {severity}}}}}\n"));
        let mut reached = false;
        for level in ["error", "warning", "note"] {
            reached |= level == fails_on;
            let ran = bench.run(&format!("lint block.sp --deck x.yaml --fail-on {level}"));
            assert_eq!(
                ran.code,
                i32::from(reached),
                "a finding of severity {severity}, --fail-on {level}:\n{}",
                ran.out
            );
        }
    }
    bench.put("x.yaml", "use: [drainwise.yaml]\nrules: {finger-count: {severity: silent}}\n");
    assert_eq!(bench.run("lint block.sp --deck x.yaml --fail-on note").code, 0);
}

#[test]
fn what_cannot_be_read_exits_with_2() {
    let bench = Bench::with_block();
    let ran = bench.run("lint nowhere.sp");
    assert_eq!(ran.code, 2);
    says(&ran.out, &["nowhere.sp", "does not exist"]);
    let ran = bench.run("lint block.sp --deck nowhere.yaml");
    assert_eq!(ran.code, 2);
    says(&ran.out, &["nowhere.yaml"]);
}

#[test]
fn a_deck_with_errors_is_never_half_used() {
    let bench = Bench::with_block();
    bench.put("x.yaml", "use: [drainwise.yaml]\nclases: {}\nrails: {VSS: 5A, VIN: 48V..6V}\n");
    let ran = bench.run("lint block.sp --deck x.yaml");
    assert_eq!(ran.code, 2);
    says(&ran.out, &["x.yaml:2", "did you mean `classes`?", "5A is a current", "upside down", "found      3 errors"]);
    assert!(!ran.out.contains("finger-count"), "{}", ran.out);
    assert_eq!(bench.run("deck x.yaml").code, 2);
}

#[test]
fn a_bad_card_is_shown_and_the_rest_is_still_judged() {
    let bench = Bench::with_block();
    bench.put("bad.sp", &BLOCK.replace("RL VIN", "Mbad OUT\nRL VIN"));
    let (code, report) = bench.json("lint bad.sp --format json");
    assert_eq!(code, 2);
    assert_eq!(ids(&report), ["finger-count", "card"]);
    assert_eq!(report["findings"][1]["line"], 6);
    assert_eq!(report["summary"]["cards_skipped"], 1);
}

/// The fields are those of the reference page, section "What a report holds".
#[test]
fn json_has_all_fields() {
    let bench = Bench::with_block();
    let (_, report) = bench.json("lint block.sp --format json");
    let finding = &report["findings"][0];
    for field in [
        "rule",
        "verdict",
        "severity",
        "message",
        "cell",
        "device",
        "instances",
        "worst",
        "file",
        "line",
        "column",
        "end_line",
        "end_column",
        "labels",
        "nets",
        "help",
        "cite",
        "fingerprint",
        "waiver",
    ] {
        assert!(finding.get(field).is_some(), "finding has no `{field}`: {finding:#}");
    }
    for field in ["path", "mode", "values"] {
        assert!(finding["worst"].get(field).is_some(), "worst has no `{field}`");
    }
    let expected = [
        ("rule", "finger-count"),
        ("verdict", "violated"),
        ("severity", "error"),
        ("cell", "coil_switch"),
        ("device", "M1"),
        ("file", "block.sp"),
    ];
    for (field, value) in expected {
        assert_eq!(finding[field], value, "{field}");
    }
    assert_eq!(finding["worst"]["path"], "X1.M1");
    assert_eq!((&finding["line"], &finding["instances"]), (&Value::from(3), &Value::from(1)));
    assert_eq!(finding["nets"], serde_json::json!({"d": "COIL", "g": "CTL", "s": "VSS", "b": "VSS"}));
    let summary = &report["summary"];
    for field in
        ["files", "cards", "cards_skipped", "cells", "devices", "high_voltage_devices", "classes", "pairs", "findings"]
    {
        assert!(summary.get(field).is_some(), "summary has no `{field}`");
    }
    assert_eq!(summary["classes"], serde_json::json!({"ldn60": 1}));
    assert_eq!(summary["pairs"], serde_json::json!({"proven": 2, "violated": 0, "unproven": 0}));
    assert_eq!(summary["findings"], serde_json::json!({"error": 1, "warning": 0, "note": 0, "waived": 0}));
}

#[test]
fn the_same_input_gives_the_same_bytes() {
    let bench = Bench::with_block();
    for format in FORMATS {
        let line = format!("lint block.sp --format {format}");
        assert_eq!(bench.run(&line).out, bench.run(&line).out, "{format}");
    }
}

#[test]
fn the_fingerprint_stays_when_lines_move() {
    let bench = Bench::with_block();
    bench.put("moved.sp", &BLOCK.replace(".subckt", "* one\n* more\n.subckt"));
    let print = |name: &str| {
        let (_, report) = bench.json(&format!("lint {name} --format json"));
        (report["findings"][0]["line"].clone(), report["findings"][0]["fingerprint"].clone())
    };
    let (before, after) = (print("block.sp"), print("moved.sp"));
    assert_eq!((before.0, after.0), (Value::from(3), Value::from(5)));
    assert_eq!(before.1, after.1);
}

#[test]
fn short_is_one_line_a_finding() {
    let bench = Bench::with_block();
    let ran = bench.run("lint block.sp --format short");
    let (findings, rest): (Vec<&str>, Vec<&str>) = ran.out.lines().partition(|line| !line.starts_with("drainwise: "));
    let [finding] = findings.as_slice() else { panic!("{}", ran.out) };
    assert!(finding.starts_with("block.sp:3:40: error: M1 "), "{finding}");
    assert!(finding.ends_with(" [finger-count]"), "{finding}");
    says(&rest.join("\n"), &["drainwise: found      1 error", "qualified review"]);
}

#[test]
fn out_writes_a_whole_file_and_nothing_else() {
    let bench = Bench::with_block();
    bench.put("report.json", "an older report");
    let ran = bench.run("lint block.sp --format json --out report.json");
    assert_eq!((ran.code, ran.out.as_str()), (1, ""));
    let report: Value = serde_json::from_str(&std::fs::read_to_string(bench.path("report.json")).unwrap()).unwrap();
    assert_eq!(ids(&report), ["finger-count"]);
    let mut names: Vec<_> = std::fs::read_dir(bench.folder.path())
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    assert_eq!(names, ["block.sp", "drainwise.yaml", "report.json"], "nothing is left beside it");

    let ran = bench.run("lint block.sp --out no/such/folder/report.txt");
    assert_eq!(ran.code, 2);
    says(&ran.err, &["cannot write", "report.txt"]);
}

#[test]
fn there_is_no_colour_where_there_is_no_terminal() {
    let bench = Bench::with_block();
    for value in [None, Some("1"), Some("")] {
        let mut command = bench.command("lint block.sp");
        if let Some(value) = value {
            command.env("NO_COLOR", value);
        }
        let output = command.output().unwrap();
        assert!(!output.stdout.contains(&0x1b), "NO_COLOR={value:?}");
        assert!(!output.stderr.contains(&0x1b), "NO_COLOR={value:?}");
    }
}

#[test]
fn a_closed_pipe_is_no_error() {
    let devices: String = (0..3000).map(|n| format!("M{n} OUT CTL VSS VSS ldn60 w=60u l=0.6u nf=3\n")).collect();
    let bench = Bench::new(&[("many.sp", &format!("* many coils\nRL VIN OUT 1k\n{devices}"))]);
    for format in FORMATS {
        let mut child = std::process::Command::new(assert_cmd::cargo::cargo_bin("drainwise"))
            .args(["lint", "many.sp", "--format", format])
            .current_dir(bench.folder.path())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        drop(child.stdout.take());
        let output = child.wait_with_output().unwrap();
        let err = String::from_utf8_lossy(&output.stderr);
        assert_eq!(output.status.code(), Some(1), "{format}: {err}");
        assert!(!err.contains("panicked"), "{format}: {err}");
        assert!(!err.contains("Broken pipe"), "{format}: {err}");
    }
}

#[test]
fn rules_lists_and_shows_pages() {
    let bench = Bench::new(&[]);
    let list = bench.run("rules");
    assert_eq!(list.code, 0);
    says(&list.out, &["finger-count", "over-rating", "waiver-stale"]);
    let page = bench.run("rules finger-count");
    assert_eq!(page.code, 0);
    says(&page.out, &["Why", "Source", "It fires on", "It stays quiet on", "MCOIL"]);
    let names = bench.run("rules --names");
    assert_eq!(names.code, 0);
    says(&names.out, &["for: device", "finger_width", "vds.max", "tied(b, s)"]);
}

#[test]
fn rules_of_a_deck_are_shown_as_it_changed_them() {
    let bench = Bench::new(&[]);
    bench.put(
        "x.yaml",
        "use: [drainwise.yaml]\nrules:\n  finger-count: {severity: note}\n  wide: {for: device, require: width <= 1mm, say: \"{name} is wide\"}\n",
    );
    let ran = bench.run("rules --deck x.yaml");
    assert_eq!(ran.code, 0, "{}", ran.err);
    let line = |id: &str| ran.out.lines().find(|line| line.split_whitespace().next() == Some(id)).unwrap().to_owned();
    says(&line("finger-count"), &["note"]);
    says(&line("wide"), &["device"]);
}

#[test]
fn the_decks_inside_the_program_are_sound() {
    let bench = Bench::new(&[]);
    for name in ["ldmos", "sky130", "gf180mcu", "sg13g2"] {
        let ran = bench.run(&format!("deck builtin:{name}"));
        assert_eq!((ran.code, ran.err.as_str()), (0, ""), "{name}");
        says(&ran.out, &[name, "classes", "rules"]);
    }
}

#[test]
fn init_writes_a_deck_that_loads() {
    let bench = Bench::with_block();
    let ran = bench.run("init block.sp --out mine.yaml");
    assert_eq!((ran.code, ran.out.as_str()), (0, ""), "{}", ran.err);
    let text = std::fs::read_to_string(bench.path("mine.yaml")).unwrap();
    says(&text, &["use:", "ldn60", "block.sp", "rails:"]);
    assert_eq!(bench.run("deck mine.yaml").code, 0);
    let lint = bench.run("lint block.sp --deck mine.yaml");
    assert_ne!(lint.code, 2, "{}", lint.out);
    says(&lint.out, &["ldn60 1"]);

    let again = bench.run("init block.sp --out mine.yaml");
    assert_eq!(again.code, 2);
    says(&again.err, &["mine.yaml", "there already"]);
    assert_eq!(std::fs::read_to_string(bench.path("mine.yaml")).unwrap(), text, "it is as it was");
}

#[test]
fn init_finds_the_process_by_its_models() {
    let bench = Bench::new(&[]);
    bench.put("s.sp", "* t\n.subckt buf a y vdd vss\nXM1 y a vss vss sky130_fd_pr__nfet_g5v0d10v5 w=5 l=0.5\n.ends\n");
    let ran = bench.run("init s.sp");
    assert_eq!(ran.code, 0, "{}", ran.err);
    says(&ran.out, &["builtin:sky130", "top: buf", "vss"]);
}

/// The coil's load pulls OUT to VIN, 48 V at most, and M1 pulls it to VSS, 0 V: an ideal circuit's answer.
#[test]
fn trace_gives_ranges_and_chains() {
    let bench = Bench::with_block();
    let ran = bench.run("trace block.sp OUT");
    assert_eq!((ran.code, ran.err.as_str()), (0, ""));
    says(&ran.out, &["OUT: 0 V to 48 V", "highest", "VIN", "RL", "lowest", "VSS", "M1", "block.sp:6"]);

    let (code, traced) = bench.json("trace block.sp --format json");
    assert_eq!(code, 0);
    let nets = traced["nets"].as_array().unwrap();
    let reach = |path: &str| {
        let net = nets.iter().find(|net| net["path"] == path).unwrap_or_else(|| panic!("no {path} in {traced:#}"));
        let end = |at: usize| net["reach"]["0"][at].as_f64().unwrap();
        (net["mode"].clone(), end(0), end(1))
    };
    assert_eq!(reach("OUT"), (Value::Null, 0.0, 48.0));
    assert_eq!(reach("CTL"), (Value::Null, 0.0, 5.0));
}

#[test]
fn trace_says_unknown_as_null() {
    let bench = Bench::new(&[]);
    bench.put("c.sp", "* t\nC1 VIN FLOAT 1p\nR1 VIN VSS 1k\nM1 FLOAT CTL FLOAT FLOAT ldn60 w=60u l=0.6u nf=2\n");
    let (code, traced) = bench.json("trace c.sp FLOAT --format json");
    assert_eq!(code, 0);
    assert_eq!(traced["nets"][0]["reach"]["0"], serde_json::json!([null, null]), "{traced:#}");
}

#[test]
fn survey_counts_what_is_there() {
    let bench = Bench::with_block();
    let ran = bench.run("survey block.sp");
    assert_eq!((ran.code, ran.err.as_str()), (0, ""));
    says(&ran.out, &["ldn60", "VIN", "X1.M1"]);
    bench.put("more.sp", &format!("{BLOCK}Mx OUT CTL VSS VSS strange w=1u l=1u\n"));
    let (code, found) = bench.json("survey more.sp --format json");
    assert_eq!(code, 0);
    assert_eq!(found["classes"], serde_json::json!({"ldn60": 1}));
    assert_eq!(found["devices"][0]["path"], "X1.M1");
    assert_eq!(found["devices"][0]["class"], "ldn60");
    assert!(found["unmatched"].get("strange").is_some(), "{found:#}");
}

#[test]
fn a_waiver_hides_its_finding_until_its_last_day() {
    let bench = Bench::with_block();
    bench.put(
        "x.yaml",
        "use: [drainwise.yaml]\nwaivers:\n  - {rule: finger-count, at: X1.M1, reason: drawn by hand, by: layout, until: 2027-03-01}\n",
    );
    let (code, report) = bench.json("lint block.sp --deck x.yaml --format json --today 2027-03-01");
    assert_eq!(code, 0);
    assert_eq!(ids(&report), ["finger-count"]);
    assert_eq!(
        report["findings"][0]["waiver"],
        serde_json::json!({"reason": "drawn by hand", "by": "layout", "until": "2027-03-01"})
    );
    assert_eq!(report["summary"]["findings"], serde_json::json!({"error": 0, "warning": 0, "note": 0, "waived": 1}));

    let (code, report) = bench.json("lint block.sp --deck x.yaml --format json --today 2027-03-02");
    assert_eq!(code, 1);
    assert_eq!(ids(&report), ["finger-count", "waiver-expired"]);
    assert_eq!(report["findings"][0]["waiver"], Value::Null);
}

#[test]
fn a_waiver_that_hides_nothing_is_stale() {
    let bench = Bench::new(&[("block.sp", &BLOCK.replace("nf=3", "nf=4"))]);
    bench.put("x.yaml", "use: [drainwise.yaml]\nwaivers: [{rule: finger-count, at: coil_switch/M1, reason: old}]\n");
    let (code, report) = bench.json("lint block.sp --deck x.yaml --format json --fail-on warning");
    assert_eq!((code, ids(&report)), (1, vec!["waiver-stale"]));
    assert_eq!(Path::new(report["findings"][0]["file"].as_str().unwrap()), Path::new("x.yaml"));
}

/// Values observed with the circuit simulator ngspice, version 39: a call's parameter may use the others of its card, before or
/// behind it, and they go before those around; its own name means the one around.
#[test]
fn parameters_of_a_call_see_one_another() {
    let bench = Bench::new(&[]);
    bench.put(
        "probe.yaml",
        "use: [drainwise.yaml]\nclasses: {ldn60: {ratings: {}}}\nrules:\n  probe: {for: device, require: 'param(\"ad\") > 1000000', say: 'ad is {param(\"ad\")}'}\n",
    );
    for (call, value) in [
        ("w=4 nf=2 ad='int((nf+1)/2)*w/nf'", "2"),
        ("ad='w*2' w=4", "8"),
        ("w=4 ad='w*2'", "8"),
        ("ad='ad'", "50"),
        ("w='w' ad='w'", "100"),
    ] {
        bench.put("c.sp", &format!("* calls\n.param w=100 ad=50\nX1 VIN CTL VSS VSS ldn60 {call}\n"));
        let (_, report) = bench.json("lint c.sp --deck probe.yaml --only probe --format json");
        let messages: Vec<_> =
            report["findings"].as_array().unwrap().iter().map(|finding| finding["message"].clone()).collect();
        assert_eq!(messages, [format!("ad is {value}")], "{call}");
    }
}

#[test]
fn parameters_of_a_call_that_go_in_a_ring_have_no_value() {
    let bench = Bench::new(&[]);
    bench.put("c.sp", "* calls\nX1 VIN CTL VSS VSS ldn60 w='l' l='w' nf=2\n");
    let (code, report) = bench.json("lint c.sp --format json");
    assert_eq!(code, 2);
    assert!(ids(&report).contains(&"card"), "{report:#}");
}

#[test]
fn a_deck_may_have_many_comments() {
    let bench = Bench::with_block();
    bench.put("x.yaml", &format!("use: [drainwise.yaml]\nrails:\n{}  EN: 5V\n", "  # a line\n".repeat(5000)));
    let ran = bench.run("deck x.yaml");
    assert_eq!((ran.code, ran.err.as_str()), (0, ""));
}

/// A starter deck declares no rails yet: then nobody can say that a gate floats.
#[test]
fn without_rails_no_gate_is_called_floating() {
    let bench = Bench::with_block();
    bench.put("x.yaml", "use: [drainwise.yaml]\nrails: {}\n");
    let (code, report) = bench.json("lint block.sp --deck x.yaml --only gate-floats --format json");
    assert_eq!(code, 0, "{report:#}");
    assert_eq!(report["findings"][0]["verdict"], "unproven", "{report:#}");
}

/// Somebody who may write to `/dev` must not lose `/dev/null` to a report: what is no file is never replaced. A socket stands in
/// for a device here.
#[cfg(unix)]
#[test]
fn out_never_replaces_what_is_no_file() {
    use std::os::unix::fs::FileTypeExt;
    let bench = Bench::with_block();
    let _listener = std::os::unix::net::UnixListener::bind(bench.path("socket")).unwrap();
    let ran = bench.run("lint block.sp --out socket");
    assert_eq!(ran.code, 2, "a socket cannot be opened for writing");
    says(&ran.err, &["cannot write socket"]);
    assert!(std::fs::symlink_metadata(bench.path("socket")).unwrap().file_type().is_socket(), "it is still there");
}
