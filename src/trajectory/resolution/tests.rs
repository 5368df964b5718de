//! How printed columns are understood: the usual formats, and both sides of every bound.

use super::*;
use crate::trajectory::number::Field;

#[test]
fn patterns_agree_over_the_values_that_they_say_the_same_of() {
    let (six, five) = (Resolution::Significant(6), Resolution::Decimals(5));
    let coarser = Resolution::Coarser(5, 6);
    for (one, other, range, agree) in [
        (coarser, six, [1.0, 5e4], true),
        (coarser, six, [0.999, 5e4], false),
        (coarser, six, [0.0, 5e4], false),
        (coarser, five, [1e-3, 9.99], true),
        (coarser, five, [1e-3, 10.0], false),
        (six, five, [1.0, 9.99], true),
        (six, five, [1.0, 10.0], false),
        (Resolution::Single, six, [1.0, 2.0], false),
        (
            Resolution::Full,
            Resolution::Decimals(16),
            [10.0, 99.0],
            true,
        ),
        (
            Resolution::Full,
            Resolution::Decimals(16),
            [0.5, 99.0],
            false,
        ),
    ] {
        assert_eq!(
            one.agrees_with(other, range),
            agree,
            "{one:?} {other:?} {range:?}"
        );
        assert_eq!(
            other.agrees_with(one, range),
            agree,
            "{other:?} {one:?} {range:?}"
        );
    }
}

fn conclude<'a>(column: impl IntoIterator<Item = &'a str>) -> Resolution {
    gather(column).conclude(None)
}

fn gather<'a>(column: impl IntoIterator<Item = &'a str>) -> Pattern {
    joined(&piece(column))
}

/// Rows that follow those of another piece.
fn piece<'a>(column: impl IntoIterator<Item = &'a str>) -> Pattern {
    let mut pattern = Pattern::new();
    for text in column {
        match Field::read(text.as_bytes(), false) {
            Field::Number(value, printed) => pattern.add(value, printed),
            other => panic!("{text}: {other:?}"),
        }
    }
    pattern
}

fn joined(pattern: &Pattern) -> Pattern {
    let mut whole = Pattern::new();
    whole.join(pattern);
    whole
}

fn printed(print: impl Fn(f64) -> String) -> Resolution {
    let column: Vec<String> = (0..200)
        .map(|k| print(12.0 * (-0.05 * f64::from(k)).exp()))
        .collect();
    conclude(column.iter().map(String::as_str))
}

/// As C prints with `%.Ng`: trailing zeros dropped.
fn general(value: f64, digits: usize) -> String {
    let text = format!("{:.*e}", digits - 1, value);
    let rounded: f64 = text.parse().unwrap();
    format!("{rounded}")
}

#[test]
fn the_usual_formats_are_recognised() {
    assert_eq!(printed(|x| format!("{x:.3}")), Resolution::Decimals(3));
    assert_eq!(printed(|x| format!("{x:.5e}")), Resolution::Significant(6));
    assert_eq!(printed(|x| general(x, 6)), Resolution::Significant(6));
    assert_eq!(printed(|x| general(x, 12)), Resolution::Significant(12));
    // Rounded to three decimals, trailing zeros dropped.
    assert_eq!(
        printed(|x| format!("{}", (x * 1e3).round() / 1e3)),
        Resolution::Decimals(3)
    );
    assert_eq!(printed(|x| format!("{x}")), Resolution::Full);
    assert_eq!(printed(|x| format!("{x:.16e}")), Resolution::Full);
    assert_eq!(printed(|x| format!("{}", x as f32)), Resolution::Single);
}

#[test]
fn columns_that_tell_nothing_are_in_full() {
    assert_eq!(conclude(["5", "5", "5"]), Resolution::Full);
    assert_eq!(
        conclude(["0", "0.5", "0.25", "0.125", "1"]),
        Resolution::Full
    );
    assert_eq!(conclude(["0", "0", "0"]), Resolution::Full);
    let stamps = |column: &[&str]| gather(column.iter().copied()).conclude_stamps(None);
    assert_eq!(
        stamps(&["0", "60", "600", "1500", "3600"]),
        Resolution::Full
    );
    assert_eq!(
        stamps(&["0", "61", "600", "1500", "3600"]),
        Resolution::Decimals(0)
    );
}

