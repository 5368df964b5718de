//! The Markdown report, for the summary of a pull request: what is not in order first, one
//! table, then the sentences of what is not in order. It is cut with a count where it would
//! be long, since such summaries have a limit.

use super::changes_text::{NOTHING_COMPARED, worse_count};
use super::review_text::{Notes, missing_count, word};
use super::table::{counts, decisive, order_text, scope, share_text};
use super::text::markdown_text;
use crate::number::{counted, measured};
use crate::outcome::{Audited, Change, NotAudited, Outcome, Required};
use crate::submission::Expect;

/// Bytes of a whole report at most, and how far each part may fill it; what follows needs
/// less than is left.
const MOST_BYTES: usize = 60_000;
const TABLE_UP_TO: usize = 28_000;
const REQUIRED_UP_TO: usize = 34_000;
const SENTENCES_UP_TO: usize = 46_000;
const CHANGES_UP_TO: usize = 53_000;
const TERMS_UP_TO: usize = 57_000;
/// Characters of one cell, and of one sentence.
const CELL: usize = 60;
const SENTENCE: usize = 400;
/// Sentences of one submission.
const MOST_REASONS: usize = 8;

/// The report as text.
pub fn audit_markdown(outcome: &Outcome) -> String {
    let mut page = Page::default();
    let word = match (outcome.in_order(), outcome.became_worse()) {
        (true, false) => "all in order",
        (true, true) => "in order, but worse than before",
        (false, _) => "not in order",
    };
    page.text += &format!("## Step audit: {word}\n\n{}", counts(outcome));
    if let Some(worse) = worse_count(outcome) {
        page.text += &format!(" {worse}");
    }
    if let Some(missing) = missing_count(outcome) {
        page.text += &format!(" {missing}");
    }
    page.text.push('\n');
    page.table(outcome);
    page.required(outcome);
    page.sentences(outcome);
    page.changes(outcome);
    page.terms(outcome);
    page.text += &format!("\n{}\n", markdown_text(&scope(outcome), SENTENCE));
    debug_assert!(page.text.len() < MOST_BYTES);
    page.text
}

#[derive(Default)]
struct Page {
    text: String,
}

impl Page {
    /// Adds as many lines as fit, then how many do not.
    fn fill(&mut self, lines: impl Iterator<Item = String>, up_to: usize, what: &str) {
        let mut left_out = 0_u64;
        for line in lines {
            if left_out == 0 && self.text.len() + line.len() <= up_to {
                self.text += &line;
            } else {
                left_out += 1;
            }
        }
        if left_out > 0 {
            self.text +=
                &format!("\n{left_out} more {what} not shown here; the JSON report has all.\n");
        }
    }

    fn table(&mut self, outcome: &Outcome) {
        if outcome.submissions.is_empty() && outcome.not_audited.is_empty() {
            return;
        }
        self.text +=
            "\n| verdict | submission | run | channel | worst error | limit used | order |\n";
        self.text += "| :-- | :-- | :-- | :-- | --: | --: | :-- |\n";
        let missing = outcome.not_audited.iter().map(|missing| {
            let name = &missing.name;
            row(
                ["**not audited**".to_owned(), cell(name)],
                Default::default(),
            )
        });
        let (good, bad): (Vec<&Audited>, Vec<&Audited>) =
            outcome.submissions.iter().partition(|one| one.in_order());
        let audited = bad.into_iter().chain(good).map(submission_row);
        self.fill(missing.chain(audited), TABLE_UP_TO, "rows are");
    }

    /// What is missing first: the rest may be cut.
    fn required(&mut self, outcome: &Outcome) {
        let Some(review) = outcome
            .review
            .as_ref()
            .filter(|one| !one.required.is_empty())
        else {
            return;
        };
        let name = markdown_text(review.require.as_deref().unwrap_or_default(), CELL);
        self.text += &format!("\n### Required by {name}\n\n");
        let (met, missing): (Vec<&Required>, Vec<&Required>) =
            review.required.iter().partition(|one| one.is_met());
        let all = missing.into_iter().chain(met);
        let lines = all.map(|one| sentence(word(one), &one.text));
        self.fill(lines, REQUIRED_UP_TO, "requirements are");
    }

    /// With whose numbers all of it was judged.
    fn terms(&mut self, outcome: &Outcome) {
        let mut notes = Notes::default();
        outcome.submissions.iter().for_each(|one| notes.terms(one));
        let lines = notes.list(|names, text| {
            let (names, text) = (
                markdown_text(names, SENTENCE),
                markdown_text(text, SENTENCE),
            );
            format!("- {names}: {text}\n")
        });
        if !lines.is_empty() {
            self.text += "\n### Terms\n\n";
            self.fill(lines.into_iter(), TERMS_UP_TO, "terms are");
        }
    }

