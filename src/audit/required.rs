//! What a reviewer requires beside what was found: a requirement is met by one submission that
//! passes, is no control, has the parameters of the case, enough runs and rows, and the right
//! method.

use super::verdict::rung_setting;
use crate::fault::quoted;
use crate::judge::{Support, Verdict};
use crate::method::{Method, find_all};
use crate::number::counted;
use crate::outcome::{Audited, Outcome, Required};
use crate::submission::{Expect, Requirement, Role, Setting};

/// Steps that differ by a smaller factor show nothing of an order: they count once.
const APART: f64 = 1.05;
/// Submissions of the case of which it is told why they do not do.
const MOST_TOLD: usize = 4;

/// What came of each requirement, in their order.
pub fn required(requirements: &[Requirement], outcome: &Outcome) -> Vec<Required> {
    let one = |requirement: &Requirement| {
        let of_case = |audited: &&Audited| audited.case.as_deref() == Some(&*requirement.case);
        let (mut met_by, mut short) = (Vec::new(), Vec::new());
        for audited in outcome.submissions.iter().filter(of_case) {
            match shortcoming(audited, requirement) {
                None => met_by.push(audited.name.clone()),
                Some(why) => short.push(format!("{} {why}", audited.name)),
            }
        }
        Required {
            case: requirement.case.clone(),
            runs: requirement.runs,
            rows: requirement.rows,
            methods: requirement.methods.clone(),
            method_shown: requirement.method_shown,
            text: format!("{}: {}", wanted(requirement), found(&met_by, &short)),
            met_by,
        }
    };
    requirements.iter().map(one).collect()
}

fn wanted(requirement: &Requirement) -> String {
    let mut text = format!("case {}", requirement.case);
    let mut counts = Vec::new();
    if requirement.runs > 1 {
        counts.push(format!("{} runs at different steps", requirement.runs));
    }
    if requirement.rows > 0 {
        let rows = counted(requirement.rows, "row");
        counts.push(format!("{rows} in each result"));
    }
    if !counts.is_empty() {
        text += &format!(" with at least {}", counts.join(" and "));
    }
    match (&requirement.methods[..], requirement.method_shown) {
        ([], false) => {}
        ([], true) => text += " by a method that the rows show",
        (names, shown) => {
            text += &format!(" by {}", names.join(" or "));
            if shown {
                text += ", which the rows show";
            }
        }
    }
    text
}

fn found(met_by: &[String], short: &[String]) -> String {
    match (met_by, short) {
        ([], []) => "no submission is of this case".to_owned(),
        ([], short) => {
            let mut told: Vec<String> = short.iter().take(MOST_TOLD).cloned().collect();
            if short.len() > MOST_TOLD {
                told.push(format!("{} more do not do either", short.len() - MOST_TOLD));
            }
            format!("no submission passes it: {}", told.join("; "))
        }
        (names, _) if names.len() > MOST_TOLD => {
            let more = names.len() - MOST_TOLD;
            format!("met by {} and {more} more", names[..MOST_TOLD].join(", "))
        }
        (names, _) => format!("met by {}", names.join(", ")),
    }
}

/// Why a submission of the case does not do, after its name; `None` where it does.
fn shortcoming(audited: &Audited, requirement: &Requirement) -> Option<String> {
    if audited.expect != Expect::Pass {
        return Some("is marked as a control".to_owned());
    }
    match audited.verdict {
        Verdict::Pass => {}
        Verdict::Fail => return Some("fails".to_owned()),
        Verdict::Undecided => return Some("is undecided".to_owned()),
    }
    if !audited.parameters.is_empty() {
        // With other numbers it is another problem, perhaps an easier one.
        return Some("has parameters of its own".to_owned());
    }
    let rungs = rungs(audited);
    if rungs < requirement.runs {
        return Some(format!("has {} at different steps", counted(rungs, "run")));
    }
    let results = audited.runs.iter().filter(|run| run.role == Role::Result);
    let rows = results.map(|run| run.rows).min().unwrap_or(0);
    if rows < requirement.rows {
        return Some(format!("has a result with {}", counted(rows, "row")));
    }
    if requirement.methods.is_empty() && !requirement.method_shown {
        return None;
    }
    method_shortcoming(audited, requirement)
}

/// The largest number of runs of one kind whose steps, or error settings, are clearly different.
fn rungs(audited: &Audited) -> u64 {
    let adapts = |setting: Setting| matches!(setting, Setting::Tolerance(_));
    let different = |tolerances: bool| {
        let runs = audited.runs.iter();
        let own = runs.filter(|run| adapts(run.setting) == tolerances);
        let mut settings: Vec<f64> = own.filter_map(rung_setting).collect();
        settings.sort_by(f64::total_cmp);
        let (mut count, mut last) = (0, 0.0);
        for setting in settings {
            if setting > APART * last {
                (count, last) = (count + 1, setting);
            }
        }
        count
    };
    // A run whose step nobody knows is one all the same.
    let any = u64::from(!audited.runs.is_empty());
    different(false).max(different(true)).max(any)
}

fn method_shortcoming(audited: &Audited, requirement: &Requirement) -> Option<String> {
    let Some(name) = &audited.claimed_method else {
        return Some("claims no method".to_owned());
    };
    let claimed = find_all(name);
    if claimed.is_empty() {
        // Nobody can hold the rows against it.
        let name = quoted(name);
        return Some(format!("claims {name}, which is not in the catalogue"));
    }
    let wanted: Vec<&Method> = requirement
        .methods
        .iter()
        .flat_map(|name| find_all(name))
        .collect();
    let is_wanted = |one: &&&'static Method| wanted.iter().any(|other| other.name == one.name);
    let others = claimed.iter().filter(|one| !is_wanted(one)).count();
    if !wanted.is_empty() && others == claimed.len() {
        return Some(format!("claims {}", quoted(name)));
    }
    if !wanted.is_empty() && others > 0 {
        let name = quoted(name);
        return Some(format!("claims {name}, which can be another method"));
    }
    let claims = audited.evidence.iter().flat_map(|found| &found.claims);
    let mut of_method = claims.filter(|claim| claim.what == "method");
    let agrees = of_method.any(|claim| claim.support == Support::Agrees);
    if requirement.method_shown && !agrees {
        let name = quoted(name);
        return Some(format!("claims {name}, and its rows cannot tell"));
    }
    None
}
