//! What a look at files found, for reading: cases by likelihood, what is unsure, what could
//! not be known.

use comfy_table::ColumnConstraint;

use super::draft_toml::{error_text, grounds};
use super::style::{Screen, Tone, coloured, toned};
use crate::fault::escaped;
use crate::number::{counted, plain, short};
use crate::outcome::{By, Candidate, ColumnGuess, Cover, Drafted, NO_FIT, Step};
use crate::submission::ColumnName;

/// Columns of a file that are named.
const MOST_COLUMNS: usize = 12;

/// The outcome as text with terminal codes for colour; `written` is the file that was
/// written, if any was.
pub fn draft_text(drafted: &Drafted, written: Option<&str>, screen: Screen) -> String {
    let mut text = looked_at(drafted, screen);
    if drafted.candidates.is_empty() {
        text += &nothing(drafted, screen);
        return coloured(&screen.plain(&text));
    }
    text.push('\n');
    text += &table(drafted, screen);
    let notes = notes(drafted);
    if !notes.is_empty() {
        text += "\nUnsure:\n";
        text += &list(&notes, screen);
    }
    text += "\nCould not be known from the files:\n";
    text += &list(&unknown(drafted), screen);
    if let Some(file) = written {
        let said = format!("Written: {file}; read it, correct it, then `stepgauge audit {file}`");
        text += &format!("\n{}\n", screen.wrap(&screen.clean(&said), 2));
    }
    coloured(&screen.plain(&text))
}

fn looked_at(drafted: &Drafted, screen: Screen) -> String {
    let cases = match &drafted.stated {
        Some(case) => format!("case `{}`", case.name),
        None => counted(drafted.cases_tried as u64, "case"),
    };
    let files = counted(drafted.runs.len() as u64, "file");
    let mut columns: Vec<&str> = drafted.columns.iter().map(String::as_str).collect();
    if columns.len() > MOST_COLUMNS {
        columns.truncate(MOST_COLUMNS);
        columns.push("...");
    }
    let text = format!(
        "Looked at {files} and {cases}; columns: {}",
        columns.join(", ")
    );
    format!("{}\n", screen.wrap(&screen.clean(&text), 2))
}

fn table(drafted: &Drafted, screen: Screen) -> String {
    let mut table = screen.table(&["", "case", "columns", ">worst error", "window"]);
    for index in [0, 1, 3] {
        if let Some(column) = table.column_mut(index) {
            column.set_constraint(ColumnConstraint::ContentWidth);
        }
    }
    for (place, candidate) in drafted.candidates.iter().enumerate() {
        let near = place > 0 && place <= drafted.rivals;
        let mark = match (place, near) {
            (0, _) => toned(Tone::Good, "written"),
            (_, true) => toned(Tone::Open, "as likely"),
            _ => toned(Tone::Quiet, "less likely"),
        };
        table.add_row([
            mark,
            screen.clean(&candidate.case),
            columns_cell(candidate),
            error_cell(candidate),
            window_cell(candidate),
        ]);
    }
    let lines = table.lines().map(|line| format!("{}\n", line.trim_end()));
    lines.collect::<String>() + &quiet("worst error: share of the channel's peak", screen)
}

fn quiet(text: &str, screen: Screen) -> String {
    format!("{}\n", toned(Tone::Quiet, &screen.wrap(text, 2)))
}

/// How many channels were found, and by what.
fn columns_cell(candidate: &Candidate) -> String {
    let states = candidate.states - candidate.missing.len();
    let mut parts = vec![format!("{states} of {} states", candidate.states)];
    match candidate.channels.iter().filter(|c| !c.is_state).count() {
        0 => {}
        count => parts.push(counted(count as u64, "output")),
    }
    let by = |wanted: &[By]| candidate.channels.iter().any(|c| wanted.contains(&c.by));
    let ways = [
        (by(&[By::Name]), "name"),
        (by(&[By::LikeName]), "like name"),
        (by(&[By::Fit]), "fit"),
        (by(&[By::Position]), "place"),
    ];
    let ways: Vec<&str> = ways.iter().filter(|way| way.0).map(|way| way.1).collect();
    format!("{} by {}", parts.join(", "), ways.join(" and "))
}

fn error_cell(candidate: &Candidate) -> String {
    match candidate.error {
        None => "-".to_owned(),
        Some(error) if error > 10.0 => format!("{} times", short(error)),
        Some(error) => format!("{} %", short(100.0 * error)),
    }
}

fn window_cell(candidate: &Candidate) -> String {
    let unit = match &candidate.time.unit_guessed {
        Some(unit) => format!(", t in {unit}"),
        None => String::new(),
    };
    let cover = match candidate.cover {
        Cover::Whole => "covered",
        Cover::Longer => "covered, rows beyond",
        Cover::Part => "not covered",
    };
    format!("{cover}{unit}")
}

fn list(notes: &[String], screen: Screen) -> String {
    let within = Screen {
        width: screen.width - 2,
        ..screen
    };
    let line = |note: &String| format!("  {}\n", within.wrap(&screen.clean(note), 4));
    notes.iter().map(line).collect()
}

