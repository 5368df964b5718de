use serde_json::Value;

use crate::folder::{CASE, Folder, PLANTED, Ran, STEP, rows};

/// One way of writing the same trajectory.
struct Written {
    name: &'static str,
    bytes: Vec<u8>,
    /// What the submission says of columns and layout.
    stated: &'static str,
    /// Units are converted: the last digits may differ.
    converted: bool,
}

fn written(name: &'static str, stated: &'static str, text: impl Into<Vec<u8>>) -> Written {
    Written {
        name,
        bytes: text.into(),
        stated,
        converted: false,
    }
}

fn converted(name: &'static str, stated: &'static str, text: impl Into<Vec<u8>>) -> Written {
    Written {
        converted: true,
        ..written(name, stated, text)
    }
}

const BY_NUMBER: &str = "[columns]\ntime = 1\nair = 2\nwall = 3\n";

/// Seventeen significant digits, with an exponent: they read back as the same number.
fn full(x: f64) -> String {
    format!("{x:.16e}")
}

/// At least as many without an exponent: no value is below one.
fn plain(x: f64) -> String {
    format!("{x:.16}")
}

fn table(head: &str, row: impl Fn(f64, f64, f64) -> String) -> String {
    let lines: Vec<String> = rows()
        .iter()
        .map(|&[t, air, wall]| row(t, air, wall))
        .collect();
    format!("{head}{}\n", lines.join("\n"))
}

/// Rows with this between the fields.
fn joined(head: &str, separator: &str) -> String {
    table(head, |t, air, wall| {
        [t.to_string(), full(air), full(wall)].join(separator)
    })
}

fn with_comma(head: &str, separator: &str) -> String {
    let row = |t: f64, air, wall| [plain(t), plain(air), plain(wall)].join(separator);
    table(head, |t, air, wall| row(t, air, wall).replace('.', ","))
}

/// As `joined` with commas, every number rewritten.
fn numbers(rewrite: impl Fn(&str) -> String) -> String {
    table("t,air,wall\n", |t, air, wall| {
        [t, air, wall].map(|x| rewrite(&full(x))).join(",")
    })
}

