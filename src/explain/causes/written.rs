//! Faults in what was written, the model and the method being right: gains, offsets, signs,
//! units, swapped channels, shifted rows, clipped or frozen values, single precision, rows
//! interpolated between steps, few digits, noise.

use super::bench::{Gap, Rows, exactly};
use super::faults::TAKES_AWAY;
use super::{Candidate, Kind, Names, shape};
use crate::method::Linear;
use crate::number::{beside, plain, short};

/// Factors that a slip of units causes, with what it is.
const SLIPS: [(f64, &str); 22] = [
    (1e3, "milli for one"),
    (1e-3, "one for milli"),
    (1e6, "micro for one"),
    (1e-6, "one for micro"),
    (60.0, "minutes for seconds"),
    (1.0 / 60.0, "seconds for minutes"),
    (3600.0, "hours for seconds"),
    (1.0 / 3600.0, "seconds for hours"),
    (24.0, "days for hours"),
    (1.0 / 24.0, "hours for days"),
    (86400.0, "days for seconds"),
    (1.0 / 86400.0, "seconds for days"),
    (std::f64::consts::TAU, "radians for turns"),
    (1.0 / std::f64::consts::TAU, "turns for radians"),
    (180.0 / std::f64::consts::PI, "degrees for radians"),
    (std::f64::consts::PI / 180.0, "radians for degrees"),
    (30.0 / std::f64::consts::PI, "rpm for rad/s"),
    (std::f64::consts::PI / 30.0, "rad/s for rpm"),
    (100.0, "percent for a fraction"),
    (0.01, "a fraction for percent"),
    (3.6, "km/h for m/s"),
    (1.0 / 3.6, "m/s for km/h"),
];

/// The slip of units that a factor betrays.
pub(super) fn slip(factor: f64) -> Option<&'static str> {
    let near = |known: f64| (factor.abs() / known - 1.0).abs() < 2e-3;
    SLIPS
        .iter()
        .find(|(known, _)| near(*known))
        .map(|(_, what)| *what)
}

/// Every fault of this kind that could have turned `base` into what is written. Channels
/// that differ by less than `threshold` of their peak are taken to be right.
pub(super) fn candidates(
    rows: &Rows,
    names: &Names,
    base: &[f64],
    threshold: f64,
    before: Gap,
) -> Vec<Candidate> {
    let gaps: Vec<Gap> = (0..rows.width())
        .map(|channel| rows.gap_of(base, channel))
        .collect();
    let is_off = |&channel: &usize| gaps[channel].ratio > 1.0 && gaps[channel].share > threshold;
    let bad: Vec<usize> = (0..rows.width()).filter(is_off).collect();
    if bad.is_empty() {
        return Vec::new();
    }
    let mut found = Vec::new();
    found.extend(gains(rows, names, base, &bad));
    found.extend(offsets(rows, names, base, &bad));
    found.extend(swapped(rows, names, base, (&bad, &gaps), before));
    found.extend(shifted(rows, names, base));
    found.extend(shape::clipped(rows, names, base, &bad));
    found.extend(shape::frozen(rows, names, base, &bad));
    found.extend(single(rows, base));
    found.extend(rounded(rows, names, base));
    found
}

pub(super) fn with_channels(
    rows: &Rows,
    base: &[f64],
    bad: &[usize],
    of: &dyn Fn(usize, f64) -> f64,
) -> Vec<f64> {
    let width = rows.width();
    let value = |(at, &x): (usize, &f64)| {
        let channel = at % width;
        if bad.contains(&channel) {
            of(channel, x)
        } else {
            x
        }
    };
    base.iter().enumerate().map(value).collect()
}

