use std::path::Path;
use std::process::Command;

use crate::folder::{Folder, Ran};
use serde_json::Value;

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

/// A command that is there on this machine; says so where a test is left out.
fn available(program: &str) -> bool {
    let found = Command::new(program).arg("-c").arg("").output();
    let there = found.is_ok_and(|output| output.status.success());
    if !there {
        println!("left out: there is no `{program}` here");
    }
    there
}

/// A plan whose simulator is a line of `sh`, given case, step and output as `$1` to `$3`.
fn plan(script: &str, more: &str) -> String {
    let words = r#"["sh", "-c", SCRIPT, "sh", "{case}", "{step}", "{output}"]"#;
    let words = words.replace("SCRIPT", &format!("'''{script}'''"));
    format!("command = {words}\nsteps = [60, 120]\ncases = [\"thermal/cold-room-defrost\"]\n{more}")
}

/// What a sound simulator would write: exact values.
fn exact(step: &str) -> String {
    let case = "thermal/cold-room-defrost";
    Folder::new().run(&["exact", case, "--step", step]).stdout
}

fn drive(folder: &Folder, plan: &str) -> Ran {
    folder.write("plan.toml", plan);
    for step in ["60", "120"] {
        folder.write(&format!("{step}.csv"), exact(step));
    }
    let _ = std::fs::remove_file(folder.path("report.json"));
    let arguments = [
        "drive",
        "plan.toml",
        "--into",
        "runs",
        "--write",
        "report.json",
    ];
    let mut ran = folder.run(&arguments);
    if let Ok(text) = std::fs::read_to_string(folder.path("report.json")) {
        ran.report = serde_json::from_str(&text).unwrap();
    }
    ran
}

fn reasons(ran: &Ran) -> Vec<&str> {
    let list = ran.report["submissions"][0]["reasons"].as_array();
    list.map(|list| list.iter().filter_map(Value::as_str).collect())
        .unwrap_or_default()
}

const CASE_FOLDER: &str = "runs/thermal/cold-room-defrost";
/// Copies the exact file of the step: the folder of the plan is three above `runs`.
const COPY: &str = "cp ../../../../$2.csv \"$3\"";

#[test]
fn the_demo_passes_and_the_folder_passes_again() {
    if !available("python3") {
        return;
    }
    let folder = Folder::new();
    let plan = root().join("demo-runs/simulator/plan.toml");
    let plan = plan.to_str().unwrap();
    let ran = folder.run(&["drive", plan, "--into", "runs", "--write", "report.json"]);
    assert_eq!((ran.status, ran.stderr.as_str()), (0, ""), "{}", ran.stdout);
    let text = std::fs::read_to_string(folder.path("report.json")).unwrap();
    let report: Value = serde_json::from_str(&text).unwrap();
    let submissions = report["submissions"].as_array().unwrap();
    assert!(submissions.len() >= 10, "{}", submissions.len());
    for one in submissions {
        assert_eq!(one["verdict"], "pass", "{}", one["name"]);
        assert_eq!(one["runs"].as_array().unwrap().len(), 4, "{}", one["name"]);
        assert_ne!(one["evidence"]["verdict"], "contradicts", "{}", one["name"]);
    }
    let again = folder.audit(&["runs"]);
    assert_eq!(again.status, 0);
    assert_eq!(again.report["summary"], report["summary"]);
}

/// The order of a method that is not the one claimed is found through the plan as well.
#[test]
fn a_false_claim_fails() {
    if !available("python3") {
        return;
    }
    let folder = Folder::new();
    let alder = root().join("demo-runs/simulator/alder.py");
    folder.write("alder.py", std::fs::read(alder).unwrap());
    let plan = r#"
        command = ["python3", "{plan}/alder.py", "--method=euler", "--case={case}", "--step={step}", "--output={output}"]
        cases = ["electrical/rc-constant", "kinetics/bolus"]
        steps = { of_time_constant = [0.1, 0.05, 0.025] }
        jobs = JOBS
        limits = { relative = 0.5 }
        [claims]
        method = "METHOD"
    "#;
    let mut reports = Vec::new();
    for (method, jobs, status) in [
        ("Heun", "1", 1),
        ("forward Euler", "1", 0),
        ("forward Euler", "3", 0),
    ] {
        folder.write(
            "plan.toml",
            plan.replace("METHOD", method).replace("JOBS", jobs),
        );
        let ran = folder.run(&["drive", "plan.toml", "--write", "report.json"]);
        assert_eq!(ran.status, status, "{method}: {}", ran.stdout);
        // Where something is not in order, the runs are there to be looked at.
        let kept = ran.stderr.strip_prefix("the runs are kept in ");
        assert_eq!(kept.is_some(), status == 1, "{}", ran.stderr);
        if let Some(kept) = kept {
            let kept = std::path::Path::new(kept.trim());
            assert!(kept.join("kinetics/bolus/submission.toml").is_file());
            std::fs::remove_dir_all(kept).unwrap();
        }
        reports.push(std::fs::read(folder.path("report.json")).unwrap());
    }
    assert_eq!(reports[1], reports[2], "the jobs show in the report");
}

