//! Stamps in the window of a chain.

use std::fmt;

use crate::chain::SPAN;
use crate::chance::scatter;

/// Where the rows of a file lie.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Stamps {
    /// One step apart.
    Even,
    /// In order, each up to 0.4 of a step beside its place.
    Scattered,
}

impl Stamps {
    pub const ALL: [Stamps; 2] = [Stamps::Even, Stamps::Scattered];

    /// So many steps over the window, both ends included.
    pub fn over(self, steps: usize) -> impl Iterator<Item = f64> {
        let step = SPAN / steps as f64;
        (0..=steps).map(move |number| {
            let inner = number > 0 && number < steps;
            let aside = match self {
                Stamps::Scattered if inner => 0.8 * (scatter(number as u64) - 0.5),
                _ => 0.0,
            };
            (number as f64 + aside) * step
        })
    }
}

impl fmt::Display for Stamps {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        f.write_str(match self {
            Stamps::Even => "even",
            Stamps::Scattered => "scattered",
        })
    }
}
