use std::path::Path;

use serde_json::Value;

use crate::folder::{CASE, Folder, Ran, cell, edited, printed, sound};
use crate::reviewers;

fn submission(folder: &Folder, name: &str, head: &str, bytes: Vec<u8>) {
    let text = format!("case = \"{CASE}\"\n{head}\n[[runs]]\nfile = \"run.csv\"\nstep = 60\n");
    folder.write(&format!("{name}/submission.toml"), text);
    folder.write(&format!("{name}/run.csv"), bytes);
}

fn shifted() -> Vec<u8> {
    edited(|lines| {
        for line in lines.iter_mut().skip(1) {
            let fields: Vec<f64> = line.split(',').map(|f| f.parse().unwrap()).collect();
            *line = format!("{},{},{}", fields[0], fields[1] + 3.0, fields[2]);
        }
    })
}

/// Submissions of every fate, some with names that are a nuisance.
fn tree() -> Folder {
    let folder = Folder::new();
    submission(
        &folder,
        "s/alder",
        "producer = \"alder \\u0007 2\"",
        sound(),
    );
    submission(&folder, "s/birch", "[claims]\nmethod = \"Heun\"", shifted());
    submission(&folder, "s/cedar", "expect = \"fail\"", cell(1, "nan"));
    submission(&folder, "s/coarse", "", printed(|v| format!("{v:.1}")));
    submission(&folder, "s/z 9\u{202e}\u{1b}[31m", "", sound());
    submission(&folder, "s/a\n\"b\"|<i>", "", sound());
    submission(&folder, "s/limited", "[limits]\nabsolute = 1e-7", sound());
    // Not TOML, a run that is not there, a case that is not known: the last one is told only
    // by the audit, and comes after those that cannot be read.
    folder.write("s/torn/submission.toml", "case = \n");
    folder.write("s/gone/submission.toml", "[[runs]]\nfile = \"no.csv\"\n");
    submission(&folder, "s/b-unknown", "", sound());
    let text = "case = \"thermal/no-such\"\n[[runs]]\nfile = \"run.csv\"\n";
    folder.write("s/b-unknown/submission.toml", text);
    folder
}

fn read(folder: &Folder, name: &str) -> String {
    std::fs::read_to_string(folder.path(name)).unwrap()
}

/// All parts of an audit; their exit statuses.
fn parts(folder: &Folder, paths: &[&str], of: usize) -> Vec<i32> {
    let one = |number: usize| {
        let (part, name) = (format!("{number}/{of}"), format!("p-{number}.json"));
        // The threads must not show.
        let threads = ["1", "2", "5"][number % 3];
        let more = ["--part", &part, "--write", &name, "--threads", threads];
        folder.run(&[&["audit"], paths, &more[..]].concat()).status
    };
    (1..=of).map(one).collect()
}

fn merge(folder: &Folder, names: &[String], more: &[&str]) -> Ran {
    let names: Vec<&str> = names.iter().map(String::as_str).collect();
    folder.run(&[&["merge"], &names[..], more].concat())
}

fn names(of: usize) -> Vec<String> {
    (1..=of).map(|number| format!("p-{number}.json")).collect()
}

/// Everything from the first empty line on: the table stands above.
fn below(screen: &str) -> &str {
    screen.split_once("\n\n").unwrap().1
}

/// Divides in every way and finds the undivided report again.
fn divides(folder: &Folder, paths: &[&str], ways: &[usize]) {
    divides_with(folder, paths, ways, &[]);
}

