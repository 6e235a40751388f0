//! Ratings: do the declared rails keep each rated pair of terminals inside its range?

use super::glance::{Cells, Excess, Shape, TOLERANCE};
use super::{DeviceView, World};
use crate::declared::Rating;
use crate::expr::Value;
use crate::graph::rail;
use crate::quantity::{Dim, show};
use crate::reach::trace::{Step, StepBy, trace_in_cell};
use crate::reach::{Interval, Side};

/// How a rated pair came out over all modes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Outcome {
    /// It stays inside in every mode.
    Proven,
    /// It can leave in some mode.
    Violated,
    /// It could not be decided.
    Unproven,
}

/// Longer chains are cut in a finding; `drainwise trace` shows all of one.
const MOST_STEPS: usize = 6;

/// Counts of rated pairs of high-voltage devices, over all instances (saturating).
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct PairCounts {
    /// Pairs that stay inside their ratings.
    pub proven: u64,
    /// Pairs that can leave them.
    pub violated: u64,
    /// Pairs that could not be decided.
    pub unproven: u64,
}

/// Counts all rated pairs of high-voltage devices.
pub fn count_pairs(world: World<'_>) -> PairCounts {
    let mut counts = PairCounts::default();
    let shapes: Vec<_> = world
        .deck
        .classes
        .iter()
        .map(|class| (class.high_voltage && !class.ratings.is_empty()).then(|| (Shape::of(class), &class.ratings)))
        .collect();
    for at in world.reach.indices() {
        let (count, around) = (world.reach.get(at).count, Cells::new(world, at));
        let template = world.design.template(world.context(at).variant);
        for device in template.devices() {
            let class = world.design.device_type(template, device).class;
            let Some(&(shape, ratings)) = class.and_then(|class| shapes[class as usize].as_ref()) else { continue };
            let glance = around.glance(device, shape);
            for rating in ratings {
                let slot = match glance.judge_rating(rating).0 {
                    Outcome::Proven => &mut counts.proven,
                    Outcome::Violated => &mut counts.violated,
                    Outcome::Unproven => &mut counts.unproven,
                };
                *slot = slot.saturating_add(count);
            }
        }
    }
    counts
}

