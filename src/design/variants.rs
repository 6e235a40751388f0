//! Cells with their parameters: each distinct set of values is elaborated once, however many instances share it.

use super::cells::Cells;
use super::params::{Outer, Settled, Trouble, settle};
use super::size::Card;
use super::template::Guarded;
use super::{Design, DeviceIx, Instance, InstanceIx, NetIx, Template, TemplateIx};
use crate::diag::{Diagnostic, Severity};
use crate::names::{Sym, nearest};
use crate::netlist::tree::CellIx;
use crate::source::{FileId, Span};
use hashbrown::{HashMap, HashSet};

/// Index in `Design::variants`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct VariantIx(pub u32);

/// A cell with one set of parameter values.
#[derive(Clone, Debug)]
pub struct Variant {
    /// The cell.
    pub cell: CellIx,
    /// Its connections.
    pub template: TemplateIx,
    /// For each instance statement of the template, what it instantiates.
    pub children: Vec<VariantIx>,
    /// Pairs of nets that its own cards short.
    pub shorts: Vec<(NetIx, NetIx)>,
    /// Product of the `m` of all instance calls above.
    pub multiplier: f64,
    pub(super) env: super::params::Env,
    /// For a cell defined inside another: the variant of that one.
    pub(super) lexical: Option<VariantIx>,
}

/// More variants than this are not elaborated: a design in which every instance has parameters of its own.
const MOST_VARIANTS: usize = 4_000_000;

#[derive(PartialEq, Eq, Hash)]
struct Key {
    cell: CellIx,
    lexical: Option<VariantIx>,
    multiplier: u64,
    given: Vec<(Sym, u64)>,
}

/// Elaborates everything below the tops.
pub(super) fn build(design: &mut Design<'_>, cells: &Cells) {
    let mut work =
        Work { design, cells, known: HashMap::new(), filtered: HashMap::new(), said: HashSet::new(), stopped: false };
    work.report_globals();
    for &top in &cells.tops {
        if let Some(variant) = work.variant(top, None, 1.0, Vec::new()) {
            work.design.tops.push(variant);
        }
    }
    let mut next = 0;
    while next < work.design.variants.len() {
        work.expand(VariantIx(next as u32));
        next += 1;
    }
}

struct Work<'w, 'a> {
    design: &'w mut Design<'a>,
    cells: &'w Cells,
    known: HashMap<Key, VariantIx>,
    filtered: HashMap<(u32, Vec<bool>), TemplateIx>,
    said: HashSet<(Span, String)>,
    stopped: bool,
}

impl Work<'_, '_> {
    fn report_globals(&mut self) {
        for trouble in std::mem::take(&mut self.design.globals.troubles) {
            self.report(trouble);
        }
    }

    fn report(&mut self, trouble: Trouble) {
        let Some(span) = trouble.span.filter(|_| !trouble.quiet) else { return };
        self.say(Severity::Error, "card", span, trouble.message, trouble.help);
    }

    fn say(&mut self, severity: Severity, code: &str, span: Span, message: String, help: Option<String>) {
        if self.said.insert((span, message.clone())) {
            let mut diagnostic = Diagnostic::new(code, severity, span, message);
            diagnostic.help = help;
            self.design.diagnostics.push(diagnostic);
        }
    }

    /// The variant of a cell with these values, new or known.
    fn variant(
        &mut self,
        cell: CellIx,
        lexical: Option<VariantIx>,
        multiplier: f64,
        mut given: Vec<(Sym, f64)>,
    ) -> Option<VariantIx> {
        given.sort_by_key(|&(name, _)| name);
        let bits = given.iter().map(|&(name, value)| (name, value.to_bits())).collect();
        let key = Key { cell, lexical, multiplier: multiplier.to_bits(), given: bits };
        if let Some(&known) = self.known.get(&key) {
            return Some(known);
        }
        if self.design.variants.len() >= MOST_VARIANTS {
            self.stop(cell);
            return None;
        }
        let settled = self.settle(cell, lexical, &given);
        settled.troubles.into_iter().for_each(|trouble| self.report(trouble));
        let base = self.cells.template[cell.0 as usize]?;
        let template = self.under_conditions(base, settled.active);
        let index = VariantIx(self.design.variants.len() as u32);
        let shorts = self.design.templates[template.0 as usize].joined.clone();
        self.design.variants.push(Variant {
            cell,
            template,
            children: Vec::new(),
            shorts,
            multiplier,
            env: settled.env,
            lexical,
        });
        self.known.insert(key, index);
        Some(index)
    }

