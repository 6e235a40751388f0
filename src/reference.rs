//! What `drainwise rules` shows, and the lists of the reference page: rules from their pages, names from the vocabulary.

use crate::declared::{Rule, Subject};
use crate::expr::Type;
use crate::facts::vocabulary::{ATTRIBUTES, FUNCTIONS, PATTERNS};
use crate::names::nearest;
use std::fmt::Write;

/// One line a rule.
pub fn list(rules: &[Rule]) -> String {
    let width = rules.iter().map(|rule| rule.id.len()).max().unwrap_or(0);
    let mut text = String::new();
    for rule in rules {
        let _ =
            writeln!(text, "{:width$}  {:7}  {:8}  {}", rule.id, rule.severity.word(), rule.subject.word(), rule.title);
    }
    text
}

/// A rule's whole page. An error says that there is none, and offers a near one.
pub fn page(rules: &[Rule], id: &str) -> Result<String, String> {
    let Some(rule) = rules.iter().find(|rule| rule.id == id) else {
        let near = nearest(id, rules.iter().map(|rule| rule.id.as_str()))
            .map_or("`drainwise rules` lists them".to_owned(), |near| format!("did you mean `{near}`?"));
        return Err(format!("there is no rule `{id}` in force: {near}"));
    };
    let mut text = format!(
        "{} ({}, for each {})\n\n{}.\n",
        rule.id,
        rule.severity.word(),
        rule.subject.word(),
        capital(&rule.title)
    );
    let mut part = |title: &str, body: &str| {
        if !body.trim().is_empty() {
            let _ = write!(text, "\n{title}\n{}\n", indent(body.trim()));
        }
    };
    part("Why", &rule.why);
    part("Source", rule.cite.as_deref().unwrap_or(""));
    if let Some(examples) = &rule.examples {
        part("Deck of the examples", &examples.deck);
        part("It fires on", &examples.fires);
        part("It stays quiet on", &examples.quiet);
    }
    Ok(text)
}

fn capital(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or(String::new(), |first| first.to_uppercase().chain(letters).collect())
}

fn indent(text: &str) -> String {
    text.lines().map(|line| format!("    {line}")).collect::<Vec<_>>().join("\n")
}

fn kind(of: Type) -> String {
    match of {
        Type::Bool => "true or false".to_owned(),
        Type::Number(dim) => dim.in_words(),
        Type::AnyNumber => "number".to_owned(),
        Type::Text => "text".to_owned(),
        Type::Word(words) => format!("one of {}", words.join(" ")),
    }
}

/// The names and functions of a subject: as written, what they are, and one line of explanation.
fn rows(subject: Subject) -> Vec<(&'static str, String, &'static str)> {
    let own = ATTRIBUTES.iter().filter(|attribute| attribute.subject == subject);
    let mut rows: Vec<_> = own.map(|attribute| (attribute.name, kind(attribute.kind), attribute.doc)).collect();
    if subject == Subject::Device {
        rows.extend(PATTERNS.iter().map(|(name, doc, of)| (*name, kind(*of), *doc)));
    }
    let functions = FUNCTIONS.iter().filter(|function| function.subjects.contains(&subject));
    rows.extend(functions.map(|function| (function.call, kind(function.kind), function.doc)));
    rows
}

/// Every name that a rule may use, by subject, with what it is.
pub fn names() -> String {
    let mut text = String::new();
    for (subject, word) in Subject::ALL {
        let rows = rows(subject);
        if rows.is_empty() {
            continue;
        }
        let _ = writeln!(text, "for: {word}");
        for (name, of, doc) in rows {
            let _ = writeln!(text, "  {name:24} {of:16} {doc}");
        }
        text.push('\n');
    }
    text
}

/// The rules of the program as a Markdown table.
pub fn rule_table(rules: &[Rule]) -> String {
    let mut text = "| rule | for | severity | it says that |\n|---|---|---|---|\n".to_owned();
    for rule in rules {
        let _ =
            writeln!(text, "| `{}` | {} | {} | {} |", rule.id, rule.subject.word(), rule.severity.word(), rule.title);
    }
    text
}

/// The names that rules may use as Markdown tables, one a subject.
pub fn name_tables() -> String {
    let mut text = String::new();
    for (subject, word) in Subject::ALL {
        let rows = rows(subject);
        if rows.is_empty() {
            continue;
        }
        let _ = write!(text, "**`for: {word}`**\n\n| name | what it is | meaning |\n|---|---|---|\n");
        for (name, of, doc) in rows {
            let _ = writeln!(text, "| `{name}` | {of} | {doc} |");
        }
        text.push('\n');
    }
    text
}
