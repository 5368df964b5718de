//! An audit beside an earlier report: what became worse, and what became better.
//!
//! Both sides are the types of the JSON report, so that nothing is compared that a report
//! does not keep. Submissions are matched by name, runs by file, channels by name. `numbers` compares errors and orders, `methods` what the rows
//! say of methods and claims. Doubt never speaks for a change to the better: what cannot
//! be compared any more counts as worse.

mod methods;
mod numbers;

use std::collections::{BTreeMap, VecDeque};

use crate::outcome::{Change, ChangeKind, Changes};
use crate::report::{AuditReport, RunReport, SubmissionReport};

/// The share by which a worst error must have grown to be worse, unless stated.
pub const WORSE_BY: f64 = 0.2;

/// Which way something changed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Way {
    Worse,
    Better,
    Other,
}

/// Compares an audit with an earlier one that goes by `name`.
pub fn compare(earlier: &AuditReport, now: &AuditReport, name: &str, worse_by: f64) -> Changes {
    let mut changes = Changes {
        earlier: name.to_owned(),
        worse_by,
        ..Changes::default()
    };
    let of_name = |submission: &SubmissionReport| submission.name.clone();
    let (pairs, new) = paired(&earlier.submissions, &now.submissions, of_name);
    let unread_now = |name: &str| now.not_audited.iter().any(|one| one.name == name);
    let unread_then = |name: &str| earlier.not_audited.iter().any(|one| one.name == name);
    for (before, after) in pairs {
        let mut sink = Sink::new(&mut changes, &before.name);
        match after {
            Some(after) => {
                sink.changes.compared += 1;
                submission(before, after, worse_by, &mut sink);
            }
            None if unread_now(&before.name) => {
                let text = format!("cannot be audited any more, was {}", before.verdict);
                sink.tell(Way::Worse, ChangeKind::NotAudited, text);
            }
            // An audit that was interrupted does not say that anything is gone.
            None if now.left > 0 => {
                let text = format!(
                    "was not looked at: the audit was interrupted; was {}",
                    before.verdict
                );
                sink.tell(Way::Other, ChangeKind::NotAudited, text);
            }
            None => {
                let text = format!("is not there any more, was {}", before.verdict);
                sink.tell(Way::Worse, ChangeKind::SubmissionVanished, text);
            }
        }
    }
    for before in &earlier.not_audited {
        let there = now.submissions.iter().any(|one| one.name == before.name);
        if !there && !unread_now(&before.name) && now.left == 0 {
            let text = "is not there any more, could not be audited earlier".to_owned();
            Sink::new(&mut changes, &before.name).tell(
                Way::Worse,
                ChangeKind::SubmissionVanished,
                text,
            );
        }
    }
    for after in new {
        if unread_then(&after.name) {
            let text = format!("is audited now, could not be earlier: {}", after.verdict);
            Sink::new(&mut changes, &after.name).tell(Way::Better, ChangeKind::NotAudited, text);
        } else {
            changes.new_submissions.push(after.name.clone());
        }
    }
    let known = |name: &str| earlier.submissions.iter().any(|one| one.name == name);
    let unread = now.not_audited.iter().map(|one| &one.name);
    let new = unread.filter(|name| !known(name) && !unread_then(name));
    changes.new_submissions.extend(new.cloned());
    changes
}

/// Where the changes of one submission go.
struct Sink<'a> {
    changes: &'a mut Changes,
    submission: &'a str,
    file: Option<&'a str>,
}

impl<'a> Sink<'a> {
    fn new(changes: &'a mut Changes, submission: &'a str) -> Sink<'a> {
        Sink {
            changes,
            submission,
            file: None,
        }
    }

    fn tell(&mut self, way: Way, kind: ChangeKind, text: String) {
        self.tell_of(way, kind, None, [None, None], text);
    }

    fn tell_of(
        &mut self,
        way: Way,
        kind: ChangeKind,
        channel: Option<&str>,
        [earlier, now]: [Option<f64>; 2],
        text: String,
    ) {
        let text = match self.file {
            Some(file) => format!("{file}: {text}"),
            None => text,
        };
        let change = Change {
            kind,
            submission: self.submission.to_owned(),
            file: self.file.map(str::to_owned),
            channel: channel.map(str::to_owned),
            earlier,
            now,
            text,
        };
        match way {
            Way::Worse => self.changes.worse.push(change),
            Way::Better => self.changes.better.push(change),
            Way::Other => self.changes.other.push(change),
        }
    }
}

