//! What printed digits can resolve: a pattern found over a whole column, and from it
//! half a unit in the last place of every value.

use std::sync::LazyLock;

use super::number::Printed;

/// How finely a column was printed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Resolution {
    /// Written in full: half a unit in the last place of an `f64`.
    Full,
    /// Half a unit of this decimal, the same in every row.
    Decimals(u8),
    /// Half a unit in the last of these significant digits, decade by decade.
    Significant(u8),
    /// Whichever is coarser of so many decimals and so many significant digits.
    Coarser(u8, u8),
    /// Numbers stored in half precision: half a unit in the last place of a binary16.
    Half,
    /// Shortest text of single-precision numbers: one unit in the last place of an
    /// `f32`, half for the rounding to it and half for the shortest text.
    Single,
}

impl Resolution {
    /// How far the number behind a printed value may lie from it.
    pub fn at(self, value: f64) -> f64 {
        let full = half_ulp(value);
        match self {
            Resolution::Full => full,
            Resolution::Decimals(decimals) => (0.5 * power_of_ten(-i32::from(decimals))).max(full),
            Resolution::Significant(digits) => {
                if value == 0.0 {
                    return full;
                }
                let decade = decade(value);
                (0.5 * power_of_ten(decade + 1 - i32::from(digits))).max(full)
            }
            Resolution::Coarser(decimals, digits) => {
                let decimals = Resolution::Decimals(decimals).at(value);
                decimals.max(Resolution::Significant(digits).at(value))
            }
            // Eleven bits; below 2^-14 the last one stands for 2^-24.
            Resolution::Half => (full * 2f64.powi(42)).max(2f64.powi(-25)),
            Resolution::Single => {
                // A value beyond the largest number of single precision is none.
                let single = (value.abs() as f32).min(f32::MAX.next_down());
                f64::from(single.next_up() - single).max(full)
            }
        }
    }

    /// True for digits that show more of a number than single precision keeps.
    pub(super) fn is_finer_than_single(self) -> bool {
        match self {
            Resolution::Full => true,
            Resolution::Decimals(digits)
            | Resolution::Significant(digits)
            | Resolution::Coarser(digits, _) => digits >= 8,
            Resolution::Half | Resolution::Single => false,
        }
    }

    /// True where it says the same as another one of every value between two magnitudes.
    pub(crate) fn agrees_with(self, other: Resolution, [smallest, largest]: [f64; 2]) -> bool {
        if self == other {
            return true;
        }
        let stored = [self, other]
            .iter()
            .any(|one| matches!(one, Resolution::Single | Resolution::Half));
        if stored || !(0.0 < smallest && smallest <= largest && largest.is_finite()) {
            return false;
        }
        // Within a decade only the rounding of the numbers changes, which is the same in both.
        let mut decades = decade(smallest)..=decade(largest);
        decades.all(|decade| {
            let value = power_of_ten(decade);
            self.at(value) == other.at(value)
        })
    }

    /// The same for one value after the other, which mostly are of one decade.
    pub(crate) fn of_neighbours(self) -> Neighbours {
        Neighbours {
            resolution: self,
            from: f64::INFINITY,
            to: 0.0,
            digits: 0.0,
        }
    }

    /// In words, for reports.
    pub fn describe(self) -> String {
        match self {
            Resolution::Full => "full double precision".to_owned(),
            Resolution::Decimals(decimals) => format!("{decimals} decimals"),
            Resolution::Significant(digits) => format!("{digits} significant digits"),
            Resolution::Coarser(decimals, digits) => {
                format!("{decimals} decimals or {digits} significant digits")
            }
            Resolution::Half => "half precision".to_owned(),
            Resolution::Single => "single precision".to_owned(),
        }
    }
}

/// What the digits resolve, remembered for values of one size.
#[derive(Debug)]
pub(crate) struct Neighbours {
    resolution: Resolution,
    from: f64,
    to: f64,
    digits: f64,
}

impl Neighbours {
    pub(crate) fn are_full(&self) -> bool {
        self.resolution == Resolution::Full
    }

