//! Outcomes and cases to bytes: the terminal table, JSON, JUnit XML, Markdown, CSV.
//!
//! A report knows results and cases but no solver; every format takes its numbers
//! from the same outcome.

mod case_json;
mod case_text;
mod changes_text;
mod check_text;
mod claims_text;
mod csv_errors;
mod csv_values;
mod draft_text;
mod draft_toml;
mod growth_text;
mod html;
mod json;
mod junit;
mod markdown;
mod merged_text;
mod method_text;
mod plot;
mod polynomial;
mod read;
mod restored;
mod review_text;
mod steps_csv;
mod steps_text;
mod style;
mod table;
mod text;
mod wire;
mod write;

pub use case_json::case_json;
pub use case_text::{case_list, case_text};
pub use check_text::{ChannelCheck, check_text};
pub use csv_errors::{CSV_HEADER, audit_csv};
pub use csv_values::ValueWriter;
pub use draft_text::draft_text;
pub use draft_toml::{draft_toml, toml_literal};
pub use html::audit_html;
pub use json::{audit_json, audit_report, changes_report, report_json, review_report};
pub use junit::audit_junit;
pub use markdown::audit_markdown;
pub use merged_text::merged_text;
pub use method_text::{method_list, method_text};
pub use read::read_report;
pub use restored::restored;
pub use steps_csv::steps_csv;
pub use steps_text::steps_text;
pub use style::{Screen, WIDEST};
pub use table::audit_text;
pub use wire::*;
pub use write::{write_atomically, write_new};

/// What every report says of a pass.
pub const SCOPE: &str = "A pass covers the linear case that was run, in its window, within its limit. \
It is no approval of a simulator for other models or for any use in which people can be hurt.";

/// What is added where a drug case is among them.
pub const NOT_FOR_DOSING: &str = "The kinetics cases are not for dosing.";
