//! Reads the cards of one cell into its connections. This is the one pass over every element card of a design, so it
//! allocates nothing per card: fields are slices, names are interned, and a device is a few numbers.

use super::kinds::{DeviceType, Element, Matcher, TypeIx, element_of};
use super::shorts::MaybeShort;
use super::{DeviceIx, Instance, NetIx, Oddity, Template};
use crate::declared::Class;
use crate::diag::Diagnostic;
use crate::names::{Names, Sym, nearest};
use crate::netlist::fields::read_fields;
use crate::netlist::letters::{self, interpret};
use crate::netlist::tree::{CellIx, Fields, GuardIx, Tree, Word};
use crate::source::{FileId, SourceMap, Span};
use hashbrown::HashMap;

/// Everything that reading cells shares.
pub(super) struct Reader<'a> {
    pub(super) tree: &'a Tree,
    pub(super) sources: &'a SourceMap,
    pub(super) names: Names,
    pub(super) classes: &'a [Class],
    pub(super) matcher: Matcher<'a>,
    pub(super) types: Vec<DeviceType>,
    pub(super) diagnostics: Vec<Diagnostic>,
    pub(super) oddities: Vec<Oddity>,
    pub(super) cards_skipped: u64,
    known_types: HashMap<(u8, Sym, CellIx, u8), TypeIx>,
    unknown_models: HashMap<Sym, usize>,
    cells_by_name: HashMap<(CellIx, Sym), CellIx>,
    models_by_name: HashMap<(CellIx, Sym), String>,
    equivalents: HashMap<Sym, Sym>,
    globals: Vec<Sym>,
    ground: Sym,
    ground_word: Sym,
    net_of: Vec<u32>,
}

/// A cell's connections and what stands under conditions.
pub(super) struct Built {
    pub(super) template: Template,
    /// Stretches of devices and instances that stand under a guard.
    pub(super) guarded: Vec<Guarded>,
    /// Local nets that every cell shares by name.
    pub(super) shared: Vec<(Sym, NetIx)>,
}

/// Devices and instances between two counts, under one guard.
pub(super) struct Guarded {
    pub(super) devices: std::ops::Range<u32>,
    pub(super) instances: std::ops::Range<u32>,
    pub(super) guard: GuardIx,
}

impl<'a> Reader<'a> {
    pub(super) fn new(tree: &'a Tree, sources: &'a SourceMap, mut names: Names, classes: &'a [Class]) -> Reader<'a> {
        let ground = names.intern("0");
        let ground_word = names.intern("gnd");
        let mut globals: Vec<Sym> = tree.globals.iter().map(|global| global.name).collect();
        globals.push(ground);
        globals.sort_unstable();
        globals.dedup();
        let mut cells_by_name = HashMap::new();
        let mut models_by_name = HashMap::new();
        for (index, cell) in tree.cells.iter().enumerate() {
            if let Some(parent) = cell.parent {
                cells_by_name.entry((parent, cell.name.name)).or_insert(CellIx(index as u32));
            }
            for model in &cell.models {
                models_by_name.entry((CellIx(index as u32), model.name.name)).or_insert_with(|| model.kind.clone());
            }
        }
        Reader {
            tree,
            sources,
            names,
            classes,
            matcher: Matcher::new(classes),
            types: Vec::new(),
            diagnostics: Vec::new(),
            oddities: Vec::new(),
            cards_skipped: 0,
            known_types: HashMap::new(),
            unknown_models: HashMap::new(),
            cells_by_name,
            models_by_name,
            equivalents: tree.equivalents.iter().map(|&(meant, written)| (written, meant)).collect(),
            globals,
            ground,
            ground_word,
            net_of: Vec::new(),
        }
    }

    /// The cell that a name means inside `from`: its own inner cells first, then those of the cells around it.
    pub(super) fn find_cell(&self, from: CellIx, name: Sym) -> Option<CellIx> {
        self.up_the_scopes(from).find_map(|scope| self.cells_by_name.get(&(scope, name)).copied())
    }

    fn up_the_scopes(&self, from: CellIx) -> impl Iterator<Item = CellIx> + '_ {
        std::iter::successors(Some(from), |cell| self.tree.cells[cell.0 as usize].parent)
    }

