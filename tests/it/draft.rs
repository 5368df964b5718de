use serde_json::Value;
use stepgauge::case::{Case, Library, Replacements};
use stepgauge::number::Double;

use crate::folder::{Folder, Ran};

/// Exact values of a case and a small error of known size.
struct Trajectory {
    names: Vec<String>,
    /// Time, then the channels.
    rows: Vec<Vec<f64>>,
}

fn case(name: &str) -> Case {
    Library::new().load(name, &Replacements::new()).unwrap()
}

/// So many equal steps over the window; the error is this part of each channel's peak.
fn even(name: &str, count: u32, error: f64) -> Trajectory {
    let case = case(name);
    let part = |k: u32| Double::from(f64::from(k)) / Double::from(f64::from(count));
    let times = (0..=count).map(|k| case.time.from + (case.time.to - case.time.from) * part(k));
    trajectory(&case, times.collect(), error)
}

fn trajectory(case: &Case, times: Vec<Double>, error: f64) -> Trajectory {
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
struct Style {
    separator: &'static str,
    comma: bool,
    print: fn(f64) -> String,
}

const PLAIN: Style = Style {
    separator: ",",
    comma: false,
    print: |x| format!("{x}"),
};

impl Trajectory {
    /// The rows under a header, each made by `pick` from time and channels.
    fn write(&self, head: &str, style: &Style, pick: impl Fn(&[f64]) -> Vec<f64>) -> String {
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
    fn plain(&self, channels: usize) -> String {
        let head = format!("t,{}\n", self.names[..channels].join(","));
        self.write(&head, &PLAIN, |row| row[..=channels].to_vec())
    }
}

/// Files of one submission, what a person who knows them writes, and how much of it the
/// draft must find.
struct Layout {
    what: &'static str,
    files: Vec<(&'static str, String)>,
    /// Without the case and the runs.
    case: &'static str,
    by_hand: &'static str,
    /// The steps of the runs.
    steps: Vec<Option<f64>>,
    /// Options of `draft`.
    options: &'static [&'static str],
    /// What the file must say of its guesses.
    says: &'static [&'static str],
}

fn one(
    what: &'static str,
    case: &'static str,
    text: String,
    by_hand: &'static str,
    step: f64,
    says: &'static [&'static str],
) -> Layout {
    Layout {
        what,
        files: vec![("run.txt", text)],
        case,
        by_hand,
        steps: vec![Some(step)],
        options: &[],
        says,
    }
}

const COLD: &str = "thermal/cold-room-defrost";

fn six(x: f64) -> String {
    // As many programs print: six significant digits.
    let text = format!("{x:.5e}");
    format!("{}", text.parse::<f64>().unwrap())
}

fn full(x: f64) -> String {
    format!("{x:.16e}")
}

fn separators_and_headers() -> Vec<Layout> {
    let cold = even(COLD, 240, 1e-5);
    let kelvin = |row: &[f64]| vec![row[0] / 60.0, row[1] + 273.15, row[2] + 273.15];
    let semicolon = Style {
        separator: ";",
        comma: true,
        print: |x| format!("{x:.9}"),
    };
    let blank = Style {
        separator: "  ",
        comma: false,
        print: full,
    };
    let tab = Style {
        separator: "\t",
        comma: false,
        print: six,
    };
    let quoted = "\"time [min]\";\"room air, sensor 1 [K]\";\"wall, sensor 2 [K]\"\n";
    let bus = even("electrical/lc-bus-filter", 1000, 1e-4);
    let ladder = [(720, 1e-5), (480, 2e-5), (240, 4e-5)];
    let ladder = ladder.map(|(count, error)| even(COLD, count, error).plain(2));
    let [h20, h30, h60] = ladder;
    vec![
        Layout {
            what: "a ladder of three steps",
            files: vec![("h20.csv", h20), ("h30.csv", h30), ("h60.csv", h60)],
            case: COLD,
            by_hand: "",
            steps: vec![Some(20.0), Some(30.0), Some(60.0)],
            options: &[],
            says: &["inner steps may be finer", "# producer = "],
        },
        one(
            "semicolons, decimal comma, quoted names, units in the header",
            COLD,
            cold.write(quoted, &semicolon, kelvin),
            "[columns]\ntime = \"time\"\nair = \"room air, sensor 1\"\nwall = \"wall, sensor 2\"\n",
            60.0,
            &["guessed from the name; in K as the header says"],
        ),
        one(
            "blanks, no header, another order",
            COLD,
            cold.write("", &blank, |row| vec![row[2], row[0], row[1]]),
            "[columns]\ntime = 2\nair = 3\nwall = 1\n",
            60.0,
            &[
                "air = 3  # guessed from the fit",
                "time = 2  # guessed: it rises",
            ],
        ),
        one(
            "minutes that nothing says",
            COLD,
            cold.write("t,air,wall\n", &PLAIN, |row| {
                vec![row[0] / 60.0, row[1], row[2]]
            }),
            "[columns]\ntime = { column = \"t\", unit = \"min\" }\n",
            60.0,
            &["unit guessed: so the stamps lie over the window"],
        ),
        one(
            "kelvin that nothing says",
            COLD,
            cold.write("t,air,wall\n", &PLAIN, |row| {
                vec![row[0], row[1] + 273.15, row[2] + 273.15]
            }),
            "[columns]\nair = { unit = \"K\" }\nwall = { unit = \"K\" }\n",
            60.0,
            &["unit guessed from the fit, the case has degC"],
        ),
        one(
            "tabs, a comment above, names in a comment, six digits, an output",
            "electrical/lc-bus-filter",
            bus.write("% alder 2.3, bus\n% t i_l v_bus i_cap\n", &tab, |row| {
                row.to_vec()
            }),
            "",
            0.2,
            &[
                "i_cap = \"i_cap\"  # the name says so",
                "6 significant digits",
            ],
        ),
    ]
}

