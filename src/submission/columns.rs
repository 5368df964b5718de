//! Which column of a file is which channel: by what is stated, else by name, never by
//! guess.

use std::collections::BTreeMap;

use super::units::{convert, is_known};
use super::{ColumnName, ColumnStated};
use crate::case::{Case, Channel};
use crate::fault::{Fault, Result, nearest, quoted};
use crate::number::{Conversion, Double};
use crate::trajectory::{Layout, Selection, bare_unit, is_time_name, unit_in_brackets};

/// A channel of the case with its place in the file.
#[derive(Clone, Debug, PartialEq)]
pub struct Column {
    /// Place among [`Case::channels`].
    pub channel: usize,
    /// Column of the file, from zero.
    pub column: usize,
    /// From the file's unit to the case's.
    pub conversion: Conversion,
}

/// All columns of a file that are compared.
#[derive(Clone, Debug)]
pub struct Matched {
    /// The column of the time stamps, from zero.
    pub time: usize,
    /// From the file's unit of time to the case's.
    pub time_conversion: Conversion,
    /// In the order of the channels of the case.
    pub channels: Vec<Column>,
    /// Channels that should be there and are not, with the reason.
    pub missing: Vec<(String, String)>,
    /// What was assumed and what is left out, in words.
    pub notes: Vec<String>,
}

impl Matched {
    /// The columns for the reader.
    pub fn selection(&self) -> Selection {
        let channels = self.channels.iter().map(|channel| channel.column).collect();
        Selection {
            time: self.time,
            channels,
        }
    }
}

/// A header split into a name and a unit in brackets.
struct Header<'a> {
    full: &'a str,
    name: &'a str,
    unit: Option<&'a str>,
}

impl<'a> Header<'a> {
    fn new(full: &'a str, below: Option<&'a str>) -> Header<'a> {
        let full = full.trim();
        if let Some((name, unit)) = unit_in_brackets(full)
            && !is_place(full, unit)
        {
            return Header {
                full,
                name,
                unit: Some(unit),
            };
        }
        if let Some((name, unit)) = full.split_once('/')
            && !name.trim().is_empty()
            && is_known(unit)
        {
            return Header {
                full,
                name: name.trim(),
                unit: Some(unit.trim()),
            };
        }
        let below = below.map(bare_unit);
        Header {
            full,
            name: full,
            unit: below.filter(|unit| !unit.is_empty()),
        }
    }
}

/// True for the place of a column in a matrix, as in `x[2]`, which is no unit.
fn is_place(full: &str, unit: &str) -> bool {
    let whole = !unit.is_empty() && unit.bytes().all(|byte| byte.is_ascii_digit());
    whole && full.ends_with(']') && !full[..full.len() - unit.len() - 2].ends_with(' ')
}

/// A header split into its name and a unit in brackets, after a `/` or in a line of its own
/// below it; the unit only where it is one that is known.
pub fn name_and_unit<'a>(full: &'a str, below: Option<&'a str>) -> (&'a str, Option<&'a str>) {
    let header = Header::new(full, below);
    (header.name, header.unit.filter(|unit| is_known(unit)))
}

/// With the place where the column is stated, if it is stated in a file.
fn placed(fault: Fault, stated: Option<&ColumnStated>) -> Fault {
    match stated.and_then(|stated| stated.place) {
        Some((line, column)) => fault.at(line, column),
        None => fault,
    }
}

struct Matcher<'a> {
    headers: Option<Vec<Header<'a>>>,
    columns: usize,
    stated: &'a BTreeMap<String, ColumnStated>,
    /// True where names stand in the rows; the reader has put the time before them.
    long: bool,
    /// True where a column holds words and could have such names.
    words: bool,
    notes: Vec<String>,
}

