//! Parameters: scoped, free of order, evaluated once for each distinct set.
//!
//! A name inside a cell means the cell's own parameter, else one of the cells around its text, else a global one (scoping
//! as in Ngspice User's Manual, version 39, section 2.9.4; the order of `.param` cards does not matter, as in other dialects).

use super::Design;
use crate::expr::{self, Expr, Node};
use crate::names::{Names, Sym};
use crate::netlist::tree::{CellIx, Function, GuardIx, Operand, Tree};
use crate::source::Span;
use hashbrown::HashMap;

/// A value that a card gives, or why it is not known.
pub type Reading = Result<f64, Trouble>;

/// Why a value could not be worked out.
#[derive(Clone, Debug, PartialEq)]
pub struct Trouble {
    /// Where; none where something is simply not given.
    pub span: Option<Span>,
    /// What is wrong, as a clause.
    pub message: String,
    /// A way out.
    pub help: Option<String>,
    /// Whether the cause was reported elsewhere, or is none of the designer's doing (`temper`).
    pub quiet: bool,
}

impl Trouble {
    pub(super) fn quiet(message: impl Into<String>) -> Trouble {
        Trouble { span: None, message: message.into(), help: None, quiet: true }
    }

    /// What is wrong with an expression that begins at `place.start`.
    pub(super) fn at(place: Span, fault: expr::Fault) -> Trouble {
        Trouble {
            span: Some(Span { start: place.start + fault.at.start, end: place.start + fault.at.end, ..place }),
            quiet: fault.message.is_empty(),
            message: fault.message,
            help: fault.help,
        }
    }

    pub(super) fn missing(message: impl Into<String>) -> Trouble {
        Trouble { span: None, message: message.into(), help: None, quiet: false }
    }
}

/// Values of a scope's own parameters, sorted by name; NaN stands for "reported as not computable".
pub(crate) type Env = Vec<(Sym, f64)>;

/// Parameters and functions of the top level.
#[derive(Debug, Default)]
pub(crate) struct Globals {
    pub(crate) env: Env,
    pub(crate) troubles: Vec<Trouble>,
    functions: HashMap<Sym, u32>,
    pub(crate) active: Vec<bool>,
    pub(crate) scale: f64,
}

impl Globals {
    pub(super) fn new(tree: &Tree, names: &Names) -> Globals {
        let functions =
            tree.functions.iter().enumerate().map(|(index, function)| (function.name.name, index as u32)).collect();
        let mut globals = Globals { functions, scale: 1.0, ..Globals::default() };
        if tree.cells.is_empty() {
            return globals;
        }
        let outer = Outer { tree, names, globals: &globals, around: &[] };
        let settled = settle(&outer, CellIx(0), &[]);
        let around = [settled.env.as_slice()];
        let scope = Scope { outer: Outer { around: &around, ..outer }, own: Own::Nothing, depth: 0 };
        let scale = tree.scale.as_ref().map(|operand| scope.operand(operand));
        let (env, active, mut troubles) = (settled.env, settled.active, settled.troubles);
        match scale {
            Some(Ok(value)) => globals.scale = value,
            Some(Err(trouble)) => troubles.push(trouble),
            None => {}
        }
        globals.env = env;
        globals.active = active;
        globals.troubles = troubles;
        globals
    }
}

/// What lies outside a scope.
#[derive(Clone, Copy)]
pub(super) struct Outer<'a> {
    pub(super) tree: &'a Tree,
    pub(super) names: &'a Names,
    pub(super) globals: &'a Globals,
    /// Environments around, the innermost first (the global one is asked after them).
    pub(super) around: &'a [&'a [(Sym, f64)]],
}

impl Outer<'_> {
    fn value(&self, name: Sym) -> Option<f64> {
        self.around
            .iter()
            .copied()
            .chain([self.globals.env.as_slice()])
            .find_map(|env| env.binary_search_by_key(&name, |&(key, _)| key).ok().map(|at| env[at].1))
    }
}

/// Where names of an expression are looked up.
pub(super) struct Scope<'a> {
    pub(super) outer: Outer<'a>,
    pub(super) own: Own<'a>,
    pub(super) depth: u32,
}

/// The innermost values of a scope.
#[derive(Clone, Copy)]
pub(super) enum Own<'a> {
    /// None beyond the environments around.
    Nothing,
    /// Arguments of a function.
    Arguments(&'a [Sym], &'a [f64]),
    /// Parameters that are being settled.
    Settling(&'a HashMap<Sym, f64>),
}

impl Own<'_> {
    fn value(&self, name: Sym) -> Option<f64> {
        match self {
            Own::Nothing => None,
            Own::Arguments(formals, args) => {
                formals.iter().position(|&formal| formal == name).and_then(|at| args.get(at).copied())
            }
            Own::Settling(done) => done.get(&name).copied(),
        }
    }
}

