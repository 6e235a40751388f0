//! What the caps by currents are worth: how many nets they bound, and how wide those would be without.

use crate::compare::{self, Case, Figures, Reaches};
use drainwise::current::caps;
use drainwise::design::NetIx;
use drainwise::facts::World;
use drainwise::load::Disk;
use drainwise::pipeline::{Job, Progress, read, with_world};
use drainwise::reach::Reach;
use drainwise::roles::Roles;
use std::path::Path;

struct Silent;

impl Progress for Silent {
    fn stage(&self, _: &str) {}
}

/// A net of the cell under test that currents cap: its name, and its width against ground in each mode, without caps.
struct Capped {
    name: String,
    widths: Vec<f64>,
}

/// Counts the capped nets of a circuit, and their widths with the caps (in the reaches) and without.
pub(crate) fn count(case: &Case, reaches: &Reaches, netlist: &Path, deck: &Path, figures: &mut Figures) {
    let job =
        Job { netlists: vec![netlist.to_owned()], decks: vec![deck.to_owned()], all_voltages: true, ..Job::default() };
    let Ok(loaded) = read(&Disk, &job, &Silent) else { panic!("circuit {} can be read", case.seed) };
    for capped in with_world(loaded, &job, &Silent, |world, _| all(world)).1 {
        figures.capped += 1;
        let Some(net) = case.builder.nets.iter().position(|net| net.path == capped.name) else { continue };
        for (mode, &without) in capped.widths.iter().enumerate() {
            let mode = (!case.builder.world.modes.is_empty()).then_some(mode);
            let Some((lo, hi)) = compare::seen(case, net, mode).filter(|(lo, hi)| hi - lo > compare::WIDE) else {
                continue;
            };
            let key = (capped.name.clone(), mode.map(|mode| case.builder.world.modes[mode].name.clone()));
            let ground = reaches.get(&key).and_then(|frames| frames.iter().find(|(frame, _)| frame == "0"));
            if let Some((_, (Some(low), Some(high)))) = ground {
                figures.narrowed.push(((high - low) / (hi - lo), without / (hi - lo)));
            }
        }
    }
}

fn all(world: World<'_>) -> Vec<Capped> {
    let plain = Reach::new(world.design, world.contexts, world.deck, &[]);
    let roles = Roles::new(&plain);
    let mut nets: Vec<(_, NetIx)> = caps(&roles).iter().map(|cap| (cap.context, cap.net)).collect();
    nets.dedup();
    let tops = plain.indices().filter(|&at| plain.get(at).parents.is_empty());
    let of = |at| {
        let context = plain.get(at).context;
        let template = world.design.template(world.contexts.get(context).variant);
        nets.iter().filter(move |(of, _)| *of == context).map(move |&(_, net)| (at, template, net))
    };
    let width = |at, mode, net| {
        let range = plain.of(at, mode, net, 0);
        range.hi - range.lo
    };
    tops.flat_map(of)
        .map(|(at, template, net)| Capped {
            name: world.design.net_name(template, net).to_owned(),
            widths: (0..plain.modes.len()).map(|mode| width(at, mode, net)).collect(),
        })
        .collect()
}
