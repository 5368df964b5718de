//! The second pass: row by row, with the faults of the file on the way.

use super::finding::{Findings, Kind};
use super::grid::Grid;
use super::number::{Field, Printed};
use super::open::Source;
use super::resolution::half_ulp;
use super::survey::Survey;
use crate::fault::{Result, quoted};
use crate::number::{Decimal, Double};

/// One row of a trajectory.
#[derive(Debug)]
pub struct Row<'a> {
    /// Its line in the file.
    pub line: u64,
    /// The stamp, exactly as printed.
    pub time: Double,
    /// How far the time behind the stamp may lie from it; zero on an exact grid.
    pub time_resolution: f64,
    /// Values of the selected channels; absent ones are `None`.
    pub values: &'a [Option<f64>],
}

/// What is remembered from row to row.
struct State {
    last: Option<(f64, Vec<Option<f64>>)>,
    latest: f64,
    /// A finding whose kind shows only with the next row: a row that equals the one
    /// before it, or one that leaves a hole which it may have been swapped into.
    pending: Option<Pending>,
}

struct Pending {
    kind: Kind,
    line: u64,
    text: String,
}

impl Survey {
    /// Goes through the file and hands out every row that has a time stamp. A stamp
    /// may be repeated where `is_event` says that something jumps there.
    ///
    /// # Errors
    /// A file that cannot be read any more, or what `each` returns.
    pub fn rows(
        &self,
        source: &Source,
        findings: &mut Findings,
        is_event: &dyn Fn(f64) -> bool,
        each: &mut dyn FnMut(&Row) -> Result<()>,
    ) -> Result<()> {
        let mut state = State {
            last: None,
            latest: f64::NEG_INFINITY,
            pending: None,
        };
        let mut values = vec![None; self.selection.channels.len()];
        let result = source.each_line(&mut |line, text, ended| {
            if line < self.layout.first_row || self.layout.passes_over(text) {
                return Ok(());
            }
            values.fill(None);
            let (stamp, usable) = self.row(line, text, ended, &mut values, findings);
            let Some((time, exact)) = stamp else {
                // What lies between the rows around it cannot be told.
                state.last = None;
                return Ok(());
            };
            if !usable {
                // Its stamp still counts, or the next row would seem to leave a hole.
                state.last = Some((time, values.clone()));
                state.latest = state.latest.max(time);
                return Ok(());
            }
            let resolution = self.time_resolution(time, exact);
            self.order(
                (line, time, resolution),
                &values,
                is_event,
                &mut state,
                findings,
            );
            each(&Row {
                line,
                time: exact.map_or(Double::from(time), Decimal::to_double),
                time_resolution: resolution,
                values: &values,
            })
        });
        if let Some(Pending {
            kind: Kind::MissingRows,
            line,
            text,
        }) = state.pending.take()
        {
            findings.fatal(Kind::MissingRows, line, text);
        }
        result
    }

    /// Reads one line: its stamp, and whether it is a usable row; what it is not is a
    /// finding.
    fn row(
        &self,
        line: u64,
        text: &[u8],
        ended: bool,
        values: &mut [Option<f64>],
        findings: &mut Findings,
    ) -> (Option<(f64, Option<Decimal>)>, bool) {
        let comma = self.layout.decimal_comma;
        let mut time = None;
        let mut columns = 0;
        let mut strange: Option<(usize, String)> = None;
        let mut short = false;
        self.layout.split(text, &mut |column, field| {
            columns += 1;
            let place = self.selection.channels.iter().position(|&c| c == column);
            if column != self.selection.time && place.is_none() {
                return;
            }
            let read = Field::read(field, comma);
            match (read, place) {
                (Field::Number(value, _), None) => {
                    time = Some((value, Field::decimal(field, comma)))
                }
                (Field::Number(value, printed), Some(place)) => {
                    values[place] = Some(value);
                    let last = column + 1 == self.layout.columns;
                    short = last && self.is_short(place, printed);
                }
                _ if strange.is_none() => {
                    strange = Some((column, String::from_utf8_lossy(field).into_owned()));
                }
                _ => {}
            }
        });
        let expected = self.layout.columns;
        if !ended && (columns != expected || strange.is_some() || short) {
            let text = "the last line breaks off: the file was cut short or is still being written";
            findings.fatal(Kind::CutOffLine, line, text);
            return (None, false);
        }
        if columns != expected {
            let text = format!("this row has {columns} fields, the others have {expected}");
            findings.fatal(Kind::RowLength, line, text);
            return (time, false);
        }
        if let Some((column, field)) = strange {
            let name = self
                .layout
                .names
                .as_ref()
                .and_then(|names| names.get(column));
            let name = name.map_or(format!("{}", column + 1), |name| quoted(name));
            let found = if field.is_empty() {
                "empty".to_owned()
            } else {
                quoted(&field)
            };
            findings.fatal(
                Kind::NotANumber,
                line,
                format!("column {name} is {found}, not a number"),
            );
        }
        (time, true)
    }

