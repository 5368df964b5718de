//! Reports of `--write`: which may be written where, what they hold, and text from outside
//! in each of them.

use std::collections::BTreeMap;
use std::path::Path;

use pulldown_cmark::{Event, Options, Parser, Tag, TagEnd};
use serde_json::Value;
use stepgauge::fault::escaped;

use crate::folder::{CASE, Folder, edited, sound};

const KINDS: [&str; 4] = ["r.json", "r.xml", "r.md", "r.csv"];

/// `--write` for every kind.
fn writes() -> Vec<&'static str> {
    KINDS.iter().flat_map(|name| ["--write", name]).collect()
}

fn submission(folder: &Folder, name: &str, head: &str, file: Vec<u8>) {
    let text = format!("case = \"{CASE}\"\n{head}\n[[runs]]\nfile = \"run.csv\"\n");
    folder.write(&format!("{name}/submission.toml"), text);
    folder.write(&format!("{name}/run.csv"), file);
}

fn read(folder: &Folder, name: &str) -> String {
    std::fs::read_to_string(folder.path(name)).unwrap()
}

fn wrong() -> Vec<u8> {
    edited(|lines| {
        for line in lines.iter_mut().skip(1) {
            let fields: Vec<f64> = line
                .split(',')
                .map(|field| field.parse().unwrap())
                .collect();
            *line = format!("{},{},{}", fields[0], fields[1] + 3.0, fields[2]);
        }
    })
}

#[test]
fn every_kind_is_written_and_written_again() {
    let folder = Folder::new();
    submission(&folder, "s/alder", "", sound());
    let ran = folder.run(&[&["audit", "s"], &writes()[..]].concat());
    assert_eq!(ran.status, 0, "{}", ran.seen());
    let first: Vec<String> = KINDS.iter().map(|name| read(&folder, name)).collect();
    assert!(first[0].starts_with("{\n  \"stepgauge\""));
    assert!(first[1].starts_with("<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n<testsuites"));
    assert!(first[2].starts_with("## Step audit: all in order\n"));
    assert!(first[3].starts_with("submission,case,file,role,step,tolerance,channel,unit,"));
    assert_eq!(
        folder
            .run(&[&["audit", "s"], &writes()[..]].concat())
            .status,
        0
    );
    let again: Vec<String> = KINDS.iter().map(|name| read(&folder, name)).collect();
    assert_eq!(first, again);
    // Nothing else is left behind.
    assert_eq!(
        std::fs::read_dir(folder.path("")).unwrap().count(),
        1 + KINDS.len()
    );
    // The case of the ending does not count.
    assert_eq!(folder.run(&["audit", "s", "--write", "R.XML"]).status, 0);
}

#[test]
fn nothing_is_written_where_one_report_cannot_be() {
    let folder = Folder::new();
    submission(&folder, "s/alder", "", sound());
    let case = include_str!("../../reference-cases/thermal/cooling-body.toml");
    folder.write("cases/own.toml", case.replace("\"thermal\"", "\"own\""));
    #[cfg(unix)]
    {
        std::os::unix::fs::symlink("s/alder/submission.toml", folder.path("link.json")).unwrap();
        std::os::unix::fs::symlink("cases/own.toml", folder.path("link.md")).unwrap();
    }
    std::fs::create_dir(folder.path("d.json")).unwrap();
    let good = ["--write", "good.json"];
    for (writes, complaint) in [
        (
            &["--write", "r.txt"][..],
            "r.txt: no report is known by the ending `txt`",
        ),
        (
            &["--write", "r"],
            "reports end in .json, .xml, .md, .csv or .html",
        ),
        (
            &["--write", "no/r.xml"],
            "the folder of this report is not there",
        ),
        (
            &["--write", "./good.json"],
            "two reports would be written to this file",
        ),
        (
            &["--write", "s/../good.json"],
            "two reports would be written to this file",
        ),
        (
            &["--write", "s/alder/run.csv"],
            "would overwrite a file that is audited",
        ),
        (
            &["--write", "link.json"],
            "would overwrite a file that is audited",
        ),
        (
            &["--write", "link.md", "--cases", "cases"],
            "would overwrite a file that is audited",
        ),
        (&["--write", "d.json"], "this is a folder"),
    ] {
        let arguments = [&["audit", "s"], &good[..], writes].concat();
        let ran = folder.run(&arguments);
        assert_eq!(ran.status, 2, "{writes:?}");
        assert!(ran.stderr.contains(complaint), "{writes:?}: {}", ran.stderr);
        assert!(!folder.path("good.json").exists(), "{writes:?}");
    }
    assert_eq!(read(&folder, "s/alder/run.csv").into_bytes(), sound());
    let alone = ["audit", "s/alder/run.csv", "--case", CASE];
    let ran = folder.run(&[&alone[..], &["--write", "s/alder/run.csv"]].concat());
    assert_eq!(ran.status, 2, "{}", ran.seen());
}

