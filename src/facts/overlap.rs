//! On and high at once: the state that heats a drain-extended device and ages it.

use super::DeviceView;
use super::ratings::range_text;
use crate::current::Current;
use crate::declared::{Kind, OnState, Transition};
use crate::expr::Value;
use crate::quantity::{Dim, show, show_percent};
use crate::reach::Interval;
use crate::roles::Touch;

/// What a device does in one mode.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct ModeState {
    pub(super) on: bool,
    pub(super) surely_on: bool,
    pub(super) high: bool,
    pub(super) surely_high: bool,
    pub(super) vds: Interval,
    pub(super) vgs: Interval,
}

/// The answer for one device, in order of gravity.
enum Verdict {
    Holds,
    Open(&'static str),
    Broken,
}

impl DeviceView<'_> {
    /// Gate drive and drain-source voltage of a device in a mode, of either polarity counted as for an n-channel device.
    pub(super) fn mode_state(&self, mode: usize, limit: f64) -> Option<ModeState> {
        let (d, g, s) = (self.class.pin("d")?, self.class.pin("g")?, self.class.pin("s")?);
        let upright = |range: Interval| if self.class.kind == Kind::Pmos { range.negated() } else { range };
        let (vds, vgs) = (upright(self.voltage(mode, d, s)), upright(self.voltage(mode, g, s)));
        let (least, most) =
            self.class.threshold.map_or((f64::NEG_INFINITY, f64::INFINITY), |threshold| (threshold.lo, threshold.hi));
        let nearest = if vds.lo > 0.0 {
            vds.lo
        } else if vds.hi < 0.0 {
            -vds.hi
        } else {
            0.0
        };
        Some(ModeState {
            on: vgs.hi > least,
            surely_on: vgs.lo > most,
            high: vds.hi > limit || -vds.lo > limit,
            surely_high: nearest > limit,
            vds,
            vgs,
        })
    }

    /// Whether the device keeps out of being on and high together, beyond what its class exempts.
    pub(super) fn overlap_held(&self) -> Value {
        let Some(limits) = self.class.on_state else { return self.undeclared() };
        let states: Option<Vec<ModeState>> =
            (0..self.world.reach.modes.len()).map(|mode| self.mode_state(mode, limits.vds)).collect();
        let Some(states) = states else { return Value::Bool(true) };
        if self.carries_little(&limits) {
            return Value::Bool(true);
        }
        let in_modes = self.in_modes(&states, &limits);
        if matches!(in_modes, Verdict::Broken) {
            return Value::Bool(false);
        }
        let between = self.between_modes(&states, &limits);
        match (in_modes, between) {
            (_, Verdict::Broken) => Value::Bool(false),
            (Verdict::Holds, Verdict::Holds) => Value::Bool(true),
            (Verdict::Open(why), _) | (_, Verdict::Open(why)) => {
                self.note_state_pins();
                self.unknown(why)
            }
            _ => Value::Unknown,
        }
    }

    /// Whether its current per width is known to stay within what may flow all the time: then no state and no edge is too much.
    fn carries_little(&self, limits: &OnState) -> bool {
        matches!((self.density_at_all_times(), limits.density), (Some(density), Some(limit)) if density <= limit * (1.0 + 1e-9))
    }

    fn note_state_pins(&self) {
        let pins = ["d", "g"].iter().filter_map(|pin| self.class.pin(pin)).collect();
        self.note(|evidence| evidence.pins = pins);
    }

    /// On and high in one mode.
    fn in_modes(&self, states: &[ModeState], limits: &OnState) -> Verdict {
        let mut answer = Verdict::Holds;
        for (mode, state) in states.iter().enumerate().filter(|(_, state)| state.on && state.high) {
            let density = self.density();
            let exact = density.is_some() && self.current().is_some_and(|current| current.exact);
            let surely_on = state.surely_on || state.surely_high && self.pulls_on_resistors(mode);
            if surely_on && state.surely_high || exact && self.works_all_the_time() {
                self.note_mode(mode, state, density, limits);
                self.note_current();
                return Verdict::Broken;
            }
            if matches!(answer, Verdict::Holds) {
                self.note_mode(mode, state, density, limits);
                answer = Verdict::Open(if self.world.reach.modes.first().is_some_and(Option::is_none) {
                    "the rails alone allow it to be on at high voltage: declare modes, so that what happens together is known, or the current that it carries"
                } else {
                    "in this mode it can be on at high voltage: narrow the mode's rails, or declare the current that it carries"
                });
            }
        }
        answer
    }

