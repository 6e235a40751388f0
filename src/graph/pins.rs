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
    /// Nets whose pins are left out, in order.
    crowded: Vec<u32>,
}

/// The mark of an instance in the packed pin number.
const INSTANCE: u32 = 1 << 31;

impl PinTable {
    /// All nets of a cell.
    pub fn new(template: &Template) -> PinTable {
        PinTable::rooted(template, &|net| net, usize::MAX)
    }

    /// Counts, then fills: two passes, no allocation per net. `root` says which net stands for those that are one with it; the
    /// pins of nets with more than `most` are left out.
    pub fn rooted(template: &Template, root: &dyn Fn(NetIx) -> NetIx, most: usize) -> PinTable {
        let mut counts = vec![0u32; template.nets.len()];
        visit(template, |net, _, _| counts[root(net).0 as usize] += 1);
        let mut crowded = Vec::new();
        let mut first = Vec::with_capacity(counts.len() + 1);
        let mut total = 0;
        first.push(0);
        for (net, &count) in (0u32..).zip(&counts) {
            match count as usize > most {
                true => crowded.push(net),
                false => total += count,
            }
            first.push(total);
        }
        let mut next = counts;
        next.copy_from_slice(&first[..first.len() - 1]);
        let mut pins = vec![(0, 0); total as usize];
        visit(template, |net, owner, pin| {
            let net = root(net).0;
            let at = &mut next[net as usize];
            if crowded.binary_search(&net).is_err() {
                pins[*at as usize] = (owner, pin);
                *at += 1;
            }
        });
        PinTable { first, pins, crowded }
    }

    /// Whether a net has too many pins to be listed.
    pub fn is_crowded(&self, net: NetIx) -> bool {
        self.crowded.binary_search(&net.0).is_ok()
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