/// Which files belong to a submission that cannot be read is not known.
#[test]
fn runs_of_an_unreadable_submission_are_spared() {
    let folder = Folder::new();
    folder.write("s/alder/submission.toml", "case = 3\n");
    folder.write("s/alder/run.csv", sound());
    let ran = folder.run(&["audit", "s", "--write", "s/alder/run.csv"]);
    assert!(
        ran.stderr.contains("perhaps one of its runs"),
        "{}",
        ran.stderr
    );
    assert_eq!(read(&folder, "s/alder/run.csv").into_bytes(), sound());
    for _ in 0..2 {
        let ran = folder.run(&["audit", "s", "--write", "s/alder/errors.csv"]);
        assert_eq!(ran.status, 2);
        let table = read(&folder, "s/alder/errors.csv");
        assert!(
            table.ends_with("alder,,,,,,,,,,,,,,,,not audited,,\n"),
            "{table}"
        );
    }
}

/// Elements with the attributes that they must have, and the children that they may have.
const ELEMENTS: [(&str, &[&str], &[&str]); 9] = [
    (
        "testsuites",
        &["tests", "failures", "errors", "skipped"],
        &["testsuite"],
    ),
    (
        "testsuite",
        &["name", "tests", "failures", "errors", "skipped"],
        &["properties", "testcase", "system-out"],
    ),
    ("properties", &[], &["property"]),
    ("property", &["name", "value"], &[]),
    (
        "testcase",
        &["name", "classname"],
        &["failure", "error", "skipped"],
    ),
    ("failure", &["message", "type"], &[]),
    ("error", &["message", "type"], &[]),
    ("skipped", &["message"], &[]),
    ("system-out", &[], &[]),
];

/// Walks a report with another parser; the numbers of failures and errors.
fn walk(text: &str) -> (usize, usize) {
    let document = roxmltree::Document::parse(text).unwrap();
    let count = |node: &roxmltree::Node, name: &str| {
        node.descendants()
            .filter(|one| one.has_tag_name(name))
            .count()
    };
    let optional = ["name", "message", "type"];
    for node in document.descendants().filter(roxmltree::Node::is_element) {
        let name = node.tag_name().name();
        let known = ELEMENTS.iter().find(|(known, ..)| *known == name);
        let (_, required, children) = known.unwrap_or_else(|| panic!("element {name}"));
        for wanted in *required {
            assert!(node.attribute(*wanted).is_some(), "{name} without {wanted}");
        }
        for attribute in node.attributes() {
            let known = required.contains(&attribute.name());
            assert!(
                known || optional.contains(&attribute.name()),
                "{name}: {attribute:?}"
            );
        }
        for child in node.children().filter(roxmltree::Node::is_element) {
            assert!(
                children.contains(&child.tag_name().name()),
                "{child:?} in {name}"
            );
        }
        if name == "testcase" {
            assert!(node.children().filter(roxmltree::Node::is_element).count() <= 1);
        }
        for (attribute, element) in [
            ("tests", "testcase"),
            ("failures", "failure"),
            ("errors", "error"),
            ("skipped", "skipped"),
        ] {
            if let Some(stated) = node.attribute(attribute) {
                assert_eq!(
                    stated.parse::<usize>().unwrap(),
                    count(&node, element),
                    "{name}"
                );
            }
        }
    }
    let root = document.root_element();
    assert!(root.has_tag_name("testsuites"));
    (count(&root, "failure"), count(&root, "error"))
}

/// Against the schema, where a program that can is at hand.
fn validate(path: &Path) {
    let schema = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/schema/junit.xsd");
    let mut command = std::process::Command::new("xmllint");
    command.args(["--noout", "--schema"]).arg(schema).arg(path);
    match command.output() {
        Ok(output) => assert!(
            output.status.success(),
            "{}",
            String::from_utf8_lossy(&output.stderr)
        ),
        Err(_) => eprintln!("no xmllint here: {} is not validated", path.display()),
    }
}

