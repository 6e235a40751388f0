//! Waivers: findings that someone accepted, with a reason and, where wanted, a last day. The late pass marks finished
//! diagnostics, and says which waivers hide nothing and which are past their day.

pub mod baseline;
pub mod comment;

use crate::diag::{Accepted, Diagnostic, Finding, Label, Waived};
use crate::names::{Glob, nearest};
use crate::source::Span;
use std::fmt;

/// A day of the calendar.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Date {
    /// Year.
    pub year: u16,
    /// Month, 1 to 12.
    pub month: u8,
    /// Day, 1 to 31.
    pub day: u8,
}

impl fmt::Display for Date {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:04}-{:02}-{:02}", self.year, self.month, self.day)
    }
}

/// Reads `2027-03-01`; none for what is no day of the calendar.
pub fn read_date(text: &str) -> Option<Date> {
    let mut parts = text.split('-');
    let mut part = |digits: usize| {
        let part = parts.next()?;
        let plain = part.len() == digits && part.bytes().all(|byte| byte.is_ascii_digit());
        plain.then(|| part.parse::<u16>().ok()).flatten()
    };
    let (year, month, day) = (part(4)?, part(2)?, part(2)?);
    let leap = year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
    let days = match month {
        1 | 3 | 5 | 7 | 8 | 10 | 12 => 31,
        4 | 6 | 9 | 11 => 30,
        2 if leap => 29,
        2 => 28,
        _ => return None,
    };
    if parts.next().is_some() || day == 0 || day > days {
        return None;
    }
    Some(Date { year, month: month as u8, day: day as u8 })
}

/// Today, in universal time.
pub fn today() -> Date {
    let seconds = std::time::SystemTime::now().duration_since(std::time::UNIX_EPOCH).map_or(0, |since| since.as_secs());
    day_number(seconds / 86_400)
}

/// The day that lies `days` after 1970-01-01, by the Gregorian calendar (400 years have 146 097 days).
fn day_number(days: u64) -> Date {
    let mut year = 1970 + days / 146_097 * 400;
    let mut left = days % 146_097;
    let leap = |year: u64| year.is_multiple_of(4) && (!year.is_multiple_of(100) || year.is_multiple_of(400));
    while left >= 365 + u64::from(leap(year)) {
        left -= 365 + u64::from(leap(year));
        year += 1;
    }
    let lengths = [31, 28 + u64::from(leap(year)), 31, 30, 31, 30, 31, 31, 30, 31, 30, 31];
    let mut month = 0;
    while left >= lengths[month] {
        left -= lengths[month];
        month += 1;
    }
    Date { year: year.min(9999) as u16, month: month as u8 + 1, day: left as u8 + 1 }
}

/// An accepted finding, or several.
#[derive(Clone, Debug, PartialEq)]
pub struct Waiver {
    /// The rule's id.
    pub rule: String,
    /// Instance path (`xbias.m4`, globs, `**` crosses dots) or `cell/device` for every instance.
    pub at: Glob,
    /// Only this terminal pair or pin.
    pub pair: Option<String>,
    /// Why.
    pub reason: String,
    /// By whom.
    pub by: Option<String>,
    /// Last day it holds.
    pub until: Option<Date>,
    /// Where it stands.
    pub place: Span,
    /// For one in a comment: the card that it stands at. It accepts what is found there, in every instance.
    pub card: Option<Span>,
}

impl Waiver {
    /// Whether it stands in a comment.
    pub fn in_comment(&self) -> bool {
        self.card.is_some()
    }

    /// What it names, as people write it.
    pub fn shown_at(&self) -> &str {
        self.at.text().trim_start_matches('/')
    }
}

/// What is wrong with a waiver.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Fault {
    /// It hides nothing.
    Stale,
    /// Its last day is over, and it would still hide something.
    Expired,
}

/// A waiver that does not do what it was written for.
#[derive(Clone, Debug, PartialEq)]
pub struct Complaint {
    /// What is wrong.
    pub kind: Fault,
    /// The waiver.
    pub waiver: Waiver,
    /// For one that hides nothing: what it may have meant, as a sentence.
    pub hint: Option<String>,
}

/// Marks the diagnostics that waivers hide on the day `today` (`until` is inclusive). A finding about several instances is
/// hidden only if all of them are waived; else it stays, and says how many are.
pub fn apply(diagnostics: &mut [Diagnostic], waivers: &[Waiver], today: Date) -> Vec<Complaint> {
    let mut used = vec![false; waivers.len()];
    let holds = |waiver: &Waiver| waiver.until.is_none_or(|until| today <= until);
    for diagnostic in diagnostics.iter_mut() {
        let Some(finding) = &diagnostic.finding else { continue };
        let about: Vec<(usize, &Waiver)> = waivers
            .iter()
            .enumerate()
            .filter(|(_, waiver)| waiver.rule == diagnostic.code && concerns(waiver, diagnostic.span, finding))
            .collect();
        for (index, _) in &about {
            used[*index] = true;
        }
        let valid: Vec<&Waiver> = about.iter().map(|(_, waiver)| *waiver).filter(|waiver| holds(waiver)).collect();
        match cover(&valid, diagnostic.span, finding) {
            Cover::Whole(waiver) => diagnostic.waived = Some(waived(waiver)),
            Cover::Part(waiver, text) => diagnostic.labels.push(Label { span: waiver.place, text }),
            Cover::Nothing => {}
        }
    }
    let complaints = waivers.iter().zip(&used).filter_map(|(waiver, &used)| {
        let kind = match used {
            true if holds(waiver) => return None,
            true => Fault::Expired,
            false => Fault::Stale,
        };
        let hint = if kind == Fault::Stale { hint(waiver, diagnostics) } else { None };
        Some(Complaint { kind, waiver: waiver.clone(), hint })
    });
    complaints.collect()
}

