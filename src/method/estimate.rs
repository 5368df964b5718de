//! How many steps lie between two rows, if a method wrote them: its error falls with its
//! step, so the error in the file tells.

use super::linear::Side;
use super::march::{March, Sides};
use super::record::Record;
use super::search::{Search, Variant};
use super::trial::{GLANCE, Trial};

/// More steps from row to row than this are tried only where they are claimed.
const MOST_GUESSED: u64 = 10_000;
/// Steps that a search may take one by one where inputs jump.
const MOST_MARCHED: u64 = 20_000;

/// An error in the file that stands clear of its digits: which row and channel, and how
/// large.
#[derive(Clone, Copy, Debug)]
pub(super) struct Target {
    row: usize,
    place: usize,
    error: f64,
    peak: f64,
}

/// Errors near the start of the file that say how long the steps were.
pub(super) fn targets(record: &Record) -> Vec<Target> {
    let Some(window) = record.windows.first() else {
        return Vec::new();
    };
    let peaks = record.peaks();
    let mut targets = Vec::new();
    let mut rows = 0;
    for row in 1..window.rows() {
        if !record.follows(window, row) || rows >= GLANCE {
            break;
        }
        let before = targets.len();
        for (place, &peak) in peaks.iter().enumerate() {
            let at = row * record.width() + place;
            let error = window.errors[at];
            let noise = window.doubts[at] + 32.0 * record.unit * peak;
            if error.is_finite() && error.abs() > noise && peak > 0.0 {
                targets.push(Target {
                    row,
                    place,
                    error,
                    peak,
                });
            }
        }
        rows += usize::from(targets.len() > before);
    }
    targets
}

impl Search<'_> {
    /// Steps from row to row that would have made the errors in the file.
    pub(super) fn estimate(&self, variant: &Variant, spacing: f64) -> Option<u64> {
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
        for _ in 0..6 {
            if seen.along <= 0.0 {
                return None;
            }
            let wanted = steps as f64 * seen.along.powf(1.0 / order);
            let next = (wanted.round().max(1.0) as u64).min(MOST_GUESSED);
            if next == steps {
                break;
            }
            match self.projected(variant, spacing, next) {
                Some(better) => (seen, steps) = (better, next),
                None => break,
            }
        }
        Some(steps)
    }

    /// The errors of the method at the rows of the targets, laid along those in the file.
    fn projected(&self, variant: &Variant, spacing: f64, steps: u64) -> Option<Projected> {
        let step = spacing / steps as f64;
        let recurrence = variant.recurrence(self.linear, step)?;
        let window = self.record.windows.first()?;
        let last = self.targets.last()?.row;
        if !self
            .linear
            .is_smooth(self.linear.window.0, window.times[last])
            && last as u64 * steps > MOST_MARCHED
        {
            return None;
        }
        let origin = window.times[0];
        let memory = recurrence.back() as u64 - 1;
        let start = self.linear.start.clone();
        let mut known = vec![start.clone()];
        if memory > 0 {
            let reference = self.reference(step)?;
            let mut first = March::new(&reference, self.linear, Sides::After, [start], origin, 0);
            for _ in 0..memory {
                known.push(first.step().to_vec());
            }
        }
        let size = self.linear.size();
        let trial = Trial::new(self.linear, recurrence, steps, self.record.unit);
        let mut stack: Vec<f64> = known.iter().flatten().copied().collect();
        let mut done = memory;
        let (mut own, mut both, mut largest) = (0.0, 0.0, 0.0f64);
        let mut targets = self.targets.iter().peekable();
        for row in 1..=last {
            let wanted = row as u64 * steps;
            if wanted > done {
                let time = origin + done as f64 * step;
                stack = trial.advance(&stack, time, wanted - done, Sides::After);
                done = wanted;
            }
            let state = match known.get(wanted as usize) {
                Some(known) if wanted < done => &known[..],
                _ => &stack[stack.len() - size..],
            };
            while let Some(target) = targets.next_if(|target| target.row == row) {
                let channel = self.record.channels[target.place];
                let at = row * self.record.width() + target.place;
                let exact = window.values[at] - window.errors[at];
                let time = window.times[row];
                let value = self.linear.observe(channel, state, time, Side::After, 0.0);
                let error = (value - exact) / target.peak;
                if !error.is_finite() {
                    return None;
                }
                own += error * error;
                both += error * target.error / target.peak;
                largest = largest.max(error.abs());
            }
        }
        (both != 0.0).then(|| Projected {
            along: own / both,
            size: largest,
        })
    }
}

/// The errors of a method beside those of the file.
struct Projected {
    /// Its error in units of the file's, along the file's.
    along: f64,
    /// Its largest error relative to the peak.
    size: f64,
}
