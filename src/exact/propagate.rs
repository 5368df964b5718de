//! From times to values: directly from the nearest jump before, or step by step
//! along a uniform grid with a fresh start every so often.

use super::{Exact, Jump};
use crate::number::{Double, Flow, Propagator, Quad, Real, Step};

/// Steps along a grid before the vector is computed directly again, so that nothing
/// drifts.
const STEPS_PER_ANCHOR: u32 = 256;
/// A bound below this fraction of the value keeps the nearest `f64` within one unit in
/// the last place.
const RELATIVE_PROMISE: f64 = 5.551_115_123_125_783e-17; // 2^-54
/// The promise where the value is smaller than the channel's peak can resolve.
pub(super) const PEAK_PROMISE: f64 = 1e-24;

/// Values of all channels at one time, with their bounds.
#[derive(Clone, Debug, Default)]
pub struct Values {
    /// States, then outputs.
    pub value: Vec<Double>,
    /// What the true value may differ by.
    pub bound: Vec<f64>,
}

/// The vector right after the start and after every jump.
pub(super) fn anchors<T: Real>(
    table: &Propagator<T>,
    start: Vec<Double>,
    from: Double,
    jumps: &[Jump],
) -> Vec<Flow<T>> {
    let mut flow = Flow::exact(start.into_iter().map(T::from_double).collect());
    let mut anchors = vec![flow.clone()];
    let mut time = from;
    for jump in jumps {
        table.advance(&mut flow, jump.time - time);
        for &(entry, value) in &jump.resets {
            flow.set(entry, T::from_double(value));
        }
        anchors.push(flow.clone());
        time = jump.time;
    }
    anchors
}

impl Exact {
    /// Number of jumps at or before a time.
    pub(super) fn segment(&self, time: Double) -> usize {
        self.system.jumps.partition_point(|jump| jump.time <= time)
    }

    pub(super) fn segment_start(&self, segment: usize) -> Double {
        if segment == 0 {
            self.from
        } else {
            self.system.jumps[segment - 1].time
        }
    }

    /// The time since the segment began, never below zero.
    fn since(&self, segment: usize, time: Double) -> Double {
        let since = time - self.segment_start(segment);
        if since.to_f64() > 0.0 {
            since
        } else {
            Double::ZERO
        }
    }

    pub(super) fn flow_at(&self, segment: usize, time: Double) -> Flow<Double> {
        let mut flow = self.anchors[segment].clone();
        self.table.advance(&mut flow, self.since(segment, time));
        flow
    }

    /// Values at a time, from the last jump before it.
    pub(super) fn direct(&self, time: Double) -> Values {
        let segment = self.segment(time);
        let mut values = Values::default();
        self.read(&self.table, &self.flow_at(segment, time), &mut values);
        values
    }

    /// Channels from a vector.
    fn read<T: Real>(&self, table: &Propagator<T>, flow: &Flow<T>, values: &mut Values) {
        let bound = table.bound(flow);
        values.value.clear();
        values.bound.clear();
        let size: Vec<f64> = flow.value.iter().map(|x| x.to_f64().abs()).collect();
        let rounding = (size.len() as f64 + 4.0) * <Double as Real>::UNIT;
        for (index, row) in self.system.channels.iter().enumerate() {
            if index < self.states() {
                values.value.push(flow.value[index].to_double());
                values.bound.push(bound[index] + rounding * size[index]);
                continue;
            }
            let (mut sum, mut doubt) = (T::default(), 0.0);
            for (at, weight) in row.iter().enumerate().filter(|(_, w)| !w.is_zero()) {
                sum = sum + T::from_double(*weight) * flow.value[at];
                doubt += weight.to_f64().abs() * (bound[at] + rounding * size[at]);
            }
            values.value.push(sum.to_double());
            values.bound.push(doubt);
        }
    }

    pub(super) fn states(&self) -> usize {
        self.system.channels.len() - self.outputs()
    }

    fn outputs(&self) -> usize {
        self.system.outputs
    }

    /// True where every bound keeps the promise.
    fn promised(&self, values: &Values) -> bool {
        let channels = values.value.iter().zip(&values.bound).zip(&self.peaks);
        channels.into_iter().all(|((value, &bound), &peak)| {
            bound <= (RELATIVE_PROMISE * value.to_f64().abs()).max(PEAK_PROMISE * peak)
        })
    }

    /// Values in quad-double, from the last jump before a time; `None` out of its range.
    pub(super) fn in_quad(&self, segment: usize, time: Double) -> Option<Values> {
        let fine = self.fine.get_or_init(|| {
            let span = (self.to - self.from).to_f64();
            let table = Propagator::<Quad>::new(&self.system.matrix, span)?;
            let start = self.system.start.clone();
            let anchors = anchors(&table, start, self.from, &self.system.jumps);
            Some((table, anchors))
        });
        let (table, anchors) = fine.as_ref()?;
        let mut flow = anchors[segment].clone();
        table.advance(&mut flow, self.since(segment, time));
        let mut better = Values::default();
        self.read(table, &flow, &mut better);
        Some(better)
    }

