use super::*;
use crate::trajectory::MOST_COLUMNS;

fn npy(header: &str, data: usize) -> Vec<u8> {
    let mut bytes = b"\x93NUMPY\x01\x00".to_vec();
    bytes.extend((header.len() as u16).to_le_bytes());
    bytes.extend(header.as_bytes());
    bytes.extend(vec![0; data]);
    bytes
}

fn plain(shape: &str, data: usize) -> Vec<u8> {
    let header = format!("{{'descr': '<f8', 'fortran_order': False, 'shape': {shape}}}\n");
    npy(&header, data)
}

fn fault(bytes: Vec<u8>, format: Format) -> String {
    match open(&Data::memory(bytes), format) {
        Ok(file) => panic!("{} rows of {:?}", file.rows(), file.heads()),
        Err(fault) => fault.to_string(),
    }
}

#[test]
fn arrays_that_claim_what_is_not_there() {
    for (shape, data, text) in [
        (
            "(3,)",
            16,
            "cut off: the header promises 3 rows, the file holds 2",
        ),
        (
            "(3, 2)",
            47,
            "cut off: the header promises 3 rows, the file holds 2",
        ),
        (
            "(1,)",
            9,
            "1 bytes follow the end of the array\n  help: one array to a file",
        ),
        (
            "(0, 5)",
            8,
            "8 bytes follow the end of the array\n  help: one array to a file",
        ),
        (
            "(9223372036854775807, 2)",
            16,
            "the array claims more bytes than any file has",
        ),
        (
            "(2, 5000)",
            0,
            "the array has 5000 columns, 4096 at most are read",
        ),
        ("()", 8, "the array is a single value, expected a table"),
        (
            "(1, 1, 1)",
            8,
            "the array has 3 dimensions, expected a table",
        ),
        (
            "(-1,)",
            8,
            "the header of the array cannot be read at `-1,)}\\n`",
        ),
        ("(True,)", 8, "the header of the array has no valid `shape`"),
    ] {
        assert_eq!(fault(plain(shape, data), Format::Npy), text, "{shape}");
    }
    let huge = plain("(2305843009213693951,)", 16);
    assert!(fault(huge, Format::Npy).starts_with("cut off"));
    let mut bytes = npy("", 0);
    bytes[6] = 9;
    let text = "the array has a header of version 9, 1 to 3 are known";
    assert_eq!(fault(bytes, Format::Npy), text);
}

#[test]
fn types_that_are_no_numbers_are_named() {
    for (descr, text) in [
        ("'|O'", "Python objects (`|O`)"),
        ("'<U8'", "text (`<U8`)"),
        ("'<M8[ns]'", "dates (`<M8[ns]`)"),
        (
            "'<f16'",
            "floating-point numbers of an unusual size (`<f16`)",
        ),
        (
            "[('t', '<f8'), ('v', '<f8', (3,))]",
            "records whose field `v` is no single number",
        ),
        (
            "[('t', '<c16')]",
            "records whose field `t` holds complex numbers (`<c16`)",
        ),
        ("[]", "records without a field"),
    ] {
        let header = format!("{{'descr': {descr}, 'fortran_order': False, 'shape': (1,)}}\n");
        let expected = format!("the array holds {text}, expected numbers");
        assert_eq!(fault(npy(&header, 8), Format::Npy), expected);
    }
}

#[test]
fn whole_numbers_and_truth_values_are_read() {
    for (descr, data, value) in [
        ("'|b1'", vec![1u8], 1.0),
        ("'|i1'", vec![0xff], -1.0),
        ("'>u2'", vec![1, 2], 258.0),
        ("'<i8'", (-3i64).to_le_bytes().to_vec(), -3.0),
    ] {
        let header = format!("{{'descr': {descr}, 'fortran_order': False, 'shape': (1,)}}\n");
        let bytes = [npy(&header, 0), data].concat();
        let file = open(&Data::memory(bytes), Format::Npy).unwrap();
        assert!(file.heads()[0].whole && file.heads()[0].precision == Precision::Double);
        file.read(&[0], &mut |block| {
            assert_eq!(block, [[value]]);
            Ok(())
        })
        .unwrap();
    }
}

#[test]
fn long_files_come_in_blocks() {
    let rows = 2 * BLOCK_ROWS + 5;
    let mut bytes = plain(&format!("({rows}, 2)"), 0);
    bytes.extend((0..2 * rows).flat_map(|n| (n as f64).to_le_bytes()));
    let file = open(&Data::memory(bytes), Format::Npy).unwrap();
    let mut lengths = Vec::new();
    let mut next = 1.0;
    file.read(&[1], &mut |block| {
        lengths.push(block[0].len());
        for &value in &block[0] {
            assert_eq!(value, next);
            next += 2.0;
        }
        Ok(())
    })
    .unwrap();
    assert_eq!(lengths, [BLOCK_ROWS, BLOCK_ROWS, 5]);
}

