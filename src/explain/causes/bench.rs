//! Trajectories to lay beside a file: what the model, possibly with a fault put into it,
//! would have looked like, solved exactly or stepped by a method.

use nalgebra::DMatrix;

use crate::method::{
    Coefficients, Drive, Linear, Method, Ranks, Reading, Record, Recurrence, Room, Scheme, Side,
    Sides, Trial, rank_orders,
};

/// The rows of a file that are looked at.
#[derive(Clone, Debug)]
pub(super) struct Rows {
    /// The channels, as places in the case.
    pub channels: Vec<usize>,
    /// Number of each row.
    pub numbers: Vec<u64>,
    pub times: Vec<f64>,
    /// Row by row.
    pub written: Vec<f64>,
    pub exact: Vec<f64>,
    /// What digits and rounding allow.
    pub allowed: Vec<f64>,
    /// Largest exact value of each channel.
    pub peaks: Vec<f64>,
    pub spacing: Option<f64>,
    /// Every value is one of single precision.
    pub single: bool,
}

/// Rows further from the start than this are not looked at: methods have to run there.
const MOST_ROWS: u64 = 2_000_000;

impl Rows {
    pub(super) fn new(record: &Record) -> Rows {
        let width = record.width();
        let mut rows = Rows {
            channels: record.channels.clone(),
            numbers: Vec::new(),
            times: Vec::new(),
            written: Vec::new(),
            exact: Vec::new(),
            allowed: Vec::new(),
            peaks: vec![0.0; width],
            spacing: record.spacing.map(|(spacing, _)| spacing),
            single: record.unit > f64::EPSILON,
        };
        for window in &record.windows {
            for row in 0..window.rows() {
                let number = window.first + row as u64;
                let line = row * width..(row + 1) * width;
                let values = &window.values[line.clone()];
                if number > MOST_ROWS || values.iter().any(|v| !v.is_finite()) {
                    continue;
                }
                rows.numbers.push(number);
                rows.times.push(window.times[row]);
                rows.written.extend(values);
                let errors = &window.errors[line.clone()];
                rows.exact
                    .extend(values.iter().zip(errors).map(|(v, e)| v - e));
                rows.allowed.extend(&window.doubts[line]);
            }
        }
        for (at, exact) in rows.exact.iter().enumerate() {
            let peak = &mut rows.peaks[at % width.max(1)];
            *peak = peak.max(exact.abs());
        }
        // Roundings of a program, as many as there were rows.
        for at in 0..rows.allowed.len() {
            let number = rows.numbers[at / width] as f64;
            let largest = rows.peaks[at % width].max(rows.written[at].abs());
            rows.allowed[at] += (128.0 + 8.0 * number) * f64::EPSILON * largest;
        }
        rows
    }

    pub(super) fn width(&self) -> usize {
        self.channels.len()
    }

    pub(super) fn len(&self) -> usize {
        self.times.len()
    }

    /// What the first row leaves open of a state, where it is the start.
    pub(super) fn open_at_start(&self, state: usize) -> f64 {
        let place = self.channels.iter().position(|&channel| channel == state);
        let place = place.filter(|_| self.numbers.first() == Some(&0));
        place.map_or(0.0, |place| self.allowed[place])
    }

