//! The command line: shapes, help, where output goes, and exit codes.
//!
//! 0: nothing at or above `--fail-on`; 1: findings; 2: the job could not be done. A closed pipe changes none of these.

mod output;
mod pages;
mod progress;

use crate::changed::{self, Task};
use crate::deck::{load_decks, schema};
use crate::diag::Severity;
use crate::facts::vocabulary::vocabulary;
use crate::load::Disk;
use crate::pipeline::{self, Job, Outcome};
use crate::report::text::Look;
use crate::report::{Setting, github, gitlab, json, markdown, sarif, short, text};
use crate::source::SourceMap;
use crate::waiver::{Date, read_date};
use crate::{init, reference, serve, survey, tracing};
use clap::{Args, CommandFactory, Parser, Subcommand, ValueEnum};
use clap_complete::Shell;
use output::Output;
use progress::Spinner;
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// Checks that the high-voltage transistors of a SPICE netlist are used as their process allows.
#[derive(Debug, Parser)]
#[command(version, max_term_width = 100, after_help = AFTER)]
struct Cli {
    #[command(subcommand)]
    command: Command,
}

const AFTER: &str = "A first run: `drainwise init block.sp --out drainwise.yaml`, fill in rails, then `drainwise lint block.sp`.\n\
Exit codes: 0 nothing at or above --fail-on, 1 findings, 2 the job could not be done.";

#[derive(Debug, Subcommand)]
enum Command {
    /// Judges netlists by the rules of their decks
    Lint(Lint),
    /// Judges the designs that changed files take part in, each once: for hooks that run before a commit
    Changed(Changed),
    /// Shows which voltages a net can have, and the chain of devices that gives them
    Trace(Trace),
    /// Shows what is in a netlist: classes, unmatched models, rails found and missing
    Survey(Survey),
    /// Lists the rules in force; with an id, its whole page
    Rules(Rules),
    /// Writes a starter deck for a netlist
    Init(Init),
    /// Checks a deck alone
    Deck(DeckArgs),
    /// Prints the JSON Schema of decks, for editors
    Schema(Page),
    /// Prints what a shell needs to complete this program's commands
    Completions {
        /// The shell
        shell: Shell,
        #[command(flatten)]
        page: Page,
    },
    /// Prints the manual page
    Manual(Page),
    /// Talks to an editor: a language server on standard input and output
    Serve,
}

#[derive(Debug, Args)]
struct Inputs {
    /// Deck to use (may be given several times; default: the nearest drainwise.yaml upward from the netlist)
    #[arg(long, value_name = "FILE")]
    deck: Vec<PathBuf>,
    /// Cell to judge (default: the deck's `top`; else the statements at top level; else every cell that no other calls)
    #[arg(long, value_name = "CELL")]
    top: Option<String>,
    /// Judge this mode alone (may be given several times)
    #[arg(long, value_name = "NAME")]
    mode: Vec<String>,
    /// Write to this file, whole or not at all (default: standard output)
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
}

#[derive(Debug, Args)]
struct Lint {
    /// Netlists to read as one design (default: those that the deck names)
    netlists: Vec<PathBuf>,
    #[command(flatten)]
    inputs: Inputs,
    /// How to write the report
    #[arg(long, value_enum, default_value_t = Format::Text)]
    format: Format,
    /// Let the findings pass that this file knows, and name those that are no longer there
    #[arg(long, value_name = "FILE")]
    baseline: Option<PathBuf>,
    /// Write a file that knows all findings of this run, and let them pass
    #[arg(long, value_name = "FILE")]
    write_baseline: Option<PathBuf>,
    /// List accepted findings too, marked as such
    #[arg(long)]
    with_waived: bool,
    /// Fail (exit code 1) if a finding is at least this grave
    #[arg(long, value_enum, value_name = "LEVEL", default_value_t = Level::Error)]
    fail_on: Level,
    /// Ask this rule alone (may be given several times)
    #[arg(long, value_name = "RULE")]
    only: Vec<String>,
    /// The day against which waivers are held, as 2027-03-01 (default: today, UTC)
    #[arg(long, value_name = "DATE", value_parser = date)]
    today: Option<Date>,
}