/// The same, where `merge` is given more.
fn divides_with(folder: &Folder, paths: &[&str], ways: &[usize], more: &[&str]) -> Ran {
    let whole = folder.run(&[&["audit"], paths, &["--write", "whole.json"]].concat());
    let report = read(folder, "whole.json");
    for &of in ways {
        let statuses = parts(folder, paths, of);
        // What is missing shows in the whole alone.
        if more.is_empty() {
            assert_eq!(
                statuses.iter().max(),
                Some(&whole.status),
                "{of}: {statuses:?}"
            );
        }
        let mut names = names(of);
        names.rotate_left(of / 2);
        names.reverse();
        let merged = merge(folder, &names, &[&["--write", "m.json"], more].concat());
        assert_eq!(merged.status, whole.status, "{of}: {}", merged.seen());
        assert!(
            read(folder, "m.json") == report,
            "{of} parts give another report"
        );
        // Up to three submissions an audit tells more than its JSON report is asked for.
        let closely = ["\nMethod and step:\n", "\nGrowth per step:\n"];
        if !closely.iter().any(|section| whole.stdout.contains(section)) {
            assert_eq!(below(&merged.stdout), below(&whole.stdout), "{of}");
        }
        assert_eq!(merged.stderr, "", "{of}");
    }
    whole
}

#[test]
fn parts_of_every_fate_give_the_undivided_report() {
    let folder = tree();
    divides(&folder, &["s"], &[1, 2, 3, 4, 5, 6, 7, 11, 25]);
    let report: Value = serde_json::from_str(&read(&folder, "whole.json")).unwrap();
    // The tree is worth it: every fate is there, what cannot be read comes first.
    for verdict in ["pass", "fail", "undecided"] {
        assert!(report["summary"][verdict].as_u64() > Some(0), "{verdict}");
    }
    let missing: Vec<&str> = report["not_audited"]
        .as_array()
        .unwrap()
        .iter()
        .map(|one| one["name"].as_str().unwrap())
        .collect();
    assert_eq!(missing, ["gone", "torn", "b-unknown"]);
    // Limits of the command line, several paths.
    divides(&folder, &["s/alder", "s/birch", "--absolute", "0.5"], &[2]);
    let case = ["--case", CASE, "--absolute", "1e-9", "--step", "60"];
    divides(
        &folder,
        &[&["s/alder/run.csv"], &case[..]].concat(),
        &[1, 3],
    );
}

#[test]
fn parts_of_the_demo_give_the_undivided_report() {
    let folder = Folder::new();
    let demo = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-runs");
    let demo = demo.to_str().unwrap();
    divides(&folder, &[demo], &[1, 2, 3, 4, 5, 6, 7, 14]);
}

/// Up to three submissions are told their step though they pass, more are not: the whole
/// decides, not the part.
#[test]
fn a_small_part_looks_no_closer_than_the_whole() {
    let folder = Folder::new();
    let birch = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-runs/winch/birch");
    let copy = |name: &str| {
        for entry in std::fs::read_dir(&birch).unwrap() {
            let entry = entry.unwrap();
            let file = format!("s/{name}/{}", entry.file_name().to_str().unwrap());
            folder.write(&file, std::fs::read(entry.path()).unwrap());
        }
    };
    let advised = || read(&folder, "whole.json").contains("classical RK4 by itself");
    ["a", "b", "c"].into_iter().for_each(copy);
    divides(&folder, &["s"], &[2]);
    assert!(advised());
    copy("d");
    divides(&folder, &["s"], &[2, 4]);
    assert!(!advised());
}

