//! Which step a case needs, for reading: the answer, error against step, jumps.

use comfy_table::ColumnConstraint;

use super::style::{Screen, Tone, coloured, toned};
use super::table::used_text;
use crate::case::Case;
use crate::number::{plain, short};
use crate::outcome::{LargestStep, MethodSteps, OnJumps, Rule, StepRun, StepsOutcome};

/// The outcome as text with terminal codes for colour.
pub fn steps_text(case: &Case, outcome: &StepsOutcome, screen: Screen) -> String {
    let mut text = format!(
        "{}\n{}\n",
        screen.clean(&format!("{}: {}", case.name, case.title)),
        screen.wrap(&screen.clean(&question(case, outcome)), 0)
    );
    let unit = screen.clean(&case.time.unit);
    text += &format!("\nLargest step that keeps the limit, in {unit}\n");
    text += &answers(outcome, screen);
    for note in notes(case, outcome) {
        text += &paragraph(&note, screen);
    }
    text += &format!("\nError against step, in {unit}: share of the limit\n");
    text += &ladder(outcome, screen);
    text += &paragraph(
        "in brackets: beyond the stability limit; `-`: cannot be run, or needs more steps than \
         are run",
        screen,
    );
    if !outcome.jumps.times.is_empty() {
        text += &jumps(case, outcome, screen);
    }
    coloured(&screen.plain(&text))
}

fn question(case: &Case, outcome: &StepsOutcome) -> String {
    let time = &case.time;
    let mut text = format!(
        "t from {} to {} {}",
        plain(time.from.to_f64()),
        plain(time.to.to_f64()),
        time.unit
    );
    let rule = |absolute: f64, relative: f64| {
        format!("{} + {} * |exact|", plain(absolute), plain(relative))
    };
    match outcome.limits.split_first() {
        None => text += "; no channel has a limit",
        Some((first, rest)) => {
            let same = |other: &crate::outcome::ChannelLimit| {
                (other.absolute, other.relative) == (first.absolute, first.relative)
            };
            if rest.iter().all(same) {
                text += &format!("; limit: {}", rule(first.absolute, first.relative));
            } else {
                for limit in &outcome.limits {
                    let rule = rule(limit.absolute, limit.relative);
                    text += &format!("; limit of {}: {rule}", limit.channel);
                }
            }
        }
    }
    text
}

fn answers(outcome: &StepsOutcome, screen: Screen) -> String {
    let scales = [
        (">per time constant", outcome.shortest_time_constant),
        (">per period", outcome.shortest_period),
    ];
    let scales: Vec<(&str, f64)> = scales
        .into_iter()
        .filter_map(|(heading, scale)| Some((heading, scale?)))
        .collect();
    let with_jumps = !outcome.jumps.times.is_empty();
    let mut headings = vec![
        "method",
        ">order",
        ">step",
        ">steps",
        ">stable up to",
        "ruled by",
    ];
    headings.extend(scales.iter().map(|(heading, _)| *heading));
    headings.extend(with_jumps.then_some(">jumps missed"));
    let mut table = screen.table(&headings);
    for index in 0..headings.len().min(6) {
        // Names and numbers are not torn apart; the other headings go over two lines.
        if let Some(column) = table.column_mut(index) {
            column.set_constraint(ColumnConstraint::ContentWidth);
        }
    }
    for method in &outcome.methods {
        let largest = &method.largest;
        let kept = largest.kept.as_ref();
        let mut cells = vec![
            method.name.clone(),
            method.order.to_string(),
            step_cell(kept),
            kept.map_or(format!("over {}", largest.most_steps), |k| {
                k.steps.to_string()
            }),
            stable_cell(largest),
            rule_cell(largest.ruled_by).to_owned(),
        ];
        let per = |scale: f64| kept.map_or("-".to_owned(), |k| short(scale / k.step));
        cells.extend(scales.iter().map(|&(_, scale)| per(scale)));
        let count = outcome.jumps.times.len();
        cells.extend(with_jumps.then(|| {
            kept.map_or("-".to_owned(), |_| {
                format!("{} of {count}", method.jumps_missed)
            })
        }));
        table.add_row(cells);
    }
    drawn(&table)
}

