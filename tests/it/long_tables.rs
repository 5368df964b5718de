use std::io::Write;

use serde_json::Value;
use stepgauge::case::{Case, Library, Replacements};
use stepgauge::trajectory::{ColumnName, LongStated, Source, Stated};

use crate::folder::{CASE, Folder, LINE, Ran, edited, printed, rows, sound};
use crate::long_files::try_compare;

const LONG: &str = "[layout]\nlong = { name = \"variable\", value = \"value\" }\n";

fn audit_case(case: &str, bytes: &[u8], stated: &str) -> Ran {
    let folder = Folder::new();
    folder.write("s/run.txt", bytes);
    let submission = format!("case = \"{case}\"\n{stated}\n[[runs]]\nfile = \"run.txt\"\n");
    folder.write("s/submission.toml", submission);
    folder.audit(&["s"])
}

fn audit(bytes: &[u8], stated: &str) -> Ran {
    audit_case(CASE, bytes, stated)
}

/// In which order the cells of a table become rows.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Order {
    ByTime,
    /// The channels of each time begin with another one.
    Turned,
    /// All rows of the last channel, then those of the one before it.
    ByChannel,
}

const ORDERS: [Order; 3] = [Order::ByTime, Order::Turned, Order::ByChannel];

/// Stamp, name and value of every cell of a table.
fn cells(table: &str, order: Order) -> Vec<[String; 3]> {
    let split = |line: &str| line.split(',').map(str::to_owned).collect::<Vec<_>>();
    let mut lines = table.lines().map(split);
    let names = lines.next().unwrap();
    let lines: Vec<Vec<String>> = lines.collect();
    let cell = |line: &[String], column: usize| {
        [line[0].clone(), names[column].clone(), line[column].clone()]
    };
    let channels = names.len() - 1;
    let mut cells = Vec::new();
    match order {
        Order::ByChannel => {
            for column in (1..=channels).rev() {
                cells.extend(lines.iter().map(|line| cell(line, column)));
            }
        }
        _ => {
            for (number, line) in lines.iter().enumerate() {
                let turn = if order == Order::Turned { number } else { 0 };
                cells.extend((0..channels).map(|k| cell(line, 1 + (k + turn) % channels)));
            }
        }
    }
    cells
}

/// The same rows one below the other.
fn long(table: &[u8], order: Order) -> String {
    let cells = cells(std::str::from_utf8(table).unwrap(), order);
    let rows: Vec<String> = cells.iter().map(|cell| cell.join(",") + "\n").collect();
    "t,variable,value\n".to_owned() + &rows.concat()
}

/// All that was found, without the layout and without the lines of findings, which must differ.
fn found(ran: &Ran) -> Value {
    let mut report = ran.report.clone();
    let Some(runs) = report.pointer_mut("/submissions/0/runs") else {
        panic!("{}", ran.seen());
    };
    for run in runs.as_array_mut().unwrap() {
        run["layout"] = Value::Null;
        for finding in run["findings"].as_array_mut().unwrap() {
            finding["line"] = Value::Null;
        }
    }
    let reasons = report.pointer_mut("/submissions/0/reasons").unwrap();
    for reason in reasons.as_array_mut().unwrap() {
        // `run.txt:LINE: what is wrong`
        let text = reason.as_str().unwrap();
        if let Some((_, (line, text))) = text
            .split_once("run.txt:")
            .and_then(|(before, rest)| Some((before, rest.split_once(": ")?)))
            && line.parse::<u64>().is_ok()
        {
            *reason = text.into();
        }
    }
    report
}

#[test]
fn every_order_gives_the_report_of_the_wide_twin() {
    let claim = "[claims]\nmethod = \"forward Euler\"\n";
    let long_and_claim = format!("{LONG}{claim}");
    let tables: [(&str, Vec<u8>); 4] = [
        ("17 digits", printed(|x| format!("{x:.16e}"))),
        ("6 digits", printed(|x| format!("{x:.5e}"))),
        ("6 decimals", printed(|x| format!("{x:.6}"))),
        ("shortest", sound()),
    ];
    for (name, table) in &tables {
        let twin = audit(table, claim);
        assert_eq!(twin.first_run()["rows"], rows().len(), "{}", twin.seen());
        for order in ORDERS {
            let ran = audit(long(table, order).as_bytes(), &long_and_claim);
            assert_eq!(ran.status, twin.status, "{name}, {order:?}: {}", ran.seen());
            assert_eq!(found(&ran), found(&twin), "{name}, {order:?}");
        }
    }
}

