//! The schema of decks for editors: fresh, a sound JSON Schema of draft 7, and of one mind with the checker.
//!
//! `DRAINWISE_BLESS=1 cargo test --test schema` writes it anew.
#![allow(clippy::unwrap_used, clippy::panic, reason = "a test that cannot go on must stop")]

use drainwise::deck::builtin;
use drainwise::deck::keys::{Holds, Key, Named, SECTIONS, Section};
use drainwise::deck::pages::PAGES;
use drainwise::deck::schema::schema;
use drainwise::load::Memory;
use drainwise::pipeline::{Job, Outcome, read_decks};
use serde_json::Value;
use std::fs;
use std::path::{Path, PathBuf};

const HERE: &str = env!("CARGO_MANIFEST_DIR");

fn made() -> String {
    let (deck, outcome) = read_decks(&Memory::new(), &Job { decks: vec!["builtin:ldmos".into()], ..Job::default() });
    assert!(!outcome.could_not, "{:?}", outcome.report.diagnostics);
    schema(&deck.rules)
}

fn parsed() -> Value {
    serde_json::from_str(&made()).unwrap()
}

/// What a YAML editor makes of a text.
fn yaml(text: &str) -> Value {
    serde_saphyr::from_str(text).unwrap_or_else(|error| panic!("{error}\n{text}"))
}

/// What is wrong with a text by a schema.
fn wrong(schema: &Value, text: &str) -> Vec<String> {
    let validator = jsonschema::draft7::new(schema).unwrap();
    validator.iter_errors(&yaml(text)).map(|error| format!("{} at {}", error, error.instance_path())).collect()
}

/// What the checker says to a deck.
fn checked(text: &str) -> Outcome {
    let files = Memory::new().with("deck.yaml", text);
    read_decks(&files, &Job { decks: vec!["deck.yaml".into()], ..Job::default() }).1
}

#[test]
fn the_schema_is_fresh_and_sound() {
    let path = Path::new(HERE).join("rules").join(drainwise::deck::schema::FILE);
    if std::env::var_os("DRAINWISE_BLESS").is_some() {
        fs::write(&path, made()).unwrap();
    }
    let fresh = fs::read_to_string(path).is_ok_and(|there| there == made());
    assert!(fresh, "the schema in rules/ is stale: run DRAINWISE_BLESS=1 cargo test --test schema");
    assert!(jsonschema::draft7::meta::is_valid(&parsed()));
}

fn decks_below(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        if path.is_dir() {
            decks_below(&path, found);
        } else if path.extension().is_some_and(|ending| ending == "yaml") {
            found.push(path);
        }
    }
}

#[test]
fn every_deck_of_the_repository_is_sound_by_it() {
    let schema = parsed();
    let mut decks = Vec::new();
    decks_below(&Path::new(HERE).join("fixtures"), &mut decks);
    decks_below(&Path::new(HERE).join("rules/decks"), &mut decks);
    assert!(decks.len() > 20, "{decks:?}");
    for deck in decks {
        let found = wrong(&schema, &fs::read_to_string(&deck).unwrap());
        assert!(found.is_empty(), "{}: {found:#?}", deck.display());
    }
    for page in fs::read_to_string(Path::new(HERE).join("README.md")).unwrap().split("```yaml\n").skip(1) {
        let found = wrong(&schema, page.split("```").next().unwrap());
        assert!(found.is_empty(), "README.md: {found:#?}");
    }
}

#[test]
fn every_rule_page_and_its_deck_are_sound_by_it() {
    let schema = parsed();
    let mut rule = schema.clone();
    for key in ["properties", "additionalProperties", "type"] {
        rule.as_object_mut().unwrap().remove(key);
    }
    rule["$ref"] = "#/definitions/rule".into();
    for page in PAGES {
        let found = wrong(&rule, page.text);
        assert!(found.is_empty(), "{}: {found:#?}", page.id);
        let deck = yaml(page.text)["examples"]["deck"].as_str().unwrap_or_default().to_owned();
        let found = wrong(&schema, &deck);
        assert!(found.is_empty(), "deck of {}: {found:#?}", page.id);
    }
}

