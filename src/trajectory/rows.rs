//! The second pass: row by row, with the faults of the file on the way.

use super::batch::{Batch, Exactly, Odd, Open};
use super::finding::{Findings, Kind};
use super::grid::Grid;
use super::number::Printed;
use super::open::Source;
use super::resolution::{Neighbours, half_ulp};
use super::survey::Survey;
use crate::fault::{Result, quoted};
use crate::number::Double;

/// One row of a trajectory.
#[derive(Debug)]
pub struct Row<'a> {
    /// Its line in the file.
    pub line: u64,
    /// The stamp, exactly as printed.
    pub time: Double,
    /// How far the time behind the stamp may lie from it; zero on an exact grid.
    pub time_resolution: f64,
    /// What the digits of the stamp resolve, on a grid or not.
    pub stamp_resolution: f64,
    /// Values of the selected channels; NaN where there is none.
    pub values: &'a [f64],
}

impl Row<'_> {
    /// The value of a selected channel, if there is one.
    pub fn value(&self, place: usize) -> Option<f64> {
        self.values
            .get(place)
            .copied()
            .filter(|value| !value.is_nan())
    }
}

/// Whether something jumps at a stamp.
pub(crate) type IsEvent<'a> = dyn Fn(f64) -> bool + Sync + 'a;

/// Looks at the rows of a file in their order, batch by batch: what is wrong with each, and with
/// what lies between them.
pub(crate) struct Order<'a> {
    survey: &'a Survey,
    is_event: &'a IsEvent<'a>,
    /// What the digits of the stamps resolve.
    digits: Neighbours,
    /// Lines before the next batch.
    lines: u64,
    /// The row before, if its stamp is known, with its values.
    last: Option<f64>,
    last_values: Vec<f64>,
    latest: f64,
    /// The step to the row before.
    step: f64,
    /// Rows, and those that repeat the time of the row before with other values.
    rows: u64,
    repeated: u64,
    /// A finding whose kind shows only with the next row: a row that equals the one
    /// before it, or one that leaves a hole which it may have been swapped into.
    pending: Option<Pending>,
    /// The largest step that could be a hole in a grid of its size, see [`Order::largest_gap`].
    largest_gap: f64,
}

struct Pending {
    kind: Kind,
    line: u64,
    text: String,
    /// It counts only where the steps around it are those of the grid.
    lone: bool,
}

/// A step of so many others that is no whole number of them is a hole where it stands alone: the
/// last step of a code may be longer than the others, but not by more than one of them.
const LONE: f64 = 2.1;
/// Steps up to this many of the grid's are its own.
const OWN: f64 = 1.1;
/// So many rows that stand beside another one of the same time, one in so many, are those of
/// another run.
const REPEATED: u64 = 10;
/// Stamps that are rounded to this part of the step before them do not repeat by that.
const FINE: f64 = 0.01;

