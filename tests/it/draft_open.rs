use crate::draft::{COLD, PLAIN, Style, even};
use crate::folder::{Folder, Ran};

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
        "no case has its states under these names in this window, and none fits within 20 % of the peak",
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
        &["no case has a window that the time stamps, from 0 to 7.123e-5, cover"],
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

// A bead that cools at another rate than that of the library, without a header: what comes
// near is named, and that it does no more than that.
#[test]
fn a_loose_fit_is_called_one() {
    let row = |k: u32| {
        let t = f64::from(k) * 0.06;
        format!("{t},{}\n", 22.0 + 173.0 * (-t / 2.5).exp())
    };
    let (folder, ran) = drafted(&(0..=400).map(row).collect::<String>(), &[]);
    says(
        &ran,
        0,
        &[
            "a loose fit, and no name speaks for it",
            "written thermal/cooling-body",
        ],
    );
    let text = std::fs::read_to_string(folder.path("s/submission.toml")).unwrap();
    assert!(
        text.contains("# A loose fit, and no name speaks for it"),
        "{text}"
    );
    // Exact values under no name are close.
    let close = even("thermal/cooling-body", 400, 1e-4).write("", &PLAIN, |r| r[..2].to_vec());
    let (_, ran) = drafted(&close, &[]);
    assert!(
        ran.status == 0 && !ran.seen().contains("loose"),
        "{}",
        ran.seen()
    );
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
}

#[test]
fn digits_and_claims_are_left_open() {
    // Eight to twelve digits without a pattern: rounded or not?
    let uneven = |x: f64| format!("{x:.*e}", [7, 9, 10, 11][(x * 1e6) as usize % 4]);
    let style = Style {
        print: uneven,
        ..PLAIN
    };
    let cold = even(COLD, 240, 1e-5);
    let (folder, ran) = drafted(
        &cold.write("t,air,wall\n", &style, |r| r[..3].to_vec()),
        &[],
    );
    let words = [
        "whether values were rounded to 12 digits or written in full",
        "the producer, its method and the order it claims",
        "the limits: those of the case hold until others are stated",
        "whether inner steps are finer than the rows",
    ];
    says(&ran, 0, &words);
    let text = std::fs::read_to_string(folder.path("s/submission.toml")).unwrap();
    assert!(text.contains("\n# [layout]\n# digits = 12\n"), "{text}");
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
