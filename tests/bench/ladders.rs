//! Submissions of four runs each, as honest producers hand them in: the rows are those of the
//! method that is claimed, over cases of one, two and four states.

use std::collections::HashMap;
use std::fmt::{self, Write};
use std::path::Path;
use std::rc::Rc;

use stepgauge::method::{Linear, March, Ranks, Recurrence, Sides, find};
use stepgauge::{Case, Library};

use crate::chain;
use crate::chance::scatter;

/// Runs of a submission.
pub const RUNS_OF_ONE: usize = 4;
/// Rows of a run on the average.
const ROWS: usize = 200;
/// The same of each run of a ladder, in quarters of that.
const RUNGS: [usize; RUNS_OF_ONE] = [6, 5, 3, 2];
const BUILT_IN: [&str; 2] = ["electrical/rc-constant", "kinetics/two-compartments"];
const LENGTH: usize = 4;
const METHODS: [(&str, u8); 5] = [
    ("classical RK4", 4),
    ("Heun", 2),
    ("implicit midpoint", 2),
    ("trapezoidal", 2),
    ("Bogacki-Shampine 3", 3),
];

/// How the steps of the files are chosen.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Steps {
    /// The same four in every submission.
    Shared,
    /// Four of its own for each submission.
    Own,
    /// As an adaptive code chooses them: every step of a file is another one.
    Varied,
}

impl Steps {
    pub const ALL: [Steps; 3] = [Steps::Shared, Steps::Own, Steps::Varied];
}

impl fmt::Display for Steps {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        f.write_str(match self {
            Steps::Shared => "shared steps",
            Steps::Own => "steps of their own",
            Steps::Varied => "varied steps",
        })
    }
}

/// What a file holds; files of one kind are the same.
#[derive(Clone, Copy, PartialEq, Eq, Hash)]
struct Kind {
    case: usize,
    method: usize,
    /// Steps over the window, and what scatters them.
    steps: usize,
    seed: Option<usize>,
}

/// A case, and what a file of it begins with.
struct Model {
    name: String,
    linear: Linear,
    header: String,
}

/// Makes files.
pub struct Writer {
    models: Vec<Model>,
    written: HashMap<Kind, Rc<String>>,
}

impl Writer {
    pub fn new() -> Writer {
        let library = Library::new();
        let built_in = BUILT_IN.map(|name| library.load(name, &Default::default()).unwrap());
        let model = |case: Case| {
            let names: Vec<&str> = case.states.iter().map(|s| s.name.as_str()).collect();
            Model {
                header: format!("t,{}\n", names.join(",")),
                linear: Linear::new(&case),
                name: case.name,
            }
        };
        let cases = built_in.into_iter().chain([chain::case(LENGTH)]);
        Writer {
            models: cases.map(model).collect(),
            written: HashMap::new(),
        }
    }

    /// Puts submissions below a folder; how many bytes their runs have.
    pub fn write(&mut self, folder: &Path, runs: usize, steps: Steps) -> u64 {
        let mut bytes = 0;
        for first in (0..runs).step_by(RUNS_OF_ONE) {
            let number = first / RUNS_OF_ONE;
            let place = folder.join(format!("producer-{number:05}"));
            std::fs::create_dir(&place).unwrap();
            let (case, method) = (number % self.models.len(), number % METHODS.len());
            let (claim, order) = METHODS[method];
            let mut text = format!(
                "case = \"{}\"\n[claims]\nmethod = \"{claim}\"\norder = {order}\n\
                 [limits]\nabsolute = 0\nrelative = 1\nrelative_to = \"peak\"\n",
                self.models[case].name
            );
            for (rung, quarters) in RUNGS.iter().enumerate().take(runs - first) {
                let rows = match steps {
                    Steps::Own => ROWS - 50 + 7 * number % 101,
                    Steps::Shared | Steps::Varied => ROWS,
                };
                let kind = Kind {
                    case,
                    method,
                    steps: rows * quarters / 4,
                    // A few sets of steps do: nothing is kept from one run to the next.
                    seed: (steps == Steps::Varied).then_some(number % 8),
                };
                let rows = self.rows(kind);
                std::fs::write(place.join(format!("{rung}.csv")), rows.as_bytes()).unwrap();
                bytes += rows.len() as u64;
                let (from, to) = self.models[case].linear.window;
                let step = (to - from) / kind.steps as f64;
                let setting = match kind.seed {
                    None => format!("step = {step:?}"),
                    Some(_) => format!("tolerance = {:?}", step.powi(i32::from(order))),
                };
                let _ = write!(text, "[[runs]]\nfile = \"{rung}.csv\"\n{setting}\n");
            }
            std::fs::write(place.join("submission.toml"), text).unwrap();
        }
        bytes
    }

    fn rows(&mut self, kind: Kind) -> Rc<String> {
        let model = &self.models[kind.case];
        let rows = self.written.entry(kind);
        rows.or_insert_with(|| Rc::new(text(model, &kind))).clone()
    }
}

/// The rows of a method, to the shortest digits that read back.
fn text(Model { linear, header, .. }: &Model, kind: &Kind) -> String {
    let coefficients = find(METHODS[kind.method].0).unwrap().schemes[0].coefficients();
    let recurrence = |step| Recurrence::new(&coefficients, linear, step, &Ranks::new()).unwrap();
    let mut text = header.clone();
    let mut add = |time: f64, state: &[f64]| {
        let _ = write!(text, "{time:?}");
        state.iter().for_each(|value| {
            let _ = write!(text, ",{value:?}");
        });
        text.push('\n');
    };
    let (from, to) = linear.window;
    let mean = (to - from) / kind.steps as f64;
    let mut state = linear.start.clone();
    let Some(seed) = kind.seed else {
        let even = recurrence(mean);
        let mut march = March::new(&even, linear, Sides::After, [state], from, 0);
        for step in 0..=kind.steps {
            add(from + step as f64 * mean, march.state());
            march.step();
        }
        return text;
    };
    let mut time = from;
    add(time, &state);
    for step in 1..=kind.steps {
        // A wave that is the same on every rung, and a little of chance.
        let share = step as f64 / kind.steps as f64;
        let wave = 0.06 * (std::f64::consts::TAU * share).sin();
        let chance = 0.3 * scatter((seed * 1000 + step) as u64) / kind.steps as f64;
        let next = match step == kind.steps {
            true => to,
            false => from + (to - from) * (share - wave + chance),
        };
        let uneven = recurrence(next - time);
        let mut march = March::new(&uneven, linear, Sides::After, [state], time, 0);
        state = march.step().to_vec();
        time = next;
        add(time, &state);
    }
    text
}
