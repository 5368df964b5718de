//! Columns to channels: by name first, by fit where names do not tell.

use super::Model;
use super::clock::Frame;
use super::fit::{Bench, Reading};
use super::look::{Clock, Looked};
use super::names::{Likeness, likeness, unit_hint};
use crate::case::Channel;
use crate::outcome::{By, NO_FIT};
use crate::trajectory::is_time_name;

/// Up to so many states are tried on the columns in every order.
const MOST_IN_EVERY_ORDER: usize = 6;
/// An output that no name speaks for must fit so well.
const OUTPUT_FITS: f64 = 1e-2;
/// Columns whose errors differ by less than this factor fit nearly as well.
const NEARLY: f64 = 3.0;

/// A channel with its column.
#[derive(Clone, Debug)]
pub(super) struct Assigned {
    /// Place among the channels of the case.
    pub channel: usize,
    /// Column of the file, from zero.
    pub column: usize,
    pub by: By,
    /// `None` where nothing could be compared.
    pub reading: Option<Reading>,
    /// Other columns that fit nearly as well.
    pub rivals: Vec<usize>,
    /// The unit in which it would fit, though the header says another.
    pub fits_in: Option<String>,
}

/// Gives columns to channels.
pub(super) struct Assigner<'a> {
    looked: &'a Looked,
    clock: &'a Clock,
    bench: Bench,
    channels: Vec<Channel<'a>>,
    found: Vec<Assigned>,
}

/// Everything that could be assigned, in the order of the channels of the case.
pub(super) fn assign(model: &Model, looked: &Looked, frame: &Frame) -> Vec<Assigned> {
    let clock = &looked.clocks[frame.clock];
    let mut assigner = Assigner {
        looked,
        clock,
        bench: Bench::new(model, clock, frame),
        channels: model.case.channels(),
        found: Vec::new(),
    };
    assigner.by_name();
    if assigner.bench.tells() {
        assigner.states_by_fit();
        assigner.outputs_by_fit();
    }
    assigner.by_position();
    assigner.found.sort_by_key(|one| one.channel);
    assigner.found
}