// A mode that is gone after the first row; whole numbers that go on moving are rounded.
#[test]
fn one_and_zeros_are_in_full() {
    let gone = || std::iter::once("1").chain(std::iter::repeat_n("0", 200));
    assert_eq!(conclude(gone()), Resolution::Full);
    let moving = ["7", "5", "4", "3", "2", "2", "1"];
    assert_eq!(conclude(moving), Resolution::Decimals(0));
    assert_eq!(conclude(gone().chain(moving)), Resolution::Decimals(0));
}

#[test]
fn rows_at_rest_do_not_hide_the_pattern() {
    let rest = std::iter::repeat_n("0", 500);
    let moving = ["1.23457", "1.34567", "1.45678", "1.5", "1.67891"];
    assert_eq!(conclude(rest.chain(moving)), Resolution::Significant(6));
}

#[test]
fn half_a_unit_in_the_last_place() {
    assert_eq!(Resolution::Decimals(3).at(7.0), 0.0005);
    assert_eq!(Resolution::Significant(3).at(1000.0), 5.0);
    assert_eq!(Resolution::Significant(3).at(-999.0), 0.5);
    assert_eq!(Resolution::Full.at(1.0), f64::EPSILON / 2.0);
    assert_eq!(Resolution::Decimals(30).at(1.0), f64::EPSILON / 2.0);
    for value in [
        0.0,
        5e-324,
        1e-310,
        -2.5e-308,
        0.1,
        -1.0,
        1.5,
        7e300,
        f64::MAX,
    ] {
        let size: f64 = f64::abs(value);
        let ulp = if value == f64::MAX {
            size - size.next_down()
        } else {
            size.next_up() - size
        };
        assert_eq!(half_ulp(value), 0.5 * ulp, "{value}");
    }
    assert_eq!(Resolution::Single.at(1.0), f64::from(f32::EPSILON));
}

#[test]
fn stored_numbers_resolve_half_a_unit_of_their_own_format() {
    // IEEE 754 binary16: eleven bits, the smallest number 2^-24; binary32: one unit.
    for (value, unit) in [
        (1.0, 2f64.powi(-10)),
        (-1.5, 2f64.powi(-10)),
        (65504.0, 32.0),
        (2f64.powi(-14), 2f64.powi(-24)),
        (2f64.powi(-20), 2f64.powi(-24)),
        (0.0, 2f64.powi(-24)),
    ] {
        assert_eq!(Resolution::Half.at(value), 0.5 * unit, "{value}");
    }
    for (value, unit) in [
        (1.0, -23),
        (-1.9, -23),
        (2.0, -22),
        (100.0, -17),
        (0.0, -149),
    ] {
        assert_eq!(Resolution::Single.at(value), 2f64.powi(unit), "{value}");
    }
    // Seen as "known to NaN V only" of a value of 1e300 among others of single precision.
    let largest = f64::from(f32::MAX);
    for value in [largest, 3.5e38] {
        assert_eq!(Resolution::Single.at(value), 2f64.powi(104));
    }
    assert_eq!(Resolution::Single.at(1e300), half_ulp(1e300));
    assert_eq!(Resolution::Coarser(3, 4).at(0.5), 5e-4);
    assert_eq!(Resolution::Coarser(3, 4).at(250.0), 0.05);
}

#[test]
fn neighbours_resolve_what_each_value_resolves_by_itself() {
    let values = [
        0.0,
        1.0,
        1.5,
        1.999,
        2.0,
        7.9,
        8.0,
        9.99,
        10.0,
        10.1,
        99.9,
        -100.0,
        0.1,
        0.099,
        5e-324,
        1e-310,
        1e300,
        -1.0,
        2f64.next_down(),
        16_777_216.0,
        16_777_215.0,
    ];
    for resolution in [
        Resolution::Full,
        Resolution::Decimals(3),
        Resolution::Significant(6),
        Resolution::Coarser(2, 5),
        Resolution::Half,
        Resolution::Single,
    ] {
        let mut neighbours = resolution.of_neighbours();
        for first in values {
            for second in values {
                assert_eq!(
                    neighbours.at(first),
                    resolution.at(first),
                    "{resolution:?} {first}"
                );
                assert_eq!(neighbours.at(second), resolution.at(second));
            }
        }
        assert_eq!(neighbours.are_full(), resolution == Resolution::Full);
    }
}