#[derive(Debug, Args)]
struct Changed {
    /// Netlists and decks that changed; each is judged with its nearest drainwise.yaml, or as part of the design that this names
    #[arg(required = true)]
    files: Vec<PathBuf>,
    /// How to write the reports
    #[arg(long, value_enum, default_value_t = Lines::Text)]
    format: Lines,
    /// Fail (exit code 1) if a finding is at least this grave
    #[arg(long, value_enum, value_name = "LEVEL", default_value_t = Level::Error)]
    fail_on: Level,
}

/// The formats of which several reports may follow one another.
#[derive(Clone, Copy, Debug, ValueEnum)]
enum Lines {
    /// Pictures of the places, for people
    Text,
    /// One line a finding
    Short,
    /// Annotations of GitHub Actions, as lines of a job's output
    Github,
}

#[derive(Debug, Args)]
struct Trace {
    /// Netlist to read
    netlist: PathBuf,
    /// Nets to explain, by path: `n1`, `xdriver.gate` (default: all nets, without their chains)
    nets: Vec<String>,
    #[command(flatten)]
    inputs: Inputs,
    /// How to write it
    #[arg(long, value_enum, default_value_t = Data::Text)]
    format: Data,
}

#[derive(Debug, Args)]
struct Survey {
    /// Netlist to read (default: those that the deck names)
    netlist: Vec<PathBuf>,
    #[command(flatten)]
    inputs: Inputs,
    /// How to write it
    #[arg(long, value_enum, default_value_t = Data::Text)]
    format: Data,
}

#[derive(Debug, Args)]
struct Rules {
    /// The rule to show in full
    id: Option<String>,
    /// Deck whose rules are shown (default: the nearest drainwise.yaml upward, else the program's own rules)
    #[arg(long, value_name = "FILE")]
    deck: Vec<PathBuf>,
    /// List every name that a rule may use, with its unit
    #[arg(long, conflicts_with = "id")]
    names: bool,
}

#[derive(Debug, Args)]
struct Init {
    /// Netlist to read
    netlist: PathBuf,
    /// Write to this file (must not exist yet; default: standard output)
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
}

#[derive(Debug, Args)]
struct DeckArgs {
    /// Deck to check, or `builtin:ldmos`, `builtin:sky130`, `builtin:gf180mcu`, `builtin:sg13g2`
    file: PathBuf,
}

