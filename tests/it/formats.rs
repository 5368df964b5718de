use std::io::Read;
use std::path::PathBuf;

use stepgauge::trajectory::columns::{self, Data, FIRST_BYTES, Format, Precision};
use stepgauge::trajectory::packed;

/// Files with the table of `euler.csv`, and the names of their columns in order.
const NUMPY: [(&str, &str); 13] = [
    ("rows.npy", "- - -"),
    ("fortran.npy", "- - -"),
    ("big.npy", "- - -"),
    ("single.npy", "- - -"),
    ("half.npy", "- - -"),
    ("version2.npy", "- - -"),
    ("version3.npy", "- - -"),
    ("records.npy", "t body flux n"),
    ("aligned.npy", "n t body flux"),
    ("vectors.npz", "t body flux"),
    ("deflated.npz", "t body flux n"),
    ("matrix.npz", "t y[1] y[2]"),
    ("lying.npz", "t y[1] y[2] z[1] z[2]"),
];
const MATLAB: [(&str, &str); 9] = [
    ("plain.mat", "t body flux"),
    ("packed.mat", "t body flux"),
    ("columns.mat", "t body flux"),
    ("struct.mat", "run.t run.body run.flux"),
    ("single.mat", "t body flux"),
    ("odd.mat", "t body flux n y[1] y[2] up"),
    ("octave6.mat", "t body flux n y[1] y[2]"),
    ("octave7.mat", "t body flux n y[1] y[2]"),
    ("octave_struct.mat", "run.t run.body run.flux"),
];
#[cfg(feature = "parquet")]
const PARQUET: [(&str, &str); 9] = [
    ("snappy.parquet", "t body flux"),
    ("none.parquet", "t body flux"),
    ("gzip.parquet", "t body flux"),
    ("zstd.parquet", "t body flux"),
    ("split.parquet", "t body flux"),
    ("crc.parquet", "t body flux"),
    ("polars.parquet", "t body flux"),
    ("pandas.parquet", "t body flux"),
    ("mixed.parquet", "t body flux n up u"),
];
#[cfg(feature = "hdf5")]
const HDF5: [(&str, &str); 11] = [
    ("contiguous.h5", "body flux t"),
    ("chunked.h5", "body flux t"),
    ("fletcher.h5", "body flux t"),
    ("latest.h5", "body flux t"),
    ("behind.h5", "body flux t"),
    ("growing.h5", "body flux t"),
    ("big.h5", "body flux t"),
    ("single.h5", "body flux n t"),
    ("groups.h5", "body flux t y[1] y[2]"),
    ("compound.h5", "run.t run.body run.flux run.n"),
    ("octave.h5", "body flux t y[1] y[2]"),
];
const PACKED: [&str; 5] = [
    "one.csv.gz",
    "two.csv.gz",
    "one.csv.zst",
    "two.csv.zst",
    "checked.csv.zst",
];

fn tables() -> Vec<(&'static str, &'static str)> {
    #[allow(unused_mut)]
    let mut all = [&NUMPY[..], &MATLAB[..]].concat();
    #[cfg(feature = "parquet")]
    all.extend(PARQUET);
    #[cfg(feature = "hdf5")]
    all.extend(HDF5);
    all
}

fn path(name: &str) -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR"))
        .join("tests/outside/formats")
        .join(name)
}

fn bytes(name: &str) -> Vec<u8> {
    std::fs::read(path(name)).unwrap()
}

/// The twin as text: columns t, body, flux.
fn twin() -> Vec<Vec<f64>> {
    let text = String::from_utf8(bytes("euler.csv")).unwrap();
    let mut columns = vec![Vec::new(); 3];
    for line in text.lines().skip(1) {
        for (column, field) in columns.iter_mut().zip(line.split(',')) {
            column.push(field.parse().unwrap());
        }
    }
    assert_eq!(columns[0].len(), 301);
    columns
}

