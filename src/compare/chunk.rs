//! Rows that follow each other against the exact solution. Chunks are worked on apart from each
//! other; their limits are set by the number of the row alone, so that what comes out does not
//! depend on how a file was read.

use super::deviation::{Comparison, Kept, KeptValue};
use super::group::Rows;
use super::sums::{Mark, Sums};
use super::trace::Trace;
use crate::exact::{Near, Nodes, Values, Walk};
use crate::number::{Conversion, Double, Nearby};
use crate::trajectory::{Neighbours, Resolution, Survey, half_ulp};

/// Rows of a chunk.
pub(super) const CHUNK_ROWS: usize = 8192;
/// Time constants or radians within the rounding of one stamp that are still followed.
const MOST_TURNS: f64 = 16.0;
/// While the fastest mode moves less than this within the blur, the rate tells how far.
const SLOW: f64 = 0.05;

/// Rows within the window, one below the other.
#[derive(Clone, Debug, Default)]
pub(super) struct Chunk {
    /// Number of the first row within the window.
    pub first: u64,
    /// When, and how far that is known.
    pub times: Vec<Double>,
    pub blurs: Vec<f64>,
    /// Row after row the values of the selected columns; NaN where there is none.
    pub values: Vec<f64>,
}

/// What comes of a chunk.
pub(super) struct Part {
    pub sums: Vec<Sums>,
    /// One for each channel, or none at all.
    pub traces: Vec<Trace>,
    pub kept: Vec<Kept>,
}

/// The walk along the exact solution and the sums of all channels.
pub(super) struct Pass<'a> {
    comparison: &'a Comparison<'a>,
    survey: &'a Survey,
    walk: Walk<'a>,
    sides: Option<[Walk<'a>; 2]>,
    near: Option<Near<'a>>,
    /// Offsets of the last rows from the node that they are near.
    offsets: Vec<f64>,
    /// What the digits of each channel resolve.
    digits: Vec<Neighbours>,
    lists: Lists,
    part: Part,
}

impl Part {
    pub(super) fn new(comparison: &Comparison) -> Part {
        let channels = comparison.channels;
        let trace = Trace::new(comparison.exact.from(), comparison.exact.to());
        let traced = if comparison.traced { channels.len() } else { 0 };
        Part {
            sums: channels
                .iter()
                .map(|(_, _, limit)| Sums::new(*limit))
                .collect(),
            traces: vec![trace; traced],
            kept: Vec::new(),
        }
    }

    /// Takes in the part after this one.
    pub(super) fn join(&mut self, mut next: Part) {
        for (own, next) in self.sums.iter_mut().zip(&next.sums) {
            own.join(next);
        }
        for (own, next) in self.traces.iter_mut().zip(&next.traces) {
            own.join(next);
        }
        self.kept.append(&mut next.kept);
    }
}