    fn model_kind(&self, from: CellIx, name: Sym) -> Option<&str> {
        self.up_the_scopes(from).find_map(|scope| self.models_by_name.get(&(scope, name))).map(String::as_str)
    }

    /// Whether a class declares this name as a leaf.
    pub(super) fn is_leaf(&mut self, name: Sym) -> Option<u32> {
        self.matcher.class_of(name, &self.names, &mut self.diagnostics)
    }

    /// Reads a whole cell.
    pub(super) fn read_cell(&mut self, cell: CellIx) -> Built {
        let tree = self.tree;
        let mut work = Work::new(self, cell);
        let source = &tree.cells[cell.0 as usize];
        work.built.template.nets.reserve(source.ports.len() * 2);
        for port in &source.ports {
            work.port(port.name);
        }
        for (index, run) in source.runs.iter().enumerate() {
            let end = source.runs.get(index + 1).map_or(source.cards.len(), |next| next.first as usize);
            work.run(run.file, &source.cards[run.first as usize..end], run.guard);
        }
        work.finish()
    }
}

struct Work<'r, 'a> {
    reader: &'r mut Reader<'a>,
    cell: CellIx,
    has_models: bool,
    fields: Fields,
    built: Built,
}

impl<'r, 'a> Work<'r, 'a> {
    fn new(reader: &'r mut Reader<'a>, cell: CellIx) -> Work<'r, 'a> {
        let template = Template { cell: Some(cell), ..Template::default() };
        let has_models = reader
            .up_the_scopes(cell)
            .any(|scope| scope != CellIx(0) && !reader.tree.cells[scope.0 as usize].models.is_empty());
        Work {
            reader,
            cell,
            has_models,
            fields: Fields::default(),
            built: Built { template, guarded: Vec::new(), shared: Vec::new() },
        }
    }

    fn port(&mut self, name: Sym) {
        let reader = &mut *self.reader;
        let name = *reader.equivalents.get(&name).unwrap_or(&name);
        let template = &mut self.built.template;
        grow(&mut reader.net_of, name);
        if reader.net_of[name.0 as usize] == 0 {
            reader.net_of[name.0 as usize] = template.nets.len() as u32 + 1;
        } else {
            // A port named twice keeps a place of its own, so that positions hold.
            template.joined.push((NetIx(reader.net_of[name.0 as usize] - 1), NetIx(template.nets.len() as u32)));
        }
        template.nets.push(name);
        template.ports += 1;
    }

    fn run(&mut self, file: FileId, cards: &[u32], guard: Option<GuardIx>) {
        let text = self.reader.sources.text(file);
        let devices = self.built.template.cards.len() as u32;
        let instances = self.built.template.instances.len() as u32;
        if self.built.template.files.last().is_none_or(|&(_, last)| last != file) {
            self.built.template.files.push((devices, file));
        }
        self.make_room(text, cards);
        for &card in cards {
            self.card(text, file, card);
        }
        if let Some(guard) = guard {
            let (devices_end, instances_end) =
                (self.built.template.cards.len() as u32, self.built.template.instances.len() as u32);
            self.built.guarded.push(Guarded {
                devices: devices..devices_end,
                instances: instances..instances_end,
                guard,
            });
        }
    }

    /// Room for what the cards will need, so that few tables grow.
    fn make_room(&mut self, text: &str, cards: &[u32]) {
        let is_call = |&&card: &&u32| matches!(text.as_bytes().get(card as usize), Some(b'x' | b'X'));
        // Looking at a large cell's cards twice would cost more than room that is never touched.
        let calls = if cards.len() <= 1000 { cards.iter().filter(is_call).count() } else { 0 };
        let (devices, template) = (cards.len() - calls, &mut self.built.template);
        template.cards.reserve(devices);
        template.types.reserve(devices);
        template.first_pin.reserve(devices + 1);
        template.pins.reserve(devices * 4);
        template.instances.reserve(calls);
        template.links.reserve(calls * 8);
    }

