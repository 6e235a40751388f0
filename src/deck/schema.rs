//! What `drainwise schema` prints: a JSON Schema (draft 7) of decks, for editors that check and complete YAML by one.
//!
//! It is made from the table of keys that the deck checker reads. It refuses nothing that the checker takes: what it cannot
//! say (nets, pins and names in expressions) is left to the checker.

use super::builtin_names;
use super::keys::{DECK, Holds, Key, Named, SECTIONS, Section, Wanted};
use crate::declared::Rule;
use crate::quantity::Dim;
use serde_json::{Map, Value, json};

/// The name of the file that decks written by `init` point at.
pub const FILE: &str = "drainwise.schema.json";

/// A number as a quantity begins with it.
const NUMBER: &str = r"(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?";
/// What follows the number, where a unit must.
const UNIT: &str = r"\s*[^\d\s.+-][^.]*";

/// The schema as text. The ids of `rules` are offered by name.
pub fn schema(rules: &[Rule]) -> String {
    let definitions: Map<String, Value> =
        SECTIONS.iter().skip(1).map(|section| (name(section), of_section(section, rules))).collect();
    let mut whole = json!({
        "$schema": "http://json-schema.org/draft-07/schema#",
        "title": "Deck of Drainwise",
        "description": "Classes, rails, modes, currents, rules and waivers for checking a netlist",
        "definitions": definitions,
    });
    if let (Some(whole), Value::Object(deck)) = (whole.as_object_mut(), of_section(&DECK, rules)) {
        whole.extend(deck);
    }
    format!("{whole:#}\n")
}

/// What a section is called among the definitions: the last word of its name.
fn name(section: &Section) -> String {
    section.name.rsplit(' ').next().unwrap_or_default().replace('`', "")
}

fn of_section(section: &Section, rules: &[Rule]) -> Value {
    let properties: Map<String, Value> =
        section.keys.iter().map(|key| (key.name.to_owned(), of_key(section, key, rules))).collect();
    // Where nothing is written after a key, it is as if the key were not there; a map that is needed is not left out.
    let kinds = if section.needs.is_empty() { json!(["object", "null"]) } else { json!("object") };
    let mut value = json!({"type": kinds, "properties": properties, "additionalProperties": false});
    if !section.needs.is_empty() {
        value["required"] = json!(section.needs);
    }
    value
}

fn of_key(section: &Section, key: &Key, rules: &[Rule]) -> Value {
    let mut value = of_value(key.holds, rules);
    if section.needs.contains(&key.name) {
        without_null(&mut value);
    }
    let doc = format!("{} ({})", key.doc, key.holds.in_words().replace('`', ""));
    if value.get("$ref").is_some() {
        // Draft 7 reads nothing beside a reference.
        value = json!({"allOf": [value]});
    }
    value["description"] = doc.into();
    if section.name == DECK.name && key.name == "use" {
        value["examples"] = builtin_names().map(|name| vec![format!("builtin:{name}")]).collect();
    }
    value
}

fn without_null(value: &mut Value) {
    if let Some(Value::Array(kinds)) = value.get_mut("type") {
        kinds.retain(|kind| kind != "null");
    }
}

/// Every scalar is text as written, whatever YAML takes it for.
fn scalar() -> Value {
    json!({"type": ["string", "number", "boolean", "null"]})
}

fn of_value(holds: Holds, rules: &[Rule]) -> Value {
    match holds {
        Holds::Text | Holds::Expression | Holds::Message | Holds::Number => scalar(),
        Holds::Texts => json!({
            "type": ["string", "number", "boolean", "array", "null"],
            "items": {"type": ["string", "number", "boolean", "null"]},
        }),
        Holds::Truth => json!({"enum": [true, false, "true", "false", null]}),
        Holds::Count => written(
            json!({"type": ["integer", "string", "null"], "minimum": 1}),
            r"^\+?0*[1-9]\d*$",
            "a whole number from 1",
        ),
        Holds::Unit => written(json!({"type": ["string", "null"]}), r"m\s*$", "um, nm or m"),
        Holds::Day => written(json!({"type": ["string", "null"]}), r"^\d{4}-\d{2}-\d{2}$", "a day as 2027-03-01"),
        Holds::Word(words) => {
            let words: Vec<Value> = words().into_iter().map(Value::from).chain([Value::Null]).collect();
            json!({"enum": words})
        }
        Holds::Quantity(wanted) if wanted.dim == Dim::NONE => {
            let kinds = json!({"type": ["string", "number", "null"], "exclusiveMinimum": 0});
            written(kinds, &format!(r"^\s*\+?{NUMBER}({UNIT})?\s*$"), &such_as(wanted))
        }
        Holds::Quantity(wanted) => {
            written(json!({"type": ["string", "null"]}), &format!(r"^\s*\+?{NUMBER}{UNIT}$"), &such_as(wanted))
        }
        Holds::Range(wanted) => {
            let end = format!(r"\s*[+-]?{NUMBER}{UNIT}");
            let pattern = format!(r"^({end}|{end}\s*\.\.({end})?|\s*\.\.{end})\s*$");
            let words = format!("{}, or a range `a..b` of two", such_as(wanted));
            written(json!({"type": ["string", "null"]}), &pattern, &words)
        }
        // Of bare numbers, 0 alone is a voltage.
        Holds::Rail => json!({"type": ["string", "number", "boolean", "null"], "minimum": 0, "maximum": 0}),
        Holds::Condition => json!({"type": ["string", "boolean", "null"]}),
        Holds::Part(section) => json!({"$ref": format!("#/definitions/{}", name(section))}),
        Holds::List(section) => json!({
            "type": ["array", "null"],
            "items": {"$ref": format!("#/definitions/{}", name(section))},
        }),
        Holds::Map(named, below) => of_map(named, of_value(*below, rules), rules),
    }
}

/// A scalar that is written in a certain way. That editors show words instead of the pattern is a convention of theirs.
fn written(mut kinds: Value, pattern: &str, words: &str) -> Value {
    kinds["pattern"] = pattern.into();
    kinds["patternErrorMessage"] = format!("{words} is needed here").into();
    kinds
}

/// A kind of quantity with an example.
fn such_as(wanted: Wanted) -> String {
    format!("{} such as {}", wanted.words, wanted.example)
}

fn of_map(named: Named, below: Value, rules: &[Rule]) -> Value {
    let mut map = json!({"type": ["object", "null"]});
    match named {
        Named::Rule => {
            let known = |rule: &Rule| (rule.id.clone(), json!({"allOf": [below], "description": rule.title}));
            map["properties"] = rules.iter().map(known).collect();
            map["propertyNames"] = json!({"pattern": "^[a-z0-9-]+$"});
        }
        Named::Pair => map["propertyNames"] = json!({"pattern": r"^[vV]([A-Za-z]{2}|\s*\(.*,.*\)\s*)$"}),
        _ => {}
    }
    map["additionalProperties"] = below;
    map
}
