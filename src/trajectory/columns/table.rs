//! Named arrays of any shapes to one table: which belong to it, under which names,
//! and a sentence for each that does not.

use super::{Head, Precision};
use crate::fault::{Fault, Result, quoted};
use crate::trajectory::MOST_COLUMNS;

/// An array of a file.
#[derive(Clone, Debug, Default)]
pub(super) struct Entry {
    pub name: String,
    /// Its sides; rows come first.
    pub shape: Vec<u64>,
    /// Fields of each element, where the elements are records.
    pub fields: Vec<Head>,
    pub precision: Precision,
    pub whole: bool,
}

/// A column of the table: the array and the column within.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Place {
    pub array: usize,
    pub column: usize,
    /// True where the table's columns are the array's rows.
    pub lies: bool,
}

/// The table that the arrays make.
#[derive(Debug)]
pub(super) struct Table {
    pub heads: Vec<Head>,
    pub places: Vec<Place>,
    pub rows: u64,
    pub left_out: Vec<String>,
}

/// How an array can be seen.
#[derive(Clone, Copy)]
enum Seen {
    Vector(u64),
    Matrix(u64, u64),
    Neither,
}

impl Entry {
    fn seen(&self) -> Seen {
        match *self.shape.as_slice() {
            [] => Seen::Vector(1),
            [length] | [length, 1] | [1, length] => Seen::Vector(length),
            [rows, columns] if self.fields.is_empty() => Seen::Matrix(rows, columns),
            _ => Seen::Neither,
        }
    }

    /// The length that the array would give the table.
    fn length(&self) -> Option<u64> {
        match self.seen() {
            Seen::Vector(length) | Seen::Matrix(length, _) => Some(length),
            Seen::Neither => None,
        }
    }

    /// True for the name of a time column, in whatever group.
    fn is_time(&self) -> bool {
        let last = self.name.rsplit(['/', '.']).next().unwrap_or_default();
        last.eq_ignore_ascii_case("t") || last.eq_ignore_ascii_case("time")
    }
}

/// Lays the arrays side by side.
///
/// The table is as long as the array named `t` or `time`, else as most arrays are
/// (the longest such length). A matrix may stand or lie: one whose second side alone
/// has that length gives its rows as columns.
pub(super) fn lay(entries: &[Entry], left_out: Vec<String>) -> Result<Table> {
    let Some(rows) = rows(entries) else {
        let fault = Fault::new("there is no array of numbers in this file");
        return Err(match left_out.first() {
            Some(sentence) => fault.help(sentence.clone()),
            None => fault,
        });
    };
    let mut table = Table {
        heads: Vec::new(),
        places: Vec::new(),
        rows,
        left_out,
    };
    for (array, entry) in entries.iter().enumerate() {
        let (columns, lies) = match entry.seen() {
            Seen::Vector(length) if length == rows => (1, false),
            Seen::Matrix(length, columns) if length == rows => (columns, false),
            Seen::Matrix(columns, length) if length == rows => (columns, true),
            seen => {
                table.left_out.push(sentence(&entry.name, seen, rows));
                continue;
            }
        };
        if columns > (MOST_COLUMNS - table.heads.len()) as u64
            || entry.fields.len() > MOST_COLUMNS - table.heads.len()
        {
            return Err(Fault::new(format!(
                "there are more than {MOST_COLUMNS} columns, with those of {}",
                quoted(&entry.name)
            )));
        }
        let heads = table.heads.len();
        if !entry.fields.is_empty() {
            table.heads.extend(entry.fields.iter().cloned());
        } else {
            table.heads.extend((1..=columns).map(|column| Head {
                name: Some(match columns {
                    1 => entry.name.clone(),
                    _ => format!("{}[{column}]", entry.name),
                }),
                precision: entry.precision,
                whole: entry.whole,
            }));
        }
        let added = table.heads.len() - heads;
        table.places.extend((0..added).map(|column| Place {
            array,
            column,
            lies,
        }));
    }
    Ok(table)
}