#[test]
fn decades_are_those_of_the_shortest_text() {
    for exponent in -323..=308 {
        let power: f64 = format!("1e{exponent}").parse().unwrap();
        // Below 1e-323 there is no power of ten.
        for value in [
            power,
            power.next_up(),
            power.next_down(),
            5.0 * power,
            -power,
        ] {
            if value.abs() < 1e-323 || !value.is_finite() {
                continue;
            }
            let text = format!("{value:e}");
            let expected: i32 = text[text.find('e').unwrap() + 1..].parse().unwrap();
            assert_eq!(decade(value), expected, "{value:e}");
        }
    }
    assert_eq!([0.0, f64::INFINITY, f64::NAN].map(decade), [0; 3]);
}

/// A column of so many values of the digits that `print` gives them.
fn column(rows: u32, print: impl Fn(u32) -> String) -> Pattern {
    let texts: Vec<String> = (0..rows).map(print).collect();
    gather(texts.iter().map(String::as_str))
}

#[test]
fn what_is_settled_is_in_full_whatever_follows() {
    let long = |k: u32| format!("{:.16}", 1.0 + f64::from(k) / 7.0);
    let uneven = |k: u32| match k {
        0 => "0.5".to_owned(),
        k => long(k),
    };
    assert!(column(3, uneven).is_settled());
    assert!(!column(2, uneven).is_settled());
    assert!(!column(9, long).is_settled());
    assert!(!column(9, |k| format!("0.{}", k + 1)).is_settled());
    // Sixteen digits are not in full.
    let short = |k: u32| match k {
        0 => "0.5".to_owned(),
        k => format!("{:.15}", 1.0 + f64::from(k) / 7.0),
    };
    assert!(!column(9, short).is_settled());
}

#[test]
fn the_longest_value_tells_over_eight_rows_of_four_to_twelve_digits() {
    let of = |rows: u32, digits: usize| {
        column(rows, |k| general(1.0 + f64::from(k) / 7.0, digits)).longest()
    };
    assert_eq!(of(8, 6), Some(6));
    // The shortest numbers of a column may be longer than the rest.
    assert_eq!(of(7, 6), None);
    assert_eq!(
        [3, 4, 12, 13].map(|digits| of(9, digits)),
        [None, Some(4), Some(12), None]
    );
}

#[test]
fn usual_digits_are_those_of_all_but_one_row_in_fifty() {
    let digits = |rows: u32, short: u32| {
        column(rows, |k| match k % (rows / short.max(1)) {
            0 if short > 0 => format!("{}.5", k % 9 + 1),
            _ => format!("{:.5}", 1.0 + f64::from(k) / 700.0),
        })
        .usual_digits()
    };
    assert_eq!(digits(20, 0), 6);
    assert_eq!(digits(19, 0), 0);
    assert_eq!(digits(100, 2), 6);
    assert_eq!(digits(100, 4), 2);
}

#[test]
fn columns_at_rest_are_constant() {
    assert!(column(5, |_| "1.5".to_owned()).constant);
    assert!(!column(5, |k| format!("1.{k}")).constant);
    let mut joined = column(3, |_| "1.5".to_owned());
    joined.join(&piece(["1.5"; 3]));
    assert!(joined.constant);
    joined.join(&piece(["2.5"; 3]));
    assert!(!joined.constant);
}

#[test]
fn single_precision_is_told_from_decimals_by_values_that_would_show_more() {
    // Five decimals, trailing zeros dropped, and one value of eight digits. Numbers of single
    // precision near 123 are 7.6e-6 apart, so that three in four have one of five decimals beside
    // them: 0.76^24 is above a thousandth, 0.76^26 below it.
    let of = |rows: u32| {
        let print = |k: u32| match k {
            0 => "0.5".to_owned(),
            1 => "123.45678".to_owned(),
            k => format!("0.{:05}", 10_001 + 2 * k),
        };
        column(rows, print).conclude(None)
    };
    assert_eq!(of(24), Resolution::Single);
    assert_eq!(of(28), Resolution::Decimals(5));
}

