use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use walkdir::WalkDir;

fn root() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

fn sources() -> Vec<(PathBuf, String)> {
    WalkDir::new(root().join("src"))
        .sort_by_file_name()
        .into_iter()
        .filter_map(Result::ok)
        .filter(|entry| {
            entry
                .path()
                .extension()
                .is_some_and(|ending| ending == "rs")
        })
        .map(|entry| {
            let text = std::fs::read_to_string(entry.path()).unwrap();
            let path = entry
                .path()
                .strip_prefix(root().join("src"))
                .unwrap()
                .to_owned();
            (path, text)
        })
        .collect()
}

/// Which module may import which; data flows down the list of `src/lib.rs`.
fn allowed() -> BTreeMap<&'static str, Vec<&'static str>> {
    let foundation = ["fault", "number"];
    let with = |more: &[&'static str]| foundation.iter().chain(more).copied().collect();
    BTreeMap::from([
        ("fault", vec![]),
        ("number", vec![]),
        ("formula", with(&[])),
        ("case", with(&["formula"])),
        ("exact", with(&["case", "formula"])),
        ("trajectory", with(&[])),
        ("submission", with(&["case", "trajectory"])),
        ("compare", with(&["exact", "trajectory"])),
        ("method", with(&["case", "formula"])),
        ("judge", with(&["compare", "method"])),
        (
            "explain",
            with(&[
                "case",
                "compare",
                "method",
                "exact",
                "judge",
                "outcome",
                "trajectory",
            ]),
        ),
        ("outcome", with(&["judge", "submission", "trajectory"])),
        (
            "report",
            with(&[
                "outcome",
                "judge",
                "submission",
                "trajectory",
                "case",
                "formula",
            ]),
        ),
        (
            "audit",
            with(&[
                "case",
                "compare",
                "exact",
                "explain",
                "judge",
                "method",
                "outcome",
                "submission",
                "trajectory",
            ]),
        ),
        ("against", with(&["outcome", "report"])),
        // It takes a plan apart and reports together: both sides of an audit.
        ("parts", with(&["audit", "outcome", "report", "submission"])),
        (
            "draft",
            with(&[
                "case",
                "compare",
                "exact",
                "outcome",
                "submission",
                "trajectory",
            ]),
        ),
        (
            "cli",
            with(&[
                "against",
                "audit",
                "case",
                "compare",
                "draft",
                "exact",
                "explain",
                "judge",
                "method",
                "outcome",
                "parts",
                "references",
                "report",
                "submission",
                "trajectory",
            ]),
        ),
        ("references", vec![]),
        ("lib", vec!["case", "exact", "fault", "judge"]),
        ("main", vec!["cli"]),
    ])
}

#[test]
fn imports_follow_the_flow_of_data() {
    let allowed = allowed();
    let mut seen = 0;
    for (path, text) in sources() {
        let first = path
            .components()
            .next()
            .unwrap()
            .as_os_str()
            .to_string_lossy();
        let module = first.trim_end_matches(".rs");
        let edges = allowed
            .get(module)
            .unwrap_or_else(|| panic!("{module} is not in the list"));
        // Unit tests may reach for what they need to set a scene.
        let is_test = path.ends_with("tests.rs");
        let code = text.split("#[cfg(test)]").next().unwrap();
        for (number, line) in code.lines().enumerate().filter(|_| !is_test) {
            for part in line
                .split("crate::")
                .skip(1)
                .filter(|_| !line.trim_start().starts_with("//"))
            {
                let target = part
                    .split(|c: char| !c.is_alphanumeric() && c != '_')
                    .next()
                    .unwrap();
                let fine = target == module || edges.contains(&target);
                assert!(
                    fine,
                    "src/{}:{}: {module} imports {target}",
                    path.display(),
                    number + 1
                );
                seen += 1;
            }
        }
    }
    assert!(seen > 50, "only {seen} imports were looked at");
}

#[test]
fn files_hold_one_idea() {
    for (path, text) in sources() {
        let lines = text.lines().count();
        let code = text
            .split("#[cfg(test)]\nmod tests {")
            .next()
            .unwrap()
            .lines()
            .count();
        // The checks of a case file stay together: they share the collector of faults.
        let most = if path.ends_with("case/check.rs") {
            640
        } else {
            520
        };
        assert!(
            code <= most,
            "src/{}: {code} lines without tests ({lines})",
            path.display()
        );
        let opens = text.starts_with("//!") || path.ends_with("tests.rs");
        assert!(opens, "src/{} does not say what it is", path.display());
    }
}

#[test]
fn the_top_level_holds_what_it_should() {
    let allowed = [
        "Cargo.toml",
        "Cargo.lock",
        "README.md",
        "DEVELOPERS.md",
        "LICENSE",
        "src",
        "tests",
        "reference-cases",
        "demo-runs",
        ".ci",
        ".gitignore",
        ".git",
        "target",
    ];
    for entry in std::fs::read_dir(root()).unwrap() {
        let name = entry.unwrap().file_name().to_string_lossy().into_owned();
        assert!(
            allowed.contains(&name.as_str()),
            "{name} does not belong at the top level"
        );
    }
}

/// Tags look like `[author-author-1996]`; what the code cites is in the list, what is in
/// the list is cited, and the list is in order.
#[test]
fn every_tag_resolves_and_every_source_is_cited() {
    use stepgauge::references::{SOURCES, source};

    let is_tag = |text: &str| {
        let plain = |c: char| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '-';
        let numbered = text.rsplit_once('-').is_some_and(|(names, year)| {
            !names.is_empty() && year.len() >= 3 && year.chars().all(|c| c.is_ascii_digit())
        });
        numbered && text.chars().all(plain)
    };
    let mut cited = std::collections::BTreeSet::new();
    for (path, text) in sources() {
        if path.ends_with("references.rs") {
            continue;
        }
        for part in text.split('[').skip(1) {
            let tag = part.split(']').next().unwrap();
            if is_tag(tag) {
                let found = source(tag);
                assert!(found.is_some(), "src/{}: [{tag}]", path.display());
                cited.insert(tag.to_owned());
            }
        }
    }
    let tags: Vec<&str> = SOURCES.iter().map(|&(tag, _)| tag).collect();
    assert!(tags.is_sorted());
    assert_eq!(tags, cited.iter().collect::<Vec<_>>());
    // Every source of a method is spelled out.
    for method in stepgauge::method::METHODS {
        let tags = method.source.split('[').skip(1);
        let tags: Vec<&str> = tags.map(|part| part.split(']').next().unwrap()).collect();
        assert!(!tags.is_empty(), "{}", method.name);
        assert!(tags.iter().all(|tag| source(tag).is_some()), "{tags:?}");
    }
}

#[test]
fn input_is_never_unwrapped() {
    for (path, text) in sources() {
        let code = text.split("#[cfg(test)]").next().unwrap();
        let allowed = usize::from(path.ends_with("formula/eval.rs"));
        let count = [
            ".unwrap()",
            ".expect(",
            "panic!(",
            "todo!(",
            "unimplemented!(",
        ]
        .iter()
        .map(|word| {
            let lines = code
                .lines()
                .filter(|line| !line.trim_start().starts_with("//"));
            lines.filter(|line| line.contains(word)).count()
        })
        .sum::<usize>();
        let is_test = path.ends_with("tests.rs");
        assert!(
            is_test || count <= allowed,
            "src/{}: {count} places can panic",
            path.display()
        );
    }
}
