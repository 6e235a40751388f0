//! Rails whose ends define each other in a ring have no voltage at all: that is an error of the deck.

use crate::declared::{End, Mode, Rail};
use crate::diag::Diagnostic;
use std::collections::{HashMap, HashSet};

/// Complains about rings among the rails, as declared and in each mode.
pub(crate) fn complain_of_rings(rails: &[Rail], modes: &[Mode], complaints: &mut Vec<Diagnostic>) {
    let mut told = HashSet::new();
    let plain = std::iter::once((None, rails.iter().collect::<Vec<_>>()));
    let in_modes = modes.iter().map(|mode| (Some(mode.name.as_str()), in_force(rails, mode)));
    for (mode, rails) in plain.chain(in_modes) {
        for ring in rings(&rails) {
            let mut places: Vec<_> = ring.iter().map(|&at| rails[at].value_place).collect();
            places.sort();
            if told.insert(places) {
                complaints.push(complaint(&ring, &rails, mode));
            }
        }
    }
}

/// The rails of a mode: its own before those of the same name declared for all modes.
fn in_force<'d>(rails: &'d [Rail], mode: &'d Mode) -> Vec<&'d Rail> {
    let own: HashSet<String> = mode.rails.iter().map(|rail| rail.net.text().to_ascii_lowercase()).collect();
    let others = rails.iter().filter(|rail| !own.contains(&rail.net.text().to_ascii_lowercase()));
    mode.rails.iter().chain(others).collect()
}

/// The rings, each as indices of rails in the order in which they name one another.
fn rings(rails: &[&Rail]) -> Vec<Vec<usize>> {
    let named: Vec<Vec<usize>> = names(rails);
    let mut found = Vec::new();
    let mut done = vec![false; rails.len()];
    for first in 0..rails.len() {
        // A walk that keeps its own stack: rails may name one another in chains of any length.
        let mut path: Vec<(usize, usize)> = vec![(first, 0)];
        let mut on_path = HashMap::from([(first, 0)]);
        while let Some(&(at, next)) = path.last() {
            if done[at] || next == named[at].len() {
                done[at] = true;
                on_path.remove(&at);
                path.pop();
                continue;
            }
            if let Some(last) = path.last_mut() {
                last.1 += 1;
            }
            let to = named[at][next];
            if let Some(&from) = on_path.get(&to) {
                found.push(path[from..].iter().map(|&(rail, _)| rail).collect());
            } else if !done[to] {
                on_path.insert(to, path.len());
                path.push((to, 0));
            }
        }
    }
    found
}

/// For each rail, the rails that its ends name.
fn names(rails: &[&Rail]) -> Vec<Vec<usize>> {
    let exact: HashMap<String, usize> = rails
        .iter()
        .enumerate()
        .filter(|(_, rail)| !rail.net.is_wild())
        .map(|(at, rail)| (rail.net.text().to_ascii_lowercase(), at))
        .collect();
    let globs: Vec<usize> = (0..rails.len()).filter(|&at| rails[at].net.is_wild()).collect();
    let find = |net: &str| {
        let known = exact.get(&net.to_ascii_lowercase()).copied();
        known.or_else(|| globs.iter().copied().find(|&at| rails[at].net.matches_path(net)))
    };
    rails
        .iter()
        .map(|rail| {
            let nets = [&rail.low, &rail.high].into_iter().filter_map(|end| match end {
                End::Net { net, .. } => Some(net.as_str()),
                End::Volts(_) => None,
            });
            let mut named: Vec<usize> = nets.filter_map(find).collect();
            named.dedup();
            named
        })
        .collect()
}

fn complaint(ring: &[usize], rails: &[&Rail], mode: Option<&str>) -> Diagnostic {
    let name = |at: usize| rails[at].net.text();
    let chain: Vec<&str> = ring.iter().chain(ring.first()).map(|&at| name(at)).collect();
    let mode = mode.map(|mode| format!(" in mode {mode}")).unwrap_or_default();
    let message = match ring {
        [one] => format!("rail {} is held against itself{mode}", name(*one)),
        _ => format!("these rails are held against one another in a ring{mode}: {}", chain.join(" → ")),
    };
    let first = ring.first().map_or(0, |&at| at);
    let mut error = Diagnostic::error("deck", rails[first].value_place, message)
        .with_help("give one of them a range in volts, or hold it against a rail outside the ring");
    for &at in &ring[1..] {
        error = error.with_place(rails[at].value_place, format!("{} is declared here", name(at)));
    }
    error
}
