use std::process::Command;

use crate::certified::{certified_case, certified_systems};
use crate::digits::{read, ulps};
use stepgauge::number::Double;

pub fn stepgauge(arguments: &[&str]) -> (i32, String, String) {
    let output = Command::new(env!("CARGO_BIN_EXE_stepgauge"))
        .args(arguments)
        .env("LC_ALL", "C")
        .env_remove("COLUMNS")
        .output()
        .unwrap();
    let text = |bytes| String::from_utf8(bytes).unwrap();
    (
        output.status.code().unwrap(),
        text(output.stdout),
        text(output.stderr),
    )
}

// Source: certified-values.json, through the command as a user runs it.
#[test]
fn exact_prints_every_certified_value_to_one_ulp() {
    let folder = std::env::temp_dir().join(format!("stepgauge-certified-{}", std::process::id()));
    std::fs::create_dir_all(&folder).unwrap();
    let mut numbers = 0;
    for (system, solutions) in certified_systems() {
        let slug = system["id"].as_str().unwrap().to_lowercase();
        std::fs::write(folder.join(format!("{slug}.toml")), certified_case(&system)).unwrap();
        let rows = solutions.as_array().unwrap();
        let times: Vec<&str> = rows.iter().map(|row| row["t"].as_str().unwrap()).collect();
        let name = format!("certified/{slug}");
        let (status, csv, complaints) = stepgauge(&[
            "exact",
            &name,
            "--cases",
            folder.to_str().unwrap(),
            "--at",
            &times.join(","),
        ]);
        assert_eq!((status, complaints.as_str()), (0, ""), "{name}");
        let mut lines = csv.lines();
        assert!(lines.next().unwrap().starts_with("t,x0"));
        for (line, row) in lines.zip(rows) {
            let truths = row["x"].as_array().unwrap();
            let values: Vec<f64> = line
                .split(',')
                .skip(1)
                .map(|v| v.parse().unwrap())
                .collect();
            assert_eq!(values.len(), truths.len());
            for (i, (&value, truth)) in values.iter().zip(truths).enumerate() {
                let truth = read(truth.as_str().unwrap());
                let column = rows
                    .iter()
                    .map(|row| read(row["x"][i].as_str().unwrap()).to_f64().abs());
                let peak = column.fold(0.0, f64::max);
                let gap = (Double::from(value) - truth).abs().to_f64();
                assert!(
                    ulps(value, truth) <= 1.0 || gap <= 1e-24 * peak,
                    "{name}: {line}"
                );
                numbers += 1;
            }
        }
    }
    std::fs::remove_dir_all(&folder).unwrap();
    assert_eq!(numbers, 352);
}

#[test]
fn exact_takes_grids_lists_and_stamps_of_files() {
    let name = "electrical/rc-constant";
    let (_, grid, _) = stepgauge(&["exact", name, "--step", "0.1e-1"]);
    let stamps: Vec<&str> = grid
        .lines()
        .skip(1)
        .map(|l| l.split(',').next().unwrap())
        .collect();
    assert_eq!(stamps[..4], ["0", "0.01", "0.02", "0.03"]);
    let path = std::env::temp_dir().join(format!("stepgauge-stamps-{}.csv", std::process::id()));
    std::fs::write(&path, &grid).unwrap();
    let (_, again, _) = stepgauge(&["exact", name, "--times", path.to_str().unwrap()]);
    assert_eq!(grid, again);
    std::fs::remove_file(&path).unwrap();
    let (_, list, _) = stepgauge(&["exact", name, "--at", "0.02,0.01"]);
    assert_eq!(list.lines().nth(2), grid.lines().nth(2));
}

#[test]
fn exit_statuses_and_complaints() {
    for (arguments, status, complaint) in [
        (vec!["cases", "--names"], 0, ""),
        (
            vec!["case", "thermal/cold-rom"],
            2,
            "there is no case `thermal/cold-rom`",
        ),
        (
            vec!["case", "thermal/cooling-body", "--set", "x=1"],
            2,
            "the case has no parameter `x`",
        ),
        (
            vec!["exact", "thermal/cooling-body", "--at", "-1"],
            2,
            "lies outside the window",
        ),
        (
            vec!["exact", "thermal/cooling-body", "--at", "one"],
            2,
            "--at: `one` is not a number",
        ),
        (
            vec!["exact", "thermal/cooling-body", "--step", "0"],
            2,
            "--step must be above zero",
        ),
        (vec!["exact", "thermal/cooling-body"], 2, "required"),
        (
            vec!["exact", "thermal/cooling-body", "--times", "/none"],
            2,
            "/none: there is no such file",
        ),
        (vec!["methods"], 0, ""),
        (vec!["methods", "--names"], 0, ""),
        (vec!["methods", "--names", "RK4"], 2, "cannot be used with"),
        (
            vec!["methods", "forwrd", "Euler"],
            2,
            "there is no method `forwrd Euler`\n  help: did you mean `forward Euler`",
        ),
        (
            vec!["methods", "\u{1b}[31mzzzzzz"],
            2,
            "there is no method `\\u{1b}[31mzzzzzz`\n  help: `stepgauge methods` lists all",
        ),
        (vec!["audit"], 2, "required"),
        (
            vec!["audit", "/none"],
            2,
            "/none: there is no such file or folder",
        ),
        (vec!["no-such-command"], 2, "no-such-command"),
        (vec!["--help"], 0, ""),
        (vec!["--version"], 0, ""),
    ] {
        let (found, _, text) = stepgauge(&arguments);
        assert_eq!(found, status, "{arguments:?}: {text}");
        assert!(text.contains(complaint), "{arguments:?}: {text}");
        assert!(!text.contains("panicked"), "{arguments:?}: {text}");
    }
}

