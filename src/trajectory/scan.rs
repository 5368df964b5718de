//! The quick path for plain numbers: sign, digits, point and exponent in one pass, eight
//! characters at a time, with everything that is asked of a number in a file: its value, how
//! it was printed, and its exact decimal. What is not plain goes the way of
//! [`Field::read`](super::number::Field::read), which gives the same where both apply.

use super::number::{MOST_CHARACTERS, Printed};
use crate::number::{Decimal, Double, EXACT_POWERS};

/// One number as it stands in a file.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Scanned {
    /// The nearest `f64`.
    pub value: f64,
    /// How it was printed.
    pub printed: Printed,
    pub negative: bool,
    /// The number is `digits * 10^exponent`; the exponent stays within 2000.
    pub digits: u64,
    pub exponent: i32,
}

impl Scanned {
    /// The number exactly as printed.
    pub fn decimal(&self) -> Decimal {
        Decimal::of_digits(self.negative, self.digits, self.exponent)
    }

    /// The same to double-double: what the nearest `f64` leaves, over the power of ten.
    pub fn double(&self) -> Double {
        let power = EXACT_POWERS.get(self.exponent.unsigned_abs() as usize);
        let (Some(&power), true) = (power, self.exponent <= 0 && self.digits < 1 << 62) else {
            return self.decimal().to_double();
        };
        let digits = Double::whole(self.digits as i64);
        let product = Double::from_product(self.value.abs(), power);
        let rest = ((digits.to_f64() - product.to_f64()) - product.low()) + digits.low();
        let moment = Double::from_sum(self.value.abs(), rest / power);
        if self.negative { -moment } else { moment }
    }
}

/// So many digits fit 64 bits whatever they are.
const MOST_DIGITS: usize = 19;

/// The number that a text begins with, and the length of it; `None` where it is not plain: no
/// number at all, too many digits, out of the range of normal numbers, or so near the middle
/// of two of them that 64 bits do not tell.
///
/// Where the next number begins must not wait for the value of this one: lengths are found by
/// branches, which a processor foresees, and not by arithmetic.
#[inline(always)]
pub(super) fn scan(text: &[u8], point: u8) -> Option<(Scanned, usize)> {
    let negative = text.first() == Some(&b'-');
    let start = usize::from(negative || text.first() == Some(&b'+'));
    let mut digits = 0;
    let first = after_zeros(text, start);
    let mut at = one_by_one(text, first, &mut digits);
    let (whole, mut counted) = (at - start, at - first);
    let mut decimals = 0;
    if text.get(at) == Some(&point) {
        let fraction = at + 1;
        // Zeros after the point of a number below one are no digits of it.
        let first = match counted {
            0 => after_zeros(text, fraction),
            _ => fraction,
        };
        at = eight_by_eight(text, first, &mut digits);
        at = four_at_once(text, at, &mut digits);
        at = one_by_one(text, at, &mut digits);
        counted += at - first;
        decimals = at - fraction;
    }
    if whole + decimals == 0 || counted > MOST_DIGITS {
        return None;
    }
    let (mut exponent, mut scientific) = (0, false);
    if let Some(b'e' | b'E' | b'd' | b'D') = text.get(at) {
        (exponent, at) = exponent_at(text, at + 1)?;
        scientific = true;
    }
    if at > MOST_CHARACTERS {
        return None;
    }
    let exponent = exponent - decimals as i32;
    let size = nearest(digits, exponent)?;
    let printed = Printed {
        significant: counted as u8,
        decimals: decimals as u8,
        scientific,
    };
    let scanned = Scanned {
        value: if negative { -size } else { size },
        printed,
        negative,
        digits,
        exponent,
    };
    Some((scanned, at))
}

/// A whole number with or without a sign, and the place after it.
fn exponent_at(text: &[u8], at: usize) -> Option<(i32, usize)> {
    let sign = text.get(at).copied();
    let begin = at + usize::from(matches!(sign, Some(b'+' | b'-')));
    let mut size = 0;
    let end = one_by_one(text, begin, &mut size);
    if end == begin || end - begin > 6 {
        return None;
    }
    let size = size as i32;
    Some((if sign == Some(b'-') { -size } else { size }, end))
}

/// The place after a run of zeros.
#[inline(always)]
fn after_zeros(text: &[u8], mut at: usize) -> usize {
    while text.get(at) == Some(&b'0') {
        at += 1;
    }
    at
}

