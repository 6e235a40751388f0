//! The patterns that random circuits are made of: each takes signals from the pools, adds devices, and gives its outputs back.
//! Textbook building blocks all (common practice, no source); the currents stay where a diode carries less than 0.9 V.

use super::circuit::Circuit;
use super::prng::Prng;

type Pattern = fn(&mut Circuit, &mut Prng);

const LOW: [Pattern; 13] = [
    inverter,
    chain,
    gate,
    mirror_n,
    mirror_p,
    follower,
    follower_p,
    divider,
    transmission_gate,
    clamp,
    diode_or,
    latch,
    stray,
];
const HIGH: [Pattern; 9] =
    [cascode, step_up, switch_low, switch_high, follower_high, divider_high, clamp_high, mirror_high, diode_high];
const FLOATING: [Pattern; 6] = [inverter_floating, chain_floating, driver, shift_up, shift_up, clamp_floating];

/// Adds one pattern, of those that the circuit's domains allow.
pub(crate) fn add_one(c: &mut Circuit, r: &mut Prng) {
    let domain = r.unit();
    let from: &[Pattern] = match () {
        () if c.floats() && domain < 0.35 => &FLOATING,
        () if c.is_high() && domain < 0.65 => &HIGH,
        () => &LOW,
    };
    r.pick(from)(c, r);
}

fn low(c: &Circuit, r: &mut Prng) -> String {
    r.pick(&c.pools.low).clone()
}

fn floating(c: &Circuit, r: &mut Prng) -> String {
    r.pick(&c.pools.floating).clone()
}

fn ohms(r: &mut Prng) -> f64 {
    10f64.powf(r.between(4.0, 6.0)).round()
}

fn inverter(c: &mut Circuit, r: &mut Prng) {
    let (a, y) = (low(c, r), c.net("inverter"));
    c.call("inv", &[&a, &y, "VDD", "VSS"], "inverter");
    c.pools.low.push(y);
}

fn chain(c: &mut Circuit, r: &mut Prng) {
    let mut a = low(c, r);
    for _ in 0..2 + r.below(3) {
        let y = c.net("chain");
        c.call("inv", &[&a, &y, "VDD", "VSS"], "chain");
        c.pools.low.push(y.clone());
        a = y;
    }
}

fn gate(c: &mut Circuit, r: &mut Prng) {
    let (a, b, y) = (low(c, r), low(c, r), c.net("gate"));
    let cell = *r.pick(&["nand", "nor"]);
    c.call(cell, &[&a, &b, &y, "VDD", "VSS"], "gate");
    c.pools.low.push(y);
}

/// A reference current into `node`, from `supply`: a resistor or a source.
fn reference(c: &mut Circuit, r: &mut Prng, from: &str, to: &str, node: &str) {
    if r.chance(0.5) {
        let value = ohms(r);
        c.resistor(from, to, value);
    } else {
        let amperes = r.between(2e-6, 40e-6);
        if node == to { c.current(from, node, amperes) } else { c.current(node, to, amperes) }
    }
}

/// An n mirror with one or two outputs, each loaded by a diode-connected p or a resistor.
fn mirror_n(c: &mut Circuit, r: &mut Prng) {
    let gate = c.net("mirror");
    reference(c, r, "VDD", &gate, &gate);
    c.mos(r, "n5", [&gate, &gate, "VSS", "VSS"]);
    for _ in 0..1 + r.below(2) {
        let out = c.net("mirror");
        c.mos(r, "n5", [&out, &gate, "VSS", "VSS"]);
        if r.chance(0.5) {
            c.mos(r, "p5", [&out, &out, "VDD", "VDD"]);
        } else {
            let value = ohms(r);
            c.resistor("VDD", &out, value);
        }
        c.pools.low.push(out);
    }
}