    /// As [`Resolution::at`].
    pub(crate) fn at(&mut self, value: f64) -> f64 {
        let size = value.abs();
        if self.resolution == Resolution::Single {
            // The number of single precision may lie in the next power of two.
            return self.resolution.at(value);
        }
        if !(size >= self.from && size < self.to) {
            self.digits = self.resolution.at(value);
            // Within a decade and a power of two nothing changes.
            let binary = f64::from_bits(size.to_bits() & 0x7ff << 52);
            let decade = decade(value);
            self.from = power_of_ten(decade).max(binary);
            self.to = power_of_ten(decade + 1).min(2.0 * binary);
        }
        self.digits
    }
}

/// Powers of ten as `f64` reads them, from the smallest to the largest.
static POWERS: LazyLock<Vec<f64>> = LazyLock::new(|| {
    let power = |exponent: i32| format!("1e{exponent}").parse().unwrap_or(f64::INFINITY);
    (SMALLEST_POWER..=308).map(power).collect()
});
const SMALLEST_POWER: i32 = -323;

/// The `f64` nearest to a power of ten.
pub(super) fn power_of_ten(exponent: i32) -> f64 {
    let place = (exponent - SMALLEST_POWER).clamp(0, 631);
    POWERS[place as usize]
}

/// `log10(2)` in units of `2^-16`: near enough for every binary exponent.
const LOG_OF_TWO: i32 = 19_728;

/// The power of ten of the leading digit of the shortest text of a number.
pub(super) fn decade(value: f64) -> i32 {
    let size = value.abs();
    if !(size.is_finite() && size > 0.0) {
        return 0;
    }
    // The binary exponent tells it to one; below the f64 nearest to a power of ten the
    // shortest text has one digit less before the point.
    let binary = (size.to_bits() >> 52) as i32 - 1023;
    let mut decade = (binary * LOG_OF_TWO) >> 16;
    while decade < 308 && size >= power_of_ten(decade + 1) {
        decade += 1;
    }
    while decade > SMALLEST_POWER && size < power_of_ten(decade) {
        decade -= 1;
    }
    decade
}

/// Half a unit in the last place of a finite `f64`: its exponent alone, times `2^-53`.
pub fn half_ulp(value: f64) -> f64 {
    const EXPONENT: u64 = 0x7ff << 52;
    f64::from_bits(value.to_bits() & EXPONENT) * (f64::EPSILON / 2.0)
}

/// From this many digits on a column is in full: the last one is finer than an `f64`
/// over most of a decade.
const DIGITS_IN_FULL: u8 = 17;
/// Share of rows that must reach the largest number of digits for it to be the number
/// that the producer printed. Nine in ten do where trailing zeros are dropped.
const MOST_ROWS: f64 = 0.5;

/// Whole numbers that are followed by at least so many rows of the same may have been printed to
/// any digits.
const MOST_AT_REST: u64 = 50;

/// Chance below which it is none that values in single precision show no more decimals.
const CHANCE_OF_NO_MORE: f64 = 1e-3;

/// Gathers how the values of one column were printed.
#[derive(Clone, Debug)]
pub(super) struct Pattern {
    rows: u64,
    /// Values that are not zero and differ from the row before: only they tell.
    telling: u64,
    by_digits: [u64; 65],
    by_decimals: [u64; 65],
    decimals: Option<u8>,
    scientific: bool,
    even: bool,
    /// Greatest common divisor of all values in units of their last decimal.
    divisor: u64,
    constant: bool,
    /// Values that are not the shortest text of an f32.
    not_single: u64,
    /// The largest magnitude of the values that tell.
    largest: f64,
    /// The first value and how it was printed, and the last value.
    first: Option<(f64, Printed)>,
    last: f64,
}

impl Pattern {
    pub(super) fn new() -> Pattern {
        Pattern {
            rows: 0,
            telling: 0,
            by_digits: [0; 65],
            by_decimals: [0; 65],
            decimals: None,
            scientific: false,
            even: true,
            divisor: 0,
            constant: true,
            not_single: 0,
            largest: 0.0,
            first: None,
            last: f64::NAN,
        }
    }

    pub(super) fn add(&mut self, value: f64, printed: Printed) {
        let Printed {
            decimals,
            scientific,
            ..
        } = printed;
        let known = self.decimals.is_none_or(|known| known == decimals);
        self.even &= known && (self.rows == 0 || self.scientific == scientific);
        self.decimals = Some(decimals);
        self.scientific = scientific;
        if self.even && !scientific && self.divisor != 1 {
            let units = (value.abs() * power_of_ten(i32::from(decimals))).round();
            self.divisor = common_divisor(self.divisor, units.min(1e18) as u64);
        }
        if self.rows > 0 && value != self.last {
            self.constant = false;
        }
        // Whether the first value of a piece is new shows where it is joined to the rows before.
        if self.first.is_none() {
            self.first = Some((value, printed));
        } else if value != 0.0 && value != self.last {
            self.tell(value, printed);
        }
        self.rows += 1;
        self.last = value;
    }

