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
fn parts_share_the_limits_and_leave_requirements_to_the_whole() {
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
    let ran = by_rules(&folder, "controls = \"refuse\"\n", &["--part", "1/2"]);
    let told =
        "--require goes with a whole audit, --part audits a share of it help: audit the whole";
    assert!(
        ran.status == 2 && ran.seen().contains(told),
        "{}",
        ran.seen()
    );
}
