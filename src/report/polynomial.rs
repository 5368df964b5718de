//! Polynomials for reading: coefficients as the fractions and surds that they are.

use crate::number::{Double, closed_form, fraction};

/// What computing coefficients in double-double leaves where there should be nothing.
const NOTHING: f64 = 1e-25;

fn is_nothing(value: Double) -> bool {
    value.abs().to_f64() < NOTHING
}

/// A number as a fraction or surd, else to twelve digits.
pub(super) fn number(value: Double) -> String {
    closed_form(value).unwrap_or_else(|| {
        let text = format!("{:.12}", value.to_f64());
        text.trim_end_matches('0').trim_end_matches('.').to_owned()
    })
}

/// `c variable^power` for a number above zero.
fn term(c: Double, variable: &str, power: usize) -> String {
    let raised = match power {
        0 => return number(c),
        1 => variable.to_owned(),
        _ => format!("{variable}^{power}"),
    };
    match fraction(c) {
        Some((1, 1)) => raised,
        Some((1, below)) => format!("{raised}/{below}"),
        Some(_) => format!("{} {raised}", number(c)),
        None if closed_form(c).is_some() => format!("({}) {raised}", number(c)),
        None => format!("{} {raised}", number(c)),
    }
}

/// Signs between terms, each with its size.
fn joined(terms: impl Iterator<Item = (bool, String)>) -> String {
    let mut text = String::new();
    for (negative, term) in terms {
        text += match (text.is_empty(), negative) {
            (true, false) => "",
            (true, true) => "-",
            (false, false) => " + ",
            (false, true) => " - ",
        };
        text += &term;
    }
    if text.is_empty() {
        "0".to_owned()
    } else {
        text
    }
}

/// `1 + z + z^2/2`, lowest power first.
pub(super) fn polynomial(coefficients: &[Double], variable: &str) -> String {
    let present = coefficients
        .iter()
        .enumerate()
        .filter(|&(_, &c)| !is_nothing(c));
    joined(present.map(|(power, &c)| (c < Double::ZERO, term(c.abs(), variable, power))))
}

/// `(1 - 2/3 z) f^2 - 4/3 f + 1/3`: highest power of `f` first, whose coefficients are
/// polynomials in `z`.
pub(super) fn equation(coefficients: &[Vec<Double>]) -> String {
    let terms = coefficients.iter().enumerate().rev();
    joined(terms.filter_map(|(power, inner)| {
        let present: Vec<usize> = (0..inner.len())
            .filter(|&k| !is_nothing(inner[k]))
            .collect();
        let &lowest = present.first()?;
        let negative = inner[lowest] < Double::ZERO;
        let sized: Vec<Double> = match negative {
            true => inner.iter().map(|&c| -c).collect(),
            false => inner.clone(),
        };
        let factor = match power {
            0 => "",
            1 => " f",
            _ => &format!(" f^{power}"),
        };
        let text = match present[..] {
            [0] => term(sized[0], "f", power),
            [_] if power == 0 => polynomial(&sized, "z"),
            _ => format!("({}){factor}", polynomial(&sized, "z")),
        };
        Some((negative, text))
    }))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn list(pairs: &[(i32, i32)]) -> Vec<Double> {
        let ratio = |&(a, b): &(i32, i32)| Double::from(f64::from(a)) / Double::from(f64::from(b));
        pairs.iter().map(ratio).collect()
    }

    #[test]
    fn polynomials_read_as_on_paper() {
        let text = |pairs: &[(i32, i32)]| polynomial(&list(pairs), "z");
        assert_eq!(text(&[(1, 1), (1, 1), (1, 2)]), "1 + z + z^2/2");
        assert_eq!(
            text(&[(1, 1), (-2, 3), (0, 1), (-1, 6)]),
            "1 - 2/3 z - z^3/6"
        );
        assert_eq!(text(&[(0, 1), (0, 1), (-5, 12)]), "-5/12 z^2");
        assert_eq!(text(&[]), "0");
        let surd = [Double::ONE, Double::from(2.0).sqrt() - Double::from(2.0)];
        assert_eq!(polynomial(&surd, "z"), "1 - (2-sqrt(2)) z");
        assert_eq!(polynomial(&[Double::PI], "z"), "3.14159265359");
    }

    #[test]
    fn equations_have_the_newest_first() {
        let bdf = [
            list(&[(1, 3), (0, 1)]),
            list(&[(-4, 3)]),
            list(&[(1, 1), (-2, 3)]),
        ];
        assert_eq!(equation(&bdf), "(1 - 2/3 z) f^2 - 4/3 f + 1/3");
        let adams = [
            list(&[(0, 1), (1, 2)]),
            list(&[(-1, 1), (-3, 2)]),
            list(&[(1, 1)]),
        ];
        assert_eq!(equation(&adams), "f^2 - (1 + 3/2 z) f + z/2");
    }
}
