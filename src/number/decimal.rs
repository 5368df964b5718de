//! Decimal numbers as they are printed: whole digits and a power of ten. Time
//! stamps are compared and added as such, so that a grid of 0.1 is a grid.

use super::Double;

/// `digits * 10^exponent`, exactly; at most 36 digits.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Decimal {
    digits: i128,
    exponent: i32,
}

/// More digits than this could overflow when two numbers are aligned.
const MOST_DIGITS: u32 = 36;

impl Decimal {
    /// A number from its digits and exponent, trailing zeros removed; `None`
    /// where there are more than 36 digits.
    pub fn new(digits: i128, exponent: i32) -> Option<Decimal> {
        let (mut digits, mut exponent) = (digits, exponent);
        if digits == 0 {
            return Some(Decimal {
                digits: 0,
                exponent: 0,
            });
        }
        // 64 bits at once where they are enough: it is done for every stamp of a file.
        if let Ok(short) = i64::try_from(digits) {
            let (short, zeros) = without_zeros(short.unsigned_abs());
            let digits = i128::from(short) * digits.signum();
            return Some(Decimal {
                digits,
                exponent: exponent + zeros,
            });
        }
        while digits % 10 == 0 {
            digits /= 10;
            exponent += 1;
        }
        (digits.unsigned_abs() < 10u128.pow(MOST_DIGITS)).then_some(Decimal { digits, exponent })
    }

    /// From a sign, at most 19 digits and an exponent.
    pub fn of_digits(negative: bool, digits: u64, exponent: i32) -> Decimal {
        let (digits, zeros) = without_zeros(digits);
        let size = i128::from(digits);
        Decimal {
            digits: if negative { -size } else { size },
            exponent: if digits == 0 { 0 } else { exponent + zeros },
        }
    }

    /// Reads plain or exponential decimal text (`.` as the decimal sign).
    pub fn parse(text: &str) -> Option<Decimal> {
        let (sign, text) = match text.as_bytes().first()? {
            b'-' => (-1, &text[1..]),
            b'+' => (1, &text[1..]),
            _ => (1, text),
        };
        let (mantissa, power) = match text.find(['e', 'E']) {
            Some(at) => (&text[..at], text[at + 1..].parse::<i32>().ok()?),
            None => (text, 0),
        };
        let (mut digits, mut decimals, mut count, mut point) = (0i128, 0i32, 0, false);
        for byte in mantissa.bytes() {
            match byte {
                b'0'..=b'9' => {
                    digits = digits
                        .checked_mul(10)?
                        .checked_add(i128::from(byte - b'0'))?;
                    decimals += i32::from(point);
                    count += 1;
                }
                b'.' if !point => point = true,
                _ => return None,
            }
        }
        if count == 0 || !(-400..=400).contains(&power) {
            return None;
        }
        Decimal::new(sign * digits, power.checked_sub(decimals)?)
    }

    /// The decimal that an `f64` is printed as: the shortest that reads back equal.
    pub fn shortest(value: f64) -> Option<Decimal> {
        value
            .is_finite()
            .then(|| Decimal::parse(&format!("{value:e}")))?
    }

    /// Difference, exact; `None` where it needs more than 36 digits.
    pub fn minus(self, other: Decimal) -> Option<Decimal> {
        if self.digits == 0 {
            return Some(Decimal {
                digits: -other.digits,
                ..other
            });
        }
        if other.digits == 0 {
            return Some(self);
        }
        let exponent = self.exponent.min(other.exponent);
        if let (Some(a), Some(b)) = (self.in_units(exponent), other.in_units(exponent))
            && let Some(rest) = a.checked_sub(b)
        {
            return Some(Decimal::of_digits(rest < 0, rest.unsigned_abs(), exponent));
        }
        let align = |d: Decimal| {
            let shift = u32::try_from(d.exponent - exponent)
                .ok()
                .filter(|&s| s < MOST_DIGITS)?;
            d.digits.checked_mul(10i128.pow(shift))
        };
        Decimal::new(align(self)?.checked_sub(align(other)?)?, exponent)
    }

