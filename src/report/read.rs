//! A JSON report back from its text: to the types of the report, or a complaint with its line.

use serde::Deserialize;

use super::wire::{AuditReport, SCHEMA};
use crate::fault::{Fault, Result, quoted};

/// The part of a report that stays whatever else changes.
#[derive(Deserialize)]
struct Head {
    schema: Option<serde_json::Value>,
    submissions: Option<serde::de::IgnoredAny>,
}

const CURE: &str = "give a .json report that `audit --write` of this version wrote";

/// Reads a report.
///
/// # Errors
/// Text that is no JSON, JSON that is no report, fields that are not known, another
/// schema.
pub fn read_report(text: &str) -> Result<AuditReport> {
    let head: Head = serde_json::from_str(text).map_err(|error| match error.is_data() {
        true => Fault::new("this is no report of an audit")
            .help(CURE)
            .at(1, 1),
        false => placed(error),
    })?;
    match head.schema {
        Some(schema) if schema == SCHEMA => {}
        Some(schema) => {
            let shown = quoted(&schema.to_string());
            let text_of = format!("the report has schema {shown}, this version reads {SCHEMA}");
            let fault = Fault::new(text_of).help("write the report anew with this version");
            return Err(fault.at_offset(text, text.find("\"schema\"").unwrap_or(0)));
        }
        None => {
            return Err(Fault::new("this is no report of an audit")
                .help(CURE)
                .at(1, 1));
        }
    }
    if head.submissions.is_none() {
        let fault = Fault::new("this is no report of an audit: it has no submissions");
        return Err(fault.help(CURE).at(1, 1));
    }
    serde_json::from_str(text).map_err(placed)
}

fn placed(error: serde_json::Error) -> Fault {
    let (line, column) = (error.line(), error.column());
    // The reader of JSON ends its texts with the place, which a fault has by itself.
    let text = error.to_string();
    let text = match text.rfind(" at line ") {
        Some(place) => &text[..place],
        None => &text,
    };
    let what = match error.classify() {
        serde_json::error::Category::Data => {
            "this is no report of an audit as this version writes it"
        }
        _ => "this is not JSON",
    };
    let shown = crate::fault::escaped(text);
    let cut: String = shown.chars().take(200).collect();
    Fault::new(format!("{what}: {cut}"))
        .help(CURE)
        .at(line.max(1) as u64, column.max(1) as u64)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_complaint_has_its_line_and_its_cure() {
        for (text, line, said) in [
            ("", 1, "this is not JSON: EOF while parsing a value"),
            ("{\n\"schema\": 1,\n", 3, "this is not JSON"),
            (
                "{\n\"stepgauge\": \"9\",\n\"schema\": 2}",
                3,
                "schema `2`, this version reads 1",
            ),
            ("{}", 1, "this is no report of an audit"),
            ("[]", 1, "no report"),
            ("{\"schema\": 1}", 1, "it has no submissions"),
            (
                "{\"schema\": 1, \"submissions\": [],\n\"more\": 1}",
                2,
                "unknown field `more`",
            ),
        ] {
            let fault = read_report(text).unwrap_err();
            assert_eq!(fault.line, Some(line), "{text}: {fault}");
            assert!(fault.text.contains(said), "{text}: {fault}");
            assert!(fault.help.is_some(), "{text}");
        }
        // Deep nesting is refused, not followed.
        assert!(read_report(&"[".repeat(100_000)).is_err());
    }
}