fn mirror_p(c: &mut Circuit, r: &mut Prng) {
    let gate = c.net("mirror");
    reference(c, r, &gate, "VSS", &gate);
    c.mos(r, "p5", [&gate, &gate, "VDD", "VDD"]);
    for _ in 0..1 + r.below(2) {
        let out = c.net("mirror");
        c.mos(r, "p5", [&out, &gate, "VDD", "VDD"]);
        if r.chance(0.5) {
            c.mos(r, "n5", [&out, &out, "VSS", "VSS"]);
        } else {
            let value = ohms(r);
            c.resistor(&out, "VSS", value);
        }
        c.pools.low.push(out);
    }
}

/// A source follower; its body on its source or on the rail.
fn follower(c: &mut Circuit, r: &mut Prng) {
    let (gate, out) = (low(c, r), c.net("follower"));
    let body = if r.chance(0.5) { out.clone() } else { "VSS".into() };
    let value = ohms(r);
    c.mos(r, "n5", ["VDD", &gate, &out, &body]);
    c.resistor(&out, "VSS", value);
    c.pools.low.push(out);
}

fn follower_p(c: &mut Circuit, r: &mut Prng) {
    let (gate, out) = (low(c, r), c.net("follower"));
    let body = if r.chance(0.5) { out.clone() } else { "VDD".into() };
    let value = ohms(r);
    c.mos(r, "p5", ["VSS", &gate, &out, &body]);
    c.resistor(&out, "VDD", value);
    c.pools.low.push(out);
}

fn divider(c: &mut Circuit, r: &mut Prng) {
    let (top, tap) = (low(c, r), c.net("divider"));
    let values = [ohms(r), ohms(r)];
    c.resistor(&top, &tap, values[0]);
    c.resistor(&tap, "VSS", values[1]);
    c.pools.low.push(tap);
}

/// A transmission gate with its inverter; its output is loaded, or floats while it is off.
fn transmission_gate(c: &mut Circuit, r: &mut Prng) {
    let (input, enable) = (low(c, r), low(c, r));
    let (not, out) = (c.net("inverter"), c.net("transmission gate"));
    c.call("inv", &[&enable, &not, "VDD", "VSS"], "inverter");
    c.mos(r, "n5", [&input, &enable, &out, "VSS"]);
    c.mos(r, "p5", [&input, &not, &out, "VDD"]);
    if r.chance(0.6) {
        let (to, value) = (*r.pick(&["VSS", "VDD"]), ohms(r));
        c.resistor(&out, to, value);
    }
    c.pools.low.push(out);
}

/// An input through a resistor, held inside the supplies by two diodes.
fn clamp(c: &mut Circuit, r: &mut Prng) {
    let out = c.net("clamp");
    let from = if c.is_high() && r.chance(0.5) { r.pick(&c.pools.high).clone() } else { low(c, r) };
    let value = ohms(r);
    c.resistor(&from, &out, value);
    if r.chance(0.5) {
        c.diode(&out, "VDD", "dj");
        c.diode("VSS", &out, "dj");
    } else {
        c.diode("VSS", &out, "zg5");
    }
}

fn diode_or(c: &mut Circuit, r: &mut Prng) {
    let (a, b, out) = (low(c, r), low(c, r), c.net("diode"));
    let value = ohms(r);
    c.diode(&a, &out, "dj");
    c.diode(&b, &out, "dj");
    c.resistor(&out, "VSS", value);
}

/// A level shifter of the cross-coupled kind, inside the low domain.
fn latch(c: &mut Circuit, r: &mut Prng) {
    let (input, not) = (low(c, r), c.net("inverter"));
    let (left, right) = (c.net("latch"), c.net("latch"));
    c.call("inv", &[&input, &not, "VDD", "VSS"], "inverter");
    c.mos_of_width(r, "n5", [&left, &input, "VSS", "VSS"], 20.0);
    c.mos_of_width(r, "n5", [&right, &not, "VSS", "VSS"], 20.0);
    c.mos_of_width(r, "p5", [&left, &right, "VDD", "VDD"], 4.0);
    c.mos_of_width(r, "p5", [&right, &left, "VDD", "VDD"], 4.0);
    c.pools.low.extend([left, right]);
}

