//! What is kept of a file to ask it for its method: windows of consecutive rows with what
//! their digits resolve. Long files are judged on windows that cover the start, the end and
//! samples of the rest, so that the cost does not grow with their length.

use super::linear::{Linear, Signal};

/// Rows of one file, in the units of the case.
#[derive(Clone, Debug, Default)]
pub struct Record {
    /// The channels that the file holds: states by place, outputs after them.
    pub channels: Vec<usize>,
    /// Distance of the rows where it is the same throughout, and how far that is known.
    pub spacing: Option<(f64, f64)>,
    /// Unit roundoff of the arithmetic that the values show: that of `f64`, or of `f32`
    /// where every value is one.
    pub unit: f64,
    /// Windows of consecutive rows; the first begins with the first row.
    pub windows: Vec<Window>,
}

/// Consecutive rows.
#[derive(Clone, Debug, Default)]
pub struct Window {
    /// Number of the first row, counted from zero.
    pub first: u64,
    /// Time stamps.
    pub times: Vec<f64>,
    /// How far the stamps are known.
    pub time_doubts: Vec<f64>,
    /// Values row by row, in the order of [`Record::channels`]; not a number where there is
    /// none.
    pub values: Vec<f64>,
    /// `written - exact`, likewise.
    pub errors: Vec<f64>,
    /// What the digits of the values resolve, likewise.
    pub doubts: Vec<f64>,
}

/// Rows of a window that follow each other at the spacing of the file, with no jump of an
/// input between or at them.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Piece {
    /// The window.
    pub window: usize,
    /// Its first row in the window.
    pub start: usize,
    /// Number of rows.
    pub rows: usize,
}

/// Rows of the window at the start and of each later window, and about how many of those there
/// are.
pub const START_ROWS: u64 = 800;
/// Rows of a later window; the last one ends with the last row.
pub const LATER_ROWS: u64 = 48;
const LATER_WINDOWS: u64 = 16;

/// From the start of one later window to that of the next: a power of two, so that the windows of
/// a long file are among those of its beginning, and can be kept before its length is known.
fn stride(rows: u64) -> u64 {
    let rest = rows.saturating_sub(START_ROWS);
    rest.div_ceil(LATER_WINDOWS).next_power_of_two().max(64)
}

/// The first row from this one on that may belong to a window, however many rows follow.
pub fn next_wanted(row: u64) -> u64 {
    let all = START_ROWS + LATER_ROWS * LATER_WINDOWS;
    if row < all {
        return row;
    }
    let stride = stride(row + 1);
    let within = (row - START_ROWS) % stride;
    if within < LATER_ROWS {
        row
    } else {
        row - within + stride
    }
}

/// The windows of a file with so many rows: first row and number of rows.
pub fn windows(rows: u64) -> Vec<(u64, u64)> {
    let all = START_ROWS + LATER_ROWS * LATER_WINDOWS;
    if rows <= all {
        return vec![(0, rows)];
    }
    let last = rows - LATER_ROWS;
    let stride = stride(rows);
    let later = (1..).map(|number| START_ROWS + number * stride);
    let later = later.take_while(|first| first + LATER_ROWS <= last);
    let ends = [(0, START_ROWS), (last, LATER_ROWS)];
    let mut windows = vec![ends[0]];
    windows.extend(later.map(|first| (first, LATER_ROWS)));
    windows.push(ends[1]);
    windows
}

impl Window {
    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.times.len()
    }
}

impl Record {
    /// Number of channels.
    pub fn width(&self) -> usize {
        self.channels.len()
    }

    /// Place of every state among the channels, where all are there.
    pub fn states(&self, size: usize) -> Option<Vec<usize>> {
        let place = |state: usize| self.channels.iter().position(|&c| c == state);
        (0..size).map(place).collect()
    }

    /// The same rows as those of a program in single precision, where their digits leave
    /// that open: nine at most, and no value further from an `f32` than they resolve.
    pub fn in_single(&self) -> Option<Record> {
        let single = f64::from(f32::EPSILON) / 2.0;
        let open = |(value, doubt): (&f64, &f64)| {
            let (value, doubt) = (*value, *doubt);
            let away = (f64::from(value as f32) - value).abs();
            !value.is_finite() || (doubt >= 4e-10 * value.abs() && away <= 1.01 * doubt)
        };
        let all = self.windows.iter().all(|window| {
            let mut pairs = window.values.iter().zip(&window.doubts);
            pairs.all(|pair| *pair.0 == 0.0 || open(pair))
        });
        (self.unit < single && all).then(|| Record {
            unit: single,
            ..self.clone()
        })
    }

