//! Broken and hostile input: a message with a place, a fitting exit code, in bounded time, and never a panic.
//!
//! What a program of this kind meets in practice: files cut short, binary files under the wrong name, text of a generator gone
//! wild, cells that call themselves. The property at the end throws random lines at the whole lint: nothing panics, every
//! span lies inside its text on character boundaries, and the same input gives the same bytes.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::print_stdout)]

use drainwise::diag::Severity;
use drainwise::load::Memory;
use drainwise::pipeline::{Job, Outcome, Progress, lint};
use drainwise::report::text::Look;
use drainwise::report::{Setting, github, gitlab, json, markdown, sarif, short, text};
use drainwise::waiver::Date;
use proptest::prelude::*;
use std::fs;
use std::process::{Command, Stdio};
use std::thread::sleep;
use std::time::{Duration, Instant};

struct Still;

impl Progress for Still {
    fn stage(&self, _: &str) {}
}

const DECK: &str = "\
use: [builtin:ldmos]
classes:
  ldn60: {kind: nmos, pins: [d, g, s, b], high_voltage: true, size: {width: w, length: l}, ratings: {vds: -0.5V..60V}}
rails: {COIL: 0V..48V, GATE: 0V..5V}
";

/// A sound card, so that a deck's rails have nets and the rest of a file can be seen to be judged.
const SOUND: &str = "MOK COIL GATE 0 0 ldn60 w=20u l=0.6u\n";

/// Far beyond what any of these needs on a busy machine, and far below what a quadratic or worse loop takes.
const LIMIT: Duration = Duration::from_secs(30);

fn run(files: Memory, deck: &str) -> Outcome {
    let job = Job {
        netlists: vec!["block.sp".into()],
        decks: vec!["deck.yaml".into()],
        today: Some(Date { year: 2027, month: 1, day: 1 }),
        ..Job::default()
    };
    let began = Instant::now();
    let outcome = lint(&files.with("deck.yaml", deck.to_owned()), &job, &Still);
    assert!(began.elapsed() < LIMIT, "took {:?}", began.elapsed());
    sound(&outcome);
    outcome
}

fn netlist(text: impl Into<Vec<u8>>) -> Outcome {
    run(Memory::new().with("block.sp", text), DECK)
}

fn deck(text: &str) -> Outcome {
    run(Memory::new().with("block.sp", format!("* block\n{SOUND}")), text)
}

/// Every place lies inside its text, on character boundaries.
fn sound(outcome: &Outcome) {
    for diagnostic in &outcome.report.diagnostics {
        let spans = std::iter::once(diagnostic.span).chain(diagnostic.labels.iter().map(|label| label.span));
        for span in spans {
            let text = outcome.sources.text(span.file);
            assert!(text.get(span.range()).is_some(), "{span:?} does not fit: {}", diagnostic.message);
        }
    }
}

/// The report in each format.
fn written(outcome: &Outcome) -> [String; 7] {
    let (report, sources, setting) = (&outcome.report, &outcome.sources, &Setting::default());
    let others = [sarif::write, github::write, gitlab::write, markdown::write].map(|write| {
        let mut bytes = Vec::new();
        write(report, sources, setting, &mut bytes).unwrap();
        bytes
    });
    let [log, lines, issues, comment] = others;
    let (mut plain, mut line, mut data) = (Vec::new(), Vec::new(), Vec::new());
    text::write(&outcome.report, &outcome.sources, Look { width: 100, colour: false }, &mut plain).unwrap();
    short::write(&outcome.report, &outcome.sources, &mut line).unwrap();
    json::write(&outcome.report, &outcome.sources, &mut data).unwrap();
    [plain, line, data, log, lines, issues, comment].map(|bytes| String::from_utf8(bytes).unwrap())
}

/// The run could not be done, and an error with these words stands on this line of the block or deck.
fn refused(outcome: &Outcome, line: u32, words: &str) {
    assert!(outcome.could_not, "nothing was refused; {words:?} was to be said");
    let errors = outcome.report.diagnostics.iter().filter(|one| one.severity == Severity::Error);
    let at = |one: &drainwise::diag::Diagnostic| outcome.sources.start(one.span).line;
    let found: Vec<_> = errors.map(|one| (at(one), one.message.clone())).take(20).collect();
    assert!(
        found.iter().any(|(there, message)| *there == line && message.contains(words)),
        "no error on line {line} says {words:?}: {found:?}"
    );
}