#[test]
fn a_part_says_what_it_is() {
    let folder = Folder::new();
    submission(&folder, "s/alder", "", sound());
    submission(&folder, "s/birch", "", cell(1, "nan"));
    let kinds = ["p.json", "p.xml", "p.md", "p.csv", "p.html"];
    let writes: Vec<&str> = kinds.iter().flat_map(|kind| ["--write", kind]).collect();
    let ran = folder.run(&[&["audit", "s", "--part", "1/2"], &writes[..]].concat());
    let said = "Part 1 of 2, 1 of 2 submissions: 1 ";
    assert!(ran.stdout.contains(said), "{}", ran.stdout);
    assert!(read(&folder, "p.md").contains(said));
    assert!(read(&folder, "p.xml").contains("name=\"stepgauge, part 1 of 2\""));
    assert!(read(&folder, "p.html").contains("part 1 of 2: "));
    let report: Value = serde_json::from_str(&read(&folder, "p.json")).unwrap();
    assert_eq!(report["part"]["number"], 1);
    assert_eq!(report["part"]["whole"]["paths"][0], "s");
    // Nothing to do is in order.
    let ran = folder.run(&["audit", "s", "--part", "3/3", "--write", "e.json"]);
    assert_eq!(ran.status, 0, "{}", ran.seen());
    let said = "Part 3 of 3, 0 of 2 submissions. All in order.";
    assert!(ran.stdout.contains(said), "{}", ran.stdout);
    // An undivided report knows nothing of parts.
    folder.run(&["audit", "s", "--write", "whole.json"]);
    assert!(!read(&folder, "whole.json").contains("\"part\""));
}

#[test]
fn the_largest_files_are_spread() {
    let folder = Folder::new();
    let long = edited(|lines| lines.insert(0, format!("# {}", "x".repeat(60_000))));
    for name in ["s/a", "s/b"] {
        submission(&folder, name, "", long.clone());
    }
    for name in ["s/c", "s/d", "s/e", "s/f"] {
        submission(&folder, name, "", sound());
    }
    parts(&folder, &["s"], 2);
    let mine = |name: &str| {
        let report: Value = serde_json::from_str(&read(&folder, name)).unwrap();
        let list = report["submissions"].as_array().unwrap().clone();
        let names = list
            .iter()
            .map(|one| one["name"].as_str().unwrap().to_owned());
        names.collect::<Vec<_>>()
    };
    assert_eq!(mine("p-1.json"), ["a", "c", "e"]);
    assert_eq!(mine("p-2.json"), ["b", "d", "f"]);
}