    fn stop(&mut self, cell: CellIx) {
        if !std::mem::replace(&mut self.stopped, true) {
            let span = self.design.tree.cells[cell.0 as usize].name.span;
            let message = format!(
                "the design has more than {MOST_VARIANTS} cells with parameters of their own: the rest is not judged"
            );
            self.say(Severity::Error, "netlist", span, message, Some("name a smaller cell with --top".to_owned()));
        }
    }

    fn settle(&self, cell: CellIx, lexical: Option<VariantIx>, given: &[(Sym, f64)]) -> Settled {
        let (design, source) = (&*self.design, &self.design.tree.cells[cell.0 as usize]);
        if cell == CellIx(0) {
            return Settled { env: Vec::new(), active: design.globals.active.clone(), troubles: Vec::new() };
        }
        if source.formals.is_empty() && source.params.is_empty() && source.guards.is_empty() {
            return Settled { env: Vec::new(), active: Vec::new(), troubles: Vec::new() };
        }
        let mut around: Vec<&[(Sym, f64)]> = Vec::new();
        let mut at = lexical;
        while let Some(variant) = at {
            let variant = &design.variants[variant.0 as usize];
            around.push(&variant.env);
            at = variant.lexical;
        }
        let outer = Outer { tree: &design.tree, names: &design.names, globals: &design.globals, around: &around };
        settle(&outer, cell, given)
    }

    /// The template without what stands under conditions that do not hold.
    fn under_conditions(&mut self, base: u32, active: Vec<bool>) -> TemplateIx {
        let guarded = &self.cells.guarded[base as usize];
        if guarded.iter().all(|guarded| active[guarded.guard.0 as usize]) {
            return TemplateIx(base);
        }
        if let Some(&known) = self.filtered.get(&(base, active.clone())) {
            return known;
        }
        let out: Vec<&Guarded> = guarded.iter().filter(|guarded| !active[guarded.guard.0 as usize]).collect();
        let made = without(&self.design.templates[base as usize], &out);
        let index = TemplateIx(self.design.templates.len() as u32);
        self.design.templates.push(made);
        self.filtered.insert((base, active), index);
        index
    }

    /// Evaluates the instance calls, shorts and expressions of a variant.
    fn expand(&mut self, at: VariantIx) {
        let template = self.design.variants[at.0 as usize].template;
        let instances = std::mem::take(&mut self.design.templates[template.0 as usize].instances);
        let mut children = Vec::with_capacity(instances.len());
        let mut kept = true;
        for instance in &instances {
            match self.child(at, instance) {
                Some(child) => children.push(child),
                None => kept = false,
            }
        }
        self.design.templates[template.0 as usize].instances = if kept { instances } else { Vec::new() };
        self.design.variants[at.0 as usize].children = if kept { children } else { Vec::new() };
        self.evaluate_shorts(at);
        self.check_expressions(at);
    }

    fn child(&mut self, at: VariantIx, instance: &Instance) -> Option<VariantIx> {
        let variant = &self.design.variants[at.0 as usize];
        let (cell, mut multiplier) = (instance.cell, variant.multiplier);
        let lexical = self.lexical_parent(at, cell);
        let mut given = Vec::new();
        if instance.has_params {
            let card = self.design.card(instance.file, instance.card);
            for &(key, value) in &card.fields.params {
                let reading = self.design.in_scope(at, |scope| self.design.word(scope, &card, value));
                let key_text = key.of(card.text);
                let own = self.design.names.find(key_text).filter(|&name| self.has_parameter(cell, name));
                let value = reading.unwrap_or_else(|trouble| {
                    self.report(trouble);
                    f64::NAN
                });
                match own {
                    Some(name) => {
                        given.retain(|&(other, _)| other != name);
                        given.push((name, value));
                    }
                    None if key_text.eq_ignore_ascii_case("m") => multiplier *= value,
                    None => self.unknown_parameter(cell, key.span(instance.file), key_text),
                }
            }
        }
        self.variant(cell, lexical, multiplier, given)
    }

    fn has_parameter(&self, cell: CellIx, name: Sym) -> bool {
        let source = &self.design.tree.cells[cell.0 as usize];
        source.formals.iter().chain(&source.params).any(|param| param.name.name == name)
    }

