//! A first `submission.toml`: what was found as lines, what is a guess as a comment behind
//! them, and what could not be known as lines that are commented out.

use crate::fault::escaped;
use crate::number::{counted, plain, short};
use crate::outcome::{By, Candidate, ColumnGuess, Cover, DraftRun, Drafted, Step};
use crate::submission::ColumnName;

/// Columns of the text.
const WIDTH: usize = 100;

/// The text of the file; `None` where no case is likely.
pub fn draft_toml(drafted: &Drafted) -> Option<String> {
    let best = drafted.candidates.first()?;
    let mut text = remark(
        "Drafted by `stepgauge draft` from what the files show. Lines that end in a comment are \
         guesses: read them, correct them, then delete the comments.",
    );
    text += &case_part(drafted, best);
    text += &unknown_part(best);
    text += &column_part(best);
    text += &layout_part(drafted);
    for run in &drafted.runs {
        text += &run_part(run, best);
    }
    Some(text)
}

fn case_part(drafted: &Drafted, best: &Candidate) -> String {
    let case = toml_literal(&best.case);
    let from = match &drafted.stated {
        Some(_) => "as named with --case".to_owned(),
        None => format!("guessed from {}", grounds(best)),
    };
    let mut text = format!("case = {case}  # {from}\n");
    if best.error.is_some() && !best.fits() {
        text += &remark(&format!(
            "The files do not fit this case: {}. Either the simulator is wrong, or this is another \
             case, or its parameters are others: state those under [parameters].",
            error_text(best.error)
        ));
    }
    if best.is_loose() && drafted.stated.is_none() {
        text += &remark(
            "A loose fit, and no name speaks for it: another model of the same kind can come as \
             near. Do not rely on it.",
        );
    }
    match best.cover {
        Cover::Whole => {}
        Cover::Longer => text += &remark("Rows beyond the end of its window are not compared."),
        Cover::Part => {
            let (from, to) = best.window;
            text += &remark(&format!(
                "The rows do not cover its window, from {} to {} {}: such a run cannot pass.",
                plain(from),
                plain(to),
                best.time_unit
            ));
        }
    }
    let others = drafted.candidates.iter().skip(1).take(drafted.rivals);
    let others: Vec<&Candidate> = others.collect();
    if !others.is_empty() {
        let what = if best.fits() {
            "fit nearly as well, and the files do not tell which is meant"
        } else {
            "go as well with the names, and none fits"
        };
        text += &remark(&format!("Other cases {what}:"));
        for other in others {
            let case = toml_literal(&other.case);
            text += &format!("# case = {case}  # {}\n", error_text(other.error));
        }
    }
    text
}

/// What speaks for a case, in words.
pub(super) fn grounds(candidate: &Candidate) -> String {
    let named = |guess: &&ColumnGuess| matches!(guess.by, By::Name | By::LikeName);
    let names = candidate.channels.iter().filter(named).count() as u64;
    let window = match candidate.cover {
        Cover::Whole => "the window, ",
        Cover::Longer | Cover::Part => "",
    };
    let names = match names {
        0 => String::new(),
        count => format!("{}, ", counted(count, "column name")),
    };
    format!("{names}{window}{}", error_text(candidate.error))
}

/// An error as a share of the peak, in words.
pub(super) fn error_text(error: Option<f64>) -> String {
    match error {
        None => "no error can be computed".to_owned(),
        Some(error) if error <= 10.0 => {
            format!("errors up to {} % of the peak", short(100.0 * error))
        }
        Some(error) => format!("errors up to {} times the peak", short(error)),
    }
}

