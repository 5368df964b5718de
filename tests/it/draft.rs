use serde_json::Value;
use stepgauge::case::{Case, Library, Replacements};
use stepgauge::number::Double;

use crate::draft_layouts::{Layout, columns, runs, separators_and_headers, units_and_names};
use crate::folder::{Folder, Ran};

/// Exact values of a case and a small error of known size.
pub struct Trajectory {
    names: Vec<String>,
    /// Time, then the channels.
    rows: Vec<Vec<f64>>,
}

pub fn case(name: &str) -> Case {
    Library::new().load(name, &Replacements::new()).unwrap()
}

/// So many equal steps over the window; the error is this part of each channel's peak.
pub fn even(name: &str, count: u32, error: f64) -> Trajectory {
    let case = case(name);
    let part = |k: u32| Double::from(f64::from(k)) / Double::from(f64::from(count));
    let times = (0..=count).map(|k| case.time.from + (case.time.to - case.time.from) * part(k));
    trajectory(&case, times.collect(), error)
}

pub fn trajectory(case: &Case, times: Vec<Double>, error: f64) -> Trajectory {
    let exact = case.exact().unwrap();
    let mut walk = exact.walk_rounded();
    let mut rows: Vec<Vec<f64>> = Vec::new();
    for time in times {
        let values = walk.at(time).unwrap().into_iter().map(|value| value.value);
        rows.push(std::iter::once(time.to_f64()).chain(values).collect());
    }
    for channel in 1..rows[0].len() {
        let peak = rows
            .iter()
            .map(|row| row[channel].abs())
            .fold(0.0, f64::max);
        for (k, row) in rows.iter_mut().enumerate() {
            row[channel] += error * peak * (0.37 * k as f64 + channel as f64).sin();
        }
    }
    let names = case.channels().iter().map(|c| c.name.to_owned()).collect();
    Trajectory { names, rows }
}

/// How a trajectory is written.
pub struct Style {
    pub separator: &'static str,
    pub comma: bool,
    pub print: fn(f64) -> String,
}

pub const PLAIN: Style = Style {
    separator: ",",
    comma: false,
    print: |x| format!("{x}"),
};

impl Trajectory {
    /// The rows under a header, each made by `pick` from time and channels.
    pub fn write(&self, head: &str, style: &Style, pick: impl Fn(&[f64]) -> Vec<f64>) -> String {
        let mut text = head.to_owned();
        for row in &self.rows {
            let fields: Vec<String> = pick(row).into_iter().map(style.print).collect();
            let line = fields.join(style.separator);
            text += &if style.comma {
                line.replace('.', ",")
            } else {
                line
            };
            text.push('\n');
        }
        text
    }

    /// Time and the first so many channels under their own names.
    pub fn plain(&self, channels: usize) -> String {
        let head = format!("t,{}\n", self.names[..channels].join(","));
        self.write(&head, &PLAIN, |row| row[..=channels].to_vec())
    }
}

pub const COLD: &str = "thermal/cold-room-defrost";

impl Layout {
    /// Audits what a person wrote and what was drafted.
    fn both(&self) -> (Ran, Ran, String) {
        let folder = Folder::new();
        let mut by_hand = format!("case = \"{}\"\n{}", self.case, self.by_hand);
        let mut arguments = vec!["draft".to_owned()];
        for ((name, text), step) in self.files.iter().zip(&self.steps) {
            folder.write(&format!("hand/{name}"), text);
            folder.write(&format!("drafted/{name}"), text);
            by_hand += &format!("[[runs]]\nfile = \"{name}\"\n");
            if let Some(step) = step {
                by_hand += &format!("step = {step}\n");
            }
            arguments.push(format!("drafted/{name}"));
        }
        folder.write("hand/submission.toml", by_hand);
        arguments.extend(self.options.iter().map(|option| (*option).to_owned()));
        let arguments: Vec<&str> = arguments.iter().map(String::as_str).collect();
        let ran = folder.run(&arguments);
        assert_eq!(ran.status, 0, "{}: {}", self.what, ran.seen());
        let text = std::fs::read_to_string(folder.path("drafted/submission.toml")).unwrap();
        (folder.audit(&["hand"]), folder.audit(&["drafted"]), text)
    }

    /// What differs between the two, or is not said.
    fn differences(&self) -> Vec<String> {
        let (by_hand, drafted, text) = self.both();
        let of = |ran: &Ran| ran.report["submissions"][0].clone();
        let (known, found) = (of(&by_hand), of(&drafted));
        assert_eq!(
            known["case"],
            self.case,
            "{}: {}",
            self.what,
            by_hand.seen()
        );
        let mut told = Vec::new();
        let mut compare = |what: String, known: &Value, found: &Value| {
            if !same(known, found) {
                told.push(format!("{}: {what} is {found}, not {known}", self.what));
            }
        };
        compare("case".into(), &known["case"], &found["case"]);
        compare("verdict".into(), &known["verdict"], &found["verdict"]);
        let runs = known["runs"].as_array().unwrap();
        assert_eq!(runs.len(), self.files.len());
        for (place, run) in runs.iter().enumerate() {
            let other = &found["runs"][place];
            for key in ["file", "step", "rows", "role"] {
                compare(format!("{key} of run {place}"), &run[key], &other[key]);
            }
            // Every number is one that was found: nothing is compared with nothing.
            let channels = run["channels"].as_array().unwrap();
            assert!(!channels.is_empty(), "{}", self.what);
            let other = &other["channels"];
            let count = |list: &Value| Value::from(list.as_array().map_or(0, Vec::len));
            compare("channels".into(), &count(&run["channels"]), &count(other));
            for (index, channel) in channels.iter().enumerate() {
                assert!(channel["worst_error"].is_f64(), "{}: {channel}", self.what);
                for key in ["name", "unit", "worst_error", "limit_used", "verdict"] {
                    compare(
                        format!("{key} of {}", channel["name"]),
                        &channel[key],
                        &other[index][key],
                    );
                }
            }
        }
        for words in self.says {
            if !text.contains(words) {
                told.push(format!("{}: `{words}` is not in\n{text}", self.what));
            }
        }
        told
    }
}

/// Units under another name of the same size may round otherwise.
fn same(known: &Value, found: &Value) -> bool {
    match (known.as_f64(), found.as_f64()) {
        (Some(known), Some(found)) => (known - found).abs() <= 1e-12 * known.abs(),
        _ => known == found,
    }
}

#[test]
fn a_draft_gives_the_numbers_of_one_by_hand() {
    let lists = [
        separators_and_headers(),
        units_and_names(),
        columns(),
        runs(),
    ];
    let all: Vec<Layout> = lists.into_iter().flatten().collect();
    let told: Vec<Vec<String>> = all.iter().map(Layout::differences).collect();
    let alike = told.iter().filter(|told| told.is_empty()).count();
    println!("{alike} of {} drafts give the same numbers", all.len());
    let told: Vec<String> = told.into_iter().flatten().collect();
    assert!(all.len() >= 20);
    assert!(
        told.is_empty(),
        "{alike} of {}:\n{}",
        all.len(),
        told.join("\n")
    );
}
