//! Reads the netlists of a run and everything they include: the only reader of netlist files.
//!
//! Files nest through a stack of our own, so depth is bounded by a number and not by luck. A file outside the declared
//! roots is never read, whatever a netlist asks for, and every bound that stops something names itself.

use crate::diag::{Diagnostic, Severity};
use crate::names::{Glob, Names, nearest};
use crate::netlist::structure::{Builder, Opening, Reading, Request, Step};
use crate::netlist::tree::Tree;
use crate::source::{FileId, SourceMap, Span};
use std::collections::{HashMap, HashSet};
use std::path::{Path, PathBuf};

mod files;
mod paths;
mod text;

pub use files::{Disk, Files, Memory};
pub use paths::{flat, relative};
use text::Trouble;

/// How deep files may include one another.
pub const DEEPEST_INCLUDE: usize = 100;

/// How many includes a run may follow.
pub const MOST_INCLUDES: usize = 100_000;

/// How many bytes may be read that were read before, because a file is included again.
pub const MOST_REPEATED: u64 = 1 << 30;

/// What to read.
#[derive(Clone, Debug, Default)]
pub struct LoadRequest {
    /// The files of the command line or the deck, in order; each begins with a title line.
    pub netlists: Vec<PathBuf>,
    /// Folders from which files may be read, besides those of the netlists.
    pub roots: Vec<PathBuf>,
    /// Includes to leave out silently: matched on the path as written and on the file's name.
    pub skips: Vec<Glob>,
}

/// What was read.
#[derive(Debug)]
pub struct Loaded {
    /// What the netlists say.
    pub tree: Tree,
    /// Everything there was to complain about, in the order it was met, none twice.
    pub diagnostics: Vec<Diagnostic>,
    /// How many files were read.
    pub files_read: usize,
    /// Includes left out because they were not found or may not be read.
    pub includes_missing: usize,
    /// Includes left out because the deck skips them.
    pub includes_skipped: usize,
}

/// Reads all netlists one after another into one tree.
pub fn load(files: &dyn Files, request: &LoadRequest, sources: &mut SourceMap, names: &mut Names) -> Loaded {
    let mut loader = Loader::new(files, request, sources);
    let mut builder = Builder::new(names);
    for netlist in &request.netlists {
        if let Some(file) = loader.root(netlist) {
            loader.run(file, &mut builder);
        }
    }
    let (tree, complaints) = builder.finish(loader.sources);
    let mut diagnostics = loader.diagnostics;
    diagnostics.extend(complaints);
    let mut seen = HashSet::new();
    diagnostics.retain(|one| seen.insert((one.code.clone(), one.span, one.message.clone())));
    Loaded {
        tree,
        diagnostics,
        files_read: loader.files_read,
        includes_missing: loader.missing,
        includes_skipped: loader.skipped,
    }
}

/// A text that is being read, and what it is.
struct Open {
    reading: Reading,
    section: Option<String>,
    asked: Option<Span>,
}

/// A file that has been read once.
#[derive(Clone, Copy)]
struct Known {
    file: FileId,
    usable: bool,
}

struct Loader<'a> {
    files: &'a dyn Files,
    request: &'a LoadRequest,
    sources: &'a mut SourceMap,
    /// Canonical folders.
    roots: Vec<PathBuf>,
    /// Folders as given, for finding includes.
    folders: Vec<PathBuf>,
    known: HashMap<PathBuf, Known>,
    /// Paths on disk of the texts, by file number: the folder of each resolves its includes.
    places: HashMap<FileId, PathBuf>,
    diagnostics: Vec<Diagnostic>,
    files_read: usize,
    missing: usize,
    skipped: usize,
    includes: usize,
    /// Bytes of texts read once.
    bytes: u64,
    /// Bytes of texts read again.
    repeated: u64,
    /// Whether the file taken last had been read before.
    again: bool,
}

