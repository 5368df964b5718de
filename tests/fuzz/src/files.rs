//! Targets for trajectory files: text in every layout, columns of digits, and each format
//! that is no text.

use std::io::Read;

use stepgauge::fault::Result;
use stepgauge::trajectory::columns::{self, Data, Format};
use stepgauge::trajectory::{
    ColumnName, Findings, LongStated, Selection, Separator, Source, Stated, Survey, packed,
};

use crate::told;

/// The first three bytes say what is stated of the layout and in which pieces the rest comes.
pub fn text(bytes: &[u8]) {
    let Some((&[how, more, piece], text)) = bytes.split_first_chunk() else {
        return;
    };
    let separators = [
        None,
        Some(Separator::Tab),
        Some(Separator::Semicolon),
        Some(Separator::Comma),
    ];
    let stated = Stated {
        separator: separators[usize::from(how & 3)],
        decimal_comma: [None, Some(true), Some(false), None][usize::from(how >> 2 & 3)],
        comment: (how & 16 != 0).then(|| "#".to_owned()),
        skip_lines: (how & 32 != 0).then_some(u64::from(more & 7)),
        digits: (how & 64 != 0).then_some(more % 18),
        long: (how & 128 != 0).then(|| long(more >> 4)),
    };
    if let Err(fault) = read(text, &stated, usize::from(piece)) {
        told(&[fault]);
    }
}

fn long(number: u8) -> LongStated {
    LongStated {
        name: match number % 3 {
            0 => ColumnName::Number(2),
            1 => ColumnName::Name("name".to_owned()),
            _ => ColumnName::Number(1),
        },
        value: match number & 4 {
            0 => ColumnName::Number(3),
            _ => ColumnName::Name("value".to_owned()),
        },
        time: (number & 8 != 0).then_some(ColumnName::Number(1)),
    }
}

/// Every byte becomes a character that may stand in a number, so that most inputs are rows
/// and the question is what their digits resolve.
pub fn digits(bytes: &[u8]) {
    const OF_NUMBERS: &[u8; 32] = b"0123456789012345.-+e,,,,\n\n\n00519";
    let text = bytes.iter().map(|byte| OF_NUMBERS[usize::from(byte & 31)]);
    let text: Vec<u8> = b"t,x\n".iter().copied().chain(text).collect();
    if let Err(fault) = read(&text, &Stated::default(), 1 << 16) {
        told(&[fault]);
    }
}

/// The layout is found, all is surveyed, every row is walked.
fn read(bytes: &[u8], stated: &Stated, piece: usize) -> Result<()> {
    let source = Source::in_pieces(bytes.to_vec(), piece + 1);
    let Some(layout) = source.layout(stated)? else {
        return Ok(());
    };
    layout.describe();
    let channels = (1..layout.columns).collect();
    let survey = Survey::new(&source, layout, Selection { time: 0, channels }, stated)?;
    let mut findings = Findings::default();
    survey.rows(&source, &mut findings, &|_| false, &mut |row| {
        for place in 0..survey.selection.channels.len() {
            row.value(place);
        }
        Ok(())
    })?;
    findings.into_list();
    Ok(())
}

/// One NumPy array.
pub fn npy(bytes: &[u8]) {
    table(bytes, Format::Npy);
}

/// An archive of NumPy arrays.
pub fn npz(bytes: &[u8]) {
    table(bytes, Format::Npz);
}

/// MATLAB 5 to 7.
pub fn mat(bytes: &[u8]) {
    table(bytes, Format::Mat5);
}

/// A reader hands out as many rows as it has promised, or fails.
fn table(bytes: &[u8], format: Format) {
    columns::recognise(&bytes[..bytes.len().min(columns::FIRST_BYTES)]);
    let table = match columns::open(&Data::memory(bytes), format) {
        Ok(table) => table,
        Err(fault) => return told(&[fault]),
    };
    let wanted: Vec<usize> = (0..table.heads().len().min(8)).collect();
    let mut rows = 0;
    let read = table.read(&wanted, &mut |block| {
        assert_eq!(block.len(), wanted.len());
        let length = block.first().map_or(0, Vec::len);
        assert!(length <= columns::BLOCK_ROWS);
        rows += length as u64;
        Ok(())
    });
    match read {
        Ok(()) if !wanted.is_empty() => assert_eq!(rows, table.rows()),
        Ok(()) => {}
        Err(fault) => told(&[fault]),
    }
}

/// Text behind gzip.
pub fn gzip(bytes: &[u8]) {
    unpacked(bytes, Format::Gzip);
}

/// Text behind zstd.
pub fn zstd(bytes: &[u8]) {
    unpacked(bytes, Format::Zstd);
}

/// Read to its end in blocks, as the reader of text does.
fn unpacked(bytes: &[u8], format: Format) {
    let mut stream = match packed::open(&Data::memory(bytes), format) {
        Ok(stream) => stream,
        Err(fault) => return told(&[fault]),
    };
    let mut block = vec![0; 1 << 16];
    while matches!(stream.read(&mut block), Ok(count) if count > 0) {}
}
