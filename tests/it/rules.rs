//! Files of rules: what is wrong with them, and how they go with an audit in parts.

use crate::folder::Folder;
use crate::reviewers::{by_rules, near, none, read, submit};

#[test]
fn rules_with_mistakes_are_refused_with_their_place() {
    let folder = Folder::new();
    submit(&folder, "s", "", &[(Some(0.05), near(&[], 0.05, none))]);
    for (rules, told) in [
        (
            "[limit]\nabsolute = 1",
            "rules.toml:1:2: unknown field `limit`",
        ),
        (
            "[limits]\nv_d = { absolute = 1 }",
            "rules.toml:2:1: no case has a channel `v_d` to limit",
        ),
        (
            "[case_limits.\"electrical/rc-constant\"]\nair = { absolute = 1 }",
            "rules.toml:2:1: case `electrical/rc-constant` has no channel `air` to limit",
        ),
        (
            "[case_limits.\"electrical/rc-constnt\"]\nabsolute = 1",
            "rules.toml:1:14: there is no case `electrical/rc-constnt` help: did you mean \
             `electrical/rc-constant`?",
        ),
        (
            "[[require]]\ncase = \"rc-constant\"\nmethods = [\"RK4\", \"RK44\"]",
            "rules.toml:2:8: there is no case `rc-constant` help: did you mean \
             `electrical/rc-constant`? `stepgauge cases` lists all rules.toml:3:19: no method is \
             known as `RK44` help: did you mean `RKF4`?",
        ),
        (
            "[limits]\nabsolute = \"1\"",
            "rules.toml:2:12: `absolute` must be a number",
        ),
        ("own_cases = true", "rules.toml:1:13: "),
    ] {
        let ran = by_rules(&folder, rules, &[]);
        assert!(
            ran.status == 2 && ran.seen().contains(told),
            "{told}: {}",
            ran.seen()
        );
    }
    folder.write(
        "limits.toml",
        "[limits]\nabsolute = 1\n[[require]]\ncase = \"a/b\"\n",
    );
    let ran = folder.audit(&["s", "--limits", "limits.toml"]);
    let told = "limits.toml:3:1: `require` is no limit help: give this file to `--require`";
    assert!(
        ran.status == 2 && ran.seen().contains(told),
        "{}",
        ran.seen()
    );
    folder.write("limits.toml", "[limits]\nabsolute = 1\n");
    let ran = by_rules(
        &folder,
        "[limits]\nrelative = 1\n",
        &["--limits", "limits.toml"],
    );
    let told =
        "limits.toml: states limits beside `--require`, whose file has limits too help: keep";
    assert!(
        ran.status == 2 && ran.seen().contains(told),
        "{}",
        ran.seen()
    );
    let ran = folder.audit(&["s", "--limits", "nowhere.toml"]);
    assert!(ran.status == 2 && ran.seen().contains("nowhere.toml: cannot be read"));
    for (name, option) in [("rules.json", "--require"), ("limits.json", "--limits")] {
        folder.write(name, "[limits]\nabsolute = 1\n");
        let ran = folder.run(&["audit", "s", option, name, "--write", name]);
        assert!(
            ran.status == 2
                && ran
                    .seen()
                    .contains("would overwrite a file that is audited")
        );
    }
}

#[test]
fn parts_share_the_limits() {
    let folder = Folder::new();
    for name in ["s/a", "s/b"] {
        let off = near(&[], 0.05, |t| 0.01 * t.sin());
        submit(
            &folder,
            name,
            "[limits]\nabsolute = 1",
            &[(Some(0.05), off)],
        );
    }
    folder.write("limits.toml", "[limits]\nabsolute = 1e-3\n");
    let part = |part: &str, name: &str| {
        let rules = ["--limits", "limits.toml", "--own-parameters", "refuse"];
        let part = ["audit", "s", "--part", part, "--write", name];
        assert_eq!(folder.run(&[&part[..], &rules].concat()).status, 1);
    };
    part("1/2", "1.json");
    part("2/2", "2.json");
    let whole = ["s", "--limits", "limits.toml", "--own-parameters", "refuse"];
    assert_eq!(folder.audit(&whole).status, 1);
    let ran = folder.run(&["merge", "1.json", "2.json", "--write", "whole.json"]);
    assert_eq!(ran.status, 1, "{}", ran.seen());
    assert_eq!(read(&folder, "whole.json"), read(&folder, "report.json"));
    assert!(
        ran.seen()
            .contains("a, b: judged by limits of the reviewer's file")
    );
    folder.write(
        "limits.toml",
        "[limits]\nabsolute = 1e-2\n[limits.v_c]\nabsolute = 1e-3\n",
    );
    part("2/2", "2.json");
    let ran = folder.run(&["merge", "1.json", "2.json"]);
    assert!(
        ran.status == 2 && ran.seen().contains("other options were given"),
        "{}",
        ran.seen()
    );
}

