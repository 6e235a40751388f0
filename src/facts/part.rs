//! The part that a device plays in its circuit, and the current through it.

use super::DeviceView;
use crate::current::{By, Current, Currents, Known, Step};
use crate::expr::Value;
use crate::quantity::{Dim, show};
use crate::roles::{Member, Played, Role, Standing, Surroundings, UNCLASSIFIED, Unit, Walk, Walker, Walks};
use crate::source::Span;
use std::cell::RefCell;
use std::rc::Rc;

/// The names of all roles, for rules.
pub const ROLES: &[&str] = &[
    "dummy",
    "idle",
    "pair",
    "diode-connected",
    "mirror-reference",
    "mirror-output",
    "latch",
    "cascode",
    "gain",
    "back-to-back",
    "switch",
    "follower",
    "sense",
    UNCLASSIFIED,
];

impl<'w> DeviceView<'w> {
    /// Shares what it learns of its surroundings with other views.
    pub fn sharing(self, walks: &Rc<Walks<'w, Known>>) -> DeviceView<'w> {
        let _ = self.walks.set(Rc::clone(walks));
        self
    }

    /// The walk around it, begun when first asked for.
    pub(super) fn around(&self) -> &Rc<Walk<'w, Known>> {
        self.walk.get_or_init(|| {
            let walks = self.walks.get_or_init(Rc::default);
            let walk = walks.from(self.world.roles, self.standing.anchor);
            walk.walker.borrow_mut().begin();
            walk
        })
    }