/// The schema of `tests/schema` and the table above are one rule.
#[test]
fn the_schema_and_the_walk_agree() {
    let text = include_str!("../schema/junit.xsd");
    let schema = roxmltree::Document::parse(text).unwrap();
    let all = || schema.descendants().filter(roxmltree::Node::is_element);
    let named = |tag: &str, name: &str| {
        all().find(|node| {
            node.has_tag_name(("http://www.w3.org/2001/XMLSchema", tag))
                && node.attribute("name") == Some(name)
        })
    };
    for (element, required, children) in ELEMENTS {
        let declared = named("element", element).unwrap_or_else(|| panic!("{element}"));
        let body = match declared.attribute("type") {
            Some("xs:string") => continue,
            Some(name) => named("complexType", name).unwrap(),
            None => declared,
        };
        let inner = body.descendants().filter(roxmltree::Node::is_element);
        for child in children {
            assert!(
                inner
                    .clone()
                    .any(|node| node.attribute("name") == Some(child)),
                "{child}"
            );
        }
        let needed = inner.filter(|node| node.attribute("use") == Some("required"));
        for node in needed {
            assert!(
                required.contains(&node.attribute("name").unwrap()),
                "{element}: {node:?}"
            );
        }
    }
}

#[test]
fn test_cases_fail_with_the_audit_and_only_with_it() {
    let folder = Folder::new();
    let digits = edited(|lines| {
        for line in lines.iter_mut().skip(1) {
            let fields: Vec<f64> = line
                .split(',')
                .map(|field| field.parse().unwrap())
                .collect();
            *line = format!("{},{:.1},{:.1}", fields[0], fields[1], fields[2]);
        }
    });
    let cut = edited(|lines| lines.truncate(100));
    let none: Vec<u8> = b"t,air,wall\n".to_vec();
    let order = "[claims]\norder = 4\n";
    for (name, head, file, status, wanted) in [
        ("good", "", sound(), 0, None),
        (
            "wrong",
            "",
            wrong(),
            1,
            Some(("fail", "`air` is off by 3.00 degC")),
        ),
        (
            "coarse",
            "",
            digits,
            1,
            Some(("undecided", "cannot be told at t =")),
        ),
        ("cut", "", cut, 1, Some(("fail", "the window ends at"))),
        ("none", "", none, 1, Some(("fail", ""))),
        ("control", "expect = \"fail\"\n", wrong(), 0, None),
        (
            "surprise",
            "expect = \"fail\"\n",
            sound(),
            1,
            Some((
                "not expected",
                "was expected to be fail, the verdict is pass",
            )),
        ),
        ("order", order, sound(), 0, None),
        (
            "broken",
            "colour = 3\n",
            sound(),
            2,
            Some(("not audited", "colour")),
        ),
    ] {
        submission(&folder, &format!("{name}/s"), head, file);
        let ran = folder.run(&["audit", name, "--write", "r.xml"]);
        assert_eq!(ran.status, status, "{name}: {}", ran.seen());
        let text = read(&folder, "r.xml");
        let (failures, errors) = walk(&text);
        assert_eq!(failures + errors > 0, status != 0, "{name}: {text}");
        assert_eq!(errors > 0, status == 2, "{name}: {text}");
        validate(&folder.path("r.xml"));
        let document = roxmltree::Document::parse(&text).unwrap();
        let ended = document
            .descendants()
            .find(|node| node.has_tag_name("failure") || node.has_tag_name("error"));
        let Some((kind, sentence)) = wanted else {
            continue;
        };
        let ended = ended.unwrap();
        assert_eq!(ended.attribute("type"), Some(kind), "{name}");
        let told = ended.text().unwrap();
        assert!(told.contains(sentence), "{name}: {told}");
        if status == 1 && name != "surprise" {
            // The sentences are those of the terminal.
            for line in told.lines() {
                let line: Vec<&str> = line.split_whitespace().collect();
                assert!(ran.seen().contains(&line.join(" ")), "{name}: {line:?}");
            }
        }
        for varied in ["time=", "timestamp", "hostname", "uuid"] {
            assert!(!text.contains(varied), "{name}: {varied}");
        }
    }
}