impl<'a> Order<'a> {
    pub(crate) fn new(survey: &'a Survey, is_event: &'a IsEvent<'a>) -> Order<'a> {
        Order {
            survey,
            is_event,
            lines: survey.layout.first_row - 1,
            last: None,
            last_values: vec![f64::NAN; survey.selection.channels.len()],
            latest: f64::NEG_INFINITY,
            step: 0.0,
            rows: 0,
            repeated: 0,
            pending: None,
            largest_gap: 0.0,
            digits: survey.time.of_neighbours(),
        }
    }

    /// Hands out every row of the next batch that can be used.
    pub(crate) fn take(
        &mut self,
        batch: &Batch,
        findings: &mut Findings,
        each: &mut dyn FnMut(&Row),
    ) {
        let channels = self.last_values.len();
        let mut odd = batch.odd.iter();
        for (index, row) in batch.rows.iter().enumerate() {
            let values = &batch.values[index * channels..][..channels];
            let line = self.lines + u64::from(row.number) + 1;
            if row.is_odd
                && let Some(odd) = odd.next()
            {
                let open = batch.open.filter(|_| index + 1 == batch.rows.len());
                if !self.is_usable(line, odd, open, findings) {
                    let known = open.is_none() && !row.time.is_nan();
                    // What lies between the rows around it cannot be told without a stamp; one
                    // that is there still counts, or the next row would seem to leave a hole.
                    self.last = known.then_some(row.time);
                    if known {
                        self.last_values.copy_from_slice(values);
                        self.latest = self.latest.max(row.time);
                    }
                    continue;
                }
            }
            if row.time.is_nan() {
                self.last = None;
                continue;
            }
            let printed = self.digits.at(row.time);
            // Of rows that share a stamp at most one is on the grid.
            let shared = self.last == Some(row.time) && !(self.is_event)(row.time);
            let resolution = match !shared && self.survey.is_on_grid(batch.exact(row)) {
                true => 0.0,
                false => printed,
            };
            self.order((line, row.time, resolution), values, findings);
            each(&Row {
                line,
                time: row.moment,
                time_resolution: resolution,
                stamp_resolution: printed,
                values,
            });
        }
        self.lines += batch.lines;
    }

    /// What shows only at the end.
    pub(crate) fn finish(&mut self, findings: &mut Findings) {
        if let Some(Pending {
            kind: Kind::MissingRows,
            line,
            text,
            ..
        }) = self.pending.take()
        {
            findings.fatal(Kind::MissingRows, line, text);
        }
        if self.repeated >= 3 && REPEATED * self.repeated > self.rows {
            let text = format!(
                "{} of {} rows repeat the time of the row before with other values: is this more \
                 than one run?",
                self.repeated, self.rows
            );
            findings.fatal(Kind::RepeatedStamp, None, text);
        }
    }

    /// For whoever has only guessed the grid: with a spacing above this there is no hole, for a
    /// hole is longer than the spacing by more than its stamps are rounded, and half as long again.
    pub(crate) fn largest_gap(&self) -> f64 {
        self.largest_gap
    }

    /// Takes note of what is wrong with a row; false where it cannot be used.
    fn is_usable(&self, line: u64, odd: &Odd, open: Option<Open>, findings: &mut Findings) -> bool {
        let Odd { columns, strange } = odd;
        let layout = &self.survey.layout;
        let expected = layout.fields();
        if let Some(open) = open {
            let short = |(place, printed)| self.survey.is_short(place, printed);
            if *columns != expected || strange.is_some() || open.last.is_some_and(short) {
                let text =
                    "the last line breaks off: the file was cut short or is still being written";
                findings.fatal(Kind::CutOffLine, line, text);
                return false;
            }
        }
        if *columns != expected {
            let text = format!("this row has {columns} fields, the others have {expected}");
            findings.fatal(Kind::RowLength, line, text);
            return false;
        }
        if let Some((column, field)) = strange {
            let name = layout.names.as_ref().and_then(|names| names.get(*column));
            let name = name.map_or(format!("{}", column + 1), |name| quoted(name));
            let found = if field.is_empty() {
                "empty".to_owned()
            } else {
                quoted(field)
            };
            let text = match layout.long {
                Some(_) if field.is_empty() && *column > 0 => {
                    format!("there is no value of {name} at this time")
                }
                _ => format!("column {name} is {found}, not a number"),
            };
            findings.fatal(Kind::NotANumber, line, text);
        }
        true
    }

    /// Order, repetition and holes of the stamps.
    fn order(
        &mut self,
        (line, time, resolution): (u64, f64, f64),
        values: &[f64],
        findings: &mut Findings,
    ) {
        let survey = self.survey;
        self.rows += 1;
        if let Some(Pending {
            kind,
            line,
            text,
            lone,
        }) = self.pending.take()
        {
            // A row that comes out of order fills the hole that seemed to be there; one
            // step between two phases of output need not fit either.
            let step = self.last.map_or(0.0, |last| time - last);
            let between = kind == Kind::MissingRows
                && (survey.is_phase(step, resolution) || lone && !survey.is_own(step));
            if kind == Kind::RepeatedStamp || time >= self.latest && !between {
                findings.fatal(kind, line, text);
            }
        }
        if time < self.latest {
            let text = format!("t = {time} comes after t = {}", self.latest);
            findings.fatal(Kind::TimeNotIncreasing, line, text);
        } else if let Some(last) = self.last {
            let from = last.max(self.latest);
            let step = time - from;
            let gap = (step - slack(time, resolution)).min(step / 1.5);
            self.largest_gap = self.largest_gap.max(gap);
            let before = std::mem::replace(&mut self.step, step);
            if time == last {
                // Stamps that are too coarse for the step repeat by themselves.
                let uniform = matches!(survey.grid, Grid::Uniform { spacing, exact, .. }
                    if exact.is_some() || spacing > 2.1 * survey.time.at(time));
                let same = |(a, b): (&f64, &f64)| a == b || a.is_nan() && b.is_nan();
                let repeats = uniform && self.last_values.iter().zip(values).all(same);
                if repeats && !(self.is_event)(time) {
                    // At the very end it can be a last tiny step of a code that adds
                    // up its time, printed to few digits.
                    let text = format!("this row repeats the one before it, t = {time}");
                    self.pending = Some(Pending {
                        kind: Kind::RepeatedStamp,
                        line,
                        text,
                        lone: false,
                    });
                } else {
                    let fine = self.digits.at(time) <= FINE * before;
                    self.repeated += u64::from(fine && !(self.is_event)(time));
                    let text = || format!("t = {time} stands here a second time");
                    findings.note(Kind::RepeatedStamp, line, text);
                }
            } else {
                self.pending = survey.hole(line, (from, time), before, resolution);
            }
        }
        self.latest = self.latest.max(time);
        self.last = Some(time);
        self.last_values.copy_from_slice(values);
    }
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
        is_event: &IsEvent,
        each: &mut dyn FnMut(&Row) -> Result<()>,
    ) -> Result<()> {
        let mut order = Order::new(self, is_event);
        let result = source.batches(&self.layout, &self.selection, &mut |batch| {
            let mut result = Ok(());
            order.take(&batch, findings, &mut |row| {
                if result.is_ok() {
                    result = each(row);
                }
            });
            result
        });
        order.finish(findings);
        result
    }