    fn unknown_parameter(&mut self, cell: CellIx, span: Span, key: &str) {
        let source = &self.design.tree.cells[cell.0 as usize];
        let names: Vec<String> =
            source.formals.iter().map(|param| self.design.names.text(param.name.name).to_owned()).collect();
        let near = nearest(key, names.iter().map(String::as_str)).map(|near| format!("did you mean `{near}`?"));
        let message =
            format!("the cell `{}` has no parameter `{key}`: it has no effect here", self.design.cell_name(cell));
        self.say(Severity::Warning, "netlist", span, message, near);
    }

    fn lexical_parent(&self, at: VariantIx, cell: CellIx) -> Option<VariantIx> {
        let parent = self.design.tree.cells[cell.0 as usize].parent.filter(|&parent| parent != CellIx(0))?;
        let mut scope = Some(at);
        while let Some(variant) = scope {
            if self.design.variants[variant.0 as usize].cell == parent {
                return scope;
            }
            scope = self.design.variants[variant.0 as usize].lexical;
        }
        None
    }

    fn evaluate_shorts(&mut self, at: VariantIx) {
        let template = self.design.template(at);
        let mut found = Vec::new();
        for short in &template.shorts {
            let pins = template.device_pins(short.device);
            let &[a, b, ..] = pins else { continue };
            let zero = short.values.is_empty() || {
                let card = self.design.device_card(at, short.device);
                let zero = |word| self.design.in_scope(at, |scope| self.design.word(scope, &card, word)) == Ok(0.0);
                short.values.iter().all(|&word| zero(word))
            };
            if zero && a != b {
                found.push((a, b));
            }
        }
        self.design.variants[at.0 as usize].shorts.extend(found);
    }

    /// Reports quoted expressions on device cards that cannot be evaluated: a simulator would refuse them.
    fn check_expressions(&mut self, at: VariantIx) {
        let devices: Vec<DeviceIx> = self.design.template(at).with_expressions.clone();
        for device in devices {
            let card = self.design.device_card(at, device);
            let letter = card.text.as_bytes().get(card.start as usize).map_or(0, u8::to_ascii_lowercase);
            if !b"mqjzdxrcl".contains(&letter) {
                continue;
            }
            for trouble in self.troubles(at, &card) {
                self.report(trouble);
            }
        }
    }

    fn troubles(&self, at: VariantIx, card: &Card<'_>) -> Vec<Trouble> {
        let quoted = card.fields.params.iter().filter(|(_, value)| value.quoted);
        quoted
            .filter_map(|&(_, value)| self.design.in_scope(at, |scope| self.design.word(scope, card, value)).err())
            .collect()
    }
}

fn without(template: &Template, out: &[&Guarded]) -> Template {
    let keep_device = |device: u32| !out.iter().any(|guarded| guarded.devices.contains(&device));
    let keep_instance = |instance: u32| !out.iter().any(|guarded| guarded.instances.contains(&instance));
    let mut made =
        Template { first_pin: Vec::new(), cards: Vec::new(), types: Vec::new(), pins: Vec::new(), ..template.clone() };
    made.files.clear();
    let mut renumbered: HashMap<DeviceIx, DeviceIx> = HashMap::new();
    for device in template.devices().filter(|device| keep_device(device.0)) {
        let (file, card) = template.device_card(device);
        let new = DeviceIx(made.cards.len() as u32);
        if made.files.last().is_none_or(|&(_, last)| last != file) {
            made.files.push((new.0, file));
        }
        renumbered.insert(device, new);
        made.cards.push(card);
        made.types.push(template.types[device.0 as usize]);
        made.first_pin.push(made.pins.len() as u32);
        made.pins.extend_from_slice(template.device_pins(device));
    }
    made.first_pin.push(made.pins.len() as u32);
    if made.files.is_empty() {
        made.files.push((0, FileId(0)));
    }
    made.instances = template
        .instance_indices()
        .filter(|instance| keep_instance(instance.0))
        .map(|InstanceIx(index)| template.instances[index as usize].clone())
        .collect();
    made.shorts = template
        .shorts
        .iter()
        .filter_map(|short| {
            renumbered
                .get(&short.device)
                .map(|&device| super::shorts::MaybeShort { device, values: short.values.clone() })
        })
        .collect();
    made.with_expressions =
        template.with_expressions.iter().filter_map(|device| renumbered.get(device).copied()).collect();
    made
}
