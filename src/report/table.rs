//! The terminal report of an audit: a row for each submission, then a line for each
//! thing that is not in order.

use std::cmp::Ordering;

use comfy_table::{ColumnConstraint, Table};

use super::changes_text::{changes_text, worse_count};
use super::claims_text::claims_text;
use super::growth_text::{FEW, growth_text};
use super::review_text::{Notes, missing_count, review_text};
use super::style::{Screen, Tone, coloured, toned};
use super::{NOT_FOR_DOSING, SCOPE};
use crate::judge::Verdict;
use crate::number::{counted, measured, plain, short};
use crate::outcome::{Audited, ChannelOutcome, ErrorOutcome, OrderOutcome, Outcome, RunOutcome};
use crate::submission::{Expect, Role, Setting};

/// The report as text with terminal codes for colour; write it to a stream that
/// strips them where they do not belong.
pub fn audit_text(outcome: &Outcome, screen: Screen) -> String {
    let mut text = String::new();
    if !outcome.submissions.is_empty() {
        text += &table(outcome, screen);
    }
    text += &below(outcome, screen);
    coloured(&screen.plain(&text))
}

/// All that stands below the table.
pub(super) fn below(outcome: &Outcome, screen: Screen) -> String {
    let mut text = String::new();
    let troubles = troubles(outcome, screen);
    if !troubles.is_empty() {
        text += &format!("\nNot in order:\n{troubles}");
    }
    let controls = controls(outcome, screen);
    if !controls.is_empty() {
        text += &format!("\nControls, as expected:\n{controls}");
    }
    text += &review_text(outcome, screen);
    let settings = settings(outcome, screen);
    if !settings.is_empty() {
        text += &format!("\nError settings:\n{settings}");
    }
    text += &claims_text(outcome, screen);
    text += &growth_text(outcome, screen);
    let notes = notes(outcome, screen);
    if !notes.is_empty() {
        text += &format!("\nNotes:\n{notes}");
    }
    text += &changes_text(outcome, screen);
    text += &format!("\n{}\n", summary(outcome));
    text += &toned(Tone::Quiet, &screen.wrap(&scope(outcome), 0));
    text.push('\n');
    text
}

fn table(outcome: &Outcome, screen: Screen) -> String {
    let mut table: Option<Table> = None;
    for submission in &outcome.submissions {
        let (run, channel) = decisive(submission);
        let narrow = screen.width < 100;
        let mut cells = cells(submission, run, channel, narrow);
        cells.retain(|cell| cell.from_width <= screen.width);
        let table = table.get_or_insert_with(|| {
            let headings: Vec<&str> = cells.iter().map(|cell| cell.heading).collect();
            let mut table = screen.table(&headings);
            for (index, cell) in cells.iter().enumerate() {
                // What would be torn apart in mid-word keeps its width.
                if let Some(column) = table
                    .column_mut(index)
                    .filter(|_| cell.heading != "producer")
                {
                    column.set_constraint(ColumnConstraint::ContentWidth);
                }
            }
            table
        });
        let longest = usize::from(screen.width) / 4;
        table.add_row(cells.into_iter().map(|cell| match cell.text {
            Text::Own(text) => screen.plain(&text),
            Text::Outside(text) => folded(&screen.clean(&text), longest),
        }));
    }
    let Some(table) = table else {
        return String::new();
    };
    let lines: Vec<String> = table
        .lines()
        .map(|line| line.trim_end().to_owned())
        .collect();
    lines.join("\n") + "\n"
}

/// One cell with its column: the heading (set to the right after `>`), and the width of
/// screen from which on the column is shown.
struct Cell {
    heading: &'static str,
    from_width: u16,
    text: Text,
}

/// Our own text with its tone, or text from outside.
enum Text {
    Own(String),
    Outside(String),
}

/// Long names go over several lines, broken where a name may be.
pub(super) fn folded(text: &str, longest: usize) -> String {
    let mut out = String::new();
    let mut line = String::new();
    for part in text.split_inclusive(['/', '-', '_', ' ']) {
        if !line.is_empty() && line.chars().count() + part.chars().count() > longest {
            out += &line;
            out.push('\n');
            line.clear();
        }
        line += part;
    }
    out + &line
}

