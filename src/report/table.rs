//! The terminal report of an audit: a row for each submission, then a line for each
//! thing that is not in order.

use super::style::{Screen, Tone, WIDE, coloured, toned};
use super::{NOT_FOR_DOSING, SCOPE};
use crate::judge::Verdict;
use crate::number::{measured, plain, short};
use crate::outcome::{Audited, ChannelOutcome, LimitsFrom, OrderOutcome, Outcome, RunOutcome};
use crate::submission::{Expect, Role, Setting};

/// The report as text with terminal codes for colour; write it to a stream that
/// strips them where they do not belong.
pub fn audit_text(outcome: &Outcome, screen: Screen) -> String {
    let mut text = String::new();
    if !outcome.submissions.is_empty() {
        text += &table(outcome, screen);
    }
    let troubles = troubles(outcome, screen);
    if !troubles.is_empty() {
        text += &format!("\nNot in order:\n{troubles}");
    }
    let controls = controls(outcome, screen);
    if !controls.is_empty() {
        text += &format!("\nControls, wrong on purpose:\n{controls}");
    }
    let notes = notes(outcome, screen);
    if !notes.is_empty() {
        text += &format!("\nNotes:\n{notes}");
    }
    text += &format!("\n{}\n", summary(outcome));
    text += &toned(Tone::Quiet, &screen.wrap(&scope(outcome), 0));
    text.push('\n');
    coloured(&screen.plain(&text))
}

fn table(outcome: &Outcome, screen: Screen) -> String {
    let wide = screen.width >= WIDE;
    let mut headings = vec![
        "verdict",
        "submission",
        "run",
        "channel",
        ">error",
        ">limit used",
        "order",
    ];
    if wide {
        headings.splice(2..2, ["case", "producer"]);
        headings.insert(5, ">step");
        headings.insert(6, ">rows");
        headings.extend([">rms error", ">worst at"]);
    }
    let mut table = screen.table(&headings);
    for submission in &outcome.submissions {
        let runs = submission
            .runs
            .iter()
            .filter(|run| run.role == Role::Result);
        let worst = runs
            .clone()
            .flat_map(|run| run.channels.iter().map(move |c| (run, c)));
        let worst = worst.max_by(|a, b| badness(a.1).total_cmp(&badness(b.1)));
        let run = worst.map(|(run, _)| run).or_else(|| runs.clone().next());
        let row = row(submission, run, worst.map(|(_, channel)| channel), wide);
        table.add_row(row.into_iter().map(|cell| cell_text(screen, cell)));
    }
    let lines: Vec<String> = table
        .lines()
        .map(|line| line.trim_end().to_owned())
        .collect();
    lines.join("\n") + "\n"
}

/// A cell: our own text with its tone, or text from outside.
enum Cell {
    Own(String),
    Outside(String),
}

fn cell_text(screen: Screen, cell: Cell) -> String {
    match cell {
        Cell::Own(text) => screen.plain(&text),
        Cell::Outside(text) => screen.clean(&text),
    }
}

/// Which channel of a submission is shown: one that fails before one that is open,
/// then the one that uses most of its limit.
fn badness(channel: &ChannelOutcome) -> f64 {
    let rank = match channel.verdict {
        Verdict::Fail => 2e300,
        Verdict::Undecided => 1e300,
        Verdict::Pass => 0.0,
    };
    rank + channel
        .errors
        .as_ref()
        .map_or(1e299, |errors| errors.limit_used.min(1e299))
}

fn row(
    submission: &Audited,
    run: Option<&RunOutcome>,
    channel: Option<&ChannelOutcome>,
    wide: bool,
) -> Vec<Cell> {
    use Cell::{Outside, Own};
    let errors = channel.and_then(|channel| channel.errors.as_ref());
    let unit = channel.map_or("", |channel| channel.unit.as_str());
    let file = run.map_or(String::new(), |run| run.file.clone());
    let mut cells = vec![
        Own(verdict_text(submission)),
        Outside(submission.name.clone()),
        Outside(file),
        Outside(channel.map_or(String::new(), |channel| channel.name.clone())),
        Outside(errors.map_or(String::new(), |errors| {
            format!("{} {unit}", measured(errors.worst, errors.resolution))
        })),
        Own(errors.map_or(String::new(), |errors| used_text(errors.limit_used))),
        Own(order_text(submission)),
    ];
    if wide {
        let producer = submission.producer.clone().unwrap_or_default();
        cells.splice(2..2, [Outside(submission.case.clone()), Outside(producer)]);
        let step = run.map_or(String::new(), step_text);
        cells.insert(5, Own(step));
        cells.insert(
            6,
            Own(run.map_or(String::new(), |run| run.rows.to_string())),
        );
        cells.push(Own(errors.map_or(String::new(), |errors| short(errors.rms))));
        let at = |at: f64| format!("{} {}", plain(at), submission.time_unit);
        cells.push(Outside(
            errors.map_or(String::new(), |errors| at(errors.at)),
        ));
    }
    cells
}

