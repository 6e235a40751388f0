//! Elaboration: from what the files say to what the design is.
//!
//! A design is kept as its hierarchy, never as a flattened copy. Each cell's connections are built once (a [`Template`]),
//! its parameters once per distinct set of values (a [`Variant`]); instances are counted, and a path is made only for the
//! one instance that somebody wants to see. Device sizes stay in the text until a rule asks for them: a device record
//! costs 12 bytes and 4 a pin.

mod cells;
mod kinds;
mod params;
mod shorts;
mod size;
mod template;
mod variants;

pub use kinds::{DeviceType, Element, TypeIx};
pub use params::{Reading, Trouble};
pub use size::{Card, Sizes};
pub use variants::VariantIx;

use crate::declared::Class;
use crate::diag::Diagnostic;
use crate::names::{Names, Sym};
use crate::netlist::tree::{CellIx, Tree};
use crate::source::{FileId, SourceMap, Span};

/// A net of one cell: index in [`Template::nets`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct NetIx(pub u32);

/// A device of one cell: index among its template's devices.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct DeviceIx(pub u32);

/// An instance statement of one cell: index in [`Template::instances`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct InstanceIx(pub u32);

/// Index in [`Design::templates`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct TemplateIx(pub u32);

/// A call of a cell inside another.
#[derive(Clone, Debug, PartialEq)]
pub struct Instance {
    /// First byte of its card.
    pub card: u32,
    /// The file that holds the card.
    pub file: FileId,
    /// The cell it calls.
    pub cell: CellIx,
    /// The nets on the called cell's ports, then on its implicit ports ([`Template::implicit`]), by index in [`Template::links`].
    pub pins: std::ops::Range<u32>,
    /// Whether the card has parameters (so that most need no second look).
    pub has_params: bool,
}

/// The connections of one cell, the same for all its instances.
#[derive(Clone, Debug, Default)]
pub struct Template {
    /// The cell.
    pub cell: Option<CellIx>,
    /// Names of its nets: its ports first, in order.
    pub nets: Vec<Sym>,
    /// How many of the nets are ports.
    pub ports: u32,
    /// Nets that every cell shares by name (`0`, `.global`), used here or below: further ports that nobody writes.
    pub implicit: Vec<NetIx>,
    /// First byte of each device's card.
    pub cards: Vec<u32>,
    /// What each device is.
    pub types: Vec<TypeIx>,
    /// Where each device's pins begin in `pins`; one more entry than devices.
    pub first_pin: Vec<u32>,
    /// The nets on the pins of all devices, in the order of their class's pins.
    pub pins: Vec<NetIx>,
    /// The nets on the ports of all instances.
    pub links: Vec<NetIx>,
    /// Ports that bear one name twice: they are one net.
    pub joined: Vec<(NetIx, NetIx)>,
    /// Files of the device cards: the first device of each stretch and its file.
    pub files: Vec<(u32, FileId)>,
    /// Instance statements.
    pub instances: Vec<Instance>,
    /// Devices that may short their two nets: resistors and sources whose value is zero or an expression.
    pub(crate) shorts: Vec<shorts::MaybeShort>,
    /// Devices whose parameters hold expressions.
    pub(crate) with_expressions: Vec<DeviceIx>,
}

impl Template {
    /// How many devices stand in the cell itself.
    pub fn device_count(&self) -> usize {
        self.cards.len()
    }

    /// All devices of the cell itself.
    pub fn devices(&self) -> impl Iterator<Item = DeviceIx> + use<> {
        (0..self.cards.len() as u32).map(DeviceIx)
    }

    /// All instance statements.
    pub fn instance_indices(&self) -> impl Iterator<Item = InstanceIx> + use<> {
        (0..self.instances.len() as u32).map(InstanceIx)
    }

    /// The nets on a device's pins, in the order of its class's pins (of its card where it has no class).
    pub fn device_pins(&self, device: DeviceIx) -> &[NetIx] {
        let at = device.0 as usize;
        &self.pins[self.first_pin[at] as usize..self.first_pin[at + 1] as usize]
    }

    /// The nets on an instance's ports, then on its implicit ports.
    pub fn instance_pins(&self, instance: InstanceIx) -> &[NetIx] {
        let range = &self.instances[instance.0 as usize].pins;
        &self.links[range.start as usize..range.end as usize]
    }

    /// The file and first byte of a device's card.
    pub fn device_card(&self, device: DeviceIx) -> (FileId, u32) {
        let stretch = self.files.partition_point(|&(first, _)| first <= device.0);
        (self.files[stretch.saturating_sub(1)].1, self.cards[device.0 as usize])
    }

