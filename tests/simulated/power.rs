//! Where 5 V and 60 V meet: switches, cascodes that protect, level shifters, regulators, clamps.

use crate::builder::{Builder, Pol};
use crate::logic;
use crate::rails::DomainKind;

/// A low-side 60 V switch with a resistor to the high supply.
pub(crate) fn low_side(b: &mut Builder, d: usize) {
    let low = b.low();
    let g = b.signal(low);
    let out = b.output(d);
    let (lo, hi) = (b.lo(d), b.hi(d));
    b.ldn(&out, &g, &lo);
    b.res(&out, &hi, 1e4, 5e5);
}

/// A 5 V device under a 60 V cascode that protects it.
pub(crate) fn shield(b: &mut Builder, d: usize) {
    let low = b.low();
    let g = b.signal(low);
    let gate = if b.rng.chance(0.7) { b.hi(low) } else { b.signal(low) };
    let (lo, hi) = (b.lo(d), b.hi(d));
    let mid = b.node(low);
    let out = b.output(d);
    b.mos(Pol::N, low, &mid, &g, &lo);
    b.ldn(&out, &gate, &mid);
    b.res(&out, &hi, 5e4, 5e5);
}

/// Pulls a bounded current (a source resistor) through a resistor in a floating domain.
pub(crate) fn shift_bounded(b: &mut Builder, d: usize) {
    let low = b.low();
    let g = b.signal(low);
    let (lo, hi) = (b.lo(low), b.hi(d));
    let s = b.node(low);
    let y = b.output(d);
    let ohms = b.rng.decade(2e4, 2e5);
    // At most about 4.9 V on the gate and 0.7 V of threshold: the drop stays within the domain.
    let share = b.rng.real(0.4, 0.95);
    b.res_of(&s, &lo, ohms);
    b.ldn(&y, &g, &s);
    b.res_of(&y, &hi, ohms * share);
    logic::invert(b, d, &y);
}

/// Pulls a current that only a series resistor bounds; a zener keeps the pulled net inside its domain.
pub(crate) fn shift_clamped(b: &mut Builder, d: usize) {
    let low = b.low();
    let g = b.signal(low);
    let (lo, dlo, dhi) = (b.lo(low), b.lo(d), b.hi(d));
    let dr = b.node(d);
    let y = b.output(d);
    b.ldn(&dr, &g, &lo);
    b.res(&dr, &y, 5e4, 5e5);
    b.res(&y, &dhi, 5e4, 5e5);
    match b.rng.int(0, 2) {
        0 => b.zener(&y, &dhi),
        1 => b.diode(&dlo, &y),
        _ => {
            b.zener(&y, &dhi);
            b.diode(&dlo, &y);
        }
    }
    logic::invert(b, d, &y);
}

/// The mirrored current of a source, pulled through a resistor of another domain by a 60 V cascode.
pub(crate) fn shift_mirror(b: &mut Builder, d: usize) {
    let low = b.low();
    if !b.world.domains[low].solid {
        return low_side(b, d);
    }
    let (lo, vdd, dhi) = (b.lo(low), b.hi(low), b.hi(d));
    let (g, mid, y) = (b.held(low), b.node(low), b.output(d));
    let amps = b.rng.decade(2e-6, 2e-5);
    b.matching(|b| {
        b.current(&vdd, &g, amps);
        b.mos_with("n5", [&g, &g, &lo, &lo]);
        b.mos_with("n5", [&mid, &g, &lo, &lo]);
    });
    b.ldn(&y, &vdd, &mid);
    let volts = b.rng.real(0.5, 2.0);
    b.res_of(&y, &dhi, volts / amps);
    logic::invert(b, d, &y);
}

/// Crossed 60 V PMOS over two switches; resistors bound the current, zeners the gates.
pub(crate) fn shift_crossed(b: &mut Builder, d: usize) {
    let low = b.low();
    let a = b.signal(low);
    let ab = logic::invert(b, low, &a);
    let (lo, hi) = (b.lo(d), b.hi(d));
    let (y, yb) = (b.output(d), b.output(d));
    let clamps = b.rng.chance(0.5);
    for (out, gate, on) in [(&y, &yb, &a), (&yb, &y, &ab)] {
        b.ldp(out, gate, &hi);
        if clamps {
            let dr = b.node(d);
            b.ldn(&dr, on, &lo);
            b.res(&dr, out, 1e5, 3e5);
            b.zener(out, &hi);
            b.res(out, &hi, 2e5, 2e6);
        } else {
            b.ldn(out, on, &lo);
        }
    }
}