    /// The same in quad-double, for values whose bound was not good enough.
    fn refine(&self, segment: usize, time: Double, values: &mut Values) {
        let Some(better) = self.in_quad(segment, time) else {
            return;
        };
        let pairs = better.value.into_iter().zip(better.bound).enumerate();
        for (index, (value, bound)) in pairs {
            if bound < values.bound[index] {
                values.value[index] = value;
                values.bound[index] = bound;
            }
        }
    }
}

/// Values along a sequence of times; quickest where the times rise evenly.
#[derive(Debug)]
pub struct Walk<'a> {
    exact: &'a Exact,
    segment: usize,
    time: Double,
    flow: Flow<Double>,
    since_anchor: u32,
    /// The last spacing, and how often it came in a row.
    spacing: (Double, usize),
    grid: Option<(Double, Step<Double>)>,
    values: Values,
}

impl<'a> Walk<'a> {
    pub(super) fn new(exact: &'a Exact) -> Walk<'a> {
        Walk {
            exact,
            segment: 0,
            time: exact.from,
            flow: exact.anchors[0].clone(),
            since_anchor: 0,
            spacing: (Double::ZERO, 0),
            grid: None,
            values: Values::default(),
        }
    }

    /// Moves to a time and gives the values there. A time before the window counts as
    /// its start; one after it is followed a little way only, so callers leave rows
    /// outside the window out.
    pub fn go(&mut self, time: Double) -> &Values {
        self.go_in_double(time);
        if !self.exact.promised(&self.values) {
            let mut values = std::mem::take(&mut self.values);
            self.exact.refine(self.segment, time, &mut values);
            self.values = values;
        }
        &self.values
    }

    /// As [`Walk::go`] but quick in every case: where double-double does not keep the
    /// promise of [`Exact`], only the bound says so.
    pub fn go_in_double(&mut self, time: Double) -> &Values {
        self.place(time);
        let mut values = std::mem::take(&mut self.values);
        self.exact.read(&self.exact.table, &self.flow, &mut values);
        self.values = values;
        &self.values
    }

    /// The values at the last time.
    pub fn values(&self) -> &Values {
        &self.values
    }

    /// Rates of change of all channels at the last time, in `f64`; right of a jump.
    pub fn approx_rates(&self) -> Vec<f64> {
        let rates = self.exact.table.approx_rate(&self.flow);
        let channels = self.exact.system.channels.iter();
        let sum = |row: &Vec<Double>| row.iter().zip(&rates).map(|(w, r)| w.to_f64() * r).sum();
        channels.map(sum).collect()
    }

    fn place(&mut self, time: Double) {
        let time = if time < self.exact.from {
            self.exact.from
        } else {
            time
        };
        let table = &self.exact.table;
        let segment = self.exact.segment(time);
        let step = time - self.time;
        let norm = table.norm();
        let follows = segment == self.segment && step.to_f64() >= 0.0;
        let fresh = self.since_anchor < STEPS_PER_ANCHOR;
        let short = step.to_f64() <= table.base();
        // A short step takes few terms, yet more than what a grid leaves of it.
        let far = if short { 1e-6 } else { 0.25 };
        let on_grid =
            |(spacing, _): &(Double, Step<Double>)| norm * (step - *spacing).abs().to_f64() <= far;
        if follows
            && fresh
            && let Some((spacing, grid)) = self.grid.as_ref().filter(|g| on_grid(g))
        {
            table.step(&mut self.flow, grid);
            table.nudge(&mut self.flow, step - *spacing);
            self.since_anchor += 1;
        } else if follows && fresh && short {
            table.nudge(&mut self.flow, step);
            self.since_anchor += 1;
        } else {
            self.flow = self.exact.flow_at(segment, time);
            self.since_anchor = 0;
        }
        self.notice(step);
        self.segment = segment;
        self.time = time;
    }

    /// Tabulates the spacing once it has come often enough to pay for itself.
    fn notice(&mut self, step: Double) {
        let table = &self.exact.table;
        let (last, count) = self.spacing;
        let same = table.norm() * (step - last).abs().to_f64() <= 1e-3;
        self.spacing = (step, if same { count + 1 } else { 0 });
        let known = self
            .grid
            .as_ref()
            .is_some_and(|(spacing, _)| table.norm() * (step - *spacing).abs().to_f64() <= 0.25);
        if self.spacing.1 >= 8 + 2 * table.size() && !known && step.to_f64() > 0.0 {
            self.grid = Some((step, table.tabulate(step)));
        }
    }
}
