//! Orientation: does the drain ever stand on the side that it is made for?

use super::DeviceView;
use super::ratings::range_text;
use crate::declared::Kind;
use crate::expr::Value;

impl DeviceView<'_> {
    /// Whether an asymmetric device stands the wrong way round: in no mode can its drain be on the blocking side of its source
    /// (above it; below for PMOS), and in some mode it can be on the other.
    ///
    /// A mode in which drain and source are surely level says nothing either way.
    pub(super) fn is_swapped(&self) -> Value {
        let (Some(d), Some(s)) = (self.class.pin("d"), self.class.pin("s")) else { return Value::Bool(false) };
        if self.glance().can_block(d, s) {
            return Value::Bool(false);
        }
        let (mut unknown, mut wrong) = (false, None);
        for mode in 0..self.world.reach.modes.len() {
            let drop = self.voltage(mode, d, s);
            let drop = if self.class.kind == Kind::Pmos { drop.negated() } else { drop };
            match drop.known_hi() {
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