/// The run and the channel that stand for a submission.
pub(super) fn decisive(submission: &Audited) -> (Option<&RunOutcome>, Option<&ChannelOutcome>) {
    let runs = submission.runs.iter();
    let results = runs.filter(|run| run.role == Role::Result);
    let channels = results
        .clone()
        .flat_map(|run| run.channels.iter().map(move |c| (run, c)));
    let worst = channels.max_by(|a, b| worse(a.1, b.1));
    let run = worst.map(|(run, _)| run).or_else(|| results.clone().next());
    (run, worst.map(|(_, channel)| channel))
}

/// Which channel of a submission is shown: one that fails before one that is open,
/// then the one that uses most of its limit.
fn badness(channel: &ChannelOutcome) -> (Verdict, f64) {
    let used = channel
        .errors
        .as_ref()
        .map_or(f64::INFINITY, |errors| errors.limit_used);
    (channel.verdict, used)
}

pub(super) fn worse(a: &ChannelOutcome, b: &ChannelOutcome) -> Ordering {
    let ((a, a_used), (b, b_used)) = (badness(a), badness(b));
    a.cmp(&b).then(a_used.total_cmp(&b_used))
}

fn cells(
    submission: &Audited,
    run: Option<&RunOutcome>,
    channel: Option<&ChannelOutcome>,
    narrow: bool,
) -> Vec<Cell> {
    use Text::{Outside, Own};
    let errors = channel.and_then(|channel| channel.errors.as_ref());
    let unit = channel.map_or("", |channel| channel.unit.as_str());
    let cell = |heading, from_width, text| Cell {
        heading,
        from_width,
        text,
    };
    let own = |heading, from_width, text: Option<String>| {
        cell(heading, from_width, Own(text.unwrap_or_default()))
    };
    let outside = |heading, from_width, text: Option<String>| {
        cell(heading, from_width, Outside(text.unwrap_or_default()))
    };
    let used = |channel: &ChannelOutcome| share_text(submission, channel);
    let error = |e: &ErrorOutcome| format!("{} {unit}", measured(e.worst, e.resolution));
    let at = |e: &ErrorOutcome| format!("{} {}", plain(e.at), submission.time_unit);
    vec![
        own("verdict", 0, Some(verdict_text(submission, narrow))),
        outside("submission", 0, Some(submission.name.clone())),
        outside("case", 150, submission.case.clone()),
        outside("producer", 150, submission.producer.clone()),
        outside("run", 110, run.map(|run| run.file.clone())),
        own(">step", 150, run.map(step_text)),
        own(">rows", 150, run.map(|run| run.rows.to_string())),
        outside("channel", 0, channel.map(|channel| channel.name.clone())),
        outside(">worst error", 0, errors.map(error)),
        outside(">at t", 110, errors.map(at)),
        own(">limit used", 0, channel.and_then(used)),
        own("order", 0, Some(order_text(submission))),
        own(">rms error", 190, errors.map(|errors| short(errors.rms))),
    ]
}

/// The share of the limit that a channel uses, where it says something.
pub(super) fn share_text(submission: &Audited, channel: &ChannelOutcome) -> Option<String> {
    let is_faulty = |run: &RunOutcome| run.findings.iter().any(|finding| finding.fatal);
    let faulty = submission.runs.iter().any(is_faulty);
    match channel.verdict {
        // A share that the digits do not support would read like a verdict.
        Verdict::Undecided => Some("open".to_owned()),
        Verdict::Pass if faulty => Some("file fault".to_owned()),
        // It fails by rows without a value, not by its errors.
        Verdict::Fail if channel.errors.as_ref().is_some_and(|errors| !errors.broken) => {
            Some("file fault".to_owned())
        }
        _ => channel
            .errors
            .as_ref()
            .map(|errors| used_text(errors.limit_used)),
    }
}

pub(super) fn step_text(run: &RunOutcome) -> String {
    match (run.setting, run.step) {
        (Setting::Tolerance(tolerance), _) => format!("tol. {}", plain(tolerance)),
        (_, Some(step)) => plain_short(step),
        (_, None) => "varied".to_owned(),
    }
}

