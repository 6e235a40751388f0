//! What is shown at the cursor in a deck, and where the names there are declared.

use super::hover::code;
use super::look::Look;
use crate::deck::at::{About, At, about, at};
use crate::deck::keys::Named;
use crate::declared::{Class, Rail, Rule};
use crate::facts::vocabulary::{ATTRIBUTES, FUNCTIONS, PATTERNS};
use crate::source::{FileId, Span};
use std::path::{Path, PathBuf};

/// The words, in Markdown, and what they are about.
pub(super) fn hover(look: &Look<'_>, file: FileId, offset: u32) -> Option<(String, Span)> {
    let at = at(look.sources, file, offset)?;
    if !at.on_key
        && let Some(found) = of_value(look, &at, offset)
    {
        return Some(found);
    }
    let words = match about(&at.keys)? {
        About::Key(key) => format!("**{}**: {}\n\n{}", code(key.name), key.doc, key.holds.in_words()),
        About::Name(named) => of_name(look, named, at.keys.last()?)?,
    };
    Some((words, at.span))
}

fn of_name(look: &Look<'_>, named: Named, name: &str) -> Option<String> {
    match named {
        Named::Class => look.deck.classes.iter().find(|class| class.name == name).map(of_class),
        Named::Rule => rule(look, name).map(of_rule),
        Named::Net => {
            let rail = rails(look).find(|rail| rail.net.text() == name)?;
            Some(format!("**rail {}**: {}", code(name), look.sources.slice(rail.value_place)))
        }
        Named::Mode | Named::Pair | Named::Pin | Named::Parameter | Named::Path | Named::Place => {
            Some(format!("**{}** {}", named.word(), code(name)))
        }
    }
}

fn of_class(class: &Class) -> String {
    let models: Vec<String> = class.models.iter().map(|glob| code(glob.text())).collect();
    let voltage = if class.high_voltage { ", high voltage" } else { "" };
    let source = class.source.as_ref().map_or(String::new(), |source| format!("\n\nsource: {source}"));
    format!(
        "**class {}**: {}{voltage}\n\npins: {}\n\nmodels: {}{source}",
        code(&class.name),
        class.kind.word(),
        class.pins.join(" "),
        models.join(" ")
    )
}

fn of_rule(rule: &Rule) -> String {
    let why = rule.why.trim();
    let words = format!("**rule {}** ({}): {}", code(&rule.id), rule.severity.word(), rule.title);
    if why.is_empty() { words } else { format!("{words}\n\n{why}") }
}

fn rule<'w>(look: &Look<'w>, id: &str) -> Option<&'w Rule> {
    look.deck.rules.iter().find(|rule| rule.id == id)
}

fn rails<'w>(look: &Look<'w>) -> impl Iterator<Item = &'w Rail> {
    look.deck.rails.iter().chain(look.deck.modes.iter().flat_map(|mode| &mode.rails))
}

/// Values that name something: rules in waivers, rails in ends of others, names in a rule's conditions.
fn of_value(look: &Look<'_>, at: &At, offset: u32) -> Option<(String, Span)> {
    let keys: Vec<&str> = at.keys.iter().map(String::as_str).collect();
    match keys.as_slice() {
        ["waivers", "rule"] => Some((of_rule(rule(look, &at.text)?), at.span)),
        ["rails", _] | ["modes", _, _] => {
            let (name, span) = word(look, at, offset)?;
            let rail = rails(look).find(|rail| rail.net.text().eq_ignore_ascii_case(name))?;
            Some((format!("**rail {}**: {}", code(name), look.sources.slice(rail.value_place)), span))
        }
        ["rules", id, "where" | "require" | "say" | "say_unproven" | "help" | "settle"] | ["rules", id, "point", _] => {
            let (name, span) = word(look, at, offset)?;
            let subject = rule(look, id)?.subject;
            let attribute = ATTRIBUTES.iter().find(|known| known.subject == subject && known.name == name);
            let function = || {
                let known = |call: &str| call.split('(').next() == Some(name);
                FUNCTIONS.iter().find(|function| known(function.call)).map(|function| (function.call, function.doc))
            };
            let pattern = || PATTERNS.iter().find(|(known, ..)| *known == name).map(|(name, doc, _)| (*name, *doc));
            let found = attribute.map(|known| (known.name, known.doc)).or_else(function).or_else(pattern)?;
            Some((format!("**{}**: {}", code(found.0), found.1), span))
        }
        _ => None,
    }
}

/// The name at the cursor, inside a value.
fn word<'w>(look: &Look<'w>, at: &At, offset: u32) -> Option<(&'w str, Span)> {
    let written = look.sources.slice(at.span);
    let here = (offset.checked_sub(at.span.start)? as usize).min(written.len());
    let (before, after) = (written.get(..here)?, written.get(here..)?);
    let in_name = |letter: char| letter.is_alphanumeric() || matches!(letter, '_' | '.' | '<' | '>' | '[' | ']' | '/');
    let start = before
        .rfind(|letter| !in_name(letter))
        .map_or(0, |end| end + before[end..].chars().next().map_or(1, char::len_utf8));
    let end = here + after.find(|letter| !in_name(letter)).unwrap_or(after.len());
    let span = Span::new(at.span.file, at.span.start + start as u32, at.span.start + end as u32);
    (start < end).then(|| (&written[start..end], span))
}

/// Where what is named at the cursor stands: places in decks, and files.
pub(super) fn definition(look: &Look<'_>, file: FileId, offset: u32) -> (Vec<Span>, Vec<PathBuf>) {
    let Some(at) = at(look.sources, file, offset).filter(|at| !at.on_key) else { return Default::default() };
    let keys: Vec<&str> = at.keys.iter().map(String::as_str).collect();
    let place = match keys.as_slice() {
        ["use" | "netlists"] if !at.text.starts_with("builtin:") => {
            let folder = Path::new(look.sources.file(file).path()).parent().unwrap_or(Path::new(""));
            return (Vec::new(), vec![folder.join(&at.text)]);
        }
        ["waivers", "rule"] => rule(look, &at.text).map(|rule| rule.place),
        ["transitions", "from" | "to"] => {
            look.deck.modes.iter().find(|mode| mode.name == at.text).map(|mode| mode.place)
        }
        ["rails", _] | ["modes", _, _] => word(look, &at, offset).and_then(|(name, _)| {
            look.deck.rails.iter().find(|rail| rail.net.text().eq_ignore_ascii_case(name)).map(|rail| rail.place)
        }),
        _ => None,
    };
    (place.into_iter().collect(), Vec::new())
}
