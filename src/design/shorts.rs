//! Drawn shorts: a resistor of 0 Ω or a source of 0 V joins its two nets into one.

use super::{DeviceIx, kinds::Element};
use crate::netlist::letters;
use crate::netlist::tree::{Fields, Word};
use crate::netlist::values::number;
use crate::netlist::waveforms::{Waveform, value_word, waveform};

/// A device that may short its two nets.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct MaybeShort {
    pub(crate) device: DeviceIx,
    /// The words whose values must all be zero, where the card's text alone does not say so.
    pub(crate) values: Vec<Word>,
}

impl MaybeShort {
    /// Looks at a resistor or voltage source: none where its text already says that it is no short.
    pub(super) fn examine(
        device: DeviceIx,
        what: Element,
        text: &str,
        fields: &Fields,
        element: &letters::Element,
        mega: bool,
    ) -> Option<MaybeShort> {
        let words = match what {
            Element::Resistor => vec![value_word(text, fields, element)?],
            _ => match waveform(text, fields, element) {
                Waveform::Bounded { levels, swings } => {
                    levels.into_iter().chain(swings.into_iter().flat_map(|(a, b)| [a, b])).collect()
                }
                Waveform::Unknown => return None,
            },
        };
        let mut values = Vec::new();
        for word in words {
            match number(text, word, mega).filter(|_| !word.quoted) {
                Some(0.0) => {}
                Some(_) => return None,
                None => values.push(word),
            }
        }
        Some(MaybeShort { device, values })
    }
}