#[test]
fn what_cannot_be_joined_is_refused_by_name() {
    let folder = tree();
    parts(&folder, &["s"], 3);
    let good = read(&folder, "p-2.json");
    let edit = |name: &str, from: &str, to: &str| {
        assert!(good.contains(from), "{from}");
        folder.write(name, good.replacen(from, to, 1));
    };
    edit("version.json", "\"stepgauge\": \"", "\"stepgauge\": \"9");
    edit("schema.json", "\"schema\": 1", "\"schema\": 2");
    edit("left.json", "\"left\": 0", "\"left\": 4");
    edit("verdict.json", "\"verdict\": \"", "\"verdict\": \"x");
    edit("number.json", "\"number\": 2", "\"number\": 7");
    edit("count.json", "\"undecided\": ", "\"undecided\": 1");
    edit("field.json", "\"number\": 2", "\"numbr\": 2");
    folder.write("half.json", &good[..good.len() / 2]);
    folder.write("text.json", "t,air\n0,1\n");
    folder.write("bytes.json", b"{\xff");
    // A place that another part has.
    let mut report: Value = serde_json::from_str(&good).unwrap();
    let first = report["part"]["places"][0].as_u64().unwrap();
    report["part"]["places"][0] = (first - 1).into();
    folder.write("place.json", report.to_string());
    folder.run(&["audit", "s", "--write", "whole.json"]);
    let audit = |name: &str, part: &str, more: &[&str]| {
        folder.run(&[&["audit", "--part", part, "--write", name], more].concat());
    };
    audit("four.json", "2/4", &["s"]);
    audit("paths.json", "2/3", &["./s"]);
    audit("limits.json", "2/3", &["s", "--absolute", "0.1"]);
    let refused = |given: &[&str], told: &[&str]| {
        let _ = std::fs::remove_file(folder.path("m.json"));
        let ran = folder.run(&[&["merge", "--write", "m.json"], given].concat());
        assert_eq!(ran.status, 2, "{given:?}: {}", ran.seen());
        for text in told {
            assert!(
                ran.stderr.contains(text),
                "{given:?}: {text}: {}",
                ran.stderr
            );
        }
        assert!(
            ran.stderr.contains("\n  help: "),
            "{given:?}: {}",
            ran.stderr
        );
        assert_eq!(ran.stdout, "", "{given:?}");
        assert!(!folder.path("m.json").exists(), "{given:?}");
        // One thing that is wrong is one complaint.
        assert_eq!(ran.stderr.matches("help:").count(), 1, "{}", ran.stderr);
    };
    refused(
        &["p-1.json"],
        &["parts 2, 3 of 3 are missing", "--part 2/3"],
    );
    refused(&["p-1.json", "p-3.json"], &["part 2 of 3 is missing"]);
    let all = ["p-1.json", "p-3.json", "p-2.json"];
    for twice in ["p-3.json", "./p-3.json"] {
        let told = format!("{twice}: is part 3 of 3, as p-3.json is");
        refused(&[&all[..], &[twice]].concat(), &[&told]);
    }
    refused(&["nowhere.json"], &["nowhere.json: cannot be read"]);
    refused(
        &["whole.json"],
        &["whole.json: this is the report of a whole audit"],
    );
    for (name, told) in [
        (
            "version.json",
            "was written by version `90.1.0`, this is 0.1.0",
        ),
        ("schema.json", "has schema `2`, this version reads 1"),
        ("left.json", "part 2 of 3 was interrupted, 4 left"),
        ("verdict.json", "part 2 of 3 is damaged"),
        ("number.json", "part 7 of 3 is damaged"),
        ("count.json", "part 2 of 3 is damaged"),
        ("field.json", "unknown field `numbr`"),
        ("half.json", "this is not JSON"),
        ("text.json", "text.json:1:2: this is not JSON"),
        ("bytes.json", "bytes.json:1:1: this is not UTF-8 text"),
        ("whole.json", "not of a part"),
        (
            "four.json",
            "another audit than p-1.json: 3 parts there, 4 here",
        ),
        (
            "paths.json",
            "another audit than p-1.json: other paths were audited",
        ),
        (
            "limits.json",
            "another audit than p-1.json: other options were given",
        ),
    ] {
        let told = [told, &format!("{name}:")];
        refused(&["p-1.json", name, "p-3.json"], &told);
    }
    refused(
        &["p-1.json", "place.json", "p-3.json"],
        &["do not cover every submission once"],
    );
    // The same three without the slips.
    let ran = folder.run(&[&["merge", "--write", "m.json"], &all[..]].concat());
    assert_eq!(ran.status, 2, "three submissions cannot be audited");
    assert!(read(&folder, "m.json") == read(&folder, "whole.json"));
}

#[test]
fn a_tree_that_changed_between_the_parts_is_refused() {
    type Change = fn(&Folder);
    let changes: [(Change, &str); 7] = [
        (
            // The same bytes in all, elsewhere.
            |folder| {
                folder.write("s/b/run.csv", sound());
                folder.write("s/c/run.csv", cell(1, "12345678901234567890123456789"));
            },
            "a file of a run has changed its size",
        ),
        (
            |folder| folder.write("s/c/run.csv", edited(|lines| lines.push(String::new()))),
            "a file of a run has changed its size",
        ),
        (
            |folder| submission(folder, "s/c", "producer = \"alder\"", sound()),
            "a submission.toml has changed",
        ),
        (
            |folder| submission(folder, "s/d", "", sound()),
            "submissions or runs came, went or changed their names",
        ),
        (
            |folder| std::fs::rename(folder.path("s/c"), folder.path("s/e")).unwrap(),
            "submissions or runs came, went or changed their names",
        ),
        (
            |folder| folder.write("s/a/submission.toml", "case = \n"),
            "submissions or runs came, went or changed their names",
        ),
        (
            |folder| {
                let case = read(folder, "own/case.toml") + "\n";
                folder.write("own/case.toml", case);
            },
            "the cases of `--cases` have changed",
        ),
    ];
    for (change, told) in changes {
        let folder = Folder::new();
        for name in ["s/a", "s/b", "s/c"] {
            submission(&folder, name, "", sound());
        }
        folder.write("s/b/run.csv", cell(1, "12345678901234567890123456789"));
        let case = include_str!("../../reference-cases/thermal/cooling-body.toml");
        folder.write("own/case.toml", case.replace("\"thermal\"", "\"own\""));
        let audit = |part: &str, name: &str| {
            let arguments = [
                "audit", "s", "--cases", "own", "--part", part, "--write", name,
            ];
            assert!(folder.run(&arguments).status != 2 || part == "2/2");
        };
        audit("1/2", "p-1.json");
        change(&folder);
        audit("2/2", "p-2.json");
        let ran = merge(&folder, &names(2), &[]);
        assert_eq!(ran.status, 2, "{told}: {}", ran.seen());
        let told = format!("p-2.json: belongs to another audit than p-1.json: {told}");
        assert!(ran.stderr.contains(&told), "{told}: {}", ran.stderr);
    }
}