    /// Whether its source hangs on rails by resistors alone, all of which its gate surely passes by more than a threshold: then it
    /// conducts, wherever between its source settles.
    fn pulls_on_resistors(&self, mode: usize) -> bool {
        let own = self.unit();
        let mut walker = self.walk().borrow_mut();
        let Some(mos) = walker.mos(own) else { return false };
        let Some(most) = self.class.threshold.map(|threshold| threshold.hi) else { return false };
        if walker.is_rail(mos.s) || walker.leads_out(mos.s) {
            return false;
        }
        let mut held = false;
        for on in walker.each_on(mos.s).iter().filter(|on| on.unit != own) {
            match on.touch {
                Touch::Gate { .. } | Touch::Capacitor | Touch::Nothing => {}
                Touch::Resistor => {
                    let Some(far) = walker.other_end(on.unit, mos.s).filter(|&far| walker.is_rail(far)) else {
                        return false;
                    };
                    let drive = walker.volts(mode, mos.g, far);
                    held = if mos.n { drive.lo > most } else { drive.hi < -most };
                    if !held {
                        return false;
                    }
                }
                _ => return false,
            }
        }
        held
    }

    fn note_mode(&self, mode: usize, state: &ModeState, density: Option<f64>, limits: &OnState) {
        if !self.in_words {
            return;
        }
        let name = self.world.reach.mode_name(mode);
        let in_mode = name.map_or(String::new(), |name| format!(" in mode `{name}`"));
        let density = density.map_or(String::new(), |density| format!(", at {}", show(density, Dim::DENSITY)));
        let limit = limits.density.map_or(String::new(), |limit| format!(" and {}", show(limit, Dim::DENSITY)));
        let what = format!(
            "vds {}{in_mode} while vgs is {}{density}: beyond {}{limit}",
            range_text(state.vds),
            range_text(state.vgs),
            show(limits.vds, Dim::VOLT)
        );
        self.note_what(what, name);
        self.note_state_pins();
    }

    fn has_noted(&self, key: &str) -> bool {
        let mut found = false;
        self.note(|evidence| found = evidence.values.iter().any(|(name, _)| name == key));
        found
    }

    fn note_what(&self, what: String, mode: Option<&str>) {
        self.note(|evidence| {
            evidence.values.retain(|(key, _)| key != "what");
            evidence.values.push(("what".into(), what));
            evidence.mode = mode.map(str::to_owned);
            evidence.modes = mode.map(str::to_owned).into_iter().collect();
        });
    }

    /// On in one mode and high in another: the changes between them pass through both at once.
    fn between_modes(&self, states: &[ModeState], limits: &OnState) -> Verdict {
        let reach = self.world.reach;
        let crossing = self.crossing(states);
        if crossing.is_empty() {
            let apart = |&(a, b): &(usize, usize)| a != b && states[a].on && states[b].high;
            let pairs = (0..states.len()).flat_map(|a| (0..states.len()).map(move |b| (a, b)));
            let Some((on, high)) = pairs.into_iter().find(apart) else { return Verdict::Holds };
            if !self.has_noted("what") {
                let name = |mode: usize| reach.mode_name(mode).unwrap_or("");
                let (on, high, limit) = (name(on), name(high), show(limits.vds, Dim::VOLT));
                let what = format!(
                    "it is on in mode `{on}` and above {limit} in mode `{high}`, and nothing says how long the change takes"
                );
                self.note_what(what, None);
            }
            return Verdict::Open(
                "declare the transitions between the modes in which it is on and those in which its drain is high (takes, rate)",
            );
        }
        let duty = duty_of(&crossing);
        if limits.duty.is_some_and(|limit| duty <= limit * (1.0 + 1e-9)) {
            return Verdict::Holds;
        }
        self.note_transitions(&crossing, duty, limits, states);
        Verdict::Broken
    }

