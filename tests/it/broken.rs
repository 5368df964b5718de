use std::io::{BufRead, BufReader, Read};
use std::process::{Command, Stdio};

use crate::folder::Expected::{self, Fails, FailsAmong, Passes, Refused, Undecided};
use crate::folder::{
    CASE, Folder, LINE, Ran, cell, disagreement, edited, printed, program, report, rows, sound,
};

/// A name, the bytes, what is expected.
type Broken = (&'static str, Vec<u8>, Expected);

/// A column more, with this text in line 20 and in the others what `usual` says.
fn unselected(usual: &str, text: &str) -> Vec<u8> {
    edited(|lines| {
        for (index, line) in lines.iter_mut().enumerate() {
            let field = if index == 0 { "other" } else { usual };
            *line += &format!(",{}", if index + 1 == LINE { text } else { field });
        }
    })
}

fn audit(bytes: &[u8], stated: &str) -> Ran {
    let folder = Folder::new();
    folder.write("s/run.csv", bytes);
    let text = format!("case = \"{CASE}\"\n{stated}\n[[runs]]\nfile = \"run.csv\"\n");
    folder.write("s/submission.toml", text);
    folder.audit(&["s"])
}

fn check(all: Vec<Broken>) {
    let check = |(name, bytes, expected): &Broken| {
        let text = String::from_utf8_lossy(bytes);
        let row: String = text
            .lines()
            .nth(LINE - 1)
            .unwrap_or("")
            .chars()
            .take(60)
            .collect();
        let told = disagreement(&audit(bytes, ""), expected)?;
        Some(format!("{name} (line 20: {row:?}): {told}"))
    };
    report(all.iter().filter_map(check).collect(), all.len());
}

const NO_NUMBERS: [&str; 12] = [
    "NaN",
    "-nan",
    "inf",
    "-Infinity",
    "1e400",
    "",
    "  ",
    "***",
    "abc",
    "1.2.3",
    "0x1p3",
    "-",
];

#[test]
fn values_that_are_none() {
    let mut all: Vec<Broken> = Vec::new();
    for word in NO_NUMBERS {
        all.push(("a value", cell(1, word), Fails("not-a-number 20")));
        all.push(("a time stamp", cell(0, word), Fails("not-a-number 20")));
        all.push(("an unselected field", unselected("7", word), Passes));
    }
    for word in ["nan", "", "idle"] {
        all.push(("an unselected column", unselected(word, word), Passes));
    }
    let first = edited(|lines| lines[1] = "0,nan,3".into());
    all.push(("the first value", first, Fails("not-a-number 2")));
    let header = edited(|lines| lines[19] = lines[0].clone());
    all.push(("a second header", header, Fails("not-a-number 20")));
    all.push((
        "no value at all",
        printed(|_| "nan".into()),
        FailsAmong("not-a-number 2"),
    ));
    check(all);
}

/// A header, what the submission states, what is expected.
#[rustfmt::skip]
const COLUMNS: [(&str, &str, Expected); 22] = [
    ("t,air,wal", "", Fails("column-missing 0")),
    ("t,air,wall", "columns.wall = 'T2'", Fails("column-missing 0")),
    ("t,air,wall", "columns.wall = 9", Fails("column-missing 0")),
    ("t,air [V],wall", "", Fails("column-missing 0")),
    ("t,air,air", "", Refused("`air` fits several columns")),
    ("t,time,air", "", Refused("several columns could be the time")),
    ("hour,air,wall", "", Refused("no column of time stamps")),
    ("t [V],air,wall", "", Refused("`V`")),
    ("", "", Refused("the file has no header")),
    ("", "columns.time = 't'", Refused("the file has no header")),
    ("t,air,wall", "columns.time = 9", Refused("column 9 of 3")),
    ("t,air,wall", "columns.air = 1", Refused("column 1 is given to both time and")),
    ("t,air,wall", "columns.air = 3", Refused("column 3 is given to both")),
    ("t,air,wall", "columns.air.unit = 'degF'", Fails("")),
    ("t,air [K],wall", "", Fails("")),
    ("t [min],air,wall", "", Fails("window-not-covered 0")),
    ("t,air,wall", "columns.time.unit = 'ms'", FailsAmong("window-not-covered 0")),
    ("t,wall,air", "", Fails("")),
    ("t,air,wall", "limits = { absolute = 0, relative = 0 }", Fails("")),
    ("t,air,wall", "limits.air.absolute = 0", Fails("")),
    ("t,air,wall", "limits = { absolute = 1e300, relative = 1e300 }", Passes),
    ("t,air,wall", "layout.skip_lines = 5000", Refused("skip_lines")),
];

#[test]
fn columns_that_do_not_fit() {
    let check = |(header, stated, expected): &(&str, &str, Expected)| {
        let bytes = match *header {
            "" => edited(|lines| drop(lines.remove(0))),
            header => edited(|lines| lines[0] = header.into()),
        };
        let told = disagreement(&audit(&bytes, stated), expected)?;
        Some(format!("{header:?}, {stated:?}: {told}"))
    };
    report(COLUMNS.iter().filter_map(check).collect(), COLUMNS.len());
}

#[test]
fn columns_that_are_not_there_or_twice() {
    let without = edited(|lines| {
        lines
            .iter_mut()
            .for_each(|line| line.truncate(line.rfind(',').unwrap()));
    });
    let two_more = edited(|lines| {
        lines.iter_mut().for_each(|line| *line += ",1,2");
        lines[0] = "t,air,wall,x,x".into();
    });
    let kelvin = printed(|x| (x + 273.15).to_string());
    check(vec![
        ("a missing column", without, Fails("column-missing 0")),
        ("two of a name that is not used", two_more, Passes),
        ("kelvin not stated", kelvin, Fails("")),
    ]);
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
#[test]
fn rows_that_are_not_in_order() {
    let moved = |lines: &mut Vec<String>| {
        let row = lines.remove(19);
        lines.push(row);
    };
    let two_holes = |lines: &mut Vec<String>| {
        lines.drain(99..102);
        lines.remove(19);
    };
    check(vec![
        ("a missing row", edited(|l| drop(l.remove(19))), Fails("missing-rows 20")),
        ("several missing", edited(|l| drop(l.drain(19..25))), Fails("missing-rows 20")),
        ("two holes", edited(two_holes), Fails("missing-rows 20, missing-rows 99")),
        ("a doubled row", edited(|l| l.insert(19, l[19].clone())), Fails("repeated-stamp 21")),
        ("swapped rows", edited(|l| l.swap(19, 20)), Fails("time-not-increasing 21")),
        ("reversed", edited(|l| l[1..].reverse()), FailsAmong("time-not-increasing 3")),
        ("a row at the end", edited(moved), FailsAmong("time-not-increasing 242")),
        ("twice", edited(|l| l.extend_from_within(1..)), FailsAmong("time-not-increasing 243")),
        ("late start", edited(|l| drop(l.remove(1))), Fails("window-not-covered 0")),
        ("early end", edited(|l| drop(l.pop())), Fails("window-not-covered 0")),
        ("one row", edited(|l| l.truncate(2)), FailsAmong("window-not-covered 0, too-few-rows 0")),
        ("two rows", edited(|l| l.truncate(3)), Fails("window-not-covered 0, too-few-rows 0")),
        ("a short row", edited(|l| l[19] = "1080,4".into()), Fails("row-length 20")),
        ("a long row", edited(|l| l[19] += ",1"), Fails("row-length 20")),
        ("the time alone", edited(|l| l[19] = "1080".into()), Fails("row-length 20")),
        ("a word for a row", edited(|l| l[19] = "killed".into()), FailsAmong("row-length 20")),
    ]);
}

// A jump of the input may be written from both sides.
#[test]
fn a_stamp_may_be_repeated_at_a_jump() {
    let doubled = edited(|lines| {
        lines.insert(27, lines[26].clone());
        lines.insert(12, lines[11].clone());
    });
    let ran = audit(&doubled, "");
    assert_eq!((ran.status, ran.verdict()), (0, "pass"), "{}", ran.seen());
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
#[test]
fn files_that_break_off() {
    let cut = |mut bytes: Vec<u8>, by: usize| {
        bytes.truncate(bytes.len() - by);
        bytes
    };
    // The last line is 14400 and two values below ten.
    let six = |by: usize| cut(printed(|x| format!("{x:.6}")), by);
    let full = |by: usize| cut(printed(|x| format!("{x:.16e}")), by);
    const CUT: Expected = FailsAmong("cut-off-line 242");
    check(vec![
        ("whole but for the line end", six(1), Passes),
        ("digits cut off", six(3), CUT),
        ("decimals cut off", six(8), CUT),
        ("the last field cut off", six(9), CUT),
        ("fields cut off", six(12), CUT),
        ("the stamp cut off", six(20), CUT),
        ("the exponent cut off", full(2), CUT),
        // Every other row has sixteen decimals: this one was cut, though what is left of
        // it reads as a number.
        ("digits before the exponent cut off", full(10), CUT),
    ]);
}

/// The file in UTF-16, after a mark.
fn utf16(mark: u16, bytes_of: impl Fn(u16) -> [u8; 2]) -> Vec<u8> {
    let text = String::from_utf8(sound()).unwrap();
    std::iter::once(mark)
        .chain(text.encode_utf16())
        .flat_map(bytes_of)
        .collect()
}

/// So many columns of sixty digits more, and a zero byte in a value of this line.
fn with_zero(line: usize, columns: usize) -> Vec<u8> {
    edited(|lines| {
        let more = format!(",{}", "7".repeat(60)).repeat(columns);
        lines.iter_mut().for_each(|text| *text += &more);
        lines[0] = format!("t,air,wall{}", ",x".repeat(columns));
        lines[line - 1].insert(8, '\0');
    })
}

// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
#[test]
fn files_that_are_no_tables() {
    const EMPTY: Expected = Fails("empty-file 0");
    let noise = |k: u32| (k.wrapping_mul(2_654_435_761) >> 23) as u8;
    let noise: Vec<u8> = (0..5000).map(noise).collect();
    let no_zero: Vec<u8> = noise.iter().map(|&byte| byte.max(1)).collect();
    let gzip = |rest: &[u8]| [&[0x1f, 0x8b, 8, 8, 1, 2, 3, 4, 2, 3], rest].concat();
    let long = |line: usize| edited(|lines| lines[line - 1] += &" ".repeat(2 << 20));
    let prose = b"a story\nof two lines\n".to_vec();
    check(vec![
        ("empty", Vec::new(), EMPTY),
        ("header only", b"t,air,wall\n".to_vec(), EMPTY),
        ("header only, no line end", b"t,air,wall".to_vec(), EMPTY),
        ("line ends only", b"\n\r\n\n".to_vec(), EMPTY),
        ("comments only", b"# t,air,wall\n# 0,4,3\n".to_vec(), EMPTY),
        ("byte order mark only", b"\xef\xbb\xbf".to_vec(), EMPTY),
        ("prose", prose, Refused("s/run.csv:2:1: no rows of numbers found")),
        ("noise", noise, Refused("s/run.csv: this file is not text")),
        ("noise without a zero", no_zero.clone(), Refused("s/run.csv")),
        ("UTF-16, little end first", utf16(0xfeff, u16::to_le_bytes), Refused("UTF-16")),
        ("UTF-16, big end first", utf16(0xfeff, u16::to_be_bytes), Refused("UTF-16")),
        ("gzip", gzip(&[0, 5, 7]), Refused("gzip")),
        ("gzip without a zero", gzip(&no_zero), Refused("gzip")),
        ("a zero byte", with_zero(20, 1), Refused("zero")),
        // Ten such columns put line 200 behind what the layout is found from.
        ("a zero byte far down", with_zero(200, 10), FailsAmong("not-a-number 200")),
        ("a long first line", long(1), Refused("s/run.csv:1:1: this line is longer")),
        ("a long line", long(20), Refused("s/run.csv:20:1: this line is longer")),
    ]);
}

// Errors that the printed digits cannot resolve must not fail a file.
#[test]
fn prints_too_coarse_to_tell() {
    let decimals = |decimals: usize| printed(move |x| format!("{x:.decimals$}"));
    // In one row alone the error is about 1e-3 with half a unit of 5e-4 on top.
    let one_row = edited(|lines| {
        for (line, [t, air, wall]) in lines.iter_mut().skip(1).zip(rows()) {
            let more = if *t == 1080.0 { 1e-3 } else { 0.0 };
            *line = format!("{t},{:.3},{wall:.3}", (air * 1e3).round() / 1e3 + more);
        }
    });
    let cases = [
        (decimals(2), 1.2e-3, Undecided),
        (decimals(4), 1.2e-3, Passes),
        (decimals(2), 2e-2, Passes),
        (decimals(0), 0.4, Undecided),
        (one_row, 1.2e-3, Undecided),
    ];
    let check = |(bytes, limit, expected): &(Vec<u8>, f64, Expected)| {
        let limits = format!("limits = {{ absolute = {limit}, relative = 0 }}");
        disagreement(&audit(bytes, &limits), expected)
    };
    report(cases.iter().filter_map(check).collect(), cases.len());
}

// A control is in order while it fails; a broken file is one more way to fail.
#[test]
fn a_broken_control_is_in_order() {
    let [broken, good] = [cell(1, "nan"), sound()].map(|bytes| audit(&bytes, "expect = 'fail'"));
    assert_eq!(
        (broken.status, broken.verdict()),
        (0, "fail"),
        "{}",
        broken.seen()
    );
    assert_eq!(
        (good.status, good.verdict()),
        (1, "pass"),
        "{}",
        good.seen()
    );
}

// One submission that cannot be audited does not keep the others from it.
#[test]
fn the_others_are_audited_all_the_same() {
    let folder = Folder::new();
    let submission = format!("case = \"{CASE}\"\n[[runs]]\nfile = \"run.csv\"\n");
    for (name, bytes) in [
        ("a", b"\x1f\x8b\0".to_vec()),
        ("b", sound()),
        ("c", cell(1, "nan")),
    ] {
        folder.write(&format!("all/{name}/run.csv"), bytes);
        folder.write(&format!("all/{name}/submission.toml"), &submission);
    }
    let ran = folder.audit(&["all"]);
    assert_eq!(ran.status, 2, "{}", ran.seen());
    let verdict = |index: usize| ran.report["submissions"][index]["verdict"].as_str();
    assert_eq!(
        [verdict(0), verdict(1), verdict(2)],
        [Some("pass"), Some("fail"), None]
    );
    assert_eq!(ran.report["not_audited"][0]["name"], "a");
}

/// After the line with the case; ` / ` stands for a line end. Then the place of the
/// complaint and what it says. A run follows where none is stated.
const MISTAKES: &str = r#"
bogus = 1 => 2:1: => unknown field `bogus`
[claims] / methods = "Heun" => 3:1: => unknown field `methods`
[layout] / header = 1 => 3:1: => unknown field `header`
[[runs]] / file = "run.csv" / files = 1 => 4:1: => unknown field `files`
[columns] / air = { name = "T1" } => 3:9: => unknown field `name`
[limits] / air = { absolut = 1 } => 3:9: => unknown field `absolut`
[limits] / absolut = 1 => 3:1: => `absolut` is no limit
[parameters] / R_x = 2 => 3:1: => did you mean `R_w`
[parameters] / R_w = nan => 3:7: => not a finite number
[columns] / airs = 2 => 3:1: => did you mean `air`
[limits] / airs = { absolute = 1 } => 3:1: => `airs`
[limits] / absolute = -1e-3 => 3:12: => not below zero
[limits] / relative = nan => 3:12: => must be finite
[limits] / absolute = inf => 3:12: => must be finite
[limits] / air = { relative = -1 } => 3: => not below zero
[limits] / order_slack = nan => 3:15: => must be finite
[limits] / absolute = "small" => 3: => `absolute`
[limits] / relative_to = "mean" => 3:15: => expected "peak" or "value"
[claims] / order = -1 => 3:9: => `order` must lie above 0
expect = "maybe" => 2:10: => `expect` is `maybe`, expected "pass"
[columns] / air = { unit = "V" } => 3: => unit `V` does not convert to `degC`
[columns] / air = { unit = "smoot" } => 3: => unit `smoot` is not known
[columns] / time = { unit = "m" } => 3: => unit `m` does not convert to `s`
[columns] / air = 0 => 3:7: => a column by name or number from 1
[columns] / air = 1.5 => 3:7: => a column by name or number from 1
[layout] / separator = "|" => 3:13: => `separator` is `|`
[layout] / separator = "," / decimal = "," => 4:11: => both separator and decimal sign
[layout] / comment = "" => 3:11: => must not be empty or begin like a number
[layout] / comment = "1." => 3:11: => must not be empty or begin like a number
[limits] / order_slack = 3 => 3:15: => `order_slack` must not be above 1
[layout] / digits = 0 => 3:10: => between 1 and 17
[layout] / skip_lines = -1 => 3:14: =>
runs = [] => => the submission has no runs
[[runs]] / file = "run.csv" / step = 60 / tolerance = 1e-6 => 2: => not both
[[runs]] / file = "run.csv" / step = 0 => 4:8: => finite and above zero
[[runs]] / file = "run.csv" / step = nan => 4:8: => finite and above zero
[[runs]] / file = "run.csv" / step = "60 s" => 4:8: => expected a number
[[runs]] / file = "run.csv" / role = "best" => 4:8: => `role` is `best`
[[runs]] / step = 60 => 2:1: => missing field `file`
[[runs]] / file = "../run.csv" => 3:8: => does not lie in the submission's own folder
[[runs]] / file = "a/../../run.csv" => 3:8: => does not lie in the submission's own folder
[[runs]] / file = "/etc/hostname" => 3:8: => does not lie in the submission's own folder
[[runs]] / file = "" => 3:8: => does not lie in the submission's own folder
[[runs]] / file = "a\u0000b" => 3:8: => does not lie in the submission's own folder
[[runs]] / file = "none.csv" => 3:8: => there is no file `none.csv`
[[runs]] / file = "inner" => 3:8: => is not a plain file
[[runs]] / file = "." => 3:8: => is not a plain file
producer = "alder => 2: =>
producer = => 2: =>
producer = "a" / producer = "b" => 3:1: => duplicate key
t,air,wall => 2: =>
producer = 5 => 2:12: => expected text in quotes
"#;

fn is_refused(ran: &Ran, place: &str, text: &str) -> bool {
    let fault = ran.report["not_audited"][0]["faults"][0]
        .as_str()
        .unwrap_or("");
    let place = format!("s/submission.toml:{place}");
    let told = fault.starts_with(&place) && fault.contains(text) && ran.seen().contains(&place);
    ran.status == 2 && told
}

#[test]
fn submissions_with_mistakes() {
    let folder = Folder::new();
    folder.write("s/run.csv", sound());
    folder.write("run.csv", sound());
    folder.write("s/inner/note.txt", "");
    let (mut told, mut all) = (Vec::new(), 0);
    let mut check = |name: &str, submission: &[u8], place: &str, text: &str| {
        all += 1;
        folder.write("s/submission.toml", submission);
        let ran = folder.audit(&["s"]);
        if !is_refused(&ran, place, text) {
            let seen: String = ran.seen().chars().take(300).collect();
            told.push(format!(
                "{name}: expected {place} {text}; got {}: {seen}",
                ran.status
            ));
        }
    };
    let run = "[[runs]]\nfile = \"run.csv\"\n";
    let of_case = |case: &str, rest: &str| format!("case = {case}\n{rest}").into_bytes();
    let case = format!("\"{CASE}\"");
    for line in MISTAKES.trim().lines() {
        let mut parts = line.split("=>").map(str::trim);
        let [stated, place, text] = [(); 3].map(|()| parts.next().unwrap());
        let rest = if stated.contains("runs") { "" } else { run };
        let submission = of_case(&case, &format!("{}\n{rest}", stated.replace(" / ", "\n")));
        check(stated, &submission, place, text);
    }
    let misspelled = of_case("\"thermal/cold-room-defrst\"", run);
    check(
        "misspelled case",
        &misspelled,
        "1:8:",
        &format!("did you mean `{CASE}`?"),
    );
    check(
        "unknown case",
        &of_case("\"plumbing\"", run),
        "1:8:",
        "there is no case `plumbing`",
    );
    check(
        "case by number",
        &of_case("7", run),
        "1:8:",
        "expected text in quotes",
    );
    check("no case", run.as_bytes(), "", "names no case");
    check("empty", b"", "", "no runs");
    check("no runs", &of_case(&case, ""), "", "no runs");
    check(
        "too many runs",
        &of_case(&case, &run.repeat(1001)),
        "",
        "at most 1000 runs",
    );
    check(
        "too large",
        " ".repeat((1 << 20) + 1).as_bytes(),
        "",
        "at most 1048576 are read",
    );
    check(
        "not UTF-8",
        b"case = \"a\"\nproducer = \"\xfc\"\n",
        "2:13:",
        "not UTF-8",
    );
    check("a zero byte", b"case = \"a\0b\"\n", "1:", "");
    report(told, all);
}

// Two runs of one step show no order; a claim of one stays open.
#[test]
fn equal_steps_show_no_order() {
    let run = "[[runs]]\nfile = \"run.csv\"\nstep = 60\n";
    let twin = run.replace("run.csv", "twin.csv");
    let folder = Folder::new();
    folder.write("s/run.csv", sound());
    folder.write("s/twin.csv", sound());
    let text = format!("case = \"{CASE}\"\n[claims]\norder = 1\n{run}{twin}");
    folder.write("s/submission.toml", text);
    let ran = folder.audit(&["s"]);
    assert_eq!(
        (ran.status, ran.verdict()),
        (1, "undecided"),
        "{}",
        ran.seen()
    );
    assert!(ran.report["submissions"][0]["orders"][0]["observed"].is_null());
}

// The same file under two names of steps would show any order.
#[test]
fn a_file_that_is_named_twice_is_refused() {
    let folder = Folder::new();
    folder.write("s/run.csv", sound());
    let runs =
        "[[runs]]\nfile = \"run.csv\"\nstep = 60\n[[runs]]\nfile = \"./run.csv\"\nstep = 30\n";
    folder.write("s/submission.toml", format!("case = \"{CASE}\"\n{runs}"));
    let ran = folder.audit(&["s"]);
    assert_eq!(ran.status, 2, "{}", ran.seen());
    assert!(
        ran.seen().contains("file `./run.csv` is named twice"),
        "{}",
        ran.seen()
    );
}

// Editors put these in; they are no mistake.
#[test]
fn a_byte_order_mark_and_crlf_do_not_matter() {
    let folder = Folder::new();
    folder.write("s/run.csv", sound());
    let text = format!("\u{feff}case = \"{CASE}\"\r\n[[runs]]\r\nfile = \"run.csv\"\r\n");
    folder.write("s/submission.toml", text);
    let ran = folder.audit(&["s"]);
    assert_eq!((ran.status, ran.verdict()), (0, "pass"), "{}", ran.seen());
}

#[cfg(unix)]
#[test]
fn links_and_pipes() {
    use std::os::unix::fs::symlink;
    let folder = Folder::new();
    folder.write("outside/run.csv", sound());
    folder.write("s/inside.csv", sound());
    symlink(folder.path("outside/run.csv"), folder.path("s/out.csv")).unwrap();
    symlink(folder.path("outside"), folder.path("s/out")).unwrap();
    symlink("nowhere", folder.path("s/dangling.csv")).unwrap();
    symlink("round.csv", folder.path("s/round.csv")).unwrap();
    symlink("/dev/zero", folder.path("s/zero.csv")).unwrap();
    symlink("inside.csv", folder.path("s/in.csv")).unwrap();
    let made = Command::new("mkfifo")
        .arg(folder.path("s/pipe.csv"))
        .status();
    assert!(made.unwrap().success());
    let audit = |file: &str| {
        let text = format!("case = \"{CASE}\"\n[[runs]]\nfile = \"{file}\"\n");
        folder.write("s/submission.toml", text);
        folder.audit(&["s"])
    };
    for (file, text) in [
        ("out.csv", "leads out of the folder"),
        ("out/run.csv", "leads out of the folder"),
        ("zero.csv", "leads out of the folder"),
        ("dangling.csv", "there is no file `dangling.csv`"),
        ("round.csv", "cannot be read"),
        ("pipe.csv", "is not a plain file"),
    ] {
        let ran = audit(file);
        assert!(is_refused(&ran, "3:8: ", text), "{file}: {}", ran.seen());
    }
    assert_eq!(audit("in.csv").verdict(), "pass");
    let pipe = folder.audit(&["s/pipe.csv", "--case", CASE]);
    assert!(
        pipe.status == 2 && pipe.seen().contains("not a plain file"),
        "{}",
        pipe.seen()
    );
}

/// Arguments of `audit` (`CASE` with its option where there is a `+`), and what is said.
const COMMAND_LINES: &str = r#"
=> <PATH>
empty => empty: no `submission.toml` is found
nowhere => nowhere: there is no such file or folder
nowhere.csv + => nowhere.csv: there is no such file
s + => s: --case goes with trajectory files
run.csv => --case
run.csv --case cold-room-defrost => did you mean `thermal/cold-room-defrost`
run.csv run.json + --step 60 => --step goes with one file
s --step 60 => --case
run.csv + --step 0 => above zero
run.csv + --step nan => finite number
run.csv + --step=-60 => above zero
run.csv + --absolute=-1 => not below zero
run.csv + --relative inf => finite number
run.csv + --column air => expected NAME=VALUE
run.csv + --column =2 => expected NAME=VALUE
run.csv + --column air= => expected NAME=VALUE
run.csv + --column airs=2 => did you mean `air`
run.csv + --column air=2 --column air=3 => twice for `air`
run.csv + --column air=2 --column wall=2 => column 2 is given to both
run.csv + --set R_x=1 => did you mean `R_w`
run.csv + --set R_w=nan => finite number
run.csv + --set R_w=0 => not a finite number
run.csv + --threads 0 => --threads
run.csv + --write none/report.json => the folder of this report is not there
run.csv + --write report.pdf => no report is known by the ending `pdf`
run.csv + --write report => report: 
run.csv + --write folder.json => folder.json: 
run.csv + --cases nowhere => nowhere: 
run.json + --write run.json => would overwrite
s --write s/run.json => would overwrite
s --write s/../s/run.json => would overwrite
"#;

#[test]
fn command_lines_that_cannot_be_done() {
    let folder = Folder::new();
    for name in ["run.csv", "run.json", "s/run.json"] {
        folder.write(name, sound());
    }
    folder.write("empty/note.txt", "");
    folder.write("folder.json/note.txt", "");
    let text = format!("case = \"{CASE}\"\n[[runs]]\nfile = \"run.json\"\n");
    folder.write("s/submission.toml", text);
    let mut told = Vec::new();
    for line in COMMAND_LINES.trim().lines() {
        let (typed, text) = line.split_once("=>").unwrap();
        let typed = typed.replace('+', &format!("--case {CASE}"));
        let arguments: Vec<&str> = ["audit"]
            .into_iter()
            .chain(typed.split_whitespace())
            .collect();
        let ran = folder.run(&arguments);
        if ran.status != 2 || !ran.seen().contains(text.trim()) {
            told.push(format!("{line}; got {}: {}", ran.status, ran.seen()));
        }
    }
    for name in ["run.json", "s/run.json"] {
        assert_eq!(std::fs::read(folder.path(name)).unwrap(), sound(), "{name}");
    }
    report(told, COMMAND_LINES.trim().lines().count());
}

// Whoever reads the output may have seen enough after a line. The verdict stands.
#[test]
fn a_closed_pipe_is_a_quiet_end() {
    let folder = Folder::new();
    folder.write("run.csv", cell(1, "nan"));
    let (file, written) = (folder.path("run.csv"), folder.path("report.json"));
    let (file, written) = (file.to_str().unwrap(), written.to_str().unwrap());
    let commands: [(&[&str], i32); 4] = [
        (&["exact", CASE, "--step", "0.5"], 0),
        (&["cases"], 0),
        (&["case", CASE, "--json"], 0),
        (&["audit", file, "--case", CASE, "--write", written], 1),
    ];
    let mut wrong = Vec::new();
    for (arguments, status) in commands {
        for lines in 0..2 {
            let mut command = Command::new(program());
            let command = command
                .args(arguments)
                .stdout(Stdio::piped())
                .stderr(Stdio::piped());
            let mut child = command.spawn().unwrap();
            let mut output = BufReader::with_capacity(16, child.stdout.take().unwrap());
            for _ in 0..lines {
                output.read_line(&mut String::new()).unwrap();
            }
            drop(output);
            let mut told = String::new();
            child
                .stderr
                .take()
                .unwrap()
                .read_to_string(&mut told)
                .unwrap();
            let ended = child.wait().unwrap().code();
            if (ended, told.as_str()) != (Some(status), "") {
                wrong.push(format!(
                    "{arguments:?} after {lines} line(s): {ended:?}, {told}"
                ));
            }
        }
    }
    report(wrong, 8);
    assert!(folder.path("report.json").is_file());
}

const PUNCTUATION: &[u8] = b",;.-+eE0 \n\r\t\"#[]{}='";

// Damage at random places, the same in every run: bytes replaced, left out, repeated.
// Every audit is looked at for a panic and for its status.
#[test]
fn damaged_bytes_never_panic() {
    let folder = Folder::new();
    let short = edited(|lines| lines.truncate(60));
    let submission = format!(
        "case = \"{CASE}\"\nlimits = {{ absolute = 1e-3, air = {{ relative = 1 }} }}\n\
         columns.air = {{ unit = \"K\" }}\nlayout.skip_lines = 1\n[[runs]]\nfile = \"run.csv\"\n"
    );
    let mut state = 7u64;
    let mut below = |most: usize| {
        state = state
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1);
        (state >> 33) as usize % most
    };
    let mut damage = |bytes: &[u8]| {
        let mut bytes = bytes.to_vec();
        for _ in 0..=below(3) {
            let at = below(bytes.len() - 8);
            let piece = at..at + 1 + below(8);
            match below(4) {
                0 => bytes[at] = below(256) as u8,
                1 => bytes[at] = PUNCTUATION[below(PUNCTUATION.len())],
                2 => drop(bytes.drain(piece)),
                _ => bytes.extend_from_within(piece),
            }
        }
        bytes
    };
    for _ in 0..100 {
        folder.write("s/submission.toml", &submission);
        folder.write("s/run.csv", damage(&short));
        folder.audit(&["s"]);
        folder.write("s/submission.toml", damage(submission.as_bytes()));
        folder.audit(&["s"]);
    }
}
