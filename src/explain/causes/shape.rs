//! Faults in the shape of what was written: clipped and frozen values, rows on straight
//! lines between the steps, noise.

use super::bench::Rows;
use super::written::with_channels;
use super::{Candidate, Kind, Names};
use crate::number::{beside, plain, short};

pub(super) fn clipped(rows: &Rows, names: &Names, base: &[f64], bad: &[usize]) -> Vec<Candidate> {
    let mut found = Vec::new();
    for low in [false, true] {
        let extreme = |channel: usize| {
            let column = rows.column(&rows.written, channel);
            if low {
                column.fold(f64::INFINITY, f64::min)
            } else {
                column.fold(f64::NEG_INFINITY, f64::max)
            }
        };
        let limits: Vec<f64> = (0..rows.width()).map(extreme).collect();
        let often = |&channel: &usize| {
            let at_limit = rows
                .column(&rows.written, channel)
                .filter(|&y| y == limits[channel]);
            let beyond = rows.column(base, channel).filter(|&x| {
                if low {
                    x < limits[channel]
                } else {
                    x > limits[channel]
                }
            });
            at_limit.count() >= 2 && beyond.count() >= 2
        };
        let clipped: Vec<usize> = bad.iter().copied().filter(often).collect();
        if clipped.is_empty() {
            continue;
        }
        let values = with_channels(rows, base, &clipped, &|channel, x| {
            if low {
                x.max(limits[channel])
            } else {
                x.min(limits[channel])
            }
        });
        let first = clipped[0];
        let text = format!(
            "{} is clipped at {} {}: values {} that are missing; widen the range of what is written",
            names.list(&clipped),
            beside(limits[first], limits[first]),
            names.unit(first),
            if low { "below" } else { "above" }
        );
        found.push(Candidate::new(
            Kind::Clipped,
            1,
            Some(limits[first]),
            values,
            text,
        ));
    }
    found
}

pub(super) fn frozen(rows: &Rows, names: &Names, base: &[f64], bad: &[usize]) -> Vec<Candidate> {
    let width = rows.width();
    let mut values = base.to_vec();
    let mut places = Vec::new();
    for &channel in bad {
        let written: Vec<f64> = rows.column(&rows.written, channel).collect();
        // The longest run of one value while the truth moves on.
        let (mut best, mut begin) = ((0, 0), 0);
        for row in 1..=written.len() {
            if row == written.len() || written[row] != written[begin] {
                let moves = (begin..row).any(|r| {
                    let gap = (base[r * width + channel] - base[begin * width + channel]).abs();
                    gap > rows.allowed[r * width + channel]
                });
                if moves && row - begin > best.1 - best.0 {
                    best = (begin, row);
                }
                begin = row;
            }
        }
        if best.1 - best.0 < 4 {
            return Vec::new();
        }
        for row in best.0..best.1 {
            values[row * width + channel] = written[best.0];
        }
        places.push((channel, best));
    }
    let Some(&(channel, (begin, end))) = places.first() else {
        return Vec::new();
    };
    let text = format!(
        "{} is frozen at {} {} from t = {} to {} {} ({} rows)",
        names.list(bad),
        plain(rows.written[begin * width + channel]),
        names.unit(channel),
        plain(rows.times[begin]),
        plain(rows.times[end - 1]),
        names.time_unit,
        end - begin
    );
    vec![Candidate::new(
        Kind::Frozen,
        2,
        Some(rows.times[begin]),
        values,
        text,
    )]
}

/// Rows on straight lines between rows further apart, whatever the method.
pub(super) fn interpolated(rows: &Rows, names: &Names) -> Option<Candidate> {
    let (width, count) = (rows.width(), rows.len());
    let spacing = rows.spacing?;
    let mut ruler = None;
    // The longest stride that fits: half of it would fit, too.
    for stride in (2..=(count / 4).min(50)).rev() {
        let mut kinks = 0;
        let mut straight = true;
        'rows: for row in 1..count - 1 {
            let follows = rows.numbers[row + 1] - rows.numbers[row - 1] == 2;
            for channel in (0..width).filter(|_| follows) {
                let at = |r: usize| rows.written[r * width + channel];
                let bend = at(row + 1) - 2.0 * at(row) + at(row - 1);
                let allowed = 4.0 * rows.allowed[row * width + channel];
                if rows.numbers[row].is_multiple_of(stride as u64) {
                    kinks += usize::from(bend.abs() > 4.0 * allowed);
                } else if bend.abs() > allowed {
                    straight = false;
                    break 'rows;
                }
            }
        }
        if straight && kinks >= 3 {
            ruler = Some(stride);
            break;
        }
    }
    let stride = ruler?;
    let text = format!(
        "{} of {stride} rows lie on straight lines between rows {} {} apart; write the rows of the steps, \
         or interpolate at the order of the method",
        stride - 1,
        short(spacing * stride as f64),
        names.time_unit
    );
    let number = spacing * stride as f64;
    Some(Candidate::new(
        Kind::InterpolatedRows,
        1,
        Some(number),
        rows.written.clone(),
        text,
    ))
}

/// What is left is neither smooth nor alternating: noise of one size.
pub(super) fn noise(rows: &Rows, names: &Names, base: &[f64]) -> Option<Candidate> {
    let width = rows.width();
    let mut worst: Option<(usize, f64)> = None;
    for channel in 0..width {
        let pairs = rows
            .column(base, channel)
            .zip(rows.column(&rows.written, channel));
        let rest: Vec<f64> = pairs
            .map(|(x, y)| y - x)
            .filter(|gap| gap.is_finite())
            .collect();
        if rest.len() < 30 {
            return None;
        }
        let count = rest.len() as f64;
        let mean = rest.iter().sum::<f64>() / count;
        let size = (rest.iter().map(|r| (r - mean).powi(2)).sum::<f64>() / count).sqrt();
        let allowed = rows.column(&rows.allowed, channel).fold(0.0, f64::max);
        if size < 2.0 * allowed {
            continue;
        }
        let lag = |by: usize| {
            let sum: f64 = rest
                .iter()
                .zip(&rest[by..])
                .map(|(a, b)| (a - mean) * (b - mean))
                .sum();
            sum / (count * size * size)
        };
        // Uncorrelated from row to row, within three standard errors and a little
        // (common practice, no source).
        let loose = 3.0 / count.sqrt() + 0.1;
        // As strong in one place as in another, and crossing zero about every other row.
        let largest = rest.iter().fold(0.0f64, |m, r| m.max((r - mean).abs()));
        let crossings = rest
            .windows(2)
            .filter(|pair| (pair[0] - mean) * (pair[1] - mean) < 0.0);
        let share = crossings.count() as f64 / (count - 1.0);
        if largest > 5.0 * size || !(0.35..=0.65).contains(&share) {
            return None;
        }
        if (1..=4).any(|by| lag(by).abs() > loose)
            || mean.abs() > 4.0 * size / count.sqrt() + 0.3 * size
        {
            return None;
        }
        if worst.is_none_or(|(_, known)| size > known) {
            worst = Some((channel, size));
        }
    }
    let (channel, size) = worst?;
    let text = format!(
        "noise of {} {} (standard deviation) on {}: it changes sign from row to row without any \
         pattern; write what the simulator computed, without a sensor model",
        short(size),
        names.unit(channel),
        names.channel(channel)
    );
    Some(Candidate::new(
        Kind::Noise,
        3,
        Some(size),
        rows.written.clone(),
        text,
    ))
}
