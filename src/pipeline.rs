//! The whole program as one readable function: load, elaborate, find contexts, compute reach, ask the rules, word the findings.

mod comments;
mod known;
mod near;

pub use known::accept_all;
use near::decks_of;
pub use near::{base, deck_above, deck_of};

use crate::current::caps;
use crate::deck::{self, DeckFiles};
use crate::declared::{Deck, Rule};
use crate::design::{Design, elaborate};
use crate::diag::{Diagnostic, Severity};
use crate::engine;
use crate::facts::vocabulary::{asks_for_voltages, vocabulary};
use crate::facts::{World, ratings::count_pairs};
use crate::graph::Contexts;
use crate::load::{Files, LoadRequest, load, relative};
use crate::names::{Names, nearest};
use crate::reach::Reach;
use crate::report::{Pairs, Report, RuleText, Summary};
use crate::roles::{MOST_SURROUNDINGS, Roles};
use crate::source::{SourceMap, Span};
use crate::waiver::baseline::Known;
use crate::waiver::{self, Date, Waiver};
use std::path::{Path, PathBuf};

/// What a run is asked to do.
#[derive(Clone, Debug, Default)]
pub struct Job {
    /// Netlists; empty: those that the deck names.
    pub netlists: Vec<PathBuf>,
    /// Decks; empty: the nearest `drainwise.yaml` upward from the first netlist.
    pub decks: Vec<PathBuf>,
    /// The cell to judge.
    pub top: Option<String>,
    /// Only these rules.
    pub only: Vec<String>,
    /// Only these modes.
    pub modes: Vec<String>,
    /// Voltages are wanted whatever the rules ask for.
    pub all_voltages: bool,
    /// A list of known findings, which do not fail.
    pub baseline: Option<PathBuf>,
    /// The day against which waivers are held; none: today.
    pub today: Option<Date>,
    /// The process ends with this run: what was built is left for the system to take back at once, instead of piece by piece.
    pub last: bool,
}

/// What a run of `lint` gives.
#[derive(Debug)]
pub struct Outcome {
    /// The texts that the report points into.
    pub sources: SourceMap,
    /// Everything found.
    pub report: Report,
    /// Whether the job could not be done: exit code 2.
    pub could_not: bool,
}

/// Told how far a long run is.
pub trait Progress {
    /// A new stage begins.
    fn stage(&self, name: &str);
}

/// A run whose files are read and whose decks are sound.
pub struct Loaded {
    /// The texts.
    pub sources: SourceMap,
    /// The merged decks.
    pub deck: Deck,
    /// What was found so far.
    pub diagnostics: Vec<Diagnostic>,
    names: Names,
    tree: crate::netlist::tree::Tree,
    cards_skipped: u64,
    files: u64,
    top: Option<(String, Span)>,
    known: Vec<Known>,
    /// The number of the first text that is a netlist.
    first_netlist: usize,
    in_comments: Vec<Waiver>,
    shown_netlists: Vec<String>,
    shown_decks: Vec<String>,
}

