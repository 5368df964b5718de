//! Which rows of a long table belong to one time. Where they stand together they are joined as
//! they come; where they do not, all are kept, up to a bound, and put in order.

use super::Long;
use super::look::{Fields, Line, Lines, Stamp, number};
use super::wide::Wide;
use crate::fault::{Fault, Result, quoted};

const CURE: &str = "sort the rows by time; then a file of any length is read";

/// True for a line that ends within a field before the last, or within the name that is last.
fn breaks_off(long: &Long, fields: &Fields, line: &Line) -> bool {
    let unknown = || !long.names.contains_key(fields.name());
    !line.ended && (fields.count != long.rows.columns || unknown())
}

/// Rows of one time that follow each other. A name that occurs again begins the next row, as
/// where both sides of a jump are written; if others are missing by then, that is found.
pub(super) fn by_time(long: &Long, lines: &mut Lines, wide: &mut Wide) -> Result<bool> {
    let mut fields = Fields::default();
    let mut stamp = Stamp::none();
    let (mut row, mut seen) = (0u64, vec![0u64; long.names.len()]);
    while let Some(line) = lines.next()? {
        if long.rows.passes_over(line.text) {
            continue;
        }
        fields.read(long, line.text);
        if breaks_off(long, &fields, &line) {
            wide.finish_broken(line.number, fields.count)?;
            return Ok(wide.wanted);
        }
        if fields.count != long.rows.columns {
            wide.wrong_length(line.number, fields.count)?;
            continue;
        }
        // A name that was not there in the first pass belongs to no channel.
        let name = long.names.get(fields.name()).copied().unwrap_or(usize::MAX);
        let again = seen.get(name) == Some(&row);
        if stamp.moves(fields.time(), long.rows.decimal_comma) || row == 0 || again {
            wide.end()?;
            wide.reach(line.number);
            if !wide.wanted {
                return Ok(false);
            }
            wide.begin(line.number, fields.time());
            row += 1;
        }
        if !line.ended && may_go_on(long, &fields, |name| seen[name] == row) {
            wide.finish_broken(line.number, fields.count)?;
            return Ok(wide.wanted);
        }
        if let Some(seen) = seen.get_mut(name) {
            *seen = row;
        }
        wide.put(name, fields.value(), line.number);
        if !line.ended {
            wide.finish_open(name, line.number)?;
            return Ok(wide.wanted);
        }
    }
    wide.finish()?;
    Ok(wide.wanted)
}

/// True for a name at the very end of a file that may be the beginning of another one which the
/// row does not have yet.
fn may_go_on(long: &Long, fields: &Fields, is_seen: impl Fn(usize) -> bool) -> bool {
    let name = fields.name();
    let longer = |(other, &place): (&Vec<u8>, &usize)| {
        other.len() > name.len() && other.starts_with(name) && !is_seen(place)
    };
    long.name + 1 == long.rows.columns && long.names.iter().any(longer)
}

/// One row of the file.
struct Entry {
    time: f64,
    line: u64,
    /// How often its name has had this time before.
    again: u32,
    name: u32,
    /// Where its stamp begins, with the value behind it.
    at: u32,
    stamp: u8,
    value: u8,
}

/// All rows, put in order of time.
pub(super) fn scattered(
    long: &Long,
    lines: &mut Lines,
    wide: &mut Wide,
    most_bytes: usize,
) -> Result<bool> {
    let mut fields = Fields::default();
    let (mut text, mut entries) = (Vec::new(), Vec::<Entry>::new());
    let mut last = vec![(f64::NEG_INFINITY, 0u32); long.names.len()];
    let (mut open, mut broken) = (None, None);
    while let Some(line) = lines.next()? {
        if long.rows.passes_over(line.text) {
            continue;
        }
        fields.read(long, line.text);
        if breaks_off(long, &fields, &line) {
            broken = Some((line.number, fields.count));
            break;
        }
        if fields.count != long.rows.columns {
            wide.wrong_length(line.number, fields.count)?;
            continue;
        }
        let Some(&name) = long.names.get(fields.name()) else {
            continue;
        };
        let time = number(fields.time(), long.rows.decimal_comma);
        if time.is_nan() {
            // It has no place among the others; that it is not a number will be found.
            wide.begin(line.number, fields.time());
            wide.put(name, fields.value(), line.number);
            wide.end()?;
            continue;
        }
        let (latest, again) = &mut last[name];
        if time < *latest {
            let text = format!(
                "{} at t = {time} stands below its t = {latest}, and the rows of one time do not \
                 stand together",
                quoted(&String::from_utf8_lossy(fields.name()))
            );
            return Err(Fault::new(text).help(CURE).at(line.number, 1));
        }
        *again = if time == *latest { *again + 1 } else { 0 };
        *latest = time;
        let at = text.len();
        text.extend_from_slice(fields.time());
        text.extend_from_slice(fields.value());
        entries.push(Entry {
            time,
            line: line.number,
            again: *again,
            name: name as u32,
            at: at as u32,
            stamp: fields.time().len() as u8,
            value: fields.value().len() as u8,
        });
        if text.len() + entries.len() * size_of::<Entry>() > most_bytes {
            let text = format!(
                "the rows of one time do not stand together, and to join them more than {} MiB \
                 would have to be kept",
                most_bytes >> 20
            );
            return Err(Fault::new(text).help(CURE).at(line.number, 1));
        }
        if !line.ended {
            open = Some((line.number, name));
        }
    }
    // Lines rise, so rows of one time keep the order of the file.
    let key = |entry: &Entry| (entry.again, entry.line);
    entries.sort_unstable_by(|a, b| a.time.total_cmp(&b.time).then_with(|| key(a).cmp(&key(b))));
    let (mut before, mut ends_open) = (None, None);
    for entry in &entries {
        let now = Some((entry.time, entry.again));
        if now != before {
            wide.end()?;
            if !wide.wanted {
                return Ok(false);
            }
            let stamp = &text[entry.at as usize..][..usize::from(entry.stamp)];
            wide.begin(entry.line, stamp);
            (before, ends_open) = (now, None);
        }
        let value = &text[entry.at as usize + usize::from(entry.stamp)..];
        let value = &value[..usize::from(entry.value)];
        wide.put(entry.name as usize, value, entry.line);
        ends_open = ends_open.or(open.filter(|open| open.0 == entry.line));
    }
    match (broken, ends_open) {
        (Some((line, count)), _) => wide.finish_broken(line, count)?,
        // In any other row the channels after it are missing, which is found.
        (None, Some((line, name))) => wide.finish_open(name, line)?,
        (None, None) => wide.finish()?,
    }
    Ok(wide.wanted)
}
