//! The contexts of a design, how often each occurs, and paths to it.

use super::joins::Joins;
use super::marks::{Mark, MarkSet, Marks, Pending};
use crate::declared::Deck;
use crate::design::{Design, InstanceIx, NetIx, VariantIx};
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

/// What an instance brings to the cell below: which boundary positions are one net, and what each is known as.
#[derive(PartialEq, Eq, Hash, Clone)]
struct Key {
    variant: VariantIx,
    joined: Vec<(u32, u32)>,
    marks: Vec<(u32, MarkSet)>,
    pending: Vec<Pending>,
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
    known: HashMap<Key, ContextIx>,
    all: Vec<Context>,
    marks: Marks,
    diagnostics: Vec<Diagnostic>,
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
        let mut nets = inside.unwrap_or_else(|| petgraph::unionfind::UnionFind::new(template.nets.len()));
        let boundary: Vec<NetIx> = template.boundary().collect();
        for &(a, b) in joined {
            nets.union(boundary[a as usize].0, boundary[b as usize].0);
        }
        let mut lowest = vec![u32::MAX; template.nets.len()];
        (0..template.nets.len() as u32)
            .map(|net| {
                let low = &mut lowest[nets.find_mut(net) as usize];
                *low = (*low).min(net);
                *low
            })
            .collect::<Vec<u32>>()
            .into_boxed_slice()
            .into()
    }

    fn expand(&mut self, at: ContextIx) {
        let variant = self.all[at.0 as usize].variant;
        let template = self.design.template(variant);
        let mut children = Vec::with_capacity(template.instances.len());
        for (instance, &child) in template.instance_indices().zip(&self.design.variants[variant.0 as usize].children) {
            let key = self.key(at, instance, child);
            let context = match self.known.get(&key) {
                Some(&known) => known,
                None => self.add(key),
            };
            self.all[context.0 as usize].parents.push((at, instance));
            children.push(context);
        }
        self.all[at.0 as usize].children = children;
    }

    fn key(&self, at: ContextIx, instance: InstanceIx, child: VariantIx) -> Key {
        let context = &self.all[at.0 as usize];
        let template = self.design.template(context.variant);
        let pins = template.instance_pins(instance);
        let mut joined = Vec::new();
        let mut marks = Vec::new();
        let mut first_on: HashMap<NetIx, u32> = HashMap::with_capacity(pins.len());
        for (position, &net) in pins.iter().enumerate() {
            let first = *first_on.entry(context.root(net)).or_insert(position as u32);
            if first != position as u32 {
                joined.push((first, position as u32));
            }
            let set = context.mark_set(net);
            if set != MarkSet(0) {
                marks.push((position as u32, set));
            }
        }
        let pending = match context.pending.as_slice() {
            [] => Vec::new(),
            pending => self.marks.below_instance(self.deck, pending, self.design.instance_name(template, instance)),
        };
        Key { variant: child, joined, marks, pending }
    }

    fn add(&mut self, key: Key) -> ContextIx {
        let index = ContextIx(self.all.len() as u32);
        let template = self.design.template(key.variant);
        let roots = self.roots(key.variant, &key.joined);
        let boundary: Vec<NetIx> = template.boundary().collect();
        let mut found: Vec<(NetIx, Mark)> = Vec::new();
        for &(position, set) in &key.marks {
            found.extend(self.marks.of(set).iter().map(|&mark| (boundary[position as usize], mark)));
        }
        found.extend(self.marks.on_nets(self.deck, self.design, template, &key.pending));
        let marks = self.gather(&roots, found.into_iter());
        let (variant, pending) = (key.variant, key.pending.clone());
        self.all.push(Context { variant, count: 0, children: Vec::new(), parents: Vec::new(), roots, marks, pending });
        self.known.insert(key, index);
        index
    }
}
