use stepgauge::case::Case;
use stepgauge::number::Double;

use crate::draft::{COLD, PLAIN, Style, case, even, trajectory};

/// Files of one submission, what a person who knows them writes, and how much of it the
/// draft must find.
pub struct Layout {
    pub what: &'static str,
    pub files: Vec<(&'static str, String)>,
    /// Without the case and the runs.
    pub case: &'static str,
    pub by_hand: &'static str,
    /// The steps of the runs.
    pub steps: Vec<Option<f64>>,
    /// Options of `draft`.
    pub options: &'static [&'static str],
    /// What the file must say of its guesses.
    pub says: &'static [&'static str],
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

fn six(x: f64) -> String {
    // As many programs print: six significant digits.
    let text = format!("{x:.5e}");
    format!("{}", text.parse::<f64>().unwrap())
}

fn full(x: f64) -> String {
    format!("{x:.16e}")
}

pub fn separators_and_headers() -> Vec<Layout> {
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

pub fn units_and_names() -> Vec<Layout> {
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
            tank.write("level;t (min)\n", &semicolon, |row| {
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

pub fn columns() -> Vec<Layout> {
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

pub fn runs() -> Vec<Layout> {
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
