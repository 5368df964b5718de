//! Points for a plot, gathered while the rows go by: the window is cut into equal
//! stretches, and of each the rows stay that a thinner plot would hide — the smallest and
//! the largest value, the largest error and the largest part of the limit. However long the
//! file is, the worst row of all is among them.

use crate::number::Double;

/// Stretches of the window: two for every few pixels of a plot.
const STRETCHES: usize = 120;

/// One row of one channel, in the units of the case.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Traced {
    /// Its time.
    pub time: f64,
    /// The value as written.
    pub written: f64,
    /// `written - exact`.
    pub error: f64,
    /// What its digits resolve: as their pattern says, and in full.
    pub doubts: [f64; 2],
}

/// Gathers the points of one channel.
#[derive(Clone, Debug)]
pub(super) struct Trace {
    from: f64,
    span: f64,
    stretches: Vec<Option<Stretch>>,
}

#[derive(Clone, Copy, Debug)]
struct Stretch {
    first: Traced,
    smallest: Traced,
    largest: Traced,
    worst: Traced,
    /// With the part of the limit that it uses.
    decisive: (Traced, f64),
    last: Traced,
}

impl Trace {
    pub(super) fn new(from: Double, to: Double) -> Trace {
        Trace {
            from: from.to_f64(),
            span: (to - from).to_f64(),
            stretches: vec![None; STRETCHES],
        }
    }

    /// `used` is the part of the limit that the error uses, up to a factor that all rows share.
    pub(super) fn add(&mut self, row: Traced, used: f64) {
        let share = (row.time - self.from) / self.span;
        let place = (share * STRETCHES as f64).clamp(0.0, STRETCHES as f64 - 1.0) as usize;
        match &mut self.stretches[place] {
            Some(stretch) => stretch.add(row, used),
            empty => {
                *empty = Some(Stretch {
                    first: row,
                    smallest: row,
                    largest: row,
                    worst: row,
                    decisive: (row, used),
                    last: row,
                });
            }
        }
    }

    /// Takes in the rows after these.
    pub(super) fn join(&mut self, next: &Trace) {
        for (own, next) in self.stretches.iter_mut().zip(&next.stretches) {
            match (own, next) {
                (_, None) => {}
                (Some(own), Some(next)) => own.join(next),
                (own, Some(next)) => *own = Some(*next),
            }
        }
    }

    /// In the order of time.
    pub(super) fn conclude(self) -> Vec<Traced> {
        let mut points = Vec::new();
        for stretch in self.stretches.into_iter().flatten() {
            let mut rows = [
                stretch.first,
                stretch.smallest,
                stretch.largest,
                stretch.worst,
                stretch.decisive.0,
                stretch.last,
            ];
            rows.sort_by(|a, b| a.time.total_cmp(&b.time));
            for row in rows {
                if points.last().is_none_or(|last: &Traced| *last != row) {
                    points.push(row);
                }
            }
        }
        points
    }
}

impl Stretch {
    fn join(&mut self, next: &Stretch) {
        for row in [next.smallest, next.largest, next.worst] {
            self.add(row, 0.0);
        }
        self.add(next.decisive.0, next.decisive.1);
        self.last = next.last;
    }

    fn add(&mut self, row: Traced, used: f64) {
        if row.written < self.smallest.written {
            self.smallest = row;
        }
        if row.written > self.largest.written {
            self.largest = row;
        }
        if row.error.abs() > self.worst.error.abs() {
            self.worst = row;
        }
        if used > self.decisive.1 {
            self.decisive = (row, used);
        }
        self.last = row;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn row_of_limit(time: f64) -> bool {
        time == 0.12345
    }

    /// One bad row in a hundred thousand and the extremes of a spike stay.
    #[test]
    fn extremes_stay_however_long_the_file_is() {
        let mut trace = Trace::new(Double::from(0.0), Double::from(1.0));
        for row in 0..100_000 {
            let time = f64::from(row) / 1e5;
            let odd = row == 54_321;
            let row = Traced {
                time,
                written: if odd { 7.0 } else { time },
                error: if odd { -7.0 } else { 1e-9 * time },
                doubts: [0.0; 2],
            };
            // The tightest limit is elsewhere.
            trace.add(row, if row_of_limit(row.time) { 9.0 } else { 1.0 });
        }
        let points = trace.conclude();
        assert!(points.iter().any(|p| row_of_limit(p.time)));
        assert!(points.len() <= 6 * STRETCHES, "{}", points.len());
        assert!(points.iter().any(|p| p.error == -7.0 && p.written == 7.0));
        assert!(points.windows(2).all(|pair| pair[0].time < pair[1].time));
        assert_eq!(points[0].time, 0.0);
        assert_eq!(points[points.len() - 1].time, 0.99999);
    }

    fn row(time: f64, written: f64, error: f64) -> Traced {
        Traced {
            time,
            written,
            error,
            doubts: [0.0; 2],
        }
    }

    #[test]
    fn rows_of_one_stretch_are_its_first_last_and_extremes() {
        // The window from 2 to 14 has stretches of a tenth; each score has its own row.
        let rows = [
            (row(2.01, 5.0, 0.1), 1.0),
            (row(2.02, 9.0, 0.1), 1.0),
            (row(2.03, 5.0, 0.1), 1.0),
            (row(2.04, 1.0, 0.1), 1.0),
            (row(2.05, 5.0, -3.0), 1.0),
            (row(2.06, 5.0, 0.1), 4.0),
            (row(2.07, 5.0, 0.1), 1.0),
            (row(2.08, 5.0, 0.1), 1.0),
            (row(2.11, 5.0, 0.1), 1.0),
            (row(14.0, 5.0, 0.1), 1.0),
            (row(14.5, 5.0, 0.1), 1.0),
        ];
        let expected = [2.01, 2.02, 2.04, 2.05, 2.06, 2.08, 2.11, 14.0, 14.5];
        let times =
            |trace: Trace| -> Vec<f64> { trace.conclude().iter().map(|p| p.time).collect() };
        for cut in 0..rows.len() {
            let mut parts = [(); 2].map(|()| Trace::new(Double::from(2.0), Double::from(14.0)));
            for (place, (row, used)) in rows.iter().enumerate() {
                parts[usize::from(place >= cut)].add(*row, *used);
            }
            let [mut whole, next] = parts;
            whole.join(&next);
            assert_eq!(times(whole), expected, "{cut}");
        }
    }
}
