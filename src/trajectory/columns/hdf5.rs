//! HDF5: numeric datasets of one or two dimensions at any depth of groups, and tables
//! of records, to one table. What the library refuses is refused in its words.
//!
//! MATLAB 7.3 and Octave store matrices turned round: there rows and columns change
//! places back.

mod element;

use std::sync::Arc;

use hdf5_reader::error::Error;
use hdf5_reader::group::Group;
use hdf5_reader::{
    BlockCacheStorage, Dataset, FileStorage, Hdf5File, OpenOptions, SliceInfo, SliceInfoElem,
};

use self::element::{Field, Kind, Number, Record};
use super::table::{Entry, Table, by_array, lay};
use super::{BLOCK_ROWS, Columns, Data, EachBlock, Head, checked, guarded};
use crate::fault::{Fault, Result, quoted};
use crate::trajectory::MOST_COLUMNS;

/// Deeper than any file; links may form a ring.
const MOST_LEVELS: usize = 32;
/// Largest piece that is unpacked at once.
const MOST_CHUNK_BYTES: usize = 64 << 20;
/// Most that one request may unpack: a block of rows of as many columns as we take.
const MOST_READ_BYTES: usize = 512 << 20;

/// An HDF5 file.
pub(super) struct Tree {
    data: Data,
    arrays: Vec<Array>,
    table: Table,
}

/// A dataset of the table.
struct Array {
    set: Dataset,
    /// Fields of records, none for plain numbers.
    fields: Vec<Field>,
    /// True where the file has the sides in reverse.
    turned: bool,
}

fn refused(error: Error) -> Fault {
    Fault::new(format!("the HDF5 data cannot be read: {error}"))
}

/// Datasets as they are found.
#[derive(Default)]
struct Walk {
    arrays: Vec<(String, Dataset, bool)>,
    seen: Vec<u64>,
}

impl Walk {
    fn group(&mut self, group: &Group, path: &str, level: usize, turned: bool) -> Result<()> {
        // A second way to the same group, or a ring.
        if level > MOST_LEVELS || self.seen.contains(&group.address()) {
            return Ok(());
        }
        self.seen.push(group.address());
        let (mut groups, mut sets) = group.members().map_err(refused)?;
        // Some files list members by a hash of the name.
        groups.sort_by(|a, b| a.name().cmp(b.name()));
        sets.sort_by(|a, b| a.name().cmp(b.name()));
        let is_octave = group.attribute("OCTAVE_NEW_FORMAT").is_ok();
        if is_octave {
            // A variable of Octave is a group with the name of its type and its value.
            sets.retain(|set| set.name() == "value");
        }
        for set in sets {
            let turned = turned || is_octave || set.attribute("MATLAB_class").is_ok();
            let name = match is_octave {
                true => path.trim_end_matches('/').to_owned(),
                false => format!("{path}{}", last(set.name())),
            };
            self.arrays.push((name, set, turned));
            if self.arrays.len() > 4 * MOST_COLUMNS {
                return Err(Fault::new("the file has too many datasets"));
            }
        }
        for group in groups {
            let name = last(group.name());
            // What MATLAB refers to from cells, which are not read.
            if level == 0 && name.starts_with('#') {
                continue;
            }
            self.group(&group, &format!("{path}{name}/"), level + 1, turned)?;
        }
        Ok(())
    }
}

fn last(path: &str) -> &str {
    path.rsplit('/').next().unwrap_or(path)
}

/// The part that all names have in common, up to its last slash.
fn common<'a>(names: impl Iterator<Item = &'a str>) -> usize {
    let groups = names.map(|name| name.rfind('/').map_or("", |at| &name[..=at]));
    let mut groups = groups.collect::<Vec<_>>().into_iter();
    let Some(first) = groups.next() else {
        return 0;
    };
    match groups.all(|group| group == first) {
        true => first.len(),
        false => 0,
    }
}

impl Tree {
    /// Finds all datasets.
    pub fn open(data: &Data) -> Result<Tree> {
        guarded(|| Tree::found(data))
    }

    fn found(data: &Data) -> Result<Tree> {
        let options = OpenOptions::default()
            .with_max_chunk_bytes(MOST_CHUNK_BYTES)
            .with_max_read_bytes(MOST_READ_BYTES);
        let file = match data {
            Data::Memory(bytes) => Hdf5File::from_shared_bytes_with_options(bytes.clone(), options),
            // Not mapped: a simulator that cuts the file would end us.
            Data::File(path) => FileStorage::open(path).and_then(|file| {
                let storage = Arc::new(BlockCacheStorage::with_defaults(Arc::new(file)));
                Hdf5File::from_storage_with_options(storage, options)
            }),
        };
        let file = file.map_err(refused)?;
        let (end, length) = (file.superblock().eof_address, data.length()?);
        if length < end {
            return Err(Fault::new(format!(
                "cut off: the file should reach to byte {end}, it holds {length}"
            )));
        }
        let mut walk = Walk::default();
        let root = file.root_group().map_err(refused)?;
        walk.group(&root, "", 0, false)?;
        let common = common(walk.arrays.iter().map(|(name, ..)| name.as_str()));
        let mut arrays = Vec::new();
        let mut entries = Vec::new();
        let mut left_out = Vec::new();
        for (name, set, turned) in walk.arrays {
            let name = &name[common..];
            match entry(name, &set, turned) {
                Ok((entry, fields)) => {
                    entries.push(entry);
                    arrays.push(Array {
                        set,
                        fields,
                        turned,
                    });
                }
                Err(what) => left_out.push(format!("{} {what}", quoted(name))),
            }
        }
        // A table of records alone needs no name in front of its fields.
        if let [only] = entries.as_mut_slice() {
            let prefix = format!("{}.", only.name);
            for field in &mut only.fields {
                let short = field
                    .name
                    .as_ref()
                    .and_then(|name| name.strip_prefix(&prefix));
                field.name = short.map(str::to_owned);
            }
        }
        Ok(Tree {
            data: data.clone(),
            arrays,
            table: lay(&entries, left_out)?,
        })
    }
}