// The digits of one channel say nothing of another: each is judged on its own values.
#[test]
fn each_channel_has_its_own_digits() {
    let table = edited(|lines| {
        for (line, [t, air, wall]) in lines.iter_mut().skip(1).zip(rows()) {
            *line = format!("{t},{air:.4},{wall:.16e}");
        }
    });
    let twin = audit(&table, "");
    for order in ORDERS {
        let ran = audit(long(&table, order).as_bytes(), LONG);
        let digits = |place: usize| ran.first_run()["channels"][place]["digits"].clone();
        assert_eq!(digits(0), "4 decimals");
        assert_ne!(digits(0), digits(1));
        assert_eq!(found(&ran), found(&twin), "{order:?}");
    }
}

#[test]
fn many_channels_and_unused_names() {
    let case = "electrical/rc-ladder-5";
    let exact = Folder::new().run(&["exact", case, "--step", "0.05"]).stdout;
    let mut table = String::new();
    for (number, line) in exact.lines().enumerate() {
        let unused = if number == 0 {
            "pump".to_owned()
        } else {
            format!("{number}")
        };
        table += &format!("{line},{unused}\n");
    }
    let twin = audit_case(case, table.as_bytes(), "");
    let channels = twin.first_run()["channels"].as_array().map_or(0, Vec::len);
    assert!(channels >= 5, "{}", twin.seen());
    for order in ORDERS {
        let ran = audit_case(case, long(table.as_bytes(), order).as_bytes(), LONG);
        assert_eq!(found(&ran), found(&twin), "{order:?}");
    }
}

/// The wide file with something wrong in it, and a word for what is found.
fn faulty() -> Vec<(&'static str, Vec<u8>)> {
    let jump = |lines: &mut Vec<String>, place: usize| {
        let again = lines[place].clone();
        lines.insert(place, again);
    };
    vec![
        ("", sound()),
        ("missing-rows", edited(|lines| drop(lines.remove(LINE)))),
        (
            "time-not-increasing",
            edited(|lines| lines.swap(LINE, LINE + 1)),
        ),
        // Line 12 has t = 600, where the heater is switched on.
        ("repeated-stamp", edited(|lines| jump(lines, 11))),
        ("repeated-stamp", edited(|lines| jump(lines, LINE))),
        (
            "not-a-number",
            edited(|lines| lines[LINE] = "1140,nan,3.1".into()),
        ),
        (
            "not-a-number",
            edited(|lines| lines[LINE] = "1140,abc,3.1".into()),
        ),
        ("window-not-covered", edited(|lines| lines.truncate(200))),
    ]
}

#[test]
fn findings_are_those_of_the_wide_twin() {
    for (kind, table) in faulty() {
        let twin = audit(&table, "");
        for order in ORDERS {
            // Swapped rows of one channel after the other have no order: see below.
            if kind == "time-not-increasing" && order == Order::ByChannel {
                continue;
            }
            let ran = audit(long(&table, order).as_bytes(), LONG);
            let kinds: Vec<String> = ran.findings().into_iter().map(|(kind, _)| kind).collect();
            assert_eq!(kinds.is_empty(), kind.is_empty(), "{kinds:?}");
            assert!(kinds.iter().all(|found| found == kind), "{kinds:?}");
            assert_eq!(found(&ran), found(&twin), "{kind}, {order:?}");
        }
    }
}

/// The cells of each time together, edited.
fn edited_cells(order: Order, edit: impl FnOnce(&mut Vec<String>)) -> Vec<u8> {
    let mut lines: Vec<String> = long(&sound(), order).lines().map(str::to_owned).collect();
    edit(&mut lines);
    (lines.join("\n") + "\n").into_bytes()
}