    fn tell(&mut self, value: f64, printed: Printed) {
        self.telling += 1;
        self.by_digits[usize::from(printed.significant).min(64)] += 1;
        // Programs go over to an exponent for small numbers, however they were rounded.
        let decimals = match printed.scientific {
            true => i32::from(printed.significant) - 1 - decade(value),
            false => i32::from(printed.decimals),
        };
        if decimals >= 0 {
            self.by_decimals[(decimals as usize).min(64)] += 1;
        }
        let single = is_shortest_single(value, printed.significant);
        self.not_single += u64::from(!single);
        self.largest = self.largest.max(value.abs());
    }

    /// Takes in what the rows after these show.
    pub(super) fn join(&mut self, next: &Pattern) {
        let Some((value, printed)) = next.first else {
            return;
        };
        let is_first = self.rows == 0;
        if value != 0.0 && (is_first || value != self.last) {
            self.tell(value, printed);
        }
        self.constant &= next.constant && (is_first || value == self.last);
        let same = self.decimals == next.decimals && self.scientific == next.scientific;
        self.even &= next.even && (is_first || same);
        self.divisor = common_divisor(self.divisor, next.divisor);
        (self.decimals, self.scientific) = (next.decimals, next.scientific);
        self.telling += next.telling;
        self.not_single += next.not_single;
        self.largest = self.largest.max(next.largest);
        self.rows += next.rows;
        self.last = next.last;
        for (counts, more) in [
            (&mut self.by_digits, &next.by_digits),
            (&mut self.by_decimals, &next.by_decimals),
        ] {
            for (count, more) in counts.iter_mut().zip(more) {
                *count += more;
            }
        }
    }

    /// True where no further row can change what was found: a value in full, of a column whose
    /// values move and have no pattern.
    pub(super) fn is_settled(&self) -> bool {
        let in_full = self.by_digits[usize::from(DIGITS_IN_FULL)..]
            .iter()
            .any(|&n| n > 0);
        in_full && !self.even && !self.constant && self.rows > 2
    }

    /// The row after this one does not follow it.
    pub(super) fn interrupt(&mut self) {
        self.last = f64::NAN;
    }

    /// Decimals and whether with an exponent, where every row has the same.
    pub(super) fn even(&self) -> Option<(u8, bool)> {
        let decimals = self.decimals.filter(|_| self.even && self.rows > 2)?;
        Some((decimals, self.scientific))
    }

    /// True where the text itself shows how finely it was printed.
    pub(super) fn is_clear(&self) -> bool {
        self.conclude(None) != Resolution::Full
    }

    /// The digits of the longest value, where they are fewer than those of numbers in full:
    /// what the column may have been rounded to, whatever pattern it shows.
    pub(super) fn longest(&self) -> Option<u8> {
        let most = self.by_digits.iter().rposition(|&count| count > 0)?;
        (self.telling >= 8 && (4..=12).contains(&most)).then_some(most as u8)
    }

    /// All but a few: of two shortest texts that are equally near, programs write
    /// either.
    fn is_single(&self) -> bool {
        30 * self.not_single <= self.telling
    }

    /// True where values in single precision would show more decimals than any of these has: the
    /// numbers of so many decimals are so far apart that some of single precision lie between them,
    /// and all values are small enough for that.
    fn would_show_more(&self, decimals: u8) -> bool {
        let single = 2.0 * half_ulp(self.largest) * 2f64.powi(29);
        // A number of single precision has one of so many decimals near it with this chance.
        let chance = single * power_of_ten(i32::from(decimals));
        self.telling as f64 * chance.ln() < CHANCE_OF_NO_MORE.ln()
    }

    /// True where all values are equal, or next to all of them zero, so that the column tells
    /// nothing by itself.
    pub(super) fn tells_nothing(&self) -> bool {
        let whole = self.even && self.decimals == Some(0);
        self.constant || whole && MOST_AT_REST * self.telling <= self.rows
    }

