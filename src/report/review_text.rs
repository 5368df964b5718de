//! What a reviewer requires and whose terms were used, in words: on the terminal, and the same
//! sentences for other reports.

use super::style::Screen;
use super::table::line;
use crate::fault::escaped;
use crate::number::{counted, plain};
use crate::outcome::{Audited, Outcome, Required};

/// From so many submissions on, what holds for all of them is not said of each by name.
const MANY: usize = 5;

/// The section on what is required, where anything is; else nothing.
pub(super) fn review_text(outcome: &Outcome, screen: Screen) -> String {
    let Some(review) = &outcome.review else {
        return String::new();
    };
    if review.required.is_empty() {
        return String::new();
    }
    let name = screen.plain(&escaped(review.require.as_deref().unwrap_or_default()));
    let mut text = format!("\nRequired by {name}:\n");
    for one in &review.required {
        text += &line(screen, word(one), &one.text);
    }
    text
}

/// Whether it is there.
pub(super) fn word(required: &Required) -> &'static str {
    if required.is_met() {
        "there"
    } else {
        "missing"
    }
}

/// How much is missing, where anything is.
pub(super) fn missing_count(outcome: &Outcome) -> Option<String> {
    match outcome.missing().count() {
        0 => None,
        1 => Some("One requirement is not met.".to_owned()),
        count => Some(format!("{count} requirements are not met.")),
    }
}

/// Parameters that a submission has replaced; `None` where it has the numbers of its case.
pub(super) fn own_parameters(submission: &Audited) -> Option<String> {
    let list = submission.parameters.iter();
    let list: Vec<String> = list
        .map(|(name, value)| format!("{name} = {}", plain(*value)))
        .collect();
    (!list.is_empty()).then(|| list.join(", "))
}

/// Sentences, each once with the submissions that it holds for.
#[derive(Default)]
pub(super) struct Notes<'a> {
    notes: Vec<(String, Vec<&'a str>)>,
    submissions: usize,
}

impl<'a> Notes<'a> {
    pub(super) fn add(&mut self, text: String, name: &'a str) {
        match self.notes.iter_mut().find(|(known, _)| *known == text) {
            Some((_, names)) => names.push(name),
            None => self.notes.push((text, vec![name])),
        }
    }

    /// With which numbers of whom a submission was judged.
    pub(super) fn terms(&mut self, submission: &'a Audited) {
        self.submissions += 1;
        if let Some(list) = own_parameters(submission) {
            let text = format!("parameters of the submission's own: {list}");
            self.add(text, &submission.name);
        }
        if submission.case.is_some() {
            let whose = submission.limits_from.whose();
            self.add(format!("judged by limits of {whose}"), &submission.name);
        }
    }

    /// Each sentence after the names.
    pub(super) fn list(&self, line: impl Fn(&str, &str) -> String) -> Vec<String> {
        let one = |(text, names): &(String, Vec<&str>)| {
            let all = names.len() == self.submissions && names.len() >= MANY;
            match all {
                true => line(
                    &format!("all {}", counted(names.len() as u64, "submission")),
                    text,
                ),
                false => line(&names.join(", "), text),
            }
        };
        self.notes.iter().map(one).collect()
    }
}