    fn sentences(&mut self, outcome: &Outcome) {
        let missing = outcome.not_audited.iter().flat_map(faults);
        let bad = outcome.submissions.iter().filter(|one| !one.in_order());
        let mut lines = missing.chain(bad.flat_map(reasons)).peekable();
        if lines.peek().is_some() {
            self.text += "\n### Not in order\n\n";
            self.fill(lines, SENTENCES_UP_TO, "sentences are");
        }
    }

    fn changes(&mut self, outcome: &Outcome) {
        let Some(changes) = &outcome.changes else {
            return;
        };
        let name = markdown_text(&changes.earlier, CELL);
        if changes.worse.is_empty() {
            self.text += &format!("\nNothing became worse since {name}.\n");
        }
        let line = |change: &Change| sentence(&change.submission, &change.text);
        let lists = [("Worse", &changes.worse), ("Better", &changes.better)];
        for (word, list) in lists {
            if !list.is_empty() {
                self.text += &format!("\n### {word} than in {name}\n\n");
                self.fill(list.iter().map(line), CHANGES_UP_TO, "changes are");
            }
        }
        if changes.compared == 0 {
            self.text += &format!("\n{}\n", markdown_text(NOTHING_COMPARED, SENTENCE));
        }
        let (other, new) = (
            changes.other.len() as u64,
            changes.new_submissions.len() as u64,
        );
        if other > 0 {
            let things = counted(other, "thing");
            self.text += &format!("\n{things} changed without being worse or better.\n");
        }
        if new > 0 {
            let submissions = counted(new, "submission");
            self.text += &format!("\n{submissions} more than in {name}.\n");
        }
    }
}

fn cell(text: &str) -> String {
    markdown_text(text, CELL)
}

fn row(first: [String; 2], rest: [String; 5]) -> String {
    let cells: Vec<String> = first.into_iter().chain(rest).collect();
    format!("| {} |\n", cells.join(" | "))
}

fn submission_row(submission: &Audited) -> String {
    let (run, channel) = decisive(submission);
    let word = submission.verdict.word();
    let verdict = match (submission.in_order(), submission.expect) {
        (true, Expect::Pass) => word.to_owned(),
        (true, _) => format!("{word}, as expected"),
        (false, Expect::Pass) => format!("**{word}**"),
        (false, _) => format!("**{word}, not expected**"),
    };
    let errors = channel.and_then(|channel| Some((channel, channel.errors.as_ref()?)));
    let error = errors.map(|(channel, errors)| {
        format!(
            "{} {}",
            measured(errors.worst, errors.resolution),
            channel.unit
        )
    });
    let outside = |text: Option<&str>| cell(text.unwrap_or_default());
    row(
        [verdict, cell(&submission.name)],
        [
            outside(run.map(|run| run.file.as_str())),
            outside(channel.map(|channel| channel.name.as_str())),
            outside(error.as_deref()),
            outside(
                channel
                    .and_then(|one| share_text(submission, one))
                    .as_deref(),
            ),
            cell(&order_text(submission)),
        ],
    )
}

fn sentence(name: &str, text: &str) -> String {
    let (name, text) = (markdown_text(name, CELL), markdown_text(text, SENTENCE));
    format!("- {name}: {text}\n")
}

fn faults(missing: &NotAudited) -> Vec<String> {
    let faults = missing.faults.iter().take(MOST_REASONS);
    faults
        .map(|fault| format!("not audited: {}", fault.in_one_line()))
        .map(|text| sentence(&missing.name, &text))
        .collect()
}

fn reasons(submission: &Audited) -> Vec<String> {
    let name = submission.name.as_str();
    let expected = submission.expect.missed().map(str::to_owned);
    let all = submission.reasons.len();
    let reasons = submission.reasons.iter().take(MOST_REASONS).cloned();
    let more = all.checked_sub(MOST_REASONS).filter(|&more| more > 0);
    let more = more.map(|more| format!("{more} more; the JSON report has all"));
    let causes = submission.causes.iter().take(MOST_REASONS);
    let causes = causes.map(|cause| format!("likely cause: {}", cause.text));
    let texts = expected
        .into_iter()
        .chain(reasons)
        .chain(more)
        .chain(causes);
    texts.map(|text| sentence(name, &text)).collect()
}
