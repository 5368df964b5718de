//! Families, and how they read inputs, in words.

use crate::method::{Family, Reading};
use crate::number::short;

/// A family with its step, in words.
pub fn family_at(family: &Family, time_unit: &str) -> String {
    let mut text = family_name(family);
    if let Some(step) = family.step {
        text += &format!(" at step {} {time_unit}", short(step));
    } else if family.steps == 1 {
        text += " at the spacing of the rows";
    } else {
        text += " at half the spacing of the rows";
    }
    if family.reading != Reading::AtNodes {
        text += &format!(" with inputs {}", reading(family.reading));
    }
    text
}

/// The methods of a family under one name.
pub fn family_name(family: &Family) -> String {
    let names: Vec<&str> = family.methods.iter().map(|method| method.name).collect();
    match names.len() {
        0..=4 => names.join(" / "),
        more => format!("{} and {} more", names[..3].join(" / "), more - 3),
    }
}

/// How inputs are read, in words.
pub fn reading(reading: Reading) -> &'static str {
    match reading {
        Reading::AtNodes => "read at the stages",
        Reading::Held => "held from the start of each step",
        Reading::FromEnd => "held from the end of each step",
        Reading::Mean => "averaged over each step",
        Reading::Linear => "tabulated at the steps and linear in between",
        Reading::EitherSide => "read on either side of their jumps",
    }
}

pub(super) fn share(ratio: f64) -> String {
    if ratio < 0.005 {
        "less than 1 %".to_owned()
    } else {
        format!("{:.0} %", 100.0 * ratio)
    }
}

/// A residual relative to the peak.
pub(super) fn of_peak(residual: f64) -> String {
    if residual > 1.0 {
        format!("{} times the peak", short(residual))
    } else {
        format!("{} of the peak", short(residual))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn residuals_and_shares_in_words() {
        assert_eq!(of_peak(0.25), "0.250 of the peak");
        assert_eq!(of_peak(1.0), "1.00 of the peak");
        assert_eq!(of_peak(2.5), "2.50 times the peak");
        assert_eq!(share(0.25), "25 %");
        assert_eq!(share(0.0051), "1 %");
        assert_eq!(share(0.0049), "less than 1 %");
    }
}