    /// One channel of some values.
    pub(super) fn column<'a>(
        &self,
        values: &'a [f64],
        channel: usize,
    ) -> impl Iterator<Item = f64> + 'a + use<'a> {
        values
            .iter()
            .skip(channel)
            .step_by(self.width().max(1))
            .copied()
    }

    /// Fewer rows, for looking for a number.
    pub(super) fn few(&self) -> Rows {
        let early = (0..self.len()).take_while(|&row| self.numbers[row] < 300);
        let count = early.count();
        let stride = (count / 30).max(1);
        let keep: Vec<usize> = (0..count)
            .filter(|row| row % stride == 0 || *row < 24)
            .collect();
        let width = self.width();
        let pick = |values: &[f64]| -> Vec<f64> {
            let lines = keep
                .iter()
                .flat_map(|&row| &values[row * width..(row + 1) * width]);
            lines.copied().collect()
        };
        Rows {
            channels: self.channels.clone(),
            numbers: keep.iter().map(|&row| self.numbers[row]).collect(),
            times: keep.iter().map(|&row| self.times[row]).collect(),
            written: pick(&self.written),
            exact: pick(&self.exact),
            allowed: pick(&self.allowed),
            peaks: self.peaks.clone(),
            spacing: self.spacing,
            single: self.single,
        }
    }

    /// Sum of squared gaps in units of the largest value of each channel.
    pub(super) fn squares(&self, values: &[f64]) -> f64 {
        let mut largest = self.peaks.clone();
        for (at, y) in self.written.iter().enumerate() {
            let peak = &mut largest[at % self.width()];
            *peak = peak.max(y.abs());
        }
        let gaps = values.iter().enumerate().map(|(at, value)| {
            (self.written[at] - value) / largest[at % self.width()].max(f64::MIN_POSITIVE)
        });
        gaps.filter(|gap| !gap.is_nan()).map(|gap| gap * gap).sum()
    }

    /// Largest distance of some values from the exact ones, relative to the peaks.
    pub(super) fn error_of(&self, values: &[f64]) -> f64 {
        let gaps = values.iter().enumerate().map(|(at, value)| {
            (value - self.exact[at]).abs() / self.peaks[at % self.width()].max(f64::MIN_POSITIVE)
        });
        gaps.fold(0.0, f64::max)
    }

    /// How far the written values are from others.
    pub(super) fn gap(&self, values: &[f64]) -> Gap {
        let mut gap = Gap::NOTHING;
        let lines = values.chunks(self.width().max(1)).take(self.len());
        for (row, line) in lines.enumerate() {
            for (channel, &value) in line.iter().enumerate() {
                gap.add(self, row, channel, value);
            }
        }
        gap
    }

    /// The same for one channel.
    pub(super) fn gap_of(&self, values: &[f64], channel: usize) -> Gap {
        let mut gap = Gap::NOTHING;
        for (row, value) in self.column(values, channel).enumerate() {
            gap.add(self, row, channel, value);
        }
        gap
    }
}

/// A fault with a number that was looked for explains a run where it leaves this part of
/// the error.
const FOUND: f64 = 1e-6;

/// A distance between what is written and what is assumed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Gap {
    /// Largest part of what digits and rounding allow.
    pub ratio: f64,
    /// Largest part of the peak of the channel.
    pub share: f64,
}

impl Gap {
    pub(super) const NOTHING: Gap = Gap {
        ratio: 0.0,
        share: 0.0,
    };

    pub(super) fn add(&mut self, rows: &Rows, row: usize, channel: usize, value: f64) {
        if value.is_nan() {
            // Nothing is assumed of this row.
            return;
        }
        let at = row * rows.width() + channel;
        let gap = (rows.written[at] - value).abs();
        let peak = rows.peaks[channel].max(f64::MIN_POSITIVE);
        let larger = |a: f64, b: f64| if b <= a { a } else { b };
        self.ratio = larger(self.ratio, gap / rows.allowed[at].max(f64::MIN_POSITIVE));
        self.share = larger(self.share, gap / peak);
    }

    /// Nothing is left but digits and rounding.
    pub(super) fn is_closed(&self) -> bool {
        self.ratio <= 1.0 || self.share <= 1e-11
    }

    /// Nothing is left of another gap but that, or what a number that was looked for leaves:
    /// it is known to its own rounding only.
    pub(super) fn closes(&self, before: Gap) -> bool {
        self.is_closed() || self.share <= FOUND * before.share
    }
}

/// How a trajectory is made.
#[derive(Clone, Debug)]
pub(super) enum Way {
    /// Without any error of a method.
    Exact,
    /// By a method.
    Stepped(Stepping),
}

/// A method at a step.
#[derive(Clone, Debug)]
pub(super) struct Stepping {
    pub method: &'static Method,
    pub scheme: usize,
    pub ranks: Ranks,
    pub step: f64,
    pub reading: Reading,
    pub sides: Sides,
}

impl Stepping {
    /// The method as programs usually have it; semi-implicit ones in every order.
    pub(super) fn all(method: &'static Method, linear: &Linear, step: f64) -> Vec<Stepping> {
        let mut ways = Vec::new();
        for (scheme, one) in method.schemes.iter().enumerate() {
            let orders = match one {
                Scheme::SemiImplicit => rank_orders(linear),
                _ => vec![Ranks::new()],
            };
            ways.extend(orders.into_iter().map(|ranks| Stepping {
                method,
                scheme,
                ranks,
                step,
                reading: Reading::AtNodes,
                sides: Sides::After,
            }));
        }
        ways
    }

