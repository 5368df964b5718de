//! How a measured number is shown in a sentence or a cell: no more digits than are
//! known.

/// Three significant digits, plain where that is short.
pub fn short(value: f64) -> String {
    shown(value, 3)
}

/// A value with so many digits that three are left of what it differs by from another one, nine
/// at most; three at least.
pub fn beside(value: f64, difference: f64) -> String {
    let more = (value.abs() / difference.abs()).log10().ceil();
    let more = if more.is_finite() {
        more.clamp(0.0, 6.0)
    } else {
        0.0
    };
    shown(value, 3 + more as usize)
}

/// A measured value with as many digits as its doubt leaves, three at most.
fn short_within(value: f64, doubt: f64) -> String {
    let known = (value.abs() / doubt).log10().floor() + 1.0;
    shown(
        value,
        if known.is_finite() {
            known.clamp(1.0, 3.0) as usize
        } else {
            3
        },
    )
}

/// A measured magnitude with no digit that its doubt does not leave.
pub fn measured(value: f64, doubt: f64) -> String {
    if value < doubt {
        format!("below {}", shown(doubt, 1))
    } else {
        short_within(value, doubt)
    }
}

/// So many of a thing: "1 row", "2 rows".
pub fn counted(count: u64, what: &str) -> String {
    let end = if count == 1 { "" } else { "s" };
    format!("{count} {what}{end}")
}

/// A number as it was given: plain where that is short, all its digits.
pub fn plain(value: f64) -> String {
    let size = value.abs();
    if value == 0.0 || (1e-4..1e7).contains(&size) {
        format!("{value}")
    } else {
        format!("{value:e}")
    }
}

fn shown(value: f64, digits: usize) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    if !value.is_finite() {
        return format!("{value}");
    }
    let rounded = format!("{value:.*e}", digits - 1);
    let exponent: i32 = rounded
        .rsplit('e')
        .next()
        .and_then(|e| e.parse().ok())
        .unwrap_or(0);
    if (-3..5).contains(&exponent) {
        let decimals = (digits as i32 - 1 - exponent).max(0) as usize;
        let value: f64 = rounded.parse().unwrap_or(value);
        let text = format!("{value:.decimals$}");
        return text;
    }
    rounded
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn three_digits_and_no_more_than_are_known() {
        assert_eq!(short(0.0), "0");
        assert_eq!(short(1234.6), "1230");
        assert_eq!(short(0.999_96), "1.00");
        assert_eq!(short(0.012_345), "0.0123");
        assert_eq!(short(1.2345e-7), "1.23e-7");
        assert_eq!(short(-6.5e12), "-6.50e12");
        assert_eq!(short_within(1.2345e-3, 5e-5), "0.0012");
        assert_eq!(short_within(1.2345e-3, 5e-3), "0.001");
        assert_eq!(plain(14_400.0), "14400");
        assert_eq!(plain(1e-9), "1e-9");
    }
}
