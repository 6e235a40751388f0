//! Which nets of a cell are one: drawn shorts of its own and of the cells below it, by union-find from the leaves up.

use crate::design::{Design, NetIx, VariantIx};
use petgraph::unionfind::UnionFind;

/// For each variant, the pairs of its boundary positions (ports, then implicit ports) that are one net inside it. Empty
/// altogether where no card of the design shorts anything.
#[derive(Debug, Default)]
pub(super) struct Joins {
    by_variant: Vec<Vec<(u32, u32)>>,
}

impl Joins {
    /// Works out all variants, the called ones before their callers.
    pub(super) fn new(design: &Design<'_>) -> Joins {
        if design.variants.iter().all(|variant| variant.shorts.is_empty()) {
            return Joins::default();
        }
        let mut joins = Joins { by_variant: vec![Vec::new(); design.variants.len()] };
        for variant in callees_first(design) {
            if let Some(mut nets) = joins.inside(design, variant) {
                joins.by_variant[variant.0 as usize] = boundary_pairs(design, variant, &mut nets);
            }
        }
        joins
    }

    /// The union of a variant's nets by its own shorts and those below; none where there are none.
    pub(super) fn inside(&self, design: &Design<'_>, variant: VariantIx) -> Option<UnionFind<u32>> {
        if self.by_variant.is_empty() {
            return None;
        }
        let this = &design.variants[variant.0 as usize];
        let template = design.template(variant);
        let below = this.children.iter().any(|child| !self.by_variant[child.0 as usize].is_empty());
        if this.shorts.is_empty() && !below {
            return None;
        }
        let mut nets = UnionFind::new(template.nets.len());
        for &(a, b) in &this.shorts {
            nets.union(a.0, b.0);
        }
        for (instance, child) in template.instance_indices().zip(&this.children) {
            let pins = template.instance_pins(instance);
            for &(a, b) in &self.by_variant[child.0 as usize] {
                if let (Some(a), Some(b)) = (pins.get(a as usize), pins.get(b as usize)) {
                    nets.union(a.0, b.0);
                }
            }
        }
        Some(nets)
    }
}

fn boundary_pairs(design: &Design<'_>, variant: VariantIx, nets: &mut UnionFind<u32>) -> Vec<(u32, u32)> {
    let boundary: Vec<NetIx> = design.template(variant).boundary().collect();
    let mut first_with: hashbrown::HashMap<u32, u32> = hashbrown::HashMap::new();
    let mut pairs = Vec::new();
    for (position, net) in boundary.iter().enumerate() {
        let first = *first_with.entry(nets.find_mut(net.0)).or_insert(position as u32);
        if first != position as u32 {
            pairs.push((first, position as u32));
        }
    }
    pairs
}

/// All variants, each after those it calls.
pub(super) fn callees_first(design: &Design<'_>) -> Vec<VariantIx> {
    let mut order = Vec::with_capacity(design.variants.len());
    let mut seen = vec![false; design.variants.len()];
    for root in 0..design.variants.len() as u32 {
        let mut stack = vec![(VariantIx(root), 0usize)];
        while let Some((variant, child)) = stack.pop() {
            if child == 0 && std::mem::replace(&mut seen[variant.0 as usize], true) {
                continue;
            }
            match design.variants[variant.0 as usize].children.get(child) {
                Some(&next) => {
                    stack.push((variant, child + 1));
                    if !seen[next.0 as usize] {
                        stack.push((next, 0));
                    }
                }
                None => order.push(variant),
            }
        }
    }
    order
}
