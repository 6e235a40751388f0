//! What stands on a net: for each net of a cell, the device pins on it, in one flat table.

use crate::design::{DeviceIx, InstanceIx, NetIx, Template};

/// Something that touches a net.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Pin {
    /// Pin `.1` of a device.
    Device(DeviceIx, u8),
    /// Boundary position `.1` of an instance.
    Instance(InstanceIx, u32),
}

/// The device pins and instance ports on each net of a cell. 4 bytes a net and 8 a pin.
#[derive(Clone, Debug, Default)]
pub struct PinTable {
    first: Vec<u32>,
    pins: Vec<(u32, u32)>,
}

/// The mark of an instance in the packed pin number.
const INSTANCE: u32 = 1 << 31;

impl PinTable {
    /// Counts, then fills: two passes, no allocation per net.
    pub fn new(template: &Template) -> PinTable {
        let mut first = vec![0u32; template.nets.len() + 1];
        visit(template, |net, _, _| first[net.0 as usize + 1] += 1);
        for at in 1..first.len() {
            first[at] += first[at - 1];
        }
        let mut next = first.clone();
        let mut pins = vec![(0, 0); first.last().copied().unwrap_or(0) as usize];
        visit(template, |net, owner, pin| {
            let at = &mut next[net.0 as usize];
            pins[*at as usize] = (owner, pin);
            *at += 1;
        });
        PinTable { first, pins }
    }

    /// What stands on a net.
    pub fn on(&self, net: NetIx) -> impl Iterator<Item = Pin> + '_ {
        let range = self.first[net.0 as usize] as usize..self.first[net.0 as usize + 1] as usize;
        self.pins[range].iter().map(|&(owner, pin)| {
            if pin & INSTANCE == 0 {
                Pin::Device(DeviceIx(owner), pin as u8)
            } else {
                Pin::Instance(InstanceIx(owner), pin & !INSTANCE)
            }
        })
    }

    /// How many pins stand on a net.
    pub fn count(&self, net: NetIx) -> usize {
        (self.first[net.0 as usize + 1] - self.first[net.0 as usize]) as usize
    }
}

fn visit(template: &Template, mut each: impl FnMut(NetIx, u32, u32)) {
    for device in template.devices() {
        for (pin, &net) in template.device_pins(device).iter().enumerate() {
            each(net, device.0, pin as u32);
        }
    }
    for instance in template.instance_indices() {
        for (position, &net) in template.instance_pins(instance).iter().enumerate() {
            each(net, instance.0, position as u32 | INSTANCE);
        }
    }
}
