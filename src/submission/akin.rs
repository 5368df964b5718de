//! Units that a program may have written a channel in: those of the same kind as the one
//! of the case.

use super::units::convert;

/// Names without prefix that are tried, and those that stand for themselves.
const BASES: [&str; 22] = [
    "m", "g", "s", "A", "K", "mol", "rad", "Hz", "Bq", "N", "Pa", "bar", "J", "Wh", "W", "C", "V",
    "Ohm", "S", "F", "H", "L",
];
const WHOLE: [&str; 14] = [
    "t", "min", "h", "d", "a", "1", "%", "degC", "degF", "deg", "rev", "rpm", "km/h", "kWh",
];
const PREFIXES: [&str; 9] = ["", "m", "k", "u", "n", "M", "c", "p", "G"];

/// Units other than this one that convert to it, the usual ones first. Of a quotient the
/// upper part is exchanged, or the lower one.
pub fn akin(unit: &str) -> Vec<String> {
    let mut found: Vec<String> = Vec::new();
    let mut offer = |candidate: String| {
        let differs = convert(&candidate, unit).is_ok_and(|conversion| !conversion.is_none());
        if differs && !found.contains(&candidate) {
            found.push(candidate);
        }
    };
    let each = |offer: &mut dyn FnMut(String)| {
        for whole in WHOLE {
            offer(whole.to_owned());
        }
        for (prefix, base) in PREFIXES
            .iter()
            .flat_map(|prefix| BASES.iter().map(move |base| (prefix, base)))
        {
            offer(format!("{prefix}{base}"));
        }
    };
    each(&mut offer);
    if let Some((above, below)) = unit.split_once('/') {
        // A power stays with its unit: `m3` goes to `L`, `m2` to `cm2`.
        let power = |text: &str| {
            text.find(|c: char| c.is_ascii_digit() || c == '^')
                .map_or(String::new(), |at| text[at..].to_owned())
        };
        each(&mut |name| offer(format!("{name}/{below}")));
        each(&mut |name| offer(format!("{above}/{name}")));
        each(&mut |name| offer(format!("{name}{}/{below}", power(above))));
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn units_of_the_same_kind_are_found() {
        for (unit, other) in [
            ("V", "mV"),
            ("mV", "V"),
            ("degC", "K"),
            ("K", "degC"),
            ("degC", "degF"),
            ("h", "min"),
            ("rad/s", "rpm"),
            ("rad/s", "deg/s"),
            ("m/s", "km/h"),
            ("mm/ms", "mm/s"),
            ("mg/L", "ug/L"),
            ("m3/min", "L/min"),
            ("m3/s", "m3/h"),
            ("1", "%"),
        ] {
            let found = akin(unit);
            let same =
                |known: &String| convert(known, other).is_ok_and(|conversion| conversion.is_none());
            assert!(found.iter().any(same), "{unit} {other}: {found:?}");
            assert!(!found.iter().any(|known| known == unit));
        }
        assert!(akin("furlong").is_empty());
    }
}
