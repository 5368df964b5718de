use std::path::{Path, PathBuf};

use serde_json::Value;
use stepgauge::case::{Case, Library, Replacements};
use stepgauge::number::{Decimal, Double};

use crate::digits::{read, ulps};

fn outside(path: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("tests/outside")
        .join(path)
}

fn json(path: &Path) -> Value {
    serde_json::from_str(&std::fs::read_to_string(path).unwrap()).unwrap()
}

fn text(value: &Value) -> &str {
    value.as_str().unwrap()
}

fn array(value: &Value) -> &[Value] {
    value.as_array().unwrap()
}

/// A system of `certified-values.json` as a case file, its numbers as they stand there.
pub fn certified_case(system: &Value) -> String {
    let id = text(&system["id"]);
    let times = array(&system["solutions"]);
    let last = text(&times.last().unwrap()["t"]);
    let mut case = format!(
        "title = '{id}'\nfield = 'certified'\nabout = ''\nsource = 'certified-values.json'\n\
         hard_for = []\n[time]\nunit = 's'\nfrom = 0\nto = {last}\n[limits]\nabsolute = 1\nrelative = 0\n"
    );
    let inputs = array(&system["input"]);
    for (i, row) in array(&system["A"]).iter().enumerate() {
        let states = array(row).iter().enumerate();
        let mut terms: Vec<String> = states.map(|(j, a)| format!("({})*x{j}", text(a))).collect();
        let b = text(&system["b"][i]);
        terms.extend((0..inputs.len()).map(|k| format!("({b})*u{k}")));
        let start = text(&system["x0"][i]);
        case += &format!(
            "[[states]]\nname = 'x{i}'\nunit = '1'\nstart = '{start}'\nrate = '{}'\n",
            terms.join(" + ")
        );
    }
    for (k, input) in inputs.iter().enumerate() {
        let c = text(&input["c"]);
        let shape = match text(&input["type"]) {
            "const" => format!("shape = 'constant'\nvalue = '{c}'"),
            "ramp" => format!("shape = 'ramp'\nslope = '{c}'\nfrom = 0"),
            "sin" => {
                let omega = text(&input["omega"]);
                format!("shape = 'sine'\namplitude = '{c}'\nangular_frequency = '{omega}'")
            }
            "cos" => {
                let omega = text(&input["omega"]);
                format!(
                    "shape = 'sine'\namplitude = '{c}'\nangular_frequency = '{omega}'\nphase = 'pi/2'"
                )
            }
            "exp" => format!(
                "shape = 'exponential'\nscale = '{c}'\nrate = '{}'",
                text(&input["rate"])
            ),
            other => panic!("unknown input {other}"),
        };
        case += &format!("[[inputs]]\nname = 'u{k}'\nunit = '1'\n{shape}\n");
    }
    case
}

/// The systems with, for each, the solutions that belong to data rounded to `f64`.
pub fn certified_systems() -> Vec<(Value, Value)> {
    let file = json(&outside("certified/certified-values.json"));
    let with_solutions = |system: &Value| {
        let rounded = system.get("solutions_for_binary64_data");
        (
            system.clone(),
            rounded.unwrap_or(&system["solutions"]).clone(),
        )
    };
    array(&file["systems"]).iter().map(with_solutions).collect()
}

// Source: certified-values.json, Arb ball arithmetic at 3000 bits, every radius proven.
#[test]
fn every_certified_value_is_met_to_one_ulp() {
    let mut numbers = 0;
    for (system, solutions) in certified_systems() {
        let id = text(&system["id"]);
        let case = Case::parse(
            &id.to_lowercase(),
            &certified_case(&system),
            &Replacements::new(),
        );
        let exact = case.unwrap().exact().unwrap();
        let rows = array(&solutions);
        let peak = |i: usize| {
            let start = read(text(&system["x0"][i])).to_f64().abs();
            rows.iter()
                .map(|row| read(text(&row["x"][i])).to_f64().abs())
                .fold(start, f64::max)
        };
        for row in rows {
            let time = text(&row["t"]);
            let time_exact = Decimal::parse(time).unwrap();
            let values = exact.at(time_exact).unwrap();
            for (i, (value, truth)) in values.iter().zip(array(&row["x"])).enumerate() {
                let truth = read(text(truth));
                let gap = (Double::from(value.value) - truth).abs().to_f64();
                let near = ulps(value.value, truth) <= 1.0 || gap <= 1e-24 * peak(i);
                assert!(near, "{id} t = {time} x{i}: {value:?}, not {truth:?}");
                assert!(
                    gap <= value.bound + 1e-30 * peak(i),
                    "{id} t = {time} x{i}: {gap:e} {value:?} {truth:?}"
                );
                numbers += 1;
            }
        }
    }
    assert_eq!(numbers, 352);
}

// Source: tests/outside/enclosures/make_enclosures.py (Arb through python-flint), which
// reads the same case files with a parser of its own.
#[test]
fn every_built_in_case_is_met_to_one_ulp() {
    let library = Library::new();
    let mut numbers = 0;
    for name in library.names() {
        let file = format!("enclosures/{}.json", name.replace('/', "--"));
        let enclosures = json(&outside(&file));
        let case = library.load(name, &Replacements::new()).unwrap();
        let exact = case.exact().unwrap();
        let times: Vec<f64> = array(&enclosures["times"])
            .iter()
            .map(|t| t.as_f64().unwrap())
            .collect();
        assert!(times.len() >= 50, "{name} has {} times", times.len());
        let names: Vec<&str> = array(&enclosures["channels"]).iter().map(text).collect();
        assert_eq!(
            names,
            case.channels().iter().map(|c| c.name).collect::<Vec<_>>()
        );
        for (row, truths) in exact
            .over(times.iter().copied())
            .zip(array(&enclosures["values"]))
        {
            for (i, (value, truth)) in row.unwrap().iter().zip(array(truths)).enumerate() {
                let truth = read(text(truth));
                let peak = enclosures["peak"][i].as_f64().unwrap();
                let gap = (Double::from(value.value) - truth).abs().to_f64();
                let near = ulps(value.value, truth) <= 1.0 || gap <= 1e-24 * peak;
                assert!(
                    near,
                    "{name} channel {}: {value:?}, not {truth:?}",
                    names[i]
                );
                // The coefficients are rounded to double-double, which is no part of the
                // bound: 2^-106 times up to 1e7 radians.
                assert!(
                    gap <= value.bound + 1e-25 * peak,
                    "{name} {}: {gap:e} {value:?} {truth:?}",
                    names[i]
                );
                numbers += 1;
            }
        }
    }
    assert!(numbers > 5000, "{numbers} numbers");
}
