//! What stands at a place of a deck's text: for editors, which ask about the word under a cursor.

use super::keys::{DECK, Holds, Key, Named};
use super::node::{self, Node, Shape};
use crate::source::{FileId, SourceMap, Span};

/// A key or a scalar of a deck.
#[derive(Clone, Debug, PartialEq)]
pub struct At {
    /// The keys that lead there, from the outermost; the last one is the key itself where the place is on one.
    pub keys: Vec<String>,
    /// Whether the place is on a key, not on a value.
    pub on_key: bool,
    /// The key, or the value's text.
    pub text: String,
    /// Its place.
    pub span: Span,
}

/// What a chain of keys means.
#[derive(Clone, Copy, Debug)]
pub enum About {
    /// A key that decks may have.
    Key(&'static Key),
    /// A name: of a class, a net, a rule …
    Name(Named),
}

/// What stands at byte `offset` of a deck; none between things, and where the text is no sound YAML.
pub fn at(sources: &SourceMap, file: FileId, offset: u32) -> Option<At> {
    let tree = node::read(sources, file, &mut Vec::new());
    let mut keys = Vec::new();
    let mut here = &tree;
    loop {
        match &here.shape {
            Shape::Empty => return None,
            Shape::Text(text) => return Some(At { keys, on_key: false, text: text.clone(), span: here.span }),
            Shape::List(nodes) => here = nodes.iter().find(|node| holds(node.span, offset))?,
            Shape::Map(entries) => {
                if let Some(entry) = entries.iter().find(|entry| holds(entry.place, offset)) {
                    keys.push(entry.key.clone());
                    return Some(At { keys, on_key: true, text: entry.key.clone(), span: entry.place });
                }
                let entry = entries.iter().find(|entry| has_place(&entry.value) && holds(entry.value.span, offset))?;
                keys.push(entry.key.clone());
                here = &entry.value;
            }
        }
    }
}

fn holds(span: Span, offset: u32) -> bool {
    (span.start..=span.end).contains(&offset)
}

fn has_place(node: &Node) -> bool {
    node.shape != Shape::Empty
}

/// What the last of these keys means; none where the checker knows no such key.
pub fn about(keys: &[String]) -> Option<About> {
    let mut holds = Holds::Part(&DECK);
    let mut about = None;
    for key in keys {
        match holds {
            Holds::Part(section) | Holds::List(section) => {
                let found = section.keys.iter().find(|known| known.name == key)?;
                (holds, about) = (found.holds, Some(About::Key(found)));
            }
            Holds::Map(named, below) => (holds, about) = (*below, Some(About::Name(named))),
            _ => return None,
        }
    }
    about
}

#[cfg(test)]
mod tests {
    use super::*;

    const DECK: &str = "\
classes:
  ldn60: {kind: nmos, ratings: {vds: 0V..60V}}
rails:
  'µA': 0V .. SW
waivers:
  - {rule: finger-count, at: m1,
     reason: \"trimmed at
     test\"}
";

    fn look(word: &str) -> Option<(String, bool, String)> {
        let mut sources = SourceMap::new();
        let file = sources.add("d.yaml", DECK);
        let at = at(&sources, file, DECK.find(word).unwrap() as u32 + 1)?;
        assert!(sources.slice(at.span).contains(at.text.split(' ').next().unwrap()), "{at:?}");
        Some((at.keys.join(" "), at.on_key, at.text))
    }

    #[test]
    fn keys_and_values_are_found() {
        let found = |word| look(word).unwrap();
        assert_eq!(found("classes"), ("classes".into(), true, "classes".into()));
        assert_eq!(found("ldn60"), ("classes ldn60".into(), true, "ldn60".into()));
        assert_eq!(found("nmos"), ("classes ldn60 kind".into(), false, "nmos".into()));
        assert_eq!(found("0V..60V"), ("classes ldn60 ratings vds".into(), false, "0V..60V".into()));
        assert_eq!(found("'µA'"), ("rails µA".into(), true, "µA".into()));
        assert_eq!(found("finger-count"), ("waivers rule".into(), false, "finger-count".into()));
        assert_eq!(found("test"), ("waivers reason".into(), false, "trimmed at test".into()));
        assert_eq!(look("\n  ldn60"), None);
    }

    #[test]
    fn keys_have_meanings() {
        let about = |keys: &str| {
            about(&keys.split(' ').map(str::to_owned).collect::<Vec<_>>()).map(|about| match about {
                About::Key(key) => key.doc.to_owned(),
                About::Name(named) => format!("{named:?}"),
            })
        };
        assert_eq!(about("waivers until").as_deref(), Some("last day that it holds"));
        assert_eq!(about("modes fill SW").as_deref(), Some("Net"));
        assert_eq!(about("classes x").as_deref(), Some("Class"));
        assert_eq!(about("classes x fingers min").as_deref(), Some("smallest number of fingers"));
        assert_eq!((about("colour"), about("top x"), about("rails x y")), (None, None, None));
    }
}
