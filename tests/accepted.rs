//! Findings that somebody accepted: known ones in a baseline, and waivers in comments of the netlist.
//!
//! What is expected comes from the reference page (`rules/README.md`); the circuit is invented.
#![allow(clippy::unwrap_used, clippy::panic, reason = "a test that cannot go on must stop")]

use serde_json::Value;
use std::fs;
use std::process::Command;
use tempfile::TempDir;

const DECK: &str = "\
use: [builtin:ldmos]
classes:
  ldn60:
    kind: nmos
    pins: [d, g, s, b]
    high_voltage: true
    size: {width: w, length: l, fingers: nf}
    fingers: {min: 2, multiple_of: 2, width: 5um..30um}
    ratings: {vds: -0.5V..60V, vgs: -5.5V..5.5V}
    body: {tie: s}
rails: {VSS: 0V, COIL: 0V..48V, CTL: 0V..5V}
";

const BLOCK: &str = "\
* coil switches
.subckt switch D G S
M1 D G S S ldn60 w=30u l=0.6u nf=3
.ends
X1 COIL CTL VSS switch
X2 COIL CTL VSS switch
M2 COIL CTL VSS COIL ldn60 w=20u l=0.6u nf=2
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
    fn new(block: &str) -> Bench {
        let bench = Bench { folder: tempfile::tempdir().unwrap() };
        bench.put("drainwise.yaml", DECK);
        bench.put("block.sp", block);
        bench
    }

    fn put(&self, name: &str, text: &str) {
        fs::write(self.folder.path().join(name), text).unwrap();
    }

    fn get(&self, name: &str) -> String {
        fs::read_to_string(self.folder.path().join(name)).unwrap()
    }

    fn run(&self, more: &str) -> Ran {
        let mut command = Command::new(env!("CARGO_BIN_EXE_drainwise"));
        command.current_dir(self.folder.path()).args(["lint", "block.sp"]);
        if !more.contains("--today") {
            command.args(["--today", "2027-01-01"]);
        }
        let output = command.args(more.split_whitespace()).output().unwrap();
        let text = |bytes| String::from_utf8(bytes).unwrap();
        Ran { code: output.status.code().unwrap(), out: text(output.stdout), err: text(output.stderr) }
    }

    /// The exit code, and of each finding its rule, line and state.
    fn found(&self, more: &str) -> (i32, Vec<(String, u64, &'static str)>) {
        let ran = self.run(&format!("--format json {more}"));
        let report: Value =
            serde_json::from_str(&ran.out).unwrap_or_else(|error| panic!("{error}\n{}{}", ran.out, ran.err));
        let state = |finding: &Value| match (finding["known"].as_bool().unwrap(), finding["waiver"].is_null()) {
            (true, true) => "known",
            (false, false) => "waived",
            (false, true) => "open",
            (true, false) => panic!("{finding:#}"),
        };
        let findings = report["findings"].as_array().unwrap().iter();
        let all =
            findings.map(|one| (one["rule"].as_str().unwrap().to_owned(), one["line"].as_u64().unwrap(), state(one)));
        (ran.code, all.collect())
    }
}

