//! `.npz`: arrays of NumPy in a zip archive to one table.

use super::npy::{Array, Elements, after, agree};
use super::strip::pour;
use super::table::{Entry, Table, by_array, lay};
use super::{Columns, Data, EachBlock, Head, checked, zip};
use crate::fault::{Fault, Result, quoted};

/// An archive of arrays.
pub(super) struct Npz {
    data: Data,
    arrays: Vec<(zip::Member, Array)>,
    table: Table,
}

impl Npz {
    /// Reads the directory and every header, and every member once for its checksum.
    pub fn open(data: &Data) -> Result<Npz> {
        let mut arrays = Vec::new();
        let mut entries = Vec::new();
        let mut left_out = Vec::new();
        for member in zip::members(data)? {
            member.verify(data)?;
            let Some(name) = member.name.strip_suffix(".npy") else {
                left_out.push(format!("{} is no array", quoted(&member.name)));
                continue;
            };
            let inside = |fault: Fault| Fault {
                text: format!("{}: {}", quoted(name), fault.text),
                ..fault
            };
            let array = Array::parse(&mut *member.open(data)?).map_err(inside)?;
            if let Elements::Foreign(what) = &array.elements {
                left_out.push(format!("{} holds {what}", quoted(name)));
                continue;
            }
            let claimed = array.bytes().unwrap_or(u64::MAX);
            let rows = array.shape.first().copied().unwrap_or(1);
            agree(claimed, member.length.saturating_sub(array.header), rows).map_err(inside)?;
            entries.push(entry(name, &array));
            arrays.push((member, array));
        }
        Ok(Npz {
            data: data.clone(),
            arrays,
            table: lay(&entries, left_out)?,
        })
    }
}

fn entry(name: &str, array: &Array) -> Entry {
    let (precision, whole) = array.nature();
    let mut fields = array.fields();
    for field in &mut fields {
        let inner = field.name.take().unwrap_or_default();
        field.name = Some(format!("{name}.{inner}"));
    }
    Entry {
        name: name.to_owned(),
        shape: array.shape.clone(),
        fields,
        precision,
        whole,
    }
}

impl Columns for Npz {
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
        let mut strips = Vec::new();
        for (place, columns) in by_array(&self.table.places, wanted) {
            let (member, array) = &self.arrays[place.array];
            let width = self.table.places.iter().filter(|p| p.array == place.array);
            let lie = array
                .lie(self.table.rows, width.count() as u64, place.lies)
                .ok_or_else(|| Fault::new("an array is no table"))?;
            strips.extend(lie.strips(&columns, &mut |offset| {
                after(member.open(&self.data)?, array.header, offset)
            })?);
        }
        pour(self.table.rows, wanted.len(), &mut strips, each)
            .map_err(|fault| self.data.named(fault))
    }
}