/// An exponent of this many digits, always with a sign, after this letter.
fn exponent(text: &str, letter: &str, digits: usize) -> String {
    let (mantissa, power) = text.split_once('e').unwrap();
    let power: i32 = power.parse().unwrap();
    let sign = if power < 0 { '-' } else { '+' };
    format!("{mantissa}{letter}{sign}{:0digits$}", power.abs())
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
fn separators() -> Vec<Written> {
    let aligned = |t: f64, air: f64, wall: f64| format!("{t:>9}{air:>28.16}{wall:>28.16}");
    vec![
        written("semicolon", "", joined("t;air;wall\n", ";")),
        written("tab", "", joined("t\tair\twall\n", "\t")),
        written("one blank", "", joined("t air wall\n", " ")),
        written("aligned columns", "", table("        t    air    wall\n", aligned)),
        written("blanks and tabs", "", joined("t \t air \t wall\n", " \t  ")),
        written("tabs below names with blanks between", "", joined("t air wall\n", "\t")),
        written("comma and blank", "", joined("t, air, wall\n", ", ")),
        written("blanks around semicolons", "", joined("  t ; air ; wall\n", " ; ")),
        written("trailing blanks", "", joined("t,air,wall\n", ",").replace('\n', "  \n")),
        written("trailing separators", "", joined("t,air,wall\n", ",").replace('\n', ",\n")),
        written("trailing separators below a header without", "", {
            table("t,air,wall\n", |t, air, wall| format!("{t},{air:e},{wall:e},"))
        }),
        written("trailing tabs below a header without", "", {
            table("t\tair\twall\n", |t, air, wall| format!("{t}\t{air:e}\t{wall:e}\t"))
        }),
        written(
            "everything stated",
            "[layout]\nseparator = \";\"\ndecimal = \".\"\ncomment = \"#\"\n\
            skip_lines = 1\ndigits = 17\n",
            joined("t;air;wall\n", ";"),
        ),
    ]
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
fn headers() -> Vec<Written> {
    let named = "[columns]\nair = \"T, air\"\nwall = \"T, wall\"\n";
    let quotes = "[columns]\nair = 'T \"air\"'\nwall = 'T \"wall\"'\n";
    vec![
        written("no header", BY_NUMBER, joined("", ",")),
        written("no header, blanks", BY_NUMBER, joined("", "  ")),
        written("columns by number below a header", BY_NUMBER, joined("time,T1,T2\n", ",")),
        written("quoted names", "", joined("\"t\",\"air\",\"wall\"\n", ",")),
        written("names with commas", named, joined("t,\"T, air\",\"T, wall\"\n", ",")),
        written(
            "names with quotes",
            quotes,
            joined("t;\"T \"\"air\"\"\";\"T \"\"wall\"\"\"\n", ";"),
        ),
        written(
            "quoted names between blanks",
            named,
            joined("\"t\" \"T, air\" \"T, wall\"\n", " "),
        ),
        written("quoted numbers", "", {
            table("t,air,wall\n", |t, air, wall| format!("\"{t}\",\"{air}\",\"{wall}\""))
        }),
        written("units in brackets", "", joined("t [s],air [degC],wall [degC]\n", ",")),
        written("units in round brackets", "", joined("Time (s);air (degC);wall (degC)\n", ";")),
        written("units with a degree sign", "", joined("t [s],air [°C],wall [°C]\n", ",")),
        written("a degree sign in Latin-1", "", {
            [b"t,air [\xb0C],wall [\xb0C]\n", joined("", ",").as_bytes()].concat()
        }),
        written("units below the names", "", joined("t,air,wall\ns,degC,degC\n", ",")),
        written("units in brackets below", "", joined("t air wall\n[s] [degC] [degC]\n", " ")),
        written("names in a comment", "", joined("# t air wall\n", " ")),
        written("names in a tight comment", "", joined("#t,air,wall\n", ",")),
        written("names and units in comments", "", joined("% t air wall\n% s degC degC\n", " ")),
        written("comment between header and rows", "", joined("t,air,wall\n# step of 60 s\n", ",")),
        written("names with other letters", "", joined("TIME,Air,WALL\n", ",")),
        written("a column without name", "", {
            table(",t,air,wall\n", |t, air, wall| format!("{},{t},{air:e},{wall:e}", t / STEP))
        }),
    ]
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
fn lines() -> Vec<Written> {
    let titles = "Cold room, north side, run 7\nwritten in spring by alder 2.3\n\nt,air,wall\n";
    let spread =
        |mark: &str| joined("t,air,wall\n", ",").replace("\n1080,", &format!("\n{mark}\n1080,"));
    let several = |text: String| {
        let text =
            text.replace("\n120,", "\n# 1,2,3\n120,").replace("\n300,", "\n  % halfway\n300,");
        text.replace("\n600,", "\n// pulse, on\n600,").replace("\n1500,", "\n! pulse off\n1500,")
    };
    let preamble =
        "# a line of a long story that the program tells before it begins\n".repeat(1500);
    vec![
        written("titles above the header", "", joined(titles, ",")),
        written("titles skipped", "[layout]\nskip_lines = 4\n", joined(titles, ",")),
        written(
            "a title of numbers",
            "[layout]\nskip_lines = 2\n",
            joined("7,1,2\nt,air,wall\n", ","),
        ),
        written("separator named in the first line", "", joined("sep=;\nt;air;wall\n", ";")),
        written("comments of all kinds", "", several(joined("# alder\nt,air,wall\n", ","))),
        written("a comment sign of its own", "[layout]\ncomment = \"REM\"\n", spread("REM 1,2,3")),
        written(
            "a longer preamble than the sample",
            "",
            joined(&format!("{preamble}t,air,wall\n"), ","),
        ),
        written("byte order mark", "", joined("\u{feff}t,air,wall\n", ",")),
        written("byte order mark and quotes", "", joined("\u{feff}\"t\",\"air\",\"wall\"\n", ",")),
        written("byte order mark, no header", BY_NUMBER, joined("\u{feff}", ",")),
        written("CRLF", "", joined("t,air,wall\n", ",").replace('\n', "\r\n")),
        written("lone CR", "", joined("t,air,wall\n", ",").replace('\n', "\r")),
        written("blank lines", "", format!("\n{}\n\n", spread("\n  \n"))),
        written("blank lines, CRLF", "", spread("\n\n").replace('\n', "\r\n")),
        written("no last line end", "", joined("t,air,wall\n", ",").trim_end()),
        written("no last line end, decimals", "", with_comma("t;air;wall\n", ";").trim_end()),
    ]
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
fn number_formats() -> Vec<Written> {
    let letter = |letter: &'static str| numbers(move |x| exponent(x, letter, 2));
    vec![
        written("decimal comma, semicolon", "", with_comma("t;air;wall\n", ";")),
        written("decimal comma, tab", "", with_comma("t\tair\twall\n", "\t")),
        written("decimal comma, blanks", "", with_comma("t air wall\n", "   ")),
        written("decimal comma, no header", BY_NUMBER, with_comma("", ";")),
        written("decimal comma and exponents", "", joined("t;air;wall\n", ";").replace('.', ",")),
        written("exponents e", "", letter("e")),
        written("exponents E", "", letter("E")),
        written("exponents D", "", letter("D")),
        written("exponents d", "", letter("d")),
        written("exponents of three digits", "", numbers(|x| exponent(x, "E", 3))),
        written("plus signs", "", numbers(|x| format!("+{x}"))),
        written(
            "shortest digits",
            "",
            table("t,air,wall\n", |t, air, wall| format!("{t},{air},{wall}")),
        ),
        written("blanks before numbers", "", numbers(|x| format!("{x:>30}"))),
    ]
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
fn columns() -> Vec<Written> {
    let reordered = table("wall,t,air\n", |t, air, wall| format!("{wall:e},{t},{air:e}"));
    let extra = table("step,t,dummy,air,x,wall,y\n", |t, air, wall| {
        format!("{},{t},-1,{air:e},1e9,{wall:e},0.5", t / STEP)
    });
    let words = table("t,phase,air,wall\n", |t, air, wall| {
        let phase = if (600.0..1500.0).contains(&t) { "heating" } else { "rest" };
        format!("{t},{phase},{air:e},{wall:e}")
    });
    let absent = table("t,air,wall,x\n", |t, air, wall| format!("{t},{air:e},{wall:e},nan"));
    let names: Vec<String> = (0..4000).map(|k| format!("unused_channel_number_{k}")).collect();
    let wide = table(&format!("t,air,wall,{}\n", names.join(",")), |t, air, wall| {
        format!("{t},{air:e},{wall:e}{}", ",0".repeat(4000))
    });
    vec![
        written("another order", "", reordered.clone()),
        written("another order by number", "[columns]\ntime = 2\nair = 3\nwall = 1\n", reordered),
        written("extra columns", "", extra),
        written("an extra column of words", "", words),
        written("an extra column of nan", "", absent),
        written("a header longer than the sample", "", wide),
    ]
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
fn units() -> Vec<Written> {
    let time = |head: &str, each: f64| {
        table(head, |t, air, wall| [t / each, air, wall].map(full).join(","))
    };
    let kelvin = |head: &str| {
        table(head, |t, air, wall| [t, air + 273.15, wall + 273.15].map(full).join(","))
    };
    let stated = "[columns]\nair = { column = \"air\", unit = \"K\" }\nwall = { unit = \"K\" }\n";
    let fahrenheit = table("t,air [degF],wall [°F]\n", |t, air, wall| {
        [t, air * 1.8 + 32.0, wall * 1.8 + 32.0].map(full).join(",")
    });
    vec![
        converted(
            "minutes",
            "[columns]\ntime = { column = \"t\", unit = \"min\" }\n",
            time("t,air,wall\n", 60.0),
        ),
        converted("hours", "[columns]\ntime = { unit = \"h\" }\n", time("t,air,wall\n", 3600.0)),
        converted(
            "milliseconds",
            "[columns]\ntime = { unit = \"ms\" }\n",
            time("t,air,wall\n", 1e-3),
        ),
        converted("minutes in the header", "", time("t [min],air,wall\n", 60.0)),
        converted("hours below the names", "", time("t,air,wall\nh,degC,degC\n", 3600.0)),
        converted("kelvin", stated, kelvin("t,air,wall\n")),
        converted("kelvin in the header", "", kelvin("t,air [K],wall (K)\n")),
        converted("kelvin below the names", "", kelvin("t,air,wall\ns,K,K\n")),
        converted("degrees Fahrenheit in the header", "", fahrenheit),
    ]
}

fn audit(bytes: &[u8], stated: &str) -> Ran {
    let folder = Folder::new();
    folder.write("s/run.txt", bytes);
    let submission = format!("case = \"{CASE}\"\n{stated}[[runs]]\nfile = \"run.txt\"\n");
    folder.write("s/submission.toml", submission);
    folder.audit(&["s"])
}

const EXACTLY: [&str; 8] = [
    "worst_error",
    "at",
    "rms_error",
    "end_error",
    "peak",
    "resolution",
    "limit",
    "limit_used",
];

/// What differs from the report of the plain file; empty where nothing does.
fn differences(ran: &Ran, plain: &Ran, converted: bool) -> String {
    let (status, findings) = (ran.status, ran.findings());
    if status != plain.status || findings != plain.findings() {
        return format!("status {status}, findings {findings:?}: {}", ran.seen());
    }
    let (run, expected) = (ran.first_run(), plain.first_run());
    let mut told = Vec::new();
    if run["rows"] != expected["rows"] {
        told.push(format!("{} rows", run["rows"]));
    }
    for place in 0..2 {
        let (channel, known) = (&run["channels"][place], &expected["channels"][place]);
        for key in ["name", "unit", "verdict"].iter().chain(&EXACTLY) {
            if !same(key, &channel[key], &known[key], converted) {
                told.push(format!(
                    "{} {key} is {}, not {}",
                    known["name"], channel[key], known[key]
                ));
            }
        }
    }
    told.join("; ")
}

/// Numbers around 290 K are printed to half of 6e-14 and rounded to it once more
/// before; a limit near 1e-3 makes a fraction of it a thousand times as uncertain.
fn same(key: &str, found: &Value, known: &Value, converted: bool) -> bool {
    let (Some(found), Some(known), true) = (found.as_f64(), known.as_f64(), converted) else {
        return found == known;
    };
    let absolute = match key {
        // What the digits resolve is coarser for larger numbers, as it should be.
        "resolution" => 1e-12,
        "limit_used" => 1e-10,
        _ => 1e-13,
    };
    (found - known).abs() <= 1e-12 * known.abs() + absolute
}

#[test]
fn every_layout_gives_the_same_numbers() {
    let plain = audit(joined("t,air,wall\n", ",").as_bytes(), "");
    assert_eq!(
        (plain.status, plain.verdict()),
        (0, "pass"),
        "{}",
        plain.seen()
    );
    let run = plain.first_run();
    assert_eq!(run["rows"], rows().len());
    for (place, planted) in PLANTED.into_iter().enumerate() {
        // The largest sine or cosine of whole numbers here is within one in ten
        // thousand of one.
        let worst = run["channels"][place]["worst_error"].as_f64().unwrap();
        assert!((worst - planted).abs() < 1e-3 * planted, "{worst:e}");
    }
    let lists = [
        separators(),
        headers(),
        lines(),
        number_formats(),
        columns(),
        units(),
    ];
    let all: Vec<Written> = lists.into_iter().flatten().collect();
    assert!(all.len() >= 24);
    let mut told = Vec::new();
    for Written {
        name,
        bytes,
        stated,
        converted,
    } in &all
    {
        let different = differences(&audit(bytes, stated), &plain, *converted);
        if !different.is_empty() {
            told.push(format!("{name}: {different}"));
        }
    }
    assert!(
        told.is_empty(),
        "{} of {} layouts differ:\n{}",
        told.len(),
        all.len(),
        told.join("\n")
    );
}

#[test]
fn a_file_without_submission_gives_the_same_numbers() {
    let plain = audit(joined("t,air,wall\n", ",").as_bytes(), "");
    let folder = Folder::new();
    folder.write("run.csv", joined("", ";"));
    let arguments = [
        "run.csv", "--case", CASE, "--column", "time=1", "--column", "air=2", "--column", "wall=3",
    ];
    let ran = folder.audit(&arguments);
    assert_eq!(differences(&ran, &plain, false), "");
}

/// The light oscillator from a start of 1e-103 m, with exponents of three digits after
/// this letter. All of it is linear: 1e-3 of the peak is put in as an error.
fn tiny_oscillator(letter: &str) -> Ran {
    let case = "mechanical/oscillator-light";
    let folder = Folder::new();
    let exact = folder.run(&["exact", case, "--set", "x_0=1e-103", "--step", "0.1"]);
    assert_eq!(exact.status, 0, "{}", exact.stderr);
    let mut text = "t x v\n".to_owned();
    for (k, line) in exact.stdout.lines().skip(1).enumerate() {
        let values: Vec<f64> = line
            .split(',')
            .map(|field| field.parse().unwrap())
            .collect();
        let x = values[1] + 1e-106 * (0.37 * k as f64).sin();
        let row = [x, values[2]].map(|x| exponent(&full(x), letter, 3));
        // A zero has no large exponent to leave the letter out for.
        text += &format!(
            "{} {}\n",
            values[0],
            row.join(" ").replace("0+000", "0E+00")
        );
    }
    folder.write("s/run.txt", text);
    let submission = format!(
        "case = \"{case}\"\n[parameters]\nx_0 = 1e-103\n[limits]\nabsolute = 0\n\
         relative = 1e-2\nrelative_to = \"peak\"\n[[runs]]\nfile = \"run.txt\"\n"
    );
    folder.write("s/submission.toml", submission);
    folder.audit(&["s"])
}

// Fortran leaves the letter out only before three digits: the numbers must be so small,
// and the case with them.
#[test]
fn exponents_without_a_letter_are_read() {
    let [with, without] = ["E", ""].map(tiny_oscillator);
    let worst = with.first_run()["channels"][0]["worst_error"]
        .as_f64()
        .unwrap();
    assert!((worst - 1e-106).abs() < 1e-109, "{worst:e}");
    assert_eq!(differences(&without, &with, false), "");
}

// The bound of the exact values is relative to the channel's peak (design.md, section
// 4): a case with small numbers must not become undecided for it.
#[test]
fn small_numbers_are_decided_like_others() {
    let ran = tiny_oscillator("E");
    assert_eq!((ran.status, ran.verdict()), (0, "pass"), "{}", ran.seen());
}
