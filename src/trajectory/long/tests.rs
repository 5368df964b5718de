use super::super::rows::Row;
use super::super::{Findings, Survey};
use super::*;
use crate::trajectory::Stated;

fn stated(time: Option<ColumnName>) -> Stated {
    Stated {
        long: Some(LongStated {
            name: ColumnName::Name("variable".into()),
            value: ColumnName::Name("value".into()),
            time,
        }),
        ..Stated::default()
    }
}

fn layout(text: &str) -> Layout {
    let source = Source::memory(text.as_bytes().to_vec());
    source.layout(&stated(None)).unwrap().unwrap()
}

type Rows = Vec<(u64, f64, Vec<Option<f64>>)>;

fn read(text: &str, size: usize) -> (Rows, Vec<super::super::Finding>) {
    let source = Source::in_pieces(text.as_bytes().to_vec(), size);
    let stated = stated(None);
    let layout = source.layout(&stated).unwrap().unwrap();
    let channels = (1..layout.columns).collect();
    let survey = Survey::new(&source, layout, Selection { time: 0, channels }, &stated).unwrap();
    let (mut findings, mut rows) = (Findings::default(), Vec::new());
    let mut take = |row: &Row| {
        let values = (0..row.values.len())
            .map(|place| row.value(place))
            .collect();
        rows.push((row.line, row.time.to_f64(), values));
        Ok(())
    };
    survey
        .rows(&source, &mut findings, &|_| false, &mut take)
        .unwrap();
    (rows, findings.into_list())
}

#[test]
fn the_layout_is_that_of_the_wide_table() {
    let layout = layout("t [min],variable,value [K]\n0,air,1\n0,wall [degC],2\n1,air,3\n");
    assert_eq!(
        layout.names.as_ref().unwrap(),
        &["t [min]", "air", "wall [degC]"]
    );
    assert_eq!(layout.units.as_ref().unwrap(), &["min", "K", "K"]);
    assert_eq!((layout.columns, layout.first_row), (3, 2));
    assert_eq!(layout.describe(), "comma, a row for each time and channel");
}

#[test]
fn the_order_is_found() {
    let order = |rows: &str| {
        let rows = rows
            .split(' ')
            .map(|row| format!("{},{},1\n", &row[..1], &row[1..]));
        let text = "t,variable,value\n".to_owned() + &rows.collect::<String>();
        layout(&text).long.unwrap().order
    };
    for rows in [
        "0a 0b 1a 1b",
        "0a 0b 1b 1a",
        "0a 1b 2a",
        "0a 0b 2a 2b 1a 1b",
        "0a 0b 1a 2a 2b 1a 1b",
        "0a 2a 1a",
        "0a 0b 1a 1b 0a 2a 2b",
        "0a 0b 1a 1b 0a 0b 1a 1b",
    ] {
        assert_eq!(order(rows), Order::ByTime, "{rows}");
    }
    for rows in ["0a 1a 0b 1b", "1a 0b 1b 0a", "0a 0b 1a 1b 0c 1c"] {
        assert_eq!(order(rows), Order::Scattered, "{rows}");
    }
}

#[test]
fn rows_are_joined_whatever_the_pieces_are() {
    let by_time = "t,variable,value\n0,a,1\n# x\n0.0,b,2\n\n0.5,b,4\n0.50,a,3\n1,a,5\n1,b,\n";
    let by_channel = "t,variable,value\n0,a,1\n.5,a,3\n1,a,5\n0.0,b,2\n0.50,b,4\n1,b,\n";
    for (text, lines) in [(by_time, [2, 6, 9]), (by_channel, [2, 3, 7])] {
        let whole = read(text, 1 << 20);
        let values = [
            vec![Some(1.0), Some(2.0)],
            vec![Some(3.0), Some(4.0)],
            vec![Some(5.0), None],
        ];
        let expected: Rows = (0..3)
            .map(|k| (lines[k], 0.5 * k as f64, values[k].clone()))
            .collect();
        assert_eq!(whole.0, expected);
        assert_eq!(whole.1.len(), 1);
        for size in 1..60 {
            assert_eq!(read(text, size), whole, "pieces of {size}");
        }
    }
}

