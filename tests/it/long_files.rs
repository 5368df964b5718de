//! Long files: read in pieces by several threads, compared around nodes in plain `f64`, with a
//! guess of what the file looks like. None of it may show in what comes out.

use std::fmt::Write;

use stepgauge::case::{Case, Library, Replacements};
use stepgauge::compare::{Compared, Comparison, Limit};
use stepgauge::fault::Fault;
use stepgauge::number::{Conversion, Decimal, Double};
use stepgauge::trajectory::{Crew, Finding, Findings, Kind, Selection, Source, Stated};

use crate::folder::Folder;

fn case(name: &str) -> Case {
    Library::new().load(name, &Replacements::new()).unwrap()
}

/// Rows on an even grid from the start of the window to its end, with an error of its own in
/// every channel.
fn table(case: &Case, rows: u32, error: f64, print: &dyn Fn(f64) -> String) -> Vec<String> {
    let exact = case.exact().unwrap();
    let (from, to) = (exact.from().to_f64(), exact.to().to_f64());
    let mut walk = exact.walk_rounded();
    let names: Vec<&str> = case.channels().iter().map(|c| c.name).collect();
    let mut lines = vec![format!("t,{}", names.join(","))];
    for row in 0..=rows {
        let time = print(from + (to - from) * f64::from(row) / f64::from(rows));
        let values = walk.at(Decimal::parse(&time).unwrap().to_double()).unwrap();
        let mut line = time;
        for (place, value) in values.iter().enumerate() {
            let wave = (0.7 * f64::from(row) / 97.0 + place as f64).sin();
            let _ = write!(line, ",{}", print(value.value + error * wave));
        }
        lines.push(line);
    }
    lines
}

fn full(x: f64) -> String {
    format!("{x:.16e}")
}

fn compare(case: &Case, source: &Source, stated: &Stated) -> (Compared, Vec<Finding>) {
    try_compare(case, source, stated).unwrap()
}

/// The same for a file whose rows may not be readable.
pub fn try_compare(
    case: &Case,
    source: &Source,
    stated: &Stated,
) -> Result<(Compared, Vec<Finding>), Fault> {
    let layout = source.layout(stated)?.unwrap();
    let exact = case.exact().unwrap();
    let limit = Limit {
        absolute: 1e-3,
        relative: 1e-3,
        of_peak: false,
    };
    let channels: Vec<_> = (0..layout.columns - 1)
        .map(|channel| (channel, Conversion::NONE, limit))
        .collect();
    let comparison = Comparison {
        exact: &exact,
        source,
        layout: &layout,
        selection: &Selection {
            time: 0,
            channels: (1..layout.columns).collect(),
        },
        stated,
        time: Conversion::NONE,
        channels: &channels,
        step: None,
        least_rows: 2,
        time_unit: "s",
        traced: true,
        next_wanted: &|row| row.div_ceil(1000) * 1000,
        last_rows: 5,
        crew: &Crew::default(),
    };
    let mut findings = Findings::default();
    let compared = comparison.run(&mut findings)?;
    Ok((compared, findings.into_list()))
}

fn text(lines: &[String]) -> Vec<u8> {
    (lines.join("\n") + "\n").into_bytes()
}