    /// The same without its first rows.
    pub fn from_row(&self, row: usize) -> Record {
        let mut rest = self.clone();
        if let Some(window) = rest.windows.first_mut() {
            let row = row.min(window.rows());
            window.first += row as u64;
            window.times.drain(..row);
            window.time_doubts.drain(..row);
            let values = row * self.channels.len();
            for list in [&mut window.values, &mut window.errors, &mut window.doubts] {
                list.drain(..values);
            }
        }
        rest
    }

    /// The same rows with the exact values in place of those written.
    pub(super) fn solution(&self) -> Record {
        let mut solution = self.clone();
        for window in &mut solution.windows {
            let pairs = window.values.iter_mut().zip(&mut window.errors);
            pairs.for_each(|(value, error)| *value -= std::mem::take(error));
        }
        solution
    }

    /// The states that are written in a row, by place.
    pub(super) fn states_at<'a>(
        &'a self,
        window: &'a Window,
        row: usize,
        size: usize,
    ) -> impl Iterator<Item = (usize, f64)> + 'a {
        let line = &window.values[row * self.width()..][..self.width()];
        let pairs = self.channels.iter().copied().zip(line.iter().copied());
        pairs.filter(move |(channel, value)| *channel < size && value.is_finite())
    }

    /// The largest magnitude of each channel.
    pub fn peaks(&self) -> Vec<f64> {
        let mut peaks = vec![0.0f64; self.width()];
        for window in &self.windows {
            for row in window.values.chunks_exact(self.width().max(1)) {
                for (peak, value) in peaks.iter_mut().zip(row) {
                    if value.is_finite() {
                        *peak = peak.max(value.abs());
                    }
                }
            }
        }
        peaks
    }

    /// Only every so many rows, counted from the first of the file: those at the steps of
    /// a program that has interpolated the others.
    pub fn every(&self, count: u64) -> Record {
        let width = self.width();
        let window = |window: &Window| {
            let mut thinned = Window {
                first: window.first.div_ceil(count),
                ..Window::default()
            };
            for row in 0..window.rows() {
                if (window.first + row as u64).is_multiple_of(count) {
                    thinned.times.push(window.times[row]);
                    thinned.time_doubts.push(window.time_doubts[row]);
                    let line = row * width..(row + 1) * width;
                    thinned.values.extend(&window.values[line.clone()]);
                    thinned.errors.extend(&window.errors[line.clone()]);
                    thinned.doubts.extend(&window.doubts[line]);
                }
            }
            thinned
        };
        Record {
            channels: self.channels.clone(),
            spacing: self
                .spacing
                .map(|(h, doubt)| (h * count as f64, doubt * count as f64)),
            unit: self.unit,
            windows: self.windows.iter().map(window).collect(),
        }
    }

    /// How far the channels move within a piece, in units of what their digits resolve.
    pub fn movement(&self, piece: &Piece) -> f64 {
        let (window, width) = (&self.windows[piece.window], self.width());
        let rows = piece.start..piece.start + piece.rows;
        let moved = |place: usize| {
            let at = |row: usize| row * width + place;
            let start = window.values[at(piece.start)];
            let far = rows.clone().map(|row| {
                let gap = (window.values[at(row)] - start).abs();
                gap / window.doubts[at(row)].max(f64::MIN_POSITIVE)
            });
            far.fold(0.0, f64::max)
        };
        (0..width).map(moved).sum()
    }

    /// Pieces without jumps, complete rows only.
    pub fn pieces(&self, linear: &Linear) -> Vec<Piece> {
        let mut pieces = Vec::new();
        for (index, window) in self.windows.iter().enumerate() {
            let mut start = None;
            for row in 0..window.rows() {
                let whole = self.is_whole(window, row) && !touches(linear, window, row, self);
                let follows = row == 0 || self.follows(window, row);
                if let Some(begin) = start
                    && !(whole && follows && !jumps_between(linear, window, row))
                {
                    pieces.push(Piece {
                        window: index,
                        start: begin,
                        rows: row - begin,
                    });
                    start = None;
                }
                if whole && start.is_none() {
                    start = Some(row);
                }
            }
            if let Some(begin) = start {
                pieces.push(Piece {
                    window: index,
                    start: begin,
                    rows: window.rows() - begin,
                });
            }
        }
        pieces.retain(|piece| piece.rows > 1);
        pieces
    }

    fn is_whole(&self, window: &Window, row: usize) -> bool {
        let width = self.width();
        window.values[row * width..][..width]
            .iter()
            .all(|v| v.is_finite())
    }

    /// True where the row comes one spacing after the one before, or the rows are not
    /// evenly spaced at all.
    pub fn follows(&self, window: &Window, row: usize) -> bool {
        let gap = window.times[row] - window.times[row - 1];
        match self.spacing {
            None => gap > 0.0,
            Some((spacing, doubt)) => {
                let stamps = window.time_doubts[row] + window.time_doubts[row - 1];
                let rounding = 8.0 * f64::EPSILON * window.times[row].abs();
                (gap - spacing).abs() <= doubt + 1.01 * stamps + rounding + 1e-9 * spacing
            }
        }
    }
}