    /// Its ports and implicit ports, in the order in which instances connect them.
    pub fn boundary(&self) -> impl Iterator<Item = NetIx> + '_ {
        (0..self.ports).map(NetIx).chain(self.implicit.iter().copied())
    }

    /// The net at a position of the boundary.
    pub(crate) fn boundary_at(&self, position: u32) -> NetIx {
        if position < self.ports { NetIx(position) } else { self.implicit[(position - self.ports) as usize] }
    }
}

/// An elaborated design with everything needed to look at it.
pub struct Design<'a> {
    /// The texts.
    pub sources: &'a SourceMap,
    /// All names.
    pub names: Names,
    /// What the files say.
    pub tree: Tree,
    /// The declared classes.
    pub classes: &'a [Class],
    /// Cells' connections.
    pub templates: Vec<Template>,
    /// What the devices are.
    pub types: Vec<DeviceType>,
    /// Cells with their parameters.
    pub variants: Vec<variants::Variant>,
    /// The tops that are judged.
    pub tops: Vec<VariantIx>,
    /// Cards that could not be read in elaboration (those that the loader refused are its own count).
    pub cards_skipped: u64,
    /// What was wrong.
    pub diagnostics: Vec<Diagnostic>,
    /// Leaves without a class, instance calls that do not fit: the engine words these.
    pub oddities: Vec<Oddity>,
    pub(crate) globals: params::Globals,
}

/// Something about a card that a hygiene rule reports.
#[derive(Clone, Debug, PartialEq)]
pub enum Oddity {
    /// A device or cell call whose model no class names and no cell defines.
    UnknownModel {
        /// The model as written.
        model: Sym,
        /// Where it stands on the first such card.
        span: Span,
        /// The cell that holds the card.
        cell: CellIx,
        /// The device's own name.
        device: String,
        /// How many statements use it.
        statements: u64,
        /// A known model or cell with a similar name.
        near: Option<String>,
    },
    /// A card with a number of terminals that its class or cell does not have.
    PinCount {
        /// The nets on the card.
        span: Span,
        /// The card's model word.
        model_span: Span,
        /// The cell that holds the card.
        cell: CellIx,
        /// The device's own name.
        device: String,
        /// What it is an instance of.
        model: String,
        /// Terminals on the card.
        has: usize,
        /// Terminals needed, by name.
        needs: Vec<String>,
        /// Where the called cell is defined, or the class declared.
        defined: Span,
    },
}

impl Design<'_> {
    /// The template of a variant.
    pub fn template(&self, variant: VariantIx) -> &Template {
        &self.templates[self.variants[variant.0 as usize].template.0 as usize]
    }

    /// What a device is.
    pub fn device_type(&self, template: &Template, device: DeviceIx) -> &DeviceType {
        &self.types[template.types[device.0 as usize].0 as usize]
    }

    /// The class of a device, where a deck declares one.
    pub fn class(&self, template: &Template, device: DeviceIx) -> Option<&Class> {
        self.device_type(template, device).class.map(|class| &self.classes[class as usize])
    }

    /// A device's own name, as written.
    pub fn device_name(&self, template: &Template, device: DeviceIx) -> &str {
        let (file, card) = template.device_card(device);
        self.card_name(file, card)
    }

    /// An instance's own name, as written.
    pub fn instance_name(&self, template: &Template, instance: InstanceIx) -> &str {
        let instance = &template.instances[instance.0 as usize];
        self.card_name(instance.file, instance.card)
    }

    fn card_name(&self, file: FileId, card: u32) -> &str {
        let rest = &self.sources.text(file)[card as usize..];
        let end = rest.find([' ', '\t', '\n', '\r', ',', '=', '(', ')']).unwrap_or(rest.len());
        &rest[..end]
    }

    /// A cell's name; empty for the top level.
    pub fn cell_name(&self, cell: CellIx) -> &str {
        self.names.text(self.tree.cells[cell.0 as usize].name.name)
    }

    /// The name of a net inside its cell.
    pub fn net_name(&self, template: &Template, net: NetIx) -> &str {
        self.names.text(template.nets[net.0 as usize])
    }
}

/// Elaborates a design. `top` names the cell to judge; else the statements at top level are, if there are any, else every
/// cell that nothing instantiates.
pub fn elaborate<'a>(
    tree: Tree,
    names: Names,
    sources: &'a SourceMap,
    classes: &'a [Class],
    top: Option<(&str, Span)>,
) -> Design<'a> {
    let globals = params::Globals::new(&tree, &names);
    let mut design = Design {
        sources,
        names,
        tree,
        classes,
        templates: Vec::new(),
        types: Vec::new(),
        variants: Vec::new(),
        tops: Vec::new(),
        cards_skipped: 0,
        diagnostics: Vec::new(),
        oddities: Vec::new(),
        globals,
    };
    let built = cells::build(&mut design, top);
    variants::build(&mut design, &built);
    design
}
