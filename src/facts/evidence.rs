//! What a view noted while it answered: the finding's labels and reasons are made from it.

use crate::roles::Standing;
use crate::source::Span;

/// Notes of one evaluation.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Evidence {
    /// Terminal pairs or pins concerned, by name (`vgs`, `iso`).
    pub pairs: Vec<String>,
    /// Indices of the pins concerned.
    pub pins: Vec<usize>,
    /// Why something is unknown, each a clause.
    pub why: Vec<String>,
    /// Places that explain, with their words.
    pub places: Vec<(Span, String)>,
    /// Chains of places that lead to the result, each in its order.
    pub chains: Vec<Vec<(Span, String)>>,
    /// Values that show it, as people write them.
    pub values: Vec<(String, String)>,
    /// The mode that it is worst in.
    pub mode: Option<String>,
    /// The modes that it fails in.
    pub modes: Vec<String>,
    /// How bad it is, for choosing the instance to show; larger is worse.
    pub badness: f64,
    /// Where the device was seen; none where its surroundings play no part.
    pub standing: Option<Standing>,
    /// Whether the class leaves out something that was asked for.
    pub undeclared: bool,
}

impl Evidence {
    /// Notes why something is unknown, once.
    pub fn unknown(&mut self, why: impl Into<String>) {
        let why = why.into();
        if !why.is_empty() && !self.why.contains(&why) {
            self.why.push(why);
        }
    }
}
