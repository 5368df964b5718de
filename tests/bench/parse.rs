//! Text to batches of rows, nothing else: `cargo bench --bench parse`. All files are of about one
//! size, so that the figures of one column can be compared.

mod chain;
mod chance;
mod stamps;
mod table;

use divan::Bencher;
use divan::counter::{BytesCount, ItemsCount};
use stepgauge::trajectory::{Findings, Layout, Selection, Source, Stated, Survey, open};
use table::Shape;

/// Numbers in a file, stamps included.
const NUMBERS: usize = 400_000;

fn main() {
    divan::main();
}

fn shapes() -> Vec<Shape> {
    let size = |states: usize| (NUMBERS / (states + 1), states);
    Shape::all(chain::LENGTHS.map(size))
}

/// A file, opened, and what is read of it.
struct Opened {
    source: Source,
    layout: Layout,
    selection: Selection,
}

/// The file of a shape, with work to be timed on it.
fn timed(bencher: Bencher, shape: &Shape, work: impl Fn(&Opened)) {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("run.csv");
    let bytes = shape.write(&path);
    let source = open(&path).unwrap();
    let layout = source.layout(&Stated::default()).unwrap().unwrap();
    let opened = Opened {
        source,
        layout,
        selection: Selection {
            time: 0,
            channels: (1..=shape.states).collect(),
        },
    };
    bencher
        .counter(BytesCount::new(bytes))
        .counter(ItemsCount::new(shape.steps + 1))
        .bench_local(|| work(&opened));
}

fn survey(of: &Opened) -> Survey {
    let (layout, selection) = (of.layout.clone(), of.selection.clone());
    Survey::new(&of.source, layout, selection, &Stated::default()).unwrap()
}

/// Every batch of the file, and what its digits and stamps look like.
#[divan::bench(args = shapes(), sample_size = 1, sample_count = 20)]
fn batches(bencher: Bencher, shape: &Shape) {
    timed(bencher, shape, |of| {
        divan::black_box(survey(of));
    });
}

/// Every row in its order, with what is looked for between rows.
#[divan::bench(args = shapes(), sample_size = 1, sample_count = 20)]
fn rows(bencher: Bencher, shape: &Shape) {
    let known = std::cell::OnceCell::new();
    timed(bencher, shape, |of| {
        let mut findings = Findings::default();
        let mut sum = 0.0;
        let each = &mut |row: &stepgauge::trajectory::Row| {
            sum += row.values.iter().sum::<f64>();
            Ok(())
        };
        let survey: &Survey = known.get_or_init(|| survey(of));
        survey
            .rows(&of.source, &mut findings, &|_| false, each)
            .unwrap();
        divan::black_box(sum);
    });
}
