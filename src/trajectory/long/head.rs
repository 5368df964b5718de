//! Which columns of a long table hold time, name and value: as stated, the time by its name.

use super::super::layout::{
    ColumnName, Layout, ROWS_TRIED, SEPARATORS, Separator, Stated, bare_unit, is_time_name,
    unit_in_brackets,
};
use super::super::number::Field;
use super::LongStated;
use crate::fault::{Fault, Result, quoted};

/// The columns, and the layout of the rows as they stand in the file.
#[derive(Debug)]
pub(in crate::trajectory) struct Head {
    pub rows: Layout,
    pub time: usize,
    pub name: usize,
    pub value: usize,
    /// Units of time and values that stand beside or below their headers.
    pub units: (String, String),
}

const CORRECT: &str = "correct `long` under `[layout]` in submission.toml";

impl Head {
    /// Looks for the columns in the first lines of a file; `None` where no rows follow.
    ///
    /// # Errors
    /// Columns that are not there, fit twice, or hold something else.
    pub(in crate::trajectory) fn find(
        lines: &[&[u8]],
        stated: &Stated,
        long: &LongStated,
    ) -> Result<Option<Head>> {
        let named = |name: &&ColumnName| matches!(name, ColumnName::Name(_));
        let names: Vec<&ColumnName> = [&long.name, &long.value]
            .into_iter()
            .filter(named)
            .collect();
        let (mut best, mut fault, mut header) = (None::<(usize, Head)>, None, false);
        let looks = SEPARATORS.iter().flat_map(|&s| [(s, false), (s, true)]);
        for layout in looks.filter_map(|(s, comma)| Layout::bare(s, comma, stated)) {
            let found = match names[..] {
                [] => numbered(layout, lines, stated, long),
                _ => below_header(layout, lines, stated, long),
            };
            match found {
                Ok(Some((fits, head))) => {
                    header = true;
                    if fits > best.as_ref().map_or(0, |&(most, _)| most) {
                        best = Some((fits, head));
                    }
                }
                Ok(None) => {}
                Err(found) => fault = fault.or(Some(found)),
            }
        }
        match (best, fault) {
            (Some((_, head)), _) => Ok(Some(head)),
            (None, Some(fault)) => Err(fault),
            (None, None) => nothing(lines, stated, (&names, header)),
        }
    }
}

/// No rows, which makes an empty file, or rows that are none of a long table.
fn nothing(
    lines: &[&[u8]],
    stated: &Stated,
    (names, header): (&[&ColumnName], bool),
) -> Result<Option<Head>> {
    // A header alone makes an empty file; lines without any number are complained of there.
    let Some(layout) = Layout::find(lines, stated)? else {
        return Ok(None);
    };
    let text = if header || names.is_empty() {
        "no row has a time, a name and a value in its columns".to_owned()
    } else {
        let names: Vec<String> = names.iter().map(|name| in_words(name)).collect();
        let known = layout.names.iter().flatten().take(12);
        let known: Vec<String> = known.map(|name| quoted(name)).collect();
        let known = match known[..] {
            [] => String::new(),
            _ => format!(", the header has {}", known.join(", ")),
        };
        format!("no line names the columns {}{known}", names.join(" and "))
    };
    Err(Fault::new(text).help(CORRECT).at(layout.first_row, 1))
}

fn in_words(name: &ColumnName) -> String {
    match name {
        ColumnName::Name(name) => quoted(name),
        ColumnName::Number(number) => format!("{number}"),
    }
}

fn name_and_unit(header: &str) -> (&str, &str) {
    unit_in_brackets(header).unwrap_or((header, ""))
}

/// The column of a name or number; `None` where it is not there.
fn place(name: &ColumnName, header: &[String]) -> Result<Option<usize>> {
    let name = match name {
        ColumnName::Number(number) => {
            let place = number.checked_sub(1);
            return Ok(place.filter(|&place| place < header.len()));
        }
        ColumnName::Name(name) => name.trim(),
    };
    let tests: [&dyn Fn(&String) -> bool; 2] = [&|header| header == name, &|header| {
        name_and_unit(header).0 == name
    }];
    for test in tests {
        let mut found = (0..header.len()).filter(|&place| test(&header[place]));
        match (found.next(), found.next()) {
            (None, _) => {}
            (found, None) => return Ok(found),
            (Some(first), Some(second)) => {
                let text = format!(
                    "{} fits several columns: {} and {}",
                    quoted(name),
                    first + 1,
                    second + 1
                );
                let help = "write its number in place of its name under `[layout]` or `[columns]` \
                            in submission.toml";
                return Err(Fault::new(text).help(help));
            }
        }
    }
    Ok(None)
}