    fn coefficients(&self) -> Coefficients {
        self.method.schemes[self.scheme].coefficients()
    }
}

/// Multiplications that models with something changed may cost one run. It matters from some
/// 16 states or inputs on; 64 states took minutes without it.
const MOST_WORK: f64 = 4e9;
/// Products of matrices for one exponential.
const PRODUCTS: f64 = 15.0;

/// How many times a model may be solved over some rows: every gap between rows that is not
/// that of the grid, and every jump among them, costs an exponential of its own.
pub(super) fn affordable(linear: &Linear, rows: &Rows) -> usize {
    let size = (linear.size() + Drive::new(linear).size) as f64;
    let of_rows = if rows.spacing.is_some() {
        2
    } else {
        rows.len()
    };
    let of_jumps = if linear.jumps_within(linear.window.0, linear.window.1) {
        rows.len()
    } else {
        0
    };
    let one = (of_rows + of_jumps) as f64 * PRODUCTS * size.powi(3);
    (MOST_WORK / one.max(1.0)) as usize
}

/// What the model would have written in the rows; not a number where it has no value.
pub(super) fn trajectory(linear: &Linear, rows: &Rows, way: &Way) -> Option<Vec<f64>> {
    match way {
        Way::Exact => exactly(linear, rows, 0.0),
        Way::Stepped(stepping) => stepped(linear, rows, stepping),
    }
}

/// The exact solution at stamps that are off by a shift, in `f64`.
pub(super) fn exactly(linear: &Linear, rows: &Rows, shift: f64) -> Option<Vec<f64>> {
    let mut flow = Flow::new(linear);
    let mut out = Vec::with_capacity(rows.written.len());
    for &time in &rows.times {
        let time = time + shift;
        if time < linear.window.0 - 1e-12 * time.abs() {
            out.extend(rows.channels.iter().map(|_| f64::NAN));
            continue;
        }
        flow.go(time);
        let observe = |&channel| linear.observe(channel, &flow.state, time, Side::After, 0.0);
        out.extend(rows.channels.iter().map(observe));
    }
    out.iter().all(|x| !x.is_infinite()).then_some(out)
}

/// The exact solution in `f64`, from one time on to the next.
struct Flow<'a> {
    linear: &'a Linear,
    drive: Drive,
    matrix: DMatrix<f64>,
    state: Vec<f64>,
    time: f64,
    known: Vec<(f64, DMatrix<f64>)>,
}

