//! The contexts of a design, how often each occurs, and paths to it.

use super::joins::Joins;
use super::marks::{Mark, MarkSet, Marks, Pending};
use crate::declared::Deck;
use crate::design::{Design, InstanceIx, NetIx, Template, VariantIx};
use crate::diag::Diagnostic;
use hashbrown::HashMap;

/// Index in [`Contexts::all`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct ContextIx(pub u32);

/// A cell in one kind of surroundings.
#[derive(Clone, Debug)]
pub struct Context {
    /// The cell with its parameters.
    pub variant: VariantIx,
    /// How many instances of the whole design are in it (saturating).
    pub count: u64,
    /// For each instance statement, the context it leads to.
    pub children: Vec<ContextIx>,
    /// Who leads here: a context and its instance statement. Empty for tops.
    pub parents: Vec<(ContextIx, InstanceIx)>,
    roots: Option<Box<[u32]>>,
    marks: Vec<(NetIx, MarkSet)>,
    pending: Vec<Pending>,
}

/// All contexts of a design.
#[derive(Debug)]
pub struct Contexts {
    /// Contexts, each after at least one that leads to it; the tops first.
    pub all: Vec<Context>,
    /// What nets are known as.
    pub marks: Marks,
    /// Contradictions of the deck that only the netlist shows.
    pub diagnostics: Vec<Diagnostic>,
}

/// What an instance brings to the cell below: which boundary positions are one net, and what each is known as. Filled anew for
/// each instance statement, so that nothing is allocated for one whose context is known already.
#[derive(Default)]
struct Brought {
    /// Pairs of positions that are one net: the first one, and each later one.
    joined: Vec<(u32, u32)>,
    marks: Vec<(u32, MarkSet)>,
    pending: Vec<Pending>,
    /// All of it as numbers, the variant in front.
    key: Vec<u32>,
}

impl Brought {
    /// Makes the key. Each list stands behind its length, so that no two contents look alike.
    fn seal(&mut self, variant: VariantIx) {
        self.key.clear();
        self.key.extend([variant.0, self.joined.len() as u32, self.marks.len() as u32]);
        self.joined.iter().for_each(|&(first, other)| self.key.extend([first, other]));
        self.marks.iter().for_each(|&(position, set)| self.key.extend([position, set.0]));
        self.pending.iter().for_each(|pending| self.key.extend(pending.numbers()));
    }
}

impl Contexts {
    /// Finds all contexts below the tops.
    pub fn new(design: &Design<'_>, deck: &Deck) -> Contexts {
        let joins = Joins::new(design);
        let mut work = Work {
            design,
            deck,
            joins,
            known: HashMap::new(),
            all: Vec::new(),
            marks: Marks::new(deck),
            diagnostics: Vec::new(),
            brought: Brought::default(),
            first_on: Vec::new(),
            instance_count: 0,
        };
        for &top in &design.tops {
            work.top(top);
        }
        let mut next = 0;
        while next < work.all.len() {
            work.expand(ContextIx(next as u32));
            next += 1;
        }
        let mut contexts = Contexts { all: work.all, marks: work.marks, diagnostics: work.diagnostics };
        contexts.count();
        contexts
    }

    /// A context.
    pub fn get(&self, at: ContextIx) -> &Context {
        &self.all[at.0 as usize]
    }

    /// All indices.
    pub fn indices(&self) -> impl Iterator<Item = ContextIx> + use<> {
        (0..self.all.len() as u32).map(ContextIx)
    }

    /// All contexts, each after those that it leads to (Kahn).
    pub fn callees_first(&self) -> Vec<ContextIx> {
        let mut open: Vec<u32> = self.all.iter().map(|context| context.children.len() as u32).collect();
        let mut ready: Vec<ContextIx> = self.indices().filter(|at| open[at.0 as usize] == 0).collect();
        let mut order = Vec::with_capacity(open.len());
        while let Some(at) = ready.pop() {
            order.push(at);
            for &(above, _) in &self.get(at).parents {
                open[above.0 as usize] -= 1;
                if open[above.0 as usize] == 0 {
                    ready.push(above);
                }
            }
        }
        order
    }

