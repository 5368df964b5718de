//! One number as machines store it, to the `f64` of the same value.

/// How a number is stored.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Cell {
    /// The kind of number.
    pub kind: Kind,
    /// True where the most significant byte comes first.
    pub big: bool,
}

/// Kinds of numbers with their bytes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// IEEE binary16, 32 or 64: 2, 4 or 8 bytes.
    Float(u8),
    /// A whole number with a sign: 1, 2, 4 or 8 bytes.
    Signed(u8),
    /// A whole number without: 1, 2, 4 or 8 bytes.
    Unsigned(u8),
}

/// Precision of stored numbers.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Precision {
    /// IEEE binary16.
    Half,
    /// IEEE binary32.
    Single,
    /// IEEE binary64, and all else.
    #[default]
    Double,
}

impl Cell {
    /// Bytes of one number.
    pub fn size(self) -> usize {
        match self.kind {
            Kind::Float(size) | Kind::Signed(size) | Kind::Unsigned(size) => size.into(),
        }
    }

    /// How finely numbers are stored; whole ones count as they are.
    pub fn precision(self) -> Precision {
        match self.kind {
            Kind::Float(2) => Precision::Half,
            Kind::Float(4) => Precision::Single,
            _ => Precision::Double,
        }
    }

    /// True for whole numbers.
    pub fn is_whole(self) -> bool {
        !matches!(self.kind, Kind::Float(_))
    }

    /// The value; whole numbers beyond 2^53 are rounded to the nearest `f64`. NaN
    /// where fewer bytes are given than a number has.
    pub fn value(self, bytes: &[u8]) -> f64 {
        let size = self.size();
        let Some(bytes) = bytes.get(..size).filter(|_| size <= 8) else {
            return f64::NAN;
        };
        // One path for every size: the bytes are put into a word, least one first.
        let mut word = [0u8; 8];
        for (i, slot) in word[..size].iter_mut().enumerate() {
            *slot = bytes[if self.big { size - 1 - i } else { i }];
        }
        let bits = u64::from_le_bytes(word);
        match self.kind {
            Kind::Float(8) => f64::from_bits(bits),
            Kind::Float(4) => f32::from_bits(bits as u32).into(),
            Kind::Float(_) => half(bits as u16),
            Kind::Unsigned(_) => bits as f64,
            Kind::Signed(_) => {
                let unused = 64 - 8 * size as u32;
                ((bits << unused) as i64 >> unused) as f64
            }
        }
    }
}

/// The value of an IEEE binary16.
fn half(bits: u16) -> f64 {
    let fraction = f64::from(bits & 0x3ff);
    let size = match bits >> 10 & 0x1f {
        0 => fraction * 2f64.powi(-24),
        31 if fraction == 0.0 => f64::INFINITY,
        31 => f64::NAN,
        exponent => (1024.0 + fraction) * 2f64.powi(i32::from(exponent) - 25),
    };
    if bits >> 15 == 1 { -size } else { size }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_kind_in_both_orders() {
        let cell = |kind, big| Cell { kind, big };
        for (kind, little, value) in [
            (Kind::Float(8), (-0.1f64).to_le_bytes().to_vec(), -0.1),
            (Kind::Float(4), 0.1f32.to_le_bytes().to_vec(), 0.1f32 as f64),
            (Kind::Float(2), vec![0x01, 0x3c], 1.0 + 2f64.powi(-10)),
            (Kind::Float(2), vec![0x01, 0x80], -(2f64.powi(-24))),
            (Kind::Float(2), vec![0xff, 0x7b], 65504.0),
            (Kind::Signed(1), vec![0xfe], -2.0),
            (Kind::Signed(4), (-7i32).to_le_bytes().to_vec(), -7.0),
            (
                Kind::Signed(8),
                i64::MIN.to_le_bytes().to_vec(),
                -2f64.powi(63),
            ),
            (Kind::Unsigned(2), vec![0xff, 0xff], 65535.0),
            (Kind::Unsigned(8), vec![0xff; 8], 2f64.powi(64)),
        ] {
            assert_eq!(cell(kind, false).value(&little), value, "{kind:?}");
            let big: Vec<u8> = little.iter().rev().copied().collect();
            assert_eq!(cell(kind, true).value(&big), value, "{kind:?}");
        }
        assert!(cell(Kind::Float(8), true).value(&[1, 2]).is_nan());
        assert!(half(0x7c01).is_nan() && half(0xfc00) == f64::NEG_INFINITY);
    }
}
