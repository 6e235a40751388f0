//! What is written for other programs is what those programs' own documents ask for, and hostile names stay text in all of it.
//!
//! Each format has its check: the published schema, or the published description of its fields and escapes, named beside it.
#![allow(clippy::unwrap_used, clippy::panic, reason = "a test that cannot go on must stop")]

use serde_json::Value;
use std::fs;
use std::path::Path;
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
    fingers: {min: 2, multiple_of: 2}
    ratings: {vds: -0.5V..60V, vgs: -5.5V..5.5V}
    body: {tie: s}
  rpoly: {kind: resistor, pins: [a, b]}
rails: {VSS: 0V, VIN: 6V..48V, COIL: 0V..48V, CTL: 0V..5V}
";

/// Two findings: three fingers, and a gate pulled up to the battery.
const BLOCK: &str = "\
* coil switches
M1 COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3
R1 VIN GATE rpoly r=1meg
M2 COIL GATE VSS VSS ldn60 w=60u l=0.6u nf=2
";

/// A repository with the files given, and a way to run the program in it.
struct Bench {
    repository: TempDir,
}

struct Ran {
    code: i32,
    out: String,
}

impl Bench {
    fn new(block: &str) -> Bench {
        let bench = Bench { repository: tempfile::tempdir().unwrap() };
        fs::create_dir(bench.path(".git")).unwrap();
        fs::create_dir_all(bench.path("chip/blocks")).unwrap();
        bench.put("chip/drainwise.yaml", DECK);
        bench.put("chip/blocks/block.sp", block);
        bench
    }

    fn path(&self, name: &str) -> std::path::PathBuf {
        self.repository.path().join(name)
    }

    fn put(&self, name: &str, text: &str) {
        fs::write(self.path(name), text).unwrap();
    }

    /// Runs in the folder `chip`.
    fn run(&self, line: &str) -> Ran {
        let mut command = Command::new(env!("CARGO_BIN_EXE_drainwise"));
        command.current_dir(self.path("chip")).args(line.split_whitespace());
        let output = command.output().unwrap();
        let out = String::from_utf8(output.stdout).unwrap();
        let err = String::from_utf8(output.stderr).unwrap();
        assert!(!err.contains("panicked"), "{err}");
        Ran { code: output.status.code().unwrap(), out: format!("{out}{err}") }
    }

    fn sarif(&self, line: &str) -> Value {
        let ran = self.run(&format!("lint {line} --format sarif"));
        let log: Value = serde_json::from_str(&ran.out).unwrap_or_else(|error| panic!("{error}\n{}", ran.out));
        assert_eq!(faults(&log), Vec::<String>::new(), "{log:#}");
        assert_eq!(log["runs"][0]["invocations"][0]["exitCode"], ran.code);
        log
    }
}

/// What the JSON Schema that OASIS published for SARIF 2.1.0 has against a log (`tests/schemas/README.md`). One pattern is taken out,
/// for a property that is not written: it is no regular expression by the grammar that the validator follows.
fn faults(log: &Value) -> Vec<String> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/schemas/sarif-2.1.0.json");
    let mut schema: Value = serde_json::from_str(&fs::read_to_string(path).unwrap()).unwrap();
    for holder in ["run", "toolComponent"] {
        schema["definitions"][holder]["properties"]["language"].as_object_mut().unwrap().remove("pattern").unwrap();
    }
    let validator = jsonschema::draft7::options().should_validate_formats(true).build(&schema).unwrap();
    validator.iter_errors(log).map(|error| format!("{} at {}", error, error.instance_path())).collect()
}

#[track_caller]
fn says(text: &str, words: &[&str]) {
    for word in words {
        assert!(text.contains(word), "`{word}` is not in:\n{text}");
    }
}

fn results(log: &Value) -> &Vec<Value> {
    log["runs"][0]["results"].as_array().unwrap()
}