    fn note_transitions(&self, crossing: &[&Transition], duty: f64, limits: &OnState, states: &[ModeState]) {
        if !self.in_words {
            return self.note(|evidence| evidence.badness = duty);
        }
        let modes = &self.world.deck.modes;
        let names: Vec<String> =
            crossing.iter().map(|t| format!("`{}` to `{}`", modes[t.from].name, modes[t.to].name)).collect();
        let allowed = limits
            .duty
            .map_or("no share of time is allowed".to_owned(), |duty| format!("{} is allowed", show_percent(duty)));
        let volts = states
            .iter()
            .map(|state| state.vds.hi.abs().max(state.vds.lo.abs()))
            .filter(|volts| volts.is_finite())
            .fold(0.0, f64::max);
        let loss = self.current().map_or(String::new(), |&Current { amps, .. }| {
            let watts: f64 = crossing.iter().map(|t| 0.5 * volts * amps * t.takes * t.rate).sum();
            format!(
                ", and loses {} at {} and {}",
                show(watts, Dim::WATT),
                show(volts, Dim::VOLT),
                show(amps, Dim::AMPERE)
            )
        });
        self.note_what(
            format!(
                "on and high together for {} of the time, going from {}: {allowed}{loss}",
                show_percent(duty),
                names.join(", ")
            ),
            None,
        );
        self.note(|evidence| {
            evidence.badness = duty;
            evidence.places.extend(crossing.iter().map(|t| {
                (t.place, format!("takes {}, {} times a second", show(t.takes, Dim::SECOND), show(t.rate, Dim::NONE)))
            }));
        });
        self.note_state_pins();
    }

    /// Whether known power while on stays below the class's limit; unknown where nothing bounds it.
    pub(super) fn power_held(&self) -> Value {
        let Some(limit) = self.class.on_state.and_then(|limits| limits.power) else { return self.undeclared() };
        let (Some(&Current { amps, exact, .. }), Some(on_state)) = (self.current(), self.class.on_state) else {
            return Value::Bool(true);
        };
        for mode in 0..self.world.reach.modes.len() {
            let Some(state) = self.mode_state(mode, on_state.vds).filter(|state| state.on) else { continue };
            let volts = state.vds.hi.max(-state.vds.lo);
            if exact && volts.is_finite() && amps * volts > limit * (1.0 + 1e-9) {
                let name = self.world.reach.mode_name(mode);
                let what = format!(
                    "{} at up to {} is {}: {} is allowed",
                    show(amps, Dim::AMPERE),
                    show(volts, Dim::VOLT),
                    show(amps * volts, Dim::WATT),
                    show(limit, Dim::WATT)
                );
                self.note_what(what, name);
                self.note_state_pins();
                self.note_current();
                return Value::Bool(false);
            }
        }
        Value::Bool(true)
    }

    /// The transitions between modes of which one has it on and one has it high.
    fn crossing(&self, states: &[ModeState]) -> Vec<&Transition> {
        let modes = &self.world.reach.modes;
        let state = |deck_mode: usize| modes.iter().position(|mode| *mode == Some(deck_mode)).map(|at| &states[at]);
        let crosses = |transition: &&Transition| match (state(transition.from), state(transition.to)) {
            (Some(from), Some(to)) => from.on && to.high || from.high && to.on,
            _ => false,
        };
        self.world.deck.transitions.iter().filter(crosses).collect()
    }

    /// The share of time that it spends between modes of which one has it on and one has it high.
    pub(super) fn duty(&self) -> Value {
        let Some(limits) = self.class.on_state else { return self.undeclared() };
        let states: Option<Vec<ModeState>> =
            (0..self.world.reach.modes.len()).map(|mode| self.mode_state(mode, limits.vds)).collect();
        match states {
            Some(states) => Value::Number { value: duty_of(&self.crossing(&states)), dim: Dim::NONE },
            None => self.undeclared(),
        }
    }

    /// Whether its gate can turn it on in some mode.
    pub(super) fn can_be_on(&self) -> Value {
        let modes = self.world.reach.modes.len();
        let states: Option<Vec<ModeState>> = (0..modes).map(|mode| self.mode_state(mode, 0.0)).collect();
        match states {
            Some(states) => Value::Bool(states.iter().any(|state| state.on)),
            None => self.undeclared(),
        }
    }
}

fn duty_of(crossing: &[&Transition]) -> f64 {
    crossing.iter().map(|transition| transition.takes * transition.rate).sum()
}