    /// Fewer digits than every other row has: the end of the number is missing.
    fn is_short(&self, place: usize, printed: Printed) -> bool {
        let even = self.even[place].is_some_and(|(decimals, scientific)| {
            printed.decimals < decimals || scientific && !printed.scientific
        });
        // Trailing zeros that are not printed make a number a digit or two shorter.
        even || usize::from(printed.significant) + 2 < self.usual_digits[place]
    }

    /// What is missing between two stamps of a uniform grid, after a step of size `before`.
    fn hole(
        &self,
        line: u64,
        (from, to): (f64, f64),
        before: f64,
        resolution: f64,
    ) -> Option<Pending> {
        let Grid::Uniform { spacing, .. } = self.grid else {
            return None;
        };
        let step = to - from;
        if step < 1.4 * spacing {
            return None;
        }
        let slack = slack(to, resolution);
        // Steps of a code that chooses them are no whole multiples.
        let missing = (step / spacing).round() - 1.0;
        let off_grid = (step - (missing + 1.0) * spacing).abs();
        let whole = off_grid <= slack * (missing + 2.0) + 1e-6 * step;
        let lone = step > LONE * spacing && self.is_own(before);
        let rows = if missing == 1.0 { "row is" } else { "rows are" };
        // A phase of coarser output ends with a shorter step where it has to.
        let ends = step < before && self.is_phase(before, resolution);
        let in_phase = ends || self.is_phase(step, resolution);
        let is_hole = missing >= 1.0 && step - spacing > slack && (whole || lone) && !in_phase;
        is_hole.then(|| Pending {
            kind: Kind::MissingRows,
            line,
            text: format!(
                "{missing} {rows} missing before this one: t goes from {from} to {to} in a file \
                 of step {spacing}"
            ),
            lone: !whole,
        })
    }

    /// True for a step that is not longer than those of a uniform grid.
    fn is_own(&self, step: f64) -> bool {
        matches!(self.grid, Grid::Uniform { spacing, .. } if step <= OWN * spacing)
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

    /// True for a stamp that is an exact decimal multiple of the grid's step.
    fn is_on_grid(&self, exact: Exactly) -> bool {
        let Grid::Uniform {
            spacing,
            exact: Some(step),
            ..
        } = self.grid
        else {
            return false;
        };
        let since = exact.decimal().zip(self.first);
        let since = since.and_then(|(exact, first)| exact.minus(first));
        since.is_some_and(|since| {
            let count = (since.to_double().to_f64() / spacing).round();
            count.abs() < 1e15 && step.times(count as i64) == Some(since)
        })
    }
}

/// How far a step may be off by the rounding of its two stamps.
fn slack(time: f64, resolution: f64) -> f64 {
    2.1 * resolution.max(half_ulp(time))
}

#[cfg(test)]
mod tests;