#[test]
fn the_schema_refuses_what_is_no_log() {
    let log = serde_json::json!({"version": "2.1.0", "runs": [{"tool": {"driver": {"name": "x"}}}]});
    assert_eq!(faults(&log), Vec::<String>::new());
    for (place, wrong) in [("/version", Value::from("2.0")), ("/runs/0/tool/driver", serde_json::json!({}))] {
        let mut log = log.clone();
        *log.pointer_mut(place).unwrap() = wrong;
        assert_ne!(faults(&log), Vec::<String>::new(), "{place}");
    }
}

/// Paths count from the folder that holds `.git`, wherever one stands; no folder of the machine gets out.
#[test]
fn sarif_names_files_from_the_root() {
    let bench = Bench::new(BLOCK);
    let absolute = bench.path("chip/blocks/block.sp").display().to_string();
    for netlist in ["blocks/block.sp", "../chip/./blocks/block.sp", absolute.as_str()] {
        let log = bench.sarif(netlist);
        assert_eq!(results(&log).len(), 2);
        for result in results(&log) {
            let place = &result["locations"][0]["physicalLocation"];
            assert_eq!(
                place["artifactLocation"],
                serde_json::json!({"uri": "chip/blocks/block.sp", "uriBaseId": "%SRCROOT%"})
            );
        }
        assert!(!log.to_string().contains(bench.repository.path().to_str().unwrap()), "{netlist}: {log:#}");
    }
}

/// SARIF 2.1.0: places 3.30, logical places 3.33, the chain as a code flow 3.36, fingerprints 3.27.17.
#[test]
fn sarif_says_where_why_and_how() {
    let bench = Bench::new(BLOCK);
    let log = bench.sarif("blocks/block.sp");
    let [fingers, gate] = results(&log).as_slice() else { panic!("{log:#}") };
    assert_eq!((fingers["ruleId"].as_str(), gate["ruleId"].as_str()), (Some("finger-count"), Some("over-rating")));
    let rules = log["runs"][0]["tool"]["driver"]["rules"].as_array().unwrap();
    for result in [fingers, gate] {
        assert_eq!(rules[result["ruleIndex"].as_u64().unwrap() as usize]["id"], result["ruleId"]);
        assert_eq!((&result["kind"], &result["level"]), (&Value::from("fail"), &Value::from("error")));
    }
    for rule in rules {
        for part in ["shortDescription", "fullDescription", "help"] {
            assert!(!rule[part]["text"].as_str().unwrap().is_empty(), "{rule:#}");
        }
        assert!(rule["help"]["text"].as_str().unwrap().contains("Source: "), "{rule:#}");
    }
    assert_eq!(fingers["locations"][0]["physicalLocation"]["region"]["startLine"], 2);
    assert_eq!(gate["locations"][0]["logicalLocations"][0]["fullyQualifiedName"], "M2");
    let steps: Vec<&str> = gate["codeFlows"][0]["threadFlows"][0]["locations"]
        .as_array()
        .unwrap()
        .iter()
        .map(|step| step["location"]["message"]["text"].as_str().unwrap())
        .collect();
    assert_eq!(steps, ["from this rail: VIN at 48 V", "brings GATE to 48 V: from `VIN`", "g is on GATE"]);
    let print = |log: &Value| results(log)[0]["partialFingerprints"].clone();
    bench.put("chip/blocks/block.sp", &BLOCK.replace("M1", "* a line more\nM1"));
    let moved = bench.sarif("blocks/block.sp");
    assert_eq!(results(&moved)[0]["locations"][0]["physicalLocation"]["region"]["startLine"], 3);
    assert_eq!(print(&log), print(&moved));
}

/// What could not be decided has kind `open` (3.27.9), and its level is `none` (3.27.10); a team may count it as a fault.
#[test]
fn sarif_says_open_where_nothing_is_proven() {
    let bench = Bench::new("* t\nM1 COIL NOWHERE VSS VSS ldn60 w=60u l=0.6u nf=2\nC1 NOWHERE VSS 1p\n");
    let only = "blocks/block.sp --only over-rating";
    let log = bench.sarif(only);
    let result = &results(&log)[0];
    assert_eq!((&result["kind"], &result["level"]), (&Value::from("open"), &Value::from("none")));
    bench.put("chip/drainwise.yaml", &format!("{DECK}rules: {{over-rating: {{unproven: error}}}}\n"));
    let log = bench.sarif(only);
    let result = &results(&log)[0];
    assert_eq!((&result["kind"], &result["level"]), (&Value::from("fail"), &Value::from("error")));
    assert_eq!(result["properties"]["verdict"], "unproven");
}

