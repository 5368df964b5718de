//! `.npy`: one array of NumPy, of the versions 1 to 3 of its header; plain numbers
//! in one or two dimensions, or records of plain numbers in one.

use std::io::Read;

use super::cell::{Cell, Kind, Precision};
use super::literal::{Literal, parse};
use super::strip::{Lie, pour, skip};
use super::{Columns, Data, EachBlock, Head, checked, data};
use crate::fault::{Fault, Result, quoted};
use crate::trajectory::MOST_COLUMNS;

/// Longer than the header of any array with as many fields as we take.
const MOST_HEADER_BYTES: u64 = 1 << 20;
/// Larger than any record of as many fields as we take.
const MOST_RECORD_BYTES: u64 = 1 << 20;

/// The header of an array.
#[derive(Debug)]
pub(super) struct Array {
    pub elements: Elements,
    /// True for Fortran order.
    pub by_columns: bool,
    pub shape: Vec<u64>,
    /// Bytes before the first element.
    pub header: u64,
}

/// What the array holds.
#[derive(Debug, PartialEq)]
pub(super) enum Elements {
    Plain(Cell),
    Records {
        size: u64,
        fields: Vec<(String, usize, Cell)>,
    },
    /// Something that is no number, in words.
    Foreign(String),
}

impl Array {
    /// Reads the header.
    pub fn parse(bytes: &mut dyn Read) -> Result<Array> {
        let mut start = [0; 8];
        take(bytes, &mut start)?;
        if !start.starts_with(b"\x93NUMPY") {
            return Err(Fault::new("this is no NumPy array"));
        }
        let wide = match start[6] {
            1 => 2,
            2 | 3 => 4,
            version => {
                let text = format!("the array has a header of version {version}, 1 to 3 are known");
                return Err(Fault::new(text));
            }
        };
        let mut length = [0; 4];
        take(bytes, &mut length[..wide])?;
        let length = u64::from(u32::from_le_bytes(length));
        if length > MOST_HEADER_BYTES {
            return Err(Fault::new("the header of the array is too long"));
        }
        let mut text = vec![0; length as usize];
        take(bytes, &mut text)?;
        // Versions 1 and 2 are Latin-1, version 3 is UTF-8.
        let text = match start[6] {
            3 => String::from_utf8(text).map_err(|_| Fault::new("the header is no UTF-8"))?,
            _ => text.into_iter().map(char::from).collect(),
        };
        Array::described(parse(&text)?, 8 + wide as u64 + length)
    }

    fn described(literal: Literal, header: u64) -> Result<Array> {
        let fault = |what| Fault::new(format!("the header of the array has no valid `{what}`"));
        let Literal::Dictionary(pairs) = literal else {
            return Err(Fault::new("the header of the array is no dictionary"));
        };
        let find = |name: &str| {
            let mut found = pairs
                .iter()
                .filter(|(key, _)| matches!(key, Literal::Text(text) if text == name));
            match (found.next(), found.next()) {
                (Some((_, value)), None) => Some(value),
                _ => None,
            }
        };
        let by_columns = match find("fortran_order") {
            Some(Literal::Truth(truth)) => *truth,
            _ => return Err(fault("fortran_order")),
        };
        let Some(Literal::Series(sides)) = find("shape") else {
            return Err(fault("shape"));
        };
        let shape = sides.iter().map(|side| match side {
            Literal::Number(side) => Ok(*side),
            _ => Err(fault("shape")),
        });
        Ok(Array {
            elements: elements(find("descr").ok_or_else(|| fault("descr"))?)?,
            by_columns,
            shape: shape.collect::<Result<_>>()?,
            header,
        })
    }

    /// Bytes of the elements; nothing for what is no number and beyond all sizes.
    pub fn bytes(&self) -> Option<u64> {
        let size = match &self.elements {
            Elements::Plain(cell) => cell.size() as u64,
            Elements::Records { size, .. } => *size,
            Elements::Foreign(_) => return None,
        };
        self.shape
            .iter()
            .try_fold(size, |bytes, &side| bytes.checked_mul(side))
    }

