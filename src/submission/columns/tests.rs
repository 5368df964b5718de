use super::*;
use crate::case::{Library, Replacements};
use crate::trajectory::{Source, Stated};

fn try_match(header: &str, stated: &str) -> Result<Matched> {
    let case = Library::new()
        .load("thermal/cold-room-defrost", &Replacements::new())
        .unwrap();
    let fields = header.split(',').count();
    let row = vec!["0"; fields].join(",");
    let text = if header.starts_with(',') {
        row
    } else {
        format!("{header}\n{row}\n")
    };
    let source = Source::memory(text.into_bytes());
    let layout = source.layout(&Stated::default()).unwrap().unwrap();
    let text = format!("{stated}\n[[runs]]\nfile = 'Cargo.toml'\n");
    let folder = std::path::Path::new(env!("CARGO_MANIFEST_DIR"));
    let submission = super::super::Submission::parse(&text, folder).unwrap();
    match_columns(&case, &layout, &submission.columns)
}

fn columns(header: &str, stated: &str) -> (usize, Vec<(usize, usize)>) {
    let matched = try_match(header, stated).unwrap();
    assert_eq!(matched.missing, [], "{header}");
    (
        matched.time,
        matched
            .channels
            .iter()
            .map(|c| (c.channel, c.column))
            .collect(),
    )
}

#[test]
fn names_are_matched_exactly_then_without_unit_then_in_any_case() {
    assert_eq!(columns("t,air,wall", ""), (0, vec![(0, 1), (1, 2)]));
    assert_eq!(
        columns("wall,air,flow,Time", ""),
        (3, vec![(0, 1), (1, 0), (2, 2)])
    );
    assert_eq!(
        columns("t [min],Air (K),WALL [degC]", ""),
        (0, vec![(0, 1), (1, 2)])
    );
    assert_eq!(columns("t,AIR,air,wall", ""), (0, vec![(0, 2), (1, 3)]));
    let stated = "[columns]\ntime = 'stamp'\nair = { column = 'T1', unit = 'K' }\nwall = 3";
    assert_eq!(columns("stamp,T1,T2", stated), (0, vec![(0, 1), (1, 2)]));
    assert_eq!(
        columns(",,", "[columns]\nair = 3\nwall = 2"),
        (0, vec![(0, 2), (1, 1)])
    );
}

#[test]
fn units_come_from_the_header_or_from_the_submission() {
    let matched = try_match("t [min],air [K],wall", "").unwrap();
    assert_eq!(matched.time_conversion.factor.to_f64(), 60.0);
    assert_eq!(matched.channels[0].conversion.offset.to_f64(), -273.15);
    assert_eq!(matched.notes.len(), 2);
    let matched = try_match("t [min],air,wall", "[columns]\ntime = { unit = 'h' }").unwrap();
    assert_eq!(matched.time_conversion.factor.to_f64(), 3600.0);
    let missing = try_match("t,air [V],wall", "").unwrap().missing;
    assert_eq!(
        missing[0].1,
        "column `air` is in `V` as its header says, not in `degC`"
    );
    let fault = try_match("t,air,wall", "[columns]\nair = { unit = 'V' }").unwrap_err();
    assert_eq!(fault.text, "unit `V` does not convert to `degC`");
}

#[test]
fn what_is_ambiguous_or_unknown_is_refused() {
    let fault = |header: &str, stated: &str| try_match(header, stated).unwrap_err().to_string();
    assert_eq!(
        fault("t,air,air,wall", ""),
        "`air` fits several columns: `air` (column 2), `air` (column 3)\n  help: write `air = NUMBER` under `[columns]` in submission.toml"
    );
    assert!(fault("t,AIR,Air,wall", "").starts_with("`air` fits several columns: `AIR`"));
    assert!(fault("t,time,air,wall", "").starts_with("several columns could be the time"));
    assert!(fault("x,air,wall", "").starts_with("no column of time stamps: the header has `x`"));
    assert!(fault(",,", "").starts_with("which column is `air`? the file has no header"));
    assert!(fault("t,air,wall", "[columns]\nairs = 2").contains("did you mean `air`?"));
    assert!(fault("t,a,b", "[columns]\nair = 2\nwall = 2").contains("column 2 is given to both"));
    assert!(fault("t,a,b", "[columns]\nair = 1\nwall = 2").contains("both time and `air`"));
}

#[test]
fn missing_columns_are_named() {
    let missing = |header: &str, stated: &str| try_match(header, stated).unwrap().missing;
    assert_eq!(missing("t,air", "")[0].0, "wall");
    assert_eq!(missing("t,air,wall", "[columns]\nflow = 'q'")[0].0, "flow");
    assert_eq!(
        missing("t,air,wall", "[columns]\nflow = 9")[0].1,
        "column 9 of 3"
    );
    // Stated columns say what is submitted; the rest is noted, not missed.
    let matched = try_match("t,T", "[columns]\nair = 'T'").unwrap();
    assert_eq!(matched.missing, []);
    assert_eq!(
        matched.notes,
        ["state `wall` is not in the file and not compared"]
    );
}

#[test]
fn the_place_of_a_column_in_a_matrix_is_no_unit() {
    for (header, name, unit) in [
        ("x[1]", "x[1]", None),
        ("x[12]", "x[12]", None),
        ("x [1]", "x", Some("1")),
        ("x[ 1 ]", "x", Some("1")),
        ("x(1)", "x", Some("1")),
        ("air[degC]", "air", Some("degC")),
    ] {
        assert_eq!(name_and_unit(header, None), (name, unit), "{header}");
    }
    let stated =
        "case = 'thermal/cold-room-defrost'\n[columns]\ntime = 'y[1]'\nair = 'y[2]'\nwall = 'y[3]'";
    assert_eq!(columns("y[1],y[2],y[3]", stated).0, 0);
}
