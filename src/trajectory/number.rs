//! The text of one field: a number with how it was printed, nothing, or something
//! that is no number.

use crate::number::Decimal;

/// What stands in a field.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Field {
    /// A finite number.
    Number(f64, Printed),
    /// Nothing, or a word that stands for a value that is not there or not finite.
    Absent,
    /// Something else.
    Foreign,
}

/// How a number was printed.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Printed {
    /// Digits from the first that is not zero, trailing zeros included.
    pub significant: u8,
    /// Digits after the decimal sign.
    pub decimals: u8,
    /// True with an exponent.
    pub scientific: bool,
}

/// Longest text that is taken for a number.
pub(super) const MOST_CHARACTERS: usize = 64;

/// Words that programs write for a value that is missing or not finite.
const ABSENT: [&str; 15] = [
    "nan",
    "na",
    "n/a",
    "null",
    "none",
    "inf",
    "infinity",
    "-",
    "--",
    "1.#ind",
    "1.#qnan",
    "1.#inf",
    "nan(ind)",
    "nan(snan)",
    "1.#snan",
];

impl Field {
    /// Reads a field without surrounding blanks.
    pub fn read(text: &[u8], decimal_comma: bool) -> Field {
        if text.is_empty() {
            return Field::Absent;
        }
        let mut buffer = [0u8; MOST_CHARACTERS];
        let Some((clean, printed)) = normalise(text, decimal_comma, &mut buffer) else {
            return if is_absent(text) {
                Field::Absent
            } else {
                Field::Foreign
            };
        };
        match fast_float2::parse::<f64, _>(clean) {
            // A number beyond all f64 reads as infinity: it is not there for us.
            Ok(value) if value.is_finite() => Field::Number(value, printed),
            Ok(_) => Field::Absent,
            Err(_) => Field::Foreign,
        }
    }

    /// The exact decimal of a field that is a number.
    pub fn decimal(text: &[u8], decimal_comma: bool) -> Option<Decimal> {
        let mut buffer = [0u8; MOST_CHARACTERS];
        let (clean, _) = normalise(text, decimal_comma, &mut buffer)?;
        Decimal::parse(std::str::from_utf8(clean).ok()?)
    }
}

fn is_absent(text: &[u8]) -> bool {
    // Fortran fills a field with stars where a number does not fit.
    if text.iter().all(|&byte| byte == b'*') {
        return true;
    }
    let unsigned = match text {
        [b'+' | b'-', rest @ ..] if !rest.is_empty() => rest,
        _ => text,
    };
    ABSENT
        .iter()
        .any(|word| unsigned.eq_ignore_ascii_case(word.as_bytes()))
}

/// Rewrites number text into the form that every parser takes, and counts its digits;
/// `None` where it is no plain decimal number.
fn normalise<'b>(
    text: &[u8],
    decimal_comma: bool,
    buffer: &'b mut [u8; MOST_CHARACTERS],
) -> Option<(&'b [u8], Printed)> {
    let mut length = 0;
    let mut put = |byte: u8| {
        *buffer.get_mut(length)? = byte;
        length += 1;
        Some(())
    };
    let mut printed = Printed {
        significant: 0,
        decimals: 0,
        scientific: false,
    };
    let (mut digits, mut point, mut exponent_digits) = (0u32, false, 0u32);
    let mut previous = b' ';
    let point_sign = if decimal_comma { b',' } else { b'.' };
    for (index, &byte) in text.iter().enumerate() {
        match byte {
            b'0'..=b'9' if printed.scientific => {
                exponent_digits += 1;
                put(byte)?;
            }
            b'0'..=b'9' => {
                digits += 1;
                let counts = byte != b'0' || printed.significant > 0;
                printed.significant = printed.significant.saturating_add(u8::from(counts));
                printed.decimals = printed.decimals.saturating_add(u8::from(point));
                put(byte)?;
            }
            _ if byte == point_sign && !point && !printed.scientific => {
                point = true;
                put(b'.')?;
            }
            b'e' | b'E' | b'd' | b'D' if digits > 0 && !printed.scientific => {
                printed.scientific = true;
                put(b'e')?;
            }
            b'+' | b'-' if index == 0 => put(byte)?,
            b'+' | b'-' if matches!(previous, b'e' | b'E' | b'd' | b'D') => put(byte)?,
            // Fortran leaves the letter out before an exponent of three digits.
            b'+' | b'-' if digits > 0 && !printed.scientific => {
                printed.scientific = true;
                put(b'e')?;
                put(byte)?;
            }
            _ => return None,
        }
        previous = byte;
    }
    let complete = digits > 0 && (!printed.scientific || exponent_digits > 0);
    complete.then(|| (&buffer[..length], printed))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn number(text: &str) -> f64 {
        match Field::read(text.as_bytes(), false) {
            Field::Number(value, _) => value,
            other => panic!("{text}: {other:?}"),
        }
    }

    #[test]
    fn every_way_of_printing_a_number() {
        for (text, value) in [
            ("1.5", 1.5),
            ("+1.5e3", 1500.0),
            ("-.5", -0.5),
            ("5.", 5.0),
            ("1.25D-02", 0.0125),
            ("1d5", 1e5),
            ("1.5-103", 1.5e-103),
            ("2E+00", 2.0),
            ("007", 7.0),
        ] {
            assert_eq!(number(text), value, "{text}");
        }
        let comma = Field::read(b"-1,25", true);
        let printed = Printed {
            significant: 3,
            decimals: 2,
            scientific: false,
        };
        assert_eq!(comma, Field::Number(-1.25, printed));
    }

    #[test]
    fn digits_are_counted_as_printed() {
        for (text, significant, decimals, scientific) in [
            ("0.001200", 4, 6, false),
            ("1200", 4, 0, false),
            ("0.000", 0, 3, false),
            ("1.500000e+00", 7, 6, true),
            ("10", 2, 0, false),
        ] {
            let printed = Printed {
                significant,
                decimals,
                scientific,
            };
            let Field::Number(_, found) = Field::read(text.as_bytes(), false) else {
                panic!("{text}")
            };
            assert_eq!(found, printed, "{text}");
        }
    }

    #[test]
    fn absent_values_are_never_numbers() {
        for text in [
            "",
            "nan",
            "NaN",
            "-NAN",
            "inf",
            "-Infinity",
            "1e999",
            "1.#QNAN",
            "NA",
            "null",
            "***",
            "-nan(ind)",
            "-",
        ] {
            assert_eq!(Field::read(text.as_bytes(), false), Field::Absent, "{text}");
        }
    }

    #[test]
    fn other_text_is_foreign() {
        for text in [
            "abc",
            "1,5",
            "1.2.3",
            "1e",
            "--1",
            "1_0",
            "0x1p3",
            "1 2",
            "\u{2212}1",
            "e5",
        ] {
            assert_eq!(
                Field::read(text.as_bytes(), false),
                Field::Foreign,
                "{text}"
            );
        }
        let long = "1".repeat(65);
        assert_eq!(Field::read(long.as_bytes(), false), Field::Foreign);
    }
}