fn units_and_names() -> Vec<Layout> {
    let rc = even("electrical/rc-constant", 400, 1e-5);
    let oral = even("kinetics/oral", 480, 1e-6);
    let motor = even("control/dc-motor", 500, 1e-5);
    let tank = even("process/tank", 300, 1e-5);
    let wall = even("thermal/wall-3-node", 480, 1e-6);
    let sine = even("electrical/rl-sine", 800, 1e-5);
    let rpm = 30.0 / std::f64::consts::PI;
    let rpm = move |x: f64| x * rpm;
    let degf = |x: f64| x * 1.8 + 32.0;
    let semicolon = Style {
        separator: ";",
        comma: false,
        print: full,
    };
    vec![
        one(
            "units at the end of names",
            "electrical/rc-constant",
            rc.write("time_ms,v_c_mV\n", &PLAIN, |row| vec![row[0], 1e3 * row[1]]),
            "[columns]\ntime = \"time_ms\"\nv_c = { column = \"v_c_mV\", unit = \"mV\" }\n",
            0.025,
            &["time = \"time_ms\"  # guessed from the name"],
        ),
        one(
            "millivolts that nothing says, an output in the unit of the case",
            "electrical/rc-constant",
            rc.write("t,V_C,i_r\n", &PLAIN, |row| {
                vec![row[0], 1e3 * row[1], row[2]]
            }),
            "[columns]\nv_c = { unit = \"mV\" }\ni_r = \"i_r\"\n",
            0.025,
            &["unit guessed from the fit, the case has V"],
        ),
        one(
            "grams in the header",
            "kinetics/oral",
            oral.write("t [h];depot [g];amount [g]\n", &semicolon, |row| {
                vec![row[0], 1e-3 * row[1], 1e-3 * row[2]]
            }),
            "",
            0.1,
            &["in g as the header says"],
        ),
        one(
            "turns per minute that nothing says",
            "control/dc-motor",
            motor.write("t;current;speed\n", &semicolon, |row| {
                vec![row[0], row[1], rpm(row[2])]
            }),
            "[columns]\nspeed = { unit = \"rpm\" }\n",
            0.01,
            &["unit = \"rpm\" }"],
        ),
        one(
            "minutes in the header, millimetres that nothing says",
            "process/tank",
            tank.write("level,t (min)\n", &semicolon, |row| {
                vec![1e3 * row[1], row[0] / 60.0]
            }),
            "[columns]\nlevel = { unit = \"mm\" }\n",
            3.0,
            &["in min as the header says"],
        ),
        one(
            "names that are alike, degrees Fahrenheit in the header",
            "thermal/wall-3-node",
            wall.write("t,T_n1 [degF],T_n2 [degF],T_n3 [degF]\n", &PLAIN, |row| {
                vec![row[0], degf(row[1]), degf(row[2]), degf(row[3])]
            }),
            "[columns]\nn1 = \"T_n1\"\nn2 = \"T_n2\"\nn3 = \"T_n3\"\n",
            0.25,
            &["n2 = \"T_n2 [degF]\"  # guessed from the name"],
        ),
        one(
            "milliseconds and milliamperes in the header",
            "electrical/rl-sine",
            sine.write("time [ms];i_l [mA]\n", &semicolon, |row| {
                vec![1e3 * row[0], 1e3 * row[1]]
            }),
            "",
            0.00025,
            &["in ms as the header says"],
        ),
    ]
}

