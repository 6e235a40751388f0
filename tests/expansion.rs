//! Holds elaboration against a circuit simulator: the flattened devices of our fixtures are those that ngspice makes.
//!
//! The oracle is ngspice (its version 39 is the Debian package), which flattens a netlist by its own means: `listing expand`
//! shows every device with its nodes, `print @device[parameter]` its values as evaluated. It runs with `ngbehavior=hs`, in which
//! the `m` of a call multiplies with the `m` of the cards below; otherwise this version lets the outermost one replace the others.
//! Run with `cargo test --test expansion -- --ignored --nocapture`; needs `ngspice` on the path.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::print_stdout)]

use drainwise::design::{Design, NetIx, VariantIx};
use drainwise::load::Disk;
use drainwise::pipeline::{Job, Progress, read, with_world};
use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

struct Still;

impl Progress for Still {
    fn stage(&self, _: &str) {}
}

/// Classes for the two models of the fixtures, so that their sizes can be asked for.
const DECK: &str = "
classes:
  nlv: {kind: nmos, pins: [d, g, s, b], size: {width: w, length: l}}
  plv: {kind: pmos, pins: [d, g, s, b], size: {width: w, length: l}}
";

/// A flattened device: its nodes, and its values by name.
#[derive(Clone, Debug, Default, PartialEq)]
struct Flat {
    nodes: Vec<String>,
    values: BTreeMap<&'static str, f64>,
}

type Devices = BTreeMap<String, Flat>;

/// How many nodes an element has, and which of its values are compared: our name, and the simulator's.
fn shape(letter: u8) -> Option<(usize, &'static [(&'static str, &'static str)])> {
    match letter {
        b'm' => Some((4, &[("w", "w"), ("l", "l"), ("m", "m")])),
        b'r' => Some((2, &[("r", "resistance"), ("m", "m")])),
        b'c' => Some((2, &[("c", "capacitance"), ("m", "m")])),
        b'v' => Some((2, &[])),
        _ => None,
    }
}

// ---- the simulator's side

fn ngspice(folder: &Path, netlist: &str, commands: &str) -> String {
    let body: Vec<&str> = netlist.lines().filter(|line| !line.trim().eq_ignore_ascii_case(".end")).collect();
    let circuit = format!("{}\n.control\n{commands}.endc\n.end\n", body.join("\n"));
    fs::write(folder.join("circuit.cir"), circuit).unwrap();
    let output = Command::new("ngspice").args(["-b", "circuit.cir"]).current_dir(folder).output();
    let output = output.expect("ngspice is not here: install the package `ngspice`");
    String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr)
}

/// `m.x1.x2.m1` → `x1.x2.m1`: the simulator puts the letter in front of a flattened name (before each part that it flattened
/// in a pass of its own).
fn path_of(name: &str) -> String {
    let parts: Vec<&str> = name.split('.').collect();
    let last = parts.len() - 1;
    parts
        .iter()
        .enumerate()
        .filter(|(at, part)| *at == last || part.len() > 1)
        .map(|(_, part)| *part)
        .collect::<Vec<_>>()
        .join(".")
}

fn simulated(folder: &Path, netlist: &str) -> Devices {
    let listing = ngspice(folder, netlist, "listing expand\n");
    let mut devices = Devices::new();
    let mut asked = Vec::new();
    let mut commands = String::from("set numdgt=12\nop\n");
    for line in listing.lines() {
        let Some((number, card)) = line.split_once(" : ") else { continue };
        let words: Vec<&str> = card.split_whitespace().collect();
        let Some(name) = words.first().filter(|_| number.trim().parse::<u32>().is_ok()) else { continue };
        let Some((nodes, values)) = shape(name.as_bytes()[0]) else { continue };
        let nodes = words[1..=nodes].iter().map(|node| (*node).to_owned()).collect();
        let twice = devices.insert(path_of(name), Flat { nodes, ..Flat::default() });
        assert!(twice.is_none(), "two devices with one path: {name}");
        for &(ours, theirs) in values {
            commands += &format!("print @{name}[{theirs}]\n");
            asked.push((path_of(name), ours, format!("@{name}[{theirs}] = ")));
        }
    }
    assert!(!devices.is_empty(), "the simulator lists no devices:\n{listing}");
    let printed = ngspice(folder, netlist, &commands);
    for (path, ours, head) in asked {
        let value = printed.lines().find_map(|line| line.trim().strip_prefix(&head));
        let value = value.unwrap_or_else(|| panic!("the simulator does not show `{head}`:\n{printed}"));
        devices.get_mut(&path).unwrap().values.insert(ours, value.trim().parse().unwrap());
    }
    devices
}

// ---- our side

fn elaborated(folder: &Path, name: &str) -> Devices {
    fs::write(folder.join("deck.yaml"), DECK).unwrap();
    let job = Job { netlists: vec![folder.join(name)], decks: vec![folder.join("deck.yaml")], ..Job::default() };
    let loaded = match read(&Disk, &job, &Still) {
        Ok(loaded) => loaded,
        Err(outcome) => panic!("{name}: {:?}", outcome.report.diagnostics),
    };
    let (_, devices) = with_world(loaded, &job, &Still, |world, seen| {
        assert!(seen.diagnostics.iter().all(|one| one.code != "card"), "{name}: {:#?}", seen.diagnostics);
        let mut devices = Devices::new();
        for &top in &world.design.tops {
            let template = world.design.template(top);
            let nets = template.nets.iter().map(|&net| world.design.names.text(net).to_owned()).collect::<Vec<_>>();
            flatten(world.design, top, "", &nets, &mut devices);
        }
        devices
    });
    devices
}