#[test]
fn lines_rise_over_many_batches() {
    // More rows than one batch holds, with a remark and a bad line here and there.
    let mut text = "t,variable,value\n".to_owned();
    let (mut line, mut expected) = (1, Vec::new());
    for k in 0..40_000 {
        if k % 7 == 0 {
            text += "# remark\n";
            line += 1;
        }
        expected.push(line + 1);
        text += &format!("{k},a,{}\n", k % 10);
        if k % 1000 == 5 {
            text += "1,2\n";
            line += 1;
        }
        text += &format!("{k},b,0.5\n");
        line += 2;
    }
    let (rows, findings) = read(&text, 10_000);
    let found: Vec<u64> = rows.iter().map(|row| row.0).collect();
    assert!(found == expected);
    assert_eq!(findings.len(), 3);
    assert!(
        findings[2].text.ends_with("(and 37 more like this)"),
        "{}",
        findings[2].text
    );
}

#[test]
fn rows_in_no_order_are_kept_up_to_a_bound() {
    let text = "t,variable,value\n0,a,1\n1,a,3\n2,a,5\n0,b,2\n1,b,4\n2,b,6\n";
    let source = Source::memory(text.as_bytes().to_vec());
    let layout = layout(text);
    let long = layout.long.unwrap();
    let all = Selection {
        time: 0,
        channels: vec![1, 2],
    };
    let kept = |most: usize| {
        let mut rows = 0;
        let mut each = |batch: Batch, _| {
            rows += batch.rows.len();
            Ok(true)
        };
        let mut lines = Lines::new(source.pieces(&long.rows)?, &long.rows);
        let mut wide = Wide::new(&long, &all, &mut each);
        order::scattered(&long, &mut lines, &mut wide, most).map(|_| rows)
    };
    assert_eq!(kept(1 << 20), Ok(3));
    let fault = kept(150).unwrap_err();
    assert_eq!(fault.line, Some(6));
    assert!(
        fault
            .text
            .starts_with("the rows of one time do not stand together, and to join")
    );
    assert_eq!(
        fault.help.as_deref(),
        Some("sort the rows by time; then a file of any length is read")
    );
}

#[test]
fn cells_keep_what_stands_in_them() {
    let text = "t,variable,value\n0,a,\"1;\"\"2\"\n\"\",a,3\n1,a,4\n";
    let (rows, findings) = read(text, 7);
    assert_eq!(rows.len(), 2);
    // A row without anything is no blank line.
    let source = Source::memory(text.as_bytes().to_vec());
    let of = Selection {
        time: 0,
        channels: Vec::new(),
    };
    let survey = Survey::new(&source, layout(text), of, &stated(None)).unwrap();
    let mut none = Findings::default();
    let read = survey.rows(&source, &mut none, &|_| false, &mut |_| Ok(()));
    assert!(read.is_ok() && none.has(crate::trajectory::Kind::NotANumber));
    let texts: Vec<&str> = findings
        .iter()
        .map(|finding| finding.text.as_str())
        .collect();
    assert_eq!(
        texts,
        [
            "column `a` is `1;\"2`, not a number",
            "column `t` is empty, not a number"
        ]
    );
}

/// What is kept of rows in no order: stamp and value as printed, and an entry of 32 bytes.
#[test]
fn scattered_rows_are_kept_up_to_a_bound() {
    let joined = |rows: usize, most_bytes: usize| {
        let row = |channel: char| move |time| format!("{time:05},{channel},1\n");
        let own = |channel| (0..rows / 2).map(row(channel)).collect::<String>();
        let text = format!("t,variable,value\n{}{}", own('a'), own('b'));
        let source = Source::memory(text.into_bytes());
        let layout = source.layout(&stated(None)).unwrap().unwrap();
        let long = layout.long.as_deref().unwrap();
        assert_eq!(long.order, Order::Scattered);
        let channels = vec![1, 2];
        let of = Selection { time: 0, channels };
        let mut seen = 0;
        let mut each = |batch: Batch, _| {
            seen += batch.rows.len();
            Ok(true)
        };
        let mut lines = Lines::new(source.pieces(&long.rows).unwrap(), &long.rows);
        let mut wide = Wide::new(long, &of, &mut each);
        order::scattered(long, &mut lines, &mut wide, most_bytes)
            .map(|_| seen)
            .map_err(|fault| (fault.line, fault.text))
    };
    let needed = 4 * (5 + 1 + 32);
    assert_eq!(joined(4, needed), Ok(2));
    let (line, _) = joined(4, needed - 1).unwrap_err();
    assert_eq!(line, Some(5));
    // The first row of a file is not kept either where there is no room for it.
    assert_eq!(joined(4, 0).unwrap_err().0, Some(2));
    let (_, text) = joined(60_000, 2 << 20).unwrap_err();
    assert!(
        text.contains("more than 2 MiB would have to be kept"),
        "{text}"
    );
    // Of a real file that is some seven million rows.
    assert_eq!(MOST_KEPT_BYTES / (5 + 1 + 32), 7_064_090);
}
