//! Whether the rows of a run cover the window: from its start to its end, without a
//! stretch left out.

use std::collections::VecDeque;

use crate::number::counted;
use crate::trajectory::{Findings, Kind};

/// A start or an end within this fraction of the window counts as reached: codes that
/// add up their time, or keep it in single precision, end a little early or late.
const SLACK: f64 = 2e-7;
/// Rounded stamps can add at most this fraction of the window to it.
const MOST_SLACK: f64 = 2e-3;
/// Steps below this fraction of the window are pairs of rows around an event.
const PAIR: f64 = 1e-6;
/// A step across the end of the window covers it only if it is at most this fraction of
/// the window: that much is then not compared.
const ACROSS: f64 = 0.05;
/// A gap this many times as long as each of the steps on both sides of it is a hole. Codes that
/// choose their step lengthen it at most ten times at once, and then go on with it.
const HOLE: f64 = 20.0;
/// So many steps on either side are looked at: of stamps that were scattered at random, two
/// neighbours are that much shorter in one case of two hundred, eight in one of half a million.
const BESIDE: usize = 4;

/// A step between two rows.
#[derive(Clone, Copy, Debug)]
struct Gap {
    line: u64,
    size: f64,
    start: f64,
}

/// Follows the stamps of a run, in the unit of the case.
#[derive(Debug)]
pub(super) struct Coverage<'a> {
    from: f64,
    to: f64,
    unit: &'a str,
    /// First and last stamp of the file.
    ends: Option<(f64, f64)>,
    /// The start was reached by a row, the end by a row or by a step across it.
    begins: bool,
    finishes: bool,
    last_inside: Option<f64>,
    /// The last steps: a hole shows with those after it.
    steps: VecDeque<Gap>,
    largest: f64,
    rows: u64,
    outside: u64,
}