/// A step that was read off the stamps carries their rounding: not all its digits.
fn plain_short(value: f64) -> String {
    let full = plain(value);
    if full.len() <= 8 { full } else { short(value) }
}

pub(super) fn verdict_text(submission: &Audited, narrow: bool) -> String {
    let word = submission.verdict.word();
    let loud = word.to_uppercase();
    let (tone, word, remark) = match (submission.in_order(), submission.expect) {
        (true, Expect::Pass) => (Tone::Good, word, ""),
        (true, _) => (Tone::Quiet, word, "as expected"),
        (false, Expect::Pass) if submission.verdict == Verdict::Undecided => (Tone::Open, word, ""),
        (false, Expect::Pass) => (Tone::Bad, loud.as_str(), ""),
        (false, _) => (Tone::Bad, loud.as_str(), "not expected"),
    };
    match remark {
        "" => toned(tone, word),
        // Each line in its own tone: one that runs over a line end would colour the row.
        _ if narrow => {
            format!(
                "{}\n{}",
                toned(tone, &format!("{word},")),
                toned(tone, remark)
            )
        }
        _ => toned(tone, &format!("{word}, {remark}")),
    }
}

pub(super) fn used_text(used: f64) -> String {
    if !used.is_finite() {
        "no limit".to_owned()
    } else if used < 0.001 && used > 0.0 {
        "< 0.1 %".to_owned()
    } else if used < 9.995 {
        format!("{} %", short_percent(100.0 * used))
    } else {
        format!("{} times", short(used))
    }
}

fn short_percent(percent: f64) -> String {
    if percent < 9.95 {
        format!("{percent:.1}")
    } else {
        format!("{percent:.0}")
    }
}

pub(super) fn order_text(submission: &Audited) -> String {
    // The channel that decides: the worst verdict first, else the lowest order.
    let low = |order: &OrderOutcome| order.observed.map_or(f64::INFINITY, |(value, ..)| value);
    let all_undecided = submission.order_verdict == Some(Verdict::Undecided);
    let counts = |order: &&OrderOutcome| all_undecided || order.verdict != Some(Verdict::Undecided);
    let shown = submission.orders.iter().filter(counts);
    let shown = shown.max_by(|a, b| {
        (a.verdict, -low(a))
            .partial_cmp(&(b.verdict, -low(b)))
            .unwrap_or(Ordering::Equal)
    });
    let Some(order) = shown else {
        return String::new();
    };
    let claim = order
        .claimed
        .map_or(String::new(), |claimed| format!(" of {}", plain(claimed)));
    match order.observed {
        Some((value, low, high)) if high - low > 0.3 => {
            format!("{value:.1} ({low:.1} to {high:.1}){claim}")
        }
        // No minus in front of nothing.
        Some((value, ..)) => format!("{:.2}{claim}", (100.0 * value).round() / 100.0 + 0.0),
        None if order
            .note
            .as_deref()
            .is_some_and(|note| note.starts_with("exact")) =>
        {
            "exact".to_owned()
        }
        None => format!("?{claim}"),
    }
}

fn troubles(outcome: &Outcome, screen: Screen) -> String {
    let mut lines = String::new();
    for submission in outcome
        .submissions
        .iter()
        .filter(|submission| !submission.in_order())
    {
        if let Some(missed) = submission.expect.missed() {
            lines += &line(screen, &submission.name, missed);
        }
        lines += &reasons(submission, screen);
    }
    for missing in &outcome.not_audited {
        for fault in &missing.faults {
            let text = format!("not audited: {}", fault.in_one_line());
            lines += &line(screen, &missing.name, &text);
        }
    }
    lines
}

fn controls(outcome: &Outcome, screen: Screen) -> String {
    let kept = |s: &&Audited| s.in_order() && s.expect != Expect::Pass;
    outcome
        .submissions
        .iter()
        .filter(kept)
        .map(|submission| reasons(submission, screen))
        .collect()
}

/// Reasons shown for one submission; a file can have a hundred channels.
const MOST_REASONS: usize = 8;