/// How deep functions may call functions.
const FUNCTION_DEPTH: u32 = 40;

/// Variables of a running simulation: no card has their value.
const RUNNING: [&str; 5] = ["time", "temper", "hertz", "temp", "tnom"];

impl Scope<'_> {
    /// Evaluates an operand of a card.
    pub(super) fn operand(&self, operand: &Operand) -> Reading {
        match &operand.expr {
            Some(expr) => self.expr(expr, operand.span),
            None => Err(Trouble::quiet("its expression could not be read")),
        }
    }

    /// Evaluates an expression that begins at `place.start`.
    pub(super) fn expr(&self, expr: &Expr, place: Span) -> Reading {
        expr::evaluate_spice(expr, self).map_err(|fault| Trouble::at(place, fault))
    }

    fn call(&self, function: &Function, args: &[f64]) -> Result<f64, String> {
        if self.depth >= FUNCTION_DEPTH {
            return Err(format!("functions call one another more than {FUNCTION_DEPTH} deep"));
        }
        if args.len() != function.formals.len() {
            return Err(format!(
                "`{}` takes {} arguments, not {}",
                self.outer.names.text(function.name.name),
                function.formals.len(),
                args.len()
            ));
        }
        let inner = Scope { outer: self.outer, own: Own::Arguments(&function.formals, args), depth: self.depth + 1 };
        inner.operand(&function.body).map_err(|trouble| trouble.message)
    }
}

impl expr::Parameters for Scope<'_> {
    fn name(&self, name: &str) -> Result<Option<f64>, String> {
        let known = self.outer.names.find(name).and_then(|sym| self.own.value(sym).or_else(|| self.outer.value(sym)));
        match known {
            Some(value) if value.is_nan() => Err(String::new()),
            None if RUNNING.iter().any(|word| word.eq_ignore_ascii_case(name)) => Err(String::new()),
            known => Ok(known),
        }
    }

    fn call(&self, name: &str, args: &[f64]) -> Result<Option<f64>, String> {
        let function = self.outer.names.find(name).and_then(|sym| self.outer.globals.functions.get(&sym));
        function.map(|&index| Scope::call(self, &self.outer.tree.functions[index as usize], args)).transpose()
    }

    fn names(&self) -> Vec<String> {
        let known = self.outer.around.iter().copied().chain([self.outer.globals.env.as_slice()]).flatten();
        known.map(|&(name, _)| self.outer.names.text(name).to_owned()).collect()
    }
}

/// A scope whose parameters and conditions have been worked out.
pub(super) struct Settled {
    pub(super) env: Env,
    /// For each guard of the cell, whether it holds.
    pub(super) active: Vec<bool>,
    pub(super) troubles: Vec<Trouble>,
}

/// Works out all parameters of a cell. `given` are the values that an instance sets.
pub(super) fn settle<'a>(outer: &'a Outer<'a>, cell: CellIx, given: &'a [(Sym, f64)]) -> Settled {
    let source = &outer.tree.cells[cell.0 as usize];
    let mut active = vec![false; source.guards.len()];
    let mut settling = Settling::new(outer, cell, given);
    settling.define(|guard| guard.is_none());
    settling.run();
    for (index, guard) in source.guards.iter().enumerate() {
        let open = guard.outer.is_none_or(|outer| active[outer.0 as usize]);
        let taken = guard.earlier.iter().any(|earlier| active[earlier.0 as usize]);
        let holds = guard.condition.as_ref().is_none_or(|condition| settling.condition(condition));
        active[index] = open && !taken && holds;
        let this = Some(GuardIx(index as u32));
        if active[index] && source.params.iter().any(|param| param.guard == this) {
            settling.define(|guard| guard == this);
            settling.run();
        }
    }
    let mut env: Env = settling.done.into_iter().collect();
    env.sort_by_key(|&(name, _)| name);
    Settled { env, active, troubles: settling.troubles }
}

struct Settling<'a> {
    outer: &'a Outer<'a>,
    cell: CellIx,
    given: &'a [(Sym, f64)],
    pending: HashMap<Sym, &'a Operand>,
    order: Vec<(Sym, Span)>,
    done: HashMap<Sym, f64>,
    troubles: Vec<Trouble>,
}