/// A deck in which `value` stands at a key, with all that must stand around it.
fn deck_with(section: &Section, key: &Key, value: &str) -> String {
    let name = key.name;
    let base = "use: [builtin:ldmos]\n";
    let modes = "modes: {fill: {SW: 0V}, hold: {SW: 5V}}\n";
    let class = |more: &str| {
        let pins = if more.starts_with("pins:") { "" } else { "pins: [d, g, s, b, iso, a, k], " };
        format!("{base}classes: {{x: {{kind: nmos, {pins}{more}}}}}\n")
    };
    let beside = |others: &[(&str, &str)]| {
        let others = others.iter().filter(|(other, _)| *other != name);
        others.map(|(other, value)| format!("{other}: {value}, ")).collect::<String>()
    };
    match section.name.replace('`', "").rsplit(' ').next().unwrap() {
        "deck" if name == "use" => format!("use: {value}\n"),
        "deck" => format!("{base}{name}: {value}\n"),
        "includes" | "currents" => format!("{base}{}: {{{name}: {value}}}\n", section.name.replace('`', "")),
        "class" if name == "kind" => format!("{base}classes: {{x: {{kind: {value}}}}}\n"),
        "class" => class(&format!("{name}: {value}")),
        "on_state" => class(&format!("on_state: {{{}{name}: {value}}}", beside(&[("vds", "12V")]))),
        part @ ("size" | "fingers" | "body" | "drift") => class(&format!("{part}: {{{name}: {value}}}")),
        "transition" => {
            let others = beside(&[("from", "fill"), ("to", "hold"), ("takes", "5ns"), ("rate", "1kHz")]);
            format!("{base}{modes}transitions: [{{{others}{name}: {value}}}]\n")
        }
        "rule" => {
            let others = beside(&[("for", "device"), ("require", "'true'"), ("say", "no")]);
            format!("{base}rules: {{new-one: {{{others}{name}: {value}}}}}\n")
        }
        "examples" => {
            let others = beside(&[("fires", "a"), ("quiet", "b")]);
            let rule = format!("for: device, require: 'true', say: no, examples: {{{others}{name}: {value}}}");
            format!("{base}rules: {{new-one: {{{rule}}}}}\n")
        }
        "waiver" => {
            let others = beside(&[("rule", "finger-count"), ("at", "m1"), ("reason", "seen")]);
            format!("{base}waivers: [{{{others}{name}: {value}}}]\n")
        }
        other => panic!("how does `{other}` stand in a deck?"),
    }
}