/// The quick way to exact values keeps its bound, in every case and at every kind of place: on a
/// node, between nodes, beside jumps.
#[test]
fn values_near_nodes_are_within_their_bound_of_the_exact_ones() {
    let library = Library::new();
    let mut tried = 0;
    for name in library.names() {
        let case = case(name);
        let exact = case.exact().unwrap();
        let (from, to) = (exact.from().to_f64(), exact.to().to_f64());
        for rows in [3e3, 1e5, 1e7] {
            let Some(nodes) = exact.nodes((to - from) / rows) else {
                continue;
            };
            let (mut near, mut walk) = (exact.near(&nodes), exact.walk());
            let mut moved = Vec::new();
            for k in 0..400u32 {
                // Scattered over the window, in order.
                let scatter = f64::from(k * 7919 % 1000) * 1e-3;
                let time = from + (to - from) * (f64::from(k) + scatter) / 401.0;
                let time = Double::from(time);
                let Some(offset) = near.place(time, 0.0) else {
                    continue;
                };
                let truth = walk.go(time);
                for (place, channel) in near.channels().iter().enumerate() {
                    channel.moved(&[offset], &mut moved);
                    let value = channel.value + Double::from(moved[0]);
                    let gap = (value - truth.value[place]).abs().to_f64();
                    let allowed = channel.bound + truth.bound[place];
                    assert!(
                        gap <= allowed,
                        "{name}, {rows} rows, t = {time:?}: {gap:e} {allowed:e}"
                    );
                    tried += 1;
                }
            }
        }
    }
    assert!(tried > 100_000, "{tried}");
}

/// Errors as they come out of the exact values at every row, without anything quick.
#[test]
fn errors_are_those_of_the_exact_values_at_every_row() {
    for (name, rows) in [
        ("thermal/cooling-body", 6000),
        ("thermal/cold-room-defrost", 9000),
        ("electrical/rlc-underdamped", 12_000),
        ("mechanical/beat", 20_000),
        ("thermal/rod-30-node", 4500),
    ] {
        let Ok(case) = Library::new().load(name, &Replacements::new()) else {
            panic!("no case {name}");
        };
        let exact = case.exact().unwrap();
        let peak = exact.peaks().iter().fold(0.0f64, |a, b| a.max(*b));
        // An honest run, and one that is exact but for its rounding.
        for error in [1e-7 * peak, 0.0] {
            let lines = table(&case, rows, error, &full);
            let (compared, findings) =
                compare(&case, &Source::memory(text(&lines)), &Stated::default());
            assert!(
                findings.iter().all(|f| f.kind != Kind::MissingRows),
                "{name}: {findings:?}"
            );
            let mut walk = exact.walk();
            let width = case.channels().len();
            let (mut worst, mut squares, mut end) =
                (vec![0.0f64; width], vec![0.0; width], vec![0.0; width]);
            for line in &lines[1..] {
                let fields: Vec<&str> = line.split(',').collect();
                let time = Decimal::parse(fields[0]).unwrap().to_double();
                let time = exact
                    .jump_after(time, 4.0 * f64::EPSILON * time.to_f64().abs())
                    .filter(|_| exact.has_feed_through())
                    .unwrap_or(time);
                let values = walk.go(time);
                for place in 0..width {
                    let written: f64 = fields[place + 1].parse().unwrap();
                    let error = (Double::from(written) - values.value[place]).to_f64();
                    worst[place] = worst[place].max(error.abs());
                    squares[place] += error * error;
                    end[place] = error;
                }
            }
            for (place, deviation) in compared.channels.iter().enumerate() {
                let what = format!("{name}, channel {place}, error {error:e}");
                let near =
                    |a: f64, b: f64, part: f64| (a - b).abs() <= part * b.abs() + 1e-24 * peak;
                assert!(
                    near(deviation.worst, worst[place], 1e-3),
                    "{what}: {} {}",
                    deviation.worst,
                    worst[place]
                );
                assert!(
                    near(deviation.end, end[place], 1e-9),
                    "{what}: {} {}",
                    deviation.end,
                    end[place]
                );
                let rms = (squares[place] / f64::from(rows + 1)).sqrt();
                let floor = f64::EPSILON * deviation.peak / 2048.0;
                assert!(
                    (deviation.rms - rms).abs() <= 1e-3 * rms + floor,
                    "{what}: {} {rms}",
                    deviation.rms
                );
            }
        }
    }
}