fn reasons(submission: &Audited, screen: Screen) -> String {
    let mut lines = String::new();
    for reason in submission.reasons.iter().take(MOST_REASONS) {
        // A single file is its own submission: its name need not stand there twice.
        let file = submission.runs.first().map_or("", |run| run.file.as_str());
        lines += &match reason
            .strip_prefix(file)
            .filter(|_| !file.is_empty() && submission.name.ends_with(file))
        {
            Some(rest) => line(screen, "", &format!("{}{rest}", submission.name)),
            None => line(screen, &submission.name, reason),
        };
    }
    if submission.reasons.len() > MOST_REASONS {
        let more = submission.reasons.len() - MOST_REASONS;
        lines += &line(
            screen,
            &submission.name,
            &format!("{more} more; the JSON report has all"),
        );
    }
    for cause in &submission.causes {
        let text = format!("likely cause: {}", cause.text);
        lines += &line(screen, &submission.name, &text);
    }
    if let Some(advice) = submission.advice.as_ref().filter(|_| !lines.is_empty()) {
        lines += &line(screen, &submission.name, &format!("step: {}", advice.text));
    }
    lines
}

/// What ladders of error settings say, where a submission does not pass or few are audited.
fn settings(outcome: &Outcome, screen: Screen) -> String {
    let few = outcome.submissions.len() <= FEW;
    let shown = |s: &&Audited| few || s.verdict != Verdict::Pass;
    let lines = outcome.submissions.iter().filter(shown).flat_map(|s| {
        let settings = s.settings.iter().take(MOST_REASONS);
        settings.map(|settings| line(screen, &s.name, &settings.text))
    });
    lines.collect()
}

/// Notes, each once with the submissions that it holds for.
fn notes(outcome: &Outcome, screen: Screen) -> String {
    let mut notes = Notes::default();
    for submission in &outcome.submissions {
        for text in &submission.notes {
            notes.add(text.clone(), &submission.name);
        }
        notes.terms(submission);
    }
    notes.list(|names, text| line(screen, names, text)).concat()
}

/// One thing to be said, with what it is said of.
pub(super) fn line(screen: Screen, name: &str, text: &str) -> String {
    let text = if name.is_empty() {
        text.to_owned()
    } else {
        format!("{name}: {text}")
    };
    let within = Screen {
        width: screen.width - 2,
        ..screen
    };
    format!("  {}\n", within.wrap(&screen.clean(&text), 4))
}

/// How many submissions there are, by their verdicts.
pub(super) fn counts(outcome: &Outcome) -> String {
    let mut parts = Vec::new();
    for (verdict, word) in [
        (Verdict::Pass, "pass"),
        (Verdict::Fail, "fail"),
        (Verdict::Undecided, "undecided"),
    ] {
        match outcome.count(verdict) {
            0 => {}
            count => parts.push(format!("{count} {word}")),
        }
    }
    if !outcome.not_audited.is_empty() {
        parts.push(format!("{} not audited", outcome.not_audited.len()));
    }
    if outcome.left > 0 {
        parts.push(format!("{} left when interrupted", outcome.left));
    }
    let count = outcome.submissions.len() + outcome.not_audited.len() + outcome.left;
    let mut text = match &outcome.part {
        Some(part) => {
            let all = counted(part.whole.submissions, "submission");
            format!("Part {} of {}, {count} of {all}", part.number, part.of)
        }
        None => counted(count as u64, "submission"),
    };
    if !parts.is_empty() {
        text += &format!(": {}", parts.join(", "));
    }
    text + "."
}

fn summary(outcome: &Outcome) -> String {
    let word = if outcome.in_order() {
        toned(Tone::Good, "All in order.")
    } else {
        toned(Tone::Bad, "Not in order.")
    };
    let mut text = format!("{} {word}", counts(outcome));
    let counts = [missing_count(outcome), worse_count(outcome)];
    for count in counts.into_iter().flatten() {
        text += &format!(" {}", toned(Tone::Bad, &count));
    }
    text
}

pub(super) fn scope(outcome: &Outcome) -> String {
    let drugs = outcome
        .submissions
        .iter()
        .filter_map(|submission| submission.case.as_deref())
        .any(|case| case.starts_with("kinetics/"));
    if drugs {
        format!("{SCOPE} {NOT_FOR_DOSING}")
    } else {
        SCOPE.to_owned()
    }
}