impl<'a> Settling<'a> {
    fn new(outer: &'a Outer<'a>, cell: CellIx, given: &'a [(Sym, f64)]) -> Settling<'a> {
        let done = given.iter().copied().collect();
        Settling { outer, cell, given, pending: HashMap::new(), order: Vec::new(), done, troubles: Vec::new() }
    }

    /// Takes in the definitions whose guard is wanted; what an instance gave stays, and later cards replace earlier ones.
    fn define(&mut self, wanted: impl Fn(Option<GuardIx>) -> bool) {
        let source = &self.outer.tree.cells[self.cell.0 as usize];
        for param in source.formals.iter().chain(&source.params).filter(|param| wanted(param.guard)) {
            let name = param.name.name;
            if self.given.iter().any(|&(given, _)| given == name) {
                continue;
            }
            self.done.remove(&name);
            self.pending.insert(name, &param.value);
            self.order.push((name, param.name.span));
        }
    }

    /// Depth-first over dependencies with a stack of its own, so that long chains cost no recursion.
    fn run(&mut self) {
        for root in std::mem::take(&mut self.order) {
            let mut stack = vec![root];
            let mut open: Vec<Sym> = Vec::new();
            while let Some(&(name, _)) = stack.last() {
                let Some(&operand) = self.pending.get(&name).filter(|_| !self.done.contains_key(&name)) else {
                    stack.pop();
                    if open.last() == Some(&name) {
                        open.pop();
                    }
                    continue;
                };
                if open.last() != Some(&name) {
                    open.push(name);
                    let needs = self.needs(operand, 0);
                    if let Some(&(back, place)) = needs.iter().find(|(need, _)| open.contains(need)) {
                        self.report_cycle(&open, back, place);
                        self.done.insert(name, f64::NAN);
                        continue;
                    }
                    if !needs.is_empty() {
                        stack.extend(needs);
                        continue;
                    }
                }
                let value = self.evaluate(operand);
                self.done.insert(name, value);
            }
        }
    }

    fn report_cycle(&mut self, open: &[Sym], back: Sym, place: Span) {
        let names = self.outer.names;
        let from = open.iter().position(|&name| name == back).unwrap_or(0);
        let chain: Vec<&str> = open[from..].iter().chain([&back]).map(|&name| names.text(name)).collect();
        self.troubles.push(Trouble {
            span: Some(place),
            message: format!("the parameter `{}` depends on itself: {}", names.text(back), chain.join(" → ")),
            help: Some("give one of them a value of its own".to_owned()),
            quiet: false,
        });
    }

    /// Pending parameters that an operand needs first, with the place that names each.
    fn needs(&self, operand: &Operand, depth: u32) -> Vec<(Sym, Span)> {
        let Some(expr) = &operand.expr else { return Vec::new() };
        let mut needs = Vec::new();
        for (node, at) in expr.nodes.iter().zip(&expr.places) {
            let place = Span { start: operand.span.start + at.start, end: operand.span.start + at.end, ..operand.span };
            match node {
                Node::Name(name) => {
                    let sym = self.outer.names.find(name);
                    needs.extend(
                        sym.filter(|sym| self.pending.contains_key(sym) && !self.done.contains_key(sym))
                            .map(|sym| (sym, place)),
                    );
                }
                Node::Call { name, .. } if depth < FUNCTION_DEPTH => {
                    let function = self.outer.names.find(name).and_then(|sym| self.outer.globals.functions.get(&sym));
                    if let Some(&function) = function {
                        let function = &self.outer.tree.functions[function as usize];
                        let inner = self
                            .needs(&function.body, depth + 1)
                            .into_iter()
                            .filter(|(need, _)| !function.formals.contains(need));
                        needs.extend(inner.map(|(need, _)| (need, place)));
                    }
                }
                _ => {}
            }
        }
        needs
    }

    fn evaluate(&mut self, operand: &Operand) -> f64 {
        match self.value(operand) {
            Ok(value) => value,
            Err(trouble) => {
                if !trouble.quiet {
                    self.troubles.push(trouble);
                }
                f64::NAN
            }
        }
    }

    fn value(&self, operand: &Operand) -> Reading {
        Scope { outer: *self.outer, own: Own::Settling(&self.done), depth: 0 }.operand(operand)
    }

    fn condition(&mut self, condition: &Operand) -> bool {
        let value = self.evaluate(condition);
        !value.is_nan() && value != 0.0
    }
}

impl Design<'_> {
    /// Runs `work` with the scope of a variant.
    pub(super) fn in_scope<R>(&self, variant: super::VariantIx, work: impl FnOnce(&Scope<'_>) -> R) -> R {
        let mut around: Vec<&[(Sym, f64)]> = Vec::new();
        let mut at = Some(variant);
        while let Some(variant) = at {
            let variant = &self.variants[variant.0 as usize];
            around.push(&variant.env);
            at = variant.lexical;
        }
        let outer = Outer { tree: &self.tree, names: &self.names, globals: &self.globals, around: &around };
        work(&Scope { outer, own: Own::Nothing, depth: 0 })
    }
}