/// Reads decks and netlists. An error is a run that cannot go on; its outcome says why.
pub fn read(files: &dyn Files, job: &Job, progress: &dyn Progress) -> Result<Loaded, Box<Outcome>> {
    progress.stage("reading decks");
    let mut sources = SourceMap::new();
    let arguments = sources.add("command line", command_line(job));
    let decks = decks_of(files, job);
    let (deck, mut diagnostics) = deck::load_decks(&Decks(files), &decks, &mut sources, &|subject| vocabulary(subject));
    diagnostics.extend(unknown_words(&sources, arguments, job, &deck));
    let known = known::read(files, job, &mut sources).unwrap_or_else(|fault| {
        diagnostics.push(*fault);
        Vec::new()
    });
    let mut netlists: Vec<PathBuf> = job.netlists.iter().map(|path| relative(path, files)).collect();
    if netlists.is_empty() {
        netlists = deck.netlists.iter().map(|(path, _)| PathBuf::from(path)).collect();
    }
    if netlists.is_empty() && !has_error(&diagnostics) {
        let fault = Diagnostic::error("netlist", Span::new(arguments, 0, 0), "there is no netlist to read");
        diagnostics.push(fault.with_help("name one on the command line, or under `netlists:` in the deck"));
    }
    if has_error(&diagnostics) {
        return Err(Box::new(refused(sources, diagnostics)));
    }
    progress.stage("reading netlists");
    let mut names = Names::new();
    let folder = |path: &PathBuf| {
        path.parent().map(|folder| if folder.as_os_str().is_empty() { PathBuf::from(".") } else { folder.to_owned() })
    };
    let roots = decks.iter().filter_map(folder).chain(deck.include_roots.iter().map(PathBuf::from)).collect();
    let request = LoadRequest { netlists: netlists.clone(), roots, skips: deck.include_skips.clone() };
    let first_netlist = sources.files().count();
    let loaded = load(files, &request, &mut sources, &mut names);
    diagnostics.extend(loaded.diagnostics.iter().cloned());
    let top = match &job.top {
        Some(top) => Some((top.clone(), place_of(&sources, arguments, top))),
        None => deck.top.clone(),
    };
    Ok(Loaded {
        cards_skipped: loaded.diagnostics.iter().filter(|diagnostic| diagnostic.code == "card").count() as u64,
        files: loaded.files_read as u64,
        tree: loaded.tree,
        sources,
        deck,
        diagnostics,
        names,
        top,
        known,
        first_netlist,
        in_comments: Vec::new(),
        shown_netlists: netlists.iter().map(|path| path.display().to_string()).collect(),
        shown_decks: decks.iter().map(|path| path.display().to_string()).collect(),
    })
}

