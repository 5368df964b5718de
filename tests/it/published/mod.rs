//! Each test names the entry of published-checks.md that it stands for, the source as
//! that page gives it, and the page's mark of how sure the number is:
//!
//! - R: read in the work named; R second-hand: read as quoted by somebody else;
//! - D: the problem or formula was read there, the number is recomputed;
//! - M: from memory of the work named; P: common practice.
//!
//! Published numbers are held to half a unit in their last digit, and so are the
//! recomputed ones (Arb at 400 bits or mpmath at 50 digits), whose last digit lies at
//! or beyond that of an `f64`; what the code itself may add is said at [`agree`] and
//! [`agree_in_time`].

mod decay;
mod exponential;
mod first_order;
mod growth;
mod second_order;
mod stability;
mod worked;

use std::collections::BTreeSet;

use stepgauge::case::{Case, Replacements};
use stepgauge::exact::Exact;
use stepgauge::number::Double;

use crate::digits::read;

pub use stability::order_conditions;

/// The solution of states `[name, start, rate]` from zero to `to`; `rest` holds tables
/// of inputs, outputs and parameters.
fn model<S: AsRef<str>>(to: &str, states: &[[S; 3]], rest: &str) -> Exact {
    let case = Case::parse(
        "published",
        &case_text(to, states, rest),
        &Replacements::new(),
    );
    case.unwrap_or_else(|faults| panic!("{}", faults[0]))
        .exact()
        .unwrap()
}

fn case_text<S: AsRef<str>>(to: &str, states: &[[S; 3]], rest: &str) -> String {
    let mut text = format!(
        "title = 'published'\nfield = 'trial'\nabout = ''\nsource = 'published-checks.md'\n\
         [time]\nunit = 's'\nfrom = 0\nto = '{to}'\n[limits]\nabsolute = 1\nrelative = 0\n"
    );
    for [name, start, rate] in states {
        let (name, start, rate) = (name.as_ref(), start.as_ref(), rate.as_ref());
        text += &format!(
            "[[states]]\nname = '{name}'\nunit = '1'\nstart = '{start}'\nrate = '{rate}'\n"
        );
    }
    text + rest
}

/// A line of the table of parameters.
fn parameters(list: &[(&str, &str)]) -> String {
    let line =
        |(name, value): &(&str, &str)| format!("{name} = {{ value = '{value}', unit = '1' }}\n");
    let lines: String = list.iter().map(line).collect();
    format!("[parameters]\n{lines}")
}

fn output(name: &str, value: &str) -> String {
    format!("[[outputs]]\nname = '{name}'\nunit = '1'\nvalue = '{value}'\n")
}

/// One channel at one time, to the nearest `f64`.
fn at(exact: &Exact, channel: usize, time: impl Into<Double>) -> f64 {
    exact.at(time).unwrap()[channel].value
}

/// One channel at one time in full.
fn wide(exact: &Exact, channel: usize, time: f64) -> Double {
    exact.walk().go(Double::from(time)).value[channel]
}

/// The time at which a channel passes a level, between two times on either side of it.
///
/// Values are compared in double-double, so the time is one of the two `f64` next to
/// the true one, however flat the channel is there.
fn passes(exact: &Exact, channel: usize, level: Double, before: f64, after: f64) -> f64 {
    let above = |time: f64| wide(exact, channel, time) > level;
    let (mut low, mut high) = (before, after);
    let side = above(low);
    assert_ne!(side, above(high), "no passage between {before} and {after}");
    loop {
        let middle = 0.5 * (low + high);
        if middle <= low || middle >= high {
            return high;
        }
        if above(middle) == side {
            low = middle
        } else {
            high = middle
        }
    }
}

/// Half a unit in the last digit of a printed number.
fn half_unit(text: &str) -> f64 {
    let (mantissa, exponent) = text.split_once('e').unwrap_or((text, "0"));
    let decimals = mantissa
        .split_once('.')
        .map_or(0, |(_, decimals)| decimals.len());
    0.5 * 10f64.powi(exponent.parse::<i32>().unwrap() - decimals as i32)
}

/// A value agrees with printed digits, up to `own` beside their last half unit.
fn agree_but_for(id: &str, value: f64, text: &str, own: f64) {
    let truth = read(text);
    let gap = (Double::from(value) - truth).abs().to_f64();
    // 1e-9: the comparison itself is made in f64.
    let allowed = (half_unit(text) + own) * (1.0 + 1e-9);
    assert!(
        gap <= allowed,
        "{id}: {value:e}, not {text}: off by {gap:e}, allowed {allowed:e}"
    );
}

/// The promise of [`Exact`]: one unit in the last place.
fn agree(id: &str, value: f64, text: &str) {
    agree_but_for(id, value, text, value.abs().next_up() - value.abs());
}

/// The value is a time found by [`passes`], or a difference, product or quotient of two:
/// each is off by one unit in the last place, arithmetic adds half of one.
fn agree_in_time(id: &str, value: f64, text: &str) {
    agree_but_for(id, value, text, 4.0 * f64::EPSILON * value.abs());
}

/// As many terms `text` as an entry has, `#` standing for each number of `range`.
fn joined(range: std::ops::RangeInclusive<usize>, separator: &str, text: &str) -> String {
    let terms: Vec<String> = range.map(|k| text.replace('#', &k.to_string())).collect();
    terms.join(separator)
}

#[test]
fn at_least_fifty_entries_are_covered() {
    let modules = [
        (exponential::ENTRIES, include_str!("exponential.rs")),
        (growth::ENTRIES, include_str!("growth.rs")),
        (worked::ENTRIES, include_str!("worked.rs")),
        (first_order::ENTRIES, include_str!("first_order.rs")),
        (second_order::ENTRIES, include_str!("second_order.rs")),
        (decay::ENTRIES, include_str!("decay.rs")),
        (stability::ENTRIES, include_str!("stability.rs")),
    ];
    let mut all = BTreeSet::new();
    for (entries, source) in modules {
        for &id in entries {
            assert!(all.insert(id), "{id} is listed twice");
            // Once in the list, once with its source, once where it is checked.
            assert!(
                source.matches(id).count() >= 3,
                "{id} is listed and not checked"
            );
        }
    }
    assert!(all.len() >= 50, "{} entries", all.len());
}

#[test]
fn half_units_are_those_of_the_last_digit() {
    assert_eq!(half_unit("14.1"), 0.05);
    assert_eq!(half_unit("-3"), 0.5);
    assert_eq!(half_unit("5.103e12"), 5e8);
}