struct Table {
    heads: Vec<columns::Head>,
    left_out: Vec<String>,
    columns: Vec<Vec<f64>>,
}

fn table(data: &Data) -> Result<Table, String> {
    let first = data.length().unwrap().min(FIRST_BYTES as u64) as usize;
    let first = data.exactly(0, first).unwrap();
    let format = columns::recognise(&first).ok_or("no format")?;
    let file = columns::open(data, format).map_err(|fault| fault.to_string())?;
    let wanted: Vec<usize> = (0..file.heads().len()).collect();
    let mut all = vec![Vec::new(); wanted.len()];
    file.read(&wanted, &mut |block| {
        assert!(
            block
                .iter()
                .all(|c| c.len() == block[0].len() && c.len() <= columns::BLOCK_ROWS)
        );
        all.iter_mut().zip(block).for_each(|(a, b)| a.extend(b));
        Ok(())
    })
    .map_err(|fault| fault.to_string())?;
    assert!(all.iter().all(|column| column.len() as u64 == file.rows()));
    Ok(Table {
        heads: file.heads().to_vec(),
        left_out: file.left_out().to_vec(),
        columns: all,
    })
}

fn name(head: &columns::Head) -> &str {
    head.name.as_deref().unwrap_or("-")
}

/// What a column must hold at a row.
fn expected(file: &str, place: usize, head: &columns::Head, row: usize, twin: &[Vec<f64>]) -> f64 {
    let value = match name(head).rsplit('.').next().unwrap() {
        "-" => twin[place][row],
        "t" => twin[0][row],
        "body" if file == "mixed.parquet" && row % 7 == 3 => f64::NAN,
        "body" | "y[1]" | "z[1]" => twin[1][row],
        "flux" | "y[2]" | "z[2]" => twin[2][row],
        "n" => row as f64,
        "u" => 4e9 + row as f64,
        "up" => f64::from(twin[2][row] > 10.0),
        other => panic!("{other}"),
    };
    if head.precision == Precision::Single {
        f64::from(value as f32)
    } else {
        value
    }
}

fn is_twin(file: &str, table: &Table, twin: &[Vec<f64>]) {
    for (place, (head, column)) in table.heads.iter().zip(&table.columns).enumerate() {
        assert_eq!(column.len(), 301, "{file}: {}", name(head));
        for (row, value) in column.iter().enumerate() {
            let expected = expected(file, place, head, row, twin);
            let same = if file == "half.npy" {
                (value - expected).abs() <= expected.abs() / 2048.0
            } else {
                value.to_bits() == expected.to_bits() || value.is_nan() && expected.is_nan()
            };
            assert!(
                same,
                "{file}: {} at {row}: {value} for {expected}",
                name(head)
            );
        }
    }
}

#[test]
fn every_file_holds_the_numbers_of_its_twin() {
    let twin = twin();
    for (file, names) in tables() {
        for data in [Data::File(path(file)), Data::memory(bytes(file))] {
            let table = table(&data).unwrap_or_else(|fault| panic!("{file}: {fault}"));
            let found: Vec<&str> = table.heads.iter().map(name).collect();
            assert_eq!(found.join(" "), names, "{file}");
            is_twin(file, &table, &twin);
            for head in &table.heads {
                let single = file.contains("single");
                let single = single && !head.whole || file == "aligned.npy" && name(head) == "flux";
                let single = single
                    || ["octave_struct.mat", "mixed.parquet"].contains(&file)
                        && name(head).ends_with("flux");
                let stored = match file {
                    "half.npy" => Precision::Half,
                    _ if single => Precision::Single,
                    _ => Precision::Double,
                };
                assert_eq!(head.precision, stored, "{file}: {head:?}");
                assert_eq!(
                    head.whole,
                    ["n", "u", "up", "run.n"].contains(&name(head)),
                    "{file}"
                );
            }
        }
    }
}