    fn card(&mut self, text: &'a str, file: FileId, start: u32) {
        let mut fields = std::mem::take(&mut self.fields);
        if let Some(complaint) = read_fields(text, start, &mut fields) {
            self.refuse(complaint.diagnostic(file));
        } else {
            self.element(text, file, start, &fields);
        }
        self.fields = fields;
    }

    fn refuse(&mut self, diagnostic: Diagnostic) {
        self.reader.cards_skipped += 1;
        self.reader.diagnostics.push(diagnostic);
    }

    fn element(&mut self, text: &'a str, file: FileId, start: u32, fields: &Fields) {
        let (cell, reader) = (self.cell, &mut *self.reader);
        let read = interpret(text, fields, &mut |word| {
            reader
                .names
                .find(word)
                .is_some_and(|name| reader.is_leaf(name).is_some() || reader.model_kind(cell, name).is_some())
        });
        let element = match read {
            Ok(element) => element,
            Err(complaint) => return self.refuse(complaint.diagnostic(file)),
        };
        if element.letter == b'k' {
            return;
        }
        let nodes = &fields.words[element.nodes.clone()];
        if element.letter == b'x' {
            let Some(model) = element.model else { return };
            let name = self.intern(model.of(text));
            if self.reader.is_leaf(name).is_none()
                && let Some(called) = self.reader.find_cell(cell, name)
            {
                return self.instance(text, file, start, fields, nodes, model, called);
            }
        }
        self.device(text, file, start, fields, &element);
    }

    fn intern(&mut self, word: &str) -> Sym {
        let name = self.reader.names.intern(word);
        if self.reader.equivalents.is_empty() { name } else { *self.reader.equivalents.get(&name).unwrap_or(&name) }
    }

    fn net(&mut self, word: &str) -> NetIx {
        let mut name = self.intern(word);
        let reader = &mut *self.reader;
        if name == reader.ground_word {
            name = reader.ground;
        }
        grow(&mut reader.net_of, name);
        let known = &mut reader.net_of[name.0 as usize];
        if *known == 0 {
            let net = self.built.template.nets.len() as u32;
            *known = net + 1;
            self.built.template.nets.push(name);
            if reader.globals.binary_search(&name).is_ok() {
                self.built.shared.push((name, NetIx(net)));
            }
            return NetIx(net);
        }
        NetIx(*known - 1)
    }

    #[allow(clippy::too_many_arguments)]
    fn instance(
        &mut self,
        text: &'a str,
        file: FileId,
        start: u32,
        fields: &Fields,
        nodes: &[Word],
        model: Word,
        called: CellIx,
    ) {
        let ports = &self.reader.tree.cells[called.0 as usize].ports;
        if ports.len() != nodes.len() {
            let needs = ports.iter().map(|port| self.reader.names.text(port.name).to_owned()).collect();
            let defined = self.reader.tree.cells[called.0 as usize].name.span;
            self.pin_count(text, file, fields, nodes, model, needs, defined);
            let kind = self.kind(DeviceType {
                letter: b'x',
                model: None,
                class: None,
                element: Element::Opaque,
                terminals: 0,
                classless: false,
                misfit: true,
                order: None,
            });
            return self.push(start, kind, nodes.iter().map(|word| word.of(text)));
        }
        let first = self.built.template.links.len() as u32;
        for word in nodes {
            let net = self.net(word.of(text));
            self.built.template.links.push(net);
        }
        let pins = first..self.built.template.links.len() as u32;
        self.built.template.instances.push(Instance {
            card: start,
            file,
            cell: called,
            pins,
            has_params: !fields.params.is_empty(),
        });
    }

