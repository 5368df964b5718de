use std::io::Read;

use proptest::prelude::*;
use proptest::sample::Index;
use stepgauge::case::{Case, Replacements};
use stepgauge::fault::{Fault, Result};
use stepgauge::formula::{Affine, Formula};
use stepgauge::submission::{Purpose, Rules, Submission};
use stepgauge::trajectory::columns::{self, Data, Format};
use stepgauge::trajectory::{Findings, Selection, Source, Stated, Survey, packed};

use crate::folder::Folder;

const CASE: &str = include_str!("../../reference-cases/membrane/leaky-pulse-train.toml");
const SUBMISSION: &str = include_str!("../fuzz/seeds/submission/every-key");
const RULES: &str = include_str!("../fuzz/seeds/rules/every-key");
const PLAN: &str = include_str!("../fuzz/seeds/plan/stated");
const FORMULA: &str = "min(x, 2*y)^2 - exp(-t/1.5)*sqrt(abs(u))";
const WIDE: &[u8] = b"# by hand\nt,x,y\n0,1,2.50\n0.5,1.25,2.25\n1,1.5,-2e-3\n1.5,nan,7\n";
const LONG: &[u8] = b"time,name,value\n0,x,1\n0,y,2\n1,x,3\n1,y,4\n2,x,5\n2,y,6\n";
const NPY: &[u8] = include_bytes!("../fuzz/seeds/npy/single.npy");
const NPZ: &[u8] = include_bytes!("../fuzz/seeds/npz/deflated");
const MAT: &[u8] = include_bytes!("../fuzz/seeds/mat/packed.mat");
const GZIP: &[u8] = include_bytes!("../fuzz/seeds/gzip/small");
const ZSTD: &[u8] = include_bytes!("../fuzz/seeds/zstd/one.csv.zst");

/// One thing that happens to bytes on the way.
#[derive(Clone, Debug)]
enum Change {
    Set(Index, u8),
    Flip(Index, u8),
    Remove(Index, Index),
    Repeat(Index, Index),
    Cut(Index),
    Insert(Index, Vec<u8>),
}

fn change() -> impl Strategy<Value = Change> {
    let at = any::<Index>;
    prop_oneof![
        (at(), any::<u8>()).prop_map(|(at, byte)| Change::Set(at, byte)),
        (at(), 0u8..8).prop_map(|(at, bit)| Change::Flip(at, bit)),
        (at(), at()).prop_map(|(from, to)| Change::Remove(from, to)),
        (at(), at()).prop_map(|(from, to)| Change::Repeat(from, to)),
        at().prop_map(Change::Cut),
        (at(), prop::collection::vec(any::<u8>(), 1..9))
            .prop_map(|(at, bytes)| Change::Insert(at, bytes)),
    ]
}

fn changed(seed: &[u8], changes: &[Change]) -> Vec<u8> {
    let mut bytes = seed.to_vec();
    for change in changes {
        if bytes.is_empty() {
            break;
        }
        let at = |index: &Index| index.index(bytes.len());
        let range = |from: &Index, to: &Index| at(from).min(at(to))..at(from).max(at(to));
        match change {
            Change::Set(index, byte) => {
                let at = at(index);
                bytes[at] = *byte;
            }
            Change::Flip(index, bit) => {
                let at = at(index);
                bytes[at] ^= 1 << bit;
            }
            Change::Remove(from, to) => drop(bytes.drain(range(from, to))),
            Change::Repeat(from, to) => {
                let range = range(from, to);
                let (end, again) = (range.end, bytes[range].to_vec());
                bytes.splice(end..end, again);
            }
            Change::Cut(index) => bytes.truncate(index.index(bytes.len())),
            Change::Insert(index, more) => {
                let at = at(index);
                bytes.splice(at..at, more.iter().copied());
            }
        }
    }
    bytes
}

/// A seed with some changes, or any bytes at all.
fn bytes_like(seed: &'static [u8]) -> impl Strategy<Value = Vec<u8>> {
    prop_oneof![
        4 => prop::collection::vec(change(), 1..6).prop_map(move |list| changed(seed, &list)),
        1 => prop::collection::vec(any::<u8>(), 0..400),
    ]
}

fn text_like(seed: &'static str) -> impl Strategy<Value = String> {
    bytes_like(seed.as_bytes()).prop_map(|bytes| String::from_utf8_lossy(&bytes).into_owned())
}

/// Complaints can be printed, and there is at least one.
fn told(faults: &[Fault]) {
    assert!(!faults.is_empty(), "refused without a word");
    for fault in faults {
        assert!(!fault.to_string().is_empty());
    }
}