impl<'a> Flow<'a> {
    fn new(linear: &'a Linear) -> Flow<'a> {
        let drive = Drive::new(linear);
        let (size, inputs) = (linear.size(), drive.size);
        let generator = drive.generator(linear);
        let matrix = DMatrix::from_fn(size + inputs, size + inputs, |i, j| {
            match (i < size, j < size) {
                (true, true) => linear.matrix[(i, j)],
                (true, false) => drive.onto[i][j - size],
                (false, true) => 0.0,
                (false, false) => generator[(i - size, j - size)],
            }
        });
        Flow {
            linear,
            drive,
            matrix,
            state: linear.start.clone(),
            time: linear.window.0,
            known: Vec::new(),
        }
    }

    fn go(&mut self, time: f64) {
        let near = 1e-13 * time.abs();
        while let Some(jump) = self
            .linear
            .next_jump(self.time + near)
            .filter(|&jump| jump <= time)
        {
            self.smooth(jump);
        }
        self.smooth(time);
    }

    fn smooth(&mut self, time: f64) {
        let gap = time - self.time;
        if gap <= 0.0 {
            return;
        }
        let near = 1e-13 * time.abs();
        let known = self
            .known
            .iter()
            .position(|(known, _)| (known - gap).abs() <= 1e-14 * gap + near * 1e-2);
        let place = known.unwrap_or_else(|| {
            if self.known.len() >= 8 {
                self.known.remove(0);
            }
            self.known.push((gap, (&self.matrix * gap).exp()));
            self.known.len() - 1
        });
        let mut all = self.state.clone();
        all.extend(self.drive.state(self.linear, self.time, Side::After, near));
        let flow = &self.known[place].1;
        let size = self.state.len();
        for i in 0..size {
            self.state[i] = all.iter().enumerate().map(|(j, x)| flow[(i, j)] * x).sum();
        }
        self.time = time;
    }
}

fn stepped(linear: &Linear, rows: &Rows, stepping: &Stepping) -> Option<Vec<f64>> {
    let spacing = rows.spacing?;
    let steps = (spacing / stepping.step).round().max(1.0) as u64;
    let step = spacing / steps as f64;
    let recurrence = Recurrence::new(&stepping.coefficients(), linear, step, &stepping.ranks)?
        .with_reading(stepping.reading);
    let memory = recurrence.back() as u64 - 1;
    let size = linear.size();
    let trial = Trial::new(linear, recurrence, steps, f64::EPSILON / 2.0);
    let mut room = Room::default();
    let origin = linear.window.0;
    // A method with a memory begins with exact values.
    let mut stack = linear.start.clone();
    if memory > 0 {
        let mut flow = Flow::new(linear);
        for count in 1..=memory {
            flow.go(origin + count as f64 * step);
            stack.extend(&flow.state);
        }
    }
    let starts = stack.clone();
    let mut done = memory;
    let mut out = Vec::with_capacity(rows.written.len());
    for (&number, &time) in rows.numbers.iter().zip(&rows.times) {
        let wanted = number * steps;
        while done < wanted {
            let at = origin + done as f64 * step;
            // Rows that were not kept are leapt over where no input jumps.
            let leap = wanted - done;
            let smooth =
                leap > steps && !linear.jumps_within(at - (memory + 1) as f64 * step, time + step);
            let count = if smooth { leap } else { leap.min(steps) };
            trial.advance(&mut room, &mut stack, at, count, stepping.sides);
            done += count;
        }
        let state = if wanted < done && wanted <= memory {
            &starts[wanted as usize * size..][..size]
        } else {
            &stack[stack.len() - size..]
        };
        let observe = |&channel| linear.observe(channel, state, time, Side::After, 1e-6 * step);
        out.extend(rows.channels.iter().map(observe));
    }
    out.iter().all(|x| x.is_finite()).then_some(out)
}

/// A method whose steps end at every jump; one-step methods only.
pub(super) fn stopping_at(
    linear: &Linear,
    rows: &Rows,
    stepping: &Stepping,
    jumps: &[f64],
) -> Option<Vec<f64>> {
    let coefficients = stepping.coefficients();
    let spacing = rows.spacing?;
    let steps = (spacing / stepping.step).round().max(1.0) as u64;
    let step = spacing / steps as f64;
    let whole = Recurrence::new(&coefficients, linear, step, &stepping.ranks)?
        .with_reading(stepping.reading);
    if whole.back() > 1 {
        return None;
    }
    let trial = Trial::new(linear, whole, steps, f64::EPSILON / 2.0);
    let mut room = Room::default();
    let origin = linear.window.0;
    let mut state = linear.start.clone();
    let mut done = 0;
    let mut out = Vec::with_capacity(rows.written.len());
    for (&number, &time) in rows.numbers.iter().zip(&rows.times) {
        let wanted = number * steps;
        while done < wanted {
            let at = origin + done as f64 * step;
            let near = 1e-9 * step;
            let mut edges: Vec<f64> = jumps
                .iter()
                .copied()
                .filter(|&jump| jump > at + near && jump < at + step - near)
                .collect();
            if edges.is_empty() {
                trial.advance(&mut room, &mut state, at, 1, Sides::Own);
                done += 1;
                continue;
            }
            edges.push(at + step);
            let mut from = at;
            for edge in edges {
                let part = Recurrence::new(&coefficients, linear, edge - from, &stepping.ranks)?
                    .with_reading(stepping.reading);
                let part = Trial::new(linear, part, 1, f64::EPSILON / 2.0);
                part.advance(&mut Room::default(), &mut state, from, 1, Sides::Own);
                from = edge;
            }
            done += 1;
        }
        let observe = |&channel| linear.observe(channel, &state, time, Side::After, 1e-6 * step);
        out.extend(rows.channels.iter().map(observe));
    }
    out.iter().all(|x| x.is_finite()).then_some(out)
}
