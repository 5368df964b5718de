//! The tables in which a producer's terms stand: claims, limits, columns, layout. A
//! submission has them, and a plan that makes submissions has the same.

use std::collections::BTreeMap;
use std::fmt;
use std::path::Path;

use serde::de::value::MapAccessDeserializer;
use serde::de::{self, Deserialize, Deserializer, MapAccess, Visitor};
use toml::Spanned;

use super::schema::Reader;
use super::{Claims, ColumnName, ColumnStated, LimitStated, LimitsStated};
use crate::fault::{Fault, in_plain_words, quoted};
use crate::trajectory::{LongStated, Separator, Stated};

/// What holds for every run of a submission.
#[derive(Clone, Debug, Default)]
pub struct Terms {
    /// What the producer states of its method.
    pub claims: Claims,
    /// Limits that replace those of the case.
    pub limits: LimitsStated,
    /// Columns by channel; the time stamps under `time`.
    pub columns: BTreeMap<String, ColumnStated>,
    /// The layout as far as stated.
    pub layout: Stated,
    /// Lines and columns of keys that can prove wrong only later, as `limits.air`.
    pub places: BTreeMap<String, (u64, u64)>,
}

/// Whatever else the file holds is read by whoever knows it.
#[derive(serde::Deserialize)]
struct TermsFile {
    claims: Option<ClaimsEntry>,
    #[serde(default)]
    limits: BTreeMap<Spanned<String>, Spanned<LimitEntry>>,
    #[serde(default)]
    columns: BTreeMap<Spanned<String>, ColumnEntry>,
    layout: Option<LayoutEntry>,
}

impl Terms {
    /// Reads these tables out of a file that holds others as well.
    ///
    /// # Errors
    /// All complaints about these tables, in order of their places.
    pub fn parse(text: &str) -> Result<Terms, Vec<Fault>> {
        let file: TermsFile = toml::from_str(text).map_err(|error| {
            let offset = error.span().map_or(0, |span| span.start);
            vec![Fault::new(in_plain_words(error.message())).at_offset(text, offset)]
        })?;
        let mut reader = Reader::new(text, Path::new(""));
        let terms = reader.terms(file.claims, file.limits, file.columns, file.layout);
        reader.conclude(terms)
    }
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct ClaimsEntry {
    method: Option<String>,
    order: Option<Spanned<f64>>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct LayoutEntry {
    separator: Option<Spanned<String>>,
    decimal: Option<Spanned<String>>,
    comment: Option<Spanned<String>>,
    skip_lines: Option<u64>,
    digits: Option<Spanned<u8>>,
    long: Option<Spanned<LongEntry>>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct LongEntry {
    name: ColumnKey,
    value: ColumnKey,
}

/// A number or word for all channels, or a table for one.
pub(super) enum LimitEntry {
    Number(f64),
    Word(String),
    Channel(ChannelLimits),
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct ChannelLimits {
    absolute: Option<f64>,
    relative: Option<f64>,
    relative_to: Option<String>,
}

/// A table, or in short the column alone.
pub(super) struct ColumnEntry(ColumnStated);

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

impl Reader<'_> {
    pub(super) fn terms(
        &mut self,
        claims: Option<ClaimsEntry>,
        limits: BTreeMap<Spanned<String>, Spanned<LimitEntry>>,
        columns: BTreeMap<Spanned<String>, ColumnEntry>,
        layout: Option<LayoutEntry>,
    ) -> Terms {
        let mut places = BTreeMap::new();
        for name in limits.keys() {
            places.insert(format!("limits.{}", name.get_ref()), self.place(name));
        }
        let mut stated = BTreeMap::new();
        for (name, entry) in columns {
            let place = Some(self.place(&name));
            stated.insert(name.into_inner(), ColumnStated { place, ..entry.0 });
        }
        let time = stated.get("time").and_then(|time| time.column.clone());
        let layout = layout.map_or_else(Stated::default, |layout| self.layout(layout, time));
        Terms {
            claims: claims.map_or_else(Claims::default, |claims| self.claims(claims)),
            limits: self.limits(limits),
            columns: stated,
            layout,
            places,
        }
    }

    fn claims(&mut self, claims: ClaimsEntry) -> Claims {
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
    }

    pub(super) fn limits(
        &mut self,
        entries: BTreeMap<Spanned<String>, Spanned<LimitEntry>>,
    ) -> LimitsStated {
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
                    self.complain_of(fault.help(help), name.span().start);
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

    fn layout(&mut self, entry: LayoutEntry, time: Option<ColumnName>) -> Stated {
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
        let long = entry.long.map(|long| {
            let place = long.span().start;
            let LongEntry { name, value } = long.into_inner();
            if name.0 == value.0 {
                self.complain("`name` and `value` of `long` are the same column", place);
            }
            LongStated {
                name: name.0,
                value: value.0,
                time,
            }
        });
        Stated {
            long,
            separator,
            decimal_comma,
            comment,
            skip_lines: entry.skip_lines,
            digits,
        }
    }
}