impl Assigner<'_> {
    fn is_free(&self, column: usize) -> bool {
        column != self.clock.column && self.found.iter().all(|one| one.column != column)
    }

    fn is_open(&self, channel: usize) -> bool {
        self.found.iter().all(|one| one.channel != channel)
    }

    fn name(&self, column: usize) -> &str {
        self.looked.header(column).map_or("", |(name, _)| name)
    }

    fn values(&self, column: usize) -> Option<&[Option<f64>]> {
        let found = self
            .clock
            .columns
            .iter()
            .find(|(known, _)| *known == column);
        found.map(|(_, values)| values.as_slice())
    }

    /// Columns of numbers that no channel has yet.
    fn free(&self) -> Vec<usize> {
        let columns = self.clock.columns.iter().map(|&(column, _)| column);
        let free = columns.filter(|&column| self.is_free(column));
        // A second column of time is none of a channel.
        free.filter(|&column| !is_time_name(self.name(column)))
            .collect()
    }

    /// The column read as the channel, in its best unit.
    fn read(&self, channel: usize, column: usize) -> Option<Reading> {
        let target = self.channels[channel].unit;
        let values = self.values(column)?;
        match self.looked.header(column) {
            Some((_, Some(unit))) if unit != target => {
                self.bench.as_said(channel, target, values, Some(unit))
            }
            Some((_, Some(_))) => self.bench.as_said(channel, target, values, None),
            Some((name, None)) => {
                let hint = unit_hint(name, target);
                let hint = hint.as_deref();
                self.bench.in_any_unit(channel, target, values, hint)
            }
            None => self.bench.in_any_unit(channel, target, values, None),
        }
    }

    fn take(&mut self, channel: usize, column: usize, by: By) {
        let reading = self.read(channel, column);
        let fits = reading.as_ref().is_some_and(|reading| reading.fits);
        let said = self.looked.header(column).and_then(|(_, unit)| unit);
        let target = self.channels[channel].unit;
        let other = || {
            let values = self.values(column)?;
            let reading = self.bench.in_any_unit(channel, target, values, None)?;
            reading
                .fits
                .then(|| reading.unit.unwrap_or(target.to_owned()))
        };
        let fits_in = said.filter(|_| !fits).and_then(|_| other());
        self.found.push(Assigned {
            channel,
            column,
            by,
            reading,
            rivals: Vec::new(),
            fits_in,
        });
    }

    /// By name, the surest names first; among several alike the one that fits.
    fn by_name(&mut self) {
        for wanted in [Likeness::Same, Likeness::Letters, Likeness::Words] {
            for channel in 0..self.channels.len() {
                if !self.is_open(channel) {
                    continue;
                }
                let name = self.channels[channel].name;
                let mut columns: Vec<usize> = (0..self.looked.layout.columns)
                    .filter(|&column| self.is_free(column))
                    .filter(|&column| likeness(self.name(column), name) == Some(wanted))
                    .collect();
                if columns.len() > 1 || wanted == Likeness::Words {
                    let fits = |&column: &usize| self.read(channel, column).is_some_and(|r| r.fits);
                    let fitting: Vec<usize> = columns.iter().copied().filter(fits).collect();
                    // One letter among other words tells nothing where the numbers do not fit.
                    let telling = columns.len() == 1 && name.len() > 2;
                    if !fitting.is_empty() || !telling {
                        columns = fitting;
                    }
                }
                let by = if wanted == Likeness::Same {
                    By::Name
                } else {
                    By::LikeName
                };
                if let Some(column) = self.best(channel, &columns) {
                    self.take(channel, column, by);
                }
            }
        }
    }

    fn best(&self, channel: usize, columns: &[usize]) -> Option<usize> {
        let error = |column: usize| self.read(channel, column).map_or(f64::MAX, |r| r.error);
        let by_error = |a: &&usize, b: &&usize| error(**a).total_cmp(&error(**b));
        match columns {
            [column] => Some(*column),
            _ => columns.iter().min_by(by_error).copied(),
        }
    }

    /// Errors of open channels on free columns, where these fit.
    fn errors(&self, channels: &[usize], columns: &[usize], most: f64) -> Vec<Vec<Option<f64>>> {
        let error = |channel: usize, column: usize| {
            let reading = self.read(channel, column)?;
            (reading.fits && reading.error <= most).then_some(reading.error)
        };
        let row = |&channel: &usize| columns.iter().map(|&c| error(channel, c)).collect();
        channels.iter().map(row).collect()
    }

    fn states_by_fit(&mut self) {
        let is_state = |&channel: &usize| self.channels[channel].is_state && self.is_open(channel);
        let channels: Vec<usize> = (0..self.channels.len()).filter(is_state).collect();
        self.by_fit(&channels, NO_FIT);
    }

    fn outputs_by_fit(&mut self) {
        let open = |&c: &usize| !self.channels[c].is_state && self.is_open(c);
        let channels: Vec<usize> = (0..self.channels.len()).filter(open).collect();
        // No better than the states do, an output need not be.
        let errors = self
            .found
            .iter()
            .filter_map(|one| Some(one.reading.as_ref()?.error));
        let worst = errors.fold(0.0, f64::max);
        if !self.found.is_empty() {
            self.by_fit(&channels, (NEARLY * worst).clamp(OUTPUT_FITS, NO_FIT));
        }
    }

    fn by_fit(&mut self, channels: &[usize], most: f64) {
        let columns = self.free();
        if channels.is_empty() || columns.is_empty() {
            return;
        }
        let errors = self.errors(channels, &columns, most);
        let few = channels.len() <= MOST_IN_EVERY_ORDER && columns.len() <= MOST_IN_EVERY_ORDER;
        let places = if few {
            in_every_order(&errors, columns.len())
        } else {
            nearest_first(&errors, columns.len())
        };
        for (index, place) in places.iter().enumerate() {
            let Some(place) = *place else { continue };
            self.take(channels[index], columns[place], By::Fit);
            let own = errors[index][place].unwrap_or(0.0);
            let near = |&other: &usize| {
                let error = errors[index][other];
                other != place && error.is_some_and(|error| error <= NEARLY * own + 1e-12)
            };
            let rivals = (0..columns.len()).filter(near).map(|other| columns[other]);
            let rivals: Vec<usize> = rivals.collect();
            if let Some(last) = self.found.last_mut() {
                last.rivals = rivals;
            }
        }
    }

    /// Two columns and one channel leave no choice, as in the audit.
    fn by_position(&mut self) {
        let only = self.channels.len() == 1 && self.looked.layout.columns == 2;
        let bare = self.looked.layout.names.is_none() && self.clock.column == 0;
        if only && bare && self.found.is_empty() {
            self.take(0, 1, By::Position);
        }
    }
}

