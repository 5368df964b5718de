//! Rows that are missing although the step is stated: stamps are whole multiples of it,
//! and the same number of steps apart but for a few.

use crate::number::counted;
use crate::trajectory::{Findings, Kind, LEAST_SHARE, LONG_PHASE};

/// A stamp counts as a multiple of the step within this fraction of it: stamps can be
/// printed coarsely or kept in single precision.
const NEAR: f64 = 0.1;
/// Share of rows that must lie on multiples, and of strides that must be equal.
const SHARE: f64 = 0.9;
const EQUAL: f64 = 0.5;
/// So many larger strides in a row are a phase of coarser output.
const PHASE: u64 = 6;
/// Strides of so many sizes are told apart.
const MOST_SIZES: usize = 16;

/// Follows the stamps in units of the stated step.
#[derive(Debug)]
pub(super) struct Strides {
    from: f64,
    step: f64,
    last: Option<f64>,
    rows: u64,
    on_multiples: u64,
    sizes: Vec<Size>,
    latest: f64,
}

#[derive(Debug)]
struct Size {
    stride: f64,
    count: u64,
    run: u64,
    longest_run: u64,
    line: u64,
    time: f64,
}

impl Strides {
    pub(super) fn new(from: f64, step: f64) -> Strides {
        Strides {
            from,
            step,
            last: None,
            rows: 0,
            on_multiples: 0,
            sizes: Vec::new(),
            latest: 0.0,
        }
    }

    pub(super) fn add(&mut self, line: u64, time: f64) {
        let steps = (time - self.from) / self.step;
        let number = steps.round();
        self.rows += 1;
        self.on_multiples += u64::from((steps - number).abs() <= NEAR);
        let stride = self.last.map_or(0.0, |last| number - last);
        self.last = Some(number);
        if stride <= 0.0 {
            return;
        }
        let known = self.sizes.iter().position(|size| size.stride == stride);
        let place = match known {
            Some(place) => place,
            None if self.sizes.len() < MOST_SIZES => {
                self.sizes.push(Size {
                    stride,
                    count: 0,
                    run: 0,
                    longest_run: 0,
                    line,
                    time,
                });
                self.sizes.len() - 1
            }
            None => return,
        };
        let follows = self.latest == stride;
        let size = &mut self.sizes[place];
        size.count += 1;
        size.run = if follows { size.run + 1 } else { 1 };
        size.longest_run = size.longest_run.max(size.run);
        self.latest = stride;
    }

