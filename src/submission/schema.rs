//! The shape of `submission.toml`. Unknown keys are refused; places are kept, so that
//! a complaint can point at the line.

use std::collections::BTreeMap;
use std::fmt;
use std::path::Path;

use serde::de::value::MapAccessDeserializer;
use serde::de::{self, Deserialize, Deserializer, MapAccess, Visitor};
use toml::Spanned;

use super::{
    Claims, ColumnName, ColumnStated, Expect, LimitStated, LimitsStated, Role, Run, Setting,
    Submission, confined,
};
use crate::fault::{Fault, in_plain_words, quoted};
use crate::trajectory::{Separator, Stated};

/// Largest `submission.toml` that is read.
pub const MOST_SUBMISSION_BYTES: u64 = 1 << 20;
/// Most keys of one table.
const MOST_KEYS: usize = 600;
/// Most runs of one submission.
pub const MOST_RUNS: usize = 1000;

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct SubmissionFile {
    case: Option<Spanned<String>>,
    producer: Option<String>,
    expect: Option<Spanned<String>>,
    #[serde(default)]
    parameters: BTreeMap<Spanned<String>, Spanned<f64>>,
    claims: Option<ClaimsEntry>,
    #[serde(default)]
    limits: BTreeMap<Spanned<String>, Spanned<LimitEntry>>,
    #[serde(default)]
    columns: BTreeMap<Spanned<String>, ColumnEntry>,
    layout: Option<LayoutEntry>,
    #[serde(default)]
    runs: Vec<Spanned<RunEntry>>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct ClaimsEntry {
    method: Option<String>,
    order: Option<Spanned<f64>>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct LayoutEntry {
    separator: Option<Spanned<String>>,
    decimal: Option<Spanned<String>>,
    comment: Option<Spanned<String>>,
    skip_lines: Option<u64>,
    digits: Option<Spanned<u8>>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct RunEntry {
    file: Spanned<String>,
    step: Option<Spanned<f64>>,
    tolerance: Option<Spanned<f64>>,
    cost: Option<Spanned<f64>>,
    role: Option<Spanned<String>>,
}

/// A number or word for all channels, or a table for one.
enum LimitEntry {
    Number(f64),
    Word(String),
    Channel(ChannelLimits),
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct ChannelLimits {
    absolute: Option<f64>,
    relative: Option<f64>,
    relative_to: Option<String>,
}

/// A table, or in short the column alone.
struct ColumnEntry(ColumnStated);

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct ColumnTable {
    column: Option<ColumnKey>,
    unit: Option<String>,
}

struct ColumnKey(ColumnName);

/// Accepts a number, a text or a table, whatever of these the type allows.
struct Either<T>(fn(f64) -> Option<T>, fn(String) -> Option<T>, &'static str);

impl<'de, T: FromTable> Visitor<'de> for Either<T> {
    type Value = T;
    fn expecting(&self, f: &mut fmt::Formatter) -> fmt::Result {
        f.write_str(self.2)
    }
    fn visit_i64<E: de::Error>(self, value: i64) -> Result<T, E> {
        self.visit_f64(value as f64)
    }
    fn visit_f64<E: de::Error>(self, value: f64) -> Result<T, E> {
        (self.0)(value).ok_or_else(|| E::invalid_value(de::Unexpected::Float(value), &self))
    }
    fn visit_str<E: de::Error>(self, value: &str) -> Result<T, E> {
        (self.1)(value.to_owned())
            .ok_or_else(|| E::invalid_value(de::Unexpected::Str(value), &self))
    }
    fn visit_map<A: MapAccess<'de>>(self, map: A) -> Result<T, A::Error> {
        T::from_table(MapAccessDeserializer::new(map))
    }
}

/// What a table of TOML stands for, where a type also has a short form.
trait FromTable: Sized {
    fn from_table<'de, D: Deserializer<'de>>(table: D) -> Result<Self, D::Error>;
}

impl FromTable for LimitEntry {
    fn from_table<'de, D: Deserializer<'de>>(table: D) -> Result<Self, D::Error> {
        ChannelLimits::deserialize(table).map(LimitEntry::Channel)
    }
}

impl FromTable for ColumnEntry {
    fn from_table<'de, D: Deserializer<'de>>(table: D) -> Result<Self, D::Error> {
        let ColumnTable { column, unit } = ColumnTable::deserialize(table)?;
        Ok(ColumnEntry(ColumnStated {
            column: column.map(|key| key.0),
            unit,
            place: None,
        }))
    }
}

impl FromTable for ColumnKey {
    fn from_table<'de, D: Deserializer<'de>>(_: D) -> Result<Self, D::Error> {
        Err(de::Error::custom("a column is a name or a number from 1"))
    }
}

fn column_number(value: f64) -> Option<ColumnName> {
    let whole = value.fract() == 0.0 && (1.0..1e6).contains(&value);
    whole.then_some(ColumnName::Number(value as usize))
}

impl<'de> Deserialize<'de> for LimitEntry {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let number = |value| Some(LimitEntry::Number(value));
        let word = |text| Some(LimitEntry::Word(text));
        deserializer.deserialize_any(Either(number, word, "a number or a table of limits"))
    }
}

impl<'de> Deserialize<'de> for ColumnEntry {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        fn short(column: ColumnName) -> ColumnEntry {
            ColumnEntry(ColumnStated {
                column: Some(column),
                unit: None,
                place: None,
            })
        }
        let number = |value| column_number(value).map(short);
        let name = |text| Some(short(ColumnName::Name(text)));
        let expected = "a column by name or number from 1, or a table";
        deserializer.deserialize_any(Either(number, name, expected))
    }
}

impl<'de> Deserialize<'de> for ColumnKey {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let number = |value| column_number(value).map(ColumnKey);
        let name = |text| Some(ColumnKey(ColumnName::Name(text)));
        deserializer.deserialize_any(Either(number, name, "a column by name or number from 1"))
    }
}

/// Collects complaints about one file.
struct Reader<'a> {
    text: &'a str,
    folder: &'a Path,
    faults: Vec<Fault>,
}