impl<'a> Loader<'a> {
    fn new(files: &'a dyn Files, request: &'a LoadRequest, sources: &'a mut SourceMap) -> Loader<'a> {
        let of_netlists = request.netlists.iter().map(|netlist| paths::folder(netlist));
        let folders: Vec<PathBuf> = of_netlists.chain(request.roots.iter().cloned()).collect();
        let roots = folders.iter().filter_map(|folder| files.canonical(folder).ok()).collect();
        Loader {
            files,
            request,
            sources,
            roots,
            folders,
            known: HashMap::new(),
            places: HashMap::new(),
            diagnostics: Vec::new(),
            files_read: 0,
            missing: 0,
            skipped: 0,
            includes: 0,
            bytes: 0,
            repeated: 0,
            again: false,
        }
    }

    /// A file of the command line. What is wrong with it is said on an empty text under its path, if it has none.
    fn root(&mut self, path: &Path) -> Option<FileId> {
        if !self.files.is_file(path) {
            let why = match self.files.exists(path) {
                true => "is no file that can be read",
                false => "does not exist",
            };
            self.lament(path, format!("netlist `{}` {why}", paths::shown(path, self.files)));
            return None;
        }
        match self.take(path, None) {
            Ok(known) => known.usable.then_some(known.file),
            Err(why) => {
                self.lament(path, format!("netlist `{}` {why}", paths::shown(path, self.files)));
                None
            }
        }
    }

    fn lament(&mut self, path: &Path, message: String) {
        let file = self.sources.add(paths::shown(path, self.files), "");
        self.diagnostics.push(Diagnostic::error("netlist", Span::new(file, 0, 0), message));
    }

    /// Reads one root text and all that it includes.
    fn run(&mut self, file: FileId, builder: &mut Builder) {
        let mut stack = vec![Open { reading: builder.open(file, Opening::Root), section: None, asked: None }];
        while let Some(open) = stack.last_mut() {
            let text = self.sources.text(open.reading.file());
            match builder.resume(text, &mut open.reading) {
                Step::Include(request) => {
                    if let Some(open) = self.follow(&request, &stack, builder) {
                        stack.push(open);
                    }
                }
                Step::Done => {
                    if let Some(done) = stack.pop() {
                        self.check_section(&done);
                    }
                }
            }
        }
    }

    /// A section that was asked for must be there.
    fn check_section(&mut self, done: &Open) {
        let (Some(section), Some(asked), false) = (&done.section, done.asked, done.reading.found()) else { return };
        let path = self.sources.file(done.reading.file()).path();
        let sections = done.reading.sections();
        let help = match nearest(section, sections.iter().map(String::as_str)) {
            Some(near) => format!("did you mean `{near}`?"),
            None if sections.is_empty() => "that file has no `.lib` sections".to_owned(),
            None => format!("it has {}", few(sections)),
        };
        let message = format!("`{path}` has no section `{section}`");
        self.diagnostics.push(Diagnostic::error("include", asked, message).with_help(help));
    }

    /// Finds, checks and opens what an include asks for.
    fn follow(&mut self, request: &Request, stack: &[Open], builder: &mut Builder) -> Option<Open> {
        if self.is_skipped(&request.path) {
            self.skipped += 1;
            return None;
        }
        if stack.len() > DEEPEST_INCLUDE {
            let message = format!("files include one another more than {DEEPEST_INCLUDE} deep here");
            return self.refuse(Diagnostic::error("include", request.span, message));
        }
        self.includes += 1;
        if self.includes > MOST_INCLUDES {
            let message =
                format!("the netlist has more than {MOST_INCLUDES} includes; this one and later ones are not read");
            return if self.includes == MOST_INCLUDES + 1 {
                self.refuse(Diagnostic::error("include", request.span, message))
            } else {
                None
            };
        }
        let from = self.places.get(&request.span.file).cloned().unwrap_or_default();
        let path = self.find(request, &from)?;
        let known = match self.take(&path, Some(request.span)) {
            Ok(known) => known,
            Err(why) => {
                let message = format!("include `{}` {why}", request.path);
                return self.refuse(Diagnostic::error("include", request.span, message));
            }
        };
        let again = std::mem::replace(&mut self.again, false);
        if !known.usable
            || self.loops(known.file, request, stack)
            || (again && self.repeats_too_much(known.file, request.span))
        {
            return None;
        }
        let section = request.section.as_ref().map(|(name, _)| name.clone());
        let opening = section.clone().map_or(Opening::Include, Opening::Section);
        let asked = request.section.as_ref().map(|&(_, span)| span);
        Some(Open { reading: builder.open(known.file, opening), section, asked })
    }

    fn refuse(&mut self, diagnostic: Diagnostic) -> Option<Open> {
        self.diagnostics.push(diagnostic);
        None
    }

    fn is_skipped(&self, path: &str) -> bool {
        let name = path.rsplit(['/', '\\']).next().unwrap_or(path);
        self.request.skips.iter().any(|glob| glob.matches(path) || glob.matches(name))
    }

    fn loops(&mut self, file: FileId, request: &Request, stack: &[Open]) -> bool {
        let section = request.section.as_ref().map(|(name, _)| name.as_str());
        let same = |open: &&Open| {
            open.reading.file() == file
                && match (&open.section, section) {
                    (Some(one), Some(other)) => one.eq_ignore_ascii_case(other),
                    (one, other) => one.is_none() && other.is_none(),
                }
        };
        if !stack.iter().any(|open| same(&open)) {
            return false;
        }
        let path = self.sources.file(file).path();
        let message = match section {
            Some(section) => format!("section `{section}` of `{path}` includes itself"),
            None => format!("`{path}` includes itself"),
        };
        let mut error = Diagnostic::error("include", request.span, message).with_help("take this include out");
        let chain = stack.iter().skip_while(|open| !same(open)).skip(1);
        for asked in chain.filter_map(|open| open.asked).take(5) {
            error = error.with_place(asked, "on the way here");
        }
        self.diagnostics.push(error);
        true
    }

    fn repeats_too_much(&mut self, file: FileId, place: Span) -> bool {
        let bound = MOST_REPEATED.max(4 * self.bytes);
        let before = self.repeated;
        self.repeated += self.sources.text(file).len() as u64;
        if self.repeated > bound && before <= bound {
            let message = format!(
                "the same files are included again and again, {} MiB by now: this include and later such ones are not read",
                bound >> 20
            );
            self.diagnostics.push(Diagnostic::error("include", place, message));
        }
        self.repeated > bound
    }

    /// The file that an include means; none (and a message) where there is none that may be read.
    fn find(&mut self, request: &Request, from: &Path) -> Option<PathBuf> {
        let written = Path::new(&request.path);
        let mut outside = None;
        let mut odd = false;
        for path in paths::candidates(written, from, &self.folders) {
            if !self.files.is_file(&path) {
                odd |= self.files.exists(&path);
                continue;
            }
            match self.files.canonical(&path) {
                Ok(canonical) if self.roots.iter().any(|root| canonical.starts_with(root)) => return Some(path),
                Ok(_) => outside = outside.or(Some(path)),
                Err(_) => odd = true,
            }
        }
        self.missing += 1;
        let (why, help) = match outside {
            Some(_) => (
                "lies outside the folders that may be read",
                "allow its folder in the deck: `includes: {roots: [folder]}`, or leave it out: `includes: {skip: [name]}`",
            ),
            None if odd => ("is no file that can be read", "name a file"),
            None => (
                "is not found",
                "it is looked for beside the file that includes it and in `includes: {roots: [folder]}` of the deck; `includes: {skip: [name]}` leaves it out",
            ),
        };
        let message = format!("include `{}` {why}; what it holds is not known here", request.path);
        self.diagnostics
            .push(Diagnostic::new("missing-include", Severity::Warning, request.span, message).with_help(help));
        None
    }

    /// The text of a file, read once. `asked` is the include that wants it. The error says why it cannot be had.
    fn take(&mut self, path: &Path, asked: Option<Span>) -> Result<Known, String> {
        let canonical = self.files.canonical(path).map_err(|error| format!("cannot be read: {}", plainly(&error)))?;
        if let Some(&known) = self.known.get(&canonical) {
            self.again = true;
            return Ok(known);
        }
        let bytes = text::read(self.files, path)?;
        let (text, trouble) = text::decode(bytes);
        self.bytes += text.len() as u64;
        let file = self.sources.add(paths::shown(path, self.files), text);
        self.files_read += 1;
        self.places.insert(file, path.to_owned());
        if let Some(trouble) = &trouble {
            self.complain(file, trouble, asked);
        }
        let known = Known { file, usable: trouble.is_none() };
        self.known.insert(canonical, known);
        Ok(known)
    }

    fn complain(&mut self, file: FileId, trouble: &Trouble, asked: Option<Span>) {
        let span = Span::new(file, trouble.start, trouble.end);
        let mut error = Diagnostic::error("card", span, trouble.message).with_help("give the netlist as plain text");
        if let Some(asked) = asked {
            error = error.with_place(asked, "included here");
        }
        self.diagnostics.push(error);
    }
}

fn few(sections: &[String]) -> String {
    let shown: Vec<String> = sections.iter().take(8).map(|section| format!("`{section}`")).collect();
    let more = if sections.len() > shown.len() { " and more" } else { "" };
    format!("{}{more}", shown.join(", "))
}

/// An error of the operating system without its number.
fn plainly(error: &std::io::Error) -> String {
    match error.kind() {
        std::io::ErrorKind::PermissionDenied => "permission is denied".to_owned(),
        std::io::ErrorKind::NotFound => "it does not exist".to_owned(),
        _ => error.to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use flate2::Compression;
    use flate2::write::GzEncoder;
    use std::io::Write;

    struct Read {
        loaded: Loaded,
        sources: SourceMap,
        names: Names,
    }

    fn read_with(files: &dyn Files, request: LoadRequest) -> Read {
        let (mut sources, mut names) = (SourceMap::new(), Names::new());
        let loaded = load(files, &request, &mut sources, &mut names);
        for one in &loaded.diagnostics {
            assert!(sources.text(one.span.file).get(one.span.range()).is_some(), "{one:?}");
        }
        Read { loaded, sources, names }
    }

    fn read(files: &Memory) -> Read {
        read_with(files, LoadRequest { netlists: vec!["d/top.sp".into()], ..LoadRequest::default() })
    }

    impl Read {
        /// The cards of the top level, by their names.
        fn cards(&self) -> Vec<&str> {
            let top = &self.loaded.tree.cells[0];
            let mut found = Vec::new();
            for (index, run) in top.runs.iter().enumerate() {
                let end = top.runs.get(index + 1).map_or(top.cards.len(), |next| next.first as usize);
                let text = self.sources.text(run.file);
                let name = |&at: &u32| text[at as usize..].split_ascii_whitespace().next().unwrap();
                found.extend(top.cards[run.first as usize..end].iter().map(name));
            }
            found
        }

        /// Code, place and message of every diagnostic, one a line.
        fn told(&self) -> String {
            let line = |one: &Diagnostic| {
                let place = self.sources.start(one.span);
                format!(
                    "{} {}:{}:{} {}",
                    one.code,
                    self.sources.file(one.span.file).path(),
                    place.line,
                    place.column,
                    one.message
                )
            };
            self.loaded.diagnostics.iter().map(line).collect::<Vec<_>>().join("\n")
        }

        fn quiet(&self) -> &Read {
            assert_eq!(self.told(), "");
            self
        }
    }

    /// Ngspice User's Manual, version 39, section 2.6: an include reads "as if that second file appeared in place" of the
    /// card, so it has no title line.
    #[test]
    fn includes_are_read_in_place() {
        let files = Memory::new()
            .with(
                "d/top.sp",
                "title\nR1 a b 1\n.include 'sub/a b.sp'\nR4 a b 1\n.inc ../d/sub/c.sp\nR6 a b 1\n.end\nR7 x\n",
            )
            .with("d/sub/a b.sp", "R2 a b 1\n.include c.sp\nR3 a b 1\n")
            .with("d/sub/c.sp", "Rc a b 1\n.end\nR9 x\n");
        let read = read(&files);
        assert_eq!(read.quiet().cards(), ["R1", "R2", "Rc", "R3", "R4", "Rc", "R6"]);
        assert_eq!((read.loaded.files_read, read.loaded.tree.cells.len()), (3, 1));
        // A cell may begin in one file and end in another.
        let files = Memory::new()
            .with("d/top.sp", "t\n.inc head.sp\nR1 a b 1\n.ends\nR2 a b 1\n")
            .with("d/head.sp", ".subckt s a\n");
        assert_eq!(
            read_with(&files, LoadRequest { netlists: vec!["d/top.sp".into()], ..LoadRequest::default() })
                .quiet()
                .cards(),
            ["R2"]
        );
    }

    #[test]
    fn a_library_read_twice_is_one() {
        let files = Memory::new()
            .with("d/top.sp", "t\n.include lib.sp\n.include lib.sp\nX1 a s\n")
            .with("d/lib.sp", ".subckt s a\nR1 a 0 1\n.ends\n");
        let read = read(&files);
        read.quiet();
        assert_eq!(
            (read.loaded.tree.cells.len(), read.loaded.tree.cells[0].inner.len(), read.loaded.files_read),
            (2, 1, 2)
        );
    }

    /// Ngspice User's Manual, version 39, section 2.7; that a section asks for others, of its own file too, is how open
    /// processes write their libraries (GF180MCU model file SM-BB-000149).
    #[test]
    fn library_sections() {
        let library = ".lib TT\n.lib 'p.lib' common\nRt a b 1\n.endl TT\n.lib ss\nRs a b 1\n.endl\n.lib common\nRc a b 1\n.endl common\n";
        let files =
            Memory::new().with("d/top.sp", "t\n.lib p.lib tt\n.lib p.lib sss\nR1 a b 1\n").with("d/p.lib", library);
        let read = read(&files);
        assert_eq!(read.cards(), ["Rc", "Rt", "R1"]);
        assert_eq!(read.told(), "include d/top.sp:3:12 `d/p.lib` has no section `sss`");
        assert_eq!(read.loaded.diagnostics[0].help.as_deref(), Some("did you mean `ss`?"));
    }

    #[test]
    fn loops_and_depth_are_bounded() {
        let files = Memory::new()
            .with("d/top.sp", "t\n.include a.sp\nR1 a b 1\n")
            .with("d/a.sp", ".include b.sp\nR2 a b 1\n")
            .with("d/b.sp", "R3 a b 1\n.include ./a.sp\n.include b.sp\n");
        let found = read(&files);
        assert_eq!(
            found.told(),
            "include d/b.sp:2:10 `d/a.sp` includes itself\ninclude d/b.sp:3:10 `d/b.sp` includes itself"
        );
        assert_eq!(found.cards(), ["R3", "R2", "R1"]);
        let mut files = Memory::new().with("d/top.sp", "t\n.include 0.sp\n");
        for index in 0..120 {
            files = files.with(format!("d/{index}.sp"), format!(".include {}.sp\n", index + 1));
        }
        let found = read(&files);
        assert!(found.told().contains("more than 100 deep"), "{}", found.told());
    }

    #[test]
    fn files_that_double_are_bounded() {
        let mut files = Memory::new().with("d/top.sp", "t\n.include 0.sp\n");
        for index in 0..60 {
            let next = format!(".include {}.sp\n", index + 1);
            files = files.with(format!("d/{index}.sp"), next.repeat(2));
        }
        let read = read(&files.with("d/60.sp", "R1 a b 1\n"));
        assert!(read.told().contains("more than 100000 includes"), "{}", read.told());
    }

    #[test]
    fn files_outside_the_roots_are_not_read() {
        let files = Memory::new()
            .with(
                "d/top.sp",
                "t\n.include ../e/x.sp\n.include y.sp\n.include z.sp\n.include /e/x.sp\n.include models.sp\n",
            )
            .with("e/x.sp", "R1 a b 1\n")
            .with("e/z.sp", "R2 a b 1\n");
        let request = |roots: &[&str]| LoadRequest {
            netlists: vec!["d/top.sp".into()],
            roots: roots.iter().map(PathBuf::from).collect(),
            skips: vec![Glob::new("mod*")],
        };
        let read = read_with(&files, request(&[]));
        let told = read.told();
        assert!(told.contains("missing-include d/top.sp:2:10 include `../e/x.sp` lies outside"), "{told}");
        assert!(told.contains("missing-include d/top.sp:3:10 include `y.sp` is not found"), "{told}");
        assert!(told.contains("missing-include d/top.sp:4:10 include `z.sp` is not found"), "{told}");
        assert!(read.cards().is_empty());
        assert_eq!((read.loaded.includes_missing, read.loaded.includes_skipped), (4, 1));
        assert!(read.loaded.diagnostics.iter().all(|one| one.severity == Severity::Warning));
        let read = read_with(&files, request(&["e"]));
        assert_eq!(read.cards(), ["R1", "R2"]);
        assert_eq!(read.loaded.includes_missing, 2);
    }

    #[cfg(unix)]
    #[test]
    fn links_and_odd_files_on_disk() {
        let folder = tempfile::tempdir().unwrap();
        let at = |name: &str| folder.path().join(name);
        std::fs::create_dir_all(at("in/dir.sp")).unwrap();
        std::fs::write(at("secret.sp"), "R9 a b 1\n").unwrap();
        std::fs::write(at("in/real.sp"), "R2 a b 1\n").unwrap();
        std::fs::write(at("in/top.sp"), "t\n.include link.sp\n.include dir.sp\n.include good.sp\n.include /dev/null\n")
            .unwrap();
        std::os::unix::fs::symlink(at("secret.sp"), at("in/link.sp")).unwrap();
        std::os::unix::fs::symlink(at("in/real.sp"), at("in/good.sp")).unwrap();
        let request = LoadRequest {
            netlists: vec![at("in/top.sp"), at("in/none.sp"), at("in/dir.sp")],
            ..LoadRequest::default()
        };
        let read = read_with(&Disk, request);
        assert_eq!(read.cards(), ["R2"]);
        let told = read.told();
        assert!(told.contains("`link.sp` lies outside") && told.contains("`dir.sp` is no file"), "{told}");
        assert!(
            told.contains("none.sp` does not exist") && told.contains("dir.sp` is no file that can be read"),
            "{told}"
        );
    }

    fn packed(bytes: &[u8]) -> Vec<u8> {
        let mut encoder = GzEncoder::new(Vec::new(), Compression::best());
        encoder.write_all(bytes).unwrap();
        encoder.finish().unwrap()
    }

    #[test]
    fn packed_files_are_known_by_their_content() {
        let read_one = |bytes: Vec<u8>| read(&Memory::new().with("d/top.sp", bytes));
        assert_eq!(read_one(packed(b"t\nR1 a b 1\n")).quiet().cards(), ["R1"]);
        let mut cut = packed(b"t\nR1 a b 1\n");
        cut.truncate(15);
        assert!(read_one(cut).told().contains("cannot be unpacked"));
        let bomb = read_one(packed(&vec![b'\n'; 70 << 20]));
        assert!(bomb.told().contains("unpacks to more than"), "{}", bomb.told());
        assert!(bomb.told().starts_with("netlist d/top.sp:1:1 "));
    }

    #[test]
    fn encodings() {
        let read_one = |bytes: &[u8]| read(&Memory::new().with("d/top.sp", bytes));
        assert_eq!(read_one(b"t \xb5\r\nR\xb51 a b 1\xb5\r\n").quiet().cards(), ["Rµ1"]);
        assert_eq!(read_one("\u{feff}* t\nR1 a b 1".as_bytes()).quiet().cards(), ["R1"]);
        let wide: Vec<u8> =
            [0xff, 0xfe].into_iter().chain("t\nR1 a b 1".encode_utf16().flat_map(u16::to_le_bytes)).collect();
        assert_eq!(read_one(&wide).quiet().cards(), ["R1"]);
        let binary = read_one(b"\x7fELF\0\0R1\nR2 a b 1\n");
        assert!(binary.told().starts_with("card d/top.sp:1:5 this file is no text"), "{}", binary.told());
        assert!(binary.cards().is_empty());
        assert!(read_one(b"").cards().is_empty());
    }

    #[test]
    fn several_netlists_each_have_a_title() {
        let files = Memory::new().with("a.sp", "t\nR1 a b 1\n.subckt x\n").with("b.sp", "R9 title\nR2 a b 1\n");
        let request = LoadRequest { netlists: vec!["a.sp".into(), "./b.sp".into()], ..LoadRequest::default() };
        let read = read_with(&files, request);
        assert_eq!(read.cards(), ["R1", "R2"]);
        assert_eq!(read.told(), "netlist a.sp:3:9 cell `x` is not ended: its `.ends` is missing");
        let names: Vec<_> = read.loaded.tree.cells.iter().map(|cell| read.names.text(cell.name.name)).collect();
        assert_eq!(names, ["", "x"]);
    }
}