/// Rows of the table as cells of text; fails on any markup that is not ours.
fn table_of(markdown: &str) -> Vec<Vec<String>> {
    let options = Options::ENABLE_TABLES | Options::ENABLE_STRIKETHROUGH;
    let mut rows = Vec::new();
    let mut cell: Option<String> = None;
    for event in Parser::new_ext(markdown, options) {
        match event {
            Event::Start(Tag::TableHead | Tag::TableRow) => rows.push(Vec::new()),
            Event::Start(Tag::TableCell) => cell = Some(String::new()),
            Event::End(TagEnd::TableCell) => {
                rows.last_mut().unwrap().push(cell.take().unwrap());
            }
            Event::Text(text) => {
                if let Some(cell) = &mut cell {
                    cell.push_str(&text);
                }
            }
            Event::InlineHtml(html) => {
                assert!(["<code>", "</code>"].contains(&&*html), "{html}");
            }
            Event::Html(html) => panic!("{html}"),
            Event::Code(code) => panic!("code {code}"),
            Event::Start(tag @ (Tag::Link { .. } | Tag::Image { .. } | Tag::BlockQuote(_))) => {
                panic!("{tag:?}")
            }
            Event::Start(Tag::Emphasis | Tag::Strikethrough | Tag::CodeBlock(_)) => {
                panic!("markup in {markdown}")
            }
            _ => {}
        }
    }
    rows
}

const HOSTILE: [&str; 12] = [
    "<script>alert(1)",
    "quote\"s and 'single' &amp; &lt;",
    "pipe|s `ticks` \\|",
    "*stars* _under_ [link](x) ![i](y) ~~gone~~",
    "\u{202e}turned\u{200f}",
    "\u{1b}[31mred\u{7}\u{7f}",
    "new\nline\r\ttab",
    "=1+1",
    "@everyone",
    "-1+2",
    "# heading",
    "]]> \u{fffe}\u{ffff} http:www.x.y 1. x",
];

/// Text of TOML with every character that has a meaning escaped.
fn toml_text(text: &str) -> String {
    let escape = |c: char| format!("\\U{:08X}", u32::from(c));
    let all: String = text.chars().map(escape).collect();
    format!("\"{all}\"")
}

/// Folders, producers, files, units and columns with such text; some pass, some fail, some
/// cannot be audited.
fn hostile_folder() -> (Folder, Vec<String>) {
    let folder = Folder::new();
    let unit = "<b>|`m\u{202e}\u{1b}=";
    let case = include_str!("../../reference-cases/thermal/cooling-body.toml");
    let case = case
        .replace("\"thermal\"", "\"own\"")
        .replace("\"degC\"", &toml_text(unit));
    folder.write("cases/odd.toml", case);
    let mut names = Vec::new();
    for (index, text) in HOSTILE.iter().enumerate() {
        let long = "x".repeat(10_000);
        let producer = toml_text(&format!("{text}{}", if index == 0 { &long } else { "" }));
        let file = format!("{text}.csv");
        let head = format!("producer = {producer}\n");
        let run = format!("[[runs]]\nfile = {}\n", toml_text(&file));
        let columns = format!(
            "[columns]\nair = {{ column = {} }}\n",
            toml_text(&text.replace(['\n', '\r', '\t'], ""))
        );
        // A name over two lines is for the names of folders and files.
        let header = text.replace('"', "\"\"").replace(['\n', '\r', '\t'], "");
        let content = |bytes: Vec<u8>| {
            let content = String::from_utf8(bytes).unwrap();
            content.replacen("t,air", &format!("t,\"{header}\""), 1)
        };
        // The search for causes of a failure takes its time: two are enough.
        let (bytes, more) = match index {
            1 | 7 => (content(wrong()), columns),
            _ if index % 2 == 0 => (content(sound()), columns),
            _ => (content(sound()), String::new()),
        };
        let name = format!("s/{text}");
        folder.write(&format!("{name}/{file}"), bytes);
        let text_of = format!("case = \"{CASE}\"\n{head}{more}{run}");
        folder.write(&format!("{name}/submission.toml"), text_of);
        // Reports have the separators of one system.
        names.push(text.replace('\\', "/"));
    }
    // A name as long as the file system takes.
    let long = vec!["long-".repeat(40); 14].join("/");
    submission(&folder, &format!("s/{long}"), "", sound());
    names.push(long);
    // Units of a case, and one that is not to be audited.
    folder.write("s/units/run.csv", "t,body\n0,1\n1,2\n");
    let text = "case = \"own/odd\"\n[[runs]]\nfile = \"run.csv\"\n";
    folder.write("s/units/submission.toml", text);
    names.push("units".to_owned());
    folder.write(
        "s/<b>not\n/submission.toml",
        format!("case = {}\n", toml_text("<i>|`x\n")),
    );
    // Names of columns become channels where no case is named.
    let mut text = String::new();
    for step in [1.0_f64, 2.0, 4.0] {
        let rows = (0..=(100.0 / step) as u32).map(|k| {
            let t = f64::from(k) * step;
            format!("{t},{}\n", (-t / 20.0).exp() + 1e-3 * step * t)
        });
        let name = format!("h{step}.csv");
        let rows: String = rows.collect();
        folder.write(
            &format!("s/alone/{name}"),
            format!("t,\"<x>|`*@=\"\n{rows}"),
        );
        text += &format!("[[runs]]\nfile = \"{name}\"\nstep = {step}\n");
    }
    folder.write(
        "s/alone/submission.toml",
        format!("[claims]\norder = 3\n{text}"),
    );
    names.push("alone".to_owned());
    (folder, names)
}

