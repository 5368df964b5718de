//! Faults of the machine: full disks, places that cannot be written to, files that change while
//! they are read, few open files, strange surroundings. Each is a complaint or of no consequence.
#![cfg(unix)]

use std::path::Path;
use std::process::{Command, Output};
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Duration;

use crate::folder::{CASE, Folder, program, sound};

/// Runs the program in a shell that sets something up first.
fn after(setup: &str, folder: &Folder, arguments: &[&str]) -> Output {
    let script = format!("{setup}; exec \"$0\" \"$@\"");
    let mut command = Command::new("sh");
    command.arg("-c").arg(script).arg(program()).args(arguments);
    command.current_dir(folder.path("."));
    command.env("COLUMNS", "1000").output().unwrap()
}

fn told(output: &Output) -> String {
    let told = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(!told.contains("panicked"), "{told}");
    told
}

fn submission(folder: &Folder, name: &str) {
    let text = format!("case = \"{CASE}\"\n[[runs]]\nfile = \"run.csv\"\n");
    folder.write(&format!("{name}/submission.toml"), text);
    folder.write(&format!("{name}/run.csv"), sound());
}

/// Names in a folder, sorted.
fn names(folder: &Path) -> Vec<String> {
    let entries = std::fs::read_dir(folder).unwrap();
    let name = |entry: std::io::Result<std::fs::DirEntry>| entry.unwrap().file_name();
    let mut names: Vec<String> = entries
        .map(|entry| name(entry).to_string_lossy().into_owned())
        .collect();
    names.sort();
    names
}

// A limit on the size of files stands for a disk that fills up: the system takes a part of the
// bytes, and the next writing of them fails.
#[test]
fn a_full_disk_leaves_the_report_before() {
    let folder = Folder::new();
    submission(&folder, "s");
    let reports = ["r.json", "r.html", "r.csv", "r.xml", "r.md"];
    for blocks in ["0", "1"] {
        for report in reports {
            folder.write(report, "before");
            let before = names(&folder.path("."));
            let full = format!("trap '' XFSZ; ulimit -f {blocks}");
            let mut ran = after(
                &full,
                &folder,
                &["audit", "s", "--quiet", "--write", report],
            );
            if blocks == "1" && ran.status.success() {
                // It is small enough for what was left of the disk.
                continue;
            }
            assert_eq!(ran.status.code(), Some(2), "{report}");
            let text = told(&ran);
            let start = format!("{report}: cannot be written: ");
            assert!(text.starts_with(&start), "{text}");
            assert!(!text.contains(".stepgauge-"), "{text}");
            let found = std::fs::read_to_string(folder.path(report)).unwrap();
            assert_eq!(found, "before", "{report}");
            assert_eq!(names(&folder.path(".")), before, "{report}");
            // With room again it is written.
            ran = after(":", &folder, &["audit", "s", "--quiet", "--write", report]);
            assert_eq!(ran.status.code(), Some(0), "{report}");
            std::fs::remove_file(folder.path(report)).unwrap();
        }
    }
    // A draft is new or not there at all.
    folder.write("new/run.csv", sound());
    let draft = ["draft", "new/run.csv", "--case", CASE];
    let ran = after("trap '' XFSZ; ulimit -f 0", &folder, &draft);
    assert_eq!(ran.status.code(), Some(2), "{}", told(&ran));
    assert_eq!(names(&folder.path("new")), ["run.csv"]);
    assert!(after(":", &folder, &draft).status.success());
}

#[cfg(target_os = "linux")]
#[test]
fn a_full_device_behind_the_screen_is_told() {
    let folder = Folder::new();
    submission(&folder, "s");
    let exact = ["exact", CASE, "--step", "0.5"];
    for arguments in [&["audit", "s"][..], &["cases"], &exact] {
        let ran = after("exec >/dev/full", &folder, arguments);
        assert_eq!(ran.status.code(), Some(2), "{arguments:?}");
        let text = told(&ran);
        assert!(text.contains("standard output cannot be written"), "{text}");
    }
}

#[test]
fn a_report_takes_the_place_of_files_only() {
    let folder = Folder::new();
    submission(&folder, "s");
    folder.write("elsewhere.json", "somebody's");
    std::os::unix::fs::symlink("elsewhere.json", folder.path("link.json")).unwrap();
    let pipe = Command::new("mkfifo")
        .arg(folder.path("pipe.json"))
        .status();
    assert!(pipe.unwrap().success());
    std::fs::create_dir(folder.path("folder.json")).unwrap();
    let mut places = vec![
        ("link.json", "this is a link"),
        ("pipe.json", "this is no plain file"),
        ("folder.json", "this is a folder"),
        ("nowhere/r.json", "the folder of this report is not there"),
        ("s/run.csv/r.json", "the folder of this report is not there"),
    ];
    if cfg!(target_os = "linux") {
        // Not even the superuser makes a file there.
        places.push(("/proc/r.json", "cannot be written"));
    }
    for (place, text) in places {
        let ran = folder.run(&["audit", "s", "--write", place]);
        assert_eq!(ran.status, 2, "{place}: {}", ran.seen());
        assert!(ran.stderr.contains(text), "{place}: {}", ran.seen());
        let start = format!("{place}: ");
        assert!(ran.stderr.starts_with(&start), "{place}: {}", ran.seen());
    }
    let kept = std::fs::read_to_string(folder.path("elsewhere.json"));
    assert_eq!(kept.unwrap(), "somebody's");
    let link = std::fs::symlink_metadata(folder.path("link.json"));
    assert!(link.unwrap().is_symlink());
}