#[test]
fn every_case_shows_itself_and_its_numbers() {
    let (_, names, _) = stepgauge(&["cases", "--names"]);
    assert!(names.lines().count() >= 40);
    for name in names.lines() {
        let (status, text, _) = stepgauge(&["case", name]);
        assert_eq!(status, 0, "{name}");
        assert!(text.is_ascii(), "{name} in the C locale: {text}");
        let (status, json, _) = stepgauge(&["case", name, "--json"]);
        assert_eq!(status, 0, "{name}");
        let json: serde_json::Value = serde_json::from_str(&json).unwrap();
        let states = json["states"].as_array().unwrap().len();
        assert_eq!(json["A"].as_array().unwrap().len(), states, "{name}");
        assert_eq!(json["A"][0].as_array().unwrap().len(), states, "{name}");
        assert_eq!(json["constant"].as_array().unwrap().len(), states, "{name}");
        let inputs = json["inputs"].as_array().unwrap().len();
        assert_eq!(json["B"][0].as_array().unwrap().len(), inputs, "{name}");
        assert!(
            json["shortest_time_constant"].is_number() || json["shortest_time_constant"].is_null()
        );
    }
}

#[test]
fn every_method_shows_itself_under_every_name() {
    let (status, names, _) = stepgauge(&["methods", "--names"]);
    assert_eq!(status, 0);
    let listed: Vec<&str> = names.lines().collect();
    let methods = stepgauge::method::METHODS;
    let known: Vec<&str> = methods.iter().map(|method| method.name).collect();
    assert_eq!(listed, known);
    let (_, table, _) = stepgauge(&["methods"]);
    for method in methods {
        assert!(table.contains(&format!("{} ", method.name)), "{table}");
        let (status, text, complaints) = stepgauge(&["methods", method.name]);
        assert_eq!((status, complaints.as_str()), (0, ""), "{}", method.name);
        assert!(text.is_ascii(), "{} in the C locale: {text}", method.name);
        let heading = format!("{}: order {}\n", method.name, method.order);
        assert!(text.contains(&heading), "{text}");
        for alias in method.aliases {
            let (status, other, _) = stepgauge(&["methods", alias]);
            assert_eq!(status, 0, "{alias}");
            assert!(other.contains(&heading), "{alias}: {other}");
        }
    }
}

#[test]
fn a_name_of_several_methods_shows_all_of_them() {
    // Words need no quotes, case and hyphens do not count.
    let (status, text, _) = stepgauge(&["methods", "runge-kutta", "2"]);
    assert_eq!(status, 0);
    let first = "`runge-kutta 2` is a name of 3 methods: explicit midpoint; Heun; Ralston\n";
    assert!(text.starts_with(first), "{text}");
    for heading in [
        "explicit midpoint: order 2",
        "Heun: order 2",
        "Ralston: order 2",
    ] {
        assert!(text.contains(&format!("\n{heading}\n")), "{text}");
    }
    assert_eq!(text.matches("  f = 1 + z + z^2/2\n").count(), 3);
}

// Source: tests/it/published/stability.rs has these numbers with their sources.
#[test]
fn methods_print_published_numbers() {
    for (name, lines) in [
        (
            "RK4",
            &[
                "  1/2 | 0    1/2\n",
                "  f = 1 + z + z^2/2 + z^3/6 + z^4/24\n",
                "  negative real axis: down to -2.785293563\n",
                "  imaginary axis: up to 2.828427125\n",
                "  A-stable: no\n",
            ][..],
        ),
        (
            "Radau IIA 3",
            &[
                "  f = (1 + z/3) / (1 - 2/3 z + z^2/6)\n",
                "  f - exp(z) = -z^4/72 + ...\n",
                "  L-stable: yes\n",
                "IV.5 [hairer-wanner-1996]\n",
            ],
        ),
        (
            "RKF4",
            &["  f = 1 + z + z^2/2 + z^3/6 + z^4/24 + z^5/104\n"],
        ),
        (
            "BDF 3",
            &[
                "  n - 1  9/11    0\n",
                "  (1 - 6/11 z) f^3 - 18/11 f^2 + 9/11 f - 2/11 = 0\n",
                "  f - exp(z) = z^4/4 + ...\n",
                "  sector: 86.03236686 degrees",
            ],
        ),
        ("AB2", &["  f - exp(z) = -5/12 z^3 + ...\n"]),
    ] {
        let (_, text, _) = stepgauge(&["methods", name]);
        for line in lines {
            assert!(text.contains(line), "{name}: {line}: {text}");
        }
    }
}