#[test]
fn columns_come_in_the_order_asked_for() {
    let twin = twin();
    for (file, names) in tables() {
        let names: Vec<&str> = names.split(' ').collect();
        let data = Data::memory(bytes(file));
        let format = columns::recognise(&bytes(file)).unwrap();
        let opened = columns::open(&data, format).unwrap();
        let last = names.len() - 1;
        let mut rows = 0;
        opened
            .read(&[last, 0, last], &mut |block| {
                let same = |(a, b): (&f64, &f64)| a.to_bits() == b.to_bits();
                assert!(block[0].iter().zip(&block[2]).all(same), "{file}");
                let head = &opened.heads()[0];
                for (row, &time) in block[1].iter().enumerate() {
                    if file != "half.npy" {
                        assert_eq!(time, expected(file, 0, head, rows + row, &twin));
                    }
                }
                rows += block[0].len();
                Ok(())
            })
            .unwrap();
        assert_eq!(rows, 301);
        let fault = opened.read(&[99], &mut |_| Ok(())).unwrap_err();
        assert_eq!(fault.text, "there is no column 100");
    }
}

fn unpacked(data: &Data) -> Result<Vec<u8>, String> {
    let first = data
        .exactly(0, data.length().unwrap().min(64) as usize)
        .unwrap();
    let format = columns::recognise(&first)
        .filter(|f| f.is_packed())
        .ok_or("no format")?;
    let mut text = Vec::new();
    let mut stream = packed::open(data, format).map_err(|fault| fault.to_string())?;
    stream
        .read_to_end(&mut text)
        .map_err(|error| error.to_string())?;
    Ok(text)
}

#[test]
fn packed_text_is_the_text() {
    let text = bytes("euler.csv");
    for file in PACKED {
        assert!(unpacked(&Data::File(path(file))).unwrap() == text, "{file}");
        for tail in [&b"x"[..], b"\0\0\0\0", b"t,x\n1,2\n"] {
            let longer = [&bytes(file)[..], tail].concat();
            assert!(
                unpacked(&Data::memory(longer)).is_err(),
                "{file} with a tail"
            );
        }
    }
}

#[test]
fn what_is_left_out_is_named() {
    let left_out = |file| table(&Data::File(path(file))).unwrap().left_out;
    assert_eq!(
        left_out("vectors.npz"),
        ["`note` holds text (`<U5`)", "`dt` holds 1 value"]
    );
    assert_eq!(
        left_out("deflated.npz"),
        ["`short` holds 7 values where the table has 301 rows"]
    );
    assert_eq!(
        left_out("odd.mat"),
        [
            "`z` holds complex numbers",
            "`note` holds text",
            "`cells` is a cell array",
            "`sparse` is a sparse matrix",
            "`cube` is no vector and no matrix",
        ]
    );
    assert_eq!(
        left_out("struct.mat"),
        [
            "`run.note` holds text",
            "`run.deep` is a structure within a structure",
            "`dt` holds 1 value"
        ]
    );
    #[cfg(feature = "parquet")]
    assert_eq!(
        left_out("mixed.parquet"),
        [
            "`note` holds text",
            "`when` holds dates or times of day",
            "`list.list.element` is nested"
        ]
    );
    #[cfg(feature = "hdf5")]
    {
        assert_eq!(
            left_out("compound.h5"),
            [
                "`note` holds text or lists of varying length",
                "`dt` holds 1 value"
            ]
        );
        assert_eq!(left_out("octave.h5"), ["`dt` holds 1 value"]);
    }
}

#[test]
fn what_is_not_read_is_refused_by_name() {
    let refusal = |file: &str| table(&Data::memory(bytes(file))).err().unwrap();
    assert_eq!(
        refusal("complex.npy"),
        "the array holds complex numbers (`<c16`), expected numbers"
    );
    assert_eq!(
        refusal("version4.mat"),
        "this file is a MATLAB file of version 4\n  help: save it with `-v7`"
    );
    #[cfg(feature = "hdf5")]
    assert!(
        refusal("lzf.h5").contains("lzf") || refusal("lzf.h5").contains("32000"),
        "{}",
        refusal("lzf.h5")
    );
    #[cfg(not(feature = "hdf5"))]
    assert_eq!(
        refusal("contiguous.h5"),
        "this file is HDF5 data\n  help: this build cannot read it: \
         install with `cargo install --path . --features hdf5`"
    );
    #[cfg(not(feature = "parquet"))]
    assert!(refusal("snappy.parquet").contains("--features parquet"));
}