    fn device(&mut self, text: &'a str, file: FileId, start: u32, fields: &Fields, element: &letters::Element) {
        let nodes = &fields.words[element.nodes.clone()];
        let model_word = fields.bracket_model.or(element.model);
        let model = model_word.map(|word| self.intern(word.of(text)));
        let mut kind = self.type_of(element.letter, model, nodes.len().min(255) as u8);
        if self.reader.types[kind.0 as usize].classless {
            self.unknown_model(file, fields, text, model, model_word);
        }
        let substrate = fields.substrate;
        let class = self.reader.types[kind.0 as usize].class.map(|class| &self.reader.classes[class as usize]);
        let mut pins: [Word; 1] = [Word { start: 0, end: 0, quoted: false }];
        let mut extra = 0;
        if let Some(class) = class
            && class.pins.len() != nodes.len()
        {
            match substrate {
                Some(word) if class.pins.len() == nodes.len() + 1 => {
                    pins[0] = word;
                    extra = 1;
                }
                _ => {
                    let (needs, defined) = (class.pins.clone(), class.place);
                    self.pin_count(text, file, fields, nodes, model_word.unwrap_or(fields.words[0]), needs, defined);
                    let letter = element.letter;
                    kind = self.kind(DeviceType {
                        letter,
                        model,
                        class: None,
                        element: Element::Opaque,
                        terminals: 0,
                        classless: false,
                        misfit: true,
                        order: None,
                    });
                }
            }
        }
        self.short(text, file, fields, element, kind);
        if fields.params.iter().any(|(_, value)| value.quoted || !is_plain_number(value.of(text))) {
            self.built.template.with_expressions.push(DeviceIx(self.built.template.cards.len() as u32));
        }
        let all = || nodes.iter().chain(&pins[..extra]).map(|word| word.of(text));
        match self.reader.types[kind.0 as usize].order.clone() {
            Some(order) => {
                let words: Vec<&str> = order.iter().filter_map(|&at| all().nth(at as usize)).collect();
                self.push(start, kind, words.into_iter());
            }
            None => self.push(start, kind, all()),
        }
    }

