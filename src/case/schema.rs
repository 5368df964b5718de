//! The shape of a case file. Unknown keys are refused; what the values mean is left
//! to `check`.

use std::collections::BTreeMap;
use std::fmt;

use serde::de::{self, Deserialize, Deserializer, Visitor};
use toml::Spanned;

/// A number, or a formula of parameters that gives one.
#[derive(Clone, Debug)]
pub(super) enum Quantity {
    Number(f64),
    Formula(String),
}

pub(super) type Place<T> = Spanned<T>;

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct CaseFile {
    pub title: Place<String>,
    pub field: Place<String>,
    pub about: String,
    pub source: Place<String>,
    #[serde(default)]
    pub hard_for: Vec<String>,
    #[serde(default)]
    pub parameters: BTreeMap<Place<String>, Place<ParameterEntry>>,
    pub time: Place<TimeEntry>,
    pub states: Vec<Place<StateEntry>>,
    #[serde(default)]
    pub inputs: Vec<Place<InputEntry>>,
    #[serde(default)]
    pub outputs: Vec<Place<OutputEntry>>,
    pub limits: Place<LimitsEntry>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct ParameterEntry {
    pub value: Place<Quantity>,
    pub unit: String,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct TimeEntry {
    pub unit: String,
    pub from: Place<Quantity>,
    pub to: Place<Quantity>,
    pub least_rows: Option<u64>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct StateEntry {
    pub name: Place<String>,
    pub unit: String,
    pub start: Place<Quantity>,
    pub rate: Place<Quantity>,
    pub exact: Option<Place<Quantity>>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct OutputEntry {
    pub name: Place<String>,
    pub unit: String,
    pub value: Place<Quantity>,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct LimitsEntry {
    #[serde(default)]
    pub absolute: f64,
    #[serde(default)]
    pub relative: f64,
}

/// Every key that some shape of input has; which ones belong together is checked
/// later, where the complaint can name the shape.
#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
pub(super) struct InputEntry {
    pub name: Place<String>,
    pub unit: String,
    pub shape: Place<String>,
    pub value: Option<Place<Quantity>>,
    pub height: Option<Place<Quantity>>,
    pub at: Option<Place<Quantity>>,
    pub slope: Option<Place<Quantity>>,
    pub from: Option<Place<Quantity>>,
    pub width: Option<Place<Quantity>>,
    pub period: Option<Place<Quantity>>,
    pub count: Option<Place<Quantity>>,
    pub amplitude: Option<Place<Quantity>>,
    pub frequency: Option<Place<Quantity>>,
    pub angular_frequency: Option<Place<Quantity>>,
    pub phase: Option<Place<Quantity>>,
    pub scale: Option<Place<Quantity>>,
    pub rate: Option<Place<Quantity>>,
    pub coefficients: Option<Place<Vec<Place<Quantity>>>>,
    pub times: Option<Place<Vec<Place<Quantity>>>>,
    pub values: Option<Place<Vec<Place<Quantity>>>>,
}

impl<'de> Deserialize<'de> for Quantity {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Quantity, D::Error> {
        struct NumberOrFormula;
        impl Visitor<'_> for NumberOrFormula {
            type Value = Quantity;
            fn expecting(&self, f: &mut fmt::Formatter) -> fmt::Result {
                f.write_str("a number or a formula in quotes")
            }
            fn visit_i64<E: de::Error>(self, value: i64) -> Result<Quantity, E> {
                Ok(Quantity::Number(value as f64))
            }
            fn visit_f64<E: de::Error>(self, value: f64) -> Result<Quantity, E> {
                Ok(Quantity::Number(value))
            }
            fn visit_str<E: de::Error>(self, value: &str) -> Result<Quantity, E> {
                Ok(Quantity::Formula(value.to_owned()))
            }
        }
        deserializer.deserialize_any(NumberOrFormula)
    }
}