// ---- files that are no netlists

#[test]
fn a_file_cut_anywhere_is_judged_as_far_as_it_goes() {
    let whole = format!(
        "* block\n{SOUND}.subckt sense a b w={{2*3}}\nR1 a b r='1k*w'\n+ m=2 $ end\n.ends sense\nX1 COIL GATE sense w = 4\n.if (1)\n\
         .param k = \"1+2\"\n.endif\n.include \"µ cells.sp\"\n.lib 'x' tt\n"
    );
    for end in 0..=whole.len() {
        // also between the two bytes of µ
        netlist(&whole.as_bytes()[..end]);
    }
}

#[test]
fn binary_bytes_are_refused_at_the_first_zero_byte() {
    let mut state = 1u32;
    let noise = std::iter::repeat_with(|| {
        state = state.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
        (state >> 24) as u8
    });
    let bytes: Vec<u8> = b"* block\n".iter().copied().chain(noise.take(200_000)).collect();
    let outcome = netlist(bytes);
    assert!(outcome.could_not);
    assert!(outcome.report.diagnostics.iter().any(|one| one.message.contains("zero byte")));
    refused(&netlist(vec![0; 100_000]), 1, "zero byte");
    netlist(vec![0xff; 100_000]);
}

#[test]
fn a_broken_archive_says_so() {
    let job = Job { netlists: vec!["a.sp.gz".into()], decks: vec!["deck.yaml".into()], ..Job::default() };
    let files = Memory::new().with("a.sp.gz", b"\x1f\x8b\x08\0rubbish and more".to_vec()).with("deck.yaml", DECK);
    let outcome = lint(&files, &job, &Still);
    sound(&outcome);
    assert!(outcome.could_not);
}

#[test]
fn ten_megabytes_on_one_line() {
    netlist(format!("* block\n{SOUND}M1 {}\n", "COIL GATE ".repeat(1_000_000)));
    refused(&netlist(format!("* block\nM1 {}\n{SOUND}", "x".repeat(10_000_000))), 2, "M1");
    netlist(format!("* block\n{SOUND}* {}\n", "x".repeat(10_000_000)));
    netlist("x".repeat(10_000_000));
}

// ---- expressions and parameters

#[test]
fn ten_thousand_levels_in_an_expression() {
    let many = |open: &str, inner: &str, close: &str| {
        let expression = open.repeat(10_000) + inner + &close.repeat(10_000);
        format!("* block\n.param a={{{expression}}}\nM1 COIL GATE 0 0 ldn60 w={{a}} l=1u\n")
    };
    refused(&netlist(many("(", "1u", ")")), 2, "brackets");
    refused(&netlist(many("abs(", "1u", ")")), 2, "brackets");
    refused(&netlist(many("(", "1u", ")").replace(".param a=", "M2 COIL GATE 0 0 ldn60 l=1u w=")), 2, "brackets");
    netlist(many("-", "1u", ""));
    netlist(many("!", "1u", ""));
    netlist(many("1?", "1u", ":2"));
    netlist(many("2**", "1u", ""));
    netlist(many("1+", "1u", ""));
    let rule = |open: &str, close: &str| {
        let require = open.repeat(10_000) + "true" + &close.repeat(10_000);
        deck(&format!("{DECK}rules:\n  deep: {{for: device, require: \"{require}\", say: \"deep\"}}\n"))
    };
    refused(&rule("(", ")"), 6, "brackets");
    rule("not ", "");
}

#[test]
fn ten_thousand_parameters_in_a_chain_and_in_a_ring() {
    let cards = |last: &str| {
        let chain: String = (0..10_000).map(|at| format!(".param p{at}={{p{}}}\n", at + 1)).collect();
        format!("* block\n{chain}.param p10000={last}\nM1 COIL GATE 0 0 ldn60 w={{p0*1u}} l=1u\n")
    };
    assert!(!netlist(cards("20")).could_not);
    let ring = netlist(cards("p0"));
    assert!(ring.could_not);
    assert!(ring.report.diagnostics.iter().any(|one| one.message.contains("depends on itself")));
}

// ---- hierarchy

