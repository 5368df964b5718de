//! An axis of a plot: from numbers to places on the page, and the numbers written at it.

use crate::number::{plain, short};

/// Places on the page that belong to the ends of an axis, and how numbers lie in between.
#[derive(Clone, Debug)]
pub(super) struct Axis {
    /// Quantity and unit, as written beside it.
    pub label: String,
    kind: Kind,
    /// The numbers at its ends; logarithms to base ten of them on a log axis.
    ends: (f64, f64),
    places: (f64, f64),
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Kind {
    Linear,
    Log,
    /// Whole numbers.
    Ranks,
}

/// Decades that are shown at most: an exploding run must not squeeze all else into a line.
const MOST_DECADES: f64 = 40.0;

impl Axis {
    /// An axis with equal steps that holds all of these numbers.
    pub fn linear(label: String, numbers: impl Iterator<Item = f64>, places: (f64, f64)) -> Axis {
        let (low, high) = range(numbers);
        let room = 0.04 * (high - low);
        let ends = match (low, high) {
            _ if low > high => (0.0, 1.0),
            _ if low == high => (
                low - 0.5 * low.abs().max(1.0),
                high + 0.5 * high.abs().max(1.0),
            ),
            _ => (low - room, high + room),
        };
        Axis {
            label,
            kind: Kind::Linear,
            ends,
            places,
        }
    }

    /// The same without room beyond the numbers, as for time.
    pub fn tight(label: String, numbers: impl Iterator<Item = f64>, places: (f64, f64)) -> Axis {
        let (low, high) = range(numbers);
        let ends = if low < high { (low, high) } else { (0.0, 1.0) };
        Axis {
            label,
            kind: Kind::Linear,
            ends,
            places,
        }
    }

    /// An axis of decades that holds all of these numbers which are above zero.
    pub fn log(label: String, numbers: impl Iterator<Item = f64>, places: (f64, f64)) -> Axis {
        let (low, high) = range(numbers.filter(|&x| x > 0.0).map(f64::log10));
        let ends = if low > high {
            (-1.0, 0.0)
        } else {
            let low = low.max(high - MOST_DECADES);
            let room = (0.06 * (high - low)).max(0.15);
            (low - room, high + room)
        };
        Axis {
            label,
            kind: Kind::Log,
            ends,
            places,
        }
    }

    /// An axis of places in a list, the first on top.
    pub fn ranks(label: &str, count: usize, places: (f64, f64)) -> Axis {
        Axis {
            label: label.to_owned(),
            kind: Kind::Ranks,
            ends: (count as f64 + 0.5, 0.5),
            places,
        }
    }

    /// The place of a number, beyond the ends as well; `None` for what a log axis has no
    /// place for.
    pub fn place(&self, number: f64) -> Option<f64> {
        let number = if self.kind == Kind::Log {
            number.log10()
        } else {
            number
        };
        if !number.is_finite() {
            return None;
        }
        let (low, high) = self.ends;
        let share = (number - low) / (high - low);
        Some(self.places.0 + share * (self.places.1 - self.places.0))
    }

    /// The least and the greatest place on the page between the ends.
    pub fn reach(&self) -> (f64, f64) {
        let (from, to) = self.places;
        (from.min(to), from.max(to))
    }

    /// Numbers to write at the axis with their places.
    pub fn marks(&self) -> Vec<(f64, String)> {
        let marks = if self.kind == Kind::Log {
            self.decades()
        } else {
            self.steps()
        };
        let placed = |(number, text): (f64, String)| Some((self.place(number)?, text));
        let (least, most) = self.reach();
        let within = |(place, _): &(f64, String)| (least - 1e-6..=most + 1e-6).contains(place);
        marks
            .into_iter()
            .filter_map(placed)
            .filter(within)
            .collect()
    }

    fn steps(&self) -> Vec<(f64, String)> {
        let (low, high) = (self.ends.0.min(self.ends.1), self.ends.0.max(self.ends.1));
        let rough = (high - low) / 5.0;
        let decade = 10f64.powf(rough.log10().floor());
        let step = [1.0, 2.0, 5.0, 10.0]
            .map(|digit| digit * decade)
            .into_iter()
            .find(|step| *step >= rough)
            .unwrap_or(10.0 * decade);
        let step = if self.kind == Kind::Ranks {
            step.max(1.0)
        } else {
            step
        };
        let first = (low / step - 1e-9).ceil() as i64;
        let last = (high / step + 1e-9).floor() as i64;
        (first..=last)
            .take(12)
            .map(|k| {
                let number = k as f64 * step;
                // No digits that only the product has made, and as many as tell the marks
                // apart.
                let decimals = (-step.log10() - 1e-9).ceil().max(0.0) as usize;
                let text = if number.abs() < 1e-6 * step {
                    "0".to_owned()
                } else if decimals > 5 || number.abs() >= 1e6 {
                    let decades = number.abs().log10().floor() - (step.log10() + 1e-9).floor();
                    let digits = decades.max(0.0) as usize;
                    format!("{number:.digits$e}")
                } else {
                    format!("{number:.decimals$}")
                };
                (number, text)
            })
            .collect()
    }