    /// What a net is known as.
    pub fn marks_of(&self, at: ContextIx, net: NetIx) -> &[Mark] {
        self.marks.of(self.get(at).mark_set(net))
    }

    /// Counts instances from the tops down, in an order in which callers come first (Kahn).
    fn count(&mut self) {
        let mut open: Vec<u32> = self.all.iter().map(|context| context.parents.len() as u32).collect();
        let mut ready: Vec<u32> = (0..self.all.len() as u32).filter(|&at| open[at as usize] == 0).collect();
        for &top in &ready {
            self.all[top as usize].count = 1;
        }
        while let Some(at) = ready.pop() {
            let count = self.all[at as usize].count;
            let children = std::mem::take(&mut self.all[at as usize].children);
            for child in &children {
                let below = &mut self.all[child.0 as usize];
                below.count = below.count.saturating_add(count);
                open[child.0 as usize] -= 1;
                if open[child.0 as usize] == 0 {
                    ready.push(child.0);
                }
            }
            self.all[at as usize].children = children;
        }
    }
}

impl Context {
    /// The one net that stands for all nets shorted with `net`.
    pub fn root(&self, net: NetIx) -> NetIx {
        self.roots.as_ref().map_or(net, |roots| NetIx(roots[net.0 as usize]))
    }

    /// Whether two nets are one here.
    pub fn same(&self, a: NetIx, b: NetIx) -> bool {
        a == b || self.root(a) == self.root(b)
    }

    /// What a net is known as.
    pub fn mark_set(&self, net: NetIx) -> MarkSet {
        let root = self.root(net);
        self.marks.binary_search_by_key(&root, |&(net, _)| net).map_or(MarkSet(0), |at| self.marks[at].1)
    }

    /// The nets that are known as something, in order of their index.
    pub fn marked(&self) -> &[(NetIx, MarkSet)] {
        &self.marks
    }
}

struct Work<'w, 'a> {
    design: &'w Design<'a>,
    deck: &'w Deck,
    joins: Joins,
    known: HashMap<Box<[u32]>, ContextIx>,
    all: Vec<Context>,
    marks: Marks,
    diagnostics: Vec<Diagnostic>,
    brought: Brought,
    /// For each net of the cell in hand, the instance statement (by its number among all that were looked at) that was last seen
    /// on it, and the first of its positions there.
    first_on: Vec<(u64, u32)>,
    instance_count: u64,
}

impl Work<'_, '_> {
    fn top(&mut self, variant: VariantIx) {
        let template = self.design.template(variant);
        let (found, pending) = self.marks.of_top(self.deck, self.design, template, &mut self.diagnostics);
        let roots = self.roots(variant, &[]);
        let marks = self.gather(&roots, found.into_iter());
        self.all.push(Context { variant, count: 0, children: Vec::new(), parents: Vec::new(), roots, marks, pending });
    }

    /// One set of marks for each marked root net, in order.
    fn gather(
        &mut self,
        roots: &Option<Box<[u32]>>,
        found: impl Iterator<Item = (NetIx, Mark)>,
    ) -> Vec<(NetIx, MarkSet)> {
        let root = |net: NetIx| roots.as_ref().map_or(net, |roots| NetIx(roots[net.0 as usize]));
        let mut by_net: Vec<(NetIx, Mark)> = found.map(|(net, mark)| (root(net), mark)).collect();
        by_net.sort_unstable();
        let groups = by_net.chunk_by(|a, b| a.0 == b.0);
        groups.map(|group| (group[0].0, self.marks.intern(group.iter().map(|&(_, mark)| mark).collect()))).collect()
    }

