use std::collections::BTreeSet;

use roxmltree::{Document, Node};

use crate::folder::{CASE, Folder, STEP, cell, sound};

/// The page as XML: what HTML leaves open is closed, nothing else is mended.
fn strict(page: &str) -> String {
    let mut text = page.replace("<!DOCTYPE html>", "");
    text = text.replace("<details open>", "<details open=\"\">");
    for name in ["meta", "link"] {
        let mut out = String::new();
        let mut rest = text.as_str();
        while let Some(at) = rest.find(&format!("<{name} ")) {
            let end = at + rest[at..].find('>').unwrap();
            out += &rest[..end];
            out += "/>";
            rest = &rest[end + 1..];
        }
        text = out + rest;
    }
    text
}

fn text_of(node: Node) -> String {
    let texts = node.descendants().filter(|inner| inner.is_text());
    texts.filter_map(|inner| inner.text()).collect()
}

fn all<'a>(document: &'a Document, name: &'a str) -> impl Iterator<Item = Node<'a, 'a>> {
    let nodes = document.descendants();
    nodes.filter(move |node| node.tag_name().name() == name)
}

fn page_of(folder: &Folder, path: &str) -> String {
    let ran = folder.run(&["audit", path, "--write", "page.html"]);
    assert!(ran.status < 2, "{}", ran.stderr);
    std::fs::read_to_string(folder.path("page.html")).unwrap()
}

/// What holds for every page, whatever was audited.
fn check(page: &str) {
    let text = strict(page);
    let document = Document::parse(&text).unwrap();
    assert_eq!(all(&document, "h1").count(), 1);
    assert_eq!(all(&document, "script").count(), 0);
    // Nothing is asked of anywhere.
    for node in document.descendants().filter(Node::is_element) {
        assert!(node.attribute("src").is_none(), "{node:?}");
        if let Some(target) = node.attribute("href") {
            assert!(target.starts_with('#') || target == "data:,", "{target}");
        }
    }
    let style = text_of(all(&document, "style").next().unwrap());
    assert!(!style.contains("url(") && !style.contains("@import"));
    // Every link leads somewhere, no place has two names.
    let ids: Vec<&str> = document
        .descendants()
        .filter_map(|n| n.attribute("id"))
        .collect();
    let unique: BTreeSet<&str> = ids.iter().copied().collect();
    assert_eq!(ids.len(), unique.len());
    for link in all(&document, "a") {
        let target = link.attribute("href").unwrap().trim_start_matches('#');
        assert!(unique.contains(target), "{target}");
    }
    // Headings go down by one level at a time.
    let mut last = 0;
    for node in document.descendants() {
        let level = match node.tag_name().name() {
            "h1" => 1,
            "h2" => 2,
            "h3" => 3,
            _ => continue,
        };
        assert!(
            level <= last + 1,
            "h{level} after h{last}: {}",
            text_of(node)
        );
        last = level;
    }
    for table in all(&document, "table") {
        let rows: Vec<Node> = table
            .descendants()
            .filter(|n| n.has_tag_name("tr"))
            .collect();
        let cells = |row: &Node| -> usize {
            let cells = row
                .children()
                .filter(|n| n.has_tag_name("td") || n.has_tag_name("th"));
            cells
                .map(|cell| cell.attribute("colspan").map_or(1, |n| n.parse().unwrap()))
                .sum()
        };
        let wanted = cells(&rows[0]);
        assert!(rows.iter().all(|row| cells(row) == wanted));
        let heads = table.descendants().filter(|n| n.has_tag_name("th"));
        assert!(heads.clone().all(|head| head.attribute("scope").is_some()));
    }
    for picture in all(&document, "svg") {
        assert_eq!(picture.attribute("role"), Some("img"));
        let stated = picture.attribute("aria-label").unwrap();
        assert!(stated.len() > 40, "{stated}");
        let labels = picture
            .descendants()
            .filter(|n| n.attribute("class") == Some("axis"));
        let labels: Vec<String> = labels.map(text_of).collect();
        assert_eq!(labels.len(), 2, "{stated}");
        assert!(
            labels.iter().all(|label| !label.trim().is_empty()),
            "{stated}"
        );
        let marks = picture
            .descendants()
            .filter(|n| n.attribute("class") == Some("mark"));
        assert!(marks.count() >= 3, "{stated}");
    }
    assert!(!page.contains("NaN") && !page.contains("inf "));
}