/// Finds every channel of the case in a file of this layout.
///
/// All states are looked for. Outputs are compared where the file has them. Where the
/// submission states columns for channels, states that it leaves out and that are not
/// found by name are left out, and that is noted.
///
/// # Errors
/// Names that fit several columns, with the candidates; names of channels that the
/// case does not have; units that do not convert.
pub fn match_columns(
    case: &Case,
    layout: &Layout,
    stated: &BTreeMap<String, ColumnStated>,
) -> Result<Matched> {
    let channels = case.channels();
    for (name, column) in stated {
        if name != "time" && channels.iter().all(|channel| channel.name != name) {
            let fault = Fault::new(format!(
                "case `{}` has no channel {}",
                case.name,
                quoted(name)
            ));
            let known = channels.iter().map(|c| c.name).chain(["time"]);
            let list: Vec<&str> = channels.iter().map(|c| c.name).collect();
            let help = match nearest(name, known) {
                Some(near) => format!("did you mean `{near}`?"),
                None => format!("its channels are {}", list.join(", ")),
            };
            return Err(placed(fault.help(help), Some(column)));
        }
    }
    let headers = layout.names.as_ref().map(|names| {
        let below = |index: usize| layout.units.as_ref().map(|units| units[index].as_str());
        let headers = names
            .iter()
            .enumerate()
            .map(|(i, name)| Header::new(name, below(i)));
        headers.collect::<Vec<_>>()
    });
    let mut matcher = Matcher {
        headers,
        columns: layout.columns,
        stated,
        long: layout.long.is_some(),
        words: layout.words,
        notes: Vec::new(),
    };
    let (time, time_conversion) = matcher.time(case)?;
    let any_stated = matcher.any_channel_stated();
    let mut found = Vec::new();
    let mut missing = Vec::new();
    for (index, channel) in channels.iter().enumerate() {
        match matcher.channel(channel, channels.len(), time)? {
            Ok((column, conversion)) => found.push(Column {
                channel: index,
                column,
                conversion,
            }),
            Err(reason) if stated.contains_key(channel.name) || channel.is_state && !any_stated => {
                missing.push((channel.name.to_owned(), reason));
            }
            Err(_) if channel.is_state => {
                let note = format!(
                    "state `{}` is not in the file and not compared",
                    channel.name
                );
                matcher.notes.push(note);
            }
            Err(_) => {}
        }
    }
    for (place, column) in found.iter().enumerate() {
        let twice = found[..place]
            .iter()
            .find(|other| other.column == column.column);
        let name = |column: &Column| channels[column.channel].name;
        if let Some(other) = twice {
            let text = format!(
                "column {} is given to both `{}` and `{}`",
                column.column + 1,
                name(other),
                name(column)
            );
            return Err(Fault::new(text).help("correct `[columns]` in submission.toml"));
        }
        if column.column == time {
            let text = format!(
                "column {} is given to both time and `{}`",
                time + 1,
                name(column)
            );
            return Err(Fault::new(text).help("correct `[columns]` in submission.toml"));
        }
    }
    let notes = matcher.notes;
    Ok(Matched {
        time,
        time_conversion,
        channels: found,
        missing,
        notes,
    })
}

