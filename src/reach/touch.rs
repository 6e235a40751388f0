//! Who must be asked again when a net's range grows. Rails never grow, so their pins are in no list: nothing walks a rail.

use crate::design::{DeviceIx, InstanceIx, NetIx, Template};
use crate::graph::Context;

/// Something on a net.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Toucher {
    Device(DeviceIx),
    Instance(InstanceIx),
}

/// The mark of an instance.
const INSTANCE: u32 = 1 << 31;

/// For each net that can grow, the devices and instances on it: 4 bytes a net and 4 a pin.
pub(super) struct Touches {
    first: Vec<u32>,
    touchers: Vec<u32>,
}

impl Touches {
    /// Counts, then fills.
    pub(super) fn new(template: &Template, context: &Context, fixed: &[bool]) -> Touches {
        let mut first = vec![0u32; template.nets.len() + 1];
        visit(template, context, fixed, |net, _| first[net as usize + 1] += 1);
        for at in 1..first.len() {
            first[at] += first[at - 1];
        }
        let mut touchers = vec![0; first.last().copied().unwrap_or(0) as usize];
        let mut next = first.clone();
        visit(template, context, fixed, |net, who| {
            touchers[next[net as usize] as usize] = who;
            next[net as usize] += 1;
        });
        Touches { first, touchers }
    }

    pub(super) fn on(&self, net: NetIx) -> impl Iterator<Item = Toucher> + '_ {
        let range = self.first[net.0 as usize] as usize..self.first[net.0 as usize + 1] as usize;
        self.touchers[range].iter().map(|&who| match who & INSTANCE {
            0 => Toucher::Device(DeviceIx(who)),
            _ => Toucher::Instance(InstanceIx(who & !INSTANCE)),
        })
    }
}

fn visit(template: &Template, context: &Context, fixed: &[bool], mut each: impl FnMut(u32, u32)) {
    let mut all = |pins: &[NetIx], who: u32| {
        for (at, &net) in pins.iter().enumerate() {
            let net = context.root(net);
            if !fixed[net.0 as usize] && !pins[..at].iter().any(|&other| context.root(other) == net && pins.len() < 16)
            {
                each(net.0, who);
            }
        }
    };
    for device in template.devices() {
        all(template.device_pins(device), device.0);
    }
    for instance in template.instance_indices() {
        all(template.instance_pins(instance), instance.0 | INSTANCE);
    }
}