fn step_text(run: &RunOutcome) -> String {
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

fn verdict_text(submission: &Audited) -> String {
    let word = submission.verdict.word();
    match (submission.in_order(), submission.expect) {
        (true, Expect::Pass) => toned(Tone::Good, word),
        (true, _) => toned(Tone::Quiet, &format!("{word}, as expected")),
        (false, Expect::Pass) if submission.verdict == Verdict::Undecided => {
            toned(Tone::Open, word)
        }
        (false, Expect::Pass) => toned(Tone::Bad, &word.to_uppercase()),
        (false, _) => toned(
            Tone::Bad,
            &format!("{}, against expectation", word.to_uppercase()),
        ),
    }
}

fn used_text(used: f64) -> String {
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

fn order_text(submission: &Audited) -> String {
    // The channel that decides: the worst verdict first, else the lowest order.
    let low = |order: &OrderOutcome| order.observed.map_or(f64::INFINITY, |(value, ..)| value);
    let all_undecided = submission.order_verdict == Some(Verdict::Undecided);
    let counts = |order: &&OrderOutcome| all_undecided || order.verdict != Some(Verdict::Undecided);
    let shown = submission.orders.iter().filter(counts);
    let shown = shown.max_by(|a, b| {
        (a.verdict, -low(a))
            .partial_cmp(&(b.verdict, -low(b)))
            .unwrap_or(std::cmp::Ordering::Equal)
    });
    let Some(order) = shown else {
        return String::new();
    };
    let claim = order
        .claimed
        .map_or(String::new(), |claimed| format!(" of {}", plain(claimed)));
    match order.observed {
        Some((value, ..)) => format!("{value:.2}{claim}"),
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
        if submission.reasons.is_empty() {
            let expected = match submission.expect {
                Expect::Fail => "fail",
                Expect::Undecided => "stay undecided",
                Expect::Pass => "pass",
            };
            let text = format!(
                "was expected to {expected}, but is {}",
                submission.verdict.word()
            );
            lines += &line(screen, &submission.name, &text);
        }
        for reason in &submission.reasons {
            lines += &line(screen, &submission.name, reason);
        }
    }
    for missing in &outcome.not_audited {
        for fault in &missing.faults {
            let text = format!(
                "not audited: {}",
                fault.to_string().replace("\n  help:", "; help:")
            );
            lines += &line(screen, &missing.name, &text);
        }
    }
    lines
}

fn controls(outcome: &Outcome, screen: Screen) -> String {
    let kept = |s: &&Audited| s.in_order() && s.expect != Expect::Pass;
    let reasons = outcome.submissions.iter().filter(kept).map(|submission| {
        let reason = submission.reasons.first().map_or("", String::as_str);
        line(screen, &submission.name, reason)
    });
    reasons.collect()
}

fn notes(outcome: &Outcome, screen: Screen) -> String {
    let mut lines = String::new();
    for submission in &outcome.submissions {
        for note in &submission.notes {
            lines += &line(screen, &submission.name, note);
        }
        if !submission.parameters.is_empty() {
            let list: Vec<String> = submission
                .parameters
                .iter()
                .map(|(name, value)| format!("{name} = {}", plain(*value)))
                .collect();
            let text = format!(
                "the submission has parameters of its own: {}",
                list.join(", ")
            );
            lines += &line(screen, &submission.name, &text);
        }
        if submission.limits_from == LimitsFrom::Submission {
            lines += &line(screen, &submission.name, "judged by limits of its own");
        }
    }
    lines
}

fn line(screen: Screen, name: &str, text: &str) -> String {
    format!(
        "  {}\n",
        screen.wrap(&screen.clean(&format!("{name}: {text}")), 6)
    )
}

fn summary(outcome: &Outcome) -> String {
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
    let word = if outcome.in_order() {
        toned(Tone::Good, "All in order.")
    } else {
        toned(Tone::Bad, "Not in order.")
    };
    let count = outcome.submissions.len() + outcome.not_audited.len();
    format!("{count} submission(s): {}. {word}", parts.join(", "))
}

fn scope(outcome: &Outcome) -> String {
    let drugs = outcome
        .submissions
        .iter()
        .any(|s| s.case.starts_with("kinetics/"));
    if drugs {
        format!("{SCOPE} {NOT_FOR_DOSING}")
    } else {
        SCOPE.to_owned()
    }
}