    pub(super) fn walk(&self) -> &RefCell<Walker<'w>> {
        &self.around().walker
    }

    /// The device as the walk around it knows it.
    pub(super) fn unit(&self) -> Unit {
        *self.unit.get_or_init(|| self.walk().borrow_mut().unit(&self.standing.path, self.device))
    }

    /// Whether what was asked led out of where the device is seen: the answers count for nothing.
    pub fn must_look_above(&self) -> bool {
        self.walk.get().is_some_and(|walk| walk.walker.borrow().must_look_above())
    }

    /// Goes on to its next surroundings, if what was asked depended on them and there are more. After the last it is as new.
    pub fn next_surroundings(&mut self) -> bool {
        let Some(walk) = self.walk.take() else { return false };
        let above = walk.walker.borrow().must_look_above();
        self.unit.take();
        self.current.take();
        let now = std::mem::replace(&mut self.standing, Standing { anchor: self.at, path: Vec::new() });
        if let Some(next) = self.surroundings.next(self.world.roles, now, above) {
            self.standing = next;
            return true;
        }
        self.surroundings = Surroundings::default();
        false
    }

    /// Where it is seen, for [`DeviceView::seen_from`].
    pub fn standing(&self) -> &Standing {
        &self.standing
    }

    /// How many instances stand in these surroundings.
    pub fn instances(&self) -> u64 {
        self.world.reach.get(self.standing.anchor).count
    }

    /// All its roles with their evidence, the main one first.
    pub fn roles(&self) -> Vec<Played> {
        let unit = self.unit();
        self.walk().borrow_mut().roles(unit)
    }

    /// The name of its main role.
    pub fn role(&self) -> &'static str {
        self.roles().first().map_or(UNCLASSIFIED, |played| played.role.word())
    }

    /// Whether it plays a role; unknown where a net that decides it has too many pins to be looked at.
    pub(super) fn plays(&self, name: &str) -> Value {
        let roles = self.roles();
        if name == UNCLASSIFIED {
            return Value::Bool(roles.is_empty());
        }
        match roles.iter().any(|played| played.role.word() == name) {
            true => Value::Bool(true),
            false => self.unless_crowded(),
        }
    }

    fn unless_crowded(&self) -> Value {
        let walk = self.walk().borrow();
        match walk.crowded() {
            Some(_) if self.world.roles.is_worn_out() => {
                self.unknown("the design has so many structures that recognition gave up before this one")
            }
            Some(net) => self.unknown(format!(
                "more than {} pins stand on net `{}`, so that nobody looked at all of them",
                crate::roles::MOST_PINS,
                walk.net_name(net)
            )),
            None => Value::Bool(false),
        }
    }

    /// The path of a device that was met on the walk.
    pub fn path_of(&self, unit: Unit) -> String {
        self.walk().borrow().unit_path(unit)
    }

    /// How to call a device that was met on the walk: by its own name where it stands beside this one, else by its path.
    fn name_of(&self, other: Unit) -> String {
        let unit = self.unit();
        let walk = self.walk().borrow();
        if other.spot != unit.spot {
            return walk.unit_path(other);
        }
        let template = self.design().template(walk.context(other.spot).variant);
        self.design().device_name(template, other.device).to_owned()
    }

    /// The place of the name of a device that was met on the walk.
    pub(super) fn place_of(&self, unit: Unit) -> Option<Span> {
        let walk = self.walk().borrow();
        let variant = walk.context(unit.spot).variant;
        let card = self.design().device_card(variant, unit.device);
        card.fields.words.first().map(|word| word.span(card.file))
    }

    /// Whether it is reference or output of a mirror; notes the others.
    pub(super) fn is_mirrored(&self) -> Value {
        let unit = self.unit();
        let mirror = {
            let mut walk = self.walk().borrow_mut();
            let plays = walk.plays(unit, Role::MirrorReference) || walk.plays(unit, Role::MirrorOutput);
            if plays { walk.mirror(unit) } else { None }
        };
        let Some(mirror) = mirror else { return self.unless_crowded() };
        let (part, others, their) = match mirror.member {
            Member::Reference => ("the reference", &mirror.outputs, "output"),
            Member::Output => ("the output", &mirror.references, "reference"),
        };
        if !self.in_words {
            return Value::Bool(true);
        }
        let partners = match others.first() {
            Some(&first) => format!("its {their} is {}{}", self.name_of(first), and_more(others.len() - 1)),
            None => {
                let gate = self.class.pin("g").map_or("", |pin| self.net_text(pin));
                format!("its gate is the bias `{gate}`, whose reference stands outside")
            }
        };
        for &other in others.iter().take(MOST_LABELS) {
            let class = self.walk().borrow().class(other).map_or_else(String::new, |class| format!(", {}", class.name));
            self.note_place(other, format!("the mirror's {their}{class}"));
        }
        self.note(|evidence| {
            evidence.values = vec![("part".into(), part.into()), ("partners".into(), partners)];
            evidence.pins = self.class.pin("g").into_iter().collect();
        });
        Value::Bool(true)
    }

    /// Whether it gives gain: half of a pair, or a common-source stage; notes what shows it.
    pub(super) fn is_amplifying(&self) -> Value {
        let unit = self.unit();
        let found = {
            let mut walk = self.walk().borrow_mut();
            let pair = walk.playing(unit, Role::Pair).map(|with| (Role::Pair, with));
            pair.or_else(|| walk.playing(unit, Role::Gain).map(|with| (Role::Gain, with)))
        };
        let Some((role, with)) = found else { return self.unless_crowded() };
        if !self.in_words {
            return Value::Bool(true);
        }
        let part = match role {
            Role::Pair => "half of a differential pair",
            _ => "a common-source gain stage",
        };
        let names: Vec<String> = with.iter().take(MOST_LABELS).map(|&unit| self.name_of(unit)).collect();
        let partners = match role {
            Role::Pair => format!("it shares its source with {}", names.join(", ")),
            _ => format!("its drain is loaded by {}", names.join(", ")),
        };
        for &other in with.iter().take(MOST_LABELS) {
            let words = match self.walk().borrow_mut().roles(other).first().map(|played| played.role) {
                Some(Role::Pair) => "the other half".to_owned(),
                Some(role) => format!("{} of the same stage", role.word()),
                None => "part of the same stage".to_owned(),
            };
            self.note_place(other, words);
        }
        self.note(|evidence| {
            evidence.values = vec![("part".into(), part.into()), ("partners".into(), partners)];
            evidence.pins = self.class.pin("g").into_iter().collect();
        });
        Value::Bool(true)
    }

    fn note_place(&self, unit: Unit, words: String) {
        if let Some(place) = self.place_of(unit) {
            self.note(|evidence| {
                if !evidence.places.contains(&(place, words.clone())) {
                    evidence.places.push((place, words));
                }
            });
        }
    }

    /// The current through its channel; none where it is not known.
    pub fn current(&self) -> Option<&Current> {
        let unit = self.unit();
        self.current
            .get_or_init(|| {
                Currents::new(&mut self.walk().borrow_mut(), &mut self.around().beside.borrow_mut()).of(unit)
            })
            .as_ref()
    }

    /// That current, or the most that it can be, as a value.
    pub(super) fn current_value(&self) -> Value {
        match self.current() {
            Some(current) => Value::Number { value: current.amps, dim: Dim::AMPERE },
            None => self.unknown("its current is not known: declare it under `currents:`"),
        }
    }

    /// Current per width that its channel is held to at every instant, A/m; none where it is not known. A device that works all the
    /// time carries what flows; one that switches also discharges its drain's net.
    pub(super) fn density_at_all_times(&self) -> Option<f64> {
        let unit = self.unit();
        if self.works_all_the_time() {
            return self.density();
        }
        let held = Currents::new(&mut self.walk().borrow_mut(), &mut self.around().beside.borrow_mut())
            .while_switching(unit)?;
        self.density_of(held.amps)
    }

    /// Whether its role is one that is on and high by design, not only in passing.
    pub(super) fn works_all_the_time(&self) -> bool {
        self.roles().iter().any(|played| played.role.works_all_the_time())
    }

    /// Current per width, A/m; none where one of them is not known.
    pub fn density(&self) -> Option<f64> {
        self.density_of(self.current()?.amps)
    }

    pub(super) fn density_of(&self, amps: f64) -> Option<f64> {
        let sizes = self.sizes();
        let total = sizes.width.as_ref().ok()? * sizes.copies.as_ref().ok()?;
        (total > 0.0).then(|| amps / total)
    }

    pub(super) fn density_value(&self) -> Value {
        match (self.current(), self.density()) {
            (Some(_), Some(value)) => Value::Number { value, dim: Dim::DENSITY },
            (Some(_), None) => self.unknown("its width is not known"),
            (None, _) => self.current_value(),
        }
    }

    /// Current times the highest drain-source voltage of any mode.
    pub(super) fn power_value(&self) -> Value {
        let (Some(d), Some(s)) = (self.class.pin("d"), self.class.pin("s")) else { return self.undeclared() };
        let volts = (0..self.world.reach.modes.len()).map(|mode| self.voltage(mode, d, s));
        let most = volts.map(|range| range.hi.abs().max(range.lo.abs())).fold(0.0, f64::max);
        match self.current() {
            Some(current) if most.is_finite() => Value::Number { value: current.amps * most, dim: Dim::WATT },
            Some(_) => self.unknown("its drain-source voltage is not known"),
            None => self.current_value(),
        }
    }

    /// How its current is known, one line a step, from the known current on.
    pub fn current_chain(&self) -> Vec<(Option<Span>, String)> {
        let Some(current) = self.current() else { return Vec::new() };
        let line = |step: &Step| {
            let amps = show(step.amps, Dim::AMPERE);
            let name = step.unit.map(|unit| self.name_of(unit)).unwrap_or_default();
            let place = step.place.or_else(|| self.place_of(step.unit?));
            let words = match step.by {
                By::Declared => format!("{amps} is declared here"),
                By::Source => format!("{name} brings {amps}"),
                By::Resistor => format!("{name} carries {amps} at most"),
                By::Sum => format!("{name} carries {amps}: no other path leaves that net"),
                By::Most => format!("{name} carries {amps} at most: all that reaches its net"),
                By::Ratio(ratio) => format!("{name} repeats it by {}: {amps}", show(ratio, Dim::NONE)),
            };
            (place, words)
        };
        current.steps.iter().map(line).collect()
    }

    /// Notes how its current is known.
    pub(super) fn note_current(&self) {
        if !self.in_words {
            return;
        }
        for (place, words) in self.current_chain() {
            if let Some(place) = place {
                self.note(|evidence| evidence.places.push((place, words)));
            }
        }
    }
}

/// At most this many partners are labelled.
const MOST_LABELS: usize = 4;

fn and_more(count: usize) -> String {
    if count == 0 { String::new() } else { format!(" and {count} more") }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::roles::RECOGNISERS;

    #[test]
    fn rules_know_every_role() {
        let words: Vec<&str> = RECOGNISERS.iter().map(|(role, _)| role.word()).chain([UNCLASSIFIED]).collect();
        assert_eq!(ROLES, words);
    }
}