/// Each earlier thing with the one of the same name now, the n-th of a name with the n-th;
/// then those that are new.
fn paired<'a, T>(
    earlier: &'a [T],
    now: &'a [T],
    name: impl Fn(&T) -> String,
) -> (Vec<(&'a T, Option<&'a T>)>, Vec<&'a T>) {
    let mut waiting: BTreeMap<String, VecDeque<usize>> = BTreeMap::new();
    for (index, one) in now.iter().enumerate() {
        waiting.entry(name(one)).or_default().push_back(index);
    }
    let mut taken = vec![false; now.len()];
    let mut pairs = Vec::new();
    for before in earlier {
        let found = waiting.get_mut(&name(before)).and_then(VecDeque::pop_front);
        if let Some(index) = found {
            taken[index] = true;
        }
        pairs.push((before, found.map(|index| &now[index])));
    }
    let new = now.iter().zip(taken).filter(|(_, taken)| !taken);
    (pairs, new.map(|(one, _)| one).collect())
}

fn submission<'a>(
    before: &'a SubmissionReport,
    after: &'a SubmissionReport,
    worse_by: f64,
    sink: &mut Sink<'a>,
) {
    whole_verdict(before, after, sink);
    if before.limits_from != after.limits_from {
        let text = format!(
            "is judged by limits of the {} now, of the {} earlier",
            after.limits_from, before.limits_from
        );
        sink.tell(Way::Other, ChangeKind::Limits, text);
    }
    let of_file = |run: &RunReport| run.file.clone();
    let (runs, new) = paired(&before.runs, &after.runs, of_file);
    let same = same_case(before, after, sink);
    for (then, now) in runs {
        let Some(now) = now else {
            sink.file = Some(&then.file);
            sink.tell(
                Way::Worse,
                ChangeKind::RunVanished,
                "the run is not there any more".to_owned(),
            );
            continue;
        };
        sink.file = Some(&then.file);
        if then.role != now.role {
            let text = format!("is a {} now, a {} earlier", now.role, then.role);
            sink.tell(Way::Other, ChangeKind::Limits, text);
        }
        if same {
            numbers::channels(then, now, worse_by, sink);
        }
    }
    for run in new {
        sink.file = Some(&run.file);
        sink.tell(
            Way::Other,
            ChangeKind::RunAdded,
            "the run is new".to_owned(),
        );
    }
    sink.file = None;
    if same {
        numbers::orders(before, after, sink);
        methods::methods(before, after, sink);
    }
}

/// That both audits are of the same case with the same numbers.
fn same_case(before: &SubmissionReport, after: &SubmissionReport, sink: &mut Sink) -> bool {
    let named = |case: &Option<String>| case.as_deref().unwrap_or("no case").to_owned();
    let what = if before.case != after.case {
        let (now, then) = (named(&after.case), named(&before.case));
        format!("is audited against {now} now, {then} earlier")
    } else if before.parameters != after.parameters {
        "has other parameters of the case than earlier".to_owned()
    } else {
        return true;
    };
    let text = format!("{what}: errors, orders and methods cannot be compared");
    sink.tell(Way::Worse, ChangeKind::Case, text);
    false
}

/// Which way a verdict has gone; a word that is not known goes nowhere.
fn way_of_verdict(before: &str, after: &str) -> Option<Way> {
    let rank = |word: &str| {
        ["pass", "undecided", "fail"]
            .iter()
            .position(|&w| w == word)
    };
    let (before, after) = (rank(before)?, rank(after)?);
    match after.cmp(&before) {
        std::cmp::Ordering::Greater => Some(Way::Worse),
        std::cmp::Ordering::Less => Some(Way::Better),
        std::cmp::Ordering::Equal => None,
    }
}

/// The verdict on a submission. A control is kept because it is wrong: what counts is that
/// it stays so.
fn whole_verdict(before: &SubmissionReport, after: &SubmissionReport, sink: &mut Sink) {
    let is_control = before.expect == after.expect && after.expect != "pass";
    let way = match (before.in_order, after.in_order) {
        (true, false) => Some(Way::Worse),
        (false, true) if before.expect == after.expect => Some(Way::Better),
        _ if is_control => None,
        _ => way_of_verdict(&before.verdict, &after.verdict),
    };
    let Some(way) = way else {
        if before.expect != after.expect {
            // What fails and is said to be meant so is not better for it.
            let text = format!(
                "{} is expected now, {} earlier; the verdict is {}",
                after.expect, before.expect, after.verdict
            );
            sink.tell(Way::Worse, ChangeKind::Verdict, text);
        }
        return;
    };
    let mut text = format!("the verdict is {}, was {}", after.verdict, before.verdict);
    if is_control {
        text += &format!(", {} is expected", after.expect);
    } else if before.expect != after.expect {
        text += &format!(
            "; {} is expected now, {} earlier",
            after.expect, before.expect
        );
    }
    sink.tell(way, ChangeKind::Verdict, text);
}