#[test]
fn few_values_do_not_make_a_column_single() {
    let of =
        |rows: u32| column(rows, |k| format!("{}", 100.0f32 / (3.1 + k as f32))).conclude(None);
    assert_eq!(of(40), Resolution::Single);
    assert_eq!(of(9), Resolution::Single);
    // One in thirty may be none.
    let odd = |rows: u32, odd: u32| {
        column(rows, |k| match k {
            k if k < odd => format!("0.{:09}", 123_456_789 + 2 * k),
            k => format!("{}", 100.0f32 / (3.1 + k as f32)),
        })
        .conclude(None)
    };
    assert_eq!(odd(62, 2), Resolution::Single);
    assert_ne!(odd(50, 2), Resolution::Single);
}

#[test]
fn what_is_stated_counts() {
    let pattern = column(9, |k| format!("1.{k}"));
    assert_eq!(pattern.conclude(Some(16)), Resolution::Significant(16));
    assert_eq!(pattern.conclude(Some(17)), Resolution::Full);
    assert_eq!(pattern.conclude(None), Resolution::Decimals(1));
    assert!(pattern.is_clear());
    assert_eq!(pattern.even(), Some((1, false)));
    assert_eq!(column(3, |k| format!("1.{k}")).even(), Some((1, false)));
    assert_eq!(column(2, |k| format!("1.{k}")).even(), None);
    assert_eq!(column(9, |k| format!("1.{k}e3")).even(), Some((1, true)));
}

#[test]
fn parts_joined_conclude_what_the_whole_column_does() {
    let columns: [&dyn Fn(u32) -> String; 7] = [
        &|k| format!("{:.3}", f64::from(k) / 7.0),
        &|k| format!("{:.4e}", f64::from(k + 1) / 7.0),
        &|k| general(1.0 + f64::from(k) / 7.0, 6),
        &|k| format!("{}", 100.0f32 / (3.1 + k as f32)),
        &|k| format!("{}", 100.0 / (3.1 + f64::from(k))),
        &|k| format!("{}", 5 * (k / 3)),
        &|k| {
            if k < 7 {
                "0".to_owned()
            } else {
                format!("1.{k}e0")
            }
        },
    ];
    let said = |pattern: &Pattern| {
        let concluded = (pattern.conclude(None), pattern.conclude_stamps(None));
        let counts = (pattern.longest(), pattern.usual_digits(), pattern.rows);
        let known = (pattern.constant, pattern.is_settled(), pattern.even());
        (concluded, counts, known, pattern.largest)
    };
    for (place, print) in columns.iter().enumerate() {
        let texts: Vec<String> = (0..40).map(print).collect();
        let texts: Vec<&str> = texts.iter().map(String::as_str).collect();
        let whole = gather(texts.iter().copied());
        for cut in [1, 2, 3, 7, 20, 39] {
            let mut joined = gather(texts[..cut].iter().copied());
            joined.join(&piece(texts[cut..].iter().copied()));
            assert_eq!(said(&joined), said(&whole), "{place} {cut}");
        }
    }
}

#[test]
fn stamps_in_units_of_five_or_more_were_chosen() {
    let stamps = |column: &[&str]| gather(column.iter().copied()).conclude_stamps(None);
    let full = stamps(&["0.00", "0.05", "0.10", "0.25", "0.30"]);
    assert_eq!(full, Resolution::Full);
    let rounded = stamps(&["0.00", "0.05", "0.11", "0.25", "0.30"]);
    assert_eq!(rounded, Resolution::Decimals(2));
    let by_four = stamps(&["0.00", "0.04", "0.08", "0.24", "0.32"]);
    assert_eq!(by_four, Resolution::Decimals(2));
    // Four stamps that tell, the first of them nought.
    let few = stamps(&["0.00", "0.05", "0.10", "0.25"]);
    assert_eq!(few, Resolution::Decimals(2));
}

