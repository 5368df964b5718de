//! One file as far as it can be known without a case: layout, names and units of its
//! columns, which of them can be time stamps, and a sample of its rows.

use std::path::PathBuf;

use super::names::{is_like_time, time_hint};
use crate::fault::{Fault, quoted};
use crate::number::Double;
use crate::submission::{ColumnName, name_and_unit};
use crate::trajectory::{Findings, Layout, Selection, Source, Stated, Survey, is_time_name, open};

/// Rows that are kept of a file, about.
const ROWS_KEPT: u64 = 200;
/// Columns that are kept; a file can have thousands.
const MOST_COLUMNS_KEPT: usize = 96;
/// Columns that are tried as time stamps where no name tells.
const MOST_CLOCKS: usize = 4;

/// One file.
pub(super) struct Looked {
    pub file: String,
    pub path: PathBuf,
    pub source: Source,
    pub layout: Layout,
    /// Columns that can be the time stamps, the likeliest first.
    pub clocks: Vec<Clock>,
}

/// A column that can be the time stamps, and the rows seen from it.
pub(super) struct Clock {
    pub column: usize,
    /// The audit would take it without being told.
    pub is_named: bool,
    /// The unit in the header.
    pub unit: Option<String>,
    /// A unit that the name ends with.
    pub hint: Option<String>,
    pub rows: u64,
    pub first: f64,
    pub last: f64,
    /// Stamps of the sample.
    pub times: Vec<Double>,
    /// The other columns, with their values in the sample.
    pub columns: Vec<(usize, Vec<Option<f64>>)>,
}

impl Looked {
    /// Name and unit of a column; no name where there is no header.
    pub fn header(&self, column: usize) -> Option<(&str, Option<&str>)> {
        let full = self.layout.names.as_ref()?.get(column)?;
        let below = self.layout.units.as_ref().and_then(|u| u.get(column));
        Some(name_and_unit(full, below.map(String::as_str)))
    }

    /// How a submission names a column: as in the header where that is unique.
    pub fn column_name(&self, column: usize) -> ColumnName {
        let number = ColumnName::Number(column + 1);
        let Some(names) = &self.layout.names else {
            return number;
        };
        let full = names.get(column).map_or("", |name| name.trim());
        let twins = names.iter().enumerate().filter(|&(index, name)| {
            let bare = self.header(index).map_or("", |(name, _)| name);
            name.trim() == full || bare == full
        });
        // A replaced character would not be found again.
        if full.is_empty() || full.contains('\u{fffd}') || twins.count() != 1 {
            return number;
        }
        ColumnName::Name(full.to_owned())
    }

    /// A column in words.
    pub fn in_words(&self, column: usize) -> String {
        match self.column_name(column) {
            ColumnName::Name(name) => quoted(&name),
            ColumnName::Number(number) => format!("column {number}"),
        }
    }

    /// All columns in words.
    pub fn column_names(&self) -> Vec<String> {
        (0..self.layout.columns).map(|c| self.in_words(c)).collect()
    }
}

/// Looks at all files; they must have the same columns.
pub(super) fn look(files: &[(String, PathBuf)]) -> Result<Vec<Looked>, Vec<Fault>> {
    let mut looked: Vec<Looked> = Vec::new();
    let mut faults = Vec::new();
    for (file, path) in files {
        match look_at(file, path).map_err(|fault| fault.in_file(path)) {
            Ok(one) => match looked.first().and_then(|first| differs(first, &one)) {
                Some(fault) => faults.push(fault.in_file(path)),
                None => looked.push(one),
            },
            Err(fault) => faults.push(fault),
        }
    }
    if faults.is_empty() {
        Ok(looked)
    } else {
        Err(faults)
    }
}

/// The file that resolves most: the one with most rows.
pub(super) fn finest(files: &[Looked]) -> &Looked {
    let rows = |file: &Looked| file.clocks.first().map_or(0, |clock| clock.rows);
    // The first of equals; there is always one, as the command asks for it.
    let place = (0..files.len()).rev().max_by_key(|&i| rows(&files[i]));
    &files[place.unwrap_or(0)]
}

fn differs(first: &Looked, other: &Looked) -> Option<Fault> {
    let of = |looked: &Looked| {
        let names: Vec<String> = looked.column_names().into_iter().take(12).collect();
        names.join(", ")
    };
    let same = first.layout.names == other.layout.names
        && first.layout.columns == other.layout.columns
        && first.layout.units == other.layout.units;
    (!same).then(|| {
        let text = format!(
            "the columns are {}, those of {} are {}",
            of(other),
            quoted(&first.file),
            of(first)
        );
        Fault::new(text)
            .help("the files of one submission have the same columns; draft the others apart")
    })
}