/// Suppressed results (3.35) are there only where they are asked for.
#[test]
fn sarif_suppresses_what_is_waived() {
    let bench = Bench::new(BLOCK);
    bench.put(
        "chip/drainwise.yaml",
        &format!(
            "{DECK}waivers: [{{rule: finger-count, at: m1, reason: drawn by hand, by: layout, until: 2031-01-01}}]\n"
        ),
    );
    let line = "blocks/block.sp --today 2030-01-01";
    assert_eq!(results(&bench.sarif(line)).len(), 1);
    let log = bench.sarif(&format!("{line} --with-waived"));
    let suppression = &results(&log)[0]["suppressions"][0];
    assert_eq!((&suppression["kind"], &suppression["status"]), (&Value::from("external"), &Value::from("accepted")));
    assert_eq!(suppression["justification"], "drawn by hand, by layout, until 2031-01-01");
}

/// What could not be read is no result: notifications of the invocation (3.20.21, 3.20.22).
#[test]
fn sarif_tells_what_could_not_be_read() {
    let bench = Bench::new(&format!("{BLOCK}Mbad COIL\n"));
    let log = bench.sarif("blocks/block.sp");
    let invocation = &log["runs"][0]["invocations"][0];
    assert_eq!((&invocation["executionSuccessful"], &invocation["exitCode"]), (&Value::from(false), &Value::from(2)));
    let [card] = invocation["toolExecutionNotifications"].as_array().unwrap().as_slice() else { panic!("{log:#}") };
    assert_eq!((&card["descriptor"]["id"], &card["level"]), (&Value::from("card"), &Value::from("error")));
    assert_eq!(card["locations"][0]["physicalLocation"]["region"]["startLine"], 5);
    assert_eq!(results(&log).len(), 2, "the rest is judged");

    bench.put("chip/drainwise.yaml", "rails: {VSS: 5A}\n");
    let log = bench.sarif("blocks/block.sp");
    let [deck] = log["runs"][0]["invocations"][0]["toolConfigurationNotifications"].as_array().unwrap().as_slice()
    else {
        panic!("{log:#}")
    };
    assert_eq!(deck["descriptor"]["id"], "deck");
    let log = bench.sarif("blocks/block.sp --only fingercount");
    assert!(
        log["runs"][0]["invocations"][0]["toolConfigurationNotifications"][0].get("locations").is_none(),
        "{log:#}"
    );
}

/// Braces hold places for arguments (3.11.5), and brackets before brackets make links (3.11.6): in names they mean nothing.
#[test]
fn sarif_messages_hold_no_arguments_and_no_links() {
    let bench = Bench::new(HOSTILE);
    let log = bench.sarif("blocks/block.sp");
    let texts: Vec<&str> = results(&log).iter().map(|result| result["message"]["text"].as_str().unwrap()).collect();
    for text in &texts {
        assert!(!text.replace("\\](", "").contains("](") && !text.replace("{{", "").contains('{'), "{text}");
    }
    assert!(texts.iter().any(|text| text.contains("`[x\\](http://a.example)|{{0}}<b>.sp`")), "{texts:#?}");
}

