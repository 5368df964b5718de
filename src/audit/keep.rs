//! Rows that are kept of a file for the question which method wrote it.

use crate::compare::{Compared, Kept};
use crate::method::{Record, Window, windows};
use crate::number::Conversion;
use crate::trajectory::{Grid, Resolution, Survey};

/// Gathers the rows of a few windows while the file is compared.
pub(super) struct Keeping {
    /// Channel of the case and conversion of each selected column.
    columns: Vec<(usize, Conversion)>,
    kept: Vec<Kept>,
}

impl Keeping {
    /// Of the rows that were handed on, those of the windows of a file with so many rows.
    pub(super) fn new(compared: &mut Compared, columns: Vec<(usize, Conversion)>) -> Keeping {
        let windows = windows(compared.rows);
        let mut kept = std::mem::take(&mut compared.kept);
        kept.retain(|row| {
            let inside = |&(first, rows): &(u64, u64)| (first..first + rows).contains(&row.number);
            windows.iter().any(inside)
        });
        Keeping { columns, kept }
    }

    /// The record, once the digits and the grid are known for good. A stated step that
    /// the spacing is a multiple of sets the spacing exactly.
    pub(super) fn conclude(
        self,
        compared: &Compared,
        time: Conversion,
        step: Option<f64>,
    ) -> Record {
        let survey = &compared.survey;
        let full = |place: usize| {
            let deviation = compared.channels.get(place);
            deviation.is_some_and(|d| d.resolution == Resolution::Full)
        };
        let mut record = Record {
            channels: self.columns.iter().map(|(channel, _)| *channel).collect(),
            spacing: spacing(compared, survey, time, step, self.kept.last()),
            unit: unit(&self.kept, survey, &full),
            windows: Vec::new(),
        };
        let mut next = 0;
        for row in &self.kept {
            if record.windows.is_empty() || row.number != next {
                record.windows.push(Window {
                    first: row.number,
                    ..Window::default()
                });
            }
            next = row.number + 1;
            let Some(window) = record.windows.last_mut() else {
                continue;
            };
            window.times.push(row.time.0);
            window.time_doubts.push(row.time.1);
            for (place, value) in row.channels.iter().enumerate() {
                let value = value.as_ref();
                window.values.push(value.map_or(f64::NAN, |v| v.value));
                window.errors.push(value.map_or(f64::NAN, |v| v.error));
                let converted = self.columns.get(place).is_some_and(|(_, c)| !c.is_none());
                window.doubts.push(value.map_or(f64::NAN, |v| {
                    let digits = v.doubts[usize::from(full(place))];
                    // A column in full for all that its pattern shows, yet of few digits: a
                    // method is held against what they may have been rounded to.
                    let few = survey.longest.get(place).copied().flatten();
                    let few = few.filter(|_| full(place)).map_or(0.0, |few| {
                        let conversion = self.columns[place].1;
                        conversion.stretch(Resolution::Significant(few).at(v.written))
                    });
                    let digits = digits.max(few);
                    // A program that writes in another unit has rounded once more.
                    let more = if converted {
                        4.0 * f64::EPSILON * v.value.abs()
                    } else {
                        0.0
                    };
                    digits + more
                }));
            }
        }
        record
    }
}

fn spacing(
    compared: &Compared,
    survey: &Survey,
    time: Conversion,
    step: Option<f64>,
    last: Option<&Kept>,
) -> Option<(f64, f64)> {
    let spacing = compared.spacing?;
    let end = last.map_or(0.0, |row| row.time.0.abs());
    let exact = matches!(survey.grid, Grid::Uniform { exact: Some(_), .. });
    let printed = time.stretch(survey.time.at(end)).min(spacing);
    let rows = compared.rows.max(2) as f64;
    let doubt = if exact {
        f64::EPSILON * spacing
    } else {
        4.0 * f64::EPSILON * end + 2.0 * printed / rows
    };
    // The step as stated is what the program has used, where the stamps agree with it.
    if let Some(step) = step {
        let count = (spacing / step).round();
        let multiple = count * step;
        if count >= 1.0 && (multiple - spacing).abs() <= 2.0 * doubt + 1e-12 * spacing {
            return Some((multiple, f64::EPSILON * multiple));
        }
    }
    Some((spacing, doubt))
}

/// Half a unit in the last place of the arithmetic that the values show: that of `f32`
/// where none is further from one than its digits resolve, and those are fine enough to
/// tell (nine digits are: at most one `f64` in five is so near to an `f32` by chance).
fn unit(kept: &[Kept], survey: &Survey, full: &dyn Fn(usize) -> bool) -> f64 {
    let single = f64::from(f32::EPSILON) / 2.0;
    // The shortest text of a number of single precision does not read back as it.
    let shortest = survey.channels.contains(&Resolution::Single);
    let (mut telling, mut all) = (0, 0);
    for row in kept {
        for (place, value) in row.channels.iter().enumerate() {
            let Some(value) = value.as_ref().filter(|value| value.written != 0.0) else {
                continue;
            };
            let written = value.written;
            let resolved = if value.value == 0.0 {
                0.0
            } else {
                value.doubts[usize::from(full(place))] * (written / value.value).abs()
            };
            let away = (f64::from(written as f32) - written).abs();
            let near = away == 0.0 || away <= 1.01 * resolved && !full(place);
            if !near && !shortest {
                return f64::EPSILON / 2.0;
            }
            all += 1;
            // Halves, quarters and the like are numbers of either kind: most values of
            // single precision use the last of its bits.
            let last_bits = (written as f32).to_bits() & 0xf != 0;
            let fine = shortest || resolved <= 0.1 * single * written.abs();
            telling += usize::from(last_bits && fine);
        }
    }
    if telling >= 8 && 2 * telling >= all {
        single
    } else {
        f64::EPSILON / 2.0
    }
}