    fn push<'w>(&mut self, start: u32, kind: TypeIx, nets: impl Iterator<Item = &'w str>) {
        let template = &mut self.built.template;
        template.cards.push(start);
        template.types.push(kind);
        template.first_pin.push(template.pins.len() as u32);
        for word in nets {
            let net = self.net(word);
            self.built.template.pins.push(net);
        }
    }

    fn short(&mut self, text: &str, file: FileId, fields: &Fields, element: &letters::Element, kind: TypeIx) {
        let device = DeviceIx(self.built.template.cards.len() as u32);
        let what = self.reader.types[kind.0 as usize].element;
        if matches!(what, Element::Resistor | Element::VoltageSource)
            && let Some(short) =
                MaybeShort::examine(device, what, text, fields, element, self.reader.tree.mega.contains(&file))
        {
            self.built.template.shorts.push(short);
        }
    }

    /// What a card with this letter and model is; made once for each pair.
    fn type_of(&mut self, letter: u8, model: Option<Sym>, terminals: u8) -> TypeIx {
        let scope = if self.has_models { self.cell } else { CellIx(0) };
        let key = (letter, model.unwrap_or(Sym(u32::MAX)), scope, terminals);
        if let Some(&known) = self.reader.known_types.get(&key) {
            return known;
        }
        let class = model.and_then(|model| self.reader.is_leaf(model));
        let class_ref = class.map(|class| &self.reader.classes[class as usize]);
        let model_kind = model.and_then(|model| self.reader.model_kind(self.cell, model));
        let element = element_of(letter, model_kind, class_ref);
        let needs_class = class.is_none() && matches!(letter, b'm' | b'q' | b'j' | b'z' | b'd' | b'x');
        let order = class_ref.zip(model).and_then(|(class, model)| self.header_order(class, model));
        let made = DeviceType {
            letter,
            model,
            class,
            element: element.unwrap_or(Element::Opaque),
            terminals,
            classless: needs_class,
            misfit: false,
            order,
        };
        let index = self.kind(made);
        self.reader.known_types.insert(key, index);
        index
    }

    /// Where the netlist also defines a class's model as a cell whose ports are the class's pins in another order, that
    /// order holds on the cards.
    fn header_order(&self, class: &Class, model: Sym) -> Option<Box<[u8]>> {
        let cell = self.reader.find_cell(self.cell, model)?;
        let ports = &self.reader.tree.cells[cell.0 as usize].ports;
        if ports.len() != class.pins.len() {
            return None;
        }
        let place =
            |pin: &String| ports.iter().position(|port| self.reader.names.text(port.name).eq_ignore_ascii_case(pin));
        let order: Vec<u8> = class.pins.iter().map(|pin| place(pin).map(|at| at as u8)).collect::<Option<_>>()?;
        let in_order = order.iter().enumerate().all(|(index, &at)| index == at as usize);
        (!in_order).then(|| order.into_boxed_slice())
    }

    fn kind(&mut self, made: DeviceType) -> TypeIx {
        let types = &mut self.reader.types;
        let index = types.iter().position(|known| *known == made).unwrap_or_else(|| {
            types.push(made);
            types.len() - 1
        });
        TypeIx(index as u32)
    }

    fn unknown_model(&mut self, file: FileId, fields: &Fields, text: &str, model: Option<Sym>, word: Option<Word>) {
        let (Some(model), Some(word)) = (model, word) else { return };
        if let Some(&known) = self.reader.unknown_models.get(&model) {
            if let Oddity::UnknownModel { statements, .. } = &mut self.reader.oddities[known] {
                *statements += 1;
            }
            return;
        }
        // A netlist without its library has thousands of unknown names: the first ones are worth a search.
        let near = if self.reader.unknown_models.len() < 100 { self.near_name(model) } else { None };
        self.reader.unknown_models.insert(model, self.reader.oddities.len());
        self.reader.oddities.push(Oddity::UnknownModel {
            model,
            span: word.span(file),
            cell: self.cell,
            device: fields.words[0].of(text).to_owned(),
            statements: 1,
            near,
        });
    }

    fn near_name(&self, model: Sym) -> Option<String> {
        let (reader, word) = (&self.reader, self.reader.names.text(model));
        let exact = reader
            .classes
            .iter()
            .flat_map(|class| &class.models)
            .filter(|glob| !glob.is_wild())
            .map(|glob| glob.text());
        let cells = reader.tree.cells.iter().skip(1).map(|cell| reader.names.text(cell.name.name));
        nearest(word, exact.chain(cells)).map(str::to_owned)
    }

    #[allow(clippy::too_many_arguments)]
    fn pin_count(
        &mut self,
        text: &str,
        file: FileId,
        fields: &Fields,
        nodes: &[Word],
        model: Word,
        needs: Vec<String>,
        defined: Span,
    ) {
        let nets = match (nodes.first(), nodes.last()) {
            (Some(first), Some(last)) => first.span(file).to(last.span(file)),
            _ => fields.words[0].span(file),
        };
        self.reader.oddities.push(Oddity::PinCount {
            span: nets,
            model_span: model.span(file),
            cell: self.cell,
            device: fields.words[0].of(text).to_owned(),
            model: model.of(text).to_owned(),
            has: nodes.len(),
            needs,
            defined,
        });
    }

    fn finish(mut self) -> Built {
        let template = &mut self.built.template;
        template.first_pin.push(template.pins.len() as u32);
        for name in &template.nets {
            self.reader.net_of[name.0 as usize] = 0;
        }
        if template.files.is_empty() {
            template.files.push((0, FileId(0)));
        }
        self.built
    }
}

fn grow(table: &mut Vec<u32>, name: Sym) {
    if table.len() <= name.0 as usize {
        table.resize((name.0 as usize + 1).max(table.len() * 2), 0);
    }
}

/// Whether a bare word can only be a number (so that nothing in it can be undefined).
fn is_plain_number(word: &str) -> bool {
    let bytes = word.as_bytes();
    let starts = bytes.first().is_some_and(|byte| byte.is_ascii_digit() || matches!(byte, b'.' | b'-' | b'+'));
    starts && !bytes.iter().any(|byte| matches!(byte, b'*' | b'/' | b'(' | b'^' | b'?'))
}