/// The place after a run of digits, which are taken in; more than [`MOST_DIGITS`] leave
/// nothing sensible in `digits`.
#[inline(always)]
fn one_by_one(text: &[u8], mut at: usize, digits: &mut u64) -> usize {
    while let Some(digit) = text.get(at).map(|byte| byte.wrapping_sub(b'0'))
        && digit < 10
    {
        *digits = digits.wrapping_mul(10).wrapping_add(u64::from(digit));
        at += 1;
    }
    at
}

/// The same for as many whole eights of digits as there are.
#[inline(always)]
fn eight_by_eight(text: &[u8], mut at: usize, digits: &mut u64) -> usize {
    while let Some(eight) = text.get(at..).and_then(|rest| rest.first_chunk::<8>()) {
        let word = u64::from_le_bytes(*eight) ^ 0x3030_3030_3030_3030;
        // The highest bit of a byte above nine; a carry comes from such a byte only.
        let beyond = word.wrapping_add(0x7676_7676_7676_7676) | word;
        if beyond & 0x8080_8080_8080_8080 != 0 {
            break;
        }
        let number = number_of_eight(word);
        *digits = digits.wrapping_mul(100_000_000).wrapping_add(number);
        at += 8;
    }
    at
}

/// The same for four digits, if there are so many.
#[inline(always)]
fn four_at_once(text: &[u8], at: usize, digits: &mut u64) -> usize {
    let Some(four) = text.get(at..).and_then(|rest| rest.first_chunk::<4>()) else {
        return at;
    };
    let word = u32::from_le_bytes(*four) ^ 0x3030_3030;
    let beyond = word.wrapping_add(0x7676_7676) | word;
    if beyond & 0x8080_8080 != 0 {
        return at;
    }
    let pairs = word.wrapping_mul(10).wrapping_add(word >> 8);
    let number = (pairs & 0xff) * 100 + (pairs >> 16 & 0xff);
    *digits = digits.wrapping_mul(10_000).wrapping_add(u64::from(number));
    at + 4
}

/// The number of eight digits, one in each byte, the first one lowest: neighbours are joined
/// to pairs, then four pairs with two products.
#[inline(always)]
fn number_of_eight(digits: u64) -> u64 {
    const PAIR: u64 = 0x0000_00ff_0000_00ff;
    let pairs = digits.wrapping_mul(10).wrapping_add(digits >> 8);
    let outer = (pairs & PAIR).wrapping_mul(100 + (1_000_000 << 32));
    let inner = ((pairs >> 16) & PAIR).wrapping_mul(1 + (10_000 << 32));
    outer.wrapping_add(inner) >> 32
}

/// The `f64` nearest to `digits * 10^exponent`.
#[inline(always)]
fn nearest(digits: u64, exponent: i32) -> Option<f64> {
    if digits < 1 << 53 {
        // Both numbers are exact, and the result is rounded once.
        let number = digits as i64 as f64;
        let power = EXACT_POWERS.get(exponent.unsigned_abs() as usize);
        match power {
            Some(power) if exponent < 0 => return Some(number / power),
            Some(power) => return Some(number * power),
            None if digits == 0 => return Some(0.0),
            None => {}
        }
    }
    let place = usize::try_from(exponent + POWERS_BEFORE).ok()?;
    let &(power, binary) = POWERS.get(place)?;
    let shift = digits.leading_zeros();
    let product = u128::from(digits << shift) * u128::from(power);
    // The table is short of the true power by less than one unit, so the upper word is short
    // of the true quotient by less than two.
    let (high, low) = ((product >> 64) as u64, product as u64);
    let up = 1 - (high >> 63) as i32;
    let high = if up == 0 { high } else { high << 1 | low >> 63 };
    let rest = high & 0x7ff;
    if (0x3fa..=0x406).contains(&rest) {
        return None;
    }
    // A mantissa that is rounded up to the next power of two carries into the exponent.
    let rounded = (high >> 11) + u64::from(rest > 0x400);
    let biased = binary + 64 - shift as i32 - up + 11 + 52 + 1022;
    let value = f64::from_bits(((biased as u64) << 52).wrapping_add(rounded));
    ((0..=2045).contains(&biased) && value.is_finite()).then_some(value)
}

/// `10^k = power * 2^binary` for `k` from minus this on, `power` with its highest bit set and
/// rounded down.
const POWERS_BEFORE: i32 = 330;
const POWERS_COUNT: usize = 640;
static POWERS: [(u64, i32); POWERS_COUNT] = powers();