fn waived(waiver: &Waiver) -> Waived {
    Waived {
        how: if waiver.in_comment() { Accepted::Comment } else { Accepted::Deck },
        place: waiver.place,
        reason: waiver.reason.clone(),
        by: waiver.by.clone(),
        until: waiver.until.map(|date| date.to_string()),
    }
}

enum Cover<'w> {
    Nothing,
    Part(&'w Waiver, String),
    Whole(&'w Waiver),
}

/// Whether a waiver says something about a finding at all; `span` is the finding's place.
fn concerns(waiver: &Waiver, span: Span, finding: &Finding) -> bool {
    let pair =
        waiver.pair.as_ref().is_none_or(|pair| finding.pairs.iter().any(|other| other.eq_ignore_ascii_case(pair)));
    pair && stands_at(waiver, span, finding)
}

fn stands_at(waiver: &Waiver, span: Span, finding: &Finding) -> bool {
    names_statement(waiver, span, finding)
        || (!waiver.in_comment() && finding.paths.iter().any(|path| waiver.at.matches_path(path)))
}

/// Whether a waiver names the statement itself: as `cell/device`, or by standing at its card. A finding whose place is in another file
/// than the card (a deck) is known by its names.
fn names_statement(waiver: &Waiver, span: Span, finding: &Finding) -> bool {
    let named = || waiver.at.text().contains('/') && waiver.at.matches(&format!("{}/{}", finding.cell, finding.device));
    match waiver.card {
        Some(card) if card.file == span.file => card.start <= span.start && span.end <= card.end,
        _ => named(),
    }
}

/// How much of a finding the waivers cover: every instance and, where they narrow, every pair.
fn cover<'w>(waivers: &[&'w Waiver], span: Span, finding: &Finding) -> Cover<'w> {
    let Some(&first) = waivers.first() else { return Cover::Nothing };
    let pairs: Vec<Option<&str>> = if finding.pairs.is_empty() {
        vec![None]
    } else {
        finding.pairs.iter().map(|pair| Some(pair.as_str())).collect()
    };
    let covers_pair = |waiver: &&&Waiver, pair: Option<&str>| {
        waiver.pair.as_ref().is_none_or(|wanted| pair.is_some_and(|pair| pair.eq_ignore_ascii_case(wanted)))
    };
    let whole_statement =
        |pair| waivers.iter().any(|waiver| covers_pair(&waiver, pair) && names_statement(waiver, span, finding));
    let path_covered = |path: &String| {
        pairs.iter().all(|&pair| {
            whole_statement(pair)
                || waivers
                    .iter()
                    .any(|waiver| !waiver.in_comment() && covers_pair(&waiver, pair) && waiver.at.matches_path(path))
        })
    };
    let statement = pairs.iter().all(|&pair| whole_statement(pair));
    let everything = |waiver: &&Waiver| waiver.pair.is_none() && waiver.at.text() == "**";
    let covered = finding.paths.iter().filter(|path| path_covered(path)).count();
    if statement || waivers.iter().any(everything) || finding.paths_complete && covered == finding.paths.len() {
        return Cover::Whole(first);
    }
    let open: Vec<&str> = pairs
        .iter()
        .flatten()
        .copied()
        .filter(|&pair| !waivers.iter().any(|waiver| covers_pair(&waiver, Some(pair))))
        .collect();
    Cover::Part(
        first,
        match open.as_slice() {
            [] => format!("this waiver covers {covered} of the {} instances", finding.instances),
            open => format!("this waiver does not cover {}", open.join(", ")),
        },
    )
}