/// A dataset as an array of the table, or why it is none.
fn entry(
    name: &str,
    set: &Dataset,
    turned: bool,
) -> std::result::Result<(Entry, Vec<Field>), String> {
    let mut shape = set.shape().to_vec();
    if turned {
        shape.reverse();
    }
    let mut entry = Entry {
        name: name.to_owned(),
        shape,
        ..Entry::default()
    };
    let fields = match element::kind(set)? {
        Kind::Plain { precision, whole } => {
            (entry.precision, entry.whole) = (precision, whole);
            Vec::new()
        }
        Kind::Records(fields) => fields,
    };
    if !fields.is_empty() && set.ndim() != 1 {
        return Err("holds records in more than one dimension".to_owned());
    }
    entry.fields = fields
        .iter()
        .map(|field| Head {
            name: Some(format!("{name}.{}", field.name)),
            precision: field.cell.precision(),
            whole: field.cell.is_whole(),
        })
        .collect();
    Ok((entry, fields))
}

impl Array {
    /// Rows of the table for columns of this array, into the places of the block.
    fn take(
        &self,
        (from, to): (u64, u64),
        columns: &[(usize, usize)],
        lies: bool,
        block: &mut [Vec<f64>],
    ) -> Result<()> {
        let slice = |start, end| SliceInfoElem::Slice {
            start,
            end,
            step: 1,
        };
        if !self.fields.is_empty() {
            let selections = vec![slice(from, to)];
            let records = self.set.read_slice::<Record>(&SliceInfo { selections });
            for record in records.map_err(refused)?.iter() {
                for &(column, place) in columns {
                    let value = self.fields.get(column).map(|field| record.value(field));
                    block[place].push(value.unwrap_or(f64::NAN));
                }
            }
            return Ok(());
        }
        let sides = self.set.shape();
        let is_vector = sides.len() == 1 || sides.contains(&1);
        let by_columns = self.turned != lies;
        for (index, &(column, place)) in columns.iter().enumerate() {
            let column = column as u64;
            // A matrix by rows is read once for all its columns.
            let whole = !is_vector && !by_columns;
            if whole && index > 0 {
                break;
            }
            let selections = match sides {
                [_] => vec![slice(from, to)],
                [1, _] if is_vector => vec![slice(0, 1), slice(from, to)],
                [_, _] if is_vector => vec![slice(from, to), slice(0, 1)],
                [_, _] if by_columns => vec![slice(column, column + 1), slice(from, to)],
                [_, width] => vec![slice(from, to), slice(0, *width)],
                _ => return Err(Fault::new("a dataset is no vector and no matrix")),
            };
            let numbers = self.set.read_slice::<Number>(&SliceInfo { selections });
            let numbers = numbers.map_err(refused)?;
            if !whole {
                block[place].extend(numbers.iter().map(|number| number.0));
                continue;
            }
            for &(column, place) in columns {
                let width = sides[1].max(1) as usize;
                let column = numbers.iter().skip(column).step_by(width);
                block[place].extend(column.map(|number| number.0));
            }
        }
        Ok(())
    }
}

impl Columns for Tree {
    fn heads(&self) -> &[Head] {
        &self.table.heads
    }

    fn rows(&self) -> u64 {
        self.table.rows
    }

    fn left_out(&self) -> &[String] {
        &self.table.left_out
    }

    fn read(&self, wanted: &[usize], each: &mut EachBlock) -> Result<()> {
        checked(wanted, self.heads())?;
        let groups = by_array(&self.table.places, wanted);
        let mut block = vec![Vec::new(); wanted.len()];
        let mut from = 0;
        while from < self.table.rows {
            let to = self.table.rows.min(from + BLOCK_ROWS as u64);
            block.iter_mut().for_each(Vec::clear);
            let mut take = || {
                groups.iter().try_for_each(|(place, columns)| {
                    self.arrays[place.array].take((from, to), columns, place.lies, &mut block)
                })
            };
            guarded(&mut take).map_err(|fault| self.data.named(fault))?;
            let count = (to - from) as usize;
            if block.iter().any(|column| column.len() != count) {
                let fault = Fault::new("cut off: a dataset ends before its rows");
                return Err(self.data.named(fault));
            }
            each(&block)?;
            from = to;
        }
        Ok(())
    }
}