/// A high-side PMOS whose gate a resistor and a zener hold to its source, with a load.
pub(crate) fn high_side(b: &mut Builder, d: usize) {
    let low = b.low();
    let on = b.signal(low);
    let (lo, hi) = (b.lo(d), b.hi(d));
    let (dr, g, out) = (b.node(d), b.node(d), b.output(d));
    b.ldn(&dr, &on, &lo);
    b.res(&dr, &g, 5e4, 2e5);
    b.res(&g, &hi, 5e4, 5e5);
    b.zener(&g, &hi);
    b.ldp(&out, &g, &hi);
    b.res(&out, &lo, 1e4, 1e6);
}

/// A zener reference and a 60 V follower: a low supply made from the high one. Later cells may stand on it.
pub(crate) fn regulator(b: &mut Builder, d: usize) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let (z, reg) = (b.node(d), b.node(d));
    b.res(&hi, &z, 1e5, 1e6);
    b.zener(&lo, &z);
    b.ldn(&hi, &z, &reg);
    b.res(&reg, &lo, 1e5, 1e6);
    let leak = b.world.domains[d].leak;
    b.new_domain(&lo, &reg, leak, DomainKind::Low);
}

/// Two supplies, the higher one wins.
pub(crate) fn diode_or(b: &mut Builder, d: usize) {
    let low = b.low();
    let out = b.output(d);
    b.diode(&b.hi(low), &out);
    let other = if b.rng.chance(0.5) { b.hi(d) } else { b.signal(d) };
    b.diode(&other, &out);
    b.res(&out, &b.lo(d), 1e5, 1e6);
}

/// Two 60 V devices, sources and gates joined, between the high supply and a load.
pub(crate) fn back_to_back(b: &mut Builder, d: usize) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let g = b.signal(d);
    let (mid, out) = (b.node(d), b.output(d));
    b.ldn(&hi, &g, &mid);
    b.ldn(&out, &g, &mid);
    b.res(&out, &lo, 5e4, 5e5);
}

/// The same with its gates held to the joined sources by a resistor and a zener, pulled up through a resistor.
pub(crate) fn back_to_back_held(b: &mut Builder, d: usize) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let (mid, out, g) = (b.node(d), b.output(d), b.node(d));
    b.ldn(&hi, &g, &mid);
    b.ldn(&out, &g, &mid);
    b.res(&hi, &g, 3e5, 1e6);
    b.res(&g, &mid, 1e5, 1e6);
    b.zener(&mid, &g);
    b.res(&out, &lo, 5e4, 5e5);
}

/// A gate held to the high supply by a resistor and clamped to ground, as of a start-up device.
pub(crate) fn start_up(b: &mut Builder, d: usize) {
    let low = b.low();
    let off = b.signal(low);
    let (lo, hi) = (b.lo(d), b.hi(d));
    let (g, out) = (b.node(low), b.output(d));
    b.res(&hi, &g, 5e5, 2e6);
    b.zener(&lo, &g);
    b.ldn(&g, &off, &lo);
    b.ldn(&out, &g, &lo);
    b.res(&out, &hi, 5e4, 5e5);
}

/// A half bridge in a floating domain: an inverter's output drives a 60 V device on the switching net.
pub(crate) fn bridge(b: &mut Builder, d: usize) {
    let Some(&high) = b.domains(|x| x.kind == DomainKind::High).first() else { return };
    let (sw, vin) = (b.lo(d), b.hi(high));
    let a = b.signal(d);
    let g = logic::invert(b, d, &a);
    if b.rng.chance(0.5) && sw == "sw" {
        b.ldn(&vin, &g, &sw);
    } else {
        // A sense device beside it, with a resistor of its own.
        let s = b.node(d);
        b.ldn(&vin, &g, &s);
        b.res(&s, &sw, 1e3, 1e4);
    }
}