#[test]
fn faults_have_the_line_of_the_file() {
    use Order::{ByChannel, ByTime};
    // By time line 2k + 2 has air at t = 60 k and the next one wall; by channel wall comes first.
    let rows = rows().len();
    let (air, wall) = (40, 41);
    let lacks_wall = edited_cells(ByTime, |lines| drop(lines.remove(wall - 1)));
    let lacks_air = edited_cells(ByChannel, |lines| drop(lines.remove(rows + 30)));
    let hole = format!("not-a-number {}", rows + 30);
    let short = format!("row-length 31, not-a-number {}", rows + 31);
    let all: Vec<(&str, Vec<u8>, &str)> = vec![
        ("a channel is missing", lacks_wall, "not-a-number 40"),
        ("by channel", lacks_air, "not-a-number 31"),
        (
            "air is missing, and its row would have been the first one",
            edited_cells(ByTime, |lines| drop(lines.remove(air - 1))),
            "not-a-number 40",
        ),
        (
            "the first channel has a hole",
            edited_cells(ByChannel, |lines| drop(lines.remove(30))),
            &hole,
        ),
        (
            "no number",
            edited_cells(ByTime, |lines| lines[wall - 1] = "1140,wall,abc".into()),
            "not-a-number 41",
        ),
        (
            "no value",
            edited_cells(ByTime, |lines| lines[wall - 1] = "1140,wall,".into()),
            "not-a-number 41",
        ),
        (
            "twice",
            edited_cells(ByTime, |lines| lines.insert(air, lines[air - 1].clone())),
            "not-a-number 40, repeated-stamp 41",
        ),
        (
            "twice, behind the others",
            edited_cells(ByTime, |lines| lines.insert(wall, lines[air - 1].clone())),
            "not-a-number 42, repeated-stamp 42",
        ),
        (
            "twice, by channel",
            edited_cells(ByChannel, |lines| lines.insert(31, lines[30].clone())),
            "not-a-number 32, repeated-stamp 32",
        ),
        (
            "a field is missing",
            edited_cells(ByTime, |lines| lines[wall - 1] = "1140,wall".into()),
            "not-a-number 40, row-length 41",
        ),
        (
            "a field too many",
            edited_cells(ByTime, |lines| lines[wall - 1] += ",1"),
            "not-a-number 40, row-length 41",
        ),
        (
            "a field is missing, by channel",
            edited_cells(ByChannel, |lines| lines[30] = "1740,wall".into()),
            &short,
        ),
        (
            "no stamp",
            edited_cells(ByTime, |lines| lines[wall - 1] = ",wall,3.1".into()),
            "not-a-number 40, not-a-number 41",
        ),
        (
            "a name of its own",
            edited_cells(ByTime, |lines| {
                lines[wall - 1] = lines[wall - 1].replace("wall", "hall")
            }),
            "not-a-number 40",
        ),
        (
            "without the last line end",
            {
                let mut bytes = edited_cells(ByTime, |_| {});
                bytes.truncate(bytes.len() - 8);
                bytes
            },
            "window-not-covered 0, cut-off-line 483",
        ),
    ];
    let mut told = Vec::new();
    for (name, bytes, expected) in &all {
        let ran = audit(bytes, LONG);
        let mut found: Vec<String> = ran
            .findings()
            .iter()
            .map(|(k, l)| format!("{k} {l}"))
            .collect();
        found.sort_by_key(|finding| (finding.rsplit(' ').next().map(str::len), finding.clone()));
        let mut expected: Vec<&str> = expected.split(", ").collect();
        expected.sort_by_key(|finding| {
            (
                finding.rsplit(' ').next().map(str::len),
                finding.to_string(),
            )
        });
        if found != *expected || ran.status != 1 {
            told.push(format!(
                "{name}: {found:?}, not {expected:?}: {}",
                ran.seen()
            ));
        }
    }
    assert!(told.is_empty(), "{}", told.join("\n"));
}

