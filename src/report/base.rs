//! Where paths count from in reports that are read elsewhere: the repository's root, so that a viewer that holds the repository
//! finds the file, and nothing of the machine's own folders gets out.

use std::path::{Component, Path, PathBuf};

/// The root of the repository, and the folder that shown paths count from. Both empty: paths are left where they count from.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Base {
    root: PathBuf,
    here: PathBuf,
}

/// Files that stand inside the program have names that begin so.
pub(super) const INSIDE: &str = "builtin:";

/// The name of the text that stands for the words of the command line.
const ARGUMENTS: &str = "command line";

impl Base {
    /// Paths as shown count from `here`, and are to count from `root`; both absolute.
    pub fn new(root: impl Into<PathBuf>, here: impl Into<PathBuf>) -> Base {
        Base { root: root.into(), here: here.into() }
    }

    /// A shown path, counted from the root, with forward slashes; what lies beside the root begins with `..`. It is never
    /// absolute.
    pub fn path(&self, shown: &str) -> String {
        if shown.starts_with(INSIDE) || shown == ARGUMENTS {
            return shown.to_owned();
        }
        let path = flat(&self.here.join(shown));
        let root = flat(&self.root);
        let same = path.components().zip(root.components()).take_while(|(a, b)| a == b).count();
        let up = root.components().count() - same;
        let parts =
            path.components().skip(same).filter(|part| !matches!(part, Component::RootDir | Component::Prefix(_)));
        let names = std::iter::repeat_n("..".into(), up).chain(parts.map(|part| part.as_os_str().to_string_lossy()));
        names.collect::<Vec<_>>().join("/")
    }

    /// The same as a URI reference (RFC 3986), and whether it counts from the root; none for what is no file.
    pub(super) fn uri(&self, shown: &str) -> Option<(String, bool)> {
        match shown.strip_prefix(INSIDE) {
            Some(name) => Some((format!("{INSIDE}{}", encoded(name)), false)),
            None if shown == ARGUMENTS => None,
            None => Some((encoded(&self.path(shown)), true)),
        }
    }
}

/// A path without `.`, and without `..` where a folder goes before it.
fn flat(path: &Path) -> PathBuf {
    let mut out = PathBuf::new();
    for part in path.components() {
        match part {
            Component::CurDir => {}
            Component::ParentDir if matches!(out.components().next_back(), Some(Component::Normal(_))) => {
                out.pop();
            }
            Component::ParentDir if out.has_root() => {}
            _ => out.push(part),
        }
    }
    out
}

/// Every byte that RFC 3986 does not leave as it is (its section 2.3, unreserved characters), but for the slash, as `%` and two
/// hexadecimal digits. So a colon never looks like the end of a scheme.
fn encoded(path: &str) -> String {
    let mut uri = String::with_capacity(path.len());
    for byte in path.bytes() {
        match byte {
            b'/' | b'-' | b'.' | b'_' | b'~' => uri.push(char::from(byte)),
            _ if byte.is_ascii_alphanumeric() => uri.push(char::from(byte)),
            _ => uri.push_str(&format!("%{byte:02X}")),
        }
    }
    uri
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn paths_count_from_the_root_and_are_never_absolute() {
        let base = Base::new("/home/x/chip", "/home/x/chip/blocks");
        for (shown, wanted) in [
            ("valve.sp", "blocks/valve.sp"),
            ("./a/../valve.sp", "blocks/valve.sp"),
            ("../top.sp", "top.sp"),
            ("/home/x/chip/lib/m.sp", "lib/m.sp"),
            ("/home/x/process/m.sp", "../process/m.sp"),
            ("../../../m.sp", "../../m.sp"),
            ("/opt/m.sp", "../../../opt/m.sp"),
            ("builtin:sky130", "builtin:sky130"),
        ] {
            assert_eq!(base.path(shown), wanted, "{shown}");
        }
        assert_eq!(Base::default().path("a/./b.sp"), "a/b.sp");
        assert_eq!(Base::default().path("/a/b.sp"), "a/b.sp");
    }

    /// Percent-encoding as in RFC 3986, section 2.1.
    #[test]
    fn uris_keep_nothing_that_means_something() {
        let base = Base::default();
        assert_eq!(base.uri("a b/c:d#e?%.sp"), Some(("a%20b/c%3Ad%23e%3F%25.sp".into(), true)));
        assert_eq!(base.uri("µ.sp"), Some(("%C2%B5.sp".into(), true)));
        assert_eq!(base.uri("builtin:ldmos/x.yaml"), Some(("builtin:ldmos/x.yaml".into(), false)));
        assert_eq!(base.uri("command line"), None);
    }
}