/// What is a guess beyond names that are the same.
fn notes(drafted: &Drafted) -> Vec<String> {
    let Some(best) = drafted.candidates.first() else {
        return Vec::new();
    };
    let mut notes = Vec::new();
    if drafted.stated.is_none() {
        let what = format!("case: guessed from {}", grounds(best));
        notes.push(match drafted.rivals {
            0 => what,
            count => {
                let count = counted(count as u64, "other case");
                format!("{what}; {count} as likely, `--case NAME` settles it")
            }
        });
    }
    if best.is_loose() && drafted.stated.is_none() {
        notes.push(
            "a loose fit, and no name speaks for it: another model of the same kind can come as \
             near; name the case with `--case NAME`"
                .to_owned(),
        );
    }
    if !best.fits() {
        notes.push(format!(
            "the files do not fit the case ({}): the simulator is wrong, or it is another case, \
             or one with other parameters",
            error_text(best.error)
        ));
    }
    notes.extend(
        std::iter::once(&best.time)
            .chain(&best.channels)
            .filter_map(column_note),
    );
    if !best.missing.is_empty() {
        notes.push(format!(
            "not found and left out: {}",
            best.missing.join(", ")
        ));
    }
    for run in &drafted.runs {
        let faults = run
            .faults
            .iter()
            .map(|fault| format!("{}: {fault}", run.file));
        notes.extend(faults);
    }
    notes
}

fn column_note(guess: &ColumnGuess) -> Option<String> {
    let column = match &guess.column {
        ColumnName::Name(name) => format!("`{}`", escaped(name)),
        ColumnName::Number(number) => format!("column {number}"),
    };
    let mut parts = Vec::new();
    match guess.by {
        By::Name => {}
        By::LikeName => parts.push("guessed from a name that is alike".to_owned()),
        By::Fit if guess.channel == "time" => parts.push("guessed, as it rises".to_owned()),
        By::Fit => parts.push(format!("guessed from the fit: {}", error_text(guess.error))),
        By::Position => parts.push("guessed from its place".to_owned()),
    }
    if let Some(unit) = &guess.unit_guessed {
        parts.push(format!(
            "unit guessed to be {unit}, in the case it is {}",
            guess.unit
        ));
    }
    if let Some(unit) = &guess.fits_in {
        parts.push(format!(
            "would fit in {unit}, though its header says otherwise"
        ));
    }
    if !guess.rivals.is_empty() {
        parts.push(format!("fits nearly as well: {}", guess.rivals.join(", ")));
    }
    (!parts.is_empty()).then(|| format!("{} = {column}: {}", guess.channel, parts.join("; ")))
}

fn unknown(drafted: &Drafted) -> Vec<String> {
    let mut unknown = vec![
        "the producer, its method and the order it claims".to_owned(),
        "the limits: those of the case hold until others are stated".to_owned(),
    ];
    let open = drafted.runs.iter().filter_map(|run| run.digits_open).max();
    if let Some(open) = open {
        unknown.push(format!(
            "whether values were rounded to {open} digits or written in full"
        ));
    }
    let any = |test: &dyn Fn(Step) -> bool| drafted.runs.iter().any(|run| test(run.step));
    if any(&|step| matches!(step, Step::Read(_))) {
        unknown.push("whether inner steps are finer than the rows".to_owned());
    }
    if any(&|step| matches!(step, Step::Shared(_))) {
        unknown.push("the steps of runs whose rows have the same spacing".to_owned());
    }
    if any(&|step| step == Step::Varied) {
        unknown.push("step or error setting of runs whose rows are not evenly spaced".to_owned());
    }
    unknown
}

/// No case is likely: what is missing, and how to go on.
fn nothing(drafted: &Drafted, screen: Screen) -> String {
    let mut lines = Vec::new();
    let stamps = drafted.runs.first().map_or((0.0, 0.0), |run| run.stamps);
    let span = format!("from {} to {}", plain(stamps.0), plain(stamps.1));
    match &drafted.stated {
        Some(case) => {
            let why = match drafted.no_window {
                true => format!("the time stamps, {span}, do not lie over its window in any unit"),
                false => format!(
                    "no column has the name of a channel, and none fits one within {} % of its peak",
                    plain(100.0 * NO_FIT)
                ),
            };
            lines.push(format!("{why}; nothing is written"));
            let states: Vec<String> = case
                .states
                .iter()
                .map(|(name, unit)| format!("{name} ({unit})"))
                .collect();
            lines.push(format!("the case has the states {}", states.join(", ")));
            lines.push(format!(
                "to go on, write submission.toml by hand: `case = \"{}\"`, `[[runs]]` with `file = \
                 \"...\"`, and under `[columns]` a line for time and each state, as in `{} = NUMBER`",
                case.name,
                case.states.first().map_or("x", |(name, _)| name.as_str())
            ));
        }
        None => {
            let why = match drafted.no_window {
                true => format!(
                    "no case has a window that the time stamps, {span}, cover in any unit of time"
                ),
                false => format!(
                    "no case has its states under these names in this window, and none fits \
                     within {} % of the peak",
                    plain(100.0 * NO_FIT)
                ),
            };
            lines.push(format!("{why}; nothing is written"));
            lines.push(
                "to go on, name the case with `--case NAME` (`stepgauge cases` lists them), or add \
                 one of your own with `--cases DIR`"
                    .to_owned(),
            );
        }
    }
    format!(
        "\nWhich case it is could not be known:\n{}",
        list(&lines, screen)
    )
}