#[test]
fn cells_that_contain_themselves() {
    refused(&netlist(format!("* block\n{SOUND}.subckt a x\nX1 x a\n.ends\nX1 COIL a\n")), 4, "contains itself");
    let ring: String = (0..5_000).map(|at| format!(".subckt c{at} x\nX1 x c{}\n.ends\n", (at + 1) % 5_000)).collect();
    let outcome = netlist(format!("* block\n{SOUND}{ring}X1 COIL c0\n"));
    assert!(outcome.could_not);
}

fn levels(count: usize) -> String {
    let cells: String =
        (0..count).map(|at| format!(".subckt c{at} d g\nX1 d g c{}\nR1 n{at} g 1k\n.ends\n", at + 1)).collect();
    let last = format!(".subckt c{count} d g\nM1 d g 0 0 ldn60 w=20u l=0.6u\n.ends\n");
    format!("* block\n{cells}{last}X1 COIL GATE c0\n")
}

#[test]
fn levels_of_instances_are_bounded_and_the_bound_is_named() {
    let outcome = netlist(levels(350));
    assert!(!outcome.could_not);
    assert_eq!(outcome.report.summary.high_voltage_devices, 1);
    let outcome = netlist(levels(5_000));
    assert!(outcome.could_not);
    let named = outcome.report.diagnostics.iter().any(|diagnostic| diagnostic.message.contains("400 deep"));
    assert!(named, "{:?}", outcome.report.diagnostics);
}

#[test]
fn five_thousand_definitions_and_conditions_inside_one_another() {
    let opened: String = (0..5_000).map(|at| format!(".subckt c{at} x\n")).collect();
    assert!(netlist(format!("* block\n{SOUND}{opened}R1 x 0 1k\n{}", ".ends\n".repeat(5_000))).could_not);
    let outcome = netlist(format!("* block\n{}{SOUND}{}", ".if (1)\n".repeat(5_000), ".endif\n".repeat(5_000)));
    assert!(outcome.could_not);
}

#[test]
fn includes_that_loop() {
    let own = Memory::new().with("block.sp", format!("* block\n{SOUND}.include block.sp\n"));
    refused(&run(own, DECK), 3, "includes itself");
    let two = Memory::new()
        .with("block.sp", format!("* block\n{SOUND}.include \"b.sp\"\n"))
        .with("b.sp", "* b\n.include 'c.sp'\n")
        .with("c.sp", "* c\n\n.inc block.sp\n");
    refused(&run(two, DECK), 3, "includes itself");
}

// ---- work that grows faster than the file

/// Runs the program itself on a netlist and ends it after [`LIMIT`]: a loop without end must fail a test, not hang it.
fn bounded(text: &str) -> i32 {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("block.sp"), text).unwrap();
    fs::write(folder.path().join("deck.yaml"), DECK).unwrap();
    let mut command = Command::new(env!("CARGO_BIN_EXE_drainwise"));
    command.args(["lint", "block.sp", "--deck", "deck.yaml", "--format", "short"]).current_dir(folder.path());
    let mut child = command.stdout(Stdio::null()).stderr(Stdio::null()).spawn().unwrap();
    let began = Instant::now();
    loop {
        if let Some(status) = child.try_wait().unwrap() {
            return status.code().expect("ended by a signal");
        }
        if began.elapsed() > LIMIT {
            child.kill().unwrap();
            child.wait().unwrap();
            panic!("not done after {LIMIT:?}");
        }
        sleep(Duration::from_millis(10));
    }
}

#[test]
fn two_calls_a_level_are_not_twice_the_work_a_level() {
    let cells: String =
        (0..60).map(|at| format!(".subckt c{at} d g\nX1 d g c{n}\nX2 d g c{n}\n.ends\n", n = at + 1)).collect();
    let last = ".subckt c60 d g\nM1 d g 0 0 ldn60 w=20u l=0.6u\n.ends\n";
    assert_eq!(bounded(&format!("* block\n{cells}{last}X1 COIL GATE c0\n")), 0);
}

#[test]
fn functions_that_call_twice_or_themselves() {
    let functions: String = (0..39).map(|at| format!(".func f{at}(x) {{f{n}(x)+f{n}(x)}}\n", n = at + 1)).collect();
    let use_it = ".param a={f0(1)}\nM1 COIL GATE 0 0 ldn60 w={a} l=1u\n";
    bounded(&format!("* block\n{SOUND}{functions}.func f39(x) {{x}}\n{use_it}"));
    assert_eq!(bounded(&format!("* block\n{SOUND}.func f0(x) {{f0(x)+f0(x)}}\n{use_it}")), 2);
}