/// Devices between any nets of the low domain, without a purpose.
fn stray(c: &mut Circuit, r: &mut Prng) {
    let out = c.net("stray");
    let mut ends = vec![out.clone(), "VDD".into(), "VSS".into()];
    ends.extend((0..3).map(|_| low(c, r)));
    for _ in 0..2 + r.below(3) {
        let (d, g, value) = (r.pick(&ends).clone(), r.pick(&ends).clone(), ohms(r));
        match r.below(4) {
            0 => c.mos(r, "n5", [&d, &g, &out, "VSS"]),
            1 => c.mos(r, "p5", [&d, &g, &out, "VDD"]),
            // Its body diode must not be the only thing between two rails.
            2 => {
                let (class, drain) = (*r.pick(&["n5", "p5"]), c.net("stray"));
                c.resistor(&d, &drain, value);
                c.mos(r, class, [&drain, &g, &out, &out]);
            }
            _ => c.resistor(&d, &out, value),
        }
    }
    c.pools.low.push(out);
}

/// A 5 V device under a 60 V cascode whose gate is VDD, with a resistor to VIN.
fn cascode(c: &mut Circuit, r: &mut Prng) {
    let (gate, mid, out) = (low(c, r), c.net("cascode"), c.net("cascode"));
    let value = ohms(r);
    c.mos(r, "n5", [&mid, &gate, "VSS", "VSS"]);
    c.mos(r, "n60", [&out, "VDD", &mid, &mid]);
    c.resistor("VIN", &out, value);
    c.pools.high.push(out);
}

/// A 60 V switch pulls a gate down from VIN; a zener keeps it within 5.5 V; the p device drives an output.
fn step_up(c: &mut Circuit, r: &mut Prng) {
    let (input, gate, out) = (low(c, r), c.net("level shifter"), c.net("high switch"));
    let values = [ohms(r), ohms(r)];
    c.mos_of_width(r, "n60", [&gate, &input, "VSS", "VSS"], 10.0);
    c.resistor("VIN", &gate, values[0]);
    c.diode(&gate, "VIN", "zg5");
    c.mos(r, "p60", [&out, &gate, "VIN", "VIN"]);
    c.resistor(&out, "VSS", values[1]);
    c.pools.high.push(out);
}

fn switch_low(c: &mut Circuit, r: &mut Prng) {
    let (gate, out) = (low(c, r), c.net("low switch"));
    let value = ohms(r);
    c.mos(r, "n60", [&out, &gate, "VSS", "VSS"]);
    c.resistor("VIN", &out, value);
    c.pools.high.push(out);
}

/// A complementary pair that drives an output from VSS to VIN.
fn switch_high(c: &mut Circuit, r: &mut Prng) {
    let (input, not) = (low(c, r), c.net("inverter"));
    let (gate, out) = (c.net("level shifter"), c.net("high switch"));
    let value = ohms(r);
    c.call("inv", &[&input, &not, "VDD", "VSS"], "inverter");
    c.mos_of_width(r, "n60", [&gate, &input, "VSS", "VSS"], 10.0);
    c.resistor("VIN", &gate, value);
    c.diode(&gate, "VIN", "zg5");
    c.mos(r, "p60", [&out, &gate, "VIN", "VIN"]);
    c.mos(r, "n60", [&out, &not, "VSS", "VSS"]);
    c.pools.high.push(out);
}

fn follower_high(c: &mut Circuit, r: &mut Prng) {
    let (gate, out) = (r.pick(&c.pools.high).clone(), c.net("high follower"));
    let value = ohms(r);
    c.mos(r, "n60", ["VIN", &gate, &out, &out]);
    c.resistor(&out, "VSS", value);
    c.pools.high.push(out);
}

fn divider_high(c: &mut Circuit, r: &mut Prng) {
    let (top, tap) = (r.pick(&c.pools.high).clone(), c.net("divider"));
    let values = [ohms(r), ohms(r)];
    c.resistor(&top, &tap, values[0]);
    c.resistor(&tap, "VSS", values[1]);
    c.pools.high.push(tap);
}