/// The columns in a header; `None` where it is another line.
fn columns(header: &[String], long: &LongStated) -> Result<Option<(usize, usize, usize)>> {
    let (Some(name), Some(value)) = (place(&long.name, header)?, place(&long.value, header)?)
    else {
        return Ok(None);
    };
    let mut list = header.iter().map(|name| quoted(name)).take(12);
    let list = || list.by_ref().collect::<Vec<_>>().join(", ");
    let time = time(header, long, (name, value), list)?;
    if name == value || time == name || time == value {
        let text = format!(
            "time, name and value of a long table are columns {}, {} and {}",
            time + 1,
            name + 1,
            value + 1
        );
        return Err(Fault::new(text).help("give each of them a column of its own"));
    }
    Ok(Some((time, name, value)))
}

fn time(
    header: &[String],
    long: &LongStated,
    (name, value): (usize, usize),
    list: impl FnOnce() -> String,
) -> Result<usize> {
    if let Some(stated) = &long.time {
        return place(stated, header)?.ok_or_else(|| {
            let text = format!(
                "no time stamps: there is no column {}, the header has {}",
                in_words(stated),
                list()
            );
            Fault::new(text).help("correct `time` under `[columns]` in submission.toml")
        });
    }
    let free = |&place: &usize| place != name && place != value;
    let is_time = |&place: &usize| is_time_name(name_and_unit(&header[place]).0);
    let mut found = (0..header.len()).filter(free).filter(is_time);
    match (found.next(), found.next()) {
        (Some(time), None) => Ok(time),
        (Some(_), Some(_)) => Err(Fault::new("several columns could be the time stamps")
            .help("write `time = NUMBER` under `[columns]` in submission.toml")),
        (None, _) => {
            let text = format!("no column of time stamps: the header has {}", list());
            let help = "write `time = \"NAME\"` under `[columns]` in submission.toml";
            Err(Fault::new(text).help(help))
        }
    }
}

fn split(layout: &Layout, line: &[u8]) -> Vec<String> {
    let mut fields = Vec::new();
    layout.split(line, &mut |_, field| {
        fields.push(String::from_utf8_lossy(field).trim().to_owned());
    });
    fields
}

/// The first header with the names, and the rows below it; how well they fit goes along.
fn below_header(
    layout: Layout,
    lines: &[&[u8]],
    stated: &Stated,
    long: &LongStated,
) -> Result<Option<(usize, Head)>> {
    // Blanks may stand between names above rows that have another separator.
    let blank = Layout {
        separator: Separator::Blank,
        ..layout.clone()
    };
    for (number, line) in lines.iter().enumerate() {
        let bare = layout.without_mark(line).1;
        for header in [split(&layout, bare), split(&blank, bare)] {
            let found = columns(&header, long).map_err(|fault| fault.at(number as u64 + 1, 1));
            if let Some(found) = found? {
                let skip = stated.skip_lines.unwrap_or(0) as usize;
                let first = (number + 1).max(skip);
                return Ok(Some(rows(layout, lines, (first, Some(header)), found)));
            }
        }
    }
    Ok(None)
}