/// The first 64 bytes and 200 places over the length.
fn places(length: usize) -> impl Iterator<Item = usize> {
    (0..64).chain((0..200).map(move |i| i * length / 200))
}

#[test]
fn a_file_that_is_cut_never_gives_fewer_rows() {
    let twin = twin();
    let mut refused = 0;
    for (file, _) in tables() {
        let whole = bytes(file);
        for place in places(whole.len()) {
            match table(&Data::memory(&whole[..place])) {
                Err(_) => refused += 1,
                Ok(table) => is_twin(file, &table, &twin),
            }
        }
    }
    let text = bytes("euler.csv");
    for file in PACKED {
        let whole = bytes(file);
        for place in places(whole.len()) {
            match unpacked(&Data::memory(&whole[..place])) {
                Err(_) => refused += 1,
                Ok(unpacked) => assert!(unpacked == text, "{file} cut at {place}"),
            }
        }
    }
    assert!(refused > 264 * 20, "{refused}");
}

/// Formats with a checksum over all numbers.
const CHECKED: [&str; 7] = [
    "vectors.npz",
    "deflated.npz",
    "matrix.npz",
    "lying.npz",
    "packed.mat",
    "single.mat",
    "octave7.mat",
];

#[test]
fn damage_never_panics_and_checksums_are_compared() {
    let twin = twin();
    for (file, _) in tables() {
        let whole = bytes(file);
        for (index, place) in places(whole.len()).enumerate() {
            for mask in [0x01, 0x80, 0xff] {
                let mut damaged = whole.clone();
                damaged[place] ^= mask;
                if let Ok(table) = table(&Data::memory(damaged))
                    && CHECKED.contains(&file)
                {
                    for column in &table.columns {
                        let known = twin.iter().chain([&table.columns[0]]);
                        let whole = column.iter().all(|v| v.fract() == 0.0);
                        let single = file == "single.mat";
                        let same = known.into_iter().any(|t| {
                            t.iter().zip(column).all(|(a, b)| {
                                if single {
                                    *a as f32 == *b as f32
                                } else {
                                    a == b
                                }
                            })
                        });
                        assert!(same || whole, "{file}: byte {place} ({index})");
                    }
                }
            }
        }
    }
    let text = bytes("euler.csv");
    for file in PACKED {
        let whole = bytes(file);
        for place in places(whole.len()) {
            let mut damaged = whole.clone();
            damaged[place] ^= 0x10;
            if let Ok(unpacked) = unpacked(&Data::memory(damaged))
                && file != "one.csv.zst"
            {
                assert!(unpacked == text, "{file} damaged at {place}");
            }
        }
    }
}

#[test]
fn a_name_says_nothing() {
    for (file, format) in [
        ("rows.npy", Some(Format::Npy)),
        ("vectors.npz", Some(Format::Npz)),
        ("packed.mat", Some(Format::Mat5)),
        ("version4.mat", Some(Format::Mat4)),
        ("octave7.mat", Some(Format::Mat5)),
        ("snappy.parquet", Some(Format::Parquet)),
        ("contiguous.h5", Some(Format::Hdf5)),
        ("behind.h5", Some(Format::Hdf5)),
        ("octave.h5", Some(Format::Hdf5)),
        ("one.csv.gz", Some(Format::Gzip)),
        ("two.csv.zst", Some(Format::Zstd)),
        ("euler.csv", None),
        ("make_formats.py", None),
    ] {
        assert_eq!(columns::recognise(&bytes(file)), format, "{file}");
    }
}