fn columns() -> Vec<Layout> {
    let light = even("mechanical/oscillator-light", 600, 1e-5);
    let undamped = even("mechanical/oscillator-undamped", 800, 1e-5);
    let masses = even("mechanical/two-masses", 600, 1e-5);
    let battery = even("thermal/battery-room", 960, 1e-6);
    let sine = even("membrane/leaky-sine", 400, 1e-5);
    let cascade = even("process/tank-cascade", 400, 1e-5);
    let decay = even("decay/parent-daughter", 480, 1e-6);
    let blank = Style {
        separator: " ",
        comma: false,
        print: |x| format!("{x:.11e}"),
    };
    let tab = Style {
        separator: "\t",
        comma: true,
        print: |x| format!("{x:.12}"),
    };
    let counter = undamped.write("", &PLAIN, |row| {
        vec![(row[0] * 40.0).round(), row[0], row[1], row[2]]
    });
    let words = decay.write("t,parent,daughter,pump,note\n", &PLAIN, |row| {
        vec![row[0], row[1], row[2], 7.5]
    });
    let words: Vec<String> = words
        .lines()
        .enumerate()
        .map(|(k, line)| match k {
            0 => line.to_owned(),
            _ => format!("{line},steady"),
        })
        .collect();
    vec![
        one(
            "names that many cases have",
            "mechanical/oscillator-light",
            light.write("t x v\n", &blank, |row| row[..3].to_vec()),
            "",
            0.05,
            &["guessed from 2 column names, the window"],
        ),
        one(
            "a counter of rows before the time, no header",
            "mechanical/oscillator-undamped",
            counter,
            "[columns]\ntime = 2\nx = 3\nv = 4\n",
            0.025,
            &["# Not used: column 1."],
        ),
        one(
            "four states in another order, no header",
            "mechanical/two-masses",
            masses.write("", &blank, |row| {
                vec![row[0], row[4], row[1], row[3], row[2]]
            }),
            "[columns]\ntime = 1\nx1 = 3\nv1 = 5\nx2 = 4\nv2 = 2\n",
            0.005,
            &["v1 = 5  # guessed from the fit"],
        ),
        one(
            "a state that is not there",
            "thermal/battery-room",
            battery.plain(1),
            "[columns]\ncells = \"cells\"\n",
            0.05,
            &[
                "# State `room` was not found in the files: it is left out",
                "# room = NUMBER",
            ],
        ),
        one(
            "two columns without a header",
            "membrane/leaky-sine",
            sine.write("", &blank, |row| row[..2].to_vec()),
            "",
            0.5,
            &["v = 2"],
        ),
        one(
            "five states and an output without a header, decimal comma",
            "process/tank-cascade",
            cascade.write("", &tab, |row| {
                vec![row[0], row[5], row[4], row[3], row[2], row[1], row[6]]
            }),
            "[columns]\ntime = 1\nc1 = 6\nc2 = 5\nc3 = 4\nc4 = 3\nc5 = 2\nheld = 7\n",
            0.01,
            &["decimal comma, no header"],
        ),
        one(
            "columns of words and of something else",
            "decay/parent-daughter",
            words.join("\n") + "\n",
            "",
            1.0,
            &["# Not used: `pump`, `note`."],
        ),
    ]
}