#[test]
fn arguments_that_do_not_go_together() {
    let folder = Folder::new();
    submission(&folder, "s/alder", "", sound());
    parts(&folder, &["s"], 1);
    folder.run(&["audit", "s", "--write", "whole.json"]);
    for (arguments, told) in [
        (
            &["audit", "s", "--part", "0/2"][..],
            "expected I/N with 1 <= I <= N",
        ),
        (
            &["audit", "s", "--part", "3/2"],
            "expected I/N with 1 <= I <= N",
        ),
        (
            &["audit", "s", "--part", "1/2", "--against", "whole.json"],
            "give `--against` to `stepgauge merge`",
        ),
        (
            &["audit", "s", "--against", "p-1.json"],
            "p-1.json: this is the report of part 1 of 1, not of a whole audit",
        ),
        (
            &["merge", "p-1.json", "--against", "p-1.json"],
            "p-1.json: this is the report of part 1 of 1, not of a whole audit",
        ),
        (
            &["merge", "p-1.json", "--write", "m.xml"],
            "m.xml: merge writes .json reports only",
        ),
        (
            &["merge", "p-1.json", "--write", "./p-1.json"],
            "would overwrite a file that it is made from",
        ),
        (
            &[
                "merge",
                "p-1.json",
                "--against",
                "whole.json",
                "--write",
                "whole.json",
            ],
            "would overwrite the one that `--against` compares with",
        ),
        (
            &["merge", "p-1.json", "--write", "no/m.json"],
            "the folder of this report is not there",
        ),
        (&["merge"], "REPORT.json"),
    ] {
        let ran = folder.run(arguments);
        assert_eq!(ran.status, 2, "{arguments:?}: {}", ran.seen());
        assert!(ran.stderr.contains(told), "{arguments:?}: {}", ran.stderr);
    }
    let ran = folder.run(&["merge", "p-1.json", "--quiet"]);
    assert_eq!((ran.status, ran.seen().trim()), (0, ""));
}

/// `merge --against` is `audit --against`.
#[test]
fn merged_parts_are_compared_with_an_earlier_report() {
    let folder = Folder::new();
    submission(&folder, "s/alder", "", sound());
    submission(&folder, "s/birch", "expect = \"fail\"", cell(1, "nan"));
    folder.run(&["audit", "s", "--write", "before.json"]);
    submission(&folder, "s/alder", "[limits]\nabsolute = 1", shifted());
    submission(&folder, "s/cedar", "", sound());
    let against = ["--against", "before.json", "--worse-by", "0.5"];
    let whole = folder.run(&[&["audit", "s", "--write", "whole.json"], &against[..]].concat());
    assert_eq!(whole.status, 1, "{}", whole.seen());
    parts(&folder, &["s"], 2);
    let merged = merge(
        &folder,
        &names(2),
        &[&["--write", "m.json"], &against[..]].concat(),
    );
    assert_eq!(merged.status, 1, "{}", merged.seen());
    assert!(read(&folder, "m.json").contains("\"changes\""));
    assert!(read(&folder, "m.json") == read(&folder, "whole.json"));
    assert!(
        merged.stdout.contains("Worse than in before.json:"),
        "{}",
        merged.stdout
    );
}

