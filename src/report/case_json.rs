//! A case as JSON: matrices, start values and inputs as numbers, to drive a simulator.

use serde_json::{Map, Number, Value};

use super::json::text;
use super::wire::{CaseReport, OutputReport, SCHEMA, StateReport, TimeReport};
use crate::case::{Case, Input};
use crate::formula::Affine;
use crate::outcome::CaseFacts;

/// The case as text, ending with a line end.
pub fn case_json(case: &Case, facts: &CaseFacts) -> String {
    let states = case.states.len();
    let split = |affine: &Affine| -> (Vec<f64>, Vec<f64>, f64) {
        let numbers: Vec<f64> = affine.coefficients.iter().map(|c| c.to_f64()).collect();
        let full = |from: usize, count: usize| -> Vec<f64> {
            (from..from + count)
                .map(|i| numbers.get(i).copied().unwrap_or(0.0))
                .collect()
        };
        (
            full(0, states),
            full(states, case.inputs.len()),
            affine.constant.to_f64(),
        )
    };
    let rates: Vec<_> = case.states.iter().map(|state| split(&state.rate)).collect();
    text(&CaseReport {
        stepgauge: env!("CARGO_PKG_VERSION").to_owned(),
        schema: SCHEMA,
        name: case.name.clone(),
        title: case.title.clone(),
        time: TimeReport {
            unit: case.time.unit.clone(),
            from: case.time.from.to_f64(),
            to: case.time.to.to_f64(),
        },
        parameters: case
            .parameters
            .iter()
            .map(|p| (p.name.clone(), p.value.to_f64()))
            .collect(),
        states: case
            .states
            .iter()
            .map(|state| StateReport {
                name: state.name.clone(),
                unit: state.unit.clone(),
                start: state.start.to_f64(),
            })
            .collect(),
        A: rates.iter().map(|rate| rate.0.clone()).collect(),
        B: rates.iter().map(|rate| rate.1.clone()).collect(),
        constant: rates.iter().map(|rate| rate.2).collect(),
        inputs: case.inputs.iter().map(input).collect(),
        outputs: case
            .outputs
            .iter()
            .map(|output| {
                let (c, d, constant) = split(&output.value);
                let (name, unit) = (output.name.clone(), output.unit.clone());
                OutputReport {
                    name,
                    unit,
                    C: c,
                    D: d,
                    constant,
                }
            })
            .collect(),
        jumps: facts.jumps.clone(),
        shortest_time_constant: facts.shortest_time_constant,
        shortest_period: facts.shortest_period,
    })
}

fn input(input: &Input) -> Map<String, Value> {
    let mut map = Map::new();
    let words = [("name", &input.name), ("unit", &input.unit)];
    for (key, word) in words {
        map.insert(key.to_owned(), Value::String(word.clone()));
    }
    map.insert(
        "shape".to_owned(),
        Value::String(input.shape.name().to_owned()),
    );
    for (key, numbers) in input.shape.numbers() {
        let number = |x: &f64| Number::from_f64(*x).map_or(Value::Null, Value::Number);
        let list = matches!(key, "times" | "values" | "coefficients");
        let value = match numbers[..] {
            [one] if !list && key == "count" => Value::Number((one as u64).into()),
            [ref one] if !list => number(one),
            _ => Value::Array(numbers.iter().map(number).collect()),
        };
        map.insert(key.to_owned(), value);
    }
    map
}
