use super::*;

fn find(text: &str, stated: &Stated) -> Result<Option<Layout>> {
    let lines: Vec<&[u8]> = text.lines().map(str::as_bytes).collect();
    Layout::find(&lines, stated)
}

fn found(text: &str) -> Layout {
    find(text, &Stated::default()).unwrap().unwrap()
}

#[test]
fn separators_and_decimal_signs_are_told_apart() {
    use Separator::*;
    for (text, separator, decimal_comma, columns) in [
        ("t,x\n0,1\n1,2\n", Comma, false, 2),
        ("t;x\n0;1\n1;2\n", Semicolon, false, 2),
        ("t;x\n0,5;1\n1,5;2\n", Semicolon, true, 2),
        ("t\tx\n0.5\t1\n", Tab, false, 2),
        ("t\tx\n0,5\t1\n", Tab, true, 2),
        ("t x\n 0.5   1\n 1.5  2\n", Blank, false, 2),
        ("0,5 1,5\n1,5 2,5\n", Blank, true, 2),
        ("0.5, 1.5, 2\n1.5, 2.5, 3\n", Comma, false, 3),
        ("0 \t 1\n1 \t 2\n", Tab, false, 2),
        ("t,x\n0,nan\n1,2\n", Comma, false, 2),
        ("0.5\n1.5\n", Tab, false, 1),
    ] {
        let layout = found(text);
        let shape = (layout.separator, layout.decimal_comma, layout.columns);
        assert_eq!(shape, (separator, decimal_comma, columns), "{text:?}");
    }
}

#[test]
fn names_are_found_above_the_rows_in_quotes_or_in_a_comment() {
    let names = |text: &str| found(text).names.map(|names| names.join("|"));
    assert_eq!(
        names("\"t\",\"T, air\"\n0,1\n").as_deref(),
        Some("t|T, air")
    );
    assert_eq!(names("# t x v\n0 1 2\n").as_deref(), Some("t|x|v"));
    assert_eq!(
        names("run of today\nstep 0.1\nt;x\n0;1\n").as_deref(),
        Some("t|x")
    );
    assert_eq!(names("0;1\n1;2\n"), None);
    let units = found("t,x\ns,degC\n0,1\n");
    assert_eq!(units.names.unwrap(), ["t", "x"]);
    assert_eq!(units.units.unwrap(), ["s", "degC"]);
}

#[test]
fn what_is_stated_holds() {
    let stated = Stated {
        comment: Some("@".into()),
        ..Stated::default()
    };
    let layout = find("@ a\nt,x\n0,1\n", &stated).unwrap().unwrap();
    assert_eq!((layout.first_row, layout.names.unwrap().len()), (3, 2));
    let stated = Stated {
        skip_lines: Some(2),
        ..Stated::default()
    };
    let layout = find("1,2\nt,x\n0,1\n", &stated).unwrap().unwrap();
    assert_eq!(layout.first_row, 3);
    assert_eq!(layout.names.unwrap(), ["t", "x"]);
}

#[test]
fn files_without_rows() {
    assert_eq!(find("", &Stated::default()).unwrap(), None);
    assert_eq!(find("t,x\n\n", &Stated::default()).unwrap(), None);
    let fault = find("a story\nof two lines\n", &Stated::default()).unwrap_err();
    assert!(
        fault
            .text
            .starts_with("no rows of numbers found: this line is `of two lines`")
    );
    assert_eq!(fault.line, Some(2));
}
