//! Parquet: flat columns of numbers, row group by row group.
//!
//! The library hands out what is there without what is not: a null shortens the list
//! of values. The definition levels say where, and every value is put in its own row.

use std::io::{Read, Seek, SeekFrom};

use bytes::Bytes;
use parquet::basic::{LogicalType, Repetition, Type as Physical};
use parquet::column::reader::{ColumnReader, ColumnReaderImpl};
use parquet::data_type::DataType;
use parquet::errors::{ParquetError, Result as ParquetResult};
use parquet::file::reader::{ChunkReader, FileReader, Length, RowGroupReader};
use parquet::file::serialized_reader::SerializedFileReader;
use parquet::schema::types::ColumnDescriptor;

use super::{BLOCK_ROWS, Columns, Data, EachBlock, Head, Precision, checked, guarded};
use crate::fault::{Fault, Result, quoted};
use crate::trajectory::MOST_COLUMNS;

/// A Parquet file.
pub(super) struct Table {
    data: Data,
    heads: Vec<Head>,
    /// The column of the file for each of ours, and whether its whole numbers have no sign.
    places: Vec<(usize, bool)>,
    left_out: Vec<String>,
    rows: u64,
}

impl Length for Data {
    fn len(&self) -> u64 {
        self.length().unwrap_or(0)
    }
}

impl ChunkReader for Data {
    type T = super::Piece;

    fn get_read(&self, start: u64) -> ParquetResult<Self::T> {
        self.piece(start, u64::MAX).map_err(general)
    }

    fn get_bytes(&self, start: u64, length: usize) -> ParquetResult<Bytes> {
        let mut handle = self.handle().map_err(general)?;
        handle.seek(SeekFrom::Start(start))?;
        // Grows with what is there, not with what a damaged file claims.
        let mut bytes = Vec::new();
        handle.take(length as u64).read_to_end(&mut bytes)?;
        match bytes.len() == length {
            true => Ok(bytes.into()),
            false => Err(general(Fault::new("cut off: the data end too early"))),
        }
    }
}

fn general(fault: Fault) -> ParquetError {
    ParquetError::General(fault.text)
}

fn refused(error: ParquetError) -> Fault {
    Fault::new(format!("the Parquet data cannot be read: {error}"))
}

impl Table {
    /// Reads the schema and compares the rows of all columns.
    pub fn open(data: &Data) -> Result<Table> {
        guarded(|| Table::described(data))
    }

    fn described(data: &Data) -> Result<Table> {
        let file = SerializedFileReader::new(data.clone()).map_err(refused)?;
        let metadata = file.metadata();
        let mut table = Table {
            data: data.clone(),
            heads: Vec::new(),
            places: Vec::new(),
            left_out: Vec::new(),
            rows: 0,
        };
        let mut claimed = 0u64;
        for group in metadata.row_groups() {
            claimed = claimed.saturating_add(count(group.num_rows())?);
        }
        table.rows = count(metadata.file_metadata().num_rows())?;
        if claimed != table.rows {
            return Err(Fault::new(format!(
                "the file claims {} rows, its row groups {claimed}",
                table.rows
            )));
        }
        let schema = metadata.file_metadata().schema_descr();
        for (index, column) in schema.columns().iter().enumerate() {
            let name = column.path().string();
            match nature(column) {
                Ok((precision, whole, unsigned)) => {
                    table.places.push((index, unsigned));
                    table.heads.push(Head {
                        name: Some(name),
                        precision,
                        whole,
                    });
                }
                Err(what) => table.left_out.push(format!("{} {what}", quoted(&name))),
            }
        }
        if table.heads.is_empty() || table.heads.len() > MOST_COLUMNS {
            let text = format!("there are {} columns of numbers", table.heads.len());
            return Err(Fault::new(text));
        }
        for group in metadata.row_groups() {
            for (&(index, _), head) in table.places.iter().zip(&table.heads) {
                let values = group.columns().get(index).map(|chunk| chunk.num_values());
                if values != Some(group.num_rows()) {
                    let name = quoted(head.name.as_deref().unwrap_or_default());
                    let text = format!("{name} has another number of rows than its row group");
                    return Err(Fault::new(text));
                }
            }
        }
        Ok(table)
    }

    fn group(
        &self,
        group: &dyn RowGroupReader,
        wanted: &[usize],
        each: &mut EachBlock,
    ) -> Result<()> {
        let mut readers = Vec::new();
        for &column in wanted {
            let (index, unsigned) = self.places[column];
            let reader = group.get_column_reader(index).map_err(refused)?;
            readers.push((reader, unsigned));
        }
        let mut block = vec![Vec::new(); wanted.len()];
        let mut left = count(group.metadata().num_rows())?;
        while left > 0 {
            let rows = left.min(BLOCK_ROWS as u64) as usize;
            for ((reader, unsigned), column) in readers.iter_mut().zip(&mut block) {
                column.clear();
                while column.len() < rows {
                    let before = column.len();
                    take(reader, *unsigned, rows - before, column)?;
                    if column.len() == before {
                        return Err(Fault::new("cut off: a column ends before its row group"));
                    }
                }
            }
            each(&block)?;
            left -= rows as u64;
        }
        for ((reader, unsigned), column) in readers.iter_mut().zip(&mut block) {
            column.clear();
            take(reader, *unsigned, 1, column)?;
            if !column.is_empty() {
                return Err(Fault::new("a column holds more rows than its row group"));
            }
        }
        Ok(())
    }
}