/// The best of all orders: as many channels as possible, then the smallest sum of errors.
fn in_every_order(errors: &[Vec<Option<f64>>], columns: usize) -> Vec<Option<usize>> {
    struct Search<'a> {
        errors: &'a [Vec<Option<f64>>],
        places: Vec<Option<usize>>,
        used: Vec<bool>,
        best: (usize, f64, Vec<Option<usize>>),
    }
    fn go(search: &mut Search, count: usize, sum: f64) {
        let channel = search.places.len();
        let left = search.errors.len() - channel;
        let (most, least, _) = search.best;
        if count + left < most || count + left == most && sum >= least && most > 0 {
            return;
        }
        let Some(row) = search.errors.get(channel) else {
            if count > most || count == most && sum < least {
                search.best = (count, sum, search.places.clone());
            }
            return;
        };
        for (column, error) in row.iter().enumerate() {
            let Some(error) = error.filter(|_| !search.used[column]) else {
                continue;
            };
            search.used[column] = true;
            search.places.push(Some(column));
            go(search, count + 1, sum + error);
            search.places.pop();
            search.used[column] = false;
        }
        search.places.push(None);
        go(search, count, sum);
        search.places.pop();
    }
    let mut search = Search {
        errors,
        places: Vec::new(),
        used: vec![false; columns],
        best: (0, f64::INFINITY, vec![None; errors.len()]),
    };
    go(&mut search, 0, 0.0);
    search.best.2
}

/// The smallest error first: for many columns.
fn nearest_first(errors: &[Vec<Option<f64>>], columns: usize) -> Vec<Option<usize>> {
    let mut pairs: Vec<(f64, usize, usize)> = Vec::new();
    for (channel, row) in errors.iter().enumerate() {
        let known = row.iter().enumerate();
        pairs.extend(known.filter_map(|(column, error)| Some(((*error)?, channel, column))));
    }
    pairs.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut places = vec![None; errors.len()];
    let mut used = vec![false; columns];
    for (_, channel, column) in pairs {
        if places[channel].is_none() && !used[column] {
            places[channel] = Some(column);
            used[column] = true;
        }
    }
    places
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn both_ways_find_the_order() {
        let some = |row: [f64; 3]| row.map(|e| (e < 0.2).then_some(e)).to_vec();
        let errors = [
            some([0.1, 0.01, 1.0]),
            some([0.02, 0.05, 1.0]),
            some([1.0, 1.0, 0.15]),
        ];
        let expected = vec![Some(1), Some(0), Some(2)];
        assert_eq!(in_every_order(&errors, 3), expected);
        assert_eq!(nearest_first(&errors, 3), expected);
        // Each by itself would take the first column.
        let errors = [some([0.01, 0.02, 1.0]), some([0.011, 1.0, 1.0])];
        assert_eq!(in_every_order(&errors, 3), [Some(1), Some(0)]);
        assert_eq!(in_every_order(&[], 0), []);
    }
}