/// An archive of stored members.
fn archive(members: &[(&str, &[u8])], flags: u8, method: u8) -> Vec<u8> {
    let mut bytes = Vec::new();
    let mut directory = Vec::new();
    for (name, content) in members {
        let mut crc = flate2::Crc::new();
        crc.update(content);
        let size = (content.len() as u32).to_le_bytes();
        let mut common = vec![20, 0, flags, 0, method, 0, 0, 0, 0, 0];
        common.extend(crc.sum().to_le_bytes());
        common.extend([size, size].concat());
        common.extend((name.len() as u16).to_le_bytes());
        common.extend([0, 0]);
        directory.extend(b"PK\x01\x02\x14\x00");
        directory.extend(&common);
        directory.extend([0; 10]);
        directory.extend((bytes.len() as u32).to_le_bytes());
        directory.extend(name.as_bytes());
        bytes.extend(b"PK\x03\x04");
        bytes.extend(&common);
        bytes.extend(name.as_bytes());
        bytes.extend(*content);
    }
    let count = (members.len() as u16).to_le_bytes();
    let start = (bytes.len() as u32).to_le_bytes();
    let size = (directory.len() as u32).to_le_bytes();
    bytes.extend(directory);
    bytes.extend(b"PK\x05\x06\0\0\0\0");
    bytes.extend([count, count].concat());
    bytes.extend([size, start].concat());
    bytes.extend([0, 0]);
    bytes
}

/// A name is a word in a report and never a path: nothing is written or opened by it.
#[test]
fn names_of_members_are_names_of_columns() {
    let array = plain("(1,)", 8);
    let names = ["../../t", "/etc/x", "a\\b", ""];
    let members = names.map(|name| format!("{name}.npy"));
    let members: Vec<(&str, &[u8])> = members.iter().map(|n| (&n[..], &array[..])).collect();
    let table = open(&Data::memory(archive(&members, 0, 0)), Format::Npz).unwrap();
    let found: Vec<_> = (table.heads().iter())
        .map(|head| head.name.as_deref().unwrap_or_default())
        .collect();
    assert_eq!(found, names);
}

#[test]
fn an_archive_may_have_as_many_members_as_a_table_columns() {
    let array = plain("(1,)", 8);
    let told = |count: usize| {
        let names: Vec<String> = (0..count).map(|k| format!("{k}.npy")).collect();
        let members: Vec<(&str, &[u8])> = names.iter().map(|n| (&n[..], &array[..])).collect();
        let opened = open(&Data::memory(archive(&members, 0, 0)), Format::Npz);
        opened.err().map(|fault| fault.text).unwrap_or_default()
    };
    assert_eq!(told(MOST_COLUMNS), "");
    let wanted = "there are more than 4096 columns";
    assert!(
        told(MOST_COLUMNS + 1).contains(wanted),
        "{}",
        told(MOST_COLUMNS + 1)
    );
}

#[test]
fn archives_that_are_not_as_they_should_be() {
    let array = plain("(1,)", 8);
    let short = plain("(2,)", 8);
    let one: &[(&str, &[u8])] = &[("t.npy", &array)];
    assert!(open(&Data::memory(archive(one, 0, 0)), Format::Npz).is_ok());
    let twice = archive(&[one[0], one[0]], 0, 0);
    assert_eq!(fault(twice, Format::Npz), "the archive holds `t.npy` twice");
    assert_eq!(
        fault(archive(one, 1, 0), Format::Npz),
        "`t.npy` is encrypted"
    );
    assert_eq!(
        fault(archive(one, 0, 12), Format::Npz),
        "`t.npy` is packed by method 12\n  help: only stored and deflated members are read"
    );
    assert_eq!(
        fault(archive(&[("t.npy", &short)], 0, 0), Format::Npz),
        "`t`: cut off: the header promises 2 rows, the file holds 1"
    );
    let mut damaged = archive(one, 0, 0);
    let at = 35 + array.len() - 1;
    damaged[at] ^= 1;
    assert_eq!(
        fault(damaged, Format::Npz),
        "`t.npy` is damaged: its checksum does not agree"
    );
    let mut longer = archive(one, 0, 0);
    longer.extend(b"more");
    assert!(fault(longer, Format::Npz).contains("no end record"));
    let foreign = archive(
        &[
            (
                "a.npy",
                &npy("{'descr': '|O', 'fortran_order': False, 'shape': (1,)}", 8),
            ),
            ("b.txt", b"x"),
        ],
        0,
        0,
    );
    assert_eq!(
        fault(foreign, Format::Npz),
        "there is no array of numbers in this file\n  help: `a` holds Python objects (`|O`)"
    );
}