    /// The number in units of `10^exponent`, which is not above its own, if that fits 64 bits.
    fn in_units(self, exponent: i32) -> Option<i64> {
        let digits = i64::try_from(self.digits).ok()?;
        match self.exponent - exponent {
            0 => Some(digits),
            shift @ 1..=18 => digits.checked_mul(10i64.pow(shift.unsigned_abs())),
            _ => None,
        }
    }

    /// A whole multiple; `None` where it needs more than 36 digits.
    pub fn times(self, count: i64) -> Option<Decimal> {
        Decimal::new(self.digits.checked_mul(i128::from(count))?, self.exponent)
    }

    /// True for zero.
    pub fn is_zero(self) -> bool {
        self.digits == 0
    }

    /// To double-double; relative error below `20 * 2^-106` (zero below 1e-290).
    pub fn to_double(self) -> Double {
        let short = i64::try_from(self.digits).ok();
        if let Some(digits) = short.filter(|d| d.unsigned_abs() < 1 << 62)
            && self.exponent.abs() <= 22
        {
            let power = EXACT_POWERS[self.exponent.unsigned_abs() as usize];
            let digits = Double::whole(digits);
            return match self.exponent {
                0 => digits,
                1.. => digits * Double::from(power),
                _ => digits.over(power),
            };
        }
        const CHUNK: i128 = 1 << 52;
        let low = self.digits % CHUNK;
        let middle = self.digits / CHUNK % CHUNK;
        let high = self.digits / CHUNK / CHUNK;
        let digits = Double::from(high as f64).scale(CHUNK as f64 * CHUNK as f64)
            + Double::from(middle as f64).scale(CHUNK as f64)
            + Double::from(low as f64);
        let ten = Double::from(10.0);
        if self.exponent >= 0 {
            digits * ten.powi(self.exponent.min(400))
        } else if self.exponent > -280 {
            digits / ten.powi(-self.exponent)
        } else {
            digits / ten.powi(150) / ten.powi((-self.exponent).min(440) - 150)
        }
    }
}

/// Powers of ten that an `f64` holds exactly.
pub(crate) const EXACT_POWERS: [f64; 23] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16,
    1e17, 1e18, 1e19, 1e20, 1e21, 1e22,
];

/// Digits without zeros at their end, and how many there were.
fn without_zeros(mut digits: u64) -> (u64, i32) {
    let mut zeros = 0;
    while digits != 0 && digits.is_multiple_of(10) {
        digits /= 10;
        zeros += 1;
    }
    (digits, zeros)
}

impl From<Decimal> for Double {
    fn from(decimal: Decimal) -> Double {
        decimal.to_double()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn read(text: &str) -> Decimal {
        Decimal::parse(text).unwrap()
    }

    #[test]
    fn equal_numbers_are_equal_however_printed() {
        assert_eq!(read("0.10"), read("1e-1"));
        assert_eq!(read("+1200"), read("1.2E3"));
        assert_eq!(read("-0.0"), read("0"));
    }

    #[test]
    fn differences_on_a_decimal_grid_are_exact() {
        let step = read("0.3").minus(read("0.2")).unwrap();
        assert_eq!(step, read("0.1"));
        assert_eq!(read("1e3").minus(read("0.001")).unwrap(), read("999.999"));
        assert_eq!(read("0").minus(read("2.5")).unwrap(), read("-2.5"));
        assert_eq!(step.times(7).unwrap(), read("0.7"));
    }

    #[test]
    fn text_that_is_no_decimal_is_refused() {
        for text in [
            "",
            "-",
            ".",
            "1e",
            "1.2.3",
            "nan",
            "1e999999999",
            "0x10",
            "1 2",
        ] {
            assert_eq!(Decimal::parse(text), None, "{text}");
        }
    }

    #[test]
    fn conversion_keeps_more_than_an_f64() {
        let tenth = read("0.1").to_double();
        let gap = tenth - Double::ONE / Double::from(10.0);
        assert!(gap.abs().to_f64() < 1e-31);
        assert_eq!(
            read("123456789012345678901234567890").to_double().to_f64(),
            1.2345678901234568e29
        );
        assert_eq!(read("5e-300").to_double().to_f64(), 5e-300);
        assert_eq!(Decimal::shortest(0.1), Decimal::parse("0.1"));
        assert_eq!(Decimal::shortest(1e-7), Decimal::parse("1e-7"));
    }
}