/// GitHub's page "Workflow commands for GitHub Actions" (from memory): a command is a line that begins with `::`.
#[test]
fn github_annotates_ten_of_a_kind_errors_first() {
    let devices: String = (0..13).map(|n| format!("M{n} COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3\n")).collect();
    let open: String = (0..11).map(|n| format!("MO{n} COIL N{n} VSS VSS ldn60 w=60u l=0.6u nf=2\n")).collect();
    let bench = Bench::new(&format!("* t\n{open}{devices}"));
    let ran = bench.run("lint blocks/block.sp --only finger-count --only over-rating --format github");
    assert_eq!(ran.code, 1);
    let lines: Vec<&str> = ran.out.lines().collect();
    assert!(lines[..10].iter().all(|line| line.starts_with("::error file=chip/blocks/block.sp,line=")), "{}", ran.out);
    assert!(lines[10..20].iter().all(|line| line.starts_with("::notice file=")), "{}", ran.out);
    assert!(lines[20..].iter().all(|line| line.starts_with("drainwise: ")), "{}", ran.out);
    says(lines[0], &["line=13,endLine=13,col=", ",title=finger-count::M0 has a finger count of 3"]);
    says(lines[20], &["3 errors, 1 notice more without an annotation"]);
}

/// A name must not end a property, a message, or a line, and must not make another command.
#[test]
fn github_commands_hold_nothing_but_their_own() {
    let bench = Bench::new("* t\nM1::error::%0A##[x] COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3\n");
    fs::rename(bench.path("chip/blocks/block.sp"), bench.path("chip/blocks/a,b%3A.sp")).unwrap();
    let ran = bench.run("lint blocks/a,b%3A.sp --format github --only finger-count");
    let [annotation] = ran.out.lines().filter(|line| line.contains("::")).collect::<Vec<_>>()[..] else {
        panic!("{}", ran.out)
    };
    assert!(annotation.starts_with("::error file=chip/blocks/a%2Cb%253A.sp,line=2,endLine=2,col="), "{annotation}");
    says(annotation, &["::M1::error::%250A##[x] has a finger count of 3"]);
    assert_eq!(ran.out.matches("##[").count(), annotation.matches("##[").count());
}

/// The fields that GitLab documents for a code quality report (from memory): all there, none else, fingerprints unique.
#[test]
fn gitlab_has_the_documented_fields() {
    let bench = Bench::new(&format!("{BLOCK}M1 COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=5\nMx COIL CTL VSS VSS ldn61\n"));
    let ran = bench.run("lint blocks/block.sp --format gitlab");
    let issues: Value = serde_json::from_str(&ran.out).unwrap();
    let issues = issues.as_array().unwrap();
    assert!(issues.len() >= 3, "{issues:#?}");
    let mut prints = std::collections::BTreeSet::new();
    for issue in issues {
        let keys: Vec<&str> = issue.as_object().unwrap().keys().map(String::as_str).collect();
        assert_eq!(keys, ["check_name", "description", "fingerprint", "location", "severity"]);
        assert!(["info", "minor", "major", "critical", "blocker"].contains(&issue["severity"].as_str().unwrap()));
        assert_eq!(issue["location"]["path"], "chip/blocks/block.sp");
        assert!(issue["location"]["lines"]["begin"].as_u64().unwrap() >= 1);
        assert!(prints.insert(issue["fingerprint"].as_str().unwrap().to_owned()), "{issues:#?}");
    }
}

