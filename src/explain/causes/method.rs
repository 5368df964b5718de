//! What the method itself explains: a step beyond its stability limit, ringing, a coarser
//! step than claimed, another method, a start at too low an order.

use super::bench::{Gap, Rows, Stepping, Way, exactly, trajectory};
use super::{Candidate, Kind, Names, Trouble};
use crate::method::{Coefficients, Linear, Method, amplification, approx_stable_length, roots};
use crate::number::{approx_eigenvalues, short};

use nalgebra::Complex;

/// Causes that lie in a method at a step which explains the rows.
pub(super) fn candidates(
    linear: &Linear,
    rows: &Rows,
    names: &Names,
    method: &'static Method,
    step: f64,
    values: &[f64],
) -> Vec<Candidate> {
    let Some(scheme) = method.schemes.first() else {
        return Vec::new();
    };
    let coefficients = scheme.coefficients();
    let mut found = Vec::new();
    let fastest = eigenvalues(linear)
        .into_iter()
        .filter(|value| value.re < 0.0)
        .max_by(|a, b| {
            let size = |value: &Complex<f64>| amplification(&coefficients, value * step);
            size(a).total_cmp(&size(b))
        });
    let Some(eigenvalue) = fastest else {
        return found;
    };
    let factor = amplification(&coefficients, eigenvalue * step);
    if factor > 1.0 + 1e-9 && grows(rows) {
        let limit = approx_stable_length(&coefficients, eigenvalue / eigenvalue.norm());
        let limit = limit.map_or(String::new(), |length| {
            format!(
                "; it is stable up to {} {}",
                short(length / eigenvalue.norm()),
                names.time_unit
            )
        });
        let text = format!(
            "the step of {} {} is beyond the stability limit of {}: a decaying mode grows by {} in \
             every step{limit}",
            short(step),
            names.time_unit,
            method.name,
            short(factor)
        );
        found.push(Candidate::new(
            Kind::UnstableStep,
            0,
            Some(factor),
            values.to_vec(),
            text,
        ));
    } else if let Some(factor) = ringing(&coefficients, linear, step)
        && alternates(rows)
    {
        let text = format!(
            "ringing: {} is not L-stable and multiplies the fastest mode by {} in every step of {} {}; \
             start with a few short or damped steps, or take an L-stable method",
            method.name,
            short(factor),
            short(step),
            names.time_unit
        );
        found.push(Candidate::new(
            Kind::Ringing,
            0,
            Some(factor),
            values.to_vec(),
            text,
        ));
    }
    found
}

/// A multistep method whose first steps were made at too low an order: the rows obey its
/// formula, and with a good start it would have left far less.
pub(super) fn low_order_start(
    linear: &Linear,
    rows: &Rows,
    method: &'static Method,
    step: f64,
) -> Option<Candidate> {
    let back = method
        .schemes
        .iter()
        .map(|scheme| scheme.steps_back())
        .max()?;
    let spacing = rows.spacing?;
    if back < 2 || (spacing / step).round() != 1.0 || rows.len() < back + 4 {
        return None;
    }
    // Where the first rows are right, so is what made them.
    let mut first = 0..(back * rows.width()).min(rows.written.len());
    if first.all(|at| (rows.written[at] - rows.exact[at]).abs() <= rows.allowed[at]) {
        return None;
    }
    let written = rows.error_of(&rows.written);
    let mut ways = Stepping::all(method, linear, step).into_iter();
    let well_started = ways.any(|stepping| {
        let values = trajectory(linear, rows, &Way::Stepped(stepping));
        values.is_some_and(|values| rows.error_of(&values) < 0.25 * written)
    });
    if !well_started {
        return None;
    }
    // The first row after the start tells what made it.
    let by_euler = Stepping::all(crate::method::find("forward Euler")?, linear, step)
        .into_iter()
        .chain(Stepping::all(
            crate::method::find("backward Euler")?,
            linear,
            step,
        ))
        .find(|stepping| {
            let values = trajectory(linear, rows, &Way::Stepped(stepping.clone()));
            values.is_some_and(|values| {
                (rows.width()..2 * rows.width())
                    .all(|at| (values[at] - rows.written[at]).abs() <= rows.allowed[at])
            })
        });
    let how = by_euler.map_or("at too low an order".to_owned(), |stepping| {
        format!("by {}", stepping.method.name)
    });
    let text = format!(
        "the first {} of {} are made {how}, and their error stays; start it with a one-step method \
         of its own order",
        if back == 2 {
            "step".to_owned()
        } else {
            format!("{} steps", back - 1)
        },
        method.name
    );
    Some(Candidate::new(
        Kind::LowOrderStart,
        0,
        Some((back - 1) as f64),
        rows.written.clone(),
        text,
    ))
}

