//! How many steps lie between two rows, if a method wrote them: its error falls with its
//! step, so the error in the file tells.

use super::exponential::exponential;
use super::leg::Leg;
use super::linear::{Linear, Side};
use super::march::{March, Sides};
use super::powers::identity;
use super::record::{Piece, Record};
use super::search::Search;
use super::trial::{GLANCE, Room, Trial};
use super::variant::Variant;

/// More steps from row to row than this are tried only where they are claimed.
const MOST_GUESSED: u64 = 10_000;
/// Steps that a search may take one by one where inputs jump.
const MOST_MARCHED: u64 = 20_000;
/// Rows that are searched for errors.
const MOST_ROWS: usize = 400;

/// Errors in the file that say how long its steps were: what the rows have gone astray since
/// a row that a method is started from.
#[derive(Clone, Debug, Default)]
pub(super) struct Targets {
    window: usize,
    /// The row that is started from, in the window.
    begin: usize,
    /// The state there.
    start: Vec<f64>,
    /// How many rows on the points are.
    rows: Vec<usize>,
    points: Vec<Target>,
}

/// One of them: which of the rows, which channel, how large and how far it is known.
#[derive(Clone, Copy, Debug)]
struct Target {
    row: usize,
    place: usize,
    error: f64,
    noise: f64,
    weight: f64,
    exact: f64,
    peak: f64,
}

impl Targets {
    /// From the stretch that shows errors best where every state is written: a row there is
    /// a start, whatever has happened before it, at jumps above all. Else from the start of
    /// the file.
    pub(super) fn new(linear: &Linear, record: &Record, pieces: &[Piece]) -> Targets {
        let Some((spacing, _)) = record.spacing else {
            return Targets::default();
        };
        let size = linear.size();
        let onward = record
            .states(size)
            .zip(exponential(&linear.matrix.dense(), spacing));
        let Some((places, onward)) = onward else {
            let start = Targets {
                start: linear.start.clone(),
                ..Targets::default()
            };
            return start.with_points(record, MOST_ROWS, |errors| {
                (errors, vec![0.0; record.width()])
            });
        };
        let of_piece = |piece: &Piece| {
            let window = &record.windows[piece.window];
            let at = |values: &[f64], row: usize| -> Vec<f64> {
                let line = &values[row * record.width()..];
                places.iter().map(|&place| line[place]).collect()
            };
            let mut start = at(&window.values, piece.start);
            let mut error = at(&window.errors, piece.start);
            let mut doubt = at(&window.doubts, piece.start);
            let first = window.first == 0 && piece.start == 0;
            if first && error.iter().zip(&doubt).all(|(e, d)| e.abs() <= *d) {
                start = linear.start.clone();
                error.fill(0.0);
                doubt.fill(0.0);
            }
            let targets = Targets {
                window: piece.window,
                begin: piece.start,
                start,
                ..Targets::default()
            };
            let mut power = identity(size);
            let rows = piece.rows.min(MOST_ROWS);
            targets.with_points(record, rows, |mut errors| {
                power = onward.past[0].product(&power);
                // Less what has come of the error at the start.
                let (error, doubt) = (power.apply(&error), power.map(f64::abs).apply(&doubt));
                let mut doubts = vec![0.0; record.width()];
                for (state, &place) in places.iter().enumerate() {
                    errors[place] -= error[state];
                    doubts[place] = doubt[state];
                }
                (errors, doubts)
            })
        };
        let all = pieces.iter().map(of_piece);
        let best = all.max_by(|a, b| a.clearness().total_cmp(&b.clearness()));
        best.unwrap_or_default()
    }

    /// `since` takes the errors of row after row, and gives those that have come about since
    /// the start with what is in doubt about them.
    fn with_points(
        mut self,
        record: &Record,
        rows: usize,
        mut since: impl FnMut(Vec<f64>) -> (Vec<f64>, Vec<f64>),
    ) -> Targets {
        let Some(window) = record.windows.get(self.window) else {
            return self;
        };
        let (peaks, width) = (record.peaks(), record.width());
        let last = window.rows().min(self.begin + rows);
        let stride = rows / GLANCE + 1;
        for row in self.begin + 1..last {
            if !record.follows(window, row) {
                break;
            }
            let line = row * width..(row + 1) * width;
            let (errors, doubts) = since(window.errors[line.clone()].to_vec());
            let rows_on = row - self.begin;
            if rows_on > GLANCE && !rows_on.is_multiple_of(stride) {
                continue;
            }
            for (place, &peak) in peaks.iter().enumerate() {
                let at = line.start + place;
                let (error, exact) = (errors[place], window.values[at] - errors[place]);
                let noise = window.doubts[at] + doubts[place] + 32.0 * record.unit * peak;
                if error.is_finite() && peak > 0.0 {
                    if self.rows.last() != Some(&rows_on) {
                        self.rows.push(rows_on);
                    }
                    self.points.push(Target {
                        row: self.rows.len() - 1,
                        place,
                        error,
                        noise,
                        weight: noise.powi(-2),
                        exact,
                        peak,
                    });
                }
            }
        }
        self
    }

    /// The largest error in terms of what its digits resolve.
    pub(super) fn clearness(&self) -> f64 {
        let clear = self
            .points
            .iter()
            .map(|target| target.error.abs() / target.noise);
        clear.fold(0.0, f64::max)
    }
}

