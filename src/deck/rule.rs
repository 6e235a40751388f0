//! Rules: the program's own pages, changed by decks, and rules that teams write.

use super::class::is_cleared;
use super::keys::{EXAMPLES, RULE, SEVERITIES};
use super::node::{Entry, Node, Shape};
use super::pages;
use super::value::{Checker, Fields};
use crate::declared::{Class, Examples, Rule, Subject};
use crate::diag::Severity;
use crate::expr::{Template, Vocabulary};

/// The words that rules about a subject may use.
pub type Vocabularies<'a> = &'a dyn Fn(Subject) -> &'a dyn Vocabulary;

/// The rules of a map, ordered by id. A rule that was cleared is left out.
pub(crate) fn rules(checker: &mut Checker, node: &Node, classes: &[Class], vocabularies: Vocabularies) -> Vec<Rule> {
    let entries = checker.map(node, "a list of rules");
    let in_force: Vec<&Entry> = entries.iter().filter(|entry| !is_cleared(&entry.value)).collect();
    let whole: Vec<&str> =
        in_force.iter().filter(|entry| has_subject(&entry.value)).map(|entry| entry.key.as_str()).collect();
    let mut rules: Vec<Rule> =
        in_force.iter().filter_map(|entry| rule(checker, entry, &whole, classes, vocabularies)).collect();
    rules.sort_by(|a, b| a.id.cmp(&b.id));
    rules
}

fn has_subject(node: &Node) -> bool {
    matches!(&node.shape, Shape::Map(entries) if entries.iter().any(|entry| entry.key == "for"))
}

fn rule(
    checker: &mut Checker,
    entry: &Entry,
    whole: &[&str],
    classes: &[Class],
    vocabularies: Vocabularies,
) -> Option<Rule> {
    let id = entry.key.as_str();
    let fields = checker.fields(&entry.value, &RULE);
    if !matches!(entry.value.shape, Shape::Map(_)) {
        return None;
    }
    let Some(subject) = fields.get("for") else {
        let message = format!("there is no rule `{id}` to change, and a new one needs `for`, `require` and `say`");
        checker.unknown(entry.place, message, id, whole.iter().copied());
        return None;
    };
    well_named(checker, entry)?;
    let subject = checker.word(subject, "subject of rules", &Subject::ALL.map(|(subject, word)| (subject, word)))?;
    let own = pages::page(id).is_some();
    if subject == Subject::Run && !own {
        checker.error(entry.place, "a rule about the run is found by the program itself: a new one cannot be written");
        return None;
    }
    let words = vocabularies(subject);
    let before = checker.complaints.len();
    let needed: &[&str] = if subject == Subject::Run { &["say"] } else { &["require", "say"] };
    for key in needed.iter().filter(|key| fields.get(key).is_none()) {
        checker.error(entry.place, format!("rule `{id}` lacks `{key}`"));
    }
    let template = |checker: &mut Checker, key: &str| fields.get(key).and_then(|node| checker.template(node, words));
    let applies = fields.get("where").and_then(|node| checker.condition(node, words));
    let require = fields.get("require").and_then(|node| checker.condition(node, words));
    let severity = severity(checker, &fields, "severity", Severity::Error);
    let unproven = self::severity(checker, &fields, "unproven", severity.min(Severity::Note));
    let say = template(checker, "say");
    text(checker, &fields, "id");
    let rule = Rule {
        id: id.to_string(),
        place: entry.place,
        subject,
        applies,
        require,
        severity,
        unproven,
        title: text(checker, &fields, "title").unwrap_or_else(|| id.replace('-', " ")),
        say: say?,
        say_unproven: template(checker, "say_unproven"),
        point: fields.get("point").map(|node| points(checker, node, subject, classes, words)).unwrap_or_default(),
        help: template(checker, "help"),
        settle: template(checker, "settle"),
        why: text(checker, &fields, "why").unwrap_or_default(),
        cite: text(checker, &fields, "cite"),
        examples: fields.get("examples").and_then(|node| examples(checker, node)),
    };
    (checker.complaints.len() == before).then_some(rule)
}

fn well_named(checker: &mut Checker, entry: &Entry) -> Option<()> {
    let plain = |byte: u8| byte.is_ascii_lowercase() || byte.is_ascii_digit() || byte == b'-';
    if entry.key.bytes().all(plain) && !entry.key.is_empty() {
        return Some(());
    }
    checker.error(
        entry.place,
        format!("`{}` is no name for a rule: lower case letters, digits and hyphens make one", entry.key),
    );
    None
}

fn severity(checker: &mut Checker, fields: &Fields, key: &str, usual: Severity) -> Severity {
    fields
        .get(key)
        .and_then(|node| checker.word(node, "severity", &SEVERITIES.map(|severity| (severity, severity.word()))))
        .unwrap_or(usual)
}

fn text(checker: &mut Checker, fields: &Fields, key: &str) -> Option<String> {
    fields.get(key).and_then(|node| checker.text(node)).map(|text| text.trim().to_string())
}

/// Places that a rule's labels may stand at, beside the pins of devices.
fn places(subject: Subject) -> &'static [&'static str] {
    match subject {
        Subject::Device => &["name", "model", "size", "width", "length", "fingers", "pins", "d", "g", "s", "b"],
        Subject::Net => &["name", "rail"],
        Subject::Instance => &["name", "model", "pins"],
        Subject::Mirror => &["name", "model", "ref", "out"],
        Subject::Pair => &["name", "model", "left", "right", "tail"],
        Subject::Class => &["name", "rating.vds"],
        Subject::Run => &["name", "model"],
    }
}

fn points(
    checker: &mut Checker,
    node: &Node,
    subject: Subject,
    classes: &[Class],
    words: &dyn Vocabulary,
) -> Vec<(String, Template)> {
    let mut points = Vec::new();
    for entry in checker.map(node, "`point`") {
        if entry.value.shape == Shape::Empty {
            continue;
        }
        let pins = classes.iter().flat_map(|class| &class.pins).map(String::as_str);
        let pins: Vec<&str> = if subject == Subject::Device { pins.collect() } else { Vec::new() };
        let known = || places(subject).iter().copied().chain(pins.iter().copied());
        if !known().any(|place| place == entry.key) {
            let message = format!("`{}` is no place that a label of this rule can stand at", entry.key);
            checker.unknown(entry.place, message, &entry.key, known());
            continue;
        }
        if let Some(words) = checker.template(&entry.value, words) {
            points.push((entry.key.clone(), words));
        }
    }
    points
}

fn examples(checker: &mut Checker, node: &Node) -> Option<Examples> {
    let fields = checker.fields(node, &EXAMPLES);
    let mut part = |key: &str| fields.get(key).and_then(|node| checker.text(node)).map(str::to_string);
    let (deck, fires, quiet) = (part("deck"), part("fires"), part("quiet"));
    if fires.is_none() || quiet.is_none() {
        checker.error(node.span, "examples are two netlists: one the rule `fires` on, and one it stays `quiet` on");
    }
    Some(Examples { deck: deck.unwrap_or_default(), fires: fires?, quiet: quiet? })
}