/// How near to a jump a row counts as at it: sums of many steps miss it by their rounding.
fn nearness(window: &Window, row: usize) -> f64 {
    let gap = if row > 0 {
        window.times[row] - window.times[row - 1]
    } else if window.rows() > 1 {
        window.times[1] - window.times[0]
    } else {
        0.0
    };
    (1e-6 * gap.abs()).max(window.time_doubts[row])
}

fn touches(linear: &Linear, window: &Window, row: usize, record: &Record) -> bool {
    let near = nearness(window, row).max(record.spacing.map_or(0.0, |(h, _)| 1e-6 * h));
    linear.jumps_within(window.times[row] - near, window.times[row] + near)
}

fn jumps_between(linear: &Linear, window: &Window, row: usize) -> bool {
    row > 0 && linear.jumps_within(window.times[row - 1], window.times[row])
}

impl Linear {
    /// True where an input jumps or has a kink within a closed interval of time.
    pub fn jumps_within(&self, from: f64, to: f64) -> bool {
        self.signals
            .iter()
            .any(|signal| signal.jumps_within(from, to))
    }
}

impl Linear {
    /// True where no input jumps after a time up to another one.
    pub fn is_smooth(&self, from: f64, to: f64) -> bool {
        !self.jumps_within(from.next_up(), to)
    }
}

impl Linear {
    /// The first jump or kink of an input after a time.
    pub fn next_jump(&self, time: f64) -> Option<f64> {
        let next = self
            .signals
            .iter()
            .filter_map(|signal| signal.next_jump(time));
        next.min_by(f64::total_cmp)
    }
}

impl Signal {
    fn next_jump(&self, time: f64) -> Option<f64> {
        match self {
            Signal::Held(_, edges) => {
                let next = edges.partition_point(|&(at, _)| at <= time);
                edges.get(next).map(|&(at, _)| at)
            }
            Signal::Pulses(_, first, width, period, count) => {
                let next = |offset: f64| {
                    let mut number = ((time - offset) / period).floor().max(0.0);
                    while offset + number * period <= time {
                        number += 1.0;
                    }
                    (number < *count).then_some(offset + number * period)
                };
                let edges = [next(*first), next(first + width)];
                edges.into_iter().flatten().min_by(f64::total_cmp)
            }
            Signal::Lines(knots) => {
                let next = knots.partition_point(|&(at, _)| at <= time);
                knots.get(next).map(|&(at, _)| at)
            }
            Signal::Ramp(_, at) => (*at > time).then_some(*at),
            _ => None,
        }
    }

