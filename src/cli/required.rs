//! What `merge --require` looks for: joined parts, held against a file of rules as the undivided
//! audit would have held them.
//!
//! Limits and refusals hold before a submission is audited, so each part has to be audited by
//! them; no report says what they would have changed. Parts carry a digest of these terms, and
//! `--limits` is among what they share. What is required is read from the joined report alone,
//! so that it may change without another audit.

use std::path::Path;

use super::parts::MergeArguments;
use super::reviewer::Reviewer;
use crate::case::Library;
use crate::fault::{Fault, quoted};
use crate::outcome::Review;
use crate::parts::{Joined, cases, terms};
use crate::report::{restored, review_report};
use crate::submission::Rules;

/// Holds joined parts against the rules that `merge` names.
///
/// # Errors
/// Rules that the parts were audited by and nobody names; rules by which they were not audited;
/// what is wrong with the file.
pub(super) fn require(
    arguments: &MergeArguments,
    library: &Library,
    joined: &mut Joined,
) -> Result<(), Vec<Fault>> {
    let review = joined.report.review.as_ref();
    let Some(path) = &arguments.require else {
        let named = review.and_then(|review| review.require.as_deref());
        return named.map_or(Ok(()), |name| Err(vec![nobody_looked(name)]));
    };
    if cases(library.files()) != joined.whole.cases {
        let text = "the parts were audited with other cases than `merge` has";
        let help = "give `merge` the `--cases` of the parts, with files that have not changed";
        return Err(vec![Fault::new(text).help(help)]);
    }
    let reviewer = Reviewer::of_parts(path, library)?;
    let limits = review.and_then(|review| review.limits.as_deref());
    let known = (joined.whole.terms.as_deref(), limits);
    judged_by(&reviewer, known, path).map_err(|fault| vec![fault.in_file(path)])?;
    let mut outcome = restored(&joined.report).map_err(|fault| vec![fault])?;
    outcome.review = Some(Review {
        require: Some(path.to_string_lossy().into_owned()),
        required: reviewer.required(&outcome),
        ..outcome.review.unwrap_or_default()
    });
    joined.report.review = outcome.review.as_ref().map(review_report);
    joined.report.summary.in_order &= outcome.missing().next().is_none();
    Ok(())
}

fn nobody_looked(name: &str) -> Fault {
    let name = quoted(name);
    let text =
        format!("the parts were audited by {name}, and nobody has looked for what it requires");
    Fault::new(text).help(format!("give `--require` with {name} to `stepgauge merge`"))
}

/// That the undivided audit would have laid down the same for each submission.
fn judged_by(
    reviewer: &Reviewer,
    (of_parts, limits): (Option<&str>, Option<&str>),
    path: &Path,
) -> Result<(), Fault> {
    let none = terms(&Rules::default());
    let text = match (of_parts, limits) {
        (Some(_), _) if of_parts == reviewer.terms() => return Ok(()),
        (Some(_), _) => "lays down other limits or refusals than the parts were audited by",
        // With `--limits` a file that only requires lays nothing down.
        (None, Some(_)) if reviewer.terms() == Some(&none) => return Ok(()),
        (None, Some(_)) => "lays down limits or refusals by which the parts were not audited",
        (None, None) => {
            "the parts were not audited by these rules: limits that submissions state \
                         for themselves counted"
        }
    };
    let path = path.display();
    let help = format!("audit every part with `--require {path}`");
    Err(Fault::new(text).help(help))
}
