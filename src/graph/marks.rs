//! What a net is known as from outside: the rails that name it, and the net names that classes tie pins to.

use crate::declared::{Class, Deck, End, Rail, TieTarget};
use crate::design::{Design, NetIx, Template};
use crate::diag::Diagnostic;
use hashbrown::HashMap;

/// Where a rail declaration stands in a deck.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum RailSlot {
    /// `rails:`, by index.
    Always(u32),
    /// A mode's own rail: index of the mode, index in it.
    InMode(u32, u32),
}

/// Something that a net is known as.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Mark {
    /// A declared rail.
    Rail(RailSlot),
    /// A net name that some class or rail end asks for, by index in [`Marks::wanted`].
    Named(u32),
}

/// An interned set of marks; 0 is the empty one.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord, Default)]
pub struct MarkSet(pub u32);

/// A rail path on its way down: which rail, and which of its dotted segments comes next.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub(super) struct Pending {
    slot: RailSlot,
    segment: u32,
}

impl Pending {
    /// As numbers, for keys.
    pub(super) fn numbers(&self) -> [u32; 3] {
        match self.slot {
            RailSlot::Always(rail) => [u32::MAX, rail, self.segment],
            RailSlot::InMode(mode, rail) => [mode, rail, self.segment],
        }
    }
}

/// The rails of a run and all sets of marks that occur on nets.
#[derive(Debug, Default)]
pub struct Marks {
    /// Net names that classes tie pins to, or that rail ends refer to, lower case.
    pub wanted: Vec<String>,
    sets: Vec<Vec<Mark>>,
    known: HashMap<Vec<Mark>, MarkSet>,
    matched: hashbrown::HashSet<RailSlot>,
}

impl Marks {
    /// Collects the names that classes and rails ask for.
    pub(super) fn new(deck: &Deck) -> Marks {
        let mut wanted: Vec<String> = deck.classes.iter().flat_map(tie_names).chain(rail_ends(deck)).collect();
        wanted.sort();
        wanted.dedup();
        Marks {
            wanted,
            sets: vec![Vec::new()],
            known: HashMap::from_iter([(Vec::new(), MarkSet(0))]),
            ..Marks::default()
        }
    }

    /// The marks of a set.
    pub fn of(&self, set: MarkSet) -> &[Mark] {
        &self.sets[set.0 as usize]
    }

    /// The index of a wanted name.
    pub fn named(&self, name: &str) -> Option<Mark> {
        self.wanted.binary_search(&name.to_ascii_lowercase()).ok().map(|index| Mark::Named(index as u32))
    }

    /// Whether a rail declaration named some net.
    pub fn is_matched(&self, slot: RailSlot) -> bool {
        self.matched.contains(&slot)
    }

    /// The set of these marks.
    pub(super) fn intern(&mut self, mut marks: Vec<Mark>) -> MarkSet {
        marks.sort_unstable();
        marks.dedup();
        if let Some(&known) = self.known.get(&marks) {
            return known;
        }
        let set = MarkSet(self.sets.len() as u32);
        self.sets.push(marks.clone());
        self.known.insert(marks, set);
        set
    }

    /// The marks that a top's own nets bear, and the rail paths that go further down.
    pub(super) fn of_top(
        &mut self,
        deck: &Deck,
        design: &Design<'_>,
        template: &Template,
        diagnostics: &mut Vec<Diagnostic>,
    ) -> (Vec<(NetIx, Mark)>, Vec<Pending>) {
        let mut found = Vec::new();
        for (index, name) in self.wanted.iter().enumerate() {
            let net = nets_named(design, template, name);
            found.extend(net.map(|net| (net, Mark::Named(index as u32))));
        }
        let mut pending = Vec::new();
        for (slot, _) in all_rails(deck) {
            pending.push(Pending { slot, segment: 0 });
        }
        found.extend(self.on_nets(deck, design, template, &pending));
        self.report_disagreement(deck, design, template, &found, diagnostics);
        (found, pending.into_iter().filter(|pending| rail(deck, pending.slot).net.text().contains('.')).collect())
    }

    /// The nets of a cell that rail paths end at.
    pub(super) fn on_nets(
        &mut self,
        deck: &Deck,
        design: &Design<'_>,
        template: &Template,
        pending: &[Pending],
    ) -> Vec<(NetIx, Mark)> {
        let mut found = Vec::new();
        for pending in pending {
            let rail = rail(deck, pending.slot);
            let rest = after_segments(rail.net.text(), pending.segment);
            let before = found.len();
            if rail.net.is_wild() {
                let glob = crate::names::Glob::new(rest);
                let matching = (0..template.nets.len() as u32)
                    .map(NetIx)
                    .filter(|&net| glob.matches_path(design.net_name(template, net)));
                found.extend(matching.map(|net| (net, Mark::Rail(pending.slot))));
            } else {
                found.extend(nets_named(design, template, rest).map(|net| (net, Mark::Rail(pending.slot))));
            }
            if found.len() > before {
                self.matched.insert(pending.slot);
            }
        }
        found
    }