    fn jumps_within(&self, from: f64, to: f64) -> bool {
        match self {
            Signal::Held(_, edges) => {
                let next = edges.partition_point(|&(at, _)| at < from);
                edges.get(next).is_some_and(|&(at, _)| at <= to)
            }
            Signal::Pulses(_, first, width, period, count) => {
                // Every edge is a rising or a falling one of some pulse.
                let hits = |offset: f64| {
                    let number = ((from - offset) / period).ceil().max(0.0);
                    number < *count && offset + number * period <= to
                };
                hits(*first) || hits(first + width)
            }
            // Kinks: the value goes on, its slope does not.
            Signal::Lines(knots) => {
                let next = knots.partition_point(|&(at, _)| at < from);
                knots.get(next).is_some_and(|&(at, _)| at <= to)
            }
            Signal::Ramp(_, at) => (from..=to).contains(at),
            _ => false,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::Library;

    /// One channel of ones at these times.
    fn record(times: &[f64], time_doubt: f64, spacing: Option<(f64, f64)>) -> Record {
        Record {
            channels: vec![0],
            spacing,
            unit: f64::EPSILON / 2.0,
            windows: vec![Window {
                first: 0,
                times: times.to_vec(),
                time_doubts: vec![time_doubt; times.len()],
                values: vec![1.0; times.len()],
                errors: vec![0.0; times.len()],
                doubts: vec![0.0; times.len()],
            }],
        }
    }

    #[test]
    fn rows_of_every_later_window_are_wanted() {
        for rows in [1500, 1569, 1570, 2000, 5000, 20_000, 70_000] {
            let windows = windows(rows);
            let later = windows.len() - 1;
            for &(first, count) in windows[..later.max(1)].iter() {
                assert!(
                    (first..first + count).all(|row| next_wanted(row) == row),
                    "{rows}"
                );
            }
        }
        // 3121 rows after the first 800 are 196 for each of sixteen windows: 256 apart. The
        // twelfth begins at 800 + 12 * 256 = 3872 with 48 rows.
        assert_eq!([3871, 3872, 3919].map(next_wanted), [3872, 3872, 3919]);
        assert_eq!([3920, 4127].map(next_wanted), [4128, 4128]);
        // The eleventh is the last that ends before the last 48 of 3921 rows begin.
        let later = (1..12).map(|number| (800 + 256 * number, 48));
        let wanted = [(0, 800)].into_iter().chain(later).chain([(3873, 48)]);
        assert_eq!(windows(3921), wanted.collect::<Vec<_>>());
    }

    #[test]
    fn rows_follow_each_other_within_what_stamps_spacing_and_sums_may_be_off() {
        let follows = |from: f64, gap: f64, time_doubt: f64, doubt: f64| {
            let record = record(&[from, from + gap], time_doubt, Some((1.0, doubt)));
            record.follows(&record.windows[0], 1)
        };
        // Two stamps of 0.005 each, and a hundredth of them.
        assert!(follows(0.0, 1.01, 0.005, 0.0) && !follows(0.0, 1.0102, 0.005, 0.0));
        assert!(follows(0.0, 1.009, 0.0, 0.01) && !follows(0.0, 0.989, 0.0, 0.01));
        assert!(follows(0.0, 1.019, 0.005, 0.01) && !follows(0.0, 1.021, 0.005, 0.01));
        // Eight roundings of 1e9, which is 1.8e-6; a part in 1e9 of the spacing.
        assert!(follows(1e9, 1.0 + 1.5e-6, 0.0, 0.0) && !follows(1e9, 1.0 + 2.1e-6, 0.0, 0.0));
        assert!(follows(0.0, 1.0 + 0.9e-9, 0.0, 0.0) && !follows(0.0, 1.0 + 1.1e-9, 0.0, 0.0));
    }

    #[test]
    fn pieces_end_before_rows_at_a_jump() {
        // A pulse from 600 s to 1500 s.
        let case = Library::new().load("thermal/cold-room-defrost", &Default::default());
        let linear = Linear::new(&case.unwrap());
        let pieces = |spacing: f64, rows: u32| -> Vec<(usize, usize)> {
            let times: Vec<f64> = (0..rows).map(|k| spacing * f64::from(k)).collect();
            let record = record(&times, 0.0, Some((spacing, 0.0)));
            let pieces = record.pieces(&linear);
            let long = pieces.iter().filter(|piece| piece.rows > 1);
            long.map(|piece| (piece.start, piece.rows)).collect()
        };
        assert_eq!(pieces(300.0, 9), [(0, 2), (3, 2), (6, 3)]);
        assert_eq!(pieces(400.0, 9), [(0, 2), (2, 2), (4, 5)]);
    }
}