/// What a waiver that hides nothing may have meant: another pair at its place, the same rule at a place of a similar name or of the same
/// device's name, or another rule at its place.
fn hint(waiver: &Waiver, diagnostics: &[Diagnostic]) -> Option<String> {
    let found = || diagnostics.iter().filter_map(|one| Some((one, one.finding.as_deref()?)));
    let here = |&(one, finding): &(&Diagnostic, &Finding)| stands_at(waiver, one.span, finding);
    if let Some((_, finding)) = found().filter(here).find(|(one, _)| one.code == waiver.rule) {
        return Some(format!("the finding there is about {}", finding.pairs.join(", ")));
    }
    let slash = waiver.at.text().contains('/');
    let places: Vec<String> = found()
        .filter(|(one, _)| one.code == waiver.rule)
        .flat_map(|(_, finding)| match slash {
            true => vec![format!("{}/{}", finding.cell, finding.device)],
            false => finding.paths.clone(),
        })
        .take(5000)
        .collect();
    if let Some(near) = nearest(waiver.at.text(), places.iter().map(String::as_str)) {
        let near = near.trim_start_matches('/');
        return Some(match waiver.in_comment() {
            true => format!("there is one at `{near}`: put the comment at that card"),
            false => format!("did you mean `{near}`?"),
        });
    }
    let last = |path: &str| path.rsplit(['.', '/']).next().unwrap_or_default().to_ascii_lowercase();
    if let Some(same) = places.iter().find(|place| last(place) == last(waiver.at.text())) {
        return Some(format!("there is one at `{}`", same.trim_start_matches('/')));
    }
    let mut others: Vec<&str> = found().filter(here).map(|(one, _)| one.code.as_str()).collect();
    others.dedup();
    let other = nearest(&waiver.rule, others.iter().copied()).or(others.first().copied())?;
    Some(format!("what is found there is `{other}`"))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diag::{Severity, Verdict, Worst};
    use crate::source::FileId;
    use std::collections::BTreeMap;

    const DAY: Date = Date { year: 2027, month: 3, day: 1 };

    fn place() -> Span {
        Span::new(FileId(0), 0, 1)
    }

    fn finding(cell: &str, device: &str, paths: &[&str], pairs: &[&str]) -> Diagnostic {
        let mut made = Diagnostic::new("over-rating", Severity::Error, place(), "x");
        made.finding = Some(Box::new(Finding {
            verdict: Verdict::Violated,
            cell: cell.into(),
            device: device.into(),
            instances: paths.len() as u64,
            worst: Worst::default(),
            paths: paths.iter().map(|path| (*path).to_owned()).collect(),
            paths_complete: true,
            nets: BTreeMap::new(),
            pairs: pairs.iter().map(|pair| (*pair).to_owned()).collect(),
            modes: Vec::new(),
        }));
        made
    }

    fn waiver(at: &str) -> Waiver {
        Waiver {
            rule: "over-rating".into(),
            at: Glob::new(at),
            pair: None,
            reason: "measured".into(),
            by: None,
            until: None,
            place: place(),
            card: None,
        }
    }

    fn run(at: &str, diagnostic: Diagnostic) -> (bool, Vec<Fault>) {
        let mut all = vec![diagnostic];
        let faults = apply(&mut all, &[waiver(at)], DAY).into_iter().map(|complaint| complaint.kind).collect();
        (all[0].waived.is_some(), faults)
    }

    #[test]
    fn days_follow_the_gregorian_calendar() {
        // 2000 was a leap year and 2100 will be none (common practice, no source).
        for (days, text) in [
            (0, "1970-01-01"),
            (11_016, "2000-02-29"),
            (19_782, "2024-02-29"),
            (47_540, "2100-02-28"),
            (47_541, "2100-03-01"),
        ] {
            assert_eq!(day_number(days).to_string(), text);
        }
    }

    #[test]
    fn a_waiver_names_paths_or_statements() {
        assert_eq!(run("x1.m1", finding("inv", "M1", &["X1.M1"], &[])), (true, vec![]));
        assert_eq!(run("x?.m1", finding("inv", "M1", &["X1.M1", "X2.M1"], &[])), (true, vec![]));
        assert_eq!(run("inv/m1", finding("inv", "M1", &["X1.M1", "X2.M1"], &[])), (true, vec![]));
        assert_eq!(
            run("x1.m1", finding("inv", "M1", &["X1.M1", "X2.M1"], &[])),
            (false, vec![]),
            "one of two instances"
        );
        assert_eq!(run("x3.m1", finding("inv", "M1", &["X1.M1"], &[])), (false, vec![Fault::Stale]));
    }

    #[test]
    fn a_pair_narrows() {
        let mut narrow = waiver("m1");
        narrow.pair = Some("vgs".into());
        let mut all = vec![finding("", "M1", &["M1"], &["vgs", "vds"]), finding("", "M1", &["M1"], &["vgs"])];
        assert!(apply(&mut all, &[narrow], DAY).is_empty());
        assert!(all[0].waived.is_none(), "vds is left");
        assert!(all[0].labels[0].text.contains("vds"));
        assert!(all[1].waived.is_some());
    }

    #[test]
    fn until_is_inclusive() {
        for (until, hidden, faults) in
            [(DAY, true, vec![]), (Date { day: 28, month: 2, ..DAY }, false, vec![Fault::Expired])]
        {
            let mut all = vec![finding("", "M1", &["M1"], &[])];
            let dated = Waiver { until: Some(until), ..waiver("m1") };
            let complaints = apply(&mut all, &[dated], DAY);
            assert_eq!(all[0].waived.is_some(), hidden);
            assert_eq!(complaints.into_iter().map(|complaint| complaint.kind).collect::<Vec<_>>(), faults);
        }
    }
}