#[derive(Debug, Args)]
struct Page {
    /// Write to this file, whole or not at all (default: standard output)
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum Format {
    /// Pictures of the places, for people
    Text,
    /// One line a finding
    Short,
    /// One JSON object
    Json,
    /// SARIF 2.1.0, for whatever shows results of static analysis
    Sarif,
    /// Annotations of GitHub Actions, as lines of a job's output
    Github,
    /// GitLab's code quality report
    Gitlab,
    /// A comment at a change: a table, details folded away
    Markdown,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum Data {
    /// For people
    Text,
    /// One JSON object
    Json,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum Level {
    /// Errors alone
    Error,
    /// Warnings too
    Warning,
    /// Notes too
    Note,
}

impl Level {
    fn severity(self) -> Severity {
        match self {
            Level::Error => Severity::Error,
            Level::Warning => Severity::Warning,
            Level::Note => Severity::Note,
        }
    }
}

fn date(text: &str) -> Result<Date, String> {
    read_date(text).ok_or_else(|| format!("`{text}` is no day of the calendar: write it as 2027-03-01"))
}

/// Runs the program on the arguments of the process, and gives its exit code.
pub fn run() -> u8 {
    let cli = match Cli::try_parse() {
        Ok(cli) => cli,
        Err(error) => {
            let failed = error.use_stderr();
            let _ = error.print();
            return if failed { 2 } else { 0 };
        }
    };
    let result = match cli.command {
        Command::Lint(lint) => run_lint(lint),
        Command::Changed(changed) => run_changed(&changed),
        Command::Trace(trace) => run_trace(trace),
        Command::Survey(survey) => run_survey(survey),
        Command::Rules(rules) => run_rules(&rules),
        Command::Init(init) => run_init(init),
        Command::Deck(deck) => run_deck(&deck),
        Command::Schema(page) => run_schema(&page),
        Command::Completions { shell, page } => print(&page, &pages::completions(&mut Cli::command(), shell)),
        Command::Manual(page) => pages::manual(Cli::command()).and_then(|text| print(&page, &text)),
        Command::Serve => serve::serve(io::stdin(), &mut io::stdout().lock()),
    };
    match result {
        Ok(code) => code,
        Err(error) => {
            let _ = writeln!(io::stderr(), "drainwise: {error}");
            2
        }
    }
}

fn job(netlists: Vec<PathBuf>, inputs: &Inputs) -> Job {
    let (decks, top, modes) = (inputs.deck.clone(), inputs.top.clone(), inputs.mode.clone());
    Job { netlists, decks, top, modes, last: true, ..Job::default() }
}

fn run_lint(lint: Lint) -> io::Result<u8> {
    let job = Job { only: lint.only, today: lint.today, baseline: lint.baseline, ..job(lint.netlists, &lint.inputs) };
    let spinner = Spinner::new();
    let mut outcome = pipeline::lint(&Disk, &job, &spinner);
    outcome.report.with_waived = lint.with_waived;
    spinner.finish();
    if let Some(path) = &lint.write_baseline {
        write_baseline(&mut outcome, path)?;
    }
    let setting = Setting { base: pipeline::base(&Disk), exit_code: exit_code(&outcome, lint.fail_on.severity()) };
    let mut output = Output::open(lint.inputs.out.as_deref())?;
    let look = output.look();
    output.write(|out| write(&outcome, lint.format, &setting, look, out))?;
    output.finish()?;
    std::mem::forget(outcome);
    Ok(setting.exit_code)
}

fn run_changed(args: &Changed) -> io::Result<u8> {
    let spinner = Spinner::new();
    let tasks = changed::tasks(&Disk, &args.files, &spinner);
    let format = match args.format {
        Lines::Text => Format::Text,
        Lines::Short => Format::Short,
        Lines::Github => Format::Github,
    };
    let mut output = Output::open(None)?;
    let look = output.look();
    let mut worst = 0;
    for task in &tasks {
        let outcome = match (task.job(), task) {
            (Some(job), _) => pipeline::lint(&Disk, &job, &spinner),
            (None, Task::Deck(deck)) => {
                let job = Job { decks: vec![deck.clone()], ..Job::default() };
                pipeline::read_decks(&Disk, &job).1
            }
            (None, _) => continue,
        };
        let setting = Setting { base: pipeline::base(&Disk), exit_code: exit_code(&outcome, args.fail_on.severity()) };
        worst = worst.max(setting.exit_code);
        // A deck in order needs no words.
        if task.job().is_some() || !outcome.report.diagnostics.is_empty() {
            output.write(|out| write(&outcome, format, &setting, look, out))?;
        }
    }
    spinner.finish();
    output.finish()?;
    Ok(worst)
}

/// A baseline that cannot be written is said on standard error; the report follows all the same.
fn write_baseline(outcome: &mut Outcome, path: &Path) -> io::Result<()> {
    match pipeline::accept_all(&Disk, outcome, path) {
        Ok(text) => {
            let mut output = Output::open(Some(path))?;
            output.write(|out| out.write_all(text.as_bytes()))?;
            output.finish()
        }
        Err(why) => {
            (outcome.could_not, outcome.report.could_not) = (true, true);
            let _ = writeln!(io::stderr(), "drainwise: {} is not written: {why}", path.display());
            Ok(())
        }
    }
}

fn write(outcome: &Outcome, format: Format, setting: &Setting, look: Look, out: &mut dyn Write) -> io::Result<()> {
    let (report, sources) = (&outcome.report, &outcome.sources);
    match format {
        Format::Text => text::write(report, sources, look, out),
        Format::Short => short::write(report, sources, out),
        Format::Json => json::write(report, sources, out),
        Format::Sarif => sarif::write(report, sources, setting, out),
        Format::Github => github::write(report, sources, setting, out),
        Format::Gitlab => gitlab::write(report, sources, setting, out),
        Format::Markdown => markdown::write(report, sources, setting, out),
    }
}

fn exit_code(outcome: &Outcome, fail_on: Severity) -> u8 {
    match outcome.report.worst() {
        _ if outcome.could_not => 2,
        Some(worst) if worst >= fail_on => 1,
        _ => 0,
    }
}

/// Writes errors of reading to standard error, and says whether the job could not be done.
fn complain(outcome: &Outcome) -> io::Result<u8> {
    let look = Look { width: output::width(), colour: output::colour(io::IsTerminal::is_terminal(&io::stderr())) };
    output::forgiving(text::write(&outcome.report, &outcome.sources, look, &mut io::stderr()))?;
    Ok(if outcome.could_not { 2 } else { 0 })
}

fn run_trace(trace: Trace) -> io::Result<u8> {
    let job = job(vec![trace.netlist], &trace.inputs);
    let spinner = Spinner::new();
    let (outcome, traced) = tracing::trace(&Disk, &job, &spinner, &trace.nets);
    spinner.finish();
    let code = if outcome.report.diagnostics.is_empty() { 0 } else { complain(&outcome)? };
    let Some(traced) = traced else { return Ok(2) };
    let mut output = Output::open(trace.inputs.out.as_deref())?;
    let look = output.look();
    match trace.format {
        Data::Text => output.write(|out| tracing::write_text(&traced, &outcome.sources, look, out))?,
        Data::Json => output.write(|out| tracing::write_json(&traced, out))?,
    }
    output.finish()?;
    Ok(code)
}

fn run_survey(args: Survey) -> io::Result<u8> {
    let job = job(args.netlist, &args.inputs);
    let spinner = Spinner::new();
    let (outcome, found) = survey::survey(&Disk, &job, &spinner);
    spinner.finish();
    let code = if outcome.report.diagnostics.is_empty() { 0 } else { complain(&outcome)? };
    let Some(found) = found else { return Ok(2) };
    let mut output = Output::open(args.inputs.out.as_deref())?;
    match args.format {
        Data::Text => output.write(|out| survey::write_text(&found, out))?,
        Data::Json => output.write(|out| survey::write_json(&found, out))?,
    }
    output.finish()?;
    Ok(code)
}

fn run_rules(args: &Rules) -> io::Result<u8> {
    let mut output = Output::open(None)?;
    if args.names {
        output.write(|out| out.write_all(reference::names().as_bytes()))?;
        output.finish()?;
        return Ok(0);
    }
    let job = Job { decks: args.deck.clone(), ..Job::default() };
    let (deck, outcome) = pipeline::read_decks(&Disk, &job);
    if outcome.could_not {
        return complain(&outcome);
    }
    let page = match &args.id {
        None => Ok(reference::list(&deck.rules)),
        Some(id) => reference::page(&deck.rules, id),
    };
    match page {
        Ok(page) => output.write(|out| out.write_all(page.as_bytes()))?,
        Err(message) => {
            let _ = writeln!(io::stderr(), "drainwise: {message}");
            return Ok(2);
        }
    }
    output.finish()?;
    Ok(0)
}

fn run_init(args: Init) -> io::Result<u8> {
    if let Some(out) = args.out.as_ref().filter(|out| out.exists()) {
        return Err(io::Error::other(format!("{} is there already: init does not write over it", out.display())));
    }
    let spinner = Spinner::new();
    let (outcome, deck) = init::propose(&Disk, &args.netlist, &spinner);
    spinner.finish();
    let code = if outcome.could_not { complain(&outcome)? } else { 0 };
    let Some(deck) = deck else { return Ok(2) };
    let mut output = Output::open(args.out.as_deref())?;
    output.write(|out| out.write_all(deck.as_bytes()))?;
    output.finish()?;
    Ok(code)
}

fn run_deck(args: &DeckArgs) -> io::Result<u8> {
    let mut sources = SourceMap::new();
    let (deck, diagnostics) =
        load_decks(&pipeline::Decks(&Disk), std::slice::from_ref(&args.file), &mut sources, &|subject| {
            vocabulary(subject)
        });
    let outcome = pipeline::checked(sources, diagnostics);
    if !outcome.report.diagnostics.is_empty() {
        complain(&outcome)?;
    }
    if outcome.could_not {
        return Ok(2);
    }
    let mut output = Output::open(None)?;
    let line = format!(
        "{}: {} classes, {} rails, {} modes, {} rules, {} waivers\n",
        args.file.display(),
        deck.classes.len(),
        deck.rails.len(),
        deck.modes.len(),
        deck.rules.len(),
        deck.waivers.len()
    );
    output.write(|out| out.write_all(line.as_bytes()))?;
    output.finish()?;
    Ok(0)
}

fn print(page: &Page, text: &[u8]) -> io::Result<u8> {
    let mut output = Output::open(page.out.as_deref())?;
    output.write(|out| out.write_all(text))?;
    output.finish()?;
    Ok(0)
}

fn run_schema(page: &Page) -> io::Result<u8> {
    let own = Job { decks: vec!["builtin:ldmos".into()], ..Job::default() };
    let (deck, _) = pipeline::read_decks(&Disk, &own);
    print(page, schema::schema(&deck.rules).as_bytes())
}