impl<'a> Pass<'a> {
    pub(super) fn new(
        comparison: &'a Comparison<'a>,
        survey: &'a Survey,
        nodes: Option<&'a Nodes>,
    ) -> Pass<'a> {
        Pass {
            comparison,
            survey,
            walk: comparison.exact.walk(),
            sides: None,
            near: nodes.map(|nodes| comparison.exact.near(nodes)),
            offsets: Vec::new(),
            digits: survey.channels.iter().map(|r| r.of_neighbours()).collect(),
            lists: Lists::default(),
            part: Part::new(comparison),
        }
    }

    /// All rows of a chunk.
    pub(super) fn run(mut self, chunk: &Chunk) -> Part {
        let norm = self.comparison.exact.fastest_rate();
        let mut wanted = (self.comparison.next_wanted)(chunk.first);
        for row in 0..chunk.times.len() {
            let (time, blur) = (chunk.times[row], chunk.blurs[row]);
            let number = chunk.first + row as u64;
            let kept = number == wanted;
            if kept {
                wanted = (self.comparison.next_wanted)(number + 1);
            }
            let Some(near) = self.near.as_mut().filter(|_| !kept && norm * blur < SLOW) else {
                self.end_group(chunk, row);
                self.add(chunk, row, kept);
                continue;
            };
            // A stamp that fell short of a jump by its rounding alone is at the jump.
            let clear = blur.max(4.0 * f64::EPSILON * time.to_f64().abs());
            if let Some(offset) = near.offset(time, clear) {
                self.offsets.push(offset);
                continue;
            }
            self.end_group(chunk, row);
            let near = self.near.as_mut();
            match near.and_then(|near| near.place(time, clear)) {
                Some(offset) => self.offsets.push(offset),
                None => self.add(chunk, row, false),
            }
        }
        self.end_group(chunk, chunk.times.len());
        self.part
    }

    /// The rows of a chunk as they are handed on, whatever else becomes of them.
    pub(super) fn keep(mut self, chunk: &Chunk) -> Vec<Kept> {
        for row in 0..chunk.times.len() {
            self.add(chunk, row, true);
        }
        self.part.kept
    }

    /// The rows that were gathered near one node, up to this one, channel by channel.
    fn end_group(&mut self, chunk: &Chunk, end: usize) {
        let Some(near) = self.near.as_ref().filter(|_| !self.offsets.is_empty()) else {
            return;
        };
        let start = end - self.offsets.len();
        let (times, blurs) = (&chunk.times[start..end], &chunk.blurs[start..end]);
        let steps = times
            .windows(2)
            .map(|pair| pair[1].to_f64() - pair[0].to_f64());
        let shortest = steps.fold(f64::INFINITY, f64::min);
        let columns = self.comparison.channels.len();
        for (place, (channel, conversion, limit)) in self.comparison.channels.iter().enumerate() {
            let nearby = &near.channels()[*channel];
            let printed = self.survey.channels[place];
            let values = chunk.values[start * columns..end * columns].iter();
            let lists = &mut self.lists;
            lists.written.clear();
            lists.written.extend(values.skip(place).step_by(columns));
            let digits = &mut self.digits[place];
            lists.fill(nearby, &self.offsets, blurs, *conversion, digits);
            let rows = Rows {
                shortest,
                rate: nearby.fastest(),
                in_full: printed == Resolution::Full,
                ..lists.rows(times, blurs)
            };
            let sums = &mut self.part.sums[place];
            let there = |row: &usize| !rows.written[*row].is_nan();
            let complete = (0..rows.written.len()).all(|row| there(&row));
            if complete {
                sums.add_group(&rows, nearby.bound);
            } else {
                for row in (0..rows.written.len()).filter(there) {
                    sums.add(rows.mark(row), rows.exact[row], nearby.bound);
                }
            }
            if let Some(trace) = self.part.traces.get_mut(place) {
                for row in (0..rows.written.len()).filter(there) {
                    let (mark, value) = (rows.mark(row), rows.exact[row] + rows.signed[row]);
                    trace.add(mark.traced(value), mark.share_of(limit));
                }
            }
        }
        self.offsets.clear();
    }

    /// One row by way of double-double.
    fn add(&mut self, chunk: &Chunk, row: usize, kept: bool) {
        let (time, blur) = (chunk.times[row], chunk.blurs[row]);
        let there = self.go(time, blur);
        let channels = self.comparison.channels;
        let mut keep = kept.then(|| Kept {
            number: chunk.first + row as u64,
            time: (time.to_f64(), blur),
            channels: vec![None; channels.len()],
        });
        for (place, (_, _, limit)) in channels.iter().enumerate() {
            let written = chunk.values[row * channels.len() + place];
            if written.is_nan() {
                continue;
            }
            let (mark, [value, truth], digits) = self.mark(place, (time, blur), written, &there);
            if let Some(keep) = &mut keep {
                keep.channels[place] = Some(KeptValue {
                    value,
                    written,
                    error: mark.signed,
                    doubts: digits,
                });
            }
            if let Some(trace) = self.part.traces.get_mut(place) {
                trace.add(mark.traced(value), mark.share_of(limit));
            }
            self.part.sums[place].add(mark, truth, 0.0);
        }
        self.part.kept.extend(keep);
    }

    /// Moves to a time, or to the jump that it fell short of by its rounding alone.
    fn go(&mut self, time: Double, blur: f64) -> There {
        if let Some(jump) = self.jump_within_rounding(time, blur) {
            return self.go_to_jump(time, blur, jump);
        }
        self.walk.go(time);
        There {
            moved: self.moved_by(time, blur),
            before: None,
        }
    }

    /// The jump that a stamp may lie on either side of by nothing but its rounding, where outputs
    /// jump with it. Stamps that are known exactly are on their side of it, but for those that a
    /// program has summed up to a few units below.
    fn jump_within_rounding(&self, time: Double, blur: f64) -> Option<Double> {
        let exact = self.comparison.exact;
        if !exact.has_feed_through() || exact.fastest_rate() * blur > HARDLY {
            return None;
        }
        let ulps = 4.0 * f64::EPSILON * time.to_f64().abs();
        let back = Double::from(blur);
        let jump = exact.jump_after(time - back, blur + blur.max(ulps))?;
        (jump.to_f64() > exact.from().to_f64()).then_some(jump)
    }

    /// Both sides of a jump at once.
    fn go_to_jump(&mut self, time: Double, blur: f64, jump: Double) -> There {
        let exact = self.comparison.exact;
        let sides = self
            .sides
            .get_or_insert_with(|| [exact.walk(), exact.walk()]);
        let walk = &mut sides[0];
        // Short of the jump by next to nothing.
        let least = Double::from(1e-24 * jump.to_f64().abs());
        let before = if time < jump { time } else { jump - least };
        let values = walk.go(before).clone();
        let rates = walk.approx_rates();
        self.walk.go(if time < jump { jump } else { time });
        let rates = rates.iter().zip(self.walk.approx_rates());
        let moved = rates.map(|(before, after)| MORE * before.abs().max(after.abs()) * blur);
        There {
            moved: (blur > 0.0).then(|| moved.collect()),
            before: Some(values),
        }
    }

    /// One value beside the exact one there, both as converted, and what its digits resolve.
    fn mark(
        &self,
        place: usize,
        (time, blur): (Double, f64),
        written: f64,
        there: &There,
    ) -> (Mark, [f64; 2], [f64; 2]) {
        let (channel, conversion, _) = self.comparison.channels[place];
        let value = conversion.apply(Double::from(written));
        let mut values = self.walk.values();
        let gap = |values: &Values| (value - values.value[channel]).abs().to_f64();
        if let Some(before) = &there.before
            && gap(before) < gap(values)
        {
            values = before;
        }
        let truth = values.value[channel];
        let moved = there.moved.as_ref().map_or(0.0, |moved| moved[channel]);
        let rest = moved + values.bound[channel];
        let as_printed = self.survey.channels[place];
        let digits = [as_printed, Resolution::Full]
            .map(|resolution| conversion.stretch(resolution.at(written)));
        let mark = Mark {
            time,
            blur,
            written,
            signed: (value - truth).to_f64(),
            size: truth.to_f64().abs(),
            doubts: digits.map(|digits| digits + rest),
        };
        (mark, [value, truth].map(Double::to_f64), digits)
    }

    /// A value that was computed the quick way, once more by way of double-double.
    pub(super) fn again(&mut self, place: usize, mark: &Mark) -> Mark {
        let there = self.go(mark.time, mark.blur);
        self.mark(place, (mark.time, mark.blur), mark.written, &there)
            .0
    }

    /// How far the exact values move within the rounding of the stamp.
    fn moved_by(&mut self, time: Double, blur: f64) -> Option<Vec<f64>> {
        if blur == 0.0 {
            return None;
        }
        let exact = self.comparison.exact;
        // While the fastest mode hardly moves, the rate tells; its own change within
        // the blur is covered by a tenth.
        let slow = exact.fastest_rate() * blur < SLOW;
        if slow && !exact.jumps_near(time, blur) {
            let rates = self.walk.approx_rates();
            return Some(rates.iter().map(|rate| MORE * rate.abs() * blur).collect());
        }
        let middle = &self.walk.values().value;
        let turns = exact.fastest_rate() * blur;
        if turns > MOST_TURNS {
            // Anything can have happened meanwhile.
            return Some(exact.peaks().iter().map(|peak| 2.0 * peak).collect());
        }
        // Densely enough that no swing of the fastest mode hides between the points.
        let points = (4.0 * turns).ceil().max(1.0);
        let [before, after] = self
            .sides
            .get_or_insert_with(|| [exact.walk(), exact.walk()]);
        let mut moved = vec![0.0f64; middle.len()];
        for point in 1..=points as u32 {
            let shift = blur * f64::from(point) / points;
            for (walk, shift) in [(&mut *before, -shift), (&mut *after, shift)] {
                let there = walk.go(time + Double::from(shift));
                for ((moved, there), middle) in moved.iter_mut().zip(&there.value).zip(middle) {
                    *moved = moved.max((*there - *middle).abs().to_f64());
                }
            }
        }
        Some(moved)
    }
}

