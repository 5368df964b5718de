//! How well the numbers of a column fit a channel: the largest error at the sampled rows
//! as a share of the channel's peak.

use std::cell::OnceCell;

use super::Model;
use super::clock::Frame;
use super::look::Clock;
use crate::number::{Conversion, Double};
use crate::outcome::NO_FIT;
use crate::submission::{akin, convert};

/// Rows that must have a number for a fit to count.
const LEAST_ROWS: usize = 4;
/// A column of another unit than the case's is believed where its error is so many times
/// smaller than with that.
const CLEARLY: f64 = 5.0;
/// An error that is a large part of the channel's swing is no fit, however high the channel
/// lies, unless it is below this share of the peak.
const CLOSE: f64 = 1e-4;

/// A column read as a channel.
#[derive(Clone, Debug)]
pub(super) struct Reading {
    /// The unit that has to be stated.
    pub unit: Option<String>,
    /// Largest error as a share of the peak.
    pub error: f64,
    /// False where the error is too large for the numbers alone to speak for the channel.
    pub fits: bool,
    /// Other units that fit nearly as well.
    pub rivals: Vec<String>,
}

/// Exact values at the rows of the sample.
pub(super) struct Bench {
    /// Rows within the window: place in the sample.
    rows: Vec<usize>,
    /// By channel, then by row.
    truth: Vec<Vec<f64>>,
    /// By channel: largest size, swing.
    sizes: Vec<(f64, f64)>,
    /// Rows at which an input jumps, where an output has two values.
    jumps: Vec<bool>,
    states: usize,
    /// By channel: other units that it may have been written in.
    akin: Vec<OnceCell<Vec<(String, Conversion)>>>,
}

impl Bench {
    pub fn new(model: &Model, clock: &Clock, frame: &Frame) -> Bench {
        let exact = &model.exact;
        let (from, to) = (exact.from(), exact.to());
        let span = (to - from).to_f64();
        let mut walk = exact.walk();
        let channels = model.case.channels().len();
        let (mut rows, mut jumps) = (Vec::new(), Vec::new());
        let mut truth = vec![Vec::new(); channels];
        for (row, &stamp) in clock.times.iter().enumerate() {
            let time = frame.conversion.apply(stamp);
            // Beyond the ends by no more than the rounding of a stamp.
            let beyond = (from - time).to_f64().max((time - to).to_f64());
            if beyond > 1e-6 * span {
                continue;
            }
            let time = if time < from { from } else { time };
            let time = if time > to { to } else { time };
            let values = walk.go(time);
            rows.push(row);
            jumps.push(exact.jumps_near(time, 1e-6 * span));
            for (channel, value) in truth.iter_mut().zip(&values.value) {
                channel.push(value.to_f64());
            }
        }
        // The peak is that of the rows: beside a peak that they do not reach, anything small
        // would fit.
        let size = |values: &Vec<f64>| {
            let least = values.iter().copied().fold(f64::INFINITY, f64::min);
            let most = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
            (least.abs().max(most.abs()), most - least)
        };
        let sizes = truth.iter().map(size).collect();
        Bench {
            rows,
            truth,
            sizes,
            jumps,
            states: model.case.states.len(),
            akin: vec![OnceCell::new(); channels],
        }
    }

    fn akin(&self, channel: usize, target: &str) -> &[(String, Conversion)] {
        self.akin[channel].get_or_init(|| {
            let known = akin(target).into_iter();
            known
                .filter_map(|unit| convert(&unit, target).ok().map(|by| (unit, by)))
                .collect()
        })
    }

    /// True where enough rows lie within the window.
    pub fn tells(&self) -> bool {
        self.rows.len() >= LEAST_ROWS
    }

    /// Largest error as a share of the peak; `None` where the column has too few numbers
    /// or the channel is zero throughout.
    fn error(&self, channel: usize, values: &[Option<f64>], by: Conversion) -> Option<f64> {
        let (peak, _) = self.sizes[channel];
        let mut worst = 0.0f64;
        let mut seen = 0;
        for ((&row, truth), &jump) in self.rows.iter().zip(&self.truth[channel]).zip(&self.jumps) {
            let Some(written) = values.get(row).copied().flatten() else {
                continue;
            };
            if jump && channel >= self.states {
                continue;
            }
            seen += 1;
            worst = worst.max((by.apply(Double::from(written)).to_f64() - truth).abs());
        }
        let enough = seen >= LEAST_ROWS && 2 * seen >= self.rows.len();
        (enough && peak > 0.0 && worst.is_finite()).then(|| worst / peak)
    }

    fn reading(&self, channel: usize, unit: Option<String>, error: f64) -> Reading {
        let (peak, swing) = self.sizes[channel];
        let shape = error * peak <= NO_FIT * swing || error <= CLOSE;
        Reading {
            unit,
            error,
            fits: error <= NO_FIT && shape,
            rivals: Vec::new(),
        }
    }

    /// The column in the unit that its header says, or in that of the case.
    pub fn as_said(
        &self,
        channel: usize,
        target: &str,
        values: &[Option<f64>],
        said: Option<&str>,
    ) -> Option<Reading> {
        let conversion = match said {
            Some(unit) => convert(unit, target).ok()?,
            None => Conversion::NONE,
        };
        let error = self.error(channel, values, conversion)?;
        Some(self.reading(channel, None, error))
    }

    /// The column in the unit in which it fits best: that of the case, unless another one
    /// fits clearly better.
    pub fn in_any_unit(
        &self,
        channel: usize,
        target: &str,
        values: &[Option<f64>],
        hint: Option<&str>,
    ) -> Option<Reading> {
        let plain = self.as_said(channel, target, values, None)?;
        let mut tried: Vec<Reading> = Vec::new();
        let hinted = hint.and_then(|unit| Some((unit.to_owned(), convert(unit, target).ok()?)));
        for (unit, conversion) in hinted.iter().chain(self.akin(channel, target)) {
            if let Some(error) = self.error(channel, values, *conversion) {
                tried.push(self.reading(channel, Some(unit.clone()), error));
            }
        }
        // The first of equals is the usual name.
        let best = tried.iter().filter(|reading| reading.fits);
        let best = best.min_by(|a, b| a.error.total_cmp(&b.error)).cloned();
        let Some(mut best) = best.filter(|best| CLEARLY * best.error < plain.error) else {
            return Some(plain);
        };
        let near = tried.iter().filter(|other| {
            other.error > best.error && other.error <= CLEARLY * best.error && other.fits
        });
        best.rivals = near.filter_map(|other| other.unit.clone()).collect();
        Some(best)
    }
}
