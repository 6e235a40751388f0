//! Logic and switches: nets that go from rail to rail, and nets that a switch ties to one signal or another.

use crate::builder::{Builder, Pol};
use crate::rails::DomainKind;

fn small(b: &Builder, d: usize) -> bool {
    b.world.domains[d].kind != DomainKind::High
}

pub(crate) fn inverter(b: &mut Builder, d: usize) {
    let a = b.signal(d);
    invert(b, d, &a);
}

/// Gives the net of the inverted signal.
pub(crate) fn invert(b: &mut Builder, d: usize, a: &str) -> String {
    let y = b.output(d);
    let (lo, hi) = (b.lo(d), b.hi(d));
    if small(b, d) && b.rng.chance(0.4) {
        b.cell("inv", &[a, &y, &hi, &lo], 2);
    } else {
        b.mos(Pol::P, d, &y, a, &hi);
        b.mos(Pol::N, d, &y, a, &lo);
    }
    y
}

pub(crate) fn buffer(b: &mut Builder, d: usize) {
    let a = b.signal(d);
    if !small(b, d) {
        let y = invert(b, d, &a);
        invert(b, d, &y);
        return;
    }
    let y = b.output(d);
    let (lo, hi) = (b.lo(d), b.hi(d));
    let x = b.cell("buf", &[&a, &y, &hi, &lo], 4);
    b.inner(&x, "ab", d);
}

/// Two inputs; the series devices are N for a NAND, P for a NOR.
pub(crate) fn gate(b: &mut Builder, d: usize) {
    let (p, q) = (b.signal(d), b.signal(d));
    let y = b.output(d);
    if small(b, d) && b.rng.chance(0.4) {
        let (lo, hi) = (b.lo(d), b.hi(d));
        let x = b.cell("nand", &[&p, &q, &y, &hi, &lo], 4);
        b.inner(&x, "mid", d);
        return;
    }
    let series = if b.rng.chance(0.5) { Pol::N } else { Pol::P };
    let (foot, head) = b.ends(series, d);
    let mid = b.node(d);
    b.mos(series, d, &y, &p, &mid);
    b.mos(series, d, &mid, &q, &foot);
    b.mos(series.other(), d, &y, &p, &head);
    b.mos(series.other(), d, &y, &q, &head);
}

fn both(b: &mut Builder, d: usize, from: &str, to: &str, on: &str, off: &str) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let (n, p) = if small(b, d) { ("n5", "p5") } else { ("ldn60", "ldp60") };
    let (nb, pb) = if small(b, d) { (lo.as_str(), hi.as_str()) } else { (from, from) };
    b.mos_with(n, [to, on, from, nb]);
    b.mos_with(p, [to, off, from, pb]);
}

pub(crate) fn transmission(b: &mut Builder, d: usize) {
    let (from, on) = (b.signal(d), b.signal(d));
    let off = invert(b, d, &on);
    let to = b.output(d);
    if small(b, d) {
        both(b, d, &from, &to, &on, &off);
    } else {
        // Bodies on the source side would shorten the switch: 60 V devices pass one way only.
        b.ldn(&to, &on, &from);
    }
    match b.rng.int(0, 3) {
        0 => b.res(&to, &b.lo(d), 3e5, 3e6),
        1 => b.res(&to, &b.hi(d), 3e5, 3e6),
        _ => {}
    }
}

pub(crate) fn multiplexer(b: &mut Builder, d: usize) {
    let (p, q, on) = (b.signal(d), b.signal(d), b.signal(d));
    let off = invert(b, d, &on);
    let to = b.output(d);
    both(b, d, &p, &to, &on, &off);
    both(b, d, &q, &to, &off, &on);
}

/// One device passes the signal, short of a threshold, against a resistor.
pub(crate) fn pass(b: &mut Builder, d: usize) {
    let pol = if b.rng.chance(0.5) { Pol::N } else { Pol::P };
    let (from, on) = (b.signal(d), b.signal(d));
    let to = b.output(d);
    b.mos(pol, d, &from, &on, &to);
    let (foot, _) = b.ends(pol, d);
    b.res(&to, &foot, 2e5, 2e6);
}

/// Two crossed inverters that two devices set and reset.
pub(crate) fn latch(b: &mut Builder, d: usize) {
    let set = b.signal(d);
    let reset = invert(b, d, &set);
    let (q, qb) = (b.output(d), b.output(d));
    let (lo, hi) = (b.lo(d), b.hi(d));
    for (y, a, pull) in [(&q, &qb, &reset), (&qb, &q, &set)] {
        b.mos(Pol::P, d, y, a, &hi);
        b.mos(Pol::N, d, y, a, &lo);
        b.mos(Pol::N, d, y, pull, &lo);
    }
}

/// Two crossed inverters that a pass device writes: while it is off they keep what they were left with.
pub(crate) fn keeper(b: &mut Builder, d: usize) {
    let (data, write) = (b.signal(d), b.signal(d));
    let (q, qb) = (b.output(d), b.output(d));
    let (lo, hi) = (b.lo(d), b.hi(d));
    for (y, a) in [(&q, &qb), (&qb, &q)] {
        b.mos(Pol::P, d, y, a, &hi);
        b.mos(Pol::N, d, y, a, &lo);
    }
    b.mos_with("n5", [&q, &write, &data, &lo]);
}

/// A gate or input held by a resistor, pulled by one switch.
pub(crate) fn pulled(b: &mut Builder, d: usize) {
    let pol = if b.rng.chance(0.5) { Pol::N } else { Pol::P };
    let on = b.signal(d);
    let y = b.output(d);
    let (foot, head) = b.ends(pol, d);
    b.mos(pol, d, &y, &on, &foot);
    b.res(&y, &head, 1e5, 1e6);
}