fn read_text(bytes: &[u8]) -> Result<()> {
    let (source, stated) = (Source::in_pieces(bytes.to_vec(), 64), Stated::default());
    let Some(layout) = source.layout(&stated)? else {
        return Ok(());
    };
    let channels = (1..layout.columns).collect();
    let selection = Selection { time: 0, channels };
    let survey = Survey::new(&source, layout, selection, &stated)?;
    let mut findings = Findings::default();
    survey.rows(&source, &mut findings, &|_| false, &mut |_| Ok(()))
}

/// All columns to the end; a reader hands out as many rows as it promises, or fails.
fn read_table(bytes: &[u8], format: Format) {
    let table = match columns::open(&Data::memory(bytes), format) {
        Ok(table) => table,
        Err(fault) => return told(&[fault]),
    };
    let wanted: Vec<usize> = (0..table.heads().len().min(8)).collect();
    let mut rows = 0;
    let read = table.read(&wanted, &mut |block| {
        rows += block.first().map_or(0, Vec::len) as u64;
        Ok(())
    });
    match read {
        Ok(()) => assert!(wanted.is_empty() || rows == table.rows()),
        Err(fault) => told(&[fault]),
    }
}

fn unpack(bytes: &[u8], format: Format) {
    let mut stream = packed::open(&Data::memory(bytes), format).unwrap();
    let mut block = [0; 4096];
    while matches!(stream.read(&mut block), Ok(count) if count > 0) {}
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]

    #[test]
    fn any_formula_is_read_or_complained_of(text in text_like(FORMULA)) {
        let names = ["x", "y", "u", "t"];
        match Formula::parse(&text, &|name| names.iter().position(|known| *known == name)) {
            Ok(formula) => {
                let _ = formula.evaluate(&[0, 1, 2, 3].map(|index| Affine::quantity(index, 4)));
            }
            Err(fault) => told(&[fault]),
        }
    }

    #[test]
    fn any_case_is_solved_or_complained_of(text in text_like(CASE)) {
        match Case::parse("o", &text, &Replacements::new()) {
            Ok(case) => {
                let _ = case.exact().map(|exact| exact.at(exact.to()).map(|_| ()));
            }
            Err(faults) => told(&faults),
        }
    }

    #[test]
    fn any_submission_is_read_or_complained_of(text in text_like(SUBMISSION)) {
        if let Err(faults) = Submission::parse(&text, std::path::Path::new("tests")) {
            told(&faults);
        }
    }

    #[test]
    fn any_rules_are_read_or_complained_of(text in text_like(RULES)) {
        for purpose in [Purpose::Limits, Purpose::Everything] {
            if let Err(faults) = Rules::parse(&text, purpose) {
                told(&faults);
            }
        }
    }

    #[test]
    fn any_wide_text_is_walked_to_its_end(bytes in bytes_like(WIDE)) {
        let _ = read_text(&bytes).map_err(|fault| told(&[fault]));
    }

    #[test]
    fn any_long_text_is_walked_to_its_end(bytes in bytes_like(LONG)) {
        let _ = read_text(&bytes).map_err(|fault| told(&[fault]));
    }

    #[test]
    fn any_npy_is_read_or_complained_of(bytes in bytes_like(NPY)) {
        read_table(&bytes, Format::Npy);
    }

    #[test]
    fn any_npz_is_read_or_complained_of(bytes in bytes_like(NPZ)) {
        read_table(&bytes, Format::Npz);
    }

    #[test]
    fn any_mat_is_read_or_complained_of(bytes in bytes_like(MAT)) {
        read_table(&bytes, Format::Mat5);
    }

    #[test]
    fn any_gzip_is_unpacked_to_its_end(bytes in bytes_like(GZIP)) {
        unpack(&bytes, Format::Gzip);
    }

    #[test]
    fn any_zstd_is_unpacked_to_its_end(bytes in bytes_like(ZSTD)) {
        unpack(&bytes, Format::Zstd);
    }
}

proptest! {
    // Each is a process of its own.
    #![proptest_config(ProptestConfig::with_cases(40))]

    /// Nothing is started: the report has no known kind, and no program has this name.
    #[test]
    fn any_plan_is_complained_of(text in text_like(PLAN)) {
        let folder = Folder::new();
        folder.write("plan.toml", text);
        let ran = folder.run(&["drive", "plan.toml", "--write", "report.refused"]);
        prop_assert_eq!(ran.status, 2);
    }

    #[test]
    fn any_folder_is_audited(toml in text_like(SUBMISSION), rows in bytes_like(WIDE)) {
        let folder = Folder::new();
        folder.write("in/submission.toml", toml);
        folder.write("in/run.csv", rows);
        // What it says is for other tests; that it ends without a panic is looked at there.
        folder.audit(&["in"]);
    }
}