#[test]
fn a_missing_value_is_told_in_words() {
    let bytes = edited_cells(Order::ByTime, |lines| drop(lines.remove(40)));
    let seen = audit(&bytes, LONG).seen();
    assert!(
        seen.contains("there is no value of `wall` at this time"),
        "{seen}"
    );
    let bytes = edited_cells(Order::ByTime, |lines| lines[40] = "1140,wall".into());
    let seen = audit(&bytes, LONG).seen();
    assert!(
        seen.contains("this row has 2 fields, the others have 3"),
        "{seen}"
    );
}

#[test]
fn a_channel_whose_name_occurs_nowhere_is_a_missing_column() {
    let text = long(&sound(), Order::ByTime).replace(",wall,", ",hall,");
    let ran = audit(text.as_bytes(), LONG);
    assert_eq!(ran.findings(), [("column-missing".to_owned(), 0)]);
    let seen = ran.seen();
    assert!(
        seen.contains("there is no column `wall`, the names of the rows are `air`, `hall`"),
        "{seen}"
    );
}

/// Rows by time with something else around them: what is stated, and the bytes.
// A table: one entry a line reads better than what rustfmt makes of it.
#[rustfmt::skip]
fn layouts() -> Vec<(&'static str, String, Vec<u8>)> {
    let plain = long(&sound(), Order::ByTime);
    let body = plain.split_once('\n').unwrap().1;
    let also = |keys: &str| format!("{LONG}{keys}\n");
    let columns = |columns: &str| format!("{columns}{LONG}");
    let comma = plain.replace(',', ";").replace('.', ",");
    let cells = cells(std::str::from_utf8(&sound()).unwrap(), Order::ByTime);
    let table = |head: &str, row: &dyn Fn(&str, &str, &str) -> String| -> Vec<u8> {
        let lines = cells.iter().map(|[t, name, value]| row(t, name, value) + "\n");
        (head.to_owned() + &lines.collect::<String>()).into_bytes()
    };
    let numbers = "[layout]\nlong = { name = 2, value = 3 }\n".to_owned();
    let unit = |name: &str| if name == "air" { "air [degC]" } else { "wall (degC)" };
    let mut zipped = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::fast());
    zipped.write_all(plain.as_bytes()).unwrap();
    let text = |text: String| text.into_bytes();
    vec![
        ("quotes", LONG.into(), table("\"t\",\"variable\",\"value\"\n", &|t, n, v| format!("{t},\"{n}\",\"{v}\""))),
        ("semicolons", LONG.into(), text(plain.replace(',', ";"))),
        ("decimal comma", LONG.into(), text(comma.clone())),
        ("decimal comma, stated", also("decimal = ','\nseparator = ';'"), text(comma)),
        ("tabs", LONG.into(), text(plain.replace(',', "\t"))),
        ("blanks", LONG.into(), text(plain.replace(',', "  "))),
        ("blanks around", LONG.into(), text(plain.replace(',', " , "))),
        ("tabs below names with blanks", LONG.into(), table("t variable value\n", &|t, n, v| format!("{t}\t{n}\t{v}"))),
        ("comments", LONG.into(), text(plain.replace("\n1080,air", "\n# 1,2,3\n1080,air").replace("\n1080,wall", "\n  % x\n1080,wall"))),
        ("a comment sign of its own", also("comment = 'REM'"), text(plain.replace("\n1080,", "\nREM 1,2,3\n1080,"))),
        ("blank lines", LONG.into(), text(plain.replace("\n1080,", "\n\n  \n1080,"))),
        ("CRLF", LONG.into(), text(plain.replace('\n', "\r\n"))),
        ("lone CR", LONG.into(), text(plain.replace('\n', "\r"))),
        ("byte order mark", LONG.into(), text(format!("\u{feff}{plain}"))),
        ("titles", LONG.into(), text(format!("Cold room, run 7\n\nby alder 2.3\n{plain}"))),
        ("titles of numbers", LONG.into(), text(format!("7,8,9\n1,2,3\n{plain}"))),
        ("lines skipped", also("skip_lines = 3"), text(format!("7,8,9\n{}", plain.replace("value\n", "value\n1,air,7\n")))),
        ("names in a comment", LONG.into(), text(format!("# {plain}"))),
        ("trailing separators", LONG.into(), text(plain.replace('\n', ",\n"))),
        ("trailing separators below", LONG.into(), table("t,variable,value\n", &|t, n, v| format!("{t},{n},{v},"))),
        ("no last line end", LONG.into(), text(plain.trim_end().to_owned())),
        ("other columns", LONG.into(), table("run,value,x,t,variable,note\n", &|t, n, v| format!("7,{v},nan,{t},{n},a word"))),
        ("other columns, quoted", LONG.into(), table("note,t,variable,value\n", &|t, n, v| format!("\"a, b\",{t},{n},{v}"))),
        ("the time stated by name", columns("[columns]\ntime = 'stamp'\n"), table("x,stamp,variable,value\n", &|t, n, v| format!("0,{t},{n},{v}"))),
        ("the time stated by number", columns("[columns]\ntime = 2\n"), table("x,stamp,variable,value\n", &|t, n, v| format!("0,{t},{n},{v}"))),
        ("channels stated", columns("[columns]\nair = 'T_1'\nwall = { column = 'T_2', unit = 'degC' }\n"),
            table("t,variable,value\n", &|t, n, v| format!("{t},{},{v}", if n == "air" { "T_1" } else { "T_2" }))),
        ("units beside the names", LONG.into(), table("t [s],variable,value\n", &|t, n, v| format!("{t},{},{v}", unit(n)))),
        ("units beside the headers", LONG.into(), table("Time (s),variable,value [degC]\n", &|t, n, v| format!("{t},{n},{v}"))),
        ("units below the headers", LONG.into(), table("t,variable,value\ns,-,degC\n", &|t, n, v| format!("{t},{n},{v}"))),
        ("by number", numbers.clone(), text(plain.clone())),
        ("no header", numbers.clone(), text(body.to_owned())),
        ("no header, time last", "[columns]\ntime = 3\n[layout]\nlong = { name = 1, value = 2 }\n".into(), table("", &|t, n, v| format!("{n};{v};{t}"))),
        ("no header, name first", "[layout]\nlong = { name = 1, value = 2 }\n".into(), table("", &|t, n, v| format!("{n};{v};{t}"))),
        ("a table of its own", "[layout.long]\nname = 'variable'\nvalue = 3\n".into(), text(plain.clone())),
        ("stamps in two texts", LONG.into(), table("t,variable,value\n", &|t, n, v| if n == "air" { format!("{t},{n},{v}") } else { format!("{t}.00,{n},{v}") })),
        ("names in another case", LONG.into(), table("t,variable,value\n", &|t, n, v| format!("{t},{},{v}", n.to_uppercase()))),
        ("gzip", LONG.into(), zipped.finish().unwrap()),
        ("an unused name in between", LONG.into(), table("t,variable,value\n", &|t, n, v| format!("{t},{n},{v}\n{t},x_{n},abc"))),
    ]
}