    /// The rail paths that lead into an instance of this name.
    pub(super) fn below_instance(&self, deck: &Deck, pending: &[Pending], name: &str) -> Vec<Pending> {
        let leads = |pending: &&Pending| {
            let rail = rail(deck, pending.slot);
            let rest = after_segments(rail.net.text(), pending.segment);
            rest.split_once('.').is_some_and(|(first, _)| {
                let glob =
                    if rail.net.is_wild() { crate::names::Glob::new(first) } else { crate::names::Glob::exact(first) };
                glob.matches(name)
            })
        };
        pending.iter().filter(leads).map(|pending| Pending { segment: pending.segment + 1, ..*pending }).collect()
    }

    /// Two globs of one list that give one net different values are a deck error, unless an exact name settles it.
    fn report_disagreement(
        &self,
        deck: &Deck,
        design: &Design<'_>,
        template: &Template,
        found: &[(NetIx, Mark)],
        out: &mut Vec<Diagnostic>,
    ) {
        let mut by_net: HashMap<(NetIx, Option<u32>), Vec<&Rail>> = HashMap::new();
        for &(net, mark) in found {
            let Mark::Rail(slot) = mark else { continue };
            let group = match slot {
                RailSlot::Always(_) => None,
                RailSlot::InMode(mode, _) => Some(mode),
            };
            by_net.entry((net, group)).or_default().push(rail(deck, slot));
        }
        let mut disagreements: Vec<(&Rail, &Rail, NetIx)> = by_net
            .into_iter()
            .filter(|(_, rails)| rails.iter().all(|rail| rail.net.is_wild()))
            .filter_map(|((net, _), rails)| {
                let first = *rails.first()?;
                let other = rails.iter().find(|rail| rail.low != first.low || rail.high != first.high)?;
                Some((first, *other, net))
            })
            .collect();
        disagreements.sort_by_key(|(a, b, net)| (a.place, b.place, *net));
        disagreements.dedup_by_key(|(a, b, _)| (a.place, b.place));
        for (first, other, net) in disagreements {
            let name = design.net_name(template, net);
            out.push(
                Diagnostic::error(
                    "deck",
                    other.place,
                    format!(
                        "`{}` and `{}` both name the net `{name}` and disagree on its voltage",
                        first.net.text(),
                        other.net.text()
                    ),
                )
                .with_label("this pattern")
                .with_place(first.place, "and this one")
                .with_help(format!("declare `{name}` by its exact name: an exact name goes before a pattern")),
            );
        }
    }
}

/// A rail's declaration.
pub fn rail(deck: &Deck, slot: RailSlot) -> &Rail {
    match slot {
        RailSlot::Always(index) => &deck.rails[index as usize],
        RailSlot::InMode(mode, index) => &deck.modes[mode as usize].rails[index as usize],
    }
}

/// The declaration that holds for a net with these marks in a mode (index in the deck; none where it has no modes): the mode's own
/// goes first, an exact name before a pattern.
pub fn rail_in_mode(deck: &Deck, marks: &[Mark], mode: Option<usize>) -> Option<RailSlot> {
    let rank = |slot: RailSlot| {
        let outside = match slot {
            RailSlot::InMode(of, _) if Some(of as usize) == mode => 0,
            RailSlot::InMode(..) => return None,
            RailSlot::Always(_) => 1,
        };
        Some((outside, rail(deck, slot).net.is_wild(), slot))
    };
    let slots = marks.iter().filter_map(|mark| match mark {
        Mark::Rail(slot) => rank(*slot),
        Mark::Named(_) => None,
    });
    slots.min().map(|(_, _, slot)| slot)
}

/// All rail declarations with their slots.
pub fn all_rails(deck: &Deck) -> impl Iterator<Item = (RailSlot, &Rail)> {
    let always = deck.rails.iter().enumerate().map(|(index, rail)| (RailSlot::Always(index as u32), rail));
    let in_modes = deck.modes.iter().enumerate().flat_map(|(mode, declared)| {
        declared.rails.iter().enumerate().map(move |(index, rail)| (RailSlot::InMode(mode as u32, index as u32), rail))
    });
    always.chain(in_modes)
}

fn tie_names(class: &Class) -> impl Iterator<Item = String> + '_ {
    class.body.iter().chain(&class.ties).flat_map(|tie| &tie.targets).filter_map(|target| match target {
        TieTarget::Net(name) => Some(name.to_ascii_lowercase()),
        TieTarget::Pin(_) => None,
    })
}

fn rail_ends(deck: &Deck) -> impl Iterator<Item = String> + '_ {
    all_rails(deck).flat_map(|(_, rail)| [&rail.low, &rail.high]).filter_map(|end| match end {
        End::Net { net, .. } => Some(net.to_ascii_lowercase()),
        End::Volts(_) => None,
    })
}

fn after_segments(path: &str, segments: u32) -> &str {
    let mut rest = path;
    for _ in 0..segments {
        rest = rest.split_once('.').map_or("", |(_, after)| after);
    }
    rest
}

fn nets_named<'t>(design: &Design<'_>, template: &'t Template, name: &str) -> impl Iterator<Item = NetIx> + use<'t> {
    let wanted = design.names.find(name);
    let found = wanted.and_then(|name| template.nets.iter().position(|&net| net == name));
    found.into_iter().map(|index| NetIx(index as u32))
}