fn look_at(file: &str, path: &std::path::Path) -> Result<Looked, Fault> {
    let source = open(path)?;
    let stated = Stated::default();
    let Some(layout) = source.layout(&stated)? else {
        let fault = Fault::new("the file has no rows of numbers");
        return Err(fault.help("leave it out, or let the simulator write it again"));
    };
    let mut looked = Looked {
        file: file.to_owned(),
        path: path.to_owned(),
        source,
        layout,
        clocks: Vec::new(),
    };
    let (columns, is_named) = looked.time_columns()?;
    for column in columns {
        looked.clocks.push(looked.clock(column, is_named)?);
    }
    Ok(looked)
}

impl Looked {
    /// Columns that can be the time stamps, and whether a name says so beyond doubt.
    fn time_columns(&self) -> Result<(Vec<usize>, bool), Fault> {
        let name = |column: usize| self.header(column).map(|(name, _)| name);
        let all = 0..self.layout.columns;
        let named = |test: &dyn Fn(&str) -> bool| -> Vec<usize> {
            let found = all.clone().filter(|&c| name(c).is_some_and(test));
            found.collect()
        };
        let sure = named(&is_time_name);
        if let [column] = sure[..] {
            return Ok((vec![column], true));
        }
        let alike = named(&is_like_time);
        // A column of another name counts where it rises, as time does.
        let mut rising = Vec::new();
        for column in all.clone().take(MOST_COLUMNS_KEPT) {
            if alike.len() + rising.len() >= MOST_CLOCKS {
                break;
            }
            if !alike.contains(&column) && self.rises(column)? {
                rising.push(column);
            }
        }
        let alike = alike.into_iter();
        let mut columns: Vec<usize> = alike
            .filter(|&column| self.rises(column).unwrap_or(false))
            .collect();
        columns.append(&mut rising);
        if columns.is_empty() {
            let fault = Fault::new("no column rises from row to row as time stamps do");
            return Err(fault.help("write the time stamps in a column of their own, named `t`"));
        }
        Ok((columns, false))
    }

    fn survey(&self, time: usize, channels: Vec<usize>) -> Result<Survey, Fault> {
        let selection = Selection { time, channels };
        let layout = self.layout.clone();
        Survey::new(&self.source, layout, selection, &Stated::default())
    }

    fn rises(&self, column: usize) -> Result<bool, Fault> {
        let survey = self.survey(column, Vec::new())?;
        let (mut last, mut rises, mut all) = (f64::NAN, 0u64, 0u64);
        let mut findings = Findings::default();
        survey.rows(&self.source, &mut findings, &|_| true, &mut |row| {
            let time = row.time.to_f64();
            rises += u64::from(time > last);
            all += u64::from(!last.is_nan());
            last = time;
            Ok(())
        })?;
        // A few stamps may be repeated or out of order in a broken file.
        Ok(all > 0 && rises * 20 >= all * 19)
    }

    fn clock(&self, column: usize, is_named: bool) -> Result<Clock, Fault> {
        let others = (0..self.layout.columns).filter(|&other| other != column);
        let others: Vec<usize> = others.take(MOST_COLUMNS_KEPT).collect();
        let survey = self.survey(column, others.clone())?;
        let stride = survey.rows / ROWS_KEPT + 1;
        let mut columns: Vec<_> = others.iter().map(|&c| (c, Vec::new())).collect();
        let (mut number, mut times) = (0, Vec::new());
        let mut stamps: Option<(f64, f64)> = None;
        let mut findings = Findings::default();
        survey.rows(&self.source, &mut findings, &|_| true, &mut |row| {
            let time = row.time.to_f64();
            let (first, _) = stamps.unwrap_or((time, time));
            stamps = Some((first, time));
            number += 1;
            if (number - 1) % stride == 0 || number == survey.rows {
                times.push(row.time);
                for (place, (_, values)) in columns.iter_mut().enumerate() {
                    values.push(row.value(place));
                }
            }
            Ok(())
        })?;
        let Some((first, last)) = stamps else {
            return Err(Fault::new(format!(
                "{} has no numbers",
                self.in_words(column)
            )));
        };
        // Columns of words are no channels.
        columns.retain(|(_, values)| values.iter().flatten().count() * 2 >= values.len());
        let (name, unit) = self.header(column).unwrap_or(("", None));
        Ok(Clock {
            column,
            is_named,
            unit: unit.map(str::to_owned),
            hint: time_hint(name),
            rows: survey.rows,
            first,
            last,
            times,
            columns,
        })
    }
}