fn gains(rows: &Rows, names: &Names, base: &[f64], bad: &[usize]) -> Vec<Candidate> {
    let mut factors = vec![1.0; rows.width()];
    for &channel in bad {
        let pairs = rows
            .column(base, channel)
            .zip(rows.column(&rows.written, channel));
        let (mut both, mut own) = (0.0, 0.0);
        for (x, y) in pairs.filter(|(x, _)| x.is_finite()) {
            both += x * y;
            own += x * x;
        }
        if own == 0.0 {
            return Vec::new();
        }
        factors[channel] = both / own;
    }
    // A channel that is off by other reasons, and next to nothing, is not multiplied.
    let bad: Vec<usize> = bad
        .iter()
        .copied()
        .filter(|&c| (factors[c] - 1.0).abs() > 1e-6)
        .collect();
    let bad = &bad[..];
    let values = with_channels(rows, base, bad, &|channel, x| factors[channel] * x);
    let Some(&first) = bad.first() else {
        return Vec::new();
    };
    let factor = factors[first];
    let same = bad
        .iter()
        .all(|&c| (factors[c] / factor - 1.0).abs() < 1e-3);
    let which = names.list(bad);
    let (is, has) = if bad.len() > 1 {
        ("are", "have")
    } else {
        ("is", "has")
    };
    let list = || {
        let each = bad.iter().map(|&c| {
            format!(
                "{} by {}",
                names.channel(c),
                beside(factors[c], factors[c] - 1.0)
            )
        });
        each.collect::<Vec<_>>().join(", ")
    };
    let (kind, text) = if same && (factor + 1.0).abs() < 1e-3 {
        (
            Kind::Sign,
            format!("{which} {has} the wrong sign; write the negative"),
        )
    } else if let Some(slip) = slip(factor).filter(|_| same) {
        let text = format!(
            "{which} {is} {} times too {}, as from a slip of units ({slip}); state the unit under \
             `[columns]` or convert what is written",
            short(if factor.abs() < 1.0 {
                1.0 / factor
            } else {
                factor
            }),
            if factor.abs() < 1.0 { "small" } else { "large" }
        );
        (Kind::Unit, text)
    } else if same {
        let text = format!(
            "{which} {is} multiplied by {}; divide what is written by it",
            beside(factor, factor - 1.0)
        );
        (Kind::Gain, text)
    } else {
        (Kind::Gain, format!("channels are multiplied: {}", list()))
    };
    let gain = Candidate::new(kind, 1, Some(factor), values, text);
    // Fahrenheit for Celsius, with its own zero.
    let fahrenheit = with_channels(rows, base, bad, &|_, x| 1.8 * x + 32.0);
    let text = format!(
        "{which} is in degF where degC is wanted; state `unit = \"degF\"` under `[columns]`"
    );
    vec![
        gain,
        Candidate::new(Kind::Unit, 1, Some(1.8), fahrenheit, text),
    ]
}

fn offsets(rows: &Rows, names: &Names, base: &[f64], bad: &[usize]) -> Vec<Candidate> {
    let mut offsets = vec![0.0; rows.width()];
    for &channel in bad {
        // The middle of the extremes: rounding spreads about it.
        let pairs = rows
            .column(base, channel)
            .zip(rows.column(&rows.written, channel));
        let gaps = pairs.map(|(x, y)| y - x).filter(|gap| gap.is_finite());
        let (low, high) = gaps.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), gap| {
            (low.min(gap), high.max(gap))
        });
        offsets[channel] = 0.5 * (low + high);
    }
    let bad: Vec<usize> = bad
        .iter()
        .copied()
        .filter(|&c| offsets[c].abs() > 1e-6 * rows.peaks[c])
        .collect();
    let bad = &bad[..];
    if bad.is_empty() {
        return Vec::new();
    }
    let values = with_channels(rows, base, bad, &|channel, x| x + offsets[channel]);
    let each = bad.iter().map(|&c| {
        format!(
            "{} by {} {}",
            names.channel(c),
            beside(offsets[c], rows.peaks[c]),
            names.unit(c)
        )
    });
    let offset = bad.first().map_or(0.0, |&c| offsets[c]);
    let mut text = format!("offset: {}", each.collect::<Vec<_>>().join(", "));
    let warm = bad.iter().all(|&c| ["K", "degC"].contains(&names.unit(c)));
    text += if warm && (offset.abs() - 273.15).abs() < 0.05 {
        ", which is the difference of K and degC; state the unit under `[columns]`"
    } else {
        "; subtract it from what is written"
    };
    vec![Candidate::new(Kind::Offset, 1, Some(offset), values, text)]
}