#[test]
fn the_page_of_the_demo() {
    let folder = Folder::new();
    let demo = concat!(env!("CARGO_MANIFEST_DIR"), "/demo-runs");
    let page = page_of(&folder, demo);
    check(&page);
    let text = strict(&page);
    let document = Document::parse(&text).unwrap();
    let header = text_of(all(&document, "header").next().unwrap());
    // Before anything is scrolled: how it stands, and every run that fails.
    assert!(header.contains("submissions are in order"), "{header}");
    for failing in [
        "battery-room/alder",
        "battery-room/cedar",
        "bus-filter/cedar",
        "winch/cedar",
    ] {
        assert!(header.contains(failing), "{header}");
    }
    assert!(all(&document, "svg").count() > 40);
    // Digits that leave the verdict open are not said to break the limit.
    let says = |found: &str| {
        let mut plots = all(&document, "svg");
        plots.any(|plot| plot.attribute("aria-label").unwrap().contains(found))
    };
    assert!(says(
        "winch_20ms.csv: somewhere the digits leave open whether the limit is kept."
    ));
    assert!(says("h10.csv keeps its limit: 83 % of the limit at t ="));
    assert!(says(
        "bus_100us.tsv breaks its limit: 65.8 times the limit at t ="
    ));
    assert!(text_of(document.root_element()).contains("It is no approval of a simulator"));
}

#[test]
fn failing_files_are_named_on_top_with_their_cause() {
    let folder = Folder::new();
    // The row at t = 1080 is written with an air that is far off.
    folder.write("a/odd-one.csv", cell(1, "100"));
    folder.write(
        "a/submission.toml",
        format!("case = \"{CASE}\"\n[[runs]]\nfile = \"odd-one.csv\"\nstep = {STEP}\n"),
    );
    let page = page_of(&folder, "a");
    check(&page);
    let text = strict(&page);
    let document = Document::parse(&text).unwrap();
    let header = text_of(all(&document, "header").next().unwrap());
    assert!(
        header.contains("the submission is not in order"),
        "{header}"
    );
    assert!(header.contains("odd-one.csv: `air` is off by"), "{header}");
    assert!(header.contains("at t = 1080 s"), "{header}");
    let found = "at t = 1080 s.";
    assert!(all(&document, "svg").any(|p| p.attribute("aria-label").unwrap().contains(found)));
}

#[test]
fn hostile_names_come_out_as_text() {
    let folder = Folder::new();
    folder.write("a<b>&'q'/run \"1\" \u{202e}<i>.csv", sound());
    let long = "x".repeat(10_000);
    folder.write(
        "a<b>&'q'/submission.toml",
        format!(
            "case = \"{CASE}\"\nproducer = \"<script>alert(1)</script> \\u202E \\u0007 {long}\"\n[claims]\nmethod = \"<img src=x onerror=y>\"\n\
             [[runs]]\nfile = \"run \\\"1\\\" \\u202E<i>.csv\"\nstep = {STEP}\n"
        ),
    );
    let page = page_of(&folder, ".");
    check(&page);
    let text = strict(&page);
    let document = Document::parse(&text).unwrap();
    assert_eq!(all(&document, "img").count(), 0);
    let shown = text_of(document.root_element());
    assert!(shown.contains("<script>alert(1)</script>"));
    assert!(shown.contains("<img src=x onerror=y>"));
    // Also where a plot names its file.
    assert!(shown.contains("run \"1\" \\u{202e}<i>.csv keeps its limit"));
    assert!(!page.contains('\u{202e}') && !page.contains('\u{7}'));
    assert!(!page.contains(&"x".repeat(2000)));
}

/// The points of a plot do not grow with the rows; here every stretch of the window holds
/// as many as are ever kept.
#[test]
fn fifty_submissions_would_stay_below_two_megabytes() {
    let folder = Folder::new();
    let mut rows = String::new();
    for k in 0..=2880 {
        let wave = f64::from(k % 7) * 0.37;
        rows += &format!("{},{},{}\n", 5 * k, 4.0 + wave, 5.0 - wave * wave);
    }
    // From thirteen on a page has less room for each; so many tell for fifty.
    for number in 0..13 {
        for run in ["fine", "coarse", "coarser"] {
            folder.write(
                &format!("all/{number}/{run}.csv"),
                format!("t,air,wall\n{rows}"),
            );
        }
        folder.write(
            &format!("all/{number}/submission.toml"),
            format!(
                "case = \"{CASE}\"\n[[runs]]\nfile = \"fine.csv\"\nstep = 5\n[[runs]]\nfile = \"coarse.csv\"\nstep = 10\n\
                 [[runs]]\nfile = \"coarser.csv\"\nstep = 20\n"
            ),
        );
    }
    let page = page_of(&folder, "all");
    check(&page);
    assert!(50 * page.len() < 13 * 2_000_000, "{}", page.len());
}