#[test]
fn every_layout_of_a_long_table_gives_the_same_numbers() {
    let plain = audit(&sound(), "");
    assert_eq!(plain.first_run()["rows"], rows().len());
    let mut told = Vec::new();
    for (name, stated, bytes) in layouts() {
        let ran = audit(&bytes, &stated);
        if ran.report["submissions"][0].is_null() || found(&ran) != found(&plain) {
            told.push(format!("{name}: {}", ran.seen()));
        }
    }
    assert!(told.is_empty(), "{}", told.join("\n"));
}

#[test]
fn units_of_long_tables_are_converted() {
    let table = printed(|x| format!("{:.16e}", x + 273.15));
    let plain = audit(
        &table,
        "[columns]\nair = { unit = 'K' }\nwall = { unit = 'K' }\n",
    );
    assert_eq!(plain.verdict(), "pass", "{}", plain.seen());
    let text = long(&table, Order::ByTime);
    for (stated, text) in [
        ("", text.replace(",value\n", ",value [K]\n")),
        (
            "",
            text.replace(",air,", ",air [K],")
                .replace(",wall,", ",wall (K),"),
        ),
        (
            "[columns]\nair = { unit = 'K' }\nwall = { unit = 'K' }\n",
            text.clone(),
        ),
    ] {
        let ran = audit(text.as_bytes(), &format!("{stated}{LONG}"));
        let numbers = |ran: &Ran| found(ran)["submissions"][0]["runs"].clone();
        assert_eq!(numbers(&ran), numbers(&plain), "{}", ran.seen());
    }
    // The time as well.
    let minutes = edited(|lines| {
        for (line, [t, air, wall]) in lines.iter_mut().skip(1).zip(rows()) {
            *line = format!("{},{air},{wall}", t / 60.0);
        }
    });
    let text = long(&minutes, Order::ByTime).replace("t,variable", "t [min],variable");
    let ran = audit(text.as_bytes(), LONG);
    assert_eq!(ran.verdict(), "pass", "{}", ran.seen());
}