impl DeviceView<'_> {
    /// V(plus) − V(minus) of a device's pins in a mode.
    pub fn voltage(&self, mode: usize, plus: usize, minus: usize) -> Interval {
        match (self.net(plus), self.net(minus)) {
            (Some(plus), Some(minus)) => self.world.reach.between(self.at, mode, plus, minus),
            _ => Interval::ANY,
        }
    }

    /// Whether all rated pairs stay inside their ratings in every mode; notes those that do not, the worst one with numbers.
    pub(super) fn ratings_held(&self) -> Value {
        let glance = self.glance();
        let judged: Vec<_> = self.class.ratings.iter().map(|rating| (rating, glance.judge_rating(rating))).collect();
        let violated: Vec<_> =
            judged.iter().filter_map(|(rating, (_, worst))| worst.map(|worst| (*rating, worst))).collect();
        if let Some(&(rating, worst)) = violated.iter().reduce(|a, b| if b.1.volts > a.1.volts { b } else { a }) {
            self.note_violated(&violated, rating, worst);
            return Value::Bool(false);
        }
        let open: Vec<&Rating> = judged
            .iter()
            .filter(|(_, (outcome, _))| *outcome == Outcome::Unproven)
            .map(|(rating, _)| *rating)
            .collect();
        if open.is_empty() {
            return Value::Bool(true);
        }
        self.note_open(&open);
        Value::Unknown
    }

    fn note_violated(&self, violated: &[(&Rating, Excess)], rating: &Rating, worst: Excess) {
        if !self.in_words {
            self.note(|evidence| {
                evidence.pairs = violated.iter().map(|(rating, _)| rating.name.clone()).collect();
                evidence.badness = worst.volts;
            });
            return;
        }
        let volts = |value: f64| show(value, Dim::VOLT);
        let mode = self.world.reach.mode_name(worst.mode);
        let over = worst.range.hi - rating.range.hi >= rating.range.lo - worst.range.lo || !worst.range.lo.is_finite();
        self.note(|evidence| {
            evidence.pairs = violated.iter().map(|(rating, _)| rating.name.clone()).collect();
            evidence.pins = vec![rating.plus, rating.minus];
            evidence.badness = worst.volts;
            evidence.mode = mode.map(str::to_owned);
            let mut modes: Vec<usize> = violated.iter().map(|(_, excess)| excess.mode).collect();
            modes.sort_unstable();
            modes.dedup();
            evidence.modes =
                modes.iter().filter_map(|&mode| self.world.reach.mode_name(mode)).map(str::to_owned).collect();
            let others: Vec<String> = violated
                .iter()
                .filter(|(other, _)| other.name != rating.name)
                .map(|(other, _)| other.name.clone())
                .collect();
            evidence.values = vec![
                ("pair".into(), rating.name.clone()),
                ("range".into(), range_text(worst.range)),
                ("extreme".into(), volts(if over { worst.range.hi } else { worst.range.lo })),
                ("rating".into(), range_text(Interval { lo: rating.range.lo, hi: rating.range.hi })),
                ("excess".into(), volts(worst.volts)),
                ("in_mode".into(), mode.map_or(String::new(), |mode| format!(" in mode `{mode}`"))),
                (
                    "also".into(),
                    if others.is_empty() { String::new() } else { format!("; also beyond: {}", others.join(", ")) },
                ),
                ("frame".into(), self.deciding_frame(worst.mode, rating)),
            ];
            for (key, pin) in [("plus", rating.plus), ("minus", rating.minus)] {
                evidence.values.push((key.into(), self.class.pins[pin].clone()));
                evidence.values.push((format!("{key}_net"), self.net_text(pin).to_owned()));
                evidence.values.push((format!("{key}_reach"), self.reach_text(worst.mode, pin)));
            }
        });
        self.note_rails(worst.mode, &[rating.plus, rating.minus]);
        let (plus, minus) = if over { (Side::Hi, Side::Lo) } else { (Side::Lo, Side::Hi) };
        self.note_chain(worst.mode, rating.plus, plus);
        self.note_chain(worst.mode, rating.minus, minus);
    }

    /// Notes the devices that brought a pin's net to one end of its range, from the rail on, and where that rail is declared.
    fn note_chain(&self, mode: usize, pin: usize, side: Side) {
        let Some(net) = self.net(pin) else { return };
        let steps = trace_in_cell(self.world.reach, self.at, mode, net, 0, side);
        let from_rail = steps.len() < 2 && steps.iter().all(|step| matches!(step.by, StepBy::Rail(_)));
        if steps.is_empty() || from_rail {
            return;
        }
        let ends = |step: &Step| format!("{} to {}", step.net, show(step.volts, Dim::VOLT));
        let mut chain = Vec::new();
        for step in steps.iter().take(MOST_STEPS) {
            let place = match &step.by {
                StepBy::Rail(Some(slot)) => Some((
                    rail(self.world.deck, *slot).place,
                    format!("from this rail: {} at {}", step.net, show(step.volts, Dim::VOLT)),
                )),
                StepBy::Device(device, why) => {
                    let variant = self.world.contexts.get(step.context).variant;
                    let card = self.design().device_card(variant, *device);
                    card.fields
                        .words
                        .first()
                        .map(|word| (word.span(card.file), format!("brings {}: {why}", ends(step))))
                }
                _ => None,
            };
            if let Some((span, words)) = place {
                chain.push((span, words.clone()));
                self.note(|evidence| {
                    if !evidence.places.iter().any(|(known, _)| *known == span) {
                        evidence.places.push((span, words));
                    }
                });
            }
        }
        if let (Some(place), false) = (self.pin_place(pin), chain.is_empty()) {
            chain.push((place, format!("{} is on {}", self.class.pins[pin], self.net_text(pin))));
            self.note(|evidence| evidence.chains.push(chain));
        }
    }

    /// The reach of a pin's net against ground, in words.
    pub(super) fn reach_text(&self, mode: usize, pin: usize) -> String {
        self.net(pin).map_or(String::new(), |net| range_text(self.world.reach.of(self.at, mode, net, 0)))
    }

    /// The name of the frame whose difference is narrowest: the one that decided.
    fn deciding_frame(&self, mode: usize, rating: &Rating) -> String {
        let (Some(plus), Some(minus)) = (self.net(rating.plus), self.net(rating.minus)) else { return String::new() };
        let reach = self.world.reach;
        let frames = &reach.frames[reach.get(self.at).top as usize].all;
        let width = |frame: usize| {
            let (x, y) = (reach.of(self.at, mode, plus, frame), reach.of(self.at, mode, minus, frame));
            (x.hi - y.lo) - (x.lo - y.hi)
        };
        let best = (0..frames.len()).reduce(|a, b| if width(b) < width(a) { b } else { a }).unwrap_or(0);
        if best == 0 { "ground".to_owned() } else { format!("net {}", frames[best].name) }
    }

    fn note_open(&self, open: &[&Rating]) {
        if !self.in_words {
            return self.note(|evidence| evidence.pairs = open.iter().map(|rating| rating.name.clone()).collect());
        }
        let mut pins: Vec<usize> = open.iter().flat_map(|rating| [rating.plus, rating.minus]).collect();
        pins.sort_unstable();
        pins.dedup();
        self.note(|evidence| {
            evidence.pairs = open.iter().map(|rating| rating.name.clone()).collect();
            evidence.values.push(("pairs_open".into(), evidence.pairs.join(", ")));
        });
        let unknown = self.note_unknown_nets(&pins);
        self.note(|evidence| evidence.pins = unknown);
    }

    /// Notes which of the pins' nets are unknown, and why; gives those pins.
    pub(super) fn note_unknown_nets(&self, pins: &[usize]) -> Vec<usize> {
        let mut found = Vec::new();
        for &pin in pins {
            let Some(net) = self.net(pin) else { continue };
            let why = (0..self.world.reach.modes.len()).find_map(|mode| self.world.reach.unknown(self.at, mode, net));
            if let Some(why) = why {
                found.push(pin);
                self.note(|evidence| {
                    evidence.unknown(format!(
                        "the voltage of net `{}` is not known ({})",
                        self.net_text(pin),
                        why.words()
                    ))
                });
            }
        }
        found
    }
}

/// A range in words: `0 V to 48 V`, `48 V`, `at least 3 V`, `unknown`.
pub fn range_text(range: Interval) -> String {
    let volts = |value: f64| show(value, Dim::VOLT);
    match (range.known_lo(), range.known_hi()) {
        (Some(lo), Some(hi)) if (hi - lo).abs() <= TOLERANCE => volts(hi),
        (Some(lo), Some(hi)) => format!("{} to {}", volts(lo), volts(hi)),
        (Some(lo), None) => format!("at least {}", volts(lo)),
        (None, Some(hi)) => format!("at most {}", volts(hi)),
        (None, None) => "unknown".to_owned(),
    }
}