fn count(number: i64) -> Result<u64> {
    u64::try_from(number).map_err(|_| Fault::new("the file claims a negative number of rows"))
}

/// How finely numbers are stored, whether they are whole and without a sign, or why the column is not part of the table.
fn nature(column: &ColumnDescriptor) -> std::result::Result<(Precision, bool, bool), &'static str> {
    if column.max_rep_level() > 0 || column.path().parts().len() != 1 {
        return Err("is nested");
    }
    if column.self_type().get_basic_info().repetition() == Repetition::REPEATED {
        return Err("is nested");
    }
    let unsigned = match column.logical_type_ref() {
        Some(LogicalType::Integer(integer)) => !integer.is_signed,
        None => false,
        Some(LogicalType::Timestamp(_) | LogicalType::Date | LogicalType::Time(_)) => {
            return Err("holds dates or times of day");
        }
        Some(LogicalType::Decimal(_)) => return Err("holds decimals"),
        Some(LogicalType::String) => return Err("holds text"),
        Some(_) => return Err("holds no plain numbers"),
    };
    match column.physical_type() {
        Physical::DOUBLE => Ok((Precision::Double, false, false)),
        Physical::FLOAT => Ok((Precision::Single, false, false)),
        Physical::INT32 | Physical::INT64 => Ok((Precision::Double, true, unsigned)),
        Physical::BOOLEAN => Ok((Precision::Double, true, false)),
        Physical::INT96 => Err("holds dates or times of day"),
        Physical::BYTE_ARRAY | Physical::FIXED_LEN_BYTE_ARRAY => Err("holds bytes or text"),
    }
}

/// Adds some of the next rows of a column, at most so many.
fn take(reader: &mut ColumnReader, unsigned: bool, most: usize, to: &mut Vec<f64>) -> Result<()> {
    match reader {
        ColumnReader::DoubleColumnReader(reader) => spread(reader, most, to, |&v| v),
        ColumnReader::FloatColumnReader(reader) => spread(reader, most, to, |&v| v.into()),
        ColumnReader::BoolColumnReader(reader) => spread(reader, most, to, |&v| v.into()),
        ColumnReader::Int32ColumnReader(reader) => match unsigned {
            true => spread(reader, most, to, |&v| (v as u32).into()),
            false => spread(reader, most, to, |&v| v.into()),
        },
        ColumnReader::Int64ColumnReader(reader) => match unsigned {
            true => spread(reader, most, to, |&v| v as u64 as f64),
            false => spread(reader, most, to, |&v| v as f64),
        },
        _ => Err(Fault::new("a column has another type than the schema says")),
    }
}

/// Values to their rows: NaN where the definition level says that there is none.
fn spread<T: DataType>(
    reader: &mut ColumnReaderImpl<T>,
    most: usize,
    to: &mut Vec<f64>,
    number: impl Fn(&T::T) -> f64,
) -> Result<()> {
    let mut values = Vec::new();
    let mut levels = Vec::new();
    let (rows, held, _) = reader
        .read_records(most, Some(&mut levels), None, &mut values)
        .map_err(refused)?;
    // A column that cannot have nulls has no levels.
    if held == rows && values.len() == rows {
        to.extend(values.iter().map(number));
        return Ok(());
    }
    let there = levels.iter().filter(|&&level| level > 0).count();
    if levels.len() != rows || there != values.len() {
        return Err(Fault::new(
            "the nulls of a column do not agree with its values",
        ));
    }
    let mut values = values.iter();
    to.extend(levels.iter().map(|&level| match level {
        0 => f64::NAN,
        _ => values.next().map_or(f64::NAN, &number),
    }));
    Ok(())
}

impl Columns for Table {
    fn heads(&self) -> &[Head] {
        &self.heads
    }

    fn rows(&self) -> u64 {
        self.rows
    }

    fn left_out(&self) -> &[String] {
        &self.left_out
    }

    fn read(&self, wanted: &[usize], each: &mut EachBlock) -> Result<()> {
        checked(wanted, &self.heads)?;
        let read = || {
            let file = SerializedFileReader::new(self.data.clone()).map_err(refused)?;
            for index in 0..file.num_row_groups() {
                let group = file.get_row_group(index).map_err(refused)?;
                self.group(&*group, wanted, each)?;
            }
            Ok(())
        };
        guarded(read).map_err(|fault| self.data.named(fault))
    }
}