/// Made with 128 bits: a step loses at most four of their units, all steps together do not
/// touch the upper 64 by more than one.
const fn powers() -> [(u64, i32); POWERS_COUNT] {
    let mut table = [(0, 0); POWERS_COUNT];
    let zero = POWERS_BEFORE as usize;
    let (mut power, mut binary) = (1u128 << 127, -127i32);
    let mut k = zero;
    while k < POWERS_COUNT {
        table[k] = ((power >> 64) as u64, binary + 64);
        // Times ten: times five eighths, and sixteen.
        power = power / 8 * 5;
        binary += 4;
        let lead = power.leading_zeros();
        power <<= lead;
        binary -= lead as i32;
        k += 1;
    }
    (power, binary) = (1u128 << 127, -127i32);
    k = zero;
    while k > 0 {
        k -= 1;
        power /= 10;
        let lead = power.leading_zeros();
        power <<= lead;
        binary -= lead as i32;
        table[k] = ((power >> 64) as u64, binary + 64);
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::number::Field;
    use super::*;
    use proptest::prelude::*;

    /// The slow way, and whether the quick one agrees where it has an answer.
    fn agrees(text: &str) -> bool {
        let Some((scanned, length)) = scan(text.as_bytes(), b'.') else {
            return false;
        };
        let whole = &text.as_bytes()[..length];
        let Field::Number(value, printed) = Field::read(whole, false) else {
            panic!("{text}: a number only to the quick way");
        };
        assert_eq!(scanned.value.to_bits(), value.to_bits(), "{text}");
        assert_eq!(scanned.printed, printed, "{text}");
        assert_eq!(
            Some(scanned.decimal()),
            Field::decimal(whole, false),
            "{text}"
        );
        let (double, decimal) = (scanned.double(), scanned.decimal().to_double());
        let gap = (double - decimal).abs().to_f64();
        assert!(gap <= 1e-31 * value.abs(), "{text}: {gap:e}");
        true
    }

    #[test]
    fn plain_numbers_of_every_look() {
        for text in [
            "0",
            "-0",
            "0.0",
            "7",
            "+7",
            "1.5",
            "-.5",
            "5.",
            "0.000123",
            "1e5",
            "1E-05",
            "2d+02",
            "123456789",
            "12345678.87654321",
            "0.1e-300",
            "1e-307",
            "1.7976931348623157e308",
            "86399.999999999985",
            "0.0080747663551401873",
            "1.2345678901234567e-12",
            "00012.50",
            "9999999999999999999",
            "1.5,2.5",
            "3 4",
        ] {
            assert!(agrees(text), "{text}");
        }
        for text in [
            "",
            "-",
            ".",
            "e5",
            "1e",
            "1e+",
            "nan",
            "x",
            "12345678901234567890",
        ] {
            assert!(!agrees(text), "{text}");
        }
    }

    #[test]
    fn where_64_bits_do_not_tell_the_slow_way_is_taken() {
        // The last lies in the middle of two numbers.
        for text in [
            "4.9e-324",
            "1e-320",
            "1e400",
            "1e-400",
            "1e999999",
            "9007199254740993",
        ] {
            assert_eq!(scan(text.as_bytes(), b'.'), None, "{text}");
        }
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(20_000))]

        #[test]
        fn shortest_and_seventeen_digits_read_as_the_library_reads_them(bits: u64) {
            let value = f64::from_bits(bits);
            if value.is_finite() {
                agrees(&format!("{value:e}"));
                agrees(&format!("{value:.16e}"));
                let near = f64::from_bits(bits & !(0x7ff << 52) | (0x3f0 + (bits >> 60)) << 52);
                let text = format!("{near}");
                prop_assert!(agrees(&text) || text.len() > 20, "{}", text);
                agrees(&format!("{near:.17}"));
            }
        }

        #[test]
        fn any_digits_and_exponents(digits: u64, exponent in -345i32..330, cut in 0u32..19) {
            agrees(&format!("{}e{exponent}", digits / 10u64.pow(cut)));
        }

        #[test]
        fn halves_between_two_numbers(mantissa in 1u64 << 52..1 << 53, exponent in -20i32..40) {
            // Exactly in the middle of two neighbours, where 64 bits cannot tell.
            let text = format!("{}", (u128::from(mantissa) * 2 + 1) << (exponent.max(0) as u32));
            agrees(&text);
        }
    }
}