impl<'a> Coverage<'a> {
    pub(super) fn new(from: f64, to: f64, unit: &'a str) -> Coverage<'a> {
        Coverage {
            from,
            to,
            unit,
            ends: None,
            begins: false,
            finishes: false,
            last_inside: None,
            steps: VecDeque::with_capacity(2 * BESIDE + 1),
            largest: 0.0,
            rows: 0,
            outside: 0,
        }
    }

    /// How far outside the window a row still counts as at its edge.
    pub(super) fn slack(&self, blur: f64) -> f64 {
        let span = self.to - self.from;
        SLACK * span + blur.min(MOST_SLACK * span)
    }

    /// Takes the next stamp, known to `blur`; true where it lies within the window.
    pub(super) fn add(&mut self, line: u64, time: f64, blur: f64, findings: &mut Findings) -> bool {
        let slack = self.slack(blur);
        self.ends = Some((self.ends.map_or(time, |(first, _)| first), time));
        self.begins |= (time - self.from).abs() <= slack;
        self.finishes |= (time - self.to).abs() <= slack;
        let inside = time >= self.from - slack && time <= self.to + slack;
        if let Some(last) = self.last_inside {
            let step = time - last;
            // A code whose steps do not fit the window steps across its end.
            let across = (2.0 * self.largest).min(ACROSS * (self.to - self.from));
            self.finishes |= time > self.to && step <= across;
            if inside && step > PAIR * (self.to - self.from) {
                if self.steps.len() > 2 * BESIDE {
                    self.steps.pop_front();
                }
                self.steps.push_back(Gap {
                    line,
                    size: step,
                    start: last,
                });
                self.largest = self.largest.max(step);
                if let Some(place) = self.steps.len().checked_sub(BESIDE + 1) {
                    self.look_for_hole(place, findings);
                }
            }
        }
        if inside {
            self.last_inside = Some(time);
            self.rows += 1;
        } else {
            self.outside += 1;
        }
        inside
    }

    /// A gap against the steps on both sides of it. The first ones have few before them, the last
    /// ones few after them.
    fn look_for_hole(&self, place: usize, findings: &mut Findings) {
        let Gap { line, size, start } = self.steps[place];
        let beside = self.steps.iter().enumerate();
        let beside = beside.filter(|&(other, _)| other != place && other.abs_diff(place) <= BESIDE);
        let longest = beside.map(|(_, gap)| gap.size).fold(0.0, f64::max);
        if size > HOLE * longest && longest > 0.0 {
            let text = format!(
                "no rows between t = {start} and t = {} {}: this gap is {:.0} times as long as \
                 the steps around it",
                start + size,
                self.unit,
                size / longest
            );
            findings.fatal(Kind::MissingRows, line, text);
        }
    }

    /// What is not covered; gives the rows within the window and those outside.
    pub(super) fn conclude(self, least_rows: u64, findings: &mut Findings) -> (u64, u64) {
        let last = self.steps.len().saturating_sub(BESIDE);
        (last..self.steps.len()).for_each(|place| self.look_for_hole(place, findings));
        let Coverage {
            from,
            to,
            unit,
            rows,
            outside,
            ..
        } = self;
        let Some((first, last)) = self.ends else {
            findings.fatal(Kind::EmptyFile, None, "the file has no rows of numbers");
            return (0, 0);
        };
        let beyond = match outside {
            0 => String::new(),
            // Most often a slip in the unit of time.
            _ => format!("; {outside} rows lie outside it: is the unit of time right?"),
        };
        if !self.begins {
            let remark = if first < from {
                ", where no row lies"
            } else {
                ""
            };
            let text = format!(
                "the first row is at t = {first} {unit}, the window starts at {from} {unit}{remark}{beyond}"
            );
            findings.fatal(Kind::WindowNotCovered, None, text);
        }
        if !self.finishes {
            let remark = if last > to { ", where no row lies" } else { "" };
            let text = format!(
                "the last row is at t = {last} {unit}, the window ends at {to} {unit}{remark}{beyond}"
            );
            findings.fatal(Kind::WindowNotCovered, None, text);
        }
        if self.begins && self.finishes && outside > 9 * rows {
            let text = format!(
                "only {rows} of {} rows lie within the window{beyond}",
                rows + outside
            );
            findings.fatal(Kind::WindowNotCovered, None, text);
        }
        if rows < least_rows {
            let text = format!(
                "{} within the window, at least {least_rows} are needed",
                counted(rows, "row")
            );
            findings.fatal(Kind::TooFewRows, None, text);
        }
        (rows, outside)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn kinds(stamps: &[f64]) -> Vec<(Kind, Option<u64>)> {
        let mut findings = Findings::default();
        let mut coverage = Coverage::new(0.0, 10.0, "s");
        for (line, &stamp) in stamps.iter().enumerate() {
            coverage.add(line as u64, stamp, 0.0, &mut findings);
        }
        coverage.conclude(2, &mut findings);
        findings
            .into_list()
            .iter()
            .map(|f| (f.kind, f.line))
            .collect()
    }

    #[test]
    fn start_and_end_are_reached_by_rows() {
        use Kind::WindowNotCovered;
        assert_eq!(kinds(&[0.0, 5.0, 10.0]), []);
        assert_eq!(kinds(&[0.5, 5.0, 10.0]), [(WindowNotCovered, None)]);
        assert_eq!(kinds(&[0.0, 5.0, 9.9]), [(WindowNotCovered, None)]);
        assert_eq!(kinds(&[-1.0, 5.0, 10.0]), [(WindowNotCovered, None)]);
        assert_eq!(kinds(&[-1.0, 0.0, 5.0, 10.0]), []);
        // A small step that does not fit is borne; a leap covers nothing.
        let even: Vec<f64> = (0..=34).map(|k| 0.3 * f64::from(k)).collect();
        assert_eq!(kinds(&even), []);
        assert_eq!(kinds(&[0.0, 4.0, 8.0, 12.0]), [(WindowNotCovered, None)]);
        assert_eq!(kinds(&[0.0, 1.0, 2.0, 100.0]), [(WindowNotCovered, None)]);
    }

    #[test]
    fn a_stretch_left_out_of_varied_steps_is_seen() {
        let mut stamps: Vec<f64> = (0..200).map(|k| 0.05 * f64::from(k).powf(1.001)).collect();
        stamps.push(10.5);
        assert_eq!(kinds(&stamps), []);
        stamps.retain(|stamp| !(3.0..6.0).contains(stamp));
        assert_eq!(kinds(&stamps)[0].0, Kind::MissingRows);
    }

    #[test]
    fn codes_that_lengthen_their_step_are_not_suspected() {
        let mut stamps = vec![0.0];
        let mut step = 1e-4;
        while stamps[stamps.len() - 1] < 10.0 {
            stamps.push(stamps[stamps.len() - 1] + step);
            step *= 9.0;
        }
        stamps.push(10.0 - 1e-12);
        stamps.sort_by(f64::total_cmp);
        assert_eq!(kinds(&stamps), []);
        // Rows twice at an event, on both sides of it.
        assert_eq!(
            kinds(&[0.0, 2.0, 4.0, 4.0 + 1e-9, 6.0, 8.0, 8.0 + 1e-9, 10.0]),
            []
        );
    }

    fn texts(from: f64, to: f64, least: u64, stamps: &[(f64, f64)]) -> (u64, u64, Vec<String>) {
        let mut findings = Findings::default();
        let mut coverage = Coverage::new(from, to, "s");
        for (line, &(stamp, blur)) in stamps.iter().enumerate() {
            coverage.add(line as u64, stamp, blur, &mut findings);
        }
        let (rows, outside) = coverage.conclude(least, &mut findings);
        let list = findings.into_list();
        (rows, outside, list.iter().map(|f| f.text.clone()).collect())
    }

    #[test]
    fn edges_are_reached_within_the_slack_and_what_stamps_may_be_off() {
        // A window of 8 from -3: 2e-7 of it are 1.6e-6.
        let reached = |start: f64, end: f64, blur: f64| {
            let stamps = [(-3.0 + start, blur), (0.0, blur), (5.0 + end, blur)];
            texts(-3.0, 5.0, 2, &stamps).2.is_empty()
        };
        assert!(reached(1.5e-6, -1.5e-6, 0.0) && reached(-1.5e-6, 1.5e-6, 0.0));
        for (start, end) in [(1.7e-6, 0.0), (-1.7e-6, 0.0), (0.0, -1.7e-6)] {
            assert!(!reached(start, end, 0.0), "{start} {end}");
        }
        assert!(reached(9e-3, -9e-3, 9e-3) && !reached(9.1e-3, 0.0, 9e-3));
        // Stamps add two thousandths of the window at most, 0.016.
        assert!(reached(0.0159, -0.0159, 1.0) && !reached(0.0161, 0.0, 1.0));
        assert!(!reached(0.0, -0.0161, 1.0));
    }

    #[test]
    fn rows_outside_the_window_are_counted_and_spoken_of() {
        let stamps =
            |times: &[f64]| -> Vec<(f64, f64)> { times.iter().map(|&time| (time, 0.0)).collect() };
        let found = texts(2.0, 4.0, 2, &stamps(&[1.0, 2.0, 3.0, 4.0, 5.0, 6.0]));
        assert_eq!(found, (3, 3, vec![]));
        let found = texts(2.0, 4.0, 2, &stamps(&[2.5, 3.0, 3.5]));
        let start = "the first row is at t = 2.5 s, the window starts at 2 s";
        let end = "the last row is at t = 3.5 s, the window ends at 4 s";
        assert_eq!(found, (3, 0, vec![start.to_owned(), end.to_owned()]));
        let found = texts(2.0, 4.0, 1, &stamps(&[0.0, 3.0, 60.0]));
        let beyond = ", where no row lies; 2 rows lie outside it: is the unit of time right?";
        let start = format!("the first row is at t = 0 s, the window starts at 2 s{beyond}");
        let end = format!("the last row is at t = 60 s, the window ends at 4 s{beyond}");
        assert_eq!(found, (1, 2, vec![start, end]));
        let found = texts(2.0, 4.0, 4, &stamps(&[2.0, 3.0, 4.0]));
        assert_eq!(found.2, ["3 rows within the window, at least 4 are needed"]);
        assert_eq!(texts(2.0, 4.0, 3, &stamps(&[2.0, 3.0, 4.0])).2.len(), 0);
        // Nine rows in ten may lie outside, no more.
        let long = |outside: u32| -> Vec<f64> {
            let later = (1..=outside).map(|k| 4.0 + f64::from(k));
            [2.0, 4.0].into_iter().chain(later).collect()
        };
        assert_eq!(texts(2.0, 4.0, 2, &stamps(&long(18))).2.len(), 0);
        let found = texts(2.0, 4.0, 2, &stamps(&long(19))).2;
        let text = "only 2 of 21 rows lie within the window; 19 rows lie outside it: is the unit of \
                    time right?";
        assert_eq!(found, [text]);
    }

    #[test]
    fn the_end_may_be_stepped_across_by_a_twentieth_of_the_window() {
        // And by twice the largest step before.
        let across = |step: f64, last: f64, end: f64| {
            let count = (last / step).round() as u32;
            let mut stamps: Vec<f64> = (0..=count).map(|k| step * f64::from(k)).collect();
            stamps.push(end);
            kinds(&stamps).is_empty()
        };
        assert!(across(0.3, 9.9, 10.39));
        assert!(!across(0.3, 9.9, 10.41));
        assert!(across(0.125, 9.875, 10.12));
        assert!(!across(0.125, 9.875, 10.13));
        // From -4 to 6 it is half a unit likewise: steps of 0.3 end at 5.9.
        let shifted = |end: f64| {
            let even = (0..=33).map(|k| -4.0 + 0.3 * f64::from(k));
            let stamps: Vec<(f64, f64)> = even.chain([end]).map(|stamp| (stamp, 0.0)).collect();
            texts(-4.0, 6.0, 2, &stamps).2.is_empty()
        };
        assert!(shifted(6.39) && !shifted(6.41));
    }

    #[test]
    fn a_hole_is_twenty_times_as_long_as_four_steps_on_either_side() {
        let holed = |times: f64, lone: usize| {
            // Steps of 0.01 with one gap; one step near it is ten times as long.
            let mut stamps = vec![0.0];
            for step in 0..60 {
                let size = match step {
                    30 => 0.01 * times,
                    step if step == lone => 0.1,
                    _ => 0.01,
                };
                stamps.push(stamps[step] + size);
            }
            let last = stamps[60];
            stamps
                .iter()
                .map(|stamp| stamp * 10.0 / last)
                .collect::<Vec<f64>>()
        };
        assert_eq!(kinds(&holed(19.9, 99)), []);
        assert_eq!(kinds(&holed(20.1, 99)), [(Kind::MissingRows, Some(31))]);
        for beside in [26, 29, 31, 34] {
            assert_eq!(kinds(&holed(20.1, beside)), [], "{beside}");
        }
        for apart in [25, 35] {
            assert_eq!(kinds(&holed(20.1, apart)), [(Kind::MissingRows, Some(31))]);
        }
        let stamps = holed(40.0, 99);
        let found = texts(
            0.0,
            10.0,
            2,
            &stamps.iter().map(|&t| (t, 0.0)).collect::<Vec<_>>(),
        );
        let (start, end) = (stamps[30], stamps[30] + (stamps[31] - stamps[30]));
        let text = format!(
            "no rows between t = {start} and t = {end} s: this gap is 40 times as long as the \
             steps around it"
        );
        assert_eq!(found.2, [text]);
    }
}