#[test]
fn blocks_of_any_size_give_the_same_to_the_last_bit() {
    let case = case("thermal/cold-room-defrost");
    let bytes = text(&table(&case, 14_400, 1e-5, &|x| format!("{x:.9}")));
    assert!(bytes.len() > 600_000, "long enough for more than one look");
    let read = |size: usize| {
        let source = Source::in_pieces(bytes.clone(), size);
        format!("{:?}", compare(&case, &source, &Stated::default()))
    };
    let whole = read(usize::MAX);
    for size in [1, 100, 4096, 65_537, 300_000] {
        assert!(read(size) == whole, "pieces of {size} bytes");
    }
}

#[test]
fn threads_do_not_show_in_the_report() {
    let folder = Folder::new();
    let case = case("thermal/cold-room-defrost");
    let lines = table(&case, 57_600, 1e-6, &full);
    folder.write("long.csv", text(&lines));
    let report = |threads: &str| {
        let name = format!("{threads}.json");
        let arguments = [
            "audit",
            "long.csv",
            "--case",
            &case.name,
            "--threads",
            threads,
        ];
        folder.run(&[&arguments[..], &["--write", &name, "--quiet"]].concat());
        std::fs::read_to_string(folder.path(&name)).unwrap()
    };
    let one = report("1");
    assert!(one.contains("\"rows\": 57601"), "{one}");
    assert_eq!(report("2"), one);
    assert_eq!(report("7"), one);
}

/// What a guess from parts of a file cannot know.
#[test]
fn surprises_in_a_long_file_are_seen() {
    let case = case("thermal/cooling-body");
    let lines = table(&case, 48_000, 1e-6, &|x| format!("{x:.9}"));
    let look = |lines: &[String], end: &str| {
        let bytes = (lines.join("\n") + end).into_bytes();
        assert!(bytes.len() > 700_000);
        let (compared, findings) = compare(&case, &Source::memory(bytes), &Stated::default());
        let found = findings
            .iter()
            .map(|f| (f.kind, f.line))
            .collect::<Vec<_>>();
        (compared, found)
    };
    let (_, found) = look(&lines, "\n");
    assert_eq!(found, []);
    // One row left out, away from all that was looked at.
    let mut holed = lines.clone();
    holed.remove(13_337);
    assert_eq!(look(&holed, "\n").1, [(Kind::MissingRows, Some(13_338))]);
    let mut strange = lines.clone();
    strange[17_777] = strange[17_777].replace(',', ",x");
    assert_eq!(look(&strange, "\n").1[0], (Kind::NotANumber, Some(17_778)));
    let mut short = lines.clone();
    short[5555] = "1.5".to_owned();
    assert_eq!(look(&short, "\n").1[0], (Kind::RowLength, Some(5556)));
    // The last line breaks off within its last number.
    let mut cut = lines.clone();
    let last = cut.len() - 1;
    let length = cut[last].len();
    cut[last].truncate(length - 4);
    let found = look(&cut, "").1;
    assert!(
        found.contains(&(Kind::CutOffLine, Some(48_002))),
        "{found:?}"
    );
    assert_eq!(look(&lines, "").1, []);
    // Fewer digits in the second half than in what was looked at: the column is what its rows are.
    let coarse = |line: &String| {
        let fields = line.split(',').enumerate();
        let fields = fields.map(|(place, field)| match place {
            0 => field.to_owned(),
            _ => format!("{:.2}", field.parse::<f64>().unwrap()),
        });
        fields.collect::<Vec<_>>().join(",")
    };
    let mut mixed = lines.clone();
    for line in &mut mixed[1000..46_000] {
        *line = coarse(line);
    }
    let (compared, _) = look(&mixed, "\n");
    let all = Source::in_pieces(text(&mixed), usize::MAX);
    let layout = all.layout(&Stated::default()).unwrap().unwrap();
    let selection = Selection {
        time: 0,
        channels: vec![1, 2],
    };
    let survey = stepgauge::trajectory::Survey::new(&all, layout, selection, &Stated::default());
    assert_eq!(
        format!("{:?}", compared.survey.channels),
        format!("{:?}", survey.unwrap().channels)
    );
}