// Nothing is made beside what is audited, neither while it is read nor by an error.
#[test]
fn what_is_audited_may_be_read_only() {
    use std::os::unix::fs::PermissionsExt;
    let folder = Folder::new();
    submission(&folder, "s");
    folder.write("s/second.csv", "t,air\n0,1,2\n");
    let before = names(&folder.path("s"));
    let allow = |mode: u32| {
        let permissions = std::fs::Permissions::from_mode(mode);
        std::fs::set_permissions(folder.path("s"), permissions).unwrap();
    };
    allow(0o555);
    let ran = folder.audit(&["s"]);
    let second = folder.run(&["audit", "s/second.csv", "--case", CASE]);
    allow(0o755);
    assert_eq!((ran.status, ran.verdict()), (0, "pass"), "{}", ran.seen());
    assert_ne!(second.status, 0);
    assert_eq!(names(&folder.path("s")), before);
}

/// Audits a file as often as it takes until a change made by `meddle` falls into one.
fn meddled(meddle: impl Fn(&Path) + Sync) -> String {
    let folder = Folder::new();
    // Long enough for an audit not to be over before it has begun.
    let comment = format!("# {}\n", "x".repeat(400_000));
    folder.write("run.csv", [comment.into_bytes(), sound()].concat());
    let path = folder.path("run.csv");
    let over = AtomicBool::new(false);
    let arguments = ["audit", "run.csv", "--case", CASE];
    let quiet = folder.run(&arguments);
    assert_eq!(quiet.status, 0, "{}", quiet.seen());
    std::thread::scope(|scope| {
        scope.spawn(|| {
            while !over.load(Ordering::Relaxed) {
                meddle(&path);
                std::thread::sleep(Duration::from_millis(1));
            }
        });
        let mut told = (0..200).map(|_| folder.run(&arguments));
        let told = told.find(|ran| ran.seen().contains("changed while it was read"));
        over.store(true, Ordering::Relaxed);
        let told = told.expect("a change while it was read");
        assert_eq!(told.status, 2, "{}", told.seen());
        told.seen()
    })
}

#[test]
fn files_that_change_while_they_are_read_are_told() {
    use std::io::Write;
    let append = |path: &Path| {
        let mut file = std::fs::File::options().append(true).open(path).unwrap();
        file.write_all(b"# still at work\n").unwrap();
    };
    let text = meddled(append);
    let whole = "run.csv: this file changed while it was read; help: audit it again when";
    assert!(text.contains(whole), "{text}");
    // Half of it, and whole again.
    meddled(|path: &Path| {
        let whole = std::fs::read(path).unwrap();
        std::fs::write(path, &whole[..whole.len() / 2]).unwrap();
        std::fs::write(path, &whole).unwrap();
    });
    // Gone, and back under a new date.
    meddled(|path: &Path| {
        let whole = std::fs::read(path).unwrap();
        std::fs::remove_file(path).unwrap();
        std::fs::write(path, &whole).unwrap();
    });
}

#[test]
fn few_files_are_open_at_a_time() {
    let folder = Folder::new();
    for number in 0..100 {
        submission(&folder, &format!("all/{number}"));
    }
    let arguments = ["audit", "all", "--threads", "7", "--write", "r.json"];
    let ran = after("ulimit -n 40", &folder, &arguments);
    assert_eq!(ran.status.code(), Some(0), "{}", told(&ran));
    let text = std::fs::read_to_string(folder.path("r.json")).unwrap();
    let report: serde_json::Value = serde_json::from_str(&text).unwrap();
    let submissions = report["submissions"].as_array().unwrap();
    assert_eq!(submissions.len(), 100);
    assert!(submissions.iter().all(|one| one["verdict"] == "pass"));
}

// No home, no terminal, other languages, clocks and widths: the same report, byte for byte.
#[test]
fn surroundings_do_not_matter() {
    let folder = Folder::new();
    submission(&folder, "s");
    let report = |setup: &str| {
        let reports = ["r.json", "r.csv", "r.html", "r.md", "r.xml"];
        let mut arguments = vec!["audit", "s"];
        for report in reports {
            arguments.extend(["--write", report]);
        }
        let ran = after(setup, &folder, &arguments);
        assert_eq!(ran.status.code(), Some(0), "{setup}: {}", told(&ran));
        reports.map(|report| std::fs::read(folder.path(report)).unwrap())
    };
    let usual = report(":");
    for setup in [
        "unset HOME USER PATH LANG LC_ALL TERM COLUMNS TMPDIR",
        "export HOME=/nonexistent TMPDIR=/nonexistent",
        "export LC_ALL=tr_TR.UTF-8 LANGUAGE=tr",
        "export LC_ALL=de_DE@euro LC_NUMERIC=de_DE",
        "export LC_ALL=C TZ=Antarctica/Troll TERM=dumb",
        "export COLUMNS=0 LINES=-3 TERM=nonsense LC_ALL=%s%n",
        "export COLUMNS=99999999999999999999 NO_COLOR= CLICOLOR_FORCE=1",
        "exec <&-",
        "exec <&- >&- 2>&-",
        "umask 077",
        "ulimit -c 0",
    ] {
        assert_eq!(report(setup), usual, "{setup}");
    }
}