#[test]
fn zeros_between_values_do_not_hide_their_pattern() {
    let values = ["1.23457", "1.34567", "1.45678", "1.5", "1.67891"];
    let with_zeros: Vec<&str> = values.iter().flat_map(|value| ["0", value]).collect();
    let whole = gather(with_zeros.iter().copied());
    assert_eq!(whole.conclude(None), Resolution::Significant(6));
    // Nor where a piece begins with one.
    let mut joined = Pattern::new();
    for two in with_zeros.chunks(2) {
        joined.join(&piece(two.iter().copied()));
    }
    assert_eq!(joined.conclude(None), Resolution::Significant(6));
}

#[test]
fn pieces_of_other_decimals_are_not_even() {
    let joined = |next: [&'static str; 3]| {
        let mut joined = gather(["1.5", "1.6", "1.7"]);
        joined.join(&piece(next));
        joined.even()
    };
    assert_eq!(joined(["1.8", "1.9", "2.0"]), Some((1, false)));
    assert_eq!(joined(["1.85", "1.95", "2.05"]), None);
    assert_eq!(joined(["1.8e0", "1.9e0", "2.0e0"]), None);
    assert_eq!(joined(["1.8", "1.95", "2.0"]), None);
}

#[test]
fn digits_of_one_number_over_two_decades_are_significant() {
    let nine = |k: u32| match k {
        0 => "12.3457".to_owned(),
        k => format!("1.{:05}", 12_341 + 7 * k),
    };
    assert_eq!(column(12, nine).conclude(None), Resolution::Significant(6));
    assert!(column(12, nine).is_clear());
    assert!(!column(12, |k| format!("{}", 100.0 / (3.1 + f64::from(k)))).is_clear());
}

// 2114583.25 is a number of single precision: 2114583.2 and 2114583.3 are its shortest texts.
#[test]
fn either_of_two_shortest_texts_is_of_single_precision() {
    for text in ["2114583.2", "2114583.3", "2114583.5", "2114583.25"] {
        let digits = text.len() as u8 - 1;
        assert!(is_single(text.parse().unwrap(), digits), "{text}");
    }
    assert!(!is_single(2_114_583.1, 8) && !is_single(2_114_583.4, 8));
}

#[test]
fn what_shows_more_than_single_precision_has_eight_digits_or_decimals() {
    use Resolution::{Coarser, Decimals, Full, Half, Significant, Single};
    for finer in [Full, Decimals(8), Significant(8), Coarser(8, 7)] {
        assert!(finer.is_finer_than_single(), "{finer:?}");
    }
    for coarser in [Decimals(7), Significant(7), Coarser(7, 8), Half, Single] {
        assert!(!coarser.is_finer_than_single(), "{coarser:?}");
    }
}

#[test]
fn numbers_of_single_precision_are_known_in_their_text_and_in_nine_digits() {
    // 0.1 in single precision is 0.100000001490116...: nine digits end in 1, and 2 is 5.1e-10 off.
    assert!(is_single(0.1, 1) && is_single(0.100000001, 9) && !is_single(0.100000002, 9));
    assert!(is_single(f64::from(0.1f32), 17) && !is_single(0.10000000149, 8));
    // From 2^26 on they are 8 apart; the shortest text of 67108872 is 67108870, yet it is one.
    assert!(is_single(67_108_872.0, 8) && is_single(67_108_870.0, 7));
    assert!(!is_single(67_108_871.0, 8));
}

#[test]
fn seven_digits_without_a_pattern_are_single_and_six_are_not() {
    // Neither the digits nor the decimals of the longest are those of most.
    let few = [
        "1.5", "12.25", "3.125", "2.75", "0.5", "7.25", "9.5", "4.125", "6.375",
    ];
    let with = |longest: &'static str| conclude(few.into_iter().chain([longest]));
    assert_eq!(with("0.1234567"), Resolution::Single);
    assert_eq!(with("0.123456"), Resolution::Full);
}

#[test]
fn whole_numbers_are_at_rest_up_to_one_row_in_fifty() {
    // The first value and the second one differ from the row before: two in a hundred.
    let of = |rows: usize| conclude(["3", "4"].into_iter().chain(vec!["4"; rows - 2]));
    assert_eq!(of(100), Resolution::Full);
    assert_eq!(of(99), Resolution::Decimals(0));
    let tenths = ["0.3", "0.4"].into_iter().chain(vec!["0.4"; 98]);
    assert_eq!(conclude(tenths), Resolution::Decimals(1));
}