fn expect(rows: &[(&str, u64, &'static str)]) -> Vec<(String, u64, &'static str)> {
    rows.iter().map(|&(rule, line, state)| (rule.to_owned(), line, state)).collect()
}

#[track_caller]
fn says(text: &str, words: &[&str]) {
    for word in words {
        assert!(text.contains(word), "`{word}` is not in:\n{text}");
    }
}

#[test]
fn a_baseline_lets_known_findings_pass_and_new_ones_fail() {
    let bench = Bench::new(BLOCK);
    assert_eq!(bench.found(""), (1, expect(&[("finger-count", 3, "open"), ("body-off-source", 7, "open")])));
    let ran = bench.run("--write-baseline known.json --format short");
    assert_eq!((ran.code, ran.err.as_str()), (0, ""), "{}", ran.out);
    says(&ran.out, &["found      no errors, no warnings, no notes, 2 known"]);
    let known = [("finger-count", 4, "known"), ("body-off-source", 8, "known")];

    // a line more, and another device on the last line
    bench.put("block.sp", &BLOCK.replace(".subckt", "* moved\n.subckt"));
    assert_eq!(bench.found("--baseline known.json"), (0, expect(&known)));
    bench.put("block.sp", &format!("{}M3 COIL CTL VSS VSS ldn60 w=20u l=0.6u nf=1\n", bench.get("block.sp")));
    let new = [known[0], known[1], ("finger-count", 9, "open")];
    assert_eq!(bench.found("--baseline known.json"), (1, expect(&new)));
    let ran = bench.run("--baseline known.json --format short");
    assert_eq!(ran.out.matches("[finger-count]").count(), 1, "{}", ran.out);
    let ran = bench.run("--baseline known.json --format short --with-waived");
    says(&ran.out, &["block.sp:4:31: known: M1 has a finger count of 3"]);
}

#[test]
fn a_baseline_is_sorted_and_holds_no_lines() {
    let bench = Bench::new(BLOCK);
    bench.run("--write-baseline known.json");
    let text = bench.get("known.json");
    let lines: Vec<&str> = text.lines().collect();
    assert_eq!(lines.len(), 7, "{text}");
    says(lines[3], &[r#"{"rule":"body-off-source","at":"M2","verdict":"violated","pairs":["b"],"fingerprint":""#]);
    says(lines[4], &[r#"{"rule":"finger-count","at":"switch/M1","verdict":"violated","fingerprint":""#]);
    bench.put("block.sp", &BLOCK.replace("M2", "\n* c\nM2"));
    bench.run("--write-baseline known.json --format json --out report.json");
    assert_eq!(bench.get("known.json"), text);
}

#[test]
fn entries_that_are_gone_are_named_unless_only_a_part_was_asked() {
    let bench = Bench::new(BLOCK);
    bench.run("--write-baseline known.json");
    bench.put("block.sp", &BLOCK.replace("nf=3", "nf=4"));
    let gone = [("body-off-source", 7, "known"), ("baseline", 5, "open")];
    assert_eq!(bench.found("--baseline known.json"), (0, expect(&gone)));
    let ran = bench.run("--baseline known.json --format short");
    says(
        &ran.out,
        &["known.json:5:1: note: this known finding of finger-count at switch/M1 is no longer there [baseline]"],
    );
    for part in ["--only body-off-source", "--top switch"] {
        let ran = bench.run(&format!("--baseline known.json --format short {part}"));
        assert!(!ran.out.contains("no longer there"), "{part}: {}", ran.out);
    }
    // written anew, it is gone from there too
    bench.run("--baseline known.json --write-baseline known.json");
    assert!(!bench.get("known.json").contains("finger-count"));
}

#[test]
fn a_worse_finding_is_a_new_one() {
    let bench = Bench::new(&BLOCK.replace("X2 COIL CTL", "X2 COIL NOWHERE"));
    bench.run("--write-baseline known.json");
    assert_eq!(bench.run("--baseline known.json").code, 0);
    bench.put("block.sp", &BLOCK.replace("X2 COIL CTL", "X2 COIL COIL"));
    let (code, found) = bench.found("--baseline known.json --only over-rating");
    assert_eq!((code, found), (1, expect(&[("over-rating", 3, "open"), ("baseline", 7, "open")])));
}

#[test]
fn a_baseline_that_cannot_be_used_stops_the_run() {
    let bench = Bench::new(BLOCK);
    for (text, words) in [
        (None, "cannot be read"),
        (Some("[]"), "this is no baseline"),
        (Some("{\"drainwise_baseline\": 9, \"findings\": []}"), "form 9"),
    ] {
        if let Some(text) = text {
            bench.put("known.json", text);
        }
        let ran = bench.run("--baseline known.json --format short");
        assert_eq!(ran.code, 2, "{}", ran.out);
        says(&ran.out, &["known.json:1:", words, "[baseline]"]);
    }
}

#[test]
fn no_baseline_is_written_of_what_could_not_be_read() {
    let bench = Bench::new(&format!("{BLOCK}Mbad COIL\n"));
    let ran = bench.run("--write-baseline known.json");
    assert_eq!(ran.code, 2);
    says(&ran.err, &["known.json is not written", "could be read"]);
    assert!(!bench.folder.path().join("known.json").exists());
}

/// BLOCK's findings stand on its lines 3 and 7; a comment above moves them down by one.
#[test]
fn a_comment_at_the_card_accepts_what_is_found_there() {
    let words = "drainwise: accept finger-count until 2027-03-01 because trimmed at test";
    let (above, behind) = (format!("* {words}\nM1 D"), format!("nf=3 $ {words}"));
    for (from, to, line) in
        [("M1 D", above.as_str(), 4), ("nf=3", behind.as_str(), 3), ("nf=3", &format!("\n+ nf=3 ; {words}"), 4)]
    {
        let bench = Bench::new(&BLOCK.replace(from, to));
        let (code, found) = bench.found("--only finger-count");
        assert_eq!((code, found), (0, expect(&[("finger-count", line, "waived")])), "{to}");
        let (code, found) = bench.found("--only finger-count --today 2027-03-02 --only waiver-expired");
        assert_eq!(code, 1, "{found:?}");
        assert!(found.iter().any(|(rule, ..)| rule == "waiver-expired"), "{found:?}");
    }
}

#[test]
fn a_comment_accepts_no_other_card_and_no_other_rule() {
    let bench = Bench::new(
        &(BLOCK.replace("M1 D", "* drainwise: accept finger-count because x\nM1 D")
            + "M3 COIL CTL VSS COIL ldn60 w=20u l=0.6u nf=3\n"),
    );
    let wanted = [
        ("finger-count", 4, "waived"),
        ("body-off-source", 8, "open"),
        ("body-off-source", 9, "open"),
        ("finger-count", 9, "open"),
    ];
    assert_eq!(bench.found(""), (1, expect(&wanted)));
}

/// Two cells of one name under a condition, or one inside another: a comment means its own card.
#[test]
fn a_comment_means_its_own_card_where_names_are_equal() {
    let cell = |comment: &str| format!(".subckt switch D G S\n{comment}M1 D G S S ldn60 w=30u l=0.6u nf=3\n.ends\n");
    let block = format!(
        "* t\n{}.subckt outer D G S\n{}X1 D G S switch\n.ends\nX1 COIL CTL VSS switch\nX2 COIL CTL VSS outer\n",
        cell("* drainwise: accept finger-count because x\n"),
        cell("")
    );
    let bench = Bench::new(&block);
    assert_eq!(bench.found(""), (1, expect(&[("finger-count", 4, "waived"), ("finger-count", 8, "open")])));
}

#[test]
fn a_comment_of_a_pair_leaves_the_others() {
    let block = "* t\n* drainwise: accept over-rating of vgs because x\nM1 COIL COIL VSS VSS ldn60 w=20u l=0.6u nf=2\nR1 CTL VSS 1k\n";
    let bench = Bench::new(block);
    bench.put("drainwise.yaml", &DECK.replace("vds: -0.5V..60V", "vds: -0.5V..30V"));
    assert_eq!(bench.found(""), (1, expect(&[("over-rating", 3, "open")])));
    says(&bench.run("").out, &["does not cover vds"]);
    bench.put("block.sp", &block.replace("* d", "* drainwise: accept over-rating of vds because y\n* d"));
    assert_eq!(bench.found(""), (0, expect(&[("over-rating", 4, "waived")])));
}

#[test]
fn a_comment_that_cannot_be_followed_is_an_error_at_its_place() {
    for (words, place, says_so, help) in [
        ("accept finger-count", "3:13", "this waiver gives no reason", "because trimmed at test"),
        ("accept finger-count because", "3:13", "this waiver gives no reason", "behind `because`"),
        ("accept finger-cuont because x", "3:21", "there is no rule `finger-cuont`", "did you mean `finger-count`?"),
        ("acept finger-count because x", "3:14", "`acept` is not known", "did you mean `accept`?"),
        ("accept finger-count until 2027-02-30 because x", "3:40", "no day of the calendar", "2027-03-01"),
    ] {
        let bench = Bench::new(&BLOCK.replace("M1 D", &format!("* drainwise: {words}\nM1 D")));
        let ran = bench.run("--format short");
        assert_eq!(ran.code, 2, "{words}: {}", ran.out);
        says(&ran.out, &[&format!("block.sp:{place}: error: "), says_so, "[waiver]", "[finger-count]"]);
        says(&bench.run("").out.replace('\n', " ").replace("  ", " "), &[help]);
    }
    let bench = Bench::new(&BLOCK.replace(".ends", "* drainwise: accept finger-count because x\n.ends"));
    let ran = bench.run("--format short");
    assert_eq!(ran.code, 2, "{}", ran.out);
    says(&ran.out, &["block.sp:4:3: error: this waiver stands at no card"]);
}

/// What a stale waiver may have meant: the same rule near by, another pair, another rule at its place.
#[test]
fn a_stale_waiver_names_its_nearest_match() {
    let over = "M4 COIL COIL VSS VSS ldn60 w=20u l=0.6u nf=2\n";
    for (comment, waivers, hint) in [
        ("M2 ", "", "there is one at `switch/M1`: put the comment at that card"),
        ("", "{rule: finger-count, at: swich/M1, reason: x}", "did you mean `switch/M1`?"),
        ("", "{rule: finger-count, at: XTOP.XA.M1, reason: x}", "there is one at `X1.M1`"),
        ("", "{rule: finger-width, at: switch/M1, reason: x}", "what is found there is `finger-count`"),
        ("", "{rule: over-rating, at: M4, pair: vds, reason: x}", "the finding there is about vgs"),
    ] {
        let mut block = format!("{BLOCK}{over}");
        if !comment.is_empty() {
            // a device of a similar name that has no odd finger count
            block = block.replace(
                ".ends",
                "* drainwise: accept finger-count because x\nM2 D G S S ldn60 w=30u l=0.6u nf=2\n.ends",
            );
        }
        let bench = Bench::new(&block);
        bench.put("drainwise.yaml", &format!("{DECK}waivers: [{waivers}]\n"));
        let out = bench.run("").out;
        says(&out, &["waiver-stale", hint]);
    }
    let bench = Bench::new(&BLOCK.replace("nf=3", "nf=2 $ drainwise: accept finger-count because x"));
    says(&bench.run("").out, &["this waiver of finger-count at switch/M1 hides nothing", "take this comment out"]);
}

/// In SARIF a comment is a suppression in the source (2.1.0, section 3.35.2).
#[test]
fn a_comment_is_a_suppression_in_the_source() {
    let bench = Bench::new(&BLOCK.replace("M1 D", "* drainwise: accept finger-count because x\nM1 D"));
    let ran = bench.run("--format sarif --with-waived");
    let log: Value = serde_json::from_str(&ran.out).unwrap();
    let suppression = &log["runs"][0]["results"][0]["suppressions"][0];
    assert_eq!((&suppression["kind"], &suppression["justification"]), (&Value::from("inSource"), &Value::from("x")));
    assert_eq!(suppression["location"]["physicalLocation"]["region"]["startLine"], 3);
}