/// Names that would be structure, tags, links or calls in Markdown, and one that is longer than a comment.
const HOSTILE: &str = "\
* hostile
M|a|<script>alert</script> COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3
M[x](http://a.example) COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3
M`b`**c**</details>@all COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3
M<!--#12&lt~~d~~www.a.example COIL <img> VSS VSS ldn60 w=60u l=0.6u nf=3
.include \"[x](http://a.example)|{0}<b>.sp\"
ME\u{9b}31m\u{202e}e COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3
";

/// What a reader makes of a comment (GitHub Flavored Markdown Spec 0.29, tables and raw HTML): cells in each row of the tables, and
/// every piece of HTML.
fn read_markdown(text: &str) -> (Vec<usize>, Vec<String>) {
    use pulldown_cmark::{Event, Options, Parser, Tag, TagEnd};
    let (mut cells, mut html) = (Vec::new(), Vec::new());
    for event in Parser::new_ext(text, Options::ENABLE_TABLES | Options::ENABLE_STRIKETHROUGH) {
        match event {
            Event::Start(Tag::Link { .. } | Tag::Image { .. } | Tag::Strikethrough | Tag::Emphasis) => {
                panic!("{event:?} in\n{text}")
            }
            Event::Start(Tag::TableRow) => cells.push(0),
            Event::End(TagEnd::TableCell) => {
                if let Some(row) = cells.last_mut() {
                    *row += 1;
                }
            }
            Event::Html(piece) | Event::InlineHtml(piece) => html.push(piece.to_string()),
            _ => {}
        }
    }
    (cells, html)
}

#[test]
fn markdown_keeps_names_as_text() {
    let bench = Bench::new(HOSTILE);
    let ran = bench.run("lint blocks/block.sp --format markdown");
    assert_eq!(ran.code, 1);
    let (cells, html) = read_markdown(&ran.out);
    assert!(cells.len() >= 5 && cells.iter().all(|&row| row == 4), "{cells:?}\n{}", ran.out);
    for piece in html {
        let piece = piece.replace("<code>", "").replace("</code>", "").replace("<!-- -->", "");
        let piece = piece.replace("<details><summary>", "").replace("</summary>", "").replace("</details>", "");
        assert!(!piece.contains('<'), "{piece}\n{}", ran.out);
    }
    assert!(!ran.out.contains(['\u{9b}', '\u{202e}']));
    says(&ran.out, &["M&#124;a&#124;&#60;script&#62;alert&#60;/script&#62; has a finger count of 3"]);
}

/// The bound that the reference page states; a comment on GitHub holds 65 536 characters (from memory).
#[test]
fn markdown_is_bounded_and_counts_what_it_leaves_out() {
    let long = "@#".repeat(3000);
    let devices: String = (0..500).map(|n| format!("M{n}{long} COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3\n")).collect();
    let odd: String = (0..300).map(|n| format!("MX{n} COIL CTL VSS VSS ldn60 w=60u l=0.6u nf=3\n")).collect();
    for block in [format!("* t\n{devices}"), format!("* t\n{odd}")] {
        let bench = Bench::new(&block);
        let waivers = format!("waivers: [{{rule: finger-count, at: \"M*1*\", reason: \"{long}\"}}]\n");
        bench.put("chip/drainwise.yaml", &format!("{DECK}{waivers}"));
        let ran = bench.run("lint blocks/block.sp --format markdown");
        assert!(ran.out.len() <= 60_000, "{}", ran.out.len());
        let count = |what: &str| {
            let line = ran.out.lines().find(|line| line.starts_with("… and ") && line.contains(what)).unwrap();
            line.split(' ').nth(2).unwrap().parse::<usize>().unwrap()
        };
        let shown = ran.out.matches("<details><summary>").count() - 1;
        let title = ran.out.lines().next().unwrap().split(' ');
        let open: usize = title.filter_map(|word| word.parse::<usize>().ok()).sum();
        assert_eq!(shown + count("without details"), open);
        assert_eq!(
            ran.out.lines().filter(|line| line.starts_with("| **error** | <")).count() + count("do not fit"),
            open
        );
        says(&ran.out, &["qualified review", "<details><summary>1"]);
    }
}

#[test]
fn hostile_names_are_text_in_every_format() {
    let bench = Bench::new(HOSTILE);
    for format in ["text", "short", "json", "sarif", "github", "gitlab", "markdown"] {
        let ran = bench.run(&format!("lint blocks/block.sp --format {format}"));
        assert_eq!(ran.code, 1, "{format}");
        let data = ["json", "sarif", "gitlab"].contains(&format);
        assert!(data || !ran.out.contains(['\u{9b}', '\u{202e}']), "{format} commands a terminal");
        match format {
            "json" | "sarif" | "gitlab" => drop(serde_json::from_str::<Value>(&ran.out).unwrap()),
            "short" | "github" => {
                let odd = ran.out.lines().find(|line| {
                    !["blocks/block.sp:", "drainwise.yaml:", "::", "drainwise: "]
                        .iter()
                        .any(|start| line.starts_with(start))
                });
                assert_eq!(odd, None, "{format}: one line for one thing");
            }
            _ => {}
        }
        assert_eq!(ran.out, bench.run(&format!("lint blocks/block.sp --format {format}")).out, "{format}");
    }
}
