//! Binary files and packed text through the whole audit: the numbers are those of the text twin.
//! The files come from NumPy, SciPy, pandas, polars, PyArrow, h5py and GNU Octave, see
//! `tests/outside/formats`.

use std::path::Path;

use serde_json::Value;

use crate::folder::Folder;

fn outside(name: &str) -> std::path::PathBuf {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/outside/formats");
    folder.join(name)
}

/// The report of one file, without what must differ.
fn report(name: &str) -> (i32, String, Value) {
    let folder = Folder::new();
    // No name tells what a file is.
    folder.write("run", std::fs::read(outside(name)).unwrap());
    let mut arguments = vec!["audit", "run", "--case", "thermal/cooling-body"];
    arguments.extend(["--write", "r.json"]);
    // One array without names.
    if name == "single.npy" {
        arguments.extend([
            "--column", "time=1", "--column", "body=2", "--column", "flux=3",
        ]);
    }
    let ran = folder.run(&arguments);
    let report = std::fs::read_to_string(folder.path("r.json")).unwrap_or_default();
    let mut report: Value = serde_json::from_str(&report).unwrap_or(Value::Null);
    if let Some(run) = report.pointer_mut("/submissions/0/runs/0") {
        run["layout"] = Value::Null;
    }
    (ran.status, ran.stderr + &ran.stdout, report)
}

#[test]
fn every_format_gives_the_numbers_of_its_text_twin() {
    let (status, complaints, twin) = report("euler.csv");
    assert!(
        twin["submissions"][0]["runs"][0]["rows"].as_u64() > Some(200),
        "{complaints}"
    );
    let mut names = vec![
        "one.csv.gz",
        "two.csv.gz",
        "one.csv.zst",
        "two.csv.zst",
        "checked.csv.zst",
        "records.npy",
        "vectors.npz",
        "deflated.npz",
        "plain.mat",
        "packed.mat",
        "octave6.mat",
        "octave7.mat",
    ];
    if cfg!(feature = "parquet") {
        names.extend(["snappy.parquet", "polars.parquet", "split.parquet"]);
    }
    if cfg!(feature = "hdf5") {
        names.extend(["contiguous.h5", "chunked.h5"]);
    }
    for name in names {
        let (own, complaints, found) = report(name);
        assert_eq!(own, status, "{name}: {complaints}");
        assert_eq!(
            found["submissions"][0]["runs"], twin["submissions"][0]["runs"],
            "{name}"
        );
        assert_eq!(
            found["submissions"][0]["verdict"], twin["submissions"][0]["verdict"],
            "{name}"
        );
    }
}

#[test]
fn single_precision_is_known_as_such() {
    for name in ["single.mat", "single.npy"] {
        let (_, complaints, found) = report(name);
        let digits = &found["submissions"][0]["runs"][0]["channels"][0]["digits"];
        assert_eq!(digits, "single precision", "{name}: {complaints} {found}");
    }
}

#[test]
fn a_format_that_is_not_read_is_named_with_its_cure() {
    let mut expected = vec![("version4.mat", "version 4")];
    if !cfg!(feature = "parquet") {
        expected.push(("snappy.parquet", "--features parquet"));
    }
    if !cfg!(feature = "hdf5") {
        expected.push(("contiguous.h5", "--features hdf5"));
    }
    for (name, words) in expected {
        let (status, complaints, _) = report(name);
        assert_eq!(status, 2, "{name}");
        assert!(complaints.contains(words), "{name}: {complaints}");
    }
}