fn runs() -> Vec<Layout> {
    let servo = case("control/servo-integrator");
    let (from, to) = (servo.time.from.to_f64(), servo.time.to.to_f64());
    let uneven = (0..=200).map(|k| from + (to - from) * (f64::from(k) / 200.0).powf(1.5));
    let uneven = trajectory(&servo, uneven.map(Double::from).collect(), 1e-5);
    let winch = [
        even("mechanical/winch-ramp", 160, 1e-5),
        even("mechanical/winch-ramp", 80, 4e-5),
    ];
    let semicolon = Style {
        separator: ";",
        comma: false,
        print: full,
    };
    let thirds = even("mechanical/oscillator-critical", 300, 1e-5);
    let rounded = Style {
        separator: ",",
        comma: false,
        print: |x| format!("{x:.6}"),
    };
    let critical = even("electrical/rlc-critical", 400, 1e-5);
    let head = "t,drum speed,rope length\n";
    let stiff = case("stress/stiff-1e4");
    vec![
        Layout {
            steps: vec![None],
            ..one(
                "rows that are not evenly spaced",
                "control/servo-integrator",
                uneven.plain(3),
                "",
                1.0,
                &["not evenly spaced", "# tolerance = 1e-6"],
            )
        },
        Layout {
            what: "two files with different separators",
            files: vec![
                (
                    "fine.csv",
                    winch[0].write(head, &PLAIN, |row| row[..3].to_vec()),
                ),
                ("coarse/run.csv", {
                    let head = head.replace(',', ";");
                    winch[1].write(&head, &semicolon, |row| row[..3].to_vec())
                }),
            ],
            case: "mechanical/winch-ramp",
            by_hand: "[columns]\nspeed = \"drum speed\"\nrope = \"rope length\"\n",
            steps: vec![Some(0.05), Some(0.1)],
            options: &[],
            says: &["file = \"coarse/run.csv\""],
        },
        one(
            "stamps rounded to six decimals, a step that is no decimal",
            "mechanical/oscillator-critical",
            thirds.write("t,x,v\n", &rounded, |row| row[..3].to_vec()),
            "",
            4.0 / 300.0,
            &["6 decimals"],
        ),
        Layout {
            options: &["--case", "electrical/rlc-critical"],
            ..one(
                "a case that is named, other names",
                "electrical/rlc-critical",
                critical.write("t,u_cap,i_loop\n", &PLAIN, |row| row[..3].to_vec()),
                "[columns]\nv_c = \"u_cap\"\ni = \"i_loop\"\n",
                1e-5,
                &["as named with --case"],
            )
        },
        Layout {
            what: "a ladder of a real method",
            files: [(1000, "a.csv"), (500, "b.csv"), (250, "c.csv")]
                .map(|(count, name)| (name, backward_euler(&stiff, count)))
                .to_vec(),
            case: "stress/stiff-1e4",
            by_hand: "",
            steps: vec![Some(0.01), Some(0.02), Some(0.04)],
            options: &[],
            says: &["case = \"stress/stiff-1e4\""],
        },
    ]
}

/// The rows of a plain backward Euler program.
fn backward_euler(case: &Case, count: usize) -> String {
    let method = stepgauge::method::find("backward Euler").unwrap();
    let span = (case.time.to - case.time.from).to_f64();
    let run = crate::writer::Run::new(case, method, span / count as f64, 1, count + 1);
    let mut text = "t,slow,fast\n".to_owned();
    let (times, states) = run.states().unwrap();
    for (time, values) in times.iter().zip(states) {
        text += &format!("{time},{},{}\n", values[0], values[1]);
    }
    text
}

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

/// A folder with one file, and `draft` run on it.
fn drafted(text: &str, options: &[&str]) -> (Folder, Ran) {
    let folder = Folder::new();
    folder.write("s/run.csv", text);
    let ran = folder.run(&[&["draft", "s/run.csv"], options].concat());
    (folder, ran)
}

fn is_written(folder: &Folder) -> bool {
    folder.path("s/submission.toml").exists()
}

/// Every text that must be seen, and none that must not.
fn says(ran: &Ran, status: i32, words: &[&str]) {
    assert_eq!(ran.status, status, "{}", ran.seen());
    for words in words {
        assert!(
            ran.seen().contains(words),
            "{words} is not in {}",
            ran.seen()
        );
    }
}

