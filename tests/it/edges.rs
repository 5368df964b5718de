use std::fmt::Write;

use stepgauge::case::{Case, Replacements};
use stepgauge::trajectory::{MOST_COLUMNS, MOST_LINE_BYTES};

use crate::folder::{Folder, Ran};

/// The whole of a case whose columns are `t` and `v_c`.
const CASE: &str = "electrical/rc-constant";
const MEGABYTE: usize = 1 << 20;

fn says(ran: &Ran, status: i32, text: &str) {
    assert!(
        ran.status == status && ran.seen().contains(text),
        "{text}: {}",
        ran.seen()
    );
}

/// A text with a remark at its end that brings it to a length.
fn filled(text: &str, length: usize) -> String {
    format!("{text}#{}", "x".repeat(length - text.len() - 1))
}

#[test]
fn files_of_toml_may_have_a_mebibyte() {
    let folder = Folder::new();
    folder.write("s/run.csv", "t,v_c\n0,0\n");
    let submission = format!("case = '{CASE}'\n[[runs]]\nfile = 'run.csv'\n");
    let rules = "[limits]\nabsolute = 1\n";
    let case = "title = 'o'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
                [time]\nunit = 's'\nfrom = 0\nto = 1\n[limits]\nabsolute = 1\nrelative = 0\n\
                [[states]]\nname = 'x'\nunit = 'm'\nstart = 1\nrate = '-x'\n";
    let plan = "program = 1\n";
    for more in [0, 1] {
        let length = MEGABYTE + more;
        folder.write("s/submission.toml", filled(&submission, length));
        let told = ["", "has 1048577 bytes, at most 1048576 are read"][more];
        says(&folder.audit(&["s"]), 2 - [1, 0][more], told);
    }
    folder.write("s/submission.toml", &submission);
    for more in [0, 1] {
        let length = MEGABYTE + more;
        folder.write("rules.toml", filled(rules, length));
        let told = ["", "has more than 1048576 bytes"][more];
        says(
            &folder.audit(&["s", "--limits", "rules.toml"]),
            1 + more as i32,
            told,
        );
        folder.write("cases/o.toml", filled(case, length));
        let told = ["", "a case file is a plain file of at most 1048576 bytes"][more];
        let ran = folder.run(&["case", "trial/o", "--cases", "cases"]);
        says(&ran, 2 * more as i32, told);
        folder.write("plan.toml", filled(plan, length));
        let told = ["plan.toml:", "has 1048577 bytes, at most 1048576 are read"][more];
        says(&folder.run(&["drive", "plan.toml"]), 2, told);
    }
}

/// Tables of as many bytes or columns as there may be, and of one more.
fn at_the_edge(most: usize, table: impl Fn(usize) -> String, told: &str) {
    let folder = Folder::new();
    let audit = |size: usize| {
        folder.write("run.csv", table(size));
        folder.audit(&["run.csv", "--case", CASE])
    };
    says(&audit(most), 1, "");
    says(&audit(most + 1), 2, told);
}

#[test]
fn lines_may_have_a_mebibyte() {
    // The end of the line is none of its bytes.
    let table = |bytes: usize| format!("t,v_c,{}\n0,0,0\n", "x".repeat(bytes - 6));
    let told = "run.csv:1:1: this line is longer than 1048576 bytes";
    at_the_edge(MOST_LINE_BYTES, table, told);
}

#[test]
fn columns_are_counted() {
    let table = |count: usize| {
        let names: String = (2..count).fold(String::new(), |mut names, k| {
            let _ = write!(names, ",c{k}");
            names
        });
        format!("t,v_c{names}\n0{}\n", ",0".repeat(count - 1))
    };
    let told = "4097 columns, at most 4096 are read";
    at_the_edge(MOST_COLUMNS, table, told);
}

#[test]
fn knots_are_counted_as_jumps() {
    let solved = |knots: usize| {
        let times: String = (1..=knots).map(|k| format!("{k},")).collect();
        let values = "0,1,".repeat(knots / 2) + ["", "0"][knots % 2];
        let text = format!(
            "title = 'o'\nfield = 'trial'\nabout = ''\nsource = 'ours'\nhard_for = []\n\
             [time]\nunit = 's'\nfrom = 0\nto = 2e5\n[limits]\nabsolute = 1\nrelative = 0\n\
             [[states]]\nname = 'x'\nunit = 'm'\nstart = 1\nrate = 'u - x'\n\
             [[inputs]]\nname = 'u'\nunit = ''\nshape = 'held-samples'\n\
             times = [{times}]\nvalues = [{values}]\n"
        );
        assert!(text.len() < MEGABYTE);
        let case = Case::parse("o", &text, &Replacements::new()).unwrap();
        case.exact().map(|_| ()).map_err(|fault| fault.to_string())
    };
    assert_eq!(solved(100_000), Ok(()));
    let told = solved(100_001).unwrap_err();
    assert!(told.contains("`u` jumps more than 100000 times"), "{told}");
}

/// Folders below the deepest one that is looked into are complained of, not passed over.
#[test]
fn folders_have_a_depth() {
    let folder = Folder::new();
    let deep = |levels: usize| {
        let path = "d/".repeat(levels);
        let text = format!("case = '{CASE}'\n[[runs]]\nfile = 'run.csv'\n");
        folder.write(&format!("{path}submission.toml"), text);
        folder.write(&format!("{path}run.csv"), "t,v_c\n0,0\n");
    };
    // Counted from the path that is named.
    deep(32);
    says(&folder.audit(&["d"]), 1, "1 submission");
    deep(33);
    let ran = folder.audit(&["d"]);
    says(&ran, 2, "folders lie more than 32 deep from here on");
    // It is one complaint, whatever lies beside it.
    deep(34);
    let other = format!("case = '{CASE}'\nruns = []\n");
    folder.write("d/d/other/submission.toml", other);
    let names = |ran: &Ran, list: &str| -> Vec<String> {
        let list = ran.report[list].as_array().unwrap().iter();
        list.map(|one| one["name"].as_str().unwrap().to_owned())
            .collect()
    };
    let at = |levels: usize| vec!["d"; levels].join("/");
    let ran = folder.audit(&["d"]);
    says(&ran, 2, "3 submissions: 1 fail, 2 not audited");
    says(
        &ran,
        2,
        "help: name this folder on the command line as well",
    );
    assert_eq!(ran.seen().matches("more than 32 deep").count(), 1);
    assert_eq!(names(&ran, "not_audited"), [at(32), "d/other".to_owned()]);
    assert_eq!(names(&ran, "submissions"), [at(31)]);
    // With that done nothing is left to complain of, whichever folder on the way is named.
    for (named, found) in [
        (at(20), [at(32), at(33), at(34)]),
        // A folder that is named itself goes by its own name.
        (at(33), ["d".to_owned(), at(32), at(34)]),
    ] {
        let ran = folder.audit(&["d", &named]);
        says(&ran, 2, "4 submissions: 3 fail, 1 not audited");
        assert_eq!(names(&ran, "not_audited"), ["d/d/other"]);
        assert_eq!(names(&ran, "submissions"), found);
    }
}
