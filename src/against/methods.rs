//! What the rows say of methods and claims, beside what they said earlier.

use std::collections::BTreeSet;

use super::{Sink, Way, paired};
use crate::outcome::ChangeKind;
use crate::report::{ClaimReport, EvidenceReport, SubmissionReport};

/// Methods and claims of a submission.
pub(super) fn methods(before: &SubmissionReport, after: &SubmissionReport, sink: &mut Sink) {
    let (then, now) = match (&before.evidence, &after.evidence) {
        (Some(then), Some(now)) => (then, now),
        (Some(_), None) => {
            let text = "the rows are not asked for their method any more".to_owned();
            sink.tell(Way::Worse, ChangeKind::Method, text);
            return;
        }
        (None, _) => return,
    };
    families(then, now, sink);
    claims(then, now, sink);
}

fn of_method(evidence: &EvidenceReport) -> Option<&str> {
    let claim = evidence.claims.iter().find(|claim| claim.what == "method");
    claim.map(|claim| claim.verdict.as_str())
}

/// The methods that fit. Fewer or more of the same are told by the digits; others than
/// before are another method.
fn families(then: &EvidenceReport, now: &EvidenceReport, sink: &mut Sink) {
    let set = |evidence: &EvidenceReport| -> BTreeSet<String> {
        evidence.families.iter().cloned().collect()
    };
    let (old, new) = (set(then), set(now));
    if old == new || old.is_empty() {
        return;
    }
    let list = |set: &BTreeSet<String>| {
        let few: Vec<&str> = set.iter().take(4).map(String::as_str).collect();
        match set.len() {
            0 => "no method by name".to_owned(),
            count @ 1..=4 => few[..count].join(" or "),
            count => format!("{} or {} more", few.join(" or "), count - 4),
        }
    };
    let mended = of_method(now) == Some("agrees") && of_method(then) != Some("agrees");
    let way = if mended {
        Way::Better
    } else if old.is_disjoint(&new) {
        Way::Worse
    } else {
        Way::Other
    };
    let text = format!("the rows fit {}, fitted {}", list(&new), list(&old));
    sink.tell(way, ChangeKind::Method, text);
}

/// How far the rows stand behind a claim.
fn rank(verdict: &str) -> Option<usize> {
    let words = ["agrees", "cannot tell", "contradicts"];
    words.iter().position(|&word| word == verdict)
}

fn claims(then: &EvidenceReport, now: &EvidenceReport, sink: &mut Sink) {
    // Runs have a step each; there is one method and one order.
    let key = |claim: &ClaimReport| match claim.what.as_str() {
        "step" => format!("step {}", claim.stated),
        what => what.to_owned(),
    };
    let (pairs, new) = paired(&then.claims, &now.claims, key);
    let mut method_is_worse = false;
    for (old, new) in pairs {
        let (what, stated) = (&old.what, &old.stated);
        let Some(new) = new else {
            // The step of a run that is gone went with it; another step of a run that
            // stays shows in the claims that are new.
            if what != "step" {
                let text = format!("claims no {what} any more, claimed {stated}");
                sink.tell(Way::Worse, ChangeKind::Claim, text);
            }
            continue;
        };
        if new.stated != *stated {
            let text = format!("claims the {what} {}, claimed {stated}", new.stated);
            sink.tell(Way::Other, ChangeKind::Claim, text);
        }
        let way = match (rank(&old.verdict), rank(&new.verdict)) {
            (Some(old), Some(new)) if new > old => Way::Worse,
            (Some(old), Some(new)) if new < old => Way::Better,
            _ => continue,
        };
        if what == "method" {
            method_is_worse = way == Way::Worse;
        } else if what == "step" && method_is_worse {
            // Where the method is not believed, no step of it needs a word.
            continue;
        }
        let is = match new.verdict.as_str() {
            "agrees" => "agree with",
            "contradicts" => "contradict",
            _ => "cannot tell of",
        };
        let was = match old.verdict.as_str() {
            "agrees" => "agreed with it",
            "contradicts" => "contradicted it",
            _ => "could not tell",
        };
        let text = format!(
            "the rows {is} the {what} claimed, {}; earlier they {was}; {}",
            new.stated, new.text
        );
        sink.tell(way, ChangeKind::Claim, text);
    }
    for claim in new.iter().filter(|claim| rank(&claim.verdict) == Some(2)) {
        if claim.what == "step" && method_is_worse {
            continue;
        }
        let text = format!(
            "the rows contradict the {} claimed, {}, which is new; {}",
            claim.what, claim.stated, claim.text
        );
        sink.tell(Way::Worse, ChangeKind::Claim, text);
    }
}