    /// How finely plain numbers are stored, and whether they are whole.
    pub fn nature(&self) -> (Precision, bool) {
        match self.elements {
            Elements::Plain(cell) => (cell.precision(), cell.is_whole()),
            _ => (Precision::Double, false),
        }
    }

    /// The fields of records.
    pub fn fields(&self) -> Vec<Head> {
        let Elements::Records { fields, .. } = &self.elements else {
            return Vec::new();
        };
        let head = |(name, _, cell): &(String, usize, Cell)| Head {
            name: Some(name.clone()),
            precision: cell.precision(),
            whole: cell.is_whole(),
        };
        fields.iter().map(head).collect()
    }

    /// How a table of so many rows and columns lies in the bytes; `lies` where its
    /// columns are the rows of the array.
    pub fn lie(&self, rows: u64, columns: u64, lies: bool) -> Option<Lie> {
        match &self.elements {
            Elements::Plain(cell) => {
                Some(Lie::matrix(rows, columns, *cell, self.by_columns != lies))
            }
            Elements::Records { size, fields } => Some(Lie::Rows {
                stride: *size as usize,
                columns: fields
                    .iter()
                    .map(|(_, offset, cell)| (*offset, *cell))
                    .collect(),
            }),
            Elements::Foreign(_) => None,
        }
    }
}

fn take(bytes: &mut dyn Read, buffer: &mut [u8]) -> Result<()> {
    bytes
        .read_exact(buffer)
        .map_err(|error| data::reading(&error))
}

fn elements(descr: &Literal) -> Result<Elements> {
    match descr {
        Literal::Text(code) => Ok(match cell(code) {
            Some(cell) => Elements::Plain(cell),
            None => Elements::Foreign(kind(code)),
        }),
        Literal::Series(fields) => records(fields),
        _ => Err(Fault::new("the header of the array has no valid `descr`")),
    }
}

fn records(list: &[Literal]) -> Result<Elements> {
    let mut fields = Vec::new();
    let mut size = 0u64;
    for field in list {
        let Literal::Series(parts) = field else {
            return Err(Fault::new("a field of the records cannot be read"));
        };
        let name = match parts.first() {
            Some(Literal::Text(name)) => name,
            // A title and a name.
            Some(Literal::Series(names)) => match names.as_slice() {
                [_, Literal::Text(name)] => name,
                _ => return Err(Fault::new("a field of the records has no name")),
            },
            _ => return Err(Fault::new("a field of the records has no name")),
        };
        let code = match parts.as_slice() {
            [_, Literal::Text(code)] => code,
            _ => {
                let text = format!("records whose field {} is no single number", quoted(name));
                return Ok(Elements::Foreign(text));
            }
        };
        let gap = code.strip_prefix("|V").filter(|_| name.is_empty());
        if let Some(bytes) = gap.and_then(|bytes| bytes.parse::<u64>().ok()) {
            size = size.saturating_add(bytes);
        } else if let Some(cell) = cell(code) {
            fields.push((name.clone(), size.min(MOST_RECORD_BYTES) as usize, cell));
            size = size.saturating_add(cell.size() as u64);
        } else {
            let text = format!("records whose field {} holds {}", quoted(name), kind(code));
            return Ok(Elements::Foreign(text));
        }
    }
    if size > MOST_RECORD_BYTES || fields.len() > MOST_COLUMNS {
        return Err(Fault::new("the records of the array are too long"));
    }
    match fields.is_empty() {
        true => Ok(Elements::Foreign("records without a field".to_owned())),
        false => Ok(Elements::Records { size, fields }),
    }
}

fn cell(code: &str) -> Option<Cell> {
    let mut characters = code.chars();
    let order = characters.next()?;
    let letter = characters.next()?;
    let size: u8 = characters.as_str().parse().ok()?;
    let kind = match (letter, size) {
        ('f', 2 | 4 | 8) => Kind::Float(size),
        ('i', 1 | 2 | 4 | 8) => Kind::Signed(size),
        ('u', 1 | 2 | 4 | 8) | ('b', 1) => Kind::Unsigned(size),
        _ => return None,
    };
    let big = match order {
        '>' => true,
        '<' => false,
        '|' | '=' if size == 1 => false,
        _ => return None,
    };
    Some(Cell { kind, big })
}