#[test]
fn what_cannot_be_read_is_told_with_its_cure() {
    let plain = long(&sound(), Order::ByTime);
    let shuffled = {
        let mut lines: Vec<&str> = plain.lines().collect();
        lines[1..].reverse();
        lines.join("\n") + "\n"
    };
    let swapped = {
        let text = long(&sound(), Order::ByChannel);
        let mut lines: Vec<&str> = text.lines().collect();
        lines.swap(30, 31);
        lines.join("\n") + "\n"
    };
    let many: String = (0..5000).map(|k| format!("0,{k}x,1\n")).collect();
    let told = |text: &str, stated: &str| {
        let seen = audit(text.as_bytes(), stated).seen();
        seen.replace("; help:", " help:")
    };
    for (seen, words) in [
        (
            told(
                &plain,
                "[layout]\nlong = { name = 'variabel', value = 'value' }\n",
            ),
            "s/run.txt:2:1: no line names the columns `variabel` and `value`, the header has `t`, \
             `variable`, `value` help: correct `long` under `[layout]` in submission.toml",
        ),
        (
            told(
                &plain,
                "[columns]\nair = 3\n[layout]\nlong = { name = 'variable', value = 'value' }\n",
            ),
            "the channels of a long table have names and no numbers help: write `air = \"NAME\"` \
             under `[columns]`, as it stands in the rows",
        ),
        (
            told(
                &plain,
                "[columns]\ntime = 'x'\n[layout]\nlong = { name = 'variable', value = 'value' }\n",
            ),
            "s/run.txt:1:1: no time stamps: there is no column `x`, the header has `t`, \
             `variable`, `value` help: correct `time` under `[columns]` in submission.toml",
        ),
        (
            told(&plain.replace("t,var", "x,var"), LONG),
            "s/run.txt:1:1: no column of time stamps: the header has `x`, `variable`, `value` \
             help: write `time = \"NAME\"` under `[columns]` in submission.toml",
        ),
        (
            told(
                &plain,
                "[layout]\nlong = { name = 't', value = 'value' }\n[columns]\ntime = 1\n",
            ),
            "s/run.txt:1:1: time, name and value of a long table are columns 1, 1 and 3 help: \
             give each of them a column of its own",
        ),
        (
            told(&plain.replace("t,variable", "value,t,variable"), LONG),
            "s/run.txt:1:1: `value` fits several columns: 1 and 4 help: write its number",
        ),
        (
            told(
                &plain,
                "[layout]\nlong = { name = 'value', value = 'value' }\n",
            ),
            "`name` and `value` of `long` are the same column",
        ),
        (
            told(&plain, "[layout]\nlong = { name = 'variable' }\n"),
            "missing field `value`",
        ),
        (
            told(&plain, "[layout]\nlong = { name = 7, value = 3 }\n"),
            "no row has a time, a name and a value in its columns help: correct `long`",
        ),
        (told(&shuffled, LONG), "t = 14340 comes after t = 14400"),
        (
            told(&swapped, LONG),
            "s/run.txt:32:1: `wall` at t = 1740 stands below its t = 1800, and the rows of one \
             time do not stand together help: sort the rows by time; then a file of any length \
             is read",
        ),
        (
            told(&format!("t,variable,value\n{many}"), LONG),
            "s/run.txt:4097:1: `4095x` is one name too many: at most 4095 channels are read help: \
             correct `name` of `long`",
        ),
        (
            told("t,variable,value\n", LONG),
            "the file has no rows of numbers",
        ),
    ] {
        assert!(seen.contains(words), "{words}\n{seen}");
    }
    // No list of numbers tells a name.
    let numpy = concat!(
        env!("CARGO_MANIFEST_DIR"),
        "/tests/outside/formats/records.npy"
    );
    let ran = audit(&std::fs::read(numpy).unwrap(), LONG);
    let words =
        "`long` is stated, but this file holds numbers in columns and no names; help: leave";
    assert!(
        ran.status == 2 && ran.seen().contains(words),
        "{}",
        ran.seen()
    );
}