fn step_cell(run: Option<&StepRun>) -> String {
    run.map_or("none".to_owned(), |run| rounded_down(run.step))
}

fn stable_cell(largest: &LargestStep) -> String {
    match largest.approx_stable {
        None => "any step".to_owned(),
        Some(0.0) => "no step".to_owned(),
        Some(step) => rounded_down(step),
    }
}

fn rule_cell(rule: Option<Rule>) -> &'static str {
    match rule {
        Some(Rule::Accuracy) => "accuracy",
        Some(Rule::Stability) => "stability",
        Some(Rule::Neither) => "neither",
        None => "-",
    }
}

fn notes(case: &Case, outcome: &StepsOutcome) -> Vec<String> {
    let mut notes = Vec::new();
    let methods = || outcome.methods.iter();
    let names = |which: &dyn Fn(&MethodSteps) -> bool| {
        let names: Vec<&str> = methods()
            .filter(|m| which(m))
            .map(|m| m.name.as_str())
            .collect();
        names.join(", ")
    };
    let failed = |m: &MethodSteps| m.largest.kept.is_none();
    let mut bounds: Vec<u64> = methods()
        .filter(|m| failed(m))
        .map(|m| m.largest.most_steps)
        .collect();
    bounds.sort_unstable();
    bounds.dedup();
    for most in bounds {
        let length = (case.time.to - case.time.from).to_f64();
        notes.push(format!(
            "{}: {most} steps, one every {} {}, do not keep the limit; more are not run",
            names(&|m| failed(m) && m.largest.most_steps == most),
            short(length / most as f64),
            case.time.unit
        ));
    }
    let better = names(&|m| {
        let longest = |run: Option<&StepRun>| run.map_or(0.0, |run| run.step);
        let own = m.on_jumps.as_ref().and_then(|answer| answer.own.as_ref());
        longest(own) > 2.0 * longest(m.largest.kept.as_ref())
    });
    if !better.is_empty() {
        notes.push(format!(
            "{better}: far longer steps keep the limit where they hit the jumps, see below"
        ));
    }
    let neither = names(&|m| m.largest.ruled_by == Some(Rule::Neither));
    if !neither.is_empty() {
        notes.push(format!(
            "{neither}: {} steps keep the limit, and the case asks for as many",
            outcome.fewest_steps
        ));
    }
    let beyond = names(&|m| m.largest.kept.as_ref().is_some_and(|kept| !kept.stable));
    if !beyond.is_empty() {
        notes.push(format!(
            "{beyond}: the step that keeps the limit is not a stable one; what grows stays small \
             within this window, and would not in a longer one"
        ));
    }
    let started = names(&|m| m.start_values > 1);
    if !started.is_empty() {
        notes.push(format!("{started}: started from exact values"));
    }
    let ordered = names(&|m| m.name.starts_with("semi-implicit"));
    if !ordered.is_empty() {
        notes.push(format!(
            "{ordered}: states are moved in the order of the case"
        ));
    }
    notes
}

fn ladder(outcome: &StepsOutcome, screen: Screen) -> String {
    // More methods than fit beside each other stand below.
    let fit = (usize::from(screen.width).saturating_sub(18) / 16).max(1);
    let mut parts = Vec::new();
    for from in (0..outcome.methods.len()).step_by(fit) {
        let methods = &outcome.methods[from..(from + fit).min(outcome.methods.len())];
        let mut headings = vec![">step".to_owned(), ">steps".to_owned()];
        headings.extend(methods.iter().map(|method| format!(">{}", method.name)));
        let headings: Vec<&str> = headings.iter().map(String::as_str).collect();
        let mut table = screen.table(&headings);
        for (row, &(step, steps)) in outcome.grids.iter().enumerate() {
            let mut cells = vec![rounded_down(step), steps.to_string()];
            cells.extend(methods.iter().map(|method| {
                let run = method.ladder.get(row);
                run.and_then(Option::as_ref)
                    .map_or("-".to_owned(), error_cell)
            }));
            table.add_row(cells);
        }
        parts.push(drawn(&table));
    }
    parts.join("\n")
}