#[test]
fn many_unknown_names_among_many_known_ones() {
    let models: String =
        (0..5_000).map(|at| format!(".subckt cell{at} a\nR1 a 0 1\n.ends\nX{at} a cel{at}x\n")).collect();
    bounded(&format!("* block\n{SOUND}{models}"));
    let params: String = (0..5_000)
        .map(|at| format!(".param known{at}=1\nM{at} COIL GATE 0 0 ldn60 w={{unknown{at}}} l=1u\n"))
        .collect();
    bounded(&format!("* block\n{SOUND}{params}"));
}

#[test]
fn rails_with_thousands_of_devices_between_them() {
    let devices: String =
        (0..20_000).map(|at| format!("M{at} n{at} n{} 0 0 ldn60 w=1u l=1u\nR{at} n{at} COIL 1k\n", at + 1)).collect();
    assert!(bounded(&format!("* block\n{devices}R0x n20000 GATE 1k\n")) < 2);
}

// ---- decks

#[test]
fn alias_bombs_and_deep_yaml() {
    let bomb: String =
        (1..20).map(|at| format!("a{at}: &a{at} [{}]\n", vec![format!("*a{}", at - 1); 9].join(", "))).collect();
    assert!(deck(&format!("a0: &a0 [x, x, x]\n{bomb}rails: *a19\n")).could_not);
    assert!(deck(&format!("rails: {}{}\n", "[".repeat(100_000), "]".repeat(100_000))).could_not);
    assert!(deck(&format!("rails: {}1{}\n", "{a: ".repeat(10_000), "}".repeat(10_000))).could_not);
    refused(&deck("use: [deck.yaml]\n"), 1, "circle");
    refused(&deck("rails: {A: 0V .. B, B: 0V .. A}\n"), 1, "ring");
    assert!(deck("\0\0\0").could_not);
}

// ---- names

#[test]
fn terminal_escapes_are_never_sent() {
    let outcome = run(
        Memory::new().with(
            "block.sp",
            "* block\nM\u{1b}[31m1 COIL GATE \u{1b}]0;x\u{7} 0 ldn\u{1b}[2J w=1u l=1u\nX1 a\u{9b}31m b \u{1b}c\n\
             M2 COIL GATE 0 0 ldn60 w={k\u{1b}[7m} l=1u\n.include \"\u{1b}[31mx\"\n.par\u{1b}am x=1\n.subckt s\u{1b} a\n",
        ),
        DECK,
    );
    assert!(outcome.report.diagnostics.len() > 3);
    let [plain, line, data, ..] = written(&outcome);
    for report in [&plain, &line, &data] {
        let sent = report.chars().find(|&c| c.is_control() && c != '\n' && c != '\t');
        // JSON may write a C1 control as it is inside a string; the escape that starts a sequence it must not
        let sent = sent.filter(|&c| !(std::ptr::eq(report, &data) && ('\u{80}'..'\u{a0}').contains(&c)));
        assert_eq!(sent, None, "{report:?}");
    }
    let bad_deck = deck("rails: {\"A\\e[31m\": 7\u{1b}[31m}\nru\u{1b}les: 1\n");
    let [plain, line, ..] = written(&bad_deck);
    assert!(!plain.contains('\u{1b}') && !line.contains('\u{1b}'));
}

// ---- random lines

/// Pieces that netlists are made of, and some that they should not be.
fn piece() -> impl Strategy<Value = String> {
    let known = prop::sample::select(vec![
        "M1",
        "M2",
        "X1",
        "X2",
        "R1",
        "C1",
        "V1",
        "Q1",
        "D1",
        "E1",
        "B1",
        "K1",
        "COIL",
        "GATE",
        "0",
        "n1",
        "cella",
        "cellb",
        "ldn60",
        "nx",
        ".subckt",
        ".ends",
        ".param",
        ".model",
        ".include",
        ".lib",
        ".endl",
        ".if",
        ".elseif",
        ".else",
        ".endif",
        ".global",
        ".option",
        ".func",
        ".end",
        ".control",
        ".endc",
        "+",
        "*",
        "$",
        ";",
        "//",
        "w=1u",
        "l={",
        "}",
        "'",
        "\"",
        "(",
        ")",
        "=",
        ",",
        "m=2",
        "w={a*2}",
        "a=3",
        "b={a}",
        "scale=1u",
        "params:",
        "/",
        "5",
        "1k",
        "1meg",
        "-3",
        "nmos",
        "µ",
        "é",
        "\u{1b}[0m",
        "$[nx]",
        "$SUB=0",
        "**.subckt",
        "*.PININFO",
        "*.MEGA",
        "block.sp",
        "dc",
        "pulse(0",
        "sin(0 1 1k)",
        "&&",
        "?",
        ":",
        "**",
        "r='a+b'",
    ]);
    prop_oneof![8 => known.prop_map(str::to_owned), 1 => "[ -~µ€\\t]{0,8}"]
}