#[test]
fn what_is_not_known_is_said_and_nothing_is_written() {
    // Noise over a window that many cases have, under names that no case has.
    let noise = |head: &str, end: f64| {
        let row = |k: u32| {
            let wild = |seed: u32| f64::from((k * 7919 + seed * 104_729) % 1009) - 504.0;
            format!("{},{},{}\n", f64::from(k) * end / 400.0, wild(1), wild(2))
        };
        format!("{head}{}", (0..=400).map(row).collect::<String>())
    };
    let (folder, ran) = drafted(&noise("t,foo,bar\n", 20.0), &[]);
    let words = [
        "Which case it is could not be known",
        "no case has channels of these names, and none fits within 20 % of the peak",
        "nothing is written",
        "name the case with `--case NAME`",
    ];
    says(&ran, 1, &words);
    assert!(!is_written(&folder) && ran.stderr.is_empty());
    // A window that no case has.
    let (folder, ran) = drafted(&noise("t,foo,bar\n", 7.123e-5), &[]);
    says(
        &ran,
        1,
        &["no case has a window that the time stamps, from 0 to 0.00007123, cover"],
    );
    assert!(!is_written(&folder));
    // A case that is named, but columns that could be anything.
    let (folder, ran) = drafted(
        &noise("", 20.0),
        &["--case", "mechanical/oscillator-undamped"],
    );
    let words = [
        "no column has the name of a channel, and none fits one within 20 % of its peak",
        "the case has the states x (m), v (m/s)",
        "under `[columns]` a line for time and each state, as in `x = NUMBER`",
    ];
    says(&ran, 1, &words);
    assert!(!is_written(&folder));
    // The same where the draft is printed: nothing on standard output that could be taken
    // for a submission.
    let (_, ran) = drafted(&noise("t,foo,bar\n", 20.0), &["--print"]);
    says(&ran, 1, &["nothing is written"]);
    assert!(!ran.stdout.contains("case ="));
}

#[test]
fn cases_that_fit_alike_are_all_named() {
    let folder = Folder::new();
    let path = std::path::Path::new(env!("CARGO_MANIFEST_DIR"));
    let text = std::fs::read_to_string(path.join("reference-cases/process/tank.toml")).unwrap();
    folder.write("own/ballast-tank.toml", text);
    folder.write("s/run.csv", even("process/tank", 300, 1e-5).plain(1));
    let ran = folder.run(&["draft", "s/run.csv", "--cases", "own"]);
    says(
        &ran,
        0,
        &[
            "1 other case as likely, `--case NAME` settles it",
            "as likely process/tank",
        ],
    );
    let text = std::fs::read_to_string(folder.path("s/submission.toml")).unwrap();
    assert!(
        text.contains("case = \"process/ballast-tank\"  # guessed from"),
        "{text}"
    );
    assert!(text.contains("# Other cases fit nearly as well"), "{text}");
    assert!(
        text.contains("\n# case = \"process/tank\"  # errors up to"),
        "{text}"
    );
    // Named, it is settled.
    let with_case = ["draft", "s/run.csv", "--case", "process/tank", "--print"];
    let ran = folder.run(&with_case);
    says(&ran, 0, &["case = \"process/tank\" # as named with --case"]);
    assert!(!ran.stdout.contains("Other cases"));
}

#[test]
fn names_without_a_fit_are_drafted_with_a_warning() {
    let far = even(COLD, 240, 0.6).plain(2);
    let (folder, ran) = drafted(&far, &[]);
    says(
        &ran,
        0,
        &[
            "the files do not fit the case",
            "the simulator is wrong, or it is another case",
        ],
    );
    assert!(is_written(&folder));
    // A header that says one unit over numbers in another is told, not overruled.
    let head = "t,air [degC],wall [degC]\n";
    let kelvin = even(COLD, 240, 1e-5);
    let kelvin = kelvin.write(head, &PLAIN, |r| vec![r[0], r[1] + 273.15, r[2] + 273.15]);
    let (folder, ran) = drafted(&kelvin, &[]);
    says(
        &ran,
        0,
        &["would fit in K, though its header says otherwise"],
    );
    let text = std::fs::read_to_string(folder.path("s/submission.toml")).unwrap();
    assert!(
        text.contains("air = \"air [degC]\"") && !text.contains("unit = \"K\""),
        "{text}"
    );
}

