//! Rows that follow each other against the exact solution. Chunks are worked on apart from each
//! other; their limits are set by the number of the row alone, so that what comes out does not
//! depend on how a file was read.

use super::deviation::{Comparison, Kept, KeptValue};
use super::sums::{Group, Mark, Sums};
use super::trace::{Trace, Traced};
use crate::exact::{Near, Nodes, Walk};
use crate::number::{Conversion, Double, Nearby};
use crate::trajectory::{Resolution, Survey};

/// Rows of a chunk.
pub(super) const CHUNK_ROWS: usize = 4096;
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
    /// Rows of the chunk that are near one node, with their offsets from it.
    group: Vec<(usize, f64)>,
    lists: Group,
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
            group: Vec::new(),
            lists: Group::default(),
            part: Part::new(comparison),
        }
    }

    /// All rows of a chunk.
    pub(super) fn run(mut self, chunk: &Chunk) -> Part {
        let norm = self.comparison.exact.fastest_rate();
        for row in 0..chunk.times.len() {
            let (time, blur) = (chunk.times[row], chunk.blurs[row]);
            let kept = (self.comparison.wanted)(chunk.first + row as u64);
            let Some(near) = self.near.as_mut().filter(|_| !kept && norm * blur < SLOW) else {
                self.end_group(chunk);
                self.add(chunk, row, kept);
                continue;
            };
            // A stamp that fell short of a jump by its rounding alone is at the jump.
            let clear = blur.max(4.0 * f64::EPSILON * time.to_f64().abs());
            if let Some(offset) = near.offset(time, clear) {
                self.group.push((row, offset));
                continue;
            }
            self.end_group(chunk);
            let near = self.near.as_mut();
            match near.and_then(|near| near.place(time, clear)) {
                Some(offset) => self.group.push((row, offset)),
                None => self.add(chunk, row, false),
            }
        }
        self.end_group(chunk);
        self.part
    }

    /// The rows of a chunk as they are handed on, whatever else becomes of them.
    pub(super) fn keep(mut self, chunk: &Chunk) -> Vec<Kept> {
        for row in 0..chunk.times.len() {
            self.add(chunk, row, true);
        }
        self.part.kept
    }

    /// The rows that were gathered near one node, channel by channel.
    fn end_group(&mut self, chunk: &Chunk) {
        let Some(near) = &self.near else { return };
        if self.group.is_empty() {
            return;
        }
        let channels = self.comparison.channels;
        for (place, (channel, conversion, limit)) in channels.iter().enumerate() {
            let nearby = &near.channels()[*channel];
            let printed = self.survey.channels[place];
            let lists = &mut self.lists;
            lists.clear();
            for &(row, offset) in &self.group {
                let written = chunk.values[row * channels.len() + place];
                if written.is_nan() {
                    continue;
                }
                let blur = chunk.blurs[row];
                let value = quick(nearby, offset, blur, written, *conversion, printed);
                lists.push(chunk.times[row], blur, written, value);
            }
            if let Some(trace) = self.part.traces.get_mut(place) {
                lists.each(|mark, exact| trace.add(mark.traced(exact), mark.share_of(limit)));
            }
            self.part.sums[place].add_group(lists, nearby.bound);
        }
        self.group.clear();
    }

    /// One row by way of double-double.
    fn add(&mut self, chunk: &Chunk, row: usize, kept: bool) {
        let (time, blur) = (chunk.times[row], chunk.blurs[row]);
        let (time, moved) = self.go(time, blur);
        let channels = self.comparison.channels;
        let mut keep = kept.then(|| Kept {
            number: chunk.first + row as u64,
            time: (time.to_f64(), blur),
            channels: vec![None; channels.len()],
        });
        for (place, (channel, _, limit)) in channels.iter().enumerate() {
            let written = chunk.values[row * channels.len() + place];
            if written.is_nan() {
                continue;
            }
            let (mark, value, digits) = self.mark(place, (time, blur), written, &moved);
            let truth = self.walk.values().value[*channel].to_f64();
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

    /// Moves to a time, or to the jump that it fell short of by its rounding alone; how far the
    /// exact values move within the blur, if they do.
    fn go(&mut self, time: Double, blur: f64) -> (Double, Option<Vec<f64>>) {
        let exact = self.comparison.exact;
        let ulps = 4.0 * f64::EPSILON * time.to_f64().abs();
        let time = match exact.has_feed_through() {
            true => exact.jump_after(time, ulps).unwrap_or(time),
            false => time,
        };
        self.walk.go(time);
        (time, self.moved_by(time, blur))
    }

    /// One value beside the exact one where the walk is, as converted, and what its digits
    /// resolve.
    fn mark(
        &self,
        place: usize,
        (time, blur): (Double, f64),
        written: f64,
        moved: &Option<Vec<f64>>,
    ) -> (Mark, f64, [f64; 2]) {
        let (channel, conversion, _) = self.comparison.channels[place];
        let values = self.walk.values();
        let truth = values.value[channel];
        let value = conversion.apply(Double::from(written));
        let rest = moved.as_ref().map_or(0.0, |moved| moved[channel]) + values.bound[channel];
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
        (mark, value.to_f64(), digits)
    }

    /// A value that was computed the quick way, once more by way of double-double.
    pub(super) fn again(&mut self, place: usize, mark: &Mark) -> Mark {
        let (time, moved) = self.go(mark.time, mark.blur);
        self.mark(place, (time, mark.blur), mark.written, &moved).0
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

/// What a rate may change by within a blur that hardly moves the fastest mode.
const MORE: f64 = 1.1;

/// Exact value, `written - exact` and what the digits resolve, near a node.
fn quick(
    nearby: &Nearby,
    offset: f64,
    blur: f64,
    written: f64,
    conversion: Conversion,
    printed: Resolution,
) -> (f64, f64, [f64; 2]) {
    let moved = nearby.moved(offset);
    let exact = nearby.value.to_f64() + (nearby.value.low() + moved);
    let signed = if conversion.is_none() {
        (written - nearby.value.to_f64()) - (nearby.value.low() + moved)
    } else {
        let value = conversion.apply(Double::from(written));
        (value - nearby.value).to_f64() - moved
    };
    let rest = if blur == 0.0 {
        nearby.bound
    } else {
        nearby.bound + MORE * nearby.rate(offset).abs() * blur
    };
    let full = conversion.stretch(Resolution::Full.at(written)) + rest;
    let as_printed = match printed {
        Resolution::Full => full,
        printed => conversion.stretch(printed.at(written)) + rest,
    };
    (exact, signed, [as_printed, full])
}
