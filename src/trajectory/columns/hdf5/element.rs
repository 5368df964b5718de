//! One element of a dataset to numbers: its type, and the bytes as the library hands
//! them over.

use hdf5_reader::error::{Error, Result as Hdf5Result};
use hdf5_reader::{ByteOrder, Dataset, Datatype, H5Type};

use super::super::cell::{self, Cell, Precision};
use crate::trajectory::MOST_COLUMNS;

/// What a dataset holds.
pub(super) enum Kind {
    Plain { precision: Precision, whole: bool },
    Records(Vec<Field>),
}

/// A field of a record.
#[derive(Clone, Debug)]
pub(super) struct Field {
    pub name: String,
    pub offset: usize,
    pub cell: Cell,
}

/// What the elements of a dataset are, or why they are no numbers.
pub(super) fn kind(set: &Dataset) -> Result<Kind, String> {
    match set.dtype() {
        Datatype::Compound { fields, .. } if fields.len() <= MOST_COLUMNS => {
            let field = |field: &hdf5_reader::CompoundField| {
                let cell = cell(&field.datatype)
                    .filter(|cell| cell.kind != cell::Kind::Float(2))
                    .ok_or_else(|| {
                        let name = crate::fault::quoted(&field.name);
                        format!("is a table whose field {name} is no plain number")
                    })?;
                Ok::<_, String>(Field {
                    name: field.name.clone(),
                    offset: field.byte_offset as usize,
                    cell,
                })
            };
            let fields = fields.iter().map(field).collect::<Result<Vec<_>, _>>()?;
            match fields.is_empty() {
                true => Err("is a table without a field".to_owned()),
                false => Ok(Kind::Records(fields)),
            }
        }
        dtype => {
            let cell = cell(dtype).ok_or_else(|| format!("holds {}", words(dtype)))?;
            // The library keeps the size of a number and forgets where its exponent is.
            let raw = set.raw_datatype().map_err(|error| error.to_string())?;
            if matches!(dtype, Datatype::FloatingPoint { .. }) && !is_usual_float(&raw, cell) {
                return Err("holds floating-point numbers of an unusual kind".to_owned());
            }
            if matches!(dtype, Datatype::FixedPoint { .. }) && !is_usual_whole(&raw, cell) {
                return Err("holds whole numbers of an unusual kind".to_owned());
            }
            Ok(Kind::Plain {
                precision: cell.precision(),
                whole: cell.is_whole(),
            })
        }
    }
}

/// How a type is stored, if it is a plain number.
fn cell(dtype: &Datatype) -> Option<Cell> {
    let (kind, order) = match dtype {
        Datatype::FloatingPoint { size, byte_order } if matches!(size, 2 | 4 | 8) => {
            (cell::Kind::Float(*size), byte_order)
        }
        Datatype::FixedPoint {
            size,
            signed,
            byte_order,
        } if matches!(size, 1 | 2 | 4 | 8) => match signed {
            true => (cell::Kind::Signed(*size), byte_order),
            false => (cell::Kind::Unsigned(*size), byte_order),
        },
        // Truth values of h5py.
        Datatype::Enum { base, members } if members.len() == 2 => {
            return cell(base).filter(|cell| cell.is_whole());
        }
        _ => return None,
    };
    let big = *order == ByteOrder::BigEndian;
    Some(Cell { kind, big })
}

fn words(dtype: &Datatype) -> &'static str {
    match dtype {
        Datatype::FixedPoint { .. } | Datatype::FloatingPoint { .. } => {
            "numbers of an unusual size"
        }
        Datatype::String { .. } => "text",
        Datatype::Compound { .. } => "records of too many fields",
        Datatype::Reference { .. } => "references",
        Datatype::Enum { .. } => "names of an enumeration",
        Datatype::VarLen { .. } => "text or lists of varying length",
        Datatype::Array { .. } => "arrays within its elements",
        _ => "no numbers",
    }
}

fn half_word(bytes: &[u8], at: usize) -> Option<u16> {
    let pair = bytes.get(at..at + 2)?;
    Some(u16::from_le_bytes([pair[0], pair[1]]))
}

/// IEEE binary16, 32 and 64 as the description of the type says it: place of the sign,
/// bits in all, exponent, fraction and bias.
fn is_usual_float(raw: &[u8], cell: Cell) -> bool {
    let (sign, exponent, fraction, bias): (u8, [u8; 2], [u8; 2], u32) = match cell.size() {
        2 => (15, [10, 5], [0, 10], 15),
        4 => (31, [23, 8], [0, 23], 127),
        _ => (63, [52, 11], [0, 52], 1023),
    };
    let parts = [exponent[0], exponent[1], fraction[0], fraction[1]];
    raw.get(2) == Some(&sign)
        && half_word(raw, 8) == Some(0)
        && half_word(raw, 10) == Some(8 * cell.size() as u16)
        && raw.get(12..16) == Some(&parts)
        && raw.get(16..20) == Some(&bias.to_le_bytes())
}

fn is_usual_whole(raw: &[u8], cell: Cell) -> bool {
    half_word(raw, 8) == Some(0) && half_word(raw, 10) == Some(8 * cell.size() as u16)
}

/// A number of any type.
#[derive(Clone, Copy, Debug)]
pub(super) struct Number(pub f64);

/// The bytes of a record.
#[derive(Clone, Debug)]
pub(super) struct Record(Box<[u8]>);

impl Record {
    pub fn value(&self, field: &Field) -> f64 {
        let bytes = self.0.get(field.offset..).unwrap_or_default();
        field.cell.value(bytes)
    }
}

impl H5Type for Number {
    fn hdf5_type() -> Datatype {
        f64::hdf5_type()
    }

    fn from_bytes(bytes: &[u8], dtype: &Datatype) -> Hdf5Result<Number> {
        match cell(dtype).filter(|cell| cell.size() <= bytes.len()) {
            Some(cell) => Ok(Number(cell.value(bytes))),
            None => Err(Error::InvalidData("an element is no number".to_owned())),
        }
    }

    fn element_size(dtype: &Datatype) -> usize {
        size(dtype)
    }
}

impl H5Type for Record {
    fn hdf5_type() -> Datatype {
        f64::hdf5_type()
    }

    fn from_bytes(bytes: &[u8], dtype: &Datatype) -> Hdf5Result<Record> {
        match bytes.get(..size(dtype)) {
            Some(bytes) => Ok(Record(bytes.into())),
            None => Err(Error::InvalidData("a record is cut off".to_owned())),
        }
    }

    fn element_size(dtype: &Datatype) -> usize {
        size(dtype)
    }
}

fn size(dtype: &Datatype) -> usize {
    hdf5_reader::dtype_element_size(dtype).unwrap_or(usize::MAX)
}