    /// Fewer digits than every other row has: the end of the number is missing.
    fn is_short(&self, place: usize, printed: Printed) -> bool {
        let even = self.even[place].is_some_and(|(decimals, scientific)| {
            printed.decimals < decimals || scientific && !printed.scientific
        });
        // Trailing zeros that are not printed make a number a digit or two shorter.
        even || usize::from(printed.significant) + 2 < self.usual_digits[place]
    }

    /// Order, repetition and holes of the stamps.
    fn order(
        &self,
        (line, time, resolution): (u64, f64, f64),
        values: &[Option<f64>],
        is_event: &dyn Fn(f64) -> bool,
        state: &mut State,
        findings: &mut Findings,
    ) {
        if let Some(Pending { kind, line, text }) = state.pending.take() {
            // A row that comes out of order fills the hole that seemed to be there; one
            // step between two phases of output need not fit either.
            let step = state.last.as_ref().map_or(0.0, |(last, _)| time - last);
            let between = kind == Kind::MissingRows && self.is_phase(step, resolution);
            if kind == Kind::RepeatedStamp || time >= state.latest && !between {
                findings.fatal(kind, line, text);
            }
        }
        if time < state.latest {
            let text = format!("t = {time} comes after t = {}", state.latest);
            findings.fatal(Kind::TimeNotIncreasing, line, text);
        } else if let Some((last, last_values)) = &state.last {
            let from = last.max(state.latest);
            if time == *last {
                let uniform = matches!(self.grid, Grid::Uniform { .. });
                if uniform && last_values == values && !is_event(time) {
                    // At the very end it can be a last tiny step of a code that adds
                    // up its time, printed to few digits.
                    let text = format!("this row repeats the one before it, t = {time}");
                    state.pending = Some(Pending {
                        kind: Kind::RepeatedStamp,
                        line,
                        text,
                    });
                } else {
                    let text = format!("t = {time} stands here a second time");
                    findings.note(Kind::RepeatedStamp, line, text);
                }
            } else {
                let hole = self.hole(from, time, resolution);
                state.pending = hole.map(|text| Pending {
                    kind: Kind::MissingRows,
                    line,
                    text,
                });
            }
        }
        state.latest = state.latest.max(time);
        match &mut state.last {
            Some((last, last_values)) => {
                *last = time;
                last_values.copy_from_slice(values);
            }
            None => state.last = Some((time, values.to_vec())),
        }
    }

    /// What is missing between two stamps of a uniform grid.
    fn hole(&self, from: f64, to: f64, resolution: f64) -> Option<String> {
        let Grid::Uniform { spacing, .. } = self.grid else {
            return None;
        };
        let step = to - from;
        // Each of the two stamps may be off by its resolution.
        let slack = 2.1 * resolution.max(half_ulp(to));
        // Steps of a code that chooses them are no whole multiples.
        let missing = (step / spacing).round() - 1.0;
        let off_grid = (step - (missing + 1.0) * spacing).abs();
        let whole = off_grid <= slack * (missing + 2.0) + 1e-6 * step;
        let rows = if missing == 1.0 { "row is" } else { "rows are" };
        let in_phase = self.is_phase(step, resolution);
        (missing >= 1.0 && step - spacing > slack && whole && !in_phase).then(|| {
            format!(
                "{missing} {rows} missing before this one: t goes from {from} to {to} in a file \
                 of step {spacing}"
            )
        })
    }

    /// True for a step of a phase of coarser output.
    fn is_phase(&self, step: f64, resolution: f64) -> bool {
        let Grid::Uniform { phases, .. } = self.grid else {
            return false;
        };
        let slack = 2.1 * resolution + 1e-6 * step;
        phases
            .iter()
            .any(|&phase| phase > 0.0 && (step - phase).abs() <= slack)
    }

    /// Zero for a stamp that is an exact decimal multiple of the grid's step.
    fn time_resolution(&self, time: f64, exact: Option<Decimal>) -> f64 {
        if let Grid::Uniform {
            spacing,
            exact: Some(step),
            ..
        } = self.grid
            && let (Some(exact), Some(first)) = (exact, self.first)
        {
            let since = exact.minus(first);
            let count = since.map(|since| (since.to_double().to_f64() / spacing).round());
            if let (Some(since), Some(count)) = (since, count)
                && count.abs() < 1e15
                && step.times(count as i64) == Some(since)
            {
                return 0.0;
            }
        }
        self.time.at(time)
    }
}

#[cfg(test)]
mod tests;
