//! Limited currents that pull nets which resistors hold: what caps on reach by currents stand on, and all that could break them
//! (channels that conduct backwards, body diodes, starved references, several pullers).

use crate::builder::{Builder, Pol};
use crate::rails::DomainKind;

fn pol(b: &mut Builder) -> Pol {
    if b.rng.chance(0.6) { Pol::N } else { Pol::P }
}

/// A resistor in a source: its net, below it the foot.
fn degeneration(b: &mut Builder, d: usize, foot: &str) -> (String, f64) {
    let (s, ohms) = (b.node(d), b.rng.decade(1e4, 2e5));
    b.res_of(&s, foot, ohms);
    (s, ohms)
}

/// Something beside a source: a device that shares it, a body or a junction on it, a second way out, a capacitor.
fn company(b: &mut Builder, d: usize, pol: Pol, s: &str) {
    let (foot, head) = b.ends(pol, d);
    let high = b.world.domains[d].kind == DomainKind::High;
    let class = match (pol, high) {
        (Pol::N, false) => "n5",
        (Pol::P, false) => "p5",
        (Pol::N, true) => "ldn60",
        (Pol::P, true) => "ldp60",
    };
    let other = b.signal(d);
    let either = if b.rng.chance(0.5) { foot.clone() } else { head };
    match b.rng.int(0, 6) {
        // It shares the source, and its drain may lie below.
        0 => {
            let dr = b.node(d);
            b.res(&dr, &either, 1e4, 3e5);
            b.mos(pol, d, &dr, &other, s);
        }
        // Idle as drawn, with its body here: its junction conducts where its drain is pulled below.
        1 => {
            let dr = b.node(d);
            b.res(&dr, &either, 1e3, 1e5);
            b.mos_with(class, [&dr, s, s, s]);
        }
        // Idle as drawn, body elsewhere: turned over it is a diode.
        2 => b.mos_with(class, [&other, s, s, &foot]),
        3 => b.mos_with(class, [s, &other, &other, &foot]),
        4 => {
            let far = b.signal(d);
            b.res(s, &far, 1e4, 5e5);
        }
        5 => b.cap(s, &foot),
        _ => {
            let dr = b.node(d);
            b.res(&dr, &other, 1e4, 1e6);
            b.mos(pol.other(), d, &dr, &foot, s);
        }
    }
}

/// A degenerated device pulls a net of its own or another domain, perhaps through a cascode; the drop stays within the domain, mostly.
pub(crate) fn degenerated(b: &mut Builder, d: usize) {
    let low = b.low();
    let (lo, hi) = (b.lo(low), b.hi(d));
    let g = b.signal(low);
    let (s, ohms) = degeneration(b, low, &lo);
    if b.rng.chance(0.4) {
        company(b, low, Pol::N, &s);
    }
    let y = b.output(d);
    let small = d == low;
    let pull = |b: &mut Builder, dr: &str, g: &str, s: &str| {
        if small { b.mos(Pol::N, low, dr, g, s) } else { b.ldn(dr, g, s) }
    };
    if b.rng.chance(0.3) {
        let (mid, vdd) = (b.node(low), b.hi(low));
        b.mos(Pol::N, low, &mid, &g, &s);
        pull(b, &y, &vdd, &mid);
    } else {
        pull(b, &y, &g, &s);
    }
    let share = b.rng.real(0.1, 1.2);
    b.res_of(&y, &hi, ohms * share);
    if b.rng.chance(0.3) {
        let (t, _) = degeneration(b, low, &lo);
        let g = b.signal(low);
        pull(b, &y, &g, &t);
    }
    if b.rng.chance(0.2) {
        b.cap(&y, &hi);
    }
}