    fn decades(&self) -> Vec<(f64, String)> {
        let (low, high) = self.ends;
        let every = ((high - low) / 7.0).ceil().max(1.0) as i32;
        let inner: &[f64] = if high - low < 1.6 {
            &[1.0, 2.0, 5.0]
        } else {
            &[1.0]
        };
        let mut marks = Vec::new();
        for decade in low.floor() as i32..=high.floor() as i32 {
            if decade.rem_euclid(every) != 0 {
                continue;
            }
            for &digit in inner {
                let number = digit * 10f64.powi(decade);
                if (low..=high).contains(&number.log10()) {
                    let text = if inner.len() > 1 {
                        plain((number * 1e12).round() / 1e12)
                    } else {
                        power_of_ten(decade)
                    };
                    let small = number < 1e-3 && inner.len() > 1;
                    let text = if small { format!("{number:.0e}") } else { text };
                    marks.push((number, text));
                }
            }
        }
        if marks.len() < 2 {
            // Within one digit there is no round number: the ends are written.
            let end = |logarithm: f64| {
                let number = 10f64.powf(logarithm);
                (number, short(number))
            };
            return vec![end(low), end(high)];
        }
        marks
    }
}

fn range(numbers: impl Iterator<Item = f64>) -> (f64, f64) {
    let finite = numbers.filter(|x| x.is_finite());
    finite.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), x| {
        (low.min(x), high.max(x))
    })
}

/// As in 10⁻³.
fn power_of_ten(exponent: i32) -> String {
    let raised = |c: char| match c {
        '-' => '⁻',
        '1' => '¹',
        '2' => '²',
        '3' => '³',
        digit => char::from_u32('⁰' as u32 + digit as u32 - '0' as u32).unwrap_or(digit),
    };
    match exponent {
        0 => "1".to_owned(),
        1 => "10".to_owned(),
        _ => format!(
            "10{}",
            exponent.to_string().chars().map(raised).collect::<String>()
        ),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_lie_between_the_ends() {
        let axis = Axis::tight(
            "t, s".to_owned(),
            [0.0, 14_400.0].into_iter(),
            (60.0, 460.0),
        );
        assert_eq!(axis.place(0.0), Some(60.0));
        assert_eq!(axis.place(7200.0), Some(260.0));
        let texts: Vec<String> = axis.marks().into_iter().map(|(_, text)| text).collect();
        assert_eq!(texts, ["0", "5000", "10000"]);
    }

    #[test]
    fn decades_are_even_and_zero_has_no_place() {
        let axis = Axis::log(
            "error".to_owned(),
            [1e-12, 0.0, 1e-2].into_iter(),
            (200.0, 0.0),
        );
        assert_eq!(axis.place(0.0), None);
        let gap = |a: f64, b: f64| axis.place(a).unwrap() - axis.place(b).unwrap();
        assert!((gap(1e-11, 1e-10) - gap(1e-5, 1e-4)).abs() < 1e-9);
        let texts: Vec<String> = axis.marks().into_iter().map(|(_, text)| text).collect();
        assert_eq!(texts, ["10⁻¹²", "10⁻¹⁰", "10⁻⁸", "10⁻⁶", "10⁻⁴", "10⁻²"]);
    }

    #[test]
    fn steps_within_one_decade_have_plain_marks() {
        let axis = Axis::log("step".to_owned(), [10.0, 40.0].into_iter(), (0.0, 400.0));
        let texts: Vec<String> = axis.marks().into_iter().map(|(_, text)| text).collect();
        assert_eq!(texts, ["10", "20", "50"]);
    }

    /// No number, one number and numbers without end leave an axis that can be drawn.
    #[test]
    fn odd_numbers_leave_an_axis() {
        for numbers in [
            vec![2.9, 3.5],
            vec![0.98, 0.9801],
            vec![1e9, 1e9 + 1.0],
            vec![],
            vec![3.0],
            vec![f64::NAN, f64::INFINITY],
            vec![1e-300, 1e300],
        ] {
            for axis in [
                Axis::linear(String::new(), numbers.iter().copied(), (0.0, 1.0)),
                Axis::log(String::new(), numbers.iter().copied(), (0.0, 1.0)),
                Axis::tight(String::new(), numbers.iter().copied(), (0.0, 1.0)),
            ] {
                assert!(axis.marks().len() < 50);
                let texts: Vec<String> = axis.marks().into_iter().map(|(_, text)| text).collect();
                let mut unique = texts.clone();
                unique.dedup();
                assert_eq!(unique, texts);
            }
        }
    }
}