#[cfg(unix)]
#[test]
fn hostile_names_are_text_in_every_report() {
    let (folder, names) = hostile_folder();
    let common = ["audit", "s", "--cases", "cases"];
    let ran = folder.run(&[&common[..], &writes()].concat());
    assert_eq!(ran.status, 2, "{}", ran.seen());
    let json: Value = serde_json::from_str(&read(&folder, "r.json")).unwrap();
    let listed: Vec<&str> = json["submissions"]
        .as_array()
        .unwrap()
        .iter()
        .map(|one| one["name"].as_str().unwrap())
        .collect();
    for name in &names {
        assert!(listed.contains(&name.as_str()), "{name:?}");
    }
    assert_eq!(json["not_audited"][0]["name"], "<b>not\n");

    let xml = read(&folder, "r.xml");
    walk(&xml);
    validate(&folder.path("r.xml"));
    let document = roxmltree::Document::parse(&xml).unwrap();
    let suites: Vec<&str> = document
        .descendants()
        .filter(|node| node.has_tag_name("testsuite"))
        .map(|node| node.attribute("name").unwrap())
        .collect();
    assert_eq!(suites.len(), names.len() + 1);
    let marks = |c: char| matches!(c, '\u{fffe}' | '\u{ffff}');
    for name in names.iter().filter(|name| !name.contains(marks)) {
        assert!(
            suites.contains(&escaped(name).as_str()),
            "{name:?} in {suites:#?}"
        );
    }

    let markdown = read(&folder, "r.md");
    let rows = table_of(&markdown);
    assert_eq!(rows.len(), names.len() + 2);
    assert!(
        rows.iter().all(|row| row.len() == rows[0].len()),
        "{rows:#?}"
    );
    // Runs of blanks and blanks at the ends are not kept in Markdown.
    for name in names.iter().filter(|name| name.chars().count() < 60) {
        let name = escaped(name);
        let shown: String = name.chars().take(60).collect();
        assert!(
            rows.iter().any(|row| row[1].starts_with(&shown)),
            "{name:?}: {rows:#?}"
        );
    }
    assert!(rows[1][0] == "not audited" && rows[1][1] == "<b>not\\n");

    check_table(&read(&folder, "r.csv"), &json);
    for (name, text) in [
        ("r.md", &markdown),
        ("terminal", &ran.stdout),
        ("r.xml", &xml),
    ] {
        let odd = |c: char| (c.is_control() && c != '\n') || escaped(&c.to_string()).len() > 4;
        assert!(
            !text.contains(odd),
            "{name}: {:?}",
            text.chars().find(|&c| odd(c))
        );
    }
    // Narrow and plain, no name stops the table either.
    let output = std::process::Command::new(crate::folder::program())
        .args(common)
        .current_dir(folder.path(""))
        .env("COLUMNS", "40")
        .env("LC_ALL", "C")
        .output()
        .unwrap();
    assert!(output.stdout.is_ascii() && output.status.code() == Some(2));
}