/// Values that may stand at a key, and such as may not, by what it holds.
fn samples(section: &Section, key: &Key) -> (Vec<String>, Vec<&'static str>) {
    let own = |values: &[&str]| values.iter().map(|value| (*value).to_owned()).collect::<Vec<_>>();
    let no_text = vec!["[a, b]", "{a: b}"];
    let quantity = |dim: drainwise::quantity::Dim| {
        use drainwise::quantity::Dim;
        let known = [
            (Dim::VOLT, "5.5V"),
            (Dim::AMPERE, "10uA"),
            (Dim::METRE, "0.5 um"),
            (Dim::SECOND, "5ns"),
            (Dim::HERTZ, "2MHz"),
            (Dim::WATT, ".5W"),
            (Dim::DENSITY, "3uA/um"),
            (Dim::DOPING, "1e16/cm3"),
        ];
        known.iter().find(|(of, _)| *of == dim).unwrap().1
    };
    match key.holds {
        Holds::Text => match (section.name, key.name) {
            ("a transition", "from") => (own(&["fill"]), no_text),
            ("a transition", "to") => (own(&["hold"]), no_text),
            ("a waiver", "rule") => (own(&["finger-count"]), no_text),
            _ => (own(&["some text", "5", "true", "'5'"]), no_text),
        },
        Holds::Texts if key.name == "use" => {
            (own(&["builtin:ldmos", "[builtin:ldmos]", "[]"]), vec!["{a: b}", "[{a: b}]"])
        }
        Holds::Texts if key.name == "pins" => (own(&["[d, g, s]", "[d, g, s, b, 5]"]), vec!["{a: b}", "[[d], g, s]"]),
        Holds::Texts => (own(&["s", "[s, VDD]", "[s, 5]"]), vec!["{a: b}", "[{a: b}]"]),
        Holds::Truth => (own(&["true", "false", "'true'"]), vec!["1", "maybe", "[true]", "{a: true}"]),
        Holds::Count => (own(&["1", "2", "'2'"]), vec!["0", "-1", "1.5", "two", "[1]"]),
        Holds::Number => (own(&["1", "0.5u"]), vec!["[1]"]),
        Holds::Unit => (own(&["um", "1um", "nm", "m"]), vec!["1", "V", "[um]"]),
        Holds::Day => (own(&["2027-03-01"]), vec!["1st of March", "2027", "[2027-03-01]"]),
        Holds::Word(words) => {
            let words = words().into_iter().filter(|word| !["run", "box"].contains(word));
            (words.map(str::to_owned).collect(), vec!["other", "1", "[nmos]"])
        }
        Holds::Quantity(wanted) if wanted.dim == drainwise::quantity::Dim::NONE => {
            (own(&["1%", "0.5", "'0.5'", "100 ppm"]), vec!["0", "-1", "some", "[1]"])
        }
        Holds::Quantity(wanted) => {
            let value = quantity(wanted.dim);
            (vec![value.to_owned(), format!("' +{value} '")], vec!["5", "'5'", "-3V", "much", "[5V]"])
        }
        Holds::Range(wanted) => {
            let value = quantity(wanted.dim);
            let sound = [format!("{value}..{value}"), format!("'{value} .. {value}'"), format!("-{value}..{value}")];
            let open = [format!("{value}.."), format!("..{value}"), value.to_owned()];
            (sound.into_iter().chain(open).collect(), vec!["5", "0.6..1.1", "..", "0.6..5V", "low", "[1V, 2V]"])
        }
        Holds::Expression => (own(&["w * nf", "2", "'max(m, 1)'"]), no_text),
        Holds::Condition => (own(&["fingers >= 2", "true"]), vec!["5", "[true]"]),
        Holds::Message => (own(&["'{name} is wrong'", "5"]), no_text),
        Holds::Part(&Section { name: "`on_state`", .. }) => {
            (own(&["{vds: 5V}", "{}"]), vec!["5", "[5]", "{unheard_of: 1}"])
        }
        Holds::Part(&Section { name: "`examples`", .. }) => {
            (own(&["{fires: a, quiet: b}"]), vec!["5", "[5]", "{unheard_of: 1, fires: a, quiet: b}"])
        }
        Holds::Part(_) => (own(&["{}"]), vec!["5", "[5]", "{unheard_of: 1}"]),
        Holds::List(_) => (own(&["[]"]), vec!["5", "{a: b}", "[5]", "[{}]"]),
        Holds::Map(named, below) => in_maps(named, below),
        Holds::Rail => panic!("no key holds a rail"),
    }
}

