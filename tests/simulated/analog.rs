//! Analog building blocks: mirrors, followers, pairs, gain stages, dividers, stacks.

use crate::builder::{Builder, Pol};
use crate::rails::DomainKind;

fn pol(b: &mut Builder) -> Pol {
    if b.rng.chance(0.6) { Pol::N } else { Pol::P }
}

/// A reference: a diode-connected device fed by a current source or a resistor. Gives the net of the gates.
fn reference(b: &mut Builder, d: usize, pol: Pol) -> String {
    let (foot, head) = b.ends(pol, d);
    if b.world.domains[d].solid && b.rng.chance(0.6) {
        let g = b.held(d);
        b.mos(pol, d, &g, &g, &foot);
        let amps = b.rng.decade(1e-6, 2e-5);
        match pol {
            Pol::N => b.current(&head, &g, amps),
            Pol::P => b.current(&g, &head, amps),
        }
        g
    } else {
        let g = b.node(d);
        b.mos(pol, d, &g, &g, &foot);
        b.res(&g, &head, 1e5, 2e6);
        g
    }
}

fn load(b: &mut Builder, d: usize, pol: Pol, out: &str) {
    let (_, head) = b.ends(pol, d);
    match b.rng.int(0, 2) {
        0 => b.mos(pol.other(), d, out, out, &head),
        _ => b.res(out, &head, 3e4, 1e6),
    }
}

pub(crate) fn mirror(b: &mut Builder, d: usize) {
    let pol = pol(b);
    b.matching(|b| {
        let g = reference(b, d, pol);
        let (foot, _) = b.ends(pol, d);
        for _ in 0..b.rng.int(1, 3) {
            let out = b.output(d);
            b.mos(pol, d, &out, &g, &foot);
            load(b, d, pol, &out);
        }
    });
}

/// Reference and output with a cascode each, both diode-connected on the reference side.
pub(crate) fn cascode_mirror(b: &mut Builder, d: usize) {
    let pol = pol(b);
    let (foot, head) = b.ends(pol, d);
    b.matching(|b| {
        let (g, gc, mid) = (b.node(d), b.node(d), b.node(d));
        let out = b.output(d);
        b.mos(pol, d, &g, &g, &foot);
        b.mos(pol, d, &gc, &gc, &g);
        b.res(&gc, &head, 2e5, 2e6);
        b.mos(pol, d, &mid, &g, &foot);
        b.mos(pol, d, &out, &gc, &mid);
        load(b, d, pol, &out);
    });
}

pub(crate) fn follower(b: &mut Builder, d: usize) {
    let pol = pol(b);
    let g = b.signal(d);
    let out = b.output(d);
    let (foot, head) = b.ends(pol, d);
    b.mos(pol, d, &head, &g, &out);
    if b.rng.chance(0.7) {
        b.res(&out, &foot, 1e5, 2e6);
    } else {
        b.matching(|b| {
            let tail = reference(b, d, pol);
            b.mos(pol, d, &out, &tail, &foot);
        });
    }
}

pub(crate) fn divider(b: &mut Builder, d: usize) {
    let top = if b.rng.chance(0.6) { b.hi(d) } else { b.signal(d) };
    let foot = if b.rng.chance(0.7) { b.lo(d) } else { b.signal(d) };
    let mut above = top;
    for _ in 0..b.rng.int(1, 3) {
        let tap = b.output(d);
        b.res(&above, &tap, 2e4, 5e5);
        above = tap;
    }
    b.res(&above, &foot, 2e4, 5e5);
}

/// Diode-connected devices and diodes in series, under a resistor.
pub(crate) fn stack(b: &mut Builder, d: usize) {
    let pol = pol(b);
    let (foot, head) = b.ends(pol, d);
    let mut at = foot;
    for _ in 0..b.rng.int(1, 3) {
        let next = b.node(d);
        match (b.rng.chance(0.7), pol) {
            (true, _) => b.mos(pol, d, &next, &next, &at),
            (false, Pol::N) => b.diode(&next, &at),
            (false, Pol::P) => b.diode(&at, &next),
        }
        at = next;
    }
    b.res(&at, &head, 2e5, 2e6);
}

