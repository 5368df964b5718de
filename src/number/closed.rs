//! A number as the fraction or surd that it is: for coefficients that were computed from
//! fractions and surds.

use super::Double;

/// Double-double keeps 1e-31 of a short computation. Fractions with denominators up to
/// [`LARGEST`] lie 1e-14 apart, so that one this near is no accident.
const NEAR: f64 = 1e-25;
const LARGEST: f64 = 1e7;

/// The fraction nearest to a number, lowest terms, if it is one with a small denominator.
///
/// # Formula
/// The first convergent of its continued fraction that is near enough.
pub fn fraction(value: Double) -> Option<(i64, i64)> {
    let allowed = NEAR * value.abs().to_f64().max(1.0);
    if value.abs().to_f64() < NEAR {
        return Some((0, 1));
    }
    let (mut before, mut now) = ((0.0, 1.0), (1.0, 0.0));
    let mut rest = value;
    loop {
        let whole = rest.floor();
        let digit = whole.to_f64();
        let next = (digit * now.0 + before.0, digit * now.1 + before.1);
        // Also where the rest was not a number.
        let fits = next.1 <= LARGEST && next.0.abs() < 1e15;
        if !fits {
            return None;
        }
        let gap = value - Double::from(next.0) / Double::from(next.1);
        if gap.abs().to_f64() <= allowed {
            return Some((next.0 as i64, next.1 as i64));
        }
        (before, now) = (now, next);
        rest = Double::ONE / (rest - whole);
    }
}

/// The text of a number that is a fraction, or a fraction and one square root of those
/// that coefficients of methods have.
pub fn closed_form(value: Double) -> Option<String> {
    if let Some(fraction) = fraction(value) {
        return Some(written(fraction));
    }
    for radicand in [2, 3, 5, 6, 15] {
        let root = Double::from(f64::from(radicand)).sqrt();
        for below in (1..=60i32).filter(|below| 3600 % below == 0) {
            for above in (1..=60).flat_map(|above| [above, -above]) {
                let part = root * Double::from(f64::from(above)) / Double::from(f64::from(below));
                if let Some(rest) = fraction(value - part).filter(|&(_, below)| below <= 10_000) {
                    return Some(with_root(rest, above, radicand, below));
                }
            }
        }
    }
    None
}

fn written((above, below): (i64, i64)) -> String {
    match below {
        1 => above.to_string(),
        _ => format!("{above}/{below}"),
    }
}

fn with_root(rest: (i64, i64), above: i32, radicand: i32, below: i32) -> String {
    let mut text = match rest.0 {
        0 => String::new(),
        _ => written(rest),
    };
    if above < 0 {
        text.push('-');
    } else if !text.is_empty() {
        text.push('+');
    }
    if above.abs() > 1 {
        text += &format!("{}*", above.abs());
    }
    text += &format!("sqrt({radicand})");
    if below > 1 {
        text += &format!("/{below}");
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    fn ratio(above: i32, below: i32) -> Double {
        Double::from(f64::from(above)) / Double::from(f64::from(below))
    }

    #[test]
    fn fractions_are_found_in_lowest_terms() {
        assert_eq!(fraction(ratio(-6, 4)), Some((-3, 2)));
        assert_eq!(fraction(ratio(1097, 120_000)), Some((1097, 120_000)));
        assert_eq!(fraction(ratio(0, 1)), Some((0, 1)));
        assert_eq!(fraction(ratio(7, 1)), Some((7, 1)));
        // A fraction but for the rounding of f64 is none.
        assert_eq!(fraction(Double::from(0.1)), None);
        assert_eq!(fraction(Double::from(f64::NAN)), None);
        assert_eq!(fraction(Double::from(f64::INFINITY)), None);
    }

    #[test]
    fn surds_are_found() {
        let two = Double::from(2.0).sqrt();
        for (value, text) in [
            (Double::ONE - two.scale(0.5), "1-sqrt(2)/2"),
            (two.scale(2.0) - Double::from(3.0), "-3+2*sqrt(2)"),
            (-two / Double::from(3.0), "-sqrt(2)/3"),
            (
                ratio(2, 5) - Double::from(6.0).sqrt() / Double::from(10.0),
                "2/5-sqrt(6)/10",
            ),
        ] {
            assert_eq!(closed_form(value).as_deref(), Some(text));
        }
        assert_eq!(closed_form(Double::PI), None);
    }
}