/// Ladders and single runs of which each falls short of something else.
fn handed_in() -> Folder {
    let folder = Folder::new();
    let submit = |name: &str, head: &str, runs: &[f64]| {
        let file = |&step: &f64| (Some(step), reviewers::rk4(step));
        let files: Vec<_> = runs.iter().map(file).collect();
        reviewers::submit(&folder, name, head, &files);
    };
    let claimed = |method: &str| format!("[claims]\nmethod = \"{method}\"");
    submit("s/alder", &claimed("RK4"), &[0.2, 0.1, 0.05]);
    submit("s/birch", "[limits]\nabsolute = 1e-12", &[0.1, 0.05]);
    submit("s/cedar", &claimed("my own"), &[0.2, 0.1, 0.1]);
    submit(
        "s/control",
        "expect = \"fail\"\n[limits]\nabsolute = 1e-300",
        &[0.1],
    );
    submit("s/own", "[parameters]\nR = 1.5", &[0.1, 0.05]);
    folder
}

const RULES: [(&str, i32); 10] = [
    (
        "runs = 3\nrows = 201\nmethods = [\"RK4\"]\nmethod_shown = true",
        0,
    ),
    ("runs = 4", 1),
    ("rows = 202", 1),
    ("methods = [\"Heun\", \"RK4\"]", 0),
    ("methods = [\"Heun\"]", 1),
    ("method_shown = true", 0),
    ("[[require]]\ncase = \"thermal/cooling-body\"", 1),
    ("[limits]\nabsolute = 1e-300", 1),
    (
        "[case_limits.\"electrical/rc-constant\"]\nabsolute = 1e-3\nrelative = 1e-3",
        0,
    ),
    (
        "[[require]]\ncase = \"electrical/rc-constant\"\nrows = 51",
        0,
    ),
];

/// What is required shows in the whole alone: `merge --require` is `audit --require`.
#[test]
fn requirements_are_held_against_the_whole() {
    let folder = handed_in();
    let head = format!("[[require]]\ncase = \"{}\"\n", reviewers::CASE);
    let rules = "rules.toml";
    let demanded = ["--require", rules];
    let mut missing = 0;
    for (text, status) in RULES {
        folder.write(rules, format!("{head}{text}\n"));
        let whole = divides_with(&folder, &["s", demanded[0], rules], &[1, 3], &demanded);
        let report = read(&folder, "m.json");
        assert!(
            report.contains("\"required\": [\n      {"),
            "{text}: {report}"
        );
        assert!(
            whole.stdout.contains("\nRequired by rules.toml:\n"),
            "{text}"
        );
        // The control passes here, and so is not in order.
        assert_eq!(whole.status, 1, "{text}: {}", whole.stdout);
        let met = !whole.stdout.contains("not met.");
        assert_eq!(met, status == 0, "{text}: {}", whole.stdout);
        missing += i32::from(!met);
    }
    assert_eq!(missing, 5);
    // With nothing else amiss the requirement alone makes the status.
    for name in ["s/control", "s/own", "s/birch"] {
        std::fs::remove_dir_all(folder.path(name)).unwrap();
    }
    for (text, status) in [("runs = 3", 0), ("runs = 4", 1)] {
        folder.write(rules, format!("{head}{text}\n"));
        let whole = divides_with(&folder, &["s", demanded[0], rules], &[1, 2], &demanded);
        assert_eq!(whole.status, status, "{text}: {}", whole.stdout);
        assert_eq!(
            parts(&folder, &["s", demanded[0], rules], 2),
            [0, 0],
            "{text}"
        );
    }
}
