//! The rule pages inside the program, as text: what `builtin:ldmos` consists of.
//!
//! A rule is one page in `rules/`: what it ranges over and requires, its words, why it exists, and two small netlists. Documentation,
//! `drainwise rules` and the checks themselves all read the page; nothing about a rule is written a second time.

/// One rule's page.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Page {
    /// The rule's id, which is the file's name.
    pub id: &'static str,
    /// The whole YAML text.
    pub text: &'static str,
}

macro_rules! pages {
    ($($id:literal)*) => {
        &[$(Page { id: $id, text: include_str!(concat!("../../rules/", $id, ".yaml")) }),*]
    };
}

/// All pages, ordered by id. A file in `rules/` must be listed here; a test holds this list against the folder.
pub const PAGES: &[Page] = pages! {
    "body-off-source"
    "drain-source-swapped"
    "finger-count"
    "finger-width"
    "gate-floats"
    "hv-in-gain"
    "hv-in-mirror"
    "length-off"
    "mirror-mixed"
    "missing-include"
    "no-high-voltage"
    "on-state-overlap"
    "over-rating"
    "pin-count"
    "pin-off-tie"
    "rail-unmatched"
    "rating-beyond-drift"
    "unknown-model"
    "waiver-expired"
    "waiver-stale"
};

/// The page of a rule of the program.
pub fn page(id: &str) -> Option<Page> {
    PAGES.iter().find(|page| page.id == id).copied()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_page_in_the_folder_is_in_the_list_and_the_other_way_round() {
        let mut files: Vec<String> = std::fs::read_dir(concat!(env!("CARGO_MANIFEST_DIR"), "/rules"))
            .unwrap()
            .map(|entry| entry.unwrap().file_name().into_string().unwrap())
            .filter_map(|name| name.strip_suffix(".yaml").map(str::to_string))
            .collect();
        files.sort();
        let listed: Vec<&str> = PAGES.iter().map(|page| page.id).collect();
        assert_eq!(files, listed, "files in rules/ on the left, the list in this file on the right");
    }

    #[test]
    fn a_page_says_its_own_id_first() {
        for page in PAGES {
            assert_eq!(page.text.lines().next(), Some(format!("id: {}", page.id).as_str()));
        }
    }
}
