//! The `submission.toml` of a case that was run: what the plan states and the runs that
//! belong together, so that `audit` finds the same again.

use super::plan::{Chosen, DrivePlan};
use super::runs::{TRAJECTORY, run_name};
use crate::number::plain;
use crate::report::toml_literal;
use crate::submission::{ColumnName, LimitStated};

/// The text of the file for these steps.
pub(super) fn submission_toml(plan: &DrivePlan, chosen: &Chosen, steps: &[f64]) -> String {
    let terms = &chosen.terms;
    let mut text = String::from("# Written by `stepgauge drive`.\n");
    text += &line("case", Some(toml_literal(&chosen.case.name)));
    text += &line("producer", plan.producer.as_deref().map(toml_literal));
    let claims = [
        line("method", terms.claims.method.as_deref().map(toml_literal)),
        line("order", terms.claims.order.map(plain)),
    ];
    text += &table("claims", claims.concat());
    let limits = &terms.limits;
    let mut lines = limit_parts(&limits.general)
        .map(|(key, value)| line(key, value))
        .concat();
    lines += &line("order_slack", limits.order_slack.map(plain));
    for (channel, limit) in &limits.channels {
        lines += &line(&toml_literal(channel), Some(inline(limit_parts(limit))));
    }
    text += &table("limits", lines);
    let mut lines = String::new();
    for (channel, stated) in &terms.columns {
        let column = stated.column.as_ref().map(column);
        let parts = [
            ("column", column),
            ("unit", stated.unit.as_deref().map(toml_literal)),
        ];
        lines += &line(&toml_literal(channel), Some(inline(parts)));
    }
    text += &table("columns", lines);
    let layout = &terms.layout;
    let decimal = layout
        .decimal_comma
        .map(|comma| toml_literal(if comma { "," } else { "." }));
    let long = layout.long.as_ref().map(|long| {
        let [name, value] = [&long.name, &long.value].map(|name| Some(column(name)));
        inline([("name", name), ("value", value)])
    });
    let lines = [
        line(
            "separator",
            layout
                .separator
                .map(|separator| toml_literal(separator.word())),
        ),
        line("decimal", decimal),
        line("comment", layout.comment.as_deref().map(toml_literal)),
        line(
            "skip_lines",
            layout.skip_lines.map(|count| count.to_string()),
        ),
        line("digits", layout.digits.map(|count| count.to_string())),
        line("long", long),
    ];
    text += &table("layout", lines.concat());
    for &step in steps {
        let file = format!("{}/{TRAJECTORY}", run_name(step));
        text += &format!(
            "\n[[runs]]\nfile = {}\nstep = {}\n",
            toml_literal(&file),
            plain(step)
        );
    }
    text
}

fn column(column: &ColumnName) -> String {
    match column {
        ColumnName::Name(name) => toml_literal(name),
        ColumnName::Number(number) => number.to_string(),
    }
}

fn limit_parts(limit: &LimitStated) -> [(&'static str, Option<String>); 3] {
    let relative_to = limit
        .of_peak
        .map(|peak| toml_literal(if peak { "peak" } else { "value" }));
    [
        ("absolute", limit.absolute.map(plain)),
        ("relative", limit.relative.map(plain)),
        ("relative_to", relative_to),
    ]
}

fn line(key: &str, value: Option<String>) -> String {
    value.map_or_else(String::new, |value| format!("{key} = {value}\n"))
}

fn table(name: &str, lines: String) -> String {
    if lines.is_empty() {
        lines
    } else {
        format!("\n[{name}]\n{lines}")
    }
}

fn inline<const N: usize>(parts: [(&str, Option<String>); N]) -> String {
    let parts = parts.into_iter();
    let stated: Vec<String> = parts
        .filter_map(|(key, value)| Some(format!("{key} = {}", value?)))
        .collect();
    format!("{{ {} }}", stated.join(", "))
}