    /// Digits that all but a few values have: the last line may be cut off where it has
    /// clearly fewer.
    pub(super) fn usual_digits(&self) -> usize {
        let few = self.telling / 50;
        let mut seen = 0;
        let shortest = self.by_digits.iter().position(|&count| {
            seen += count;
            seen > few
        });
        shortest.filter(|_| self.telling >= 20).unwrap_or(0)
    }

    /// As [`Pattern::conclude`], for time stamps: those that are all multiples of the
    /// same few units were chosen, not rounded.
    pub(super) fn conclude_stamps(&self, stated: Option<u8>) -> Resolution {
        let chosen = self.divisor >= 5 && self.telling >= 4;
        match self.conclude(stated) {
            Resolution::Decimals(_) if chosen && self.even().is_some() => Resolution::Full,
            other => other,
        }
    }

    pub(super) fn conclude(&self, stated: Option<u8>) -> Resolution {
        if let Some(digits) = stated {
            let in_full = digits >= DIGITS_IN_FULL;
            return if in_full {
                Resolution::Full
            } else {
                Resolution::Significant(digits)
            };
        }
        let most = self
            .by_digits
            .iter()
            .rposition(|&count| count > 0)
            .unwrap_or(0) as u8;
        if self.tells_nothing() || self.telling == 0 {
            return Resolution::Full;
        }
        if let Some((decimals, false)) = self.even() {
            return Resolution::Decimals(decimals);
        }
        if most >= DIGITS_IN_FULL {
            return Resolution::Full;
        }
        // Eight or nine digits, every value the shortest text of an f32: of other numbers
        // of eight digits only every second one is.
        let most_rows = |count: u64| count as f64 > MOST_ROWS * self.telling as f64;
        let decimals = self
            .by_decimals
            .iter()
            .rposition(|&count| count > 0)
            .unwrap_or(0);
        let rounded = most_rows(self.by_decimals[decimals]);
        let is_single = self.is_single() && !(rounded && self.would_show_more(decimals as u8));
        if is_single && most >= 8 && self.telling >= 8 {
            return Resolution::Single;
        }
        let digits = most_rows(self.by_digits[usize::from(most)]);
        // Rounded to decimals, trailing zeros dropped, over numbers of several decades.
        let lengths = self.by_digits.iter().filter(|&&count| count > 0).count();
        let rounded = rounded && lengths > 1 && self.telling >= 8;
        match (rounded, digits) {
            (true, true) => Resolution::Coarser(decimals as u8, most),
            (true, false) => Resolution::Decimals(decimals as u8),
            (false, true) => Resolution::Significant(most),
            // Seven to nine digits without a pattern: the shortest text of an f32.
            (false, false) if is_single && most >= 7 => Resolution::Single,
            (false, false) => Resolution::Full,
        }
    }
}

/// Euclid's algorithm; zero divides nothing.
fn common_divisor(a: u64, b: u64) -> u64 {
    let (mut a, mut b) = (a, b);
    while b != 0 {
        (a, b) = (b, a % b);
    }
    a
}

/// True for a number in single precision, in its shortest text or printed to so many digits.
pub(super) fn is_single(value: f64, digits: u8) -> bool {
    let apart = (value - f64::from(value as f32)).abs();
    let unit = || power_of_ten(decade(value) + 1 - i32::from(digits));
    apart == 0.0 || digits >= 9 && apart <= 0.501 * unit() || is_shortest_single(value, digits)
}

/// True for the shortest text of a number in single precision.
fn is_shortest_single(value: f64, digits: u8) -> bool {
    // Numbers of six digits are all told apart by single precision, so that there is no
    // shorter text for any of them.
    let short = digits <= 6 && (1e-30..1e30).contains(&value.abs());
    short || digits <= 9 && prints_as_single(value)
}

#[cold]
fn prints_as_single(value: f64) -> bool {
    let (single, text) = (f64::from(value as f32), format!("{:e}", value as f32));
    text.parse::<f64>().is_ok_and(|shortest| {
        let apart = |text: f64| (text - single).abs();
        let beside = (apart(value) - apart(shortest)).abs() <= 4.0 * f64::EPSILON * value.abs();
        // Of two texts that are equally near and equally long, programs write either.
        shortest == value || beside && format!("{value:e}").len() == text.len()
    })
}

#[cfg(test)]
mod tests;