/// What is wrong with a file, or all rows.
fn told(case: &Case, bytes: &[u8]) -> Result<u64, String> {
    let name = |name: &str| ColumnName::Name(name.to_owned());
    let stated = Stated {
        long: Some(LongStated {
            name: name("variable"),
            value: name("value"),
            time: None,
        }),
        ..Stated::default()
    };
    let source = Source::memory(bytes.to_vec());
    let layout = source.layout(&stated).map_err(|fault| fault.to_string())?;
    let layout = layout.ok_or("empty")?;
    if layout.columns < 3 {
        return Err(format!("columns are missing: {:?}", layout.names));
    }
    assert_eq!(layout.columns, 3, "{:?}", layout.names);
    let compared = try_compare(case, &source, &stated);
    let (compared, findings) = compared.map_err(|fault| fault.to_string())?;
    match findings.iter().find(|finding| finding.fatal) {
        Some(finding) => Err(finding.text.clone()),
        None => Ok(compared.rows),
    }
}

/// What is left of a file that was cut is an error or a finding; only the last line end may go.
#[test]
fn cut_anywhere_it_is_never_fewer_rows_in_silence() {
    let case = Library::new().load(CASE, &Replacements::new()).unwrap();
    let orders = [
        ("t,variable,value\n", [0, 1, 2], Order::ByTime),
        ("t,variable,value\n", [0, 1, 2], Order::ByChannel),
        ("value,t,variable\n", [2, 0, 1], Order::ByTime),
        ("variable,value,t\n", [1, 2, 0], Order::Turned),
        ("variable,value,t\n", [1, 2, 0], Order::ByChannel),
    ];
    for (head, places, order) in orders {
        let rows = cells(
            std::str::from_utf8(&printed(|x| format!("{x:.9}"))).unwrap(),
            order,
        );
        let line = |cell: &[String; 3]| places.map(|k| cell[k].as_str()).join(",") + "\n";
        let text = head.to_owned() + &rows.iter().map(line).collect::<String>();
        assert_eq!(told(&case, text.as_bytes()), Ok(241));
        assert_eq!(told(&case, text.trim_end().as_bytes()), Ok(241));
        let spread = (0..200).map(|k| k * text.len() / 200);
        for cut in spread.chain(text.len() - 60..text.len() - 1) {
            let left = told(&case, &text.as_bytes()[..cut]);
            assert!(
                left.is_err(),
                "{head} {order:?} cut at {cut} of {}: {left:?}",
                text.len()
            );
        }
    }
    // And through the whole audit.
    for order in ORDERS {
        let text = long(&sound(), order);
        for cut in [
            3,
            20,
            text.len() / 3,
            text.len() / 2,
            text.len() - 20,
            text.len() - 7,
        ] {
            let ran = audit(&text.as_bytes()[..cut], LONG);
            let found = ran.status == 1 && !ran.findings().is_empty();
            assert!(
                ran.status == 2 || found,
                "{order:?} cut at {cut}: {}",
                ran.seen()
            );
        }
    }
}