/// Terms hold before the audit, in every part; a file that lays down others is refused.
#[test]
fn merged_parts_have_to_be_audited_by_the_rules_that_they_are_held_against() {
    let folder = Folder::new();
    for (name, head) in [
        ("s/a", "[limits]\nabsolute = 1"),
        ("s/b", "expect = \"fail\""),
        ("s/c", "[parameters]\nR = 1.25"),
    ] {
        let exact = near(&[], 0.05, |t| 0.01 * t.sin());
        submit(&folder, name, head, &[(Some(0.05), exact)]);
    }
    let case = include_str!("../../reference-cases/thermal/cooling-body.toml");
    folder.write("own/case.toml", case.replace("\"thermal\"", "\"own\""));
    let needs = "[[require]]\ncase = \"electrical/rc-constant\"\n";
    for (name, text) in [
        ("needs.toml", needs.to_owned()),
        (
            "needs-own.toml",
            "[[require]]\ncase = \"own/case\"\n".to_owned(),
        ),
        (
            "allows.toml",
            format!("own_parameters = \"allow\"\n{needs}runs = 2\n"),
        ),
        ("typo.toml", needs.replace("rc-", "rx-")),
        ("limits.toml", "[limits]\nabsolute = 1e-3\n".to_owned()),
        (
            "limited.toml",
            format!("[limits]\nabsolute = 1e-3\n{needs}"),
        ),
        (
            "limited-too.toml",
            format!("{needs}runs = 2\n[limits]\nabsolute = 0.001\n"),
        ),
        ("looser.toml", format!("[limits]\nabsolute = 2e-3\n{needs}")),
        (
            "cased.toml",
            format!("{needs}[case_limits.\"electrical/rc-constant\"]\nabsolute = 1\n"),
        ),
        ("controls.toml", format!("controls = \"refuse\"\n{needs}")),
        ("cases.toml", format!("own_cases = \"refuse\"\n{needs}")),
        (
            "parameters.toml",
            format!("own_parameters = \"refuse\"\n{needs}"),
        ),
    ] {
        folder.write(name, text);
    }
    let all = |start: &[&'static str], more: &str| -> Vec<&'static str> {
        let more = more.split_whitespace().map(|word| &*word.to_owned().leak());
        start.iter().copied().chain(more).collect()
    };
    let run = |by: &str, with: &str, of: u32| {
        for part in 1..=of {
            let more = format!("--part {part}/{of} --write {part}.json {by}");
            let ran = folder.run(&all(&["audit", "s"], &more));
            assert!(ran.status < 2, "{by}: {}", ran.seen());
        }
        let more = if of == 2 { "1.json 2.json" } else { "1.json" };
        folder.run(&all(
            &["merge", "--write", "whole.json"],
            &format!("{more} {with}"),
        ))
    };
    // What the parts were audited by, what `merge` is given, what the undivided audit is.
    for (by, with, undivided) in [
        (
            "--require controls.toml",
            "--require controls.toml",
            "--require controls.toml",
        ),
        (
            "--require limited.toml",
            "--require limited-too.toml",
            "--require limited-too.toml",
        ),
        (
            "--require needs.toml",
            "--require allows.toml",
            "--require allows.toml",
        ),
        (
            "--limits limits.toml",
            "--require needs.toml",
            "--limits limits.toml --require needs.toml",
        ),
        (
            "--limits limits.toml --require needs.toml",
            "--require allows.toml",
            "--limits limits.toml --require allows.toml",
        ),
        (
            "--limits limits.toml --own-parameters refuse",
            "--require allows.toml",
            "--limits limits.toml --own-parameters refuse --require allows.toml",
        ),
        (
            "--require parameters.toml --own-parameters allow",
            "--require parameters.toml",
            "--require parameters.toml --own-parameters allow",
        ),
        (
            "--cases own --require needs.toml",
            "--cases own --require needs-own.toml",
            "--cases own --require needs-own.toml",
        ),
    ] {
        let ran = run(by, with, 2);
        let whole = folder.audit(&all(&["s"], undivided));
        assert_eq!(ran.status, whole.status, "{by}: {with}: {}", ran.seen());
        let same = read(&folder, "whole.json") == read(&folder, "report.json");
        assert!(same, "{by}: {with}: {}", read(&folder, "whole.json"));
        std::fs::remove_file(folder.path("whole.json")).unwrap();
    }
    let others = "lays down other limits or refusals than the parts were audited by help: audit \
                  every part with `--require";
    let unknown = "lays down limits or refusals by which the parts were not audited help: audit";
    for (by, with, told) in [
        (
            "--require needs.toml",
            "",
            "the parts were audited by `needs.toml`, and nobody has looked",
        ),
        (
            "",
            "--require needs.toml",
            "needs.toml: the parts were not audited by these rules: limits",
        ),
        (
            "--own-parameters refuse",
            "--require needs.toml",
            "limits that submissions state for",
        ),
        ("--require needs.toml", "--require limited.toml", others),
        ("--require limited.toml", "--require needs.toml", others),
        ("--require limited.toml", "--require looser.toml", others),
        ("--require needs.toml", "--require cased.toml", others),
        ("--require needs.toml", "--require controls.toml", others),
        ("--require needs.toml", "--require cases.toml", others),
        ("--require needs.toml", "--require parameters.toml", others),
        ("--limits limits.toml", "--require limited.toml", unknown),
        ("--limits limits.toml", "--require controls.toml", unknown),
        (
            "--require needs.toml",
            "--require typo.toml",
            "typo.toml:2:8: there is no case",
        ),
        (
            "--require needs.toml",
            "--require nowhere.toml",
            "nowhere.toml: cannot be read",
        ),
        (
            "--require needs.toml",
            "--cases own",
            "--require <FILE.toml>",
        ),
        (
            "--require needs.toml --cases own",
            "--require needs.toml",
            "audited with other cases than `merge` has help: give `merge` the `--cases`",
        ),
        (
            "--require needs.toml",
            "--require needs.toml --cases own",
            "audited with other cases than `merge` has help: give",
        ),
    ] {
        let ran = run(by, with, 1);
        assert_eq!(ran.status, 2, "{by}: {with}: {}", ran.seen());
        assert!(
            ran.seen().contains(told),
            "{by}: {with}: {told}: {}",
            ran.seen()
        );
        assert!(!folder.path("whole.json").exists(), "{by}: {with}");
    }
    // The rules are an input as well.
    std::fs::copy(folder.path("needs.toml"), folder.path("needs.json")).unwrap();
    let given = [
        "merge",
        "1.json",
        "--require",
        "needs.json",
        "--write",
        "needs.json",
    ];
    let ran = folder.run(&given);
    let told = "needs.json: this report would overwrite a file that it is made from";
    assert!(
        ran.status == 2 && ran.seen().contains(told),
        "{}",
        ran.seen()
    );
    // Parts of different rules do not belong together.
    run("--require needs.toml", "", 2);
    folder.run(&all(
        &["audit", "s"],
        "--part 2/2 --write 2.json --require controls.toml",
    ));
    let ran = folder.run(&["merge", "1.json", "2.json", "--require", "needs.toml"]);
    let told = "belongs to another audit than 1.json: `--require` laid down other terms";
    assert!(
        ran.status == 2 && ran.seen().contains(told),
        "{}",
        ran.seen()
    );
}