#[test]
fn steps_that_rows_do_not_show_are_left_open() {
    let folder = Folder::new();
    folder.write("s/a.csv", even(COLD, 240, 1e-5).plain(2));
    folder.write("s/b.csv", even(COLD, 240, 2e-5).plain(2));
    let ran = folder.run(&["draft", "s/a.csv", "s/b.csv"]);
    says(
        &ran,
        0,
        &["the steps of runs whose rows have the same spacing"],
    );
    let text = std::fs::read_to_string(folder.path("s/submission.toml")).unwrap();
    assert!(
        text.contains("Another run has rows of the same spacing"),
        "{text}"
    );
    assert_eq!(text.matches("\n# step = 60\n").count(), 2, "{text}");
    assert!(!text.contains("\nstep"), "{text}");
    // Short numbers among long ones: rounded or not?
    let short = |x: f64| {
        format!(
            "{}",
            (x * 1e5).round() / 1e5 + if x > 3.2 { 1e-7 } else { 0.0 }
        )
    };
    let text = even(COLD, 240, 1e-3).write(
        "t,air,wall\n",
        &Style {
            print: short,
            ..PLAIN
        },
        |r| r[..3].to_vec(),
    );
    let (folder, ran) = drafted(&text, &[]);
    assert_eq!(ran.status, 0);
    let text = std::fs::read_to_string(folder.path("s/submission.toml")).unwrap();
    assert!(
        ran.seen()
            .contains("the producer, its method and the order it claims")
    );
    for line in [
        "# producer = \"NAME VERSION\"",
        "# [claims]",
        "# method = \"NAME\"",
        "# [limits]",
    ] {
        assert!(text.contains(line), "{line} is not in\n{text}");
    }
}

#[test]
fn nothing_is_overwritten_and_files_lie_in_the_folder() {
    let text = even(COLD, 240, 1e-5).plain(2);
    let folder = Folder::new();
    folder.write("s/run.csv", &text);
    folder.write("s/submission.toml", "mine");
    let kept = || std::fs::read_to_string(folder.path("s/submission.toml")).unwrap();
    let ran = folder.run(&["draft", "s/run.csv"]);
    says(
        &ran,
        2,
        &[
            "s/submission.toml: this file is already there and is not overwritten",
            "help: move it away",
        ],
    );
    assert!(ran.stdout.is_empty() && kept() == "mine");
    // Printed it may be, the submission alone on standard output.
    let ran = folder.run(&["draft", "s/run.csv", "--print"]);
    assert_eq!((ran.status, kept().as_str()), (0, "mine"));
    assert!(ran.stdout.starts_with("# Drafted by") && ran.stderr.starts_with("Looked at 1 file"));
    let ran = folder.run(&["draft", "s/run.csv", "--into", "second.toml"]);
    assert_eq!(ran.status, 0, "{}", ran.seen());
    let second = std::fs::read_to_string(folder.path("second.toml")).unwrap();
    assert!(second.contains("file = \"s/run.csv\""), "{second}");
    assert_eq!(
        folder.audit(&["second.toml"]).report["submissions"][0]["case"],
        COLD
    );
    folder.write("other/x.csv", "t,foo\n0,1\n1,2\n2,3\n3,4\n");
    folder.write("other/empty.csv", "");
    folder.write("other/one.csv", &text);
    folder.write("other/story.csv", "a story\nof two lines\n");
    for (arguments, words) in [
        (
            &["other/one.csv", "--into", "s/two.toml"][..],
            "does not lie in the folder of the submission, `s`",
        ),
        (
            &["other/one.csv", "other/x.csv"],
            "other/x.csv: the columns are `t`, `foo`, those of `one.csv` are `t`, `air`, `wall`",
        ),
        (
            &["other/one.csv", "other/one.csv"],
            "this file is named twice",
        ),
        (
            &["other/empty.csv"],
            "other/empty.csv: the file has no rows of numbers",
        ),
        (
            &["other/story.csv"],
            "other/story.csv:2:1: no rows of numbers found",
        ),
        (&["other/none.csv"], "other/none.csv: there is no such file"),
        (
            &["other"],
            "this is a folder, trajectory files are expected",
        ),
        (
            &["other/one.csv", "--into", "other/run.txt"],
            "a submission is a file that ends in .toml",
        ),
        (
            &["other/one.csv", "--into", "nowhere/s.toml"],
            "the folder of this submission is not there",
        ),
        (
            &["other/one.csv", "--case", "thermal/cold-rom-defrost"],
            "did you mean `thermal/cold-room-defrost`",
        ),
    ] {
        let ran = folder.run(&[&["draft"], arguments].concat());
        says(&ran, 2, &[words]);
        assert!(ran.stdout.is_empty(), "{arguments:?}");
    }
    assert!(!folder.path("other/submission.toml").exists());
    assert!(!folder.path("s/two.toml").exists());
}