fn soup() -> impl Strategy<Value = String> {
    let gap = prop::sample::select(vec![" ", " ", " ", "", "\t", "\n+ ", "\r\n"]);
    let line = prop::collection::vec((piece(), gap), 0..9)
        .prop_map(|pieces| pieces.into_iter().map(|(piece, gap)| piece + gap).collect::<String>());
    let card = prop::sample::select(vec![
        "M1 COIL GATE 0 0 ldn60 w=2u l=1u",
        "M2 n1 GATE n2 0 ldn60 w={a} l=1u m=2",
        "X1 COIL n1 cella",
        "X2 n1 n2 cellb a=4",
        ".subckt cella p q",
        ".subckt cellb p q a=1",
        ".ends",
        "R1 p q {a}",
        "R2 n1 0 0",
        "V1 n2 0 5",
        ".param a=2 b={a*2}",
        ".if (a==2)",
        ".else",
        ".endif",
        ".global COIL",
        ".model nx nmos level=1",
        ".include block.sp",
        "C1 n1 q 1p",
        "D1 n1 n2 dx",
        ".lib block.sp tt",
        ".endl",
        ".func f(x) {x*a}",
        "M3 n1 n1 n1 0 ldn60 w={f(2)*1u}",
        ".option scale=1u",
        "E1 n2 0 n1 0 2",
    ]);
    prop::collection::vec(prop_oneof![3 => card.prop_map(str::to_owned), 2 => line], 0..25)
        .prop_map(|lines| lines.join("\n"))
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 400, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn random_lines_never_panic_and_the_same_input_gives_the_same_bytes(text in soup()) {
        let first = written(&netlist(text.clone()));
        let second = written(&netlist(text));
        prop_assert_eq!(first, second);
    }

    #[test]
    fn random_lines_in_a_deck_never_panic(lines in prop::collection::vec(deck_line(), 0..15)) {
        let text = lines.join("\n");
        let first = written(&deck(&text));
        prop_assert_eq!(first, written(&deck(&text)));
    }
}

/// Lines that decks are made of, shuffled.
fn deck_line() -> impl Strategy<Value = String> {
    let known = prop::sample::select(vec![
        "use: [builtin:ldmos]",
        "use: builtin:sky130",
        "classes:",
        "  ldn60:",
        "    kind: nmos",
        "    pins: [d, g, s, b]",
        "    pins: [d, d]",
        "    ratings: {vds: -0.5V..60V}",
        "    ratings: {vxs: 1A}",
        "    size: {width: w*(, length: l}",
        "    body: {tie: s}",
        "rails:",
        "  COIL: 0V..48V",
        "  GATE: COIL .. COIL + 5V",
        "  \"*\": 1V",
        "  COIL: net(\"µ\")",
        "modes:",
        "  on: {GATE: 5V}",
        "  off: {GATE: }",
        "rules:",
        "  finger-count: {severity: silent}",
        "  mine:",
        "    for: device",
        "    where: has(body_held)",
        "    require: width > 3um",
        "    require: width > 3V",
        "    say: \"{name} {width} {\"",
        "waivers:",
        "  - {rule: over-rating, at: \"**\", reason: x, until: 2027-01-01}",
        "  - {rule: nope, at: 3}",
        "top: block",
        "top: [",
        "includes: {roots: [..], skip: [\"*\"]}",
        "netlists: [block.sp]",
        "transitions:",
        "  - {from: on, to: off, takes: 5ns}",
        "currents: {into: {COIL: 2uA}}",
        "&a *a",
        "? x",
        "%TAG",
        "---",
        "...",
        "\t",
        "µ: é",
    ]);
    prop_oneof![9 => known.prop_map(str::to_owned), 1 => "[ -~µ]{0,20}"]
}