#[test]
fn a_sound_command_passes() {
    if !available("sh") {
        return;
    }
    let folder = Folder::new();
    let ran = drive(
        &folder,
        &plan(
            COPY,
            "producer = \"al\\\"der\"\n[limits]\nabsolute = 1e-9\n",
        ),
    );
    assert_eq!(ran.status, 0, "{}{}", ran.stdout, ran.stderr);
    assert_eq!(ran.report["submissions"][0]["producer"], "al\"der");
    let json =
        std::fs::read_to_string(folder.path(&format!("{CASE_FOLDER}/step-60/case.json"))).unwrap();
    let shown = folder.run(&["case", "thermal/cold-room-defrost", "--json"]);
    assert_eq!(json, shown.stdout);
    // Nothing is ever overwritten.
    let again = drive(&folder, &plan(COPY, ""));
    assert_eq!(again.status, 2);
    assert!(
        again
            .stderr
            .contains("runs: the folder of --into is not empty\n  help: "),
        "{}",
        again.stderr
    );
}

#[test]
fn a_crash_fails_its_case_and_shows_the_last_lines() {
    if !available("sh") {
        return;
    }
    // The finest step crashes after it has written everything: what it wrote does not count.
    let script =
        format!("{COPY}; if test $2 = 60; then printf 'one\\nbo\\033[31mom\\n' >&2; exit 3; fi");
    let folder = Folder::new();
    let ran = drive(&folder, &plan(&script, ""));
    assert_eq!((ran.status, ran.verdict()), (1, "fail"), "{}", ran.stderr);
    assert_eq!(
        reasons(&ran)[0],
        "step-60: the command ended with exit status 3; the last lines of its standard error: `one`, `bo\\u{1b}[31mom`"
    );
    assert!(
        !ran.stdout.contains('\u{1b}') && ran.seen().contains("bo\\u{1b}[31mom"),
        "{}",
        ran.stdout
    );
    assert_eq!(
        ran.report["submissions"][0]["runs"]
            .as_array()
            .unwrap()
            .len(),
        1
    );
    let notes = ran.report["submissions"][0]["notes"].to_string();
    assert!(
        notes.contains("the finest run failed: limits were applied to step-120"),
        "{notes}"
    );
    // Nor does it in a later audit of the folder.
    let again = folder.audit(&["runs"]);
    assert_eq!(again.status, 2);
    assert!(
        again
            .seen()
            .contains("there is no file `step-60/trajectory.csv`"),
        "{}",
        again.seen()
    );
}

#[test]
fn commands_that_hang_stay_silent_or_write_nonsense() {
    if !available("sh") {
        return;
    }
    for (script, more, told) in [
        // A child of the command holds the pipes open: it has to go as well.
        (
            "echo begun; sleep 600 & sleep 600",
            "time_limit = 0.5",
            "step-60: the command was still running after 0.5 s, the `time_limit` of the plan, and was ended; the last line of its standard output: `begun`",
        ),
        // A child that is left behind does not hold up anything.
        (
            "sleep 600 &",
            "",
            "step-60: the command ended in order but wrote no `{output}` (trajectory.csv in the folder of the run); it said nothing",
        ),
        (
            ": > \"$3\"",
            "",
            "step-60: the command wrote an empty file; it said nothing",
        ),
        (
            "mkdir \"$3\"",
            "",
            "step-60: what the command wrote is no plain file; it said nothing",
        ),
        (
            "kill -9 $$",
            "",
            "step-60: the command was ended by signal: 9 (SIGKILL); it said nothing",
        ),
        (
            "echo a,b > \"$3\"",
            "",
            "step-60/trajectory.csv: the file has no rows of numbers",
        ),
        (
            "echo 'a,b\n1,2\n2,3' > \"$3\"",
            "",
            "step-60/trajectory.csv: no column of time stamps",
        ),
    ] {
        let ran = drive(&Folder::new(), &plan(script, more));
        assert_eq!(
            (ran.status, ran.verdict()),
            (1, "fail"),
            "{script}: {}",
            ran.stderr
        );
        assert!(
            reasons(&ran)[0].starts_with(told),
            "{script}: {:?}",
            reasons(&ran)
        );
        assert!(
            ran.seen().contains("thermal/cold-room-defrost: step-60"),
            "{}",
            ran.seen()
        );
    }
}

