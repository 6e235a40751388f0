//! Orientation: does the drain ever stand on the side that it is made for?

use super::DeviceView;
use super::ratings::range_text;
use crate::declared::Kind;
use crate::expr::Value;

impl DeviceView<'_> {
    /// Whether an asymmetric device stands the wrong way round: in no mode can its drain be on the blocking side of its source
    /// (above it; below for PMOS), and in some mode it can be on the other.
    ///
    /// A mode in which drain and source are surely level says nothing either way. Where the device's body is on its drain, its
    /// body diode conducts before the drain can block anything, whatever the ranges of the two nets say.
    pub(super) fn is_swapped(&self) -> Value {
        let (Some(d), Some(s)) = (self.class.pin("d"), self.class.pin("s")) else { return Value::Bool(false) };
        let on = |pin: usize| self.net(pin).map(|net| self.context().root(net));
        let body = self.class.pin("b").and_then(on);
        let body_on = |pin: usize| body.is_some() && body == on(pin);
        let never_blocks = body_on(d) && !body_on(s);
        let (mut unknown, mut wrong) = (false, None);
        for mode in 0..self.world.reach.modes.len() {
            let drop = self.voltage(mode, d, s);
            let drop = if self.class.kind == Kind::Pmos { drop.negated() } else { drop };
            match drop.known_hi() {
                Some(hi) if hi > 1e-6 && !never_blocks => return Value::Bool(false),
                Some(_) if drop.known_lo().is_none() => unknown = true,
                Some(_) if drop.lo < -1e-6 => wrong = wrong.or(Some(mode)),
                Some(_) => {}
                None => unknown = true,
            }
        }
        if unknown {
            self.note_unknown_nets(&[d, s]);
            return Value::Unknown;
        }
        let Some(mode) = wrong else { return Value::Bool(false) };
        self.note(|evidence| {
            evidence.pins = vec![d, s];
            evidence.mode = self.world.reach.mode_name(mode).map(str::to_owned);
            evidence.values = vec![
                ("vds_range".into(), range_text(self.voltage(mode, d, s))),
                ("d_reach".into(), self.reach_text(mode, d)),
                ("s_reach".into(), self.reach_text(mode, s)),
            ];
        });
        self.note_rails(mode, &[d, s]);
        Value::Bool(true)
    }
}
