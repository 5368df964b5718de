//! A straight line from one scale to another: units and temperature scales.

use super::Double;

/// `converted = factor * written + offset`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Conversion {
    /// To double-double.
    pub factor: Double,
    /// To double-double.
    pub offset: Double,
}

impl Conversion {
    /// Nothing changes.
    pub const NONE: Conversion = Conversion {
        factor: Double::ONE,
        offset: Double::ZERO,
    };

    /// The converted number.
    #[inline]
    pub fn apply(self, written: Double) -> Double {
        if self.is_none() {
            return written;
        }
        written * self.factor + self.offset
    }

    /// How a difference is stretched.
    pub fn stretch(self, difference: f64) -> f64 {
        difference * self.factor.to_f64().abs()
    }

    /// True where nothing changes.
    #[inline]
    pub fn is_none(self) -> bool {
        let (factor, offset) = (self.factor, self.offset);
        let one = factor.to_f64() == 1.0 && factor.low() == 0.0;
        one && offset.to_f64() == 0.0 && offset.low() == 0.0
    }
}