/// What a command has started ends with it, at its time limit and at its own end.
#[cfg(target_os = "linux")]
#[test]
fn nothing_stays_behind() {
    if !available("sh") {
        return;
    }
    for script in [
        "sleep 600 & echo $! > pid; wait",
        "sleep 600 & echo $! > pid",
    ] {
        let folder = Folder::new();
        drive(&folder, &plan(script, "time_limit = 2"));
        for step in ["60", "120"] {
            let path = folder.path(&format!("{CASE_FOLDER}/step-{step}/pid"));
            let number = std::fs::read_to_string(path).unwrap();
            let stat = format!("/proc/{}/stat", number.trim());
            // Gone, or dead and not yet taken note of by its parent.
            let gone = || {
                let stat = std::fs::read_to_string(&stat).unwrap_or_default();
                stat.is_empty() || stat.contains(") Z ") || stat.contains(") X ")
            };
            // Dying takes the system a moment.
            let soon = (0..1000).any(|_| {
                std::thread::sleep(std::time::Duration::from_millis(5));
                gone()
            });
            assert!(soon, "{script}: {}", number.trim());
        }
    }
}

#[test]
fn a_chattering_command_is_cut_and_not_held_up() {
    if !available("sh") {
        return;
    }
    let script = format!(
        "i=0; while [ $i -lt 60 ]; do printf '%040000d' 0; i=$((i+1)); done; echo end; {COPY}"
    );
    let folder = Folder::new();
    let ran = drive(&folder, &plan(&script, "jobs = 1"));
    assert_eq!(ran.status, 0, "{}{}", ran.stdout, ran.stderr);
    let kept =
        std::fs::read_to_string(folder.path(&format!("{CASE_FOLDER}/step-60/output.txt"))).unwrap();
    let (first, rest) = kept.split_once('\n').unwrap();
    let cut = 60 * 40_000 + 4 - (1 << 20);
    assert_eq!(
        first,
        format!("[stepgauge: the first {cut} bytes were cut]")
    );
    assert_eq!((rest.len(), rest.ends_with("0end\n")), (1 << 20, true));
}