impl Search<'_> {
    /// Numbers of steps from row to row that would have made the errors in the file: the
    /// best one with those about it that the digits leave open.
    pub(super) fn estimate(&self, variant: &Variant, spacing: f64) -> Option<Estimate> {
        if self.targets.clearness() <= 1.0 {
            return None;
        }
        let order = f64::from(variant.method.order);
        // A first number of steps at which the method stays near the solution.
        let mut steps = 1u64;
        let mut seen = loop {
            match self.projected(variant, spacing, steps) {
                Some(seen) if seen.size < 0.5 => break seen,
                _ if steps > 1000 => return None,
                _ => steps *= 4,
            }
        };
        for _ in 0..9 {
            // Long steps may err the other way.
            let wanted = if seen.along > 0.0 {
                steps as f64 * seen.along.powf(1.0 / order)
            } else {
                2.0 * steps as f64
            };
            let next = (wanted.round().max(1.0) as u64).min(MOST_GUESSED);
            if next == steps {
                break;
            }
            match self.projected(variant, spacing, next) {
                Some(better) => (seen, steps) = (better, next),
                None => break,
            }
        }
        if seen.along <= 0.0 {
            return None;
        }
        let open = steps as f64 * (seen.doubt / order).min(1.0);
        Some(Estimate {
            steps,
            open: open.ceil().max(1.0) as u64,
        })
    }

    /// The errors of the method at the rows of the targets, laid along those in the file.
    fn projected(&self, variant: &Variant, spacing: f64, steps: u64) -> Option<Projected> {
        let step = spacing / steps as f64;
        let trial = self.trial(variant, step, steps)?;
        let targets = &self.targets;
        let window = self.sheet.record.windows.get(targets.window)?;
        let last = *targets.rows.last()?;
        let origin = window.times[targets.begin];
        if !self
            .linear
            .is_smooth(origin, window.times[targets.begin + last])
            && last as u64 * steps > MOST_MARCHED
        {
            return None;
        }
        let course = trial
            .leg
            .course(&targets.start, origin, &targets.rows, || {
                self.course(&trial, origin)
            })?;
        let size = self.linear.size();
        let (mut own, mut both, mut largest) = (0.0f64, 0.0f64, 0.0f64);
        for target in &targets.points {
            let state = &course[target.row * size..][..size];
            let channel = self.sheet.record.channels[target.place];
            let time = window.times[targets.begin + targets.rows[target.row]];
            let value = self.linear.observe(channel, state, time, Side::After, 0.0);
            let error = value - target.exact;
            if !error.is_finite() {
                return None;
            }
            own += target.weight * error * error;
            both += target.weight * error * target.error;
            largest = largest.max(error.abs() / target.peak);
        }
        (both != 0.0).then(|| Projected {
            along: own / both,
            // The noise of single rows is independent of each other.
            doubt: 3.0 * own.sqrt() / both.abs(),
            size: largest,
        })
    }

    /// The states that a method comes to at the rows of the targets.
    fn course(&self, trial: &Trial, origin: f64) -> Option<Vec<f64>> {
        let (size, targets) = (self.linear.size(), &self.targets);
        let Leg {
            recurrence, steps, ..
        } = &*trial.leg;
        let memory = recurrence.back() as u64 - 1;
        let start = targets.start.clone();
        let mut known = vec![start.clone()];
        if memory > 0 {
            let reference = self.reference(recurrence.step)?;
            let reference = &reference.recurrence;
            let mut first = March::new(reference, self.linear, Sides::After, [start], origin, 0);
            for _ in 0..memory {
                known.push(first.step().to_vec());
            }
        }
        let mut stack: Vec<f64> = known.iter().flatten().copied().collect();
        let mut room = Room::default();
        let mut done = memory;
        let mut course = Vec::with_capacity(targets.rows.len() * size);
        for row in &targets.rows {
            let wanted = *row as u64 * steps;
            if wanted > done {
                let time = origin + done as f64 * recurrence.step;
                trial.advance(&mut room, &mut stack, time, wanted - done, Sides::After);
                done = wanted;
            }
            course.extend_from_slice(match known.get(wanted as usize) {
                Some(known) if wanted < done => known,
                _ => &stack[stack.len() - size..],
            });
        }
        Some(course)
    }
}

/// The errors of a method beside those of the file.
struct Projected {
    /// Its error in units of the file's, along the file's.
    along: f64,
    /// What digits and roundings can make of that, relative to it.
    doubt: f64,
    /// Its largest error relative to the peak.
    size: f64,
}

/// How many steps lie between two rows, if a method wrote them.
#[derive(Clone, Copy, Debug)]
pub(super) struct Estimate {
    pub(super) steps: u64,
    /// So many more or less are as likely.
    pub(super) open: u64,
}

impl Estimate {
    pub(super) fn admits(&self, steps: u64) -> bool {
        steps.abs_diff(self.steps) <= self.open
    }

    /// The numbers to try.
    pub(super) fn counts(&self) -> impl Iterator<Item = u64> + '_ {
        let shares = [0.25, 0.5, 1.0].map(|share| (self.open as f64 * share).ceil() as u64);
        let about = shares
            .into_iter()
            .flat_map(|far| [self.steps.saturating_sub(far), self.steps + far]);
        about.chain([self.steps.saturating_sub(1), self.steps, self.steps + 1])
    }
}
