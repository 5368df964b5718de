use super::*;
use crate::trajectory::{Finding, Selection, Stated};

type Rows = Vec<(u64, f64, f64, Vec<Option<f64>>)>;

fn read(text: &str, stated: &Stated) -> (Rows, Vec<Finding>) {
    let source = Source::memory(text.as_bytes().to_vec());
    let layout = source.layout(stated).unwrap().unwrap();
    let channels = (1..layout.columns).collect();
    let survey = Survey::new(&source, layout, Selection { time: 0, channels }, stated).unwrap();
    let mut findings = Findings::default();
    let mut rows = Vec::new();
    survey
        .rows(&source, &mut findings, &|time| time == 5.0, &mut |row| {
            rows.push((
                row.line,
                row.time.to_f64(),
                row.time_resolution,
                (0..row.values.len())
                    .map(|place| row.value(place))
                    .collect(),
            ));
            Ok(())
        })
        .unwrap();
    (rows, findings.into_list())
}

fn findings(text: &str) -> Vec<(Kind, Option<u64>, bool)> {
    let (_, findings) = read(text, &Stated::default());
    findings.iter().map(|f| (f.kind, f.line, f.fatal)).collect()
}

fn table(rows: impl IntoIterator<Item = i32>) -> String {
    let line = |k: i32| format!("{k},{:.4}\n", f64::from(k).sin());
    "t,x\n".to_owned() + &rows.into_iter().map(line).collect::<String>()
}

#[test]
fn rows_come_with_lines_and_exact_stamps() {
    let (rows, found) = read(
        "# made today\nt;x\n\n0,0;1,5\n0,1;2,25\n0,2;nan\n",
        &Stated::default(),
    );
    assert_eq!(rows[0], (4, 0.0, 0.0, vec![Some(1.5)]));
    assert_eq!(rows[1], (5, 0.1, 0.0, vec![Some(2.25)]));
    assert_eq!(rows[2].3, [None]);
    assert_eq!(
        found[0].to_owned().text,
        "column `x` is `nan`, not a number"
    );
    assert_eq!((found[0].kind, found[0].line), (Kind::NotANumber, Some(6)));
}

#[test]
fn faults_have_their_line() {
    use Kind::*;
    assert_eq!(findings(&table(0..40)), []);
    assert_eq!(
        findings(&table((0..40).filter(|k| *k != 20))),
        [(MissingRows, Some(22), true)]
    );
    let doubled = findings(&table(
        (0..40).flat_map(|k| vec![k; if k == 7 { 2 } else { 1 }]),
    ));
    assert_eq!(doubled, [(RepeatedStamp, Some(10), true)]);
    let event = findings(&table(
        (0..40).flat_map(|k| vec![k; if k == 5 { 2 } else { 1 }]),
    ));
    assert_eq!(event, [(RepeatedStamp, Some(8), false)]);
    let at_the_end = findings(&table((0..40).chain([39])));
    assert_eq!(at_the_end, []);
    let swapped = findings(&table((0..10).chain([11, 10]).chain(12..40)));
    assert!(
        swapped.contains(&(TimeNotIncreasing, Some(13), true)),
        "{swapped:?}"
    );
    assert_eq!(
        findings(&(table(0..9) + "9,1,2\n10,1.0\n")),
        [(RowLength, Some(11), true)]
    );
    assert_eq!(
        findings(&(table(0..9) + "9,\n")),
        [(NotANumber, Some(11), true)]
    );
    assert_eq!(
        findings(&(table(0..9) + "9,abc\n")),
        [(NotANumber, Some(11), true)]
    );
    assert_eq!(
        findings(&(table(0..9) + "9")),
        [(CutOffLine, Some(11), true)]
    );
    assert_eq!(
        findings(&(table(0..9) + "9,0.41")),
        [(CutOffLine, Some(11), true)]
    );
    assert_eq!(findings(&(table(0..9) + "9,0.4121")), []);
}

#[test]
fn stated_digits_hold_for_values_and_uneven_stamps() {
    let stated = Stated {
        digits: Some(3),
        ..Stated::default()
    };
    let (rows, _) = read("t,x\n0,1\n0.5,2\n1.75,3\n2.25,5\n4.5,6\n", &stated);
    assert_eq!(rows[3].2, 0.005);
}

/// Steps of less than a unit of the stamps' last digit: rows at rest repeat, and nothing is wrong.
#[test]
fn stamps_too_coarse_for_the_step_repeat_by_themselves() {
    for print in [
        |time: f64| format!("{time:.1}"),
        // Six digits, as C prints them: one decimal from ten thousand on.
        |time: f64| format!("{:.1}", 10_000.0 + time),
        |time: f64| format!("{:.*}", if time < 10.0 { 2 } else { 1 }, time),
    ] {
        let line = |k: i32| format!("{},{}\n", print(0.0864 * f64::from(k)), k.min(40));
        let text = "t,x\n".to_owned() + &(0..400).map(line).collect::<String>();
        let found = findings(&text);
        assert!(found.iter().all(|(_, _, fatal)| !fatal), "{found:?}");
        // No stamp is taken for exact.
        let (rows, _) = read(&text, &Stated::default());
        assert!(
            rows.iter().skip(1).all(|row| row.2 > 0.0),
            "{:?}",
            &rows[..40]
        );
    }
}