    /// The root of each net: the net of lowest index among those that are one.
    fn roots(&self, variant: VariantIx, joined: &[(u32, u32)]) -> Option<Box<[u32]>> {
        let template = self.design.template(variant);
        let inside = self.joins.inside(self.design, variant);
        if inside.is_none() && joined.is_empty() {
            return None;
        }
        // A tree of each group, in which a net's parent is never a later net: the roots are the lowest ones.
        let mut above: Box<[u32]> = (0..template.nets.len() as u32).collect();
        if let Some(mut nets) = inside {
            let mut lowest = vec![u32::MAX; template.nets.len()];
            for net in 0..template.nets.len() as u32 {
                let low = &mut lowest[nets.find_mut(net) as usize];
                *low = (*low).min(net);
                above[net as usize] = *low;
            }
        }
        for &(a, b) in joined {
            let (a, b) = (template.boundary_at(a), template.boundary_at(b));
            let (a, b) = (top_of(&above, a.0), top_of(&above, b.0));
            above[a.max(b) as usize] = a.min(b);
        }
        for net in 0..above.len() {
            above[net] = above[above[net] as usize];
        }
        Some(above)
    }

    fn expand(&mut self, at: ContextIx) {
        let design = self.design;
        let variant = self.all[at.0 as usize].variant;
        let template = design.template(variant);
        if template.instances.is_empty() {
            return;
        }
        if self.first_on.len() < template.nets.len() {
            self.first_on.resize(template.nets.len(), (0, 0));
        }
        let mut children = Vec::with_capacity(template.instances.len());
        for (instance, &child) in template.instance_indices().zip(&design.variants[variant.0 as usize].children) {
            self.bring(at, template, instance, child);
            let context = match self.known.get(self.brought.key.as_slice()) {
                Some(&known) => known,
                None => self.add(child),
            };
            self.all[context.0 as usize].parents.push((at, instance));
            children.push(context);
        }
        self.all[at.0 as usize].children = children;
    }

    fn bring(&mut self, at: ContextIx, template: &Template, instance: InstanceIx, child: VariantIx) {
        let (context, brought) = (&self.all[at.0 as usize], &mut self.brought);
        brought.joined.clear();
        brought.marks.clear();
        brought.pending.clear();
        self.instance_count += 1;
        for (&net, position) in template.instance_pins(instance).iter().zip(0..) {
            let first = &mut self.first_on[context.root(net).0 as usize];
            if first.0 == self.instance_count {
                brought.joined.push((first.1, position));
            } else {
                *first = (self.instance_count, position);
            }
            if !context.marks.is_empty() {
                let set = context.mark_set(net);
                if set != MarkSet(0) {
                    brought.marks.push((position, set));
                }
            }
        }
        if !context.pending.is_empty() {
            let name = self.design.instance_name(template, instance);
            brought.pending = self.marks.below_instance(self.deck, &context.pending, name);
        }
        brought.seal(child);
    }

    fn add(&mut self, variant: VariantIx) -> ContextIx {
        let index = ContextIx(self.all.len() as u32);
        let template = self.design.template(variant);
        let brought = std::mem::take(&mut self.brought);
        let roots = self.roots(variant, &brought.joined);
        let mut found: Vec<(NetIx, Mark)> = Vec::new();
        for &(position, set) in &brought.marks {
            found.extend(self.marks.of(set).iter().map(|&mark| (template.boundary_at(position), mark)));
        }
        found.extend(self.marks.on_nets(self.deck, self.design, template, &brought.pending));
        let marks = self.gather(&roots, found.into_iter());
        let pending = brought.pending.clone();
        self.all.push(Context { variant, count: 0, children: Vec::new(), parents: Vec::new(), roots, marks, pending });
        self.known.insert(brought.key.as_slice().into(), index);
        self.brought = brought;
        index
    }
}

fn top_of(above: &[u32], mut net: u32) -> u32 {
    while above[net as usize] != net {
        net = above[net as usize];
    }
    net
}