/// Time that was summed in single precision: the stamps drift, the states do not.
pub(super) fn single_precision_time(
    linear: &Linear,
    rows: &Rows,
    names: &Names,
    trouble: &Trouble,
    before: Gap,
) -> Option<Candidate> {
    let (from, last) = (linear.window.0, rows.len().checked_sub(1)?);
    let mean = (rows.times[last] - from) / rows.numbers[last] as f64;
    let spacing = trouble
        .step
        .map(|step| (mean / step).round().max(1.0) * step)
        .or(rows.spacing)
        .filter(|spacing| (spacing / mean - 1.0).abs() < 1e-4)?;
    let even = |row: usize| from + rows.numbers[row] as f64 * spacing;
    // Stamps that agree with the step to their digits stand for its multiples already.
    let single = |row: usize| {
        let time = rows.times[row];
        f64::from(time as f32) == time || (time - even(row)).abs() <= 1e-12 * time.abs()
    };
    let all_single = (0..rows.len()).all(single);
    let drifts = (0..rows.len()).map(|row| (rows.times[row] - even(row)).abs());
    let worst = drifts.fold(0.0, f64::max);
    let largest = rows.times.iter().fold(0.0f64, |m, t| m.max(t.abs()));
    let (half_ulp, sums) = (
        0.5 * f64::from(f32::EPSILON) * largest,
        rows.numbers[last] as f64,
    );
    if !all_single || worst <= half_ulp || worst > sums * half_ulp {
        return None;
    }
    // The states are those of the even grid.
    let mut at_even = rows.clone();
    at_even.times = (0..rows.len()).map(even).collect();
    at_even.spacing = Some(spacing);
    at_even.exact = exactly(linear, &at_even, 0.0)?;
    let step = trouble.step.unwrap_or(spacing);
    let methods = trouble.methods.iter().copied();
    let methods = methods.chain(
        super::faults::USUAL
            .iter()
            .filter_map(|name| crate::method::find(name)),
    );
    let stepped = methods
        .flat_map(|m| Stepping::all(m, linear, step))
        .map(Way::Stepped);
    let fits = std::iter::once(Way::Exact).chain(stepped).find_map(|way| {
        let values = trajectory(linear, &at_even, &way)?;
        let gap = rows.gap(&values);
        (gap.is_closed() || gap.share <= super::faults::TAKES_AWAY * before.share).then_some(values)
    })?;
    let text = format!(
        "time is summed in single precision: the stamps are up to {} {} off the steps; count steps and \
         multiply, in double precision",
        short(worst),
        names.time_unit
    );
    Some(Candidate::new(
        Kind::SinglePrecisionTime,
        1,
        Some(worst),
        fits,
        text,
    ))
}

fn eigenvalues(linear: &Linear) -> Vec<Complex<f64>> {
    approx_eigenvalues(&linear.matrix).unwrap_or_default()
}

/// The errors grow by orders of magnitude towards the end.
fn grows(rows: &Rows) -> bool {
    let error = |row: usize| {
        let line = row * rows.width()..(row + 1) * rows.width();
        line.map(|at| {
            (rows.written[at] - rows.exact[at]).abs()
                / rows.peaks[at % rows.width()].max(f64::MIN_POSITIVE)
        })
        .fold(0.0, f64::max)
    };
    let half = rows.len() / 2;
    let early = (0..half).map(error).fold(0.0, f64::max);
    let late = (half..rows.len()).map(error).fold(0.0, f64::max);
    late > 1.5 * early
}

/// The most negative factor of a decaying mode that should be nearly gone after a step.
fn ringing(coefficients: &Coefficients, linear: &Linear, step: f64) -> Option<f64> {
    let factors = eigenvalues(linear)
        .into_iter()
        .filter(|value| value.re * step < -2.0);
    let factors = factors.flat_map(|value| roots(coefficients, value * step));
    let worst = factors.map(|factor| factor.re).fold(0.0, f64::min);
    (-1.0 - 1e-9..-0.3).contains(&worst).then_some(worst)
}

/// The errors change sign from row to row for a while.
fn alternates(rows: &Rows) -> bool {
    let width = rows.width();
    (0..width).any(|channel| {
        let error =
            |row: usize| rows.written[row * width + channel] - rows.exact[row * width + channel];
        let swings = (1..rows.len()).map(|row| error(row) * error(row - 1) < 0.0);
        let mut longest = 0;
        let mut run = 0;
        for swing in swings {
            run = if swing { run + 1 } else { 0 };
            longest = longest.max(run);
        }
        longest >= 4
    })
}