// A name that is cut can become another one.
#[test]
fn a_name_that_may_be_cut_is_not_believed() {
    let table = |row: &dyn Fn(f64, f64, f64) -> String| {
        let lines = rows().iter().map(|&[t, air, wall]| row(t, air, wall));
        "t;value;variable\n".to_owned() + &lines.collect::<String>()
    };
    let text = table(&|t, air, wall| format!("{t};{wall};wall\n{t};{wall};air_2\n{t};{air};air\n"));
    assert_eq!(audit(text.as_bytes(), LONG).verdict(), "pass");
    // In the last row air comes before the name that it could be cut from.
    let last = text.rfind(";air_2").unwrap();
    let ran = audit(&text.as_bytes()[..last + ";air".len()], LONG);
    let found = ran.findings();
    assert!(
        found.iter().any(|(kind, _)| kind == "cut-off-line"),
        "{}",
        ran.seen()
    );
    // Where the longer one is there already, the shorter one is what it seems to be.
    let ran = audit(text.trim_end().as_bytes(), LONG);
    assert_eq!(ran.verdict(), "pass", "{}", ran.seen());
}

/// A file that is not read at once: guesses from its beginning, several passes, many batches.
#[test]
fn a_large_table_gives_the_report_of_the_wide_twin() {
    let exact = Folder::new().run(&["exact", CASE, "--step", "0.25"]).stdout;
    let table = exact
        .lines()
        .enumerate()
        .map(|(number, line)| match number {
            0 => line.split(',').take(3).collect::<Vec<_>>().join(",") + "\n",
            _ => {
                let fields: Vec<&str> = line.split(',').collect();
                let value =
                    |text: &str| text.parse::<f64>().unwrap() + 1e-5 * (number as f64).sin();
                format!(
                    "{},{},{:.6}\n",
                    fields[0],
                    value(fields[1]),
                    value(fields[2])
                )
            }
        });
    let table = table.collect::<String>();
    let twin = audit(table.as_bytes(), "");
    assert!(
        twin.first_run()["rows"].as_u64() > Some(57_000),
        "{}",
        twin.seen()
    );
    for order in ORDERS {
        let text = long(table.as_bytes(), order);
        assert!(text.len() > 2 << 20);
        let ran = audit(text.as_bytes(), LONG);
        assert_eq!(found(&ran), found(&twin), "{order:?}");
    }
}

#[test]
fn without_the_statement_it_is_hinted_at() {
    let ran = audit(long(&sound(), Order::ByTime).as_bytes(), "");
    assert_eq!(ran.status, 1);
    let seen = ran.seen();
    let hint = "`air` is missing: there is no column `air`, the header has `t`, `variable`, \
                `value`; if a column holds the names of channels, state `long` under `[layout]`";
    assert!(seen.contains(hint), "{seen}");
    // A file of numbers alone has no such column.
    let ran = audit(&edited(|lines| lines[0] = "t,x,y".into()), "");
    assert!(!ran.seen().contains("`long`"), "{}", ran.seen());
    // A draft knows no long tables, and says that nothing fits.
    let folder = Folder::new();
    folder.write("run.csv", long(&sound(), Order::ByTime));
    let ran = folder.run(&["draft", "run.csv"]);
    assert!(
        ran.status == 1 && ran.seen().contains("nothing is written"),
        "{}",
        ran.seen()
    );
}

#[test]
fn drive_hands_the_statement_on() {
    let folder = Folder::new();
    folder.write("rows.csv", long(&sound(), Order::ByTime));
    let rows = folder.path("rows.csv");
    let plan = format!(
        "command = [\"cp\", '{}', \"{{output}}\"]\nsteps = [60]\ncases = [\"{CASE}\"]\n{LONG}",
        rows.display()
    );
    folder.write("plan.toml", plan);
    let ran = folder.run(&["drive", "plan.toml", "--into", "runs"]);
    assert_eq!(ran.status, 0, "{}", ran.seen());
    // The submission that it wrote says the same to a later audit.
    let ran = folder.audit(&["runs"]);
    assert_eq!(ran.verdict(), "pass", "{}", ran.seen());
}