/// What is known of the exact values at the time of a row, beside those where the walk is.
struct There {
    /// How far they move within the rounding of the stamp, if they do.
    moved: Option<Vec<f64>>,
    /// Those before a jump, where the stamp may lie on either side of it: the nearer ones count.
    before: Option<Values>,
}

/// In units of the fastest rate: the rounding of stamps of double precision or nearly so, within
/// which nothing can happen but a jump.
const HARDLY: f64 = 1e-6;
/// What a rate may change by within a blur that hardly moves the fastest mode.
const MORE: f64 = 1.1;

/// The rows near one node, of one channel.
#[derive(Debug, Default)]
struct Lists {
    written: Vec<f64>,
    moved: Vec<f64>,
    exact: Vec<f64>,
    signed: Vec<f64>,
    pattern: Vec<f64>,
    full: Vec<f64>,
}

impl Lists {
    /// Exact values, `written - exact` and what the digits resolve.
    fn fill(
        &mut self,
        nearby: &Nearby,
        offsets: &[f64],
        blurs: &[f64],
        conversion: Conversion,
        digits: &mut Neighbours,
    ) {
        nearby.moved(offsets, &mut self.moved);
        let (high, low) = (nearby.value.to_f64(), nearby.value.low());
        let moved = self.moved.iter();
        self.exact.clear();
        self.exact
            .extend(moved.clone().map(|moved| high + (low + moved)));
        self.signed.clear();
        let written = self.written.iter().zip(moved);
        if conversion.is_none() {
            let signed = written.map(|(written, moved)| (written - high) - (low + moved));
            self.signed.extend(signed);
        } else {
            self.signed.extend(written.map(|(&written, moved)| {
                let value = conversion.apply(Double::from(written));
                (value - nearby.value).to_f64() - moved
            }));
        }
        let known = self.written.iter().zip(offsets).zip(blurs);
        let rest = |offset: f64, blur: f64| nearby.bound + MORE * nearby.rate(offset) * blur;
        let stretch = conversion.stretch(1.0);
        self.full.clear();
        self.full.extend(
            known.clone().map(|((&written, &offset), &blur)| {
                stretch * half_ulp(written) + rest(offset, blur)
            }),
        );
        self.pattern.clear();
        if digits.are_full() {
            self.pattern.extend_from_slice(&self.full);
        } else {
            self.pattern
                .extend(known.map(|((&written, &offset), &blur)| {
                    stretch * digits.at(written) + rest(offset, blur)
                }));
        }
    }

    fn rows<'a>(&'a self, times: &'a [Double], blurs: &'a [f64]) -> Rows<'a> {
        Rows {
            times,
            blurs,
            written: &self.written,
            exact: &self.exact,
            signed: &self.signed,
            doubts: [&self.pattern, &self.full],
            shortest: 0.0,
            rate: f64::INFINITY,
            in_full: false,
        }
    }
}