/// The table against the JSON report: the same rows, the same numbers.
fn check_table(text: &str, json: &Value) {
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let header: Vec<String> = reader
        .headers()
        .unwrap()
        .iter()
        .map(str::to_owned)
        .collect();
    let mut records = reader.records().map(Result::unwrap);
    let outside = ["submission", "case", "file", "channel", "unit"];
    let mut check = |wanted: BTreeMap<&str, Value>| {
        let record = records.next().unwrap();
        for (name, cell) in header.iter().zip(record.iter()) {
            let value = &wanted.get(name.as_str()).cloned().unwrap_or(Value::Null);
            match value {
                Value::Null => assert_eq!(cell, "", "{name}"),
                Value::Number(number) => {
                    assert_eq!(cell.parse::<f64>().ok(), number.as_f64(), "{name}");
                }
                _ => {
                    let text = escaped(value.as_str().unwrap());
                    assert_eq!(cell.strip_prefix('\'').unwrap_or(cell), text, "{name}");
                }
            }
            if outside.contains(&name.as_str()) {
                assert!(
                    !cell.starts_with(['=', '+', '-', '@', '\t', '\r']),
                    "{cell}"
                );
            }
            assert!(!cell.contains(char::is_control), "{cell:?}");
        }
    };
    for submission in json["submissions"].as_array().unwrap() {
        for run in submission["runs"].as_array().unwrap() {
            let mut row = BTreeMap::from([
                ("submission", submission["name"].clone()),
                ("case", submission["case"].clone()),
                ("limits_from", submission["limits_from"].clone()),
            ]);
            for key in ["file", "role", "step", "tolerance"] {
                row.insert(key, run[key].clone());
            }
            let channels = run["channels"].as_array().unwrap();
            if channels.is_empty() {
                check(row.clone());
            }
            for channel in channels {
                let mut row = row.clone();
                row.insert("channel", channel["name"].clone());
                for key in [
                    "unit",
                    "worst_error",
                    "at",
                    "rms_error",
                    "end_error",
                    "peak",
                    "resolution",
                    "limit",
                    "limit_used",
                    "verdict",
                ] {
                    row.insert(key, channel[key].clone());
                }
                check(row);
            }
        }
    }
    for missing in json["not_audited"].as_array().unwrap() {
        let verdict = Value::from("not audited");
        check(BTreeMap::from([
            ("submission", missing["name"].clone()),
            ("verdict", verdict),
        ]));
    }
    assert!(records.next().is_none());
}

#[test]
fn the_table_has_the_numbers_of_the_json_report() {
    let folder = Folder::new();
    let demo = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-runs");
    let ran = folder.run(&[&["audit", demo.to_str().unwrap()], &writes()[..]].concat());
    assert_eq!(ran.status, 0);
    let json: Value = serde_json::from_str(&read(&folder, "r.json")).unwrap();
    check_table(&read(&folder, "r.csv"), &json);
    assert_eq!(walk(&read(&folder, "r.xml")), (0, 0));
    validate(&folder.path("r.xml"));
}

/// A summary stays below its limit, says what it leaves out, and fails come first.
#[test]
fn a_long_summary_is_cut_with_a_count() {
    let folder = Folder::new();
    let text = "case = \"decay/parent-daughter\"\n[[runs]]\nfile = \"run.csv\"\n";
    for number in 0..700 {
        let name = format!("s/{number:03}-{}", "|`".repeat(80));
        folder.write(&format!("{name}/submission.toml"), text);
        folder.write(&format!("{name}/run.csv"), "t,parent\n0,1\n480,2\n");
    }
    submission(&folder, "s/000", "", sound());
    let ran = folder.run(&["audit", "s", "--write", "r.md"]);
    assert_eq!(ran.status, 1);
    let markdown = read(&folder, "r.md");
    assert!(markdown.len() < 60_000, "{}", markdown.len());
    let rows = table_of(&markdown);
    assert!(rows.iter().all(|row| row.len() == rows[0].len()));
    assert!(rows[1..].iter().all(|row| row[0] == "fail"));
    let left_out = 701 - (rows.len() - 1);
    let told = format!("{left_out} more rows are not shown here; the JSON report has all.");
    assert!(markdown.contains(&told), "{told}");
    assert!(markdown.contains("more sentences are not shown here"));
    assert!(markdown.contains("\nA pass covers the linear case"));
}
