//! Kirchhoff's current law at one net.

use super::{By, Current, Currents, Step, declared_current};
use crate::roles::{Net, Role, Touch, Unit};

/// Two ends whose voltages differ by less than this carry nothing through a diode, volts.
const STILL: f64 = 0.3;

/// One current at a net: how much, which way (+1 into the net, −1 out of it, none where that is not known), and how it is known.
struct Part {
    current: Current,
    way: Option<f64>,
}

impl Currents<'_, '_> {
    /// What all other currents at a net leave for a channel that touches it; none where one of them is not known.
    pub(super) fn left_for(&mut self, unit: Unit, net: Net, touch: Touch) -> Option<Current> {
        let into = self.declared_into(net);
        if into.is_none() && (self.walker.is_rail(net) || self.walker.leads_out(net)) {
            return None;
        }
        let mut parts = Vec::new();
        let mut shared = false;
        if let Some(declared) = into {
            let way = if declared.amps.lo >= 0.0 { 1.0 } else { -1.0 };
            parts.push(Part { current: declared_current(declared, None)?, way: Some(way) });
        }
        let on = self.walker.on(net)?;
        // Devices in parallel to it, with all in common, share what there is by their widths.
        for on in on.iter().filter(|on| on.unit != unit) {
            match on.touch {
                Touch::Still | Touch::Body | Touch::Gate { .. } | Touch::Capacitor | Touch::Nothing => {}
                Touch::Anode | Touch::Cathode => {
                    if !self.is_still(on.unit) {
                        return None;
                    }
                }
                Touch::Source { .. } if on.touch == touch && self.shares_a_tail(unit, on.unit) => shared = true,
                _ => parts.push(self.part(on.unit, on.touch, net)?),
            }
        }
        self.sum(unit, touch, parts, shared)
    }

    fn sum(&mut self, unit: Unit, touch: Touch, mut parts: Vec<Part>, shared: bool) -> Option<Current> {
        let by_ratio = parts.iter().any(|part| part.current.by_ratio);
        let exact = !shared && parts.iter().all(|part| part.current.exact);
        let own = way(touch)?;
        let total = match parts.as_slice() {
            [] => return None,
            [only] => only.current.amps,
            all if exact && all.iter().all(|part| part.way.is_some()) => {
                // The channel carries what is left over, if that is the way it conducts.
                let left: f64 = all.iter().filter_map(|part| Some(part.way? * part.current.amps)).sum();
                (-own * left).max(0.0)
            }
            // Those that run the channel's own way only take from the others.
            all if all.iter().any(|part| part.way != Some(own)) => {
                all.iter().filter(|part| part.way != Some(own)).map(|part| part.current.amps).sum()
            }
            all => all.iter().map(|part| part.current.amps).sum(),
        };
        let exact = exact && (parts.len() == 1 || parts.iter().all(|part| part.way.is_some()));
        parts.sort_by(|a, b| b.current.amps.total_cmp(&a.current.amps));
        let mut steps = parts.swap_remove(0).current.steps;
        steps.push(Step { unit: Some(unit), place: None, amps: total, by: if exact { By::Sum } else { By::Most } });
        let while_switching = matches!(touch, Touch::Source { .. });
        Some(Current { amps: total, exact, by_ratio, while_switching, steps })
    }

    fn part(&mut self, unit: Unit, touch: Touch, net: Net) -> Option<Part> {
        match touch {
            Touch::Drain { .. } | Touch::Source { .. } => Some(Part { current: self.of(unit)?, way: way(touch) }),
            Touch::Resistor => Some(Part { current: self.through_resistor(unit)?, way: None }),
            Touch::CurrentSource => {
                let (lo, hi) = self.source_range(unit)?;
                let amps = lo.abs().max(hi.abs());
                // It takes its current from its first net to its second.
                let other = self.walker.other_end(unit, net)?;
                let first = self.walker.first_net(unit)?;
                let leaves = self.walker.same(first, net) && !self.walker.same(other, first);
                let sign = if leaves { -1.0 } else { 1.0 };
                let way = if lo >= 0.0 {
                    Some(sign)
                } else if hi <= 0.0 {
                    Some(-sign)
                } else {
                    None
                };
                let step = Step { unit: Some(unit), place: None, amps, by: By::Source };
                Some(Part {
                    current: Current {
                        amps,
                        exact: lo == hi,
                        by_ratio: false,
                        while_switching: true,
                        steps: vec![step],
                    },
                    way,
                })
            }
            _ => None,
        }
    }

    pub(super) fn source_range(&mut self, unit: Unit) -> Option<(f64, f64)> {
        let variant = self.walker.context(unit.spot).variant;
        let design = self.walker.ground.design();
        let copies = design.copies(variant, unit.device)?;
        let (lo, hi) = design.source_range(variant, unit.device)?;
        Some((lo * copies, hi * copies))
    }

    /// The most that a resistor carries in any mode.
    pub(super) fn through_resistor(&mut self, unit: Unit) -> Option<Current> {
        let ohms = self.resistance(unit)?;
        let first = self.walker.first_net(unit)?;
        let other = self.walker.other_end(unit, first)?;
        let (mut most, mut least) = (0.0f64, f64::INFINITY);
        for mode in 0..self.walker.ground.reach.modes.len() {
            let across = self.walker.volts(mode, first, other);
            most = most.max(across.hi.abs()).max(across.lo.abs());
            least = least.min(across.hi.abs()).min(across.lo.abs());
        }
        let amps = most / ohms;
        let step = Step { unit: Some(unit), place: None, amps, by: By::Resistor };
        let exact = most - least <= 1e-9 * most;
        (amps.is_finite() && least.is_finite()).then(|| Current {
            amps,
            exact,
            by_ratio: false,
            while_switching: true,
            steps: vec![step],
        })
    }

    /// A resistor's value, ohms, all copies in parallel.
    pub(super) fn resistance(&mut self, unit: Unit) -> Option<f64> {
        let variant = self.walker.context(unit.spot).variant;
        let design = self.walker.ground.design();
        let ohms = design.resistance(variant, unit.device)?;
        (ohms > 0.0 && ohms.is_finite()).then_some(ohms)
    }

    /// Whether two devices are the halves of one pair, or stand in parallel in all but their gates.
    fn shares_a_tail(&mut self, unit: Unit, other: Unit) -> bool {
        self.walker.plays(unit, Role::Pair) && self.walker.plays(other, Role::Pair)
    }

    /// Whether a diode surely does not conduct, in any mode.
    pub(super) fn is_still(&mut self, unit: Unit) -> bool {
        let Some(class) = self.walker.class(unit) else { return false };
        let (Some(a), Some(k)) = (class.pin("a"), class.pin("k")) else { return false };
        let reach = self.walker.ground.reach;
        let at = self.walker.spot(unit.spot).at;
        let pins = reach.design.template(self.walker.context(unit.spot).variant).device_pins(unit.device);
        (0..reach.modes.len()).all(|mode| {
            let reverse = reach.between(at, mode, pins[k], pins[a]);
            let breaks = class.clamp.map_or(f64::INFINITY, |clamp| clamp.hi);
            reverse.lo >= -STILL && (breaks == f64::INFINITY || reverse.hi < breaks)
        })
    }
}

/// Which way a channel's current runs at a net: into it, or out of it.
fn way(touch: Touch) -> Option<f64> {
    match touch {
        Touch::Drain { n } => Some(if n { -1.0 } else { 1.0 }),
        Touch::Source { n } => Some(if n { 1.0 } else { -1.0 }),
        _ => None,
    }
}