fn unknown_part(best: &Candidate) -> String {
    let mut text = "\n".to_owned();
    text += &remark("Not to be known from the files: who wrote them.");
    text += "# producer = \"NAME VERSION\"\n\n";
    text += &remark(
        "Nor the method and its order. State only what the producer really claims: it is held \
         against the files. `stepgauge methods` lists the names; the order follows from the method.",
    );
    text += "# [claims]\n# method = \"NAME\"\n# order = 1\n\n";
    let (absolute, relative) = best.limits;
    text += &remark("Nor what error is allowed: until limits are stated, those of the case hold.");
    text += &format!(
        "# [limits]\n# absolute = {}\n# relative = {}\n",
        plain(absolute),
        plain(relative)
    );
    text
}

fn column_part(best: &Candidate) -> String {
    let mut text = "\n[columns]\n".to_owned();
    for guess in std::iter::once(&best.time).chain(&best.channels) {
        text += &column_line(guess);
    }
    for state in &best.missing {
        text += &remark(&format!(
            "State `{}` was not found in the files: it is left out and not compared.",
            escaped(state)
        ));
        text += &format!("# {} = NUMBER\n", key(state));
    }
    if !best.unused.is_empty() {
        let some: Vec<String> = best
            .unused
            .iter()
            .take(8)
            .map(|name| escaped(name))
            .collect();
        let more = best.unused.len().saturating_sub(some.len());
        let more = if more > 0 {
            format!(" and {more} more")
        } else {
            String::new()
        };
        text += &remark(&format!("Not used: {}{more}.", some.join(", ")));
    }
    text
}

fn column_line(guess: &ColumnGuess) -> String {
    let column = match &guess.column {
        ColumnName::Name(name) => toml_literal(name),
        ColumnName::Number(number) => number.to_string(),
    };
    let value = match &guess.unit_guessed {
        Some(unit) => format!("{{ column = {column}, unit = {} }}", toml_literal(unit)),
        None => column,
    };
    let mut text = format!("{} = {value}  # {}\n", key(&guess.channel), reason(guess));
    if let Some(unit) = &guess.fits_in {
        text += &remark(&format!(
            "It would fit in {}, though its header says {}.",
            escaped(unit),
            escaped(guess.unit_of_header.as_deref().unwrap_or("another unit"))
        ));
    }
    if !guess.rivals.is_empty() {
        let rivals: Vec<String> = guess.rivals.iter().map(|rival| escaped(rival)).collect();
        text += &remark(&format!("Fits nearly as well: {}.", rivals.join(", ")));
    }
    text
}

/// Where one line of `[columns]` comes from.
fn reason(guess: &ColumnGuess) -> String {
    let is_time = guess.channel == "time";
    let by = match guess.by {
        By::Name => "the name says so",
        By::LikeName => "guessed from the name",
        By::Fit if is_time => "guessed: it rises over the window",
        By::Fit => "guessed from the fit",
        By::Position if is_time => "guessed: the first column, which rises",
        By::Position => "guessed: there is no other column",
    };
    let unit = match (&guess.unit_guessed, &guess.unit_of_header) {
        (Some(_), _) if is_time => format!(
            "; unit guessed: so the stamps lie over the window, which is in {}",
            escaped(&guess.unit)
        ),
        (Some(_), _) => format!(
            "; unit guessed from the fit, the case has {}",
            escaped(&guess.unit)
        ),
        (None, Some(unit)) => format!("; in {} as the header says", escaped(unit)),
        (None, None) if guess.unit == "1" => String::new(),
        (None, None) => format!("; taken to be in {}", escaped(&guess.unit)),
    };
    let error = match guess.error {
        Some(_) => format!("; {}", error_text(guess.error)),
        None => String::new(),
    };
    format!("{by}{unit}{error}")
}