fn swapped(
    rows: &Rows,
    names: &Names,
    base: &[f64],
    (bad, gaps): (&[usize], &[Gap]),
    before: Gap,
) -> Vec<Candidate> {
    let width = rows.width();
    let mut found = Vec::new();
    // Channels that would stay too far off if they were not exchanged themselves: with many of
    // them no pair is left, and there are hundreds of thousands of pairs in a wide file.
    let too_far = |gap: &Gap| !gap.is_closed() && gap.share > TAKES_AWAY * before.share;
    let stays = |channel: &&usize| too_far(&gaps[**channel]);
    let wrong: Vec<usize> = bad.iter().filter(stays).copied().collect();
    let covers = |one: usize, other: usize| wrong.iter().all(|&c| c == one || c == other);
    let fits = |one: usize, other: usize| {
        let mut gap = Gap::NOTHING;
        base.chunks_exact(width).enumerate().all(|(row, base)| {
            gap.add(rows, row, one, base[other]);
            gap.add(rows, row, other, base[one]);
            !too_far(&gap)
        })
    };
    for (place, &one) in bad.iter().enumerate() {
        for &other in &bad[place + 1..] {
            if !(covers(one, other) && fits(one, other)) {
                continue;
            }
            let mut values = base.to_vec();
            for row in values.chunks_exact_mut(width) {
                row.swap(one, other);
            }
            let text = format!(
                "{} and {} are swapped; exchange the two columns",
                names.channel(one),
                names.channel(other)
            );
            found.push(Candidate::new(Kind::ChannelsSwapped, 0, None, values, text));
        }
    }
    found
}

fn shifted(rows: &Rows, names: &Names, base: &[f64]) -> Vec<Candidate> {
    let width = rows.width();
    let mut found = Vec::new();
    for shift in [-3i64, -2, -1, 1, 2, 3] {
        let mut values = vec![f64::NAN; base.len()];
        for row in 0..rows.len() {
            let Some(other) = row
                .checked_add_signed(shift as isize)
                .filter(|&r| r < rows.len())
            else {
                continue;
            };
            // Windows of a long file do not follow each other.
            if rows.numbers[other] as i64 - rows.numbers[row] as i64 == shift {
                let from = &base[other * width..][..width];
                values[row * width..][..width].copy_from_slice(from);
            }
        }
        // A first row may be the start all the same.
        let compared = values.iter().filter(|x| x.is_finite()).count();
        if compared < values.len() / 2 {
            continue;
        }
        let side = if shift < 0 { "late" } else { "early" };
        let size = rows.spacing.map_or(String::new(), |spacing| {
            format!(
                " ({} {})",
                short(spacing * shift.unsigned_abs() as f64),
                names.time_unit
            )
        });
        let rows_word = if shift.abs() == 1 { "row" } else { "rows" };
        let text = format!(
            "every row is {} {rows_word}{size} {side}: the values are those of the stamp {}; write \
             values with the stamp they belong to",
            shift.abs(),
            if shift < 0 { "before" } else { "after" },
        );
        found.push(Candidate::new(
            Kind::RowsShifted,
            1,
            Some(shift as f64),
            values,
            text,
        ));
    }
    found
}

