//! Steps that hit every jump of the inputs.

use super::run::{Grid, MOST_STEPS};
use crate::exact::Exact;
use crate::method::NEAR;
use crate::number::Double;
use crate::outcome::JumpGrid;

/// Remainders below this fraction of the window are rounding: times are known to
/// 2^-104, and the Euclidean algorithm loses the digits that its quotients have.
const ROUNDING: f64 = 1e-22;

/// Times of the jumps in double-double.
pub(super) fn jump_times(exact: &Exact) -> Vec<Double> {
    let mut times = Vec::new();
    let mut time = exact.from();
    while let Some(next) = exact.jump_after(time, f64::INFINITY) {
        times.push(next);
        time = next;
    }
    times
}

/// Jumps, and the steps that hit all of them.
pub(super) fn jump_grid(exact: &Exact, times: &[Double]) -> JumpGrid {
    let span = exact.to() - exact.from();
    let since: Vec<Double> = times.iter().map(|&time| time - exact.from()).collect();
    let common = common_divisor(&since, span.to_f64());
    let with_end: Vec<Double> = since.iter().copied().chain([span]).collect();
    let with_end = common_divisor(&with_end, span.to_f64());
    JumpGrid {
        times: times.iter().map(|time| time.to_f64()).collect(),
        common,
        // Without jumps the end alone is no answer to anything.
        common_with_end: with_end.filter(|_| !times.is_empty()),
    }
}

/// How many jumps lie between the nodes of a grid.
pub(super) fn missed(exact: &Exact, times: &[Double], grid: Grid) -> usize {
    let off = |time: &&Double| {
        let steps = ((**time - exact.from()) / grid.step).to_f64();
        (steps - steps.round()).abs() > NEAR
    };
    times.iter().filter(off).count()
}

/// The largest number of which all are whole multiples, by Euclid's algorithm; `None`
/// where it is too short for a run over the window.
fn common_divisor(numbers: &[Double], span: f64) -> Option<f64> {
    let shortest = span / MOST_STEPS as f64;
    let mut numbers = numbers.iter().copied();
    let mut divisor = numbers.next()?;
    for number in numbers {
        let (mut large, mut small) = (number, divisor);
        while small.to_f64() > ROUNDING * span {
            // The nearest multiple: a quotient just below a whole number is that number.
            let whole = (large / small + Double::from(0.5)).floor();
            (large, small) = (small, (large - small * whole).abs());
        }
        divisor = large;
        if divisor.to_f64() < shortest {
            return None;
        }
    }
    (divisor.to_f64() >= shortest).then(|| divisor.to_f64())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::number::Decimal;

    fn divisor(texts: &[&str]) -> Option<f64> {
        let numbers: Vec<Double> = texts
            .iter()
            .map(|text| match text.split_once('/') {
                Some((a, b)) => {
                    Decimal::parse(a).unwrap().to_double() / Decimal::parse(b).unwrap().to_double()
                }
                None => Decimal::parse(text).unwrap().to_double(),
            })
            .collect();
        let largest = numbers.iter().map(|n| n.to_f64()).fold(0.0, f64::max);
        common_divisor(&numbers, largest)
    }

    #[test]
    fn divisors_of_decimals_and_fractions() {
        assert_eq!(divisor(&["600", "1500", "14400"]), Some(300.0));
        assert_eq!(divisor(&["0.1", "0.25", "2"]), Some(0.05));
        assert_eq!(divisor(&["0.7", "2.1", "0.3"]), Some(0.1));
        assert_eq!(divisor(&["1/3", "1/2", "2"]), Some(1.0 / 6.0));
        assert_eq!(divisor(&["3"]), Some(3.0));
        // 17 digits of a third are no third.
        assert_eq!(divisor(&["0.33333333333333333", "1"]), None);
        assert_eq!(divisor(&["3.14159265358979323846", "1"]), None);
        assert_eq!(divisor(&["1e-6", "1"]), None);
    }
}