impl Matcher<'_> {
    fn time(&mut self, case: &Case) -> Result<(usize, Conversion)> {
        let unit = &case.time.unit;
        let stated = self.stated.get("time");
        let column = match stated.and_then(|stated| stated.column.as_ref()) {
            _ if self.long => 0,
            Some(name) => self.stated_column(name)?.map_err(|reason| {
                Fault::new(format!("no time stamps: {reason}"))
                    .help("correct `time` under `[columns]` in submission.toml")
            })?,
            None => self.named_time()?,
        };
        let conversion = self.conversion(column, unit, stated)?;
        let conversion = conversion.map_err(Fault::new)?;
        if conversion.offset != Double::ZERO {
            return Err(Fault::new("a unit of time is expected for the time stamps"));
        }
        Ok((column, conversion))
    }

    fn any_channel_stated(&self) -> bool {
        self.stated.keys().any(|name| name != "time")
    }

    fn named_time(&self) -> Result<usize> {
        let Some(headers) = &self.headers else {
            return Ok(0);
        };
        let found: Vec<usize> = (0..headers.len())
            .filter(|&i| is_time_name(headers[i].name))
            .collect();
        match found[..] {
            [column] => Ok(column),
            [] => Err(Fault::new(format!("no column of time stamps: the header has {}", self.list()))
                .help("write `time = \"NAME\"` under `[columns]` in submission.toml, or `--column time=NAME`")),
            _ => Err(Fault::new("several columns could be the time stamps")
                .help("write `time = NUMBER` under `[columns]` in submission.toml")),
        }
    }

    /// A column stated by name or number; the inner error says why it is not there.
    fn stated_column(&self, name: &ColumnName) -> Result<std::result::Result<usize, String>> {
        let name = match name {
            ColumnName::Number(number) if *number <= self.columns => return Ok(Ok(number - 1)),
            ColumnName::Number(number) => {
                return Ok(Err(format!("column {number} of {}", self.columns)));
            }
            ColumnName::Name(name) => name.trim(),
        };
        let Some(headers) = &self.headers else {
            return Ok(Err(format!(
                "{} is named, but the file has no header",
                quoted(name)
            )));
        };
        let exact = |header: &Header| header.full == name;
        self.unique(name, headers, &[&exact, &|header| header.name == name])
            .map(|found| {
                found.ok_or_else(|| {
                    let near = nearest(name, headers.iter().map(|header| header.name));
                    let near = near.map_or(String::new(), |near| {
                        format!(", did you mean {}?", quoted(near))
                    });
                    format!(
                        "there is no column {}, {}{near}",
                        quoted(name),
                        self.there_is()
                    )
                })
            })
    }

    /// The only column that one of the tests, taken in order, holds for.
    fn unique(
        &self,
        name: &str,
        headers: &[Header],
        tests: &[&dyn Fn(&Header) -> bool],
    ) -> Result<Option<usize>> {
        for test in tests {
            let found: Vec<usize> = (0..headers.len()).filter(|&i| test(&headers[i])).collect();
            match found[..] {
                [] => {}
                [column] => return Ok(Some(column)),
                _ => {
                    let candidates: Vec<String> = found
                        .iter()
                        .map(|&i| format!("{} (column {})", quoted(headers[i].full), i + 1))
                        .collect();
                    let text = format!(
                        "{} fits several columns: {}",
                        quoted(name),
                        candidates.join(", ")
                    );
                    let help =
                        format!("write `{name} = NUMBER` under `[columns]` in submission.toml");
                    return Err(Fault::new(text).help(help));
                }
            }
        }
        Ok(None)
    }

    fn channel(
        &mut self,
        channel: &Channel,
        channels: usize,
        time: usize,
    ) -> Result<std::result::Result<(usize, Conversion), String>> {
        let stated = self.stated.get(channel.name);
        let column = match stated.and_then(|stated| stated.column.as_ref()) {
            Some(ColumnName::Number(_)) if self.long => {
                let text = "the channels of a long table have names and no numbers";
                let help = format!(
                    "write `{} = \"NAME\"` under `[columns]`, as it stands in the rows",
                    channel.name
                );
                return Err(placed(Fault::new(text).help(help), stated));
            }
            Some(name) => self.stated_column(name)?,
            None => self.named_channel(channel, channels, time)?,
        };
        let column = match column {
            Ok(column) => column,
            Err(reason) => return Ok(Err(reason)),
        };
        let conversion = self.conversion(column, channel.unit, stated)?;
        Ok(conversion.map(|conversion| (column, conversion)))
    }

    fn named_channel(
        &self,
        channel: &Channel,
        channels: usize,
        time: usize,
    ) -> Result<std::result::Result<usize, String>> {
        let Some(headers) = &self.headers else {
            // Two columns and one channel leave no choice; anything more would be a guess.
            if channels == 1 && self.columns == 2 && time == 0 {
                return Ok(Ok(1));
            }
            let text = format!("which column is `{}`? the file has no header", channel.name);
            if !channel.is_state || self.any_channel_stated() {
                return Ok(Err(text));
            }
            return Err(Fault::new(text).help(format!(
                "write `{} = NUMBER` under `[columns]` in submission.toml, or `--column {}=NUMBER`",
                channel.name, channel.name
            )));
        };
        let name = channel.name;
        let same = |header: &Header| header.full == name;
        let bare = |header: &Header| header.name == name;
        let any_case = |header: &Header| header.name.eq_ignore_ascii_case(name);
        let found = self.unique(name, headers, &[&same, &bare, &any_case])?;
        Ok(found.ok_or_else(|| format!("there is no column `{name}`, {}", self.there_is())))
    }

    /// The conversion to a unit of the case, from the unit stated or the one in the
    /// header; the inner error says why the column cannot be that channel.
    fn conversion(
        &mut self,
        column: usize,
        target: &str,
        stated: Option<&ColumnStated>,
    ) -> Result<std::result::Result<Conversion, String>> {
        if let Some(unit) = stated.and_then(|stated| stated.unit.as_deref()) {
            return convert(unit, target)
                .map(Ok)
                .map_err(|fault| placed(fault, stated));
        }
        let header = self.headers.as_ref().map(|headers| &headers[column]);
        let Some((name, unit)) = header.and_then(|h| Some((h.name, h.unit?))) else {
            return Ok(Ok(Conversion::NONE));
        };
        if unit == target || !is_known(unit) {
            return Ok(Ok(Conversion::NONE));
        }
        match convert(unit, target) {
            Ok(conversion) => {
                if !conversion.is_none() {
                    self.notes.push(format!(
                        "column {} converted from {unit} to {target}, as its header says",
                        quoted(name)
                    ));
                }
                Ok(Ok(conversion))
            }
            Err(_) => Ok(Err(format!(
                "column {} is in {} as its header says, not in {}",
                quoted(name),
                quoted(unit),
                quoted(target)
            ))),
        }
    }

    fn there_is(&self) -> String {
        let what = if self.long {
            "the names of the rows are"
        } else {
            "the header has"
        };
        let hint = match self.words {
            true => "; if a column holds the names of channels, state `long` under `[layout]`",
            false => "",
        };
        format!("{what} {}{hint}", self.list())
    }

    fn list(&self) -> String {
        let headers = self
            .headers
            .iter()
            .flatten()
            .skip(usize::from(self.long))
            .map(|header| quoted(header.full));
        let mut names: Vec<String> = headers.take(12).collect();
        if self.columns > 12 {
            names.push("...".to_owned());
        }
        names.join(", ")
    }
}

#[cfg(test)]
mod tests;