fn sentence(name: &str, seen: Seen, rows: u64) -> String {
    let name = quoted(name);
    match seen {
        Seen::Vector(1) => format!("{name} holds 1 value"),
        Seen::Vector(length) => {
            format!("{name} holds {length} values where the table has {rows} rows")
        }
        Seen::Matrix(a, b) => format!("{name} is {a} x {b} where the table has {rows} rows"),
        Seen::Neither => format!("{name} is no vector and no matrix"),
    }
}

fn rows(entries: &[Entry]) -> Option<u64> {
    let time = |wanted: &str| {
        let mut times = entries.iter().filter(|entry| entry.is_time());
        times.find(|entry| entry.name.len() <= wanted.len())
    };
    // `t` before `time` before those within groups.
    let named = time("t").or_else(|| time("time")).or_else(|| {
        let mut times = entries.iter().filter(|entry| entry.is_time());
        times.next()
    });
    if let Some(length) = named.and_then(Entry::length) {
        return Some(length);
    }
    let lengths: Vec<u64> = entries.iter().filter_map(Entry::length).collect();
    // Settings of the run are single values and must not outvote the columns.
    let several: Vec<u64> = lengths.iter().copied().filter(|&n| n != 1).collect();
    let voters = if several.is_empty() { lengths } else { several };
    let count = |length: u64| voters.iter().filter(|&&other| other == length).count();
    voters
        .iter()
        .copied()
        .max_by_key(|&length| (count(length), length))
}

/// The wanted columns by array: for each array the columns within and their places in
/// the block. Columns of one array that stand and those of another go apart.
pub(super) fn by_array(places: &[Place], wanted: &[usize]) -> Vec<(Place, Vec<(usize, usize)>)> {
    let mut groups: Vec<(Place, Vec<(usize, usize)>)> = Vec::new();
    for (to, &column) in wanted.iter().enumerate() {
        let Some(&place) = places.get(column) else {
            continue;
        };
        match groups.iter_mut().find(|(one, _)| one.array == place.array) {
            Some((_, columns)) => columns.push((place.column, to)),
            None => groups.push((place, vec![(place.column, to)])),
        }
    }
    groups
}

#[cfg(test)]
mod tests {
    use super::*;

    fn entry(name: &str, shape: &[u64]) -> Entry {
        Entry {
            name: name.to_owned(),
            shape: shape.to_vec(),
            ..Entry::default()
        }
    }

    #[test]
    fn the_time_decides_the_length_else_the_most() {
        let entries = [
            entry("x", &[9]),
            entry("y", &[9, 1]),
            entry("T", &[1, 5]),
            entry("z", &[5, 2]),
            entry("w", &[3, 5]),
            entry("dt", &[]),
            entry("cube", &[5, 5, 5]),
        ];
        let table = lay(&entries, vec![]).unwrap();
        let names: Vec<_> = table.heads.iter().flat_map(|h| h.name.clone()).collect();
        assert_eq!(names, ["T", "z[1]", "z[2]", "w[1]", "w[2]", "w[3]"]);
        assert!(table.places[3].lies && !table.places[1].lies);
        assert_eq!(
            table.left_out,
            [
                "`x` holds 9 values where the table has 5 rows",
                "`y` holds 9 values where the table has 5 rows",
                "`dt` holds 1 value",
                "`cube` is no vector and no matrix",
            ]
        );
        assert_eq!(lay(&entries[..2], vec![]).unwrap().rows, 9);
        let singles: Vec<_> = (0..9).map(|_| entry("s", &[1])).collect();
        let few = [&singles[..], &[entry("x", &[4])]].concat();
        assert_eq!(lay(&few, vec![]).unwrap().rows, 4);
        assert_eq!(lay(&singles, vec![]).unwrap().rows, 1);
        assert!(lay(&[], vec![]).is_err());
        assert!(lay(&[entry("t", &[5, 5000])], vec![]).is_err());
    }
}
