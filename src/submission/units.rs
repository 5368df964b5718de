//! Units: a fixed table, SI prefixes, products, quotients and powers; enough to carry
//! a column into the unit of its channel.

use crate::fault::{Fault, Result, quoted};
use crate::number::{Conversion, Double};

/// Exponents of m, kg, s, A, K, mol, rad.
type Dimension = [i8; 7];

#[derive(Clone, Copy, Debug, PartialEq)]
struct Unit {
    dimension: Dimension,
    factor: Double,
    /// For temperature scales: `kelvin = factor * (value + shift)`.
    shift: Double,
}

/// A named unit: dimension, numerator and denominator of its factor to the base units,
/// whether SI prefixes go with it.
struct Named(&'static str, Dimension, f64, f64, bool);

const NONE: Dimension = [0; 7];
const TIME: Dimension = [0, 0, 1, 0, 0, 0, 0];
const KELVIN: Dimension = [0, 0, 0, 0, 1, 0, 0];
const ANGLE: Dimension = [0, 0, 0, 0, 0, 0, 1];
const ENERGY: Dimension = [2, 1, -2, 0, 0, 0, 0];
const PRESSURE: Dimension = [-1, 1, -2, 0, 0, 0, 0];
const RESISTANCE: Dimension = [2, 1, -3, -2, 0, 0, 0];
const VOLUME: Dimension = [3, 0, 0, 0, 0, 0, 0];

/// Source: BIPM, The International System of Units, 9th edition; the year is the Julian
/// one of 365.25 days. Angles in turns and degrees are added with pi in `named`.
const TABLE: [Named; 39] = [
    Named("m", [1, 0, 0, 0, 0, 0, 0], 1.0, 1.0, true),
    Named("g", [0, 1, 0, 0, 0, 0, 0], 1.0, 1000.0, true),
    Named("t", [0, 1, 0, 0, 0, 0, 0], 1000.0, 1.0, false),
    Named("s", TIME, 1.0, 1.0, true),
    Named("sec", TIME, 1.0, 1.0, false),
    Named("min", TIME, 60.0, 1.0, false),
    Named("h", TIME, 3600.0, 1.0, false),
    Named("hr", TIME, 3600.0, 1.0, false),
    Named("d", TIME, 86_400.0, 1.0, false),
    Named("day", TIME, 86_400.0, 1.0, false),
    Named("a", TIME, 31_557_600.0, 1.0, false),
    Named("yr", TIME, 31_557_600.0, 1.0, false),
    Named("A", [0, 0, 0, 1, 0, 0, 0], 1.0, 1.0, true),
    Named("K", KELVIN, 1.0, 1.0, true),
    Named("mol", [0, 0, 0, 0, 0, 1, 0], 1.0, 1.0, true),
    Named("rad", ANGLE, 1.0, 1.0, true),
    Named("Hz", [0, 0, -1, 0, 0, 0, 0], 1.0, 1.0, true),
    Named("Bq", [0, 0, -1, 0, 0, 0, 0], 1.0, 1.0, true),
    Named("N", [1, 1, -2, 0, 0, 0, 0], 1.0, 1.0, true),
    Named("Pa", PRESSURE, 1.0, 1.0, true),
    Named("bar", PRESSURE, 1e5, 1.0, true),
    Named("J", ENERGY, 1.0, 1.0, true),
    Named("Wh", ENERGY, 3600.0, 1.0, true),
    Named("W", [2, 1, -3, 0, 0, 0, 0], 1.0, 1.0, true),
    Named("C", [0, 0, 1, 1, 0, 0, 0], 1.0, 1.0, true),
    Named("V", [2, 1, -3, -1, 0, 0, 0], 1.0, 1.0, true),
    Named("Ohm", RESISTANCE, 1.0, 1.0, true),
    Named("ohm", RESISTANCE, 1.0, 1.0, true),
    Named("\u{3a9}", RESISTANCE, 1.0, 1.0, true),
    Named("\u{2126}", RESISTANCE, 1.0, 1.0, true),
    Named("S", [-2, -1, 3, 2, 0, 0, 0], 1.0, 1.0, true),
    Named("F", [-2, -1, 4, 2, 0, 0, 0], 1.0, 1.0, true),
    Named("H", [2, 1, -2, -2, 0, 0, 0], 1.0, 1.0, true),
    Named("Wb", [2, 1, -2, -1, 0, 0, 0], 1.0, 1.0, true),
    Named("T", [0, 1, -2, -1, 0, 0, 0], 1.0, 1.0, true),
    Named("L", VOLUME, 1.0, 1000.0, true),
    Named("l", VOLUME, 1.0, 1000.0, true),
    Named("1", NONE, 1.0, 1.0, false),
    Named("%", NONE, 1.0, 100.0, false),
];

/// Prefixes with the power of ten.
const PREFIXES: [(&str, i32); 17] = [
    ("T", 12),
    ("G", 9),
    ("M", 6),
    ("k", 3),
    ("h", 2),
    ("da", 1),
    ("d", -1),
    ("c", -2),
    ("m", -3),
    ("u", -6),
    ("\u{b5}", -6),
    ("\u{3bc}", -6),
    ("n", -9),
    ("p", -12),
    ("f", -15),
    ("a", -18),
    ("P", 15),
];

/// What takes a number in the unit `from` to the unit `to`.
///
/// # Errors
/// A unit that is not in the table, or two of different kinds. Units that are spelled
/// alike need not be in it.
pub fn convert(from: &str, to: &str) -> Result<Conversion> {
    let (from, to) = (from.trim(), to.trim());
    if from == to {
        return Ok(Conversion::NONE);
    }
    let known = |text: &str| {
        parse(text).ok_or_else(|| {
            let fault = Fault::new(format!("unit {} is not known", quoted(text)));
            fault.help("write it with SI units and prefixes, `*`, `/` and `^`, as in `kJ/(kg*K)`")
        })
    };
    let (source, target) = (known(from)?, known(to)?);
    if source.dimension != target.dimension {
        let text = format!("unit {} does not convert to {}", quoted(from), quoted(to));
        return Err(Fault::new(text));
    }
    let factor = source.factor / target.factor;
    // kelvin = f (x + s) on both scales.
    let offset = source.shift * factor - target.shift;
    Ok(Conversion { factor, offset })
}

/// True where the text is a unit of the table.
pub(super) fn is_known(text: &str) -> bool {
    parse(text).is_some()
}

fn named(text: &str) -> Option<Unit> {
    let plain = |dimension, factor| Unit {
        dimension,
        factor,
        shift: Double::ZERO,
    };
    let number = Double::from;
    match text {
        "degC" | "\u{b0}C" | "Celsius" => {
            let shift = number(27_315.0) / number(100.0);
            return Some(Unit {
                shift,
                ..plain(KELVIN, Double::ONE)
            });
        }
        "degF" | "\u{b0}F" => {
            let factor = number(5.0) / number(9.0);
            return Some(Unit {
                shift: number(45_967.0) / number(100.0),
                ..plain(KELVIN, factor)
            });
        }
        "deg" | "\u{b0}" => return Some(plain(ANGLE, Double::PI / number(180.0))),
        "rev" => return Some(plain(ANGLE, Double::PI.scale(2.0))),
        "rpm" => {
            let dimension = [0, 0, -1, 0, 0, 0, 1];
            return Some(plain(dimension, Double::PI / number(30.0)));
        }
        _ => {}
    }
    let find = |name: &str| TABLE.iter().find(|unit| unit.0 == name);
    let unit = |unit: &Named| plain(unit.1, number(unit.2) / number(unit.3));
    if let Some(found) = find(text) {
        return Some(unit(found));
    }
    PREFIXES.iter().find_map(|(prefix, power)| {
        let found = find(text.strip_prefix(prefix)?).filter(|unit| unit.4)?;
        let base = unit(found);
        Some(Unit {
            factor: base.factor * number(10.0).powi(*power),
            ..base
        })
    })
}

/// Products and quotients of powers of named units; brackets one deep after a `/`.
fn parse(text: &str) -> Option<Unit> {
    let text = text.trim();
    if text.is_empty() || text.len() > 100 {
        return None;
    }
    if let Some(unit) = named(text) {
        return Some(unit);
    }
    let mut product = named("1")?;
    let mut sign = 1i8;
    let mut in_brackets = false;
    let mut rest = text;
    loop {
        rest = rest.trim_start();
        if let Some(after) = rest.strip_prefix('(').filter(|_| !in_brackets) {
            in_brackets = true;
            rest = after;
            continue;
        }
        let end = rest
            .find(|c| "*/ ()\u{b7}\u{22c5}".contains(c))
            .unwrap_or(rest.len());
        let (unit, power) = factor(&rest[..end])?;
        let power = power.checked_mul(sign)?;
        product.factor *= unit.factor.powi(i32::from(power));
        for (sum, one) in product.dimension.iter_mut().zip(unit.dimension) {
            *sum = sum.checked_add(one.checked_mul(power)?)?;
        }
        rest = rest[end..].trim_start();
        if let Some(after) = rest.strip_prefix(')') {
            if !in_brackets {
                return None;
            }
            in_brackets = false;
            sign = 1;
            rest = after.trim_start();
        }
        if rest.is_empty() {
            return (!in_brackets).then_some(product);
        }
        let first = rest.chars().next()?;
        if first == '/' {
            if in_brackets {
                return None;
            }
            sign = -1;
            rest = &rest[1..];
        } else {
            // A product goes on below the line only within brackets.
            if !in_brackets {
                sign = 1;
            }
            rest = rest.trim_start_matches(['*', '\u{b7}', '\u{22c5}']);
        }
    }
}

/// One unit with its power: `m`, `m^2`, `m2`, `s^-1`, `m\u{b2}`.
fn factor(text: &str) -> Option<(Unit, i8)> {
    if let Some(unit) = named(text) {
        return Some((
            Unit {
                shift: Double::ZERO,
                ..unit
            },
            1,
        ));
    }
    let (name, power) = match text.split_once('^') {
        Some((name, power)) => (name, power.parse().ok()?),
        None if text.ends_with('\u{b2}') => (text.trim_end_matches('\u{b2}'), 2),
        None if text.ends_with('\u{b3}') => (text.trim_end_matches('\u{b3}'), 3),
        None => {
            let digits = text.find(|c: char| c.is_ascii_digit() || c == '-')?;
            (&text[..digits], text[digits..].parse().ok()?)
        }
    };
    let unit = named(name)?;
    (-8..=8).contains(&power).then_some((
        Unit {
            shift: Double::ZERO,
            ..unit
        },
        power,
    ))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn check(from: &str, to: &str, written: f64, expected: f64) {
        let conversion = convert(from, to).unwrap();
        let found = conversion.apply(Double::from(written)).to_f64();
        let size = expected.abs().max(written.abs());
        let close = (found - expected).abs() <= 4.0 * f64::EPSILON * size;
        assert!(close, "{written} {from} is {found} {to}, not {expected}");
    }

    #[test]
    fn names_are_unique() {
        for (i, unit) in TABLE.iter().enumerate() {
            assert!(
                TABLE[..i].iter().all(|other| other.0 != unit.0),
                "{}",
                unit.0
            );
        }
    }

    #[test]
    fn conversions_that_people_need() {
        check("min", "s", 2.5, 150.0);
        check("h", "min", 1.5, 90.0);
        check("d", "h", 2.0, 48.0);
        check("ms", "s", 20.0, 0.02);
        check("us", "ms", 5.0, 0.005);
        check("K", "degC", 300.0, 26.85);
        check("degF", "degC", 212.0, 100.0);
        check("degC", "degF", 37.0, 98.6);
        check("degC", "K", -273.15, 0.0);
        check("rpm", "rad/s", 60.0, 2.0 * std::f64::consts::PI);
        check("deg", "rad", 180.0, std::f64::consts::PI);
        check("mV", "V", 12.0, 0.012);
        check("kW", "W", 1.5, 1500.0);
        check("mg/L", "g/m^3", 3.0, 3.0);
        check("km/h", "m/s", 36.0, 10.0);
        check("kN*m", "N m", 2.0, 2000.0);
        check("W/(m^2*K)", "W/m2/K", 7.0, 7.0);
        check("mol/L", "mol/m\u{b3}", 1.0, 1000.0);
        check("1/h", "s^-1", 3600.0, 1.0);
        check("\u{b5}F", "nF", 1.0, 1000.0);
        check("%", "1", 50.0, 0.5);
        check("L/min", "m^3/s", 60.0, 0.001);
        check("kWh", "MJ", 1.0, 3.6);
        check("furlong", "furlong", 1.0, 1.0);
    }

    #[test]
    fn differences_of_temperature_have_no_offset() {
        check("degC/min", "K/s", 60.0, 1.0);
    }

    #[test]
    fn what_does_not_convert_is_refused() {
        for (from, to) in [("V", "A"), ("K", "s"), ("Hz", "rad/s"), ("m", "m^2")] {
            assert!(
                convert(from, to)
                    .unwrap_err()
                    .text
                    .contains("does not convert"),
                "{from} {to}"
            );
        }
        for unit in ["smoot", "m^", "m/(s", "m)", "", "kmin", "m^99", "(", "/s*"] {
            assert!(
                convert(unit, "m")
                    .unwrap_err()
                    .text
                    .contains("is not known"),
                "{unit}"
            );
        }
    }
}