/// A differential pair; its tail a resistor or a mirror, its loads resistors or a mirror.
pub(crate) fn pair(b: &mut Builder, d: usize) {
    let pol = pol(b);
    let (foot, head) = b.ends(pol, d);
    let (left, right) = (b.signal(d), b.signal(d));
    let (tail, a, out) = (b.node(d), b.node(d), b.output(d));
    if b.rng.chance(0.5) {
        b.res(&tail, &foot, 1e5, 1e6);
    } else {
        b.matching(|b| {
            let g = reference(b, d, pol);
            b.mos(pol, d, &tail, &g, &foot);
        });
    }
    b.matching(|b| {
        b.mos(pol, d, &a, &left, &tail);
        b.mos(pol, d, &out, &right, &tail);
        if b.rng.chance(0.5) {
            b.mos(pol.other(), d, &a, &a, &head);
            b.mos(pol.other(), d, &out, &a, &head);
        } else {
            b.res(&a, &head, 5e4, 5e5);
            b.res(&out, &head, 5e4, 5e5);
        }
    });
}

/// A common-source stage with a resistor load, with or without degeneration, with or without a cascode.
pub(crate) fn gain(b: &mut Builder, d: usize) {
    let pol = pol(b);
    let (foot, head) = b.ends(pol, d);
    let g = b.signal(d);
    let source = if b.rng.chance(0.5) {
        let s = b.node(d);
        b.res(&s, &foot, 1e4, 2e5);
        s
    } else {
        foot
    };
    let out = b.output(d);
    if b.rng.chance(0.3) {
        let mid = b.node(d);
        b.mos(pol, d, &mid, &g, &source);
        let bias = b.signal(d);
        b.mos(pol, d, &out, &bias, &mid);
    } else {
        b.mos(pol, d, &out, &g, &source);
    }
    b.res(&out, &head, 5e4, 1e6);
}

/// A current source into a resistor, read by a follower.
pub(crate) fn drop(b: &mut Builder, d: usize) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let net = b.held(d);
    let (ohms, volts) = (b.rng.decade(5e4, 5e5), b.rng.real(0.3, 2.0));
    b.res_of(&net, &lo, ohms);
    b.current(&hi, &net, volts / ohms);
    let out = b.output(d);
    b.mos(Pol::P, d, &lo, &net, &out);
    b.res(&out, &hi, 1e5, 1e6);
}

pub(crate) fn npn_follower(b: &mut Builder, d: usize) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let from = b.signal(d);
    let (base, out) = (b.node(d), b.output(d));
    b.res(&from, &base, 1e4, 1e5);
    b.npn(&hi, &base, &out);
    b.res(&out, &lo, 5e4, 5e5);
}

pub(crate) fn npn_switch(b: &mut Builder, d: usize) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let from = b.signal(d);
    let (base, out) = (b.node(d), b.output(d));
    b.res(&from, &base, 1e5, 1e6);
    b.npn(&out, &base, &lo);
    b.res(&out, &hi, 5e4, 5e5);
}

/// A voltage source between two nets that are no rails.
pub(crate) fn offset(b: &mut Builder, d: usize) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let (p, n) = (b.node(d), b.node(d));
    let volts = b.rng.volts(0.1, 1.5);
    b.volt(&p, &n, volts);
    b.res(&p, &hi, 1e5, 1e6);
    b.res(&n, &lo, 1e5, 1e6);
    let small = b.world.domains[d].kind != DomainKind::High;
    if small {
        let out = b.output(d);
        b.mos(Pol::N, d, &hi, &p, &out);
        b.res(&out, &lo, 1e5, 1e6);
    }
}