/// Degenerated devices of both polarities pull one net, which a resistor holds to some rail.
pub(crate) fn opposed(b: &mut Builder, d: usize) {
    let y = b.output(d);
    let mut least = f64::INFINITY;
    for pol in [Pol::N, Pol::P] {
        if b.rng.chance(0.7) {
            let (foot, _) = b.ends(pol, d);
            let (s, ohms) = degeneration(b, d, &foot);
            let g = b.signal(d);
            b.mos(pol, d, &y, &g, &s);
            if b.rng.chance(0.3) {
                company(b, d, pol, &s);
            }
            least = least.min(ohms);
        }
    }
    let rails = b.world.rails.len();
    let rail = match b.rng.int(0, 2) {
        0 => b.lo(d),
        1 => b.hi(d),
        _ => {
            let at = b.rng.int(0, rails - 1);
            b.world.rails[at].name.clone()
        }
    };
    let share = b.rng.real(0.05, 0.6);
    b.res_of(&y, &rail, least.min(2e5) * share);
}

/// A mirror whose outputs pull resistors. The reference may be starved: by a cascode with a low gate, or a resistor at its drain; an output
/// may be starved by its load; one may have a resistor in its source.
pub(crate) fn sink(b: &mut Builder, d: usize) {
    let pol = pol(b);
    let (foot, head) = b.ends(pol, d);
    b.matching(|b| {
        let g = b.node(d);
        let ohms = b.rng.decade(1e5, 2e6);
        match b.rng.int(0, 3) {
            0 | 1 => b.mos(pol, d, &g, &g, &foot),
            2 => {
                let (mid, bias) = (b.node(d), b.signal(d));
                b.mos(pol, d, &mid, &g, &foot);
                b.mos(pol, d, &g, &bias, &mid);
            }
            _ => {
                let dr = b.node(d);
                b.mos(pol, d, &dr, &g, &foot);
                b.res_of(&g, &dr, ohms * 0.3);
            }
        }
        b.res_of(&g, &head, ohms);
        if b.rng.chance(0.25) {
            company(b, d, pol, &g);
        }
        for _ in 0..b.rng.int(1, 3) {
            let (out, share) = (b.output(d), b.rng.decade(0.01, 3.0));
            if b.rng.chance(0.2) {
                let (s, _) = degeneration(b, d, &foot);
                b.mos(pol, d, &out, &g, &s);
                if b.rng.chance(0.4) {
                    company(b, d, pol, &s);
                }
            } else {
                b.mos(pol, d, &out, &g, &foot);
            }
            b.res_of(&out, &head, ohms * share);
        }
    });
}

/// A current source into a resistor, with a degenerated device that pulls the same net.
pub(crate) fn fed(b: &mut Builder, d: usize) {
    let (lo, hi) = (b.lo(d), b.hi(d));
    let net = b.held(d);
    let (ohms, volts) = (b.rng.decade(2e4, 2e5), b.rng.real(0.1, 1.2));
    let (g, both) = (b.signal(d), b.rng.chance(0.6));
    if b.rng.chance(0.5) {
        b.res_of(&net, &lo, ohms);
        b.current(&hi, &net, volts / ohms);
        if both {
            let (s, _) = degeneration(b, d, &lo);
            b.mos(Pol::N, d, &net, &g, &s);
        }
    } else {
        b.res_of(&net, &hi, ohms);
        b.current(&net, &lo, volts / ohms);
        if both {
            let (s, _) = degeneration(b, d, &hi);
            b.mos(Pol::P, d, &net, &g, &s);
        }
    }
    let out = b.output(d);
    b.mos(Pol::P, d, &lo, &net, &out);
    b.res(&out, &hi, 1e5, 1e6);
}

/// A pair on a resistor or a mirror, its drains held to either supply: on the wrong one a half conducts backwards.
pub(crate) fn lopsided(b: &mut Builder, d: usize) {
    let pol = pol(b);
    let (foot, head) = b.ends(pol, d);
    let (tail, ohms) = degeneration(b, d, &foot);
    for _ in 0..2 {
        let (g, out, share) = (b.signal(d), b.output(d), b.rng.decade(0.05, 2.0));
        b.mos(pol, d, &out, &g, &tail);
        let to = if b.rng.chance(0.7) { &head } else { &foot };
        b.res_of(&out, to, ohms * share);
    }
}