/// A gate that a resistor holds to the supply and a zener keeps from it; a switch that it drives.
fn clamp_high(c: &mut Circuit, r: &mut Prng) {
    let (input, gate, out) = (low(c, r), c.net("clamp"), c.net("low switch"));
    let values = [ohms(r), ohms(r)];
    c.resistor("VIN", &gate, values[0]);
    c.diode("VSS", &gate, "zg5");
    c.mos(r, "n60", [&gate, &input, "VSS", "VSS"]);
    c.mos(r, "n60", [&out, &gate, "VSS", "VSS"]);
    c.resistor("VIN", &out, values[1]);
    c.pools.high.push(out);
}

/// A p mirror on VIN whose reference is a 5 V mirror under a cascode.
fn mirror_high(c: &mut Circuit, r: &mut Prng) {
    let (bias, mid, gate, out) = (c.net("mirror"), c.net("cascode"), c.net("high mirror"), c.net("high mirror"));
    reference(c, r, "VDD", &bias, &bias);
    let value = ohms(r);
    c.mos(r, "n5", [&bias, &bias, "VSS", "VSS"]);
    c.mos(r, "n5", [&mid, &bias, "VSS", "VSS"]);
    c.mos(r, "n60", [&gate, "VDD", &mid, &mid]);
    c.mos(r, "p60", [&gate, &gate, "VIN", "VIN"]);
    c.mos(r, "p60", [&out, &gate, "VIN", "VIN"]);
    c.resistor(&out, "VSS", value);
    c.pools.high.push(out);
}

fn diode_high(c: &mut Circuit, r: &mut Prng) {
    let (from, out) = (r.pick(&c.pools.high).clone(), c.net("diode"));
    let value = ohms(r);
    c.diode(&from, &out, "dj");
    c.diode("VDD", &out, "dj");
    c.resistor(&out, "VSS", value);
}

fn inverter_floating(c: &mut Circuit, r: &mut Prng) {
    let (a, y) = (floating(c, r), c.net("floating inverter"));
    c.call("inv", &[&a, &y, "BST", "SW"], "floating inverter");
    c.pools.floating.push(y);
}

fn chain_floating(c: &mut Circuit, r: &mut Prng) {
    let mut a = floating(c, r);
    for _ in 0..2 + r.below(2) {
        let y = c.net("floating inverter");
        c.call("inv", &[&a, &y, "BST", "SW"], "floating inverter");
        c.pools.floating.push(y.clone());
        a = y;
    }
}

/// A floating inverter that drives the gate of a 60 V device on SW; its drain hangs on VIN by a resistor.
fn driver(c: &mut Circuit, r: &mut Prng) {
    let (a, gate, drain) = (floating(c, r), c.net("floating inverter"), c.net("floating switch"));
    let value = ohms(r);
    c.call("inv", &[&a, &gate, "BST", "SW"], "floating inverter");
    c.mos(r, "n60", [&drain, &gate, "SW", "SW"]);
    c.resistor("VIN", &drain, value);
    c.pools.floating.push(gate);
}

/// A level shifter into the floating domain: a 60 V switch, a resistor to BST, a zener to SW, an inverter that reads it.
fn shift_up(c: &mut Circuit, r: &mut Prng) {
    let (input, node, out) = (low(c, r), c.net("floating shifter"), c.net("floating inverter"));
    let value = ohms(r);
    c.mos_of_width(r, "n60", [&node, &input, "VSS", "VSS"], 10.0);
    c.resistor("BST", &node, value);
    c.diode("SW", &node, "zg5");
    c.call("inv", &[&node, &out, "BST", "SW"], "floating inverter");
    c.pools.floating.push(out);
}

/// A net of the floating domain through a resistor, held by diodes to the domain's rails.
fn clamp_floating(c: &mut Circuit, r: &mut Prng) {
    let out = c.net("floating clamp");
    let from = if r.chance(0.5) { floating(c, r) } else { r.pick(&c.pools.high).clone() };
    let value = ohms(r);
    c.resistor(&from, &out, value);
    if r.chance(0.5) {
        c.diode(&out, "BST", "dj");
        c.diode("SW", &out, "dj");
    } else {
        c.diode("SW", &out, "zg5");
    }
    c.pools.floating.push(out);
}