fn error_cell(run: &StepRun) -> String {
    let overflown = run.channels.iter().any(|c| c.worst.is_infinite());
    let text = if overflown {
        "overflow".to_owned()
    } else {
        used_text(run.limit_used())
    };
    let text = if run.stable {
        text
    } else {
        format!("({text})")
    };
    if run.keeps() {
        toned(Tone::Good, &text)
    } else {
        text
    }
}

fn jumps(case: &Case, outcome: &StepsOutcome, screen: Screen) -> String {
    let jumps = &outcome.jumps;
    let unit = &case.time.unit;
    let some: Vec<String> = jumps.times.iter().take(6).map(|&t| plain(t)).collect();
    let more = if jumps.times.len() > 6 { ", ..." } else { "" };
    let count = match jumps.times.len() {
        1 => "once".to_owned(),
        count => format!("{count} times"),
    };
    let mut text = format!(
        "Inputs jump or bend {count}, at t = {}{more} {unit}. ",
        some.join(", ")
    );
    text += &match (jumps.common, jumps.common_with_end) {
        (_, Some(both)) => format!(
            "Steps that hit every one and the end of the window: {} {unit} divided by a whole \
             number.",
            plain(both)
        ),
        (Some(common), None) => format!(
            "Steps that hit every one: {} {unit} divided by a whole number; no step that could \
             be run hits the end of the window as well.",
            plain(common)
        ),
        (None, _) => "No step that could be run hits every one: their times have no such common \
                      divisor."
            .to_owned(),
    };
    let mut out = format!("\nJumps\n{}", paragraph(&text, screen));
    let answers: Vec<(&MethodSteps, &OnJumps)> = outcome
        .methods
        .iter()
        .filter_map(|method| Some((method, method.on_jumps.as_ref()?)))
        .collect();
    if answers.is_empty() {
        return out;
    }
    out += &paragraph(
        "Largest of these steps that keeps the limit, by how a program reads an input at the \
         instant of a jump: as `t >= at` (as in the tables above), where the step before the jump \
         may already see the new value; or each step with the value that holds within it.",
        screen,
    );
    let mut table = screen.table(&["method", ">t >= at", ">steps", ">value within", ">steps"]);
    for (method, answer) in answers {
        let steps = |run: &Option<StepRun>| {
            run.as_ref()
                .map_or("-".to_owned(), |run| run.steps.to_string())
        };
        table.add_row([
            method.name.clone(),
            step_cell(answer.after.as_ref()),
            steps(&answer.after),
            step_cell(answer.own.as_ref()),
            steps(&answer.own),
        ]);
    }
    out + &drawn(&table)
}

fn paragraph(text: &str, screen: Screen) -> String {
    let within = Screen {
        width: screen.width - 2,
        ..screen
    };
    format!("  {}\n", within.wrap(&screen.clean(text), 2))
}

fn drawn(table: &comfy_table::Table) -> String {
    table
        .lines()
        .map(|line| format!("{}\n", line.trim_end()))
        .collect()
}

/// A step with all its digits where these are few, else with four, and never longer than
/// it is: a limit that it just keeps would be broken.
fn rounded_down(step: f64) -> String {
    let full = plain(step);
    if full.len() <= 7 {
        return full;
    }
    let unit = 10f64.powf(step.log10().floor() - 3.0);
    let (digits, exponent) = ((step / unit).floor(), unit.log10().round());
    let text = format!("{digits}e{exponent}");
    text.parse::<f64>().map_or(text, plain)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn steps_are_never_rounded_up() {
        assert_eq!(rounded_down(12.299_97), "12.29");
        assert_eq!(rounded_down(0.072), "0.072");
        assert_eq!(rounded_down(14_400.0 / 7.0), "2057");
        assert_eq!(rounded_down(1.0 / 3e6), "3.333e-7");
        assert_eq!(rounded_down(1e-5), "1e-5");
        assert_eq!(rounded_down(123_456_789.0), "1.234e8");
    }
}