#[test]
fn a_plan_with_errors_is_told_where_and_how() {
    let sound = "command = [\"sh\", \"{case}\", \"{step}\", \"{output}\"]\ncases = [\"thermal/c*\"]\nsteps = [1, 2]\n";
    let changed = |from: &str, to: &str| {
        assert!(sound.contains(from));
        sound.replace(from, to)
    };
    let added = |text: &str| format!("{sound}{text}\n");
    for (text, told) in [
        (added("jbos = 2"), "plan.toml:4:1: unknown field `jbos`"),
        (added("jbos = 2"), "help: did you mean `jobs`?"),
        (
            added("jobs = 0"),
            "plan.toml:4:8: `jobs` is 0\n  help: give 1 to 256",
        ),
        (
            added("time_limit = 0"),
            "plan.toml:4:14: `time_limit` is 0\n  help: give the seconds",
        ),
        (
            added("[claims]\norder = -1"),
            "plan.toml:5:9: `order` must lie above 0",
        ),
        (
            added("[claims]\nmetod = 'Heun'"),
            "plan.toml:5:1: unknown field `metod`",
        ),
        (
            added("[limits]\nbdy = { absolute = 1 }"),
            "plan.toml:5:1: no case of the plan has a channel `bdy`\n  help: did you mean `body`?",
        ),
        (
            added("[columns]\nbdy = 2"),
            "plan.toml:5:1: no case of the plan has a channel `bdy`",
        ),
        (
            changed("thermal/c*", "thermall/*"),
            "plan.toml:2:10: no case matches `thermall/*`\n  help: did you mean `thermal/*`?",
        ),
        (
            changed("thermal/c*", "thermal/cold-rom"),
            "plan.toml:2:10: there is no case `thermal/cold-rom`",
        ),
        (
            changed("[\"thermal/c*\"]", "[]"),
            "plan.toml:2:9: `cases` is empty\n  help: write",
        ),
        (
            changed("cases = [\"thermal/c*\"]", ""),
            "plan.toml:1:1: the plan has no `cases`\n  help: add `cases = ",
        ),
        (
            changed("[1, 2]", "[1, -2]"),
            "plan.toml:3:13: -2 is no step\n  help: a step is finite",
        ),
        (
            changed("[1, 2]", "[1, 1.0]"),
            "plan.toml:3:13: step 1 is named twice\n  help: ",
        ),
        (
            changed("[1, 2]", "[]"),
            "plan.toml:3:9: a case has 0 steps here\n  help: give 1 to 100",
        ),
        (
            changed("[1, 2]", "[1, 1e9]"),
            "plan.toml:3:9: a step of 1e9 is longer than the window of case `thermal/",
        ),
        (
            changed("[1, 2]", "'fine'"),
            "plan.toml:3:9: invalid type: string \"fine\", expected a list of steps or",
        ),
        (
            changed("[1, 2]", "{ of_time_constants = [1] }"),
            "plan.toml:3:11: unknown field `of_time_constants`, expected `of_time_constant`",
        ),
        (
            changed("[1, 2]", "{ of_time_constant = [1e-20] }"),
            "of the shortest time scale of case `thermal/",
        ),
        (
            changed("[\"sh\", \"{case}\", \"{step}\", \"{output}\"]", "[]"),
            "plan.toml:1:11: the command is empty\n  help: write",
        ),
        (
            changed("\"{output}\"", "\"x\""),
            "plan.toml:1:11: the command has no `{output}`: nothing tells",
        ),
        (
            changed("\"{step}\"", "\"x\""),
            "plan.toml:1:11: the command has no `{step}`: all steps",
        ),
        (
            changed("\"{case}\"", "\"x\""),
            "plan.toml:1:11: the command has no `{case}`: all cases",
        ),
        (
            changed("{step}", "{stpe}"),
            "plan.toml:1:28: there is no placeholder `{stpe}`\n  help: there are `{case}`, `{step}`, `{output}`, `{plan}`",
        ),
        (
            changed("\"sh\"", "\"./sh\""),
            "plan.toml:1:12: program `./sh` would be looked for in the folder of each run\n  help: begin the path with `{plan}/`",
        ),
        (
            changed("\"sh\"", "\"no-such-simulator\""),
            "plan.toml:1:11: program `no-such-simulator` cannot be started",
        ),
        ("command = [".to_owned(), "plan.toml:1:"),
    ] {
        let folder = Folder::new();
        folder.write("plan.toml", &text);
        let ran = folder.run(&["drive", "plan.toml", "--into", "runs"]);
        assert_eq!((ran.status, ran.stdout.as_str()), (2, ""), "{text}");
        assert!(ran.stderr.contains(told), "{text}: {}", ran.stderr);
        // A plan that is not sound leaves nothing behind.
        assert!(
            told.contains("started") || !folder.path("runs").exists(),
            "{text}"
        );
    }
    let folder = Folder::new();
    for (arguments, told) in [
        (&["drive", "none.toml"][..], "none.toml: cannot be read"),
        (&["drive", "."][..], "this is a folder, a plan is a file"),
    ] {
        let ran = folder.run(arguments);
        assert!(
            ran.status == 2 && ran.stderr.contains(told),
            "{}",
            ran.stderr
        );
    }
    folder.write("plan.toml", sound);
    let ran = folder.run(&["drive", "plan.toml", "--write", "report.odt"]);
    assert!(
        ran.status == 2 && ran.stderr.contains("no report is known"),
        "{}",
        ran.stderr
    );
}

/// What is written for a later audit states all that the plan does.
#[test]
fn the_submission_that_is_left_says_what_the_plan_says() {
    if !available("sh") {
        return;
    }
    let more = r#"
[claims]
method = 'Heun'
order = 2
[limits]
absolute = 1e-3
relative_to = "peak"
relative = 0.5
order_slack = 0.25
air = { absolute = 2, relative_to = "value" }
[columns]
time = { column = "t", unit = "s" }
air = "air"
wall = 3
[layout]
separator = ","
decimal = "."
comment = '%"\'
skip_lines = 1
digits = 17
"#;
    let folder = Folder::new();
    drive(&folder, &plan(COPY, more));
    let path = folder.path(CASE_FOLDER);
    let text = std::fs::read_to_string(path.join("submission.toml")).unwrap();
    let mut left = stepgauge::submission::Submission::parse(&text, &path).unwrap();
    let mut stated = stepgauge::submission::Terms::parse(more).unwrap();
    for columns in [&mut left.columns, &mut stated.columns] {
        columns.values_mut().for_each(|column| column.place = None);
    }
    assert_eq!(left.claims, stated.claims);
    assert_eq!(left.limits, stated.limits);
    assert_eq!(left.columns, stated.columns);
    assert_eq!(format!("{:?}", left.layout), format!("{:?}", stated.layout));
    let steps: Vec<_> = left
        .runs
        .iter()
        .map(|run| (run.file.as_str(), run.setting.step()))
        .collect();
    assert_eq!(
        steps,
        [
            ("step-60/trajectory.csv", Some(60.0)),
            ("step-120/trajectory.csv", Some(120.0))
        ]
    );
}