fn in_maps(named: Named, below: &Holds) -> (Vec<String>, Vec<&'static str>) {
    let own = |values: &[&str]| values.iter().map(|value| (*value).to_owned()).collect::<Vec<_>>();
    match (named, below) {
        (Named::Class, _) => (own(&["{x: {kind: nmos}}", "{}"]), vec!["[x]", "{x: 5}", "{x: {kind: nmos, colour: 1}}"]),
        (Named::Net, Holds::Rail) => (
            own(&["{A: 0V..5V, B: A .. A + 1V, OFF: 0, 5: 5V, 'S<1>': NO}"]),
            vec!["[A]", "{A: [5V]}", "{A: 5}", "{A: {B: 5V}}"],
        ),
        (Named::Mode, _) => (own(&["{on: {A: 5V}}"]), vec!["[on]", "{on: 5V}", "{on: {A: 5}}"]),
        (Named::Rule, _) => (
            own(&["{finger-count: {severity: note}}", "{finger-count: {}}"]),
            vec!["[finger-count]", "{finger-count: note}", "{finger-count: {severity: loud}}"],
        ),
        (Named::Pair, _) => {
            (own(&["{vds: -1V..5V, 'v(iso, s)': ..5V}"]), vec!["[vds]", "{vds: 5}", "{ds: 1V..5V}", "{vdsx: 1V..5V}"])
        }
        (Named::Pin, _) => (own(&["{iso: [d, VIN]}", "{iso: d}"]), vec!["[iso]", "{iso: {d: 1}}"]),
        (Named::Parameter, _) => (own(&["{nf: 1, w: 0.5u}"]), vec!["[nf]", "{nf: [1]}"]),
        (Named::Net | Named::Path, _) => (own(&["{a: 2uA, b: 1uA..2uA}"]), vec!["[a]", "{a: 2}", "{a: [2uA]}"]),
        (Named::Place, _) => (own(&["{name: here}"]), vec!["[name]", "{name: [a]}"]),
    }
}

/// The table's word on each key is the checker's: what may stand there loads and is sound by the schema, and what may not is
/// refused by both.
#[test]
fn schema_and_checker_agree_on_every_key() {
    let schema = parsed();
    let (mut tried, mut amiss) = (0, Vec::new());
    for (section, key) in SECTIONS.iter().flat_map(|section| section.keys.iter().map(move |key| (section, key))) {
        let (sound, faulty) = samples(section, key);
        for (value, is_sound) in
            sound.iter().map(|value| (value.as_str(), true)).chain(faulty.iter().map(|value| (*value, false)))
        {
            let deck = deck_with(section, key, value);
            let by_schema = wrong(&schema, &deck);
            if by_schema.is_empty() != is_sound {
                amiss.push(format!("by the schema: {deck}{by_schema:#?}"));
            }
            let by_checker = checked(&deck);
            if by_checker.could_not == is_sound {
                amiss.push(format!("by the checker: {deck}{:#?}", by_checker.report.diagnostics));
            }
            tried += 1;
        }
    }
    assert!(amiss.is_empty(), "{}", amiss.join("\n"));
    assert!(tried > 250, "{tried}");
}

#[test]
fn unknown_keys_and_missing_ones_are_refused() {
    let schema = parsed();
    for deck in [
        "rail: {VSS: 0V}",
        "waivers: [{rule: finger-count, at: m1}]",
        "waivers: [{rule: finger-count, at: m1, reason: }]",
        "modes: {a: {}, b: {}}\ntransitions: [{from: a, to: b, takes: 5ns}]",
        "classes: {x: {kind: nmos, size: {widht: w}}}",
    ] {
        assert!(!wrong(&schema, deck).is_empty() && checked(deck).could_not, "{deck}");
    }
    for deck in ["", "rails:\nclasses:\n", "use: builtin:ldmos\nwaivers:\n"] {
        let deck = format!("{deck}top: 5\n");
        assert!(wrong(&schema, &deck).is_empty() && !checked(&deck).could_not, "{deck}");
    }
}

#[test]
fn the_decks_inside_the_program_are_those_looked_at() {
    for name in drainwise::deck::builtin_names() {
        let path = Path::new(HERE).join(format!("rules/decks/{name}.yaml"));
        assert_eq!(Some(fs::read_to_string(path).unwrap().as_str()), builtin(name));
    }
}