/// Rows that are half a step off, where nothing but the exact solution can be asked.
pub(super) fn half_shifted(linear: &Linear, rows: &Rows, names: &Names) -> Vec<Candidate> {
    let Some(spacing) = rows.spacing else {
        return Vec::new();
    };
    let shift = |half: f64| {
        let mut values = exactly(linear, rows, half * spacing)?;
        // The first row is the start all the same.
        values
            .iter_mut()
            .take(rows.width())
            .for_each(|x| *x = f64::NAN);
        let text = format!(
            "every row is half a step ({} {}) {}: values and stamps are those of different ends of \
             the step",
            short(0.5 * spacing),
            names.time_unit,
            if half < 0.0 { "late" } else { "early" }
        );
        Some(Candidate::new(
            Kind::RowsShifted,
            1,
            Some(half),
            values,
            text,
        ))
    };
    [-0.5, 0.5].into_iter().filter_map(shift).collect()
}

const SINGLE: &str = "the values are single precision: 24 bits, a relative error up to 6e-8; write \
                      and compute in double precision";

/// Single precision in the arithmetic of a program whose method is known.
pub(super) fn single_arithmetic() -> Option<Candidate> {
    let worst = f64::from(f32::EPSILON) / 2.0;
    Some(Candidate::new(
        Kind::SinglePrecision,
        0,
        Some(worst),
        Vec::new(),
        SINGLE.to_owned(),
    ))
}

/// Values of single precision, stored or computed.
fn single(rows: &Rows, base: &[f64]) -> Vec<Candidate> {
    if !rows.single {
        return Vec::new();
    }
    let stored: Vec<f64> = base
        .iter()
        .zip(&rows.written)
        .zip(&rows.allowed)
        .map(|((&x, &y), &allowed)| {
            // Either neighbour where the rounding was a near thing.
            let single = f64::from(x as f32);
            let ulp = f64::from(f32::EPSILON) * x.abs().max(f64::from(f32::MIN_POSITIVE));
            if (single - y).abs() <= ulp && (x - y).abs() <= 0.5 * ulp + allowed {
                y
            } else {
                single
            }
        })
        .collect();
    let worst = f64::from(f32::EPSILON) / 2.0;
    // Computed in single precision: roundings add up from row to row.
    let computed: Vec<f64> = (0..base.len())
        .map(|at| {
            let number = rows.numbers[at / rows.width()] as f64;
            let allowed = f64::from(f32::EPSILON) * (16.0 + 4.0 * number);
            let peak = rows.peaks[at % rows.width()];
            let near = (rows.written[at] - base[at]).abs() <= allowed * peak;
            if near { rows.written[at] } else { base[at] }
        })
        .collect();
    vec![
        Candidate::new(
            Kind::SinglePrecision,
            0,
            Some(worst),
            stored,
            SINGLE.to_owned(),
        ),
        Candidate::new(
            Kind::SinglePrecision,
            1,
            Some(worst),
            computed,
            SINGLE.to_owned(),
        ),
    ]
}

/// Values rounded to few decimals although they are printed with more.
fn rounded(rows: &Rows, names: &Names, base: &[f64]) -> Vec<Candidate> {
    let mut found = Vec::new();
    for decimals in 0..=12 {
        let unit = 10f64.powi(-decimals);
        let whole = |y: f64| (y / unit - (y / unit).round()).abs() <= 1e-6;
        if !rows.written.iter().all(|&y| whole(y)) {
            continue;
        }
        let values: Vec<f64> = base
            .iter()
            .zip(rows.written.iter().zip(&rows.allowed))
            .map(|(&x, (&y, &allowed))| {
                if (x - y).abs() <= 0.5 * unit * (1.0 + 1e-9) + allowed {
                    y
                } else {
                    (x / unit).round() * unit
                }
            })
            .collect();
        let text = format!(
            "the values are rounded to {decimals} decimals ({} {}); print more digits",
            plain(unit),
            names.unit(0)
        );
        found.push(Candidate::new(
            Kind::CoarsePrint,
            0,
            Some(unit),
            values,
            text,
        ));
        break;
    }
    found
}