impl Submission {
    /// Reads a submission that lies in `folder`.
    ///
    /// # Errors
    /// All complaints about the file, in order of their places.
    pub fn parse(text: &str, folder: &Path) -> Result<Submission, Vec<Fault>> {
        let file: SubmissionFile = toml::from_str(text).map_err(|error| {
            let offset = error.span().map_or(0, |span| span.start);
            vec![Fault::new(in_plain_words(error.message())).at_offset(text, offset)]
        })?;
        let mut reader = Reader {
            text,
            folder,
            faults: Vec::new(),
        };
        let submission = reader.read(file);
        let mut faults = reader.faults;
        if faults.is_empty() {
            return Ok(submission);
        }
        faults.sort_by_key(|fault| (fault.line, fault.column));
        Err(faults)
    }
}

impl Reader<'_> {
    fn complain(&mut self, text: impl Into<String>, offset: usize) {
        self.faults
            .push(Fault::new(text).at_offset(self.text, offset));
    }

    fn read(&mut self, file: SubmissionFile) -> Submission {
        for (what, count) in [
            ("parameters", file.parameters.len()),
            ("limits", file.limits.len()),
            ("columns", file.columns.len()),
        ] {
            if count > MOST_KEYS {
                let text = format!("[{what}] has {count} keys, at most {MOST_KEYS} are read");
                self.faults.push(Fault::new(text));
                return Submission::default();
            }
        }
        let expect = self.one_of(
            file.expect,
            "expect",
            &[
                ("pass", Expect::Pass),
                ("fail", Expect::Fail),
                ("undecided", Expect::Undecided),
            ],
        );
        let mut places = BTreeMap::new();
        let mut parameters = BTreeMap::new();
        for (name, value) in file.parameters {
            if !value.get_ref().is_finite() {
                self.complain("this is not a finite number", value.span().start);
            }
            places.insert(format!("parameters.{}", name.get_ref()), self.place(&name));
            parameters.insert(name.into_inner(), value.into_inner());
        }
        let claims = file.claims.map_or_else(Claims::default, |claims| {
            let order = claims.order.map(|order| {
                if !(*order.get_ref() > 0.0 && *order.get_ref() <= 20.0) {
                    self.complain(
                        "`order` must lie above 0 and not above 20",
                        order.span().start,
                    );
                }
                order.into_inner()
            });
            Claims {
                method: claims.method,
                order,
            }
        });
        for name in file.limits.keys() {
            places.insert(format!("limits.{}", name.get_ref()), self.place(name));
        }
        let limits = self.limits(file.limits);
        let mut columns = BTreeMap::new();
        for (name, entry) in file.columns {
            let place = Some(self.place(&name));
            columns.insert(name.into_inner(), ColumnStated { place, ..entry.0 });
        }
        let case = file.case.map(|case| {
            places.insert("case".to_owned(), self.place(&case));
            case.into_inner()
        });
        let layout = file
            .layout
            .map_or_else(Stated::default, |layout| self.layout(layout));
        if file.runs.is_empty() {
            let fault = Fault::new("the submission has no runs");
            self.faults
                .push(fault.help("add `[[runs]]` with `file = \"...\"`"));
        }
        if file.runs.len() > MOST_RUNS {
            self.faults
                .push(Fault::new(format!("at most {MOST_RUNS} runs are read")));
            return Submission::default();
        }
        let runs: Vec<Run> = file
            .runs
            .into_iter()
            .filter_map(|run| self.run(run))
            .collect();
        self.refuse_twins(&runs);
        Submission {
            case,
            producer: file.producer,
            expect: expect.unwrap_or_default(),
            parameters,
            claims,
            limits,
            columns,
            layout,
            runs,
            places,
        }
    }

    fn place<T>(&self, key: &Spanned<T>) -> (u64, u64) {
        let placed = Fault::new("").at_offset(self.text, key.span().start);
        (placed.line.unwrap_or(1), placed.column.unwrap_or(1))
    }

    /// The same file under two steps would show any order.
    fn refuse_twins(&mut self, runs: &[Run]) {
        let mut seen = std::collections::BTreeSet::new();
        for run in runs {
            let path = run.path.canonicalize().unwrap_or_else(|_| run.path.clone());
            if !seen.insert(path) {
                self.faults.push(Fault::new(format!(
                    "file {} is named twice",
                    quoted(&run.file)
                )));
            }
        }
    }

    /// A word out of a short list.
    fn one_of<T: Copy>(
        &mut self,
        word: Option<Spanned<String>>,
        key: &str,
        known: &[(&str, T)],
    ) -> Option<T> {
        let word = word?;
        let found = known.iter().find(|(name, _)| name == word.get_ref());
        if found.is_none() {
            let names: Vec<String> = known
                .iter()
                .map(|(name, _)| format!("\"{name}\""))
                .collect();
            let text = format!(
                "`{key}` is {}, expected {}",
                quoted(word.get_ref()),
                names.join(" or ")
            );
            self.complain(text, word.span().start);
        }
        found.map(|&(_, value)| value)
    }

    fn limits(&mut self, entries: BTreeMap<Spanned<String>, Spanned<LimitEntry>>) -> LimitsStated {
        let mut limits = LimitsStated::default();
        for (name, entry) in entries {
            let offset = entry.span().start;
            match (name.get_ref().as_str(), entry.into_inner()) {
                ("absolute", LimitEntry::Number(value)) => {
                    limits.general.absolute = self.limit(value, offset);
                }
                ("relative", LimitEntry::Number(value)) => {
                    limits.general.relative = self.limit(value, offset);
                }
                ("order_slack", LimitEntry::Number(value)) => {
                    if value > 1.0 {
                        self.complain("`order_slack` must not be above 1", offset);
                    }
                    limits.order_slack = self.limit(value, offset);
                }
                ("relative_to", LimitEntry::Word(word)) => {
                    limits.general.of_peak = self.relative_to(&word, offset);
                }
                (channel, LimitEntry::Channel(entry)) => {
                    let stated = LimitStated {
                        absolute: entry.absolute.and_then(|value| self.limit(value, offset)),
                        relative: entry.relative.and_then(|value| self.limit(value, offset)),
                        of_peak: entry.relative_to.and_then(|w| self.relative_to(&w, offset)),
                    };
                    limits.channels.insert(channel.to_owned(), stated);
                }
                (
                    key @ ("absolute" | "relative" | "order_slack" | "relative_to"),
                    LimitEntry::Number(_) | LimitEntry::Word(_),
                ) => {
                    let expected = if key == "relative_to" {
                        "a word"
                    } else {
                        "a number"
                    };
                    self.complain(format!("`{key}` must be {expected}"), offset);
                }
                (other, _) => {
                    let fault = Fault::new(format!("{} is no limit", quoted(other)));
                    let help = "a limit is `absolute`, `relative`, `relative_to`, `order_slack`, \
                                or a table for one channel";
                    self.faults
                        .push(fault.help(help).at_offset(self.text, name.span().start));
                }
            }
        }
        limits
    }

    fn limit(&mut self, value: f64, offset: usize) -> Option<f64> {
        if !(value >= 0.0 && value.is_finite()) {
            self.complain("a limit must be finite and not below zero", offset);
        }
        Some(value)
    }

    fn relative_to(&mut self, word: &str, offset: usize) -> Option<bool> {
        match word {
            "peak" => Some(true),
            "value" => Some(false),
            _ => {
                let text = format!(
                    "`relative_to` is {}, expected \"peak\" or \"value\"",
                    quoted(word)
                );
                self.complain(text, offset);
                None
            }
        }
    }

    fn layout(&mut self, entry: LayoutEntry) -> Stated {
        use Separator::{Blank, Comma, Semicolon, Tab};
        let separators = [Comma, Semicolon, Tab, Blank].map(|s| (s.word(), s));
        let decimal_place = entry
            .decimal
            .as_ref()
            .map_or(0, |decimal| decimal.span().start);
        let separator = self.one_of(entry.separator, "separator", &separators);
        let decimal_comma = self.one_of(entry.decimal, "decimal", &[(".", false), (",", true)]);
        if separator == Some(Comma) && decimal_comma == Some(true) {
            self.complain(
                "a comma cannot be both separator and decimal sign",
                decimal_place,
            );
        }
        let comment = entry.comment.map(|comment| {
            let first = comment.get_ref().trim_start().chars().next();
            if first.is_none_or(|c| c.is_ascii_digit() || matches!(c, '+' | '-' | '.')) {
                // Such a sign could hide rows of numbers.
                let text = "`comment` must not be empty or begin like a number";
                self.complain(text, comment.span().start);
            }
            comment.into_inner()
        });
        let digits = entry.digits.map(|digits| {
            if !(1..=17).contains(digits.get_ref()) {
                self.complain("`digits` must lie between 1 and 17", digits.span().start);
            }
            digits.into_inner()
        });
        Stated {
            separator,
            decimal_comma,
            comment,
            skip_lines: entry.skip_lines,
            digits,
        }
    }

    fn run(&mut self, entry: Spanned<RunEntry>) -> Option<Run> {
        let offset = entry.span().start;
        let entry = entry.into_inner();
        for value in [&entry.step, &entry.tolerance, &entry.cost]
            .into_iter()
            .flatten()
        {
            if !(*value.get_ref() > 0.0 && value.get_ref().is_finite()) {
                let text = "`step`, `tolerance` and `cost` must be finite and above zero";
                self.complain(text, value.span().start);
            }
        }
        let number = |value: Option<Spanned<f64>>| value.map(Spanned::into_inner);
        let cost = number(entry.cost);
        let setting = match (number(entry.step), number(entry.tolerance)) {
            (Some(_), Some(_)) => {
                self.complain("a run has either `step` or `tolerance`, not both", offset);
                Setting::Unstated
            }
            (Some(step), None) => Setting::Step(step),
            (None, Some(tolerance)) => Setting::Tolerance(tolerance),
            (None, None) => Setting::Unstated,
        };
        let roles = [("result", Role::Result), ("rung", Role::Rung)];
        let role = self.one_of(entry.role, "role", &roles);
        let file = entry.file.get_ref().clone();
        match confined(self.folder, &file) {
            Ok(path) => Some(Run {
                file,
                path,
                setting,
                cost,
                role,
                text: None,
            }),
            Err(fault) => {
                self.faults
                    .push(fault.at_offset(self.text, entry.file.span().start));
                None
            }
        }
    }
}

#[cfg(test)]
mod tests;