/// A type that is no number of ours, in words.
fn kind(code: &str) -> String {
    let words = match code.trim_start_matches(['<', '>', '|', '=']).chars().next() {
        Some('c') => "complex numbers",
        Some('O') => "Python objects",
        Some('S' | 'a' | 'U' | 'T') => "text",
        Some('M') => "dates",
        Some('m') => "spans of time",
        Some('f') => "floating-point numbers of an unusual size",
        _ => "an unknown type",
    };
    format!("{words} ({})", quoted(code))
}

/// A file with one array.
pub(super) struct Npy {
    data: Data,
    header: u64,
    lie: Lie,
    rows: u64,
    heads: Vec<Head>,
}

impl Npy {
    /// Reads the header and compares the size of the file with its claim.
    pub fn open(data: &Data) -> Result<Npy> {
        let length = data.length()?;
        let array = Array::parse(&mut data.piece(0, length)?)?;
        if let Elements::Foreign(what) = &array.elements {
            return Err(Fault::new(format!(
                "the array holds {what}, expected numbers"
            )));
        }
        let (rows, columns) = match (array.shape.as_slice(), &array.elements) {
            (&[rows], Elements::Plain(_)) => (rows, 1),
            (&[rows], Elements::Records { fields, .. }) => (rows, fields.len() as u64),
            (&[rows, columns], Elements::Plain(_)) => (rows, columns),
            ([], _) => return Err(Fault::new("the array is a single value, expected a table")),
            (shape, _) => {
                let text = format!("the array has {} dimensions, expected a table", shape.len());
                return Err(Fault::new(text));
            }
        };
        if columns > MOST_COLUMNS as u64 {
            let text = format!("the array has {columns} columns, {MOST_COLUMNS} at most are read");
            return Err(Fault::new(text));
        }
        let too_large = || Fault::new("the array claims more bytes than any file has");
        let claimed = array.bytes().ok_or_else(too_large)?;
        agree(claimed, length.saturating_sub(array.header), rows)?;
        let heads = match array.fields() {
            fields if fields.is_empty() => {
                let (precision, whole) = array.nature();
                let head = Head {
                    name: None,
                    precision,
                    whole,
                };
                vec![head; columns as usize]
            }
            fields => fields,
        };
        let lie = array.lie(rows, columns, false).ok_or_else(too_large)?;
        Ok(Npy {
            data: data.clone(),
            header: array.header,
            lie,
            rows,
            heads,
        })
    }
}

/// Compares the bytes that a header claims with those that are there.
pub(super) fn agree(claimed: u64, held: u64, rows: u64) -> Result<()> {
    if held > claimed {
        let text = format!("{} bytes follow the end of the array", held - claimed);
        return Err(Fault::new(text).help("one array to a file"));
    }
    if held < claimed {
        let full = u128::from(held) * u128::from(rows) / u128::from(claimed);
        let text = format!("cut off: the header promises {rows} rows, the file holds {full}");
        return Err(Fault::new(text));
    }
    Ok(())
}

impl Columns for Npy {
    fn heads(&self) -> &[Head] {
        &self.heads
    }

    fn rows(&self) -> u64 {
        self.rows
    }

    fn left_out(&self) -> &[String] {
        &[]
    }

    fn read(&self, wanted: &[usize], each: &mut EachBlock) -> Result<()> {
        checked(wanted, &self.heads)?;
        let places: Vec<_> = wanted.iter().enumerate().map(|(to, &c)| (c, to)).collect();
        let mut strips = self.lie.strips(&places, &mut |offset| {
            let start = self.header.saturating_add(offset);
            Ok(Box::new(self.data.piece(start, u64::MAX)?))
        })?;
        pour(self.rows, wanted.len(), &mut strips, each).map_err(|fault| self.data.named(fault))
    }
}

/// The bytes of an array that come as a stream, so many after its first.
pub(super) fn after(mut bytes: Box<dyn Read>, header: u64, offset: u64) -> Result<Box<dyn Read>> {
    skip(&mut *bytes, header.saturating_add(offset))?;
    Ok(bytes)
}
