//! Cases for reading: the library as a table, one case in full.

use super::NOT_FOR_DOSING;
use super::style::{Screen, WIDE, coloured};
use crate::case::{Case, Shape};
use crate::number::{plain, short};
use crate::outcome::CaseFacts;

/// All cases as a table.
pub fn case_list(cases: &[Case], screen: Screen) -> String {
    let wide = screen.width >= WIDE;
    let mut headings = vec!["case", ">states", "inputs", "title"];
    if wide {
        headings.extend(["closed form", "hard for"]);
    }
    let mut table = screen.table(&headings);
    for case in cases {
        let mut shapes: Vec<&str> = case.inputs.iter().map(|input| input.shape.name()).collect();
        shapes.dedup();
        let mut cells = vec![
            case.name.clone(),
            case.states.len().to_string(),
            shapes.join(", "),
            case.title.clone(),
        ];
        if wide {
            cells.push(
                if case.closed_form.is_some() {
                    "yes"
                } else {
                    "no"
                }
                .to_owned(),
            );
            cells.push(case.hard_for.join(", "));
        }
        table.add_row(cells.iter().map(|cell| screen.clean(cell)));
    }
    let lines: Vec<String> = table
        .lines()
        .map(|line| line.trim_end().to_owned())
        .collect();
    let count = format!(
        "\n{} cases; `stepgauge case NAME` shows one in full\n",
        cases.len()
    );
    coloured(&(lines.join("\n") + "\n" + &count))
}

/// One case in full: equations, numbers, inputs, exact solution, and what a simulator
/// must write.
pub fn case_text(case: &Case, facts: &CaseFacts, screen: Screen) -> String {
    let mut text = String::new();
    let mut put = |line: &str| {
        text += &screen.clean(line);
        text.push('\n');
    };
    put(&format!("{}: {}", case.name, case.title));
    for paragraph in [&case.about, &format!("Source: {}", case.source)] {
        put("");
        screen.wrap(paragraph, 0).lines().for_each(&mut put);
    }
    put("");
    put("Parameters");
    for parameter in &case.parameters {
        let replaced = case.replaced.contains(&parameter.name);
        let mark = if replaced { "  (replaced)" } else { "" };
        put(&format!(
            "  {} = {} {}{mark}",
            parameter.name,
            plain(parameter.value.to_f64()),
            parameter.unit
        ));
    }
    put("");
    let time = &case.time;
    put(&format!(
        "Window: t from {} to {} {}",
        plain(time.from.to_f64()),
        plain(time.to.to_f64()),
        time.unit
    ));
    put("");
    put("States");
    for state in &case.states {
        put(&format!(
            "  {}({}) = {} {}",
            state.name,
            plain(time.from.to_f64()),
            plain(state.start.to_f64()),
            state.unit
        ));
        put(&format!(
            "  d {}/dt = {}",
            state.name,
            squeezed(&state.rate_text)
        ));
        if let Some(exact) = &state.exact_text {
            put(&format!("  {}(t) = {}", state.name, squeezed(exact)));
        }
    }
    if !case.inputs.is_empty() {
        put("");
        put("Inputs");
    }
    for input in &case.inputs {
        put(&format!(
            "  {} in {}: {}, {}",
            input.name,
            input.unit,
            input.shape.name(),
            numbers(&input.shape)
        ));
    }
    if !case.outputs.is_empty() {
        put("");
        put("Outputs");
    }
    for output in &case.outputs {
        put(&format!(
            "  {} in {} = {}",
            output.name,
            output.unit,
            squeezed(&output.value_text)
        ));
    }
    put("");
    solution(case, facts).iter().for_each(|line| put(line));
    put("");
    put("A simulator writes");
    let names: Vec<&str> = case
        .states
        .iter()
        .map(|state| state.name.as_str())
        .collect();
    let rows = [
        format!(
            "  columns t,{} with every row from t = {} to t = {}",
            names.join(","),
            plain(time.from.to_f64()),
            plain(time.to.to_f64())
        ),
        format!(
            "  limit: {} + {} * |exact| unless a submission or the command line sets one",
            plain(case.limits.absolute),
            plain(case.limits.relative)
        ),
    ];
    rows.iter().for_each(|row| put(row));
    if case.field == "kinetics" {
        put("");
        put(NOT_FOR_DOSING);
    }
    coloured(&text)
}

fn solution(case: &Case, facts: &CaseFacts) -> Vec<String> {
    let mut lines = vec!["Exact solution".to_owned()];
    lines.push(match facts.closed_form_gap {
        // Formulas are taken as double-double: about 1e-30 of the peak is their limit.
        Some(gap) if gap < 1e-29 => {
            "  closed form as above; exp(M t) gives the same to 29 digits of the peak".to_owned()
        }
        Some(gap) => format!(
            "  closed form as above; exp(M t) gives the same to {} of the peak",
            short(gap)
        ),
        None => "  by exp(M t) of states and inputs together; no closed form is stated".to_owned(),
    });
    let jumps = &facts.jumps;
    let first: Vec<String> = jumps.iter().take(6).map(|&jump| plain(jump)).collect();
    match jumps.len() {
        0 => lines.push("  no jumps of an input within the window".to_owned()),
        count if count > 6 => lines.push(format!(
            "  inputs jump {count} times: at {}, ...",
            first.join(", ")
        )),
        _ => lines.push(format!("  inputs jump at {}", first.join(", "))),
    }
    if let Some(constant) = facts.shortest_time_constant {
        lines.push(format!(
            "  shortest time constant {} {}",
            short(constant),
            case.time.unit
        ));
    }
    if let Some(period) = facts.shortest_period {
        lines.push(format!(
            "  shortest period {} {}",
            short(period),
            case.time.unit
        ));
    }
    lines
}

fn numbers(shape: &Shape) -> String {
    let show = |(key, values): &(&str, Vec<f64>)| {
        let shown: Vec<String> = values.iter().take(12).map(|&value| plain(value)).collect();
        let more = if values.len() > 12 { ", ..." } else { "" };
        match values.len() {
            1 => format!("{key} {}", shown[0]),
            _ => format!("{key} [{}{more}]", shown.join(", ")),
        }
    };
    shape
        .numbers()
        .iter()
        .map(show)
        .collect::<Vec<_>>()
        .join(", ")
}

/// Formulas may stand over several lines in the file.
fn squeezed(text: &str) -> String {
    text.split_whitespace().collect::<Vec<_>>().join(" ")
}