/// Elaborates what was read, computes everything, and hands the world to `work`. Gives the texts and the deck back.
pub fn with_world<R>(
    loaded: Loaded,
    job: &Job,
    progress: &dyn Progress,
    work: impl FnOnce(World<'_>, Seen) -> R,
) -> (SourceMap, R) {
    let Loaded {
        sources,
        deck,
        mut diagnostics,
        names,
        tree,
        cards_skipped,
        files,
        top,
        shown_netlists,
        shown_decks,
        known: _,
        first_netlist: _,
        in_comments,
    } = loaded;
    progress.stage("elaborating");
    let cards = tree.card_count;
    let cells = tree.cells.len() as u64 - 1;
    let mut design =
        elaborate(tree, names, &sources, &deck.classes, top.as_ref().map(|(name, span)| (name.as_str(), *span)));
    diagnostics.append(&mut design.diagnostics);
    let mut contexts = Contexts::new(&design, &deck);
    diagnostics.append(&mut contexts.diagnostics);
    let modes: Vec<usize> = (0..deck.modes.len()).filter(|&mode| job.modes.contains(&deck.modes[mode].name)).collect();
    let mut reach = if in_force(&deck, job).any(asks_for_voltages) || job.all_voltages {
        progress.stage("computing voltages");
        Reach::new(&design, &contexts, &deck, &modes)
    } else {
        Reach::structural(&design, &contexts, &deck)
    };
    if !reach.modes.is_empty() {
        let caps = caps(&Roles::new(&reach));
        if !caps.is_empty() {
            reach = Reach::narrowed(&design, &contexts, &deck, &modes, &caps);
        }
    }
    diagnostics.append(&mut reach.diagnostics);
    let roles = Roles::new(&reach);
    let seen = Seen {
        diagnostics,
        cards,
        cards_skipped: cards_skipped + design.cards_skipped,
        cells,
        files,
        in_comments,
        shown_netlists,
        shown_decks,
    };
    let result = work(World { deck: &deck, design: &design, contexts: &contexts, reach: &reach, roles: &roles }, seen);
    put_away(job, roles);
    put_away(job, reach);
    put_away(job, contexts);
    put_away(job, design);
    (sources, result)
}

fn put_away<T>(job: &Job, built: T) {
    if job.last { std::mem::forget(built) } else { drop(built) }
}

/// What reading found, beside the world.
pub struct Seen {
    /// Diagnostics so far.
    pub diagnostics: Vec<Diagnostic>,
    cards: u64,
    cards_skipped: u64,
    cells: u64,
    files: u64,
    in_comments: Vec<Waiver>,
    shown_netlists: Vec<String>,
    shown_decks: Vec<String>,
}

/// The main job.
pub fn lint(files: &dyn Files, job: &Job, progress: &dyn Progress) -> Outcome {
    lint_and(files, job, progress, |_, _| ())
}

/// The main job, with a look at what was computed while it is there; the report is not ordered yet. Where the job ends before, nobody
/// looks.
pub fn lint_and(
    files: &dyn Files,
    job: &Job,
    progress: &dyn Progress,
    look: impl FnOnce(World<'_>, &Report),
) -> Outcome {
    let mut loaded = match read(files, job, progress) {
        Ok(loaded) => loaded,
        Err(outcome) => return *outcome,
    };
    let known = std::mem::take(&mut loaded.known);
    let Loaded { sources, first_netlist, tree, names, deck, .. } = &loaded;
    let (in_comments, faults) = comments::waivers(sources, *first_netlist, tree, names, deck);
    loaded.in_comments = in_comments;
    loaded.diagnostics.extend(faults);
    let (sources, (mut report, could_not)) = with_world(loaded, job, progress, |world, seen| {
        progress.stage("asking the rules");
        let judged = judge(world, seen, job);
        look(world, &judged.0);
        judged
    });
    report.sort(&sources);
    let mut outcome = Outcome { sources, report, could_not };
    let partial = could_not || job.top.is_some() || !job.modes.is_empty();
    let asked = |known: &Known| !partial && (job.only.is_empty() || job.only.contains(&known.rule));
    known::forgive(&mut outcome, &known, asked);
    outcome
}

/// The rules that a job asks.
fn in_force<'d>(deck: &'d Deck, job: &'d Job) -> impl Iterator<Item = &'d Rule> {
    let wanted = |rule: &&Rule| job.only.is_empty() || job.only.contains(&rule.id);
    deck.rules
        .iter()
        .filter(wanted)
        .filter(|rule| (rule.severity, rule.unproven) != (Severity::Silent, Severity::Silent))
}

fn judge(world: World<'_>, mut seen: Seen, job: &Job) -> (Report, bool) {
    let rules: Vec<&Rule> = in_force(world.deck, job).collect();
    let mut summary = summarise(world, &seen);
    let reading: Vec<Diagnostic> = std::mem::take(&mut seen.diagnostics);
    let is_hygiene = |diagnostic: &Diagnostic| diagnostic.code == "missing-include";
    let (hygiene, mut diagnostics): (Vec<_>, Vec<_>) = reading.into_iter().partition(is_hygiene);
    let could_not = has_error(&diagnostics);
    diagnostics.extend(hygiene.into_iter().filter_map(|diagnostic| engine::adopt(diagnostic, &rules)));
    let judged = engine::judge(world, &rules);
    diagnostics.extend(judged.findings);
    if world.roles.is_worn_out() {
        summary
            .not_looked_at
            .push("roles of many devices: recognition gave up, since the design has too many structures".to_owned());
    }
    if world.roles.unseen() > 0 {
        let (unseen, most) = (world.roles.unseen(), MOST_SURROUNDINGS);
        let line =
            format!("roles of up to {unseen} instances of one cell, which stands in more than {most} surroundings");
        summary.not_looked_at.push(line);
    }
    diagnostics.extend(engine::hygiene(world.design, world.contexts, world.deck, &rules, summary.devices));
    diagnostics.extend(engine::rails_unmatched(world.design, world.contexts, world.deck, &rules));
    diagnostics.retain(|diagnostic| diagnostic.severity != Severity::Silent);
    let waivers: Vec<Waiver> = world
        .deck
        .waivers
        .iter()
        .chain(&seen.in_comments)
        .filter(|waiver| job.only.is_empty() || job.only.contains(&waiver.rule))
        .cloned()
        .collect();
    let complaints = waiver::apply(&mut diagnostics, &waivers, job.today.unwrap_or_else(waiver::today));
    diagnostics.extend(engine::waivers(complaints, &rules));
    for beyond in judged.beyond.iter().filter(|beyond| beyond.severity != Severity::Silent) {
        summary.unlisted.add(beyond.severity, beyond.instances);
        let (rule, instances, most) = (&beyond.rule, beyond.instances, engine::MOST_FINDINGS);
        summary.not_listed.push(format!("{instances} more of {rule}, beyond the first {most} statements"));
    }
    summary.count(&diagnostics);
    let rules = rules.iter().map(|rule| rule_text(rule)).collect();
    (Report { rules, could_not, diagnostics, summary, ..Report::default() }, could_not)
}

fn rule_text(rule: &Rule) -> RuleText {
    RuleText {
        id: rule.id.clone(),
        about: rule.subject.word(),
        severity: rule.severity,
        title: rule.title.clone(),
        why: rule.why.clone(),
        cite: rule.cite.clone(),
        examples: rule.examples.as_ref().map(|examples| (examples.fires.clone(), examples.quiet.clone())),
    }
}

/// Counts what a run looked at.
pub fn summarise(world: World<'_>, seen: &Seen) -> Summary {
    let mut summary = Summary {
        files: seen.files,
        cards: seen.cards,
        cards_skipped: seen.cards_skipped,
        cells: seen.cells,
        ..Summary::default()
    };
    let mut by_class = vec![0u64; world.deck.classes.len()];
    let mut unjudged = 0u64;
    let mut by_type = vec![0u64; world.design.types.len()];
    for context in &world.contexts.all {
        for kind in &world.design.template(context.variant).types {
            let total = &mut by_type[kind.0 as usize];
            *total = total.saturating_add(context.count);
        }
    }
    for (kind, &count) in world.design.types.iter().zip(&by_type) {
        summary.devices = summary.devices.saturating_add(count);
        match kind.class {
            Some(class) => by_class[class as usize] = by_class[class as usize].saturating_add(count),
            None if kind.classless || kind.misfit => unjudged = unjudged.saturating_add(count),
            None => {}
        }
    }
    for (class, &count) in world.deck.classes.iter().zip(&by_class).filter(|(_, count)| **count > 0) {
        summary.classes.push((class.name.clone(), count));
        if class.high_voltage {
            summary.high_voltage_devices = summary.high_voltage_devices.saturating_add(count);
        }
    }
    let pairs = (!world.reach.modes.is_empty()).then(|| count_pairs(world));
    summary.pairs =
        pairs.map(|pairs| Pairs { proven: pairs.proven, violated: pairs.violated, unproven: pairs.unproven });
    summary.judged.netlists = seen.shown_netlists.clone();
    summary.judged.decks = seen.shown_decks.clone();
    summary.judged.tops = world.design.tops.iter().map(|&top| top_name(world.design, top)).collect();
    summary.judged.modes =
        (0..world.reach.modes.len()).filter_map(|mode| world.reach.mode_name(mode)).map(str::to_owned).collect();
    summary.not_looked_at = not_looked_at(world, unjudged);
    summary
}

fn top_name(design: &Design<'_>, top: crate::design::VariantIx) -> String {
    let name = design.template(top).cell.map_or("", |cell| design.cell_name(cell));
    if name.is_empty() { "top level".to_owned() } else { name.to_owned() }
}

fn not_looked_at(world: World<'_>, unjudged: u64) -> Vec<String> {
    let mut lines = Vec::new();
    if unjudged > 0 {
        lines.push(match unjudged {
            1 => "one device whose model no class names, or whose card does not fit it".to_owned(),
            _ => format!("{unjudged} devices whose model no class names, or whose card does not fit it"),
        });
    }
    let reached = world
        .design
        .templates
        .iter()
        .filter_map(|template| template.cell)
        .collect::<std::collections::BTreeSet<_>>()
        .len();
    let cells = world.design.tree.cells.len() - 1;
    let unreached = cells.saturating_sub(
        reached
            - usize::from(world.design.templates.iter().any(|t| t.cell == Some(crate::netlist::tree::CellIx(0))))
                .min(reached),
    );
    if unreached > 0 {
        lines.push(format!("{unreached} of {cells} cells, which the judged top does not use"));
    }
    let left_out: usize = world.reach.frames.iter().map(|frames| frames.left_out).sum();
    if left_out > 0 {
        lines.push(format!("differences against {left_out} of the rails: more ranges than reference nets are kept"));
    }
    if world.reach.modes.is_empty() {
        lines.push("voltages: none of the rules asked for one".to_owned());
        return lines;
    }
    if world.deck.rails.is_empty() && world.reach.frames.iter().all(|frames| frames.rails.len() <= 1) {
        lines.push("voltages: the deck declares no rails, so no rating could be judged".to_owned());
    }
    lines
}

/// Whether any of these is an error of reading.
fn has_error(diagnostics: &[Diagnostic]) -> bool {
    diagnostics.iter().any(|diagnostic| diagnostic.severity == Severity::Error)
}

/// The outcome of a run that could not be done.
pub fn refused(sources: SourceMap, diagnostics: Vec<Diagnostic>) -> Outcome {
    let mut summary = Summary::default();
    summary.count(&diagnostics);
    let mut report = Report { diagnostics, summary, could_not: true, ..Report::default() };
    report.sort(&sources);
    Outcome { sources, report, could_not: true }
}

/// Reads the decks of a job alone.
pub fn read_decks(files: &dyn Files, job: &Job) -> (Deck, Outcome) {
    let mut sources = SourceMap::new();
    let decks = decks_of(files, job);
    let (deck, diagnostics) = deck::load_decks(&Decks(files), &decks, &mut sources, &|subject| vocabulary(subject));
    (deck, checked(sources, diagnostics))
}

/// The outcome of a run that only checked something.
pub fn checked(sources: SourceMap, diagnostics: Vec<Diagnostic>) -> Outcome {
    let could_not = has_error(&diagnostics);
    let mut outcome = refused(sources, diagnostics);
    (outcome.could_not, outcome.report.could_not) = (could_not, could_not);
    outcome
}

/// The words of the command line that messages can point at.
fn command_line(job: &Job) -> String {
    let words = job.top.iter().chain(&job.only).chain(&job.modes);
    words.map(String::as_str).collect::<Vec<_>>().join(" ")
}

fn place_of(sources: &SourceMap, file: crate::source::FileId, word: &str) -> Span {
    let at = sources.text(file).find(word).unwrap_or(0) as u32;
    Span::new(file, at, at + word.len() as u32)
}

/// Rules and modes on the command line that do not exist.
fn unknown_words(sources: &SourceMap, file: crate::source::FileId, job: &Job, deck: &Deck) -> Vec<Diagnostic> {
    let rules: Vec<&str> = deck.rules.iter().map(|rule| rule.id.as_str()).collect();
    let modes: Vec<&str> = deck.modes.iter().map(|mode| mode.name.as_str()).collect();
    let check = |word: &String, known: &[&str], what: &str| {
        if known.contains(&word.as_str()) {
            return None;
        }
        let help = match nearest(word, known.iter().copied()) {
            Some(near) => format!("did you mean `{near}`?"),
            None if known.is_empty() => format!("the deck has no {what}s"),
            None => format!("known {what}s: {}", known.join(", ")),
        };
        Some(
            Diagnostic::error("arguments", place_of(sources, file, word), format!("there is no {what} `{word}`"))
                .with_help(help),
        )
    };
    let unknown_rules = job.only.iter().filter_map(|word| check(word, &rules, "rule"));
    unknown_rules.chain(job.modes.iter().filter_map(|word| check(word, &modes, "mode"))).collect()
}

/// The deck loader reads through the same door as the netlist loader.
pub struct Decks<'f>(pub &'f dyn Files);

impl DeckFiles for Decks<'_> {
    fn read(&self, path: &Path) -> std::io::Result<Vec<u8>> {
        self.0.read(path)
    }
}