/// Without names of columns: the first line with two numbers and a word where they should be.
fn numbered(
    layout: Layout,
    lines: &[&[u8]],
    stated: &Stated,
    long: &LongStated,
) -> Result<Option<(usize, Head)>> {
    let skip = stated.skip_lines.unwrap_or(0) as usize;
    let data = lines.iter().enumerate().skip(skip);
    for (number, line) in data.filter(|(_, line)| !layout.passes_over(line)) {
        let fields = split(&layout, line);
        let header = header_above(&layout, &lines[..number], fields.len());
        // Without a header the time stands before whatever else there is.
        let nameless = || {
            let own = [&long.name, &long.value].map(|name| place(name, &fields));
            let free = |place: &usize| !own.contains(&Ok(Some(*place)));
            let first = (0..fields.len()).find(free)?;
            Some(ColumnName::Number(first + 1))
        };
        let known = LongStated {
            time: long.time.clone().or_else(|| match header {
                Some(_) => None,
                None => nameless(),
            }),
            ..long.clone()
        };
        let names = header
            .clone()
            .unwrap_or_else(|| vec![String::new(); fields.len()]);
        let Some(found) = columns(&names, &known)? else {
            continue;
        };
        let (time, name, value) = found;
        let read = |place: usize| Field::read(fields[place].as_bytes(), layout.decimal_comma);
        let is_row = read(time) != Field::Foreign
            && read(value) != Field::Foreign
            && read(name) == Field::Foreign;
        if is_row {
            return Ok(Some(rows(layout, lines, (number, header), found)));
        }
    }
    Ok(None)
}

/// The nearest line above the rows that can hold the names of so many columns.
fn header_above(layout: &Layout, before: &[&[u8]], columns: usize) -> Option<Vec<String>> {
    let layout = Layout {
        columns,
        ..layout.clone()
    };
    let mut above = before.iter().rev().map(|line| layout.without_mark(line));
    let (is_comment, line) = above.find(|(_, line)| !line.is_empty())?;
    match layout.name_fields(line) {
        None if is_comment => above.find_map(|(_, line)| layout.name_fields(line)),
        names => names,
    }
}

/// The rows from a line on, and how many numbers stand where they should.
fn rows(
    mut layout: Layout,
    lines: &[&[u8]],
    (first, header): (usize, Option<Vec<String>>),
    (time, name, value): (usize, usize, usize),
) -> (usize, Head) {
    let data = || {
        let data = lines.iter().enumerate().skip(first);
        data.filter(|(_, line)| !layout.passes_over(line))
            .take(ROWS_TRIED)
    };
    let split: Vec<(usize, Vec<String>)> = data()
        .map(|(number, line)| (number, split(&layout, line)))
        .collect();
    let mut columns = match (&header, split.first()) {
        (Some(header), _) => header.len(),
        (None, Some((_, fields))) => fields.len(),
        (None, None) => 0,
    };
    // A separator at the end of the rows alone, or of the header alone, is borne.
    let count = |columns: usize| split.iter().filter(|(_, row)| row.len() == columns).count();
    let empty = |fields: &[String]| fields.last().is_some_and(String::is_empty);
    let last_is_empty = |(_, row): &(usize, Vec<String>)| row.len() != columns + 1 || empty(row);
    if header.as_deref().is_some_and(empty) && count(columns - 1) > count(columns) {
        columns -= 1;
    } else if count(columns + 1) > count(columns) && split.iter().all(last_is_empty) {
        columns += 1;
    }
    let read = |row: &[String], place: usize| match row.get(place) {
        Some(field) => Field::read(field.as_bytes(), layout.decimal_comma),
        None => Field::Absent,
    };
    let beside = |place: usize| {
        let header = header.as_ref().and_then(|header| header.get(place));
        header
            .map_or("", |header| name_and_unit(header).1)
            .to_owned()
    };
    let mut units = (beside(time), beside(value));
    let mut first_row = split.first().map_or(first, |(number, _)| *number);
    // A line of units below the names is no row, and its word for the names is none of them.
    if let [(_, row), rest @ ..] = &split[..]
        && header.is_some()
        && row.len() == columns
        && read(row, time) == Field::Foreign
        && (read(row, value) == Field::Foreign || row[value].is_empty())
        && let [(number, _), ..] = rest
        && rest
            .iter()
            .all(|(_, other)| other.get(name) != row.get(name))
    {
        let bare = |place: usize| bare_unit(&row[place]).to_owned();
        units = (bare(time), bare(value));
        first_row = *number;
    }
    let whole = split.iter().filter(|(_, row)| row.len() == columns);
    let is_number =
        |row: &[String], place| usize::from(matches!(read(row, place), Field::Number(..)));
    let fits = whole
        .map(|(_, row)| is_number(row, time) + is_number(row, value))
        .sum();
    layout.columns = columns;
    layout.first_row = first_row as u64 + 1;
    layout.names = header;
    let head = Head {
        rows: layout,
        time,
        name,
        value,
        units,
    };
    (fits, head)
}