/// Takes in all devices at and below a variant. `nets` are the names, seen from the top, of the nets of its template.
fn flatten(design: &Design<'_>, variant: VariantIx, prefix: &str, nets: &[String], devices: &mut Devices) {
    let template = design.template(variant);
    for device in template.devices() {
        let name = design.device_name(template, device).to_lowercase();
        let Some((_, _)) = shape(name.as_bytes()[0]) else { panic!("{name}: the fixtures have no such elements") };
        let nodes = template.device_pins(device).iter().map(|net| nets[net.0 as usize].to_lowercase()).collect();
        let values = values(design, variant, device, name.as_bytes()[0]);
        let twice = devices.insert(format!("{prefix}{name}"), Flat { nodes, values });
        assert!(twice.is_none(), "two devices with one path: {prefix}{name}");
    }
    for (index, instance) in template.instance_indices().enumerate() {
        let below = design.variants[variant.0 as usize].children[index];
        let inner = design.template(below);
        let prefix = format!("{prefix}{}.", design.instance_name(template, instance).to_lowercase());
        let mut named: Vec<Option<String>> = vec![None; inner.nets.len()];
        for (port, &net) in inner.boundary().zip(template.instance_pins(instance)) {
            named[port.0 as usize] = Some(nets[net.0 as usize].clone());
        }
        let local = |at: usize| format!("{prefix}{}", design.net_name(inner, NetIx(at as u32)));
        let nets: Vec<String> =
            named.into_iter().enumerate().map(|(at, name)| name.unwrap_or_else(|| local(at))).collect();
        flatten(design, below, &prefix, &nets, devices);
    }
}

/// Values as the simulator shows them: sizes in metres, copies with those of the calls above. Its capacitance is that of all
/// copies, its resistance that of one.
fn values(
    design: &Design<'_>,
    variant: VariantIx,
    device: drainwise::design::DeviceIx,
    letter: u8,
) -> BTreeMap<&'static str, f64> {
    let card = design.device_card(variant, device);
    let parameter = |name: &str| design.parameter(variant, &card, name).map(|value| value.unwrap());
    let copies = design.variants[variant.0 as usize].multiplier * parameter("m").unwrap_or(1.0);
    match letter {
        b'm' => {
            let class = design.class(design.template(variant), device).expect("the deck names the models");
            let sizes = design.sizes(variant, class, &card);
            assert_eq!(sizes.copies.clone().unwrap(), copies);
            BTreeMap::from([("w", sizes.width.unwrap()), ("l", sizes.length.unwrap()), ("m", copies)])
        }
        b'r' => BTreeMap::from([("r", parameter("r").unwrap()), ("m", copies)]),
        b'c' => BTreeMap::from([("c", parameter("c").unwrap() * copies), ("m", copies)]),
        _ => BTreeMap::new(),
    }
}

// ---- the comparison

/// What differs, one a line. Values are compared to nine digits.
fn differences(ours: &Devices, theirs: &Devices) -> Vec<String> {
    let mut wrong = Vec::new();
    for (path, their) in theirs {
        let Some(our) = ours.get(path) else {
            wrong.push(format!("{path}: missing here"));
            continue;
        };
        if our.nodes != their.nodes {
            wrong.push(format!("{path}: nodes {:?} here, {:?} there", our.nodes, their.nodes));
        }
        for (name, value) in &their.values {
            let here = our.values.get(name).copied().unwrap_or(f64::NAN);
            // a value that is missing here (NaN) is close to nothing
            let close = (here - value).abs() <= 1e-9 * value.abs().max(1e-30);
            if !close {
                wrong.push(format!("{path}: {name} is {here:e} here, {value:e} there"));
            }
        }
    }
    wrong.extend(ours.keys().filter(|path| !theirs.contains_key(*path)).map(|path| format!("{path}: not there")));
    wrong
}

fn copy_to(from: &Path, to: &Path) {
    fs::create_dir_all(to).unwrap();
    for entry in fs::read_dir(from).unwrap().map(Result::unwrap) {
        let target = to.join(entry.file_name());
        match entry.path().is_dir() {
            true => copy_to(&entry.path(), &target),
            false => fs::write(target, fs::read(entry.path()).unwrap()).unwrap(),
        }
    }
}

#[test]
#[ignore = "needs ngspice"]
fn flattened_devices_are_those_of_the_simulator() {
    let fixtures = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/expansion");
    let temp = tempfile::tempdir().unwrap();
    copy_to(&fixtures, temp.path());
    fs::write(temp.path().join(".spiceinit"), "set ngbehavior=hs\n").unwrap();
    let mut files: Vec<PathBuf> = fs::read_dir(&fixtures).unwrap().map(|entry| entry.unwrap().path()).collect();
    files.retain(|path| path.extension().is_some_and(|extension| extension == "sp"));
    files.sort();
    let (mut compared, mut values) = (0, 0);
    let mut wrong = Vec::new();
    for file in &files {
        let name = file.file_name().unwrap().to_str().unwrap();
        let theirs = simulated(temp.path(), &fs::read_to_string(file).unwrap());
        let ours = std::panic::catch_unwind(|| elaborated(temp.path(), name));
        let Ok(ours) = ours else {
            wrong.push(format!("{name}: not read without errors"));
            continue;
        };
        compared += theirs.len();
        values += theirs.values().map(|device| device.values.len()).sum::<usize>();
        println!("{name}: {} devices", theirs.len());
        wrong.extend(differences(&ours, &theirs).into_iter().map(|difference| format!("{name}: {difference}")));
    }
    println!("{} fixtures, {compared} devices, {values} values compared", files.len());
    assert!(wrong.is_empty(), "{} differences:\n{}", wrong.len(), wrong.join("\n"));
    assert!(files.len() >= 14 && compared >= 140 && values >= 300, "fewer than the fixtures hold");
}
