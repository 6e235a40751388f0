//! Where files come from: the disk, or memory in tests.

use super::paths::flat;
use std::collections::BTreeMap;
use std::fs;
use std::io;
use std::path::{Path, PathBuf};

/// What the loader asks of a file system.
pub trait Files {
    /// All bytes of a file.
    fn read(&self, path: &Path) -> io::Result<Vec<u8>>;
    /// Its length in bytes.
    fn size(&self, path: &Path) -> io::Result<u64>;
    /// The one absolute path of a file or folder, symbolic links resolved.
    fn canonical(&self, path: &Path) -> io::Result<PathBuf>;
    /// Whether it is a regular file, or a link to one: no folder, device or pipe.
    fn is_file(&self, path: &Path) -> bool;
    /// Whether there is anything under this path.
    fn exists(&self, path: &Path) -> bool;
    /// The folder that relative paths count from, if there is one.
    fn here(&self) -> Option<PathBuf>;
}

/// The disk.
#[derive(Clone, Copy, Debug, Default)]
pub struct Disk;

impl Files for Disk {
    fn read(&self, path: &Path) -> io::Result<Vec<u8>> {
        fs::read(path)
    }

    fn size(&self, path: &Path) -> io::Result<u64> {
        Ok(fs::metadata(path)?.len())
    }

    fn canonical(&self, path: &Path) -> io::Result<PathBuf> {
        let path = if path.as_os_str().is_empty() { Path::new(".") } else { path };
        fs::canonicalize(path)
    }

    fn is_file(&self, path: &Path) -> bool {
        fs::metadata(path).is_ok_and(|found| found.is_file())
    }

    fn exists(&self, path: &Path) -> bool {
        fs::symlink_metadata(path).is_ok()
    }

    fn here(&self) -> Option<PathBuf> {
        std::env::current_dir().ok()
    }
}

/// Files in memory, for tests; folders are there as soon as a path goes through them.
#[derive(Clone, Debug, Default)]
pub struct Memory {
    files: BTreeMap<PathBuf, Vec<u8>>,
}

impl Memory {
    /// With no files.
    pub fn new() -> Memory {
        Memory::default()
    }

    /// Adds a file, and gives itself back.
    pub fn with(mut self, path: impl AsRef<Path>, bytes: impl Into<Vec<u8>>) -> Memory {
        self.files.insert(flat(path.as_ref()), bytes.into());
        self
    }

    fn find(&self, path: &Path) -> io::Result<&Vec<u8>> {
        self.files.get(&flat(path)).ok_or_else(|| io::Error::from(io::ErrorKind::NotFound))
    }
}

impl Files for Memory {
    fn read(&self, path: &Path) -> io::Result<Vec<u8>> {
        self.find(path).cloned()
    }

    fn size(&self, path: &Path) -> io::Result<u64> {
        self.find(path).map(|bytes| bytes.len() as u64)
    }

    fn canonical(&self, path: &Path) -> io::Result<PathBuf> {
        if self.exists(path) { Ok(Path::new("/").join(flat(path))) } else { Err(io::ErrorKind::NotFound.into()) }
    }

    fn is_file(&self, path: &Path) -> bool {
        self.files.contains_key(&flat(path))
    }

    fn exists(&self, path: &Path) -> bool {
        let path = flat(path);
        self.files.keys().any(|file| file.starts_with(&path))
    }

    fn here(&self) -> Option<PathBuf> {
        None
    }
}