fn layout_part(drafted: &Drafted) -> String {
    let mut layouts: Vec<&str> = Vec::new();
    for run in &drafted.runs {
        if !layouts.contains(&run.layout.as_str()) {
            layouts.push(&run.layout);
        }
    }
    let mut text = "\n".to_owned();
    text += &remark(&format!(
        "The layout is found from the files ({}) and need not be stated.",
        layouts.join("; ")
    ));
    let mut digits: Vec<&str> = Vec::new();
    for words in drafted.runs.iter().flat_map(|run| &run.digits) {
        if !digits.contains(&words.as_str()) {
            digits.push(words);
        }
    }
    if let Some(open) = drafted.runs.iter().filter_map(|run| run.digits_open).max() {
        text += &remark(&format!(
            "How many digits were printed cannot be told for sure: some numbers have no more than \
             {open} and are taken as written in full. If they were rounded, state it:",
        ));
        text += &format!("# [layout]\n# digits = {open}\n");
    } else if !digits.is_empty() {
        text += &remark(&format!(
            "Values look printed to {}; if that is wrong, state `digits = N` under [layout].",
            digits.join("; ")
        ));
    }
    text
}

fn run_part(run: &DraftRun, best: &Candidate) -> String {
    let mut text = format!("\n[[runs]]\nfile = {}", toml_literal(&run.file));
    let rows = counted(run.rows, "row");
    text += &match &run.worst {
        Some((error, channel)) => {
            format!(
                "  # {rows}, {} (`{}`)\n",
                error_text(Some(*error)),
                escaped(channel)
            )
        }
        None => format!("  # {rows}\n"),
    };
    for fault in &run.faults {
        text += &remark(&format!("As it stands it cannot pass: {}.", escaped(fault)));
    }
    let unit = escaped(&best.time_unit);
    match run.step {
        Step::Read(step) => {
            text += &format!(
                "step = {}  # {unit}: the spacing of the rows; inner steps may be finer\n",
                plain(step)
            );
        }
        Step::Shared(step) => {
            text += &remark(
                "Another run has rows of the same spacing, so the step cannot be read off them. \
                 State what sets the runs apart, the step or the error setting:",
            );
            text += &format!("# step = {}\n# tolerance = 1e-6\n", plain(step));
        }
        Step::Varied => {
            text += &remark(
                "The rows are not evenly spaced, so there is no step to be read off them. Where \
                 the simulator adapts its step, state its error setting:",
            );
            text += "# tolerance = 1e-6\n";
        }
    }
    text
}

/// A paragraph as a comment.
fn remark(text: &str) -> String {
    let mut out = String::new();
    let mut line = "#".to_owned();
    for word in text.split_whitespace() {
        if line.len() > 1 && line.chars().count() + 1 + word.chars().count() > WIDTH {
            out += &line;
            out.push('\n');
            line = "#".to_owned();
        }
        line.push(' ');
        line += word;
    }
    out + &line + "\n"
}

/// A key of TOML: bare where it may be.
fn key(name: &str) -> String {
    let bare = |c: char| c.is_ascii_alphanumeric() || c == '_' || c == '-';
    if !name.is_empty() && name.chars().all(bare) {
        name.to_owned()
    } else {
        toml_literal(name)
    }
}

/// A text of TOML in quotes.
pub fn toml_literal(text: &str) -> String {
    let mut out = "\"".to_owned();
    for c in text.chars() {
        match c {
            '"' => out += "\\\"",
            '\\' => out += "\\\\",
            _ if c.is_control() || escaped(c.encode_utf8(&mut [0; 4])).chars().count() > 1 => {
                out += &format!("\\U{:08X}", u32::from(c));
            }
            _ => out.push(c),
        }
    }
    out.push('"');
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn texts_read_back() {
        for text in [
            "T \"air\" [K]",
            "a\\b",
            "tab\there",
            "\u{202e}turned",
            "\u{b0}C",
        ] {
            let line = format!("x = {}", toml_literal(text));
            let table: toml::Table = toml::from_str(&line).unwrap();
            assert_eq!(table["x"].as_str(), Some(text));
        }
        assert_eq!(key("v_c"), "v_c");
        assert_eq!(key("v c"), "\"v c\"");
    }

    #[test]
    fn remarks_are_comments_to_the_end() {
        let text = remark(&"word ".repeat(60));
        assert!(
            text.lines()
                .all(|l| l.starts_with("# ") && l.chars().count() <= WIDTH)
        );
    }
}