    pub(super) fn conclude(self, unit: &str, findings: &mut Findings) {
        let strides: u64 = self.sizes.iter().map(|size| size.count).sum();
        let Some(usual) = self.sizes.iter().max_by_key(|size| size.count) else {
            return;
        };
        let regular = self.on_multiples as f64 >= SHARE * self.rows as f64
            && usual.count as f64 >= EQUAL * strides as f64;
        if !regular {
            return;
        }
        for size in &self.sizes {
            let factor = size.stride / usual.stride;
            let long = size.longest_run >= PHASE
                && (factor <= LONG_PHASE || size.count as f64 >= LEAST_SHARE * strides as f64);
            if size.stride > usual.stride && factor.fract() == 0.0 && !long {
                let missing = size.stride / usual.stride - 1.0;
                let text = format!(
                    "{} missing before t = {} {unit}, {} in the file: rows lie {} steps of {} apart \
                     elsewhere",
                    counted(missing as u64, "row"),
                    size.time,
                    counted(size.count, "time"),
                    usual.stride,
                    self.step
                );
                findings.fatal(Kind::MissingRows, size.line, text);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn lines(stamps: impl Iterator<Item = f64>, step: f64) -> Vec<Option<u64>> {
        let mut strides = Strides::new(3.0, step);
        for (line, stamp) in stamps.enumerate() {
            strides.add(line as u64, stamp);
        }
        let mut findings = Findings::default();
        strides.conclude("s", &mut findings);
        findings
            .into_list()
            .iter()
            .map(|finding| finding.line)
            .collect()
    }

    #[test]
    fn rows_missing_between_coarse_stamps_are_seen() {
        let stamps = || (0..200).map(|k| f64::from((3.0 + 0.1 * f64::from(k)) as f32));
        assert_eq!(lines(stamps(), 0.1), []);
        let holed = stamps()
            .enumerate()
            .filter(|(k, _)| *k != 40 && !(80..95).contains(k));
        assert_eq!(lines(holed.map(|(_, t)| t), 0.1), [Some(40), Some(79)]);
    }

    #[test]
    fn wider_output_and_other_steps_are_not_suspected() {
        let wide = (0..100).map(|k| 3.0 + 0.4 * f64::from(k));
        assert_eq!(lines(wide, 0.1), []);
        let phases = (0..100)
            .chain((100..400).step_by(5))
            .map(|k| 3.0 + 0.1 * f64::from(k));
        assert_eq!(lines(phases, 0.1), []);
        let other = (0..100).map(|k| 3.0 + 0.137 * f64::from(k));
        assert_eq!(lines(other, 0.1), []);
    }

    #[test]
    fn what_is_missing_is_told_in_rows_and_steps() {
        let mut strides = Strides::new(3.0, 0.1);
        // Output at every second step, two holes of three rows, one of one.
        let stamps = (0..200)
            .filter(|k| !(50..53).contains(k) && !(120..123).contains(k) && *k != 160)
            .map(|k| 3.0 + 0.2 * f64::from(k));
        for (line, stamp) in stamps.enumerate() {
            strides.add(line as u64, stamp);
        }
        let mut findings = Findings::default();
        strides.conclude("s", &mut findings);
        let found: Vec<String> = findings
            .into_list()
            .iter()
            .map(|f| f.text.clone())
            .collect();
        let first = 3.0 + 0.2 * 53.0;
        let second = 3.0 + 0.2 * 161.0;
        assert_eq!(
            found,
            [
                format!(
                    "3 rows missing before t = {first} s, 2 times in the file: rows lie 2 steps \
                     of 0.1 apart elsewhere"
                ),
                format!(
                    "1 row missing before t = {second} s, 1 time in the file: rows lie 2 steps \
                     of 0.1 apart elsewhere"
                ),
            ]
        );
    }

    #[test]
    fn six_larger_strides_in_a_row_are_a_phase_unless_they_are_few_and_long() {
        let with_phase = |factor: u32, count: u32, usual: u32| {
            let before = 0..usual;
            let phase = (1..=count).map(|k| usual - 1 + factor * k);
            let end = usual - 1 + factor * count;
            let after = (1..50).map(|k| end + k);
            let all = before.chain(phase).chain(after);
            lines(all.map(|k| 3.0 + 0.1 * f64::from(k)), 0.1)
        };
        assert_eq!(with_phase(3, 6, 100), []);
        assert_eq!(with_phase(3, 5, 100), [Some(100)]);
        assert_eq!(with_phase(20, 6, 500), []);
        // Longer than twenty usual ones they have to be one in fifty.
        assert_eq!(with_phase(21, 6, 300), [Some(300)]);
        assert_eq!(with_phase(21, 6, 200), []);
        // Of strides that are no multiple of the usual one nothing is missing.
        let odd = (0..100).map(|k| 2 * k).chain((0..50).map(|k| 201 + 2 * k));
        assert_eq!(lines(odd.map(|k| 3.0 + 0.1 * f64::from(k)), 0.1), []);
    }

    #[test]
    fn strides_that_follow_no_rule_are_not_suspected() {
        // More than half of the strides have to be equal, nine in ten rows on multiples.
        let share = |wide: usize| {
            let strides = (0..100).map(|k| if k % 20 < wide { 2 } else { 1 });
            let mut at = 0;
            let stamps = strides.map(move |stride| {
                at += stride;
                3.0 + 0.1 * f64::from(at)
            });
            !lines(stamps, 0.1).is_empty()
        };
        assert!(share(5));
        let off = |beside: u32| {
            let stamps = (0..200).filter(|k| *k != 100).map(|k| {
                let off = if k % 20 < beside { 0.02 } else { 0.0 };
                3.0 + 0.1 * f64::from(k) + off
            });
            !lines(stamps, 0.1).is_empty()
        };
        assert!(off(1) && !off(3));
    }
}
