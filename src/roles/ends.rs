//! Which end of a symmetric device works as its drain.
//!
//! Extracted netlists name drain and source of a symmetric device in any order. A body on one of the two ends shows that as the
//! source; else the device is turned where its drawn drain never stands on the far side of its source in any mode.

use super::local::Roles;
use crate::design::{DeviceIx, NetIx};
use crate::graph::{Context, ContextIx};
use crate::reach::{ReachIx, Terminals};

/// Voltages closer than this are the same, volts.
const LEVEL: f64 = 1e-6;

/// What is known of a symmetric device's ends without voltages.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Drawn {
    /// As they work.
    Right,
    /// The other way round.
    Turned,
    /// Only voltages can tell.
    Open,
}

/// Whether a transistor is drawn as it works, by its class and its body.
pub(super) fn drawn(roles: &Roles<'_>, at: ContextIx, context: &Context, device: DeviceIx) -> Drawn {
    let template = roles.design().template(context.variant);
    let (_, Terminals::Mos { d, s, b, .. }) = roles.element(at, device) else { return Drawn::Right };
    if roles.design().class(template, device).is_some_and(|class| class.asymmetric) {
        return Drawn::Right;
    }
    let pins = template.device_pins(device);
    let Some(body) = b.map(|b| pins[b as usize]) else { return Drawn::Open };
    match (context.same(body, pins[d as usize]), context.same(body, pins[s as usize])) {
        (_, true) => Drawn::Right,
        (true, false) => Drawn::Turned,
        (false, false) => Drawn::Open,
    }
}

/// Whether drain and source of a transistor work the other way round than they are drawn.
pub(super) fn is_turned(roles: &Roles<'_>, at: ReachIx, device: DeviceIx) -> bool {
    let context = roles.reach.get(at).context;
    match drawn(roles, context, roles.reach.contexts.get(context), device) {
        Drawn::Right => false,
        Drawn::Turned => true,
        Drawn::Open => works_backwards(roles, at, context, device),
    }
}

fn works_backwards(roles: &Roles<'_>, at: ReachIx, context: ContextIx, device: DeviceIx) -> bool {
    let (_, Terminals::Mos { d, s, n, .. }) = roles.element(context, device) else { return false };
    let pins = roles.design().template(roles.reach.contexts.get(context).variant).device_pins(device);
    let (drain, source): (NetIx, NetIx) = (pins[d as usize], pins[s as usize]);
    let mut some = false;
    for mode in 0..roles.reach.modes.len() {
        let drop = roles.reach.between(at, mode, drain, source);
        let drop = if n { drop } else { drop.negated() };
        if drop.hi > LEVEL {
            return false;
        }
        some |= drop.lo < -LEVEL;
    }
    some
}
