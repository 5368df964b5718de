//! The stability function that a run really has, measured: the factor by which each mode
//! of the model has grown from one row to the next, beside `exp(z)`.
//!
//! On a linear model a one-step method multiplies the mode of the eigenvalue `lambda` by
//! `R(h lambda)`, whatever else it does, and a multistep method comes to do so once its
//! start has died away. So the factor can be read off the rows without knowing the method.
//! [`likeness`] tells from factors at several `z` how many coefficients of the series of
//! `exp` they share.

use nalgebra::{Complex, DMatrix, Schur};

use super::linear::{Linear, Side};
use super::record::{Piece, Record};
use crate::number::schur_turns;

/// The factor of one mode from row to row.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Growth {
    /// The eigenvalue, per unit of time; of a conjugate pair the one above the real axis.
    pub eigenvalue: Complex<f64>,
    /// Distance of the rows times the eigenvalue.
    pub z: Complex<f64>,
    /// How far `z` is known: eigenvalues are computed in `f64`.
    pub z_doubt: f64,
    /// The factor.
    pub factor: Complex<f64>,
    /// How far the factor is known.
    pub doubt: f64,
    /// Pairs of rows that it rests on.
    pub pairs: usize,
}

/// Why no factor can be read off a run.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Unmeasured {
    /// Some state is not in the file.
    States,
    /// Rows are not evenly spaced.
    Spacing,
    /// Inputs move between their jumps.
    Inputs,
    /// Modes coincide or nearly do, or their vectors are nearly dependent.
    Modes,
    /// No mode stands clear of the digits, or none keeps to one factor.
    Rows,
}

/// How much the measured factors are like `exp(z)`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Likeness {
    /// So many coefficients of its series, the constant one included: one more than the
    /// order on linear problems.
    Coefficients(u32),
    /// All of it, as far as digits and rounding tell.
    Exact,
    /// The factors do not tell.
    Unseen,
}

/// A mode is read off rows where it is this many times what the digits leave open.
const CLEAR: f64 = 10.0;
/// Vectors of modes worse conditioned than this refuse.
const CONDITION: f64 = 1e6;
/// Eigenvalues that differ by less than this part of them coincide.
const COINCIDE: f64 = 1e-6;
/// A mode slower than this part of the matrix stands still.
const STILL: f64 = 1e-12;
/// Rows left out after the start and after each jump, one number after the other until one
/// factor holds: what the start of a multistep method leaves dies away.
const SKIPS: [usize; 7] = [0, 2, 4, 8, 16, 32, 64];
/// Roundings of one step of a program, in units of its arithmetic and of what it adds up.
const ROUNDINGS: f64 = 32.0;

impl Unmeasured {
    /// In words.
    pub fn words(self) -> &'static str {
        match self {
            Unmeasured::States => "not every state is in the file",
            Unmeasured::Spacing => "rows are not evenly spaced",
            Unmeasured::Inputs => "inputs move between their jumps",
            Unmeasured::Modes => "modes coincide or are nearly dependent",
            Unmeasured::Rows => "no mode stands clear of the digits and keeps to one factor",
        }
    }
}

/// The factor of each mode that can be measured, slowest mode first. `steps` is the number
/// of steps from row to row as far as it is known, else one.
///
/// # Formula
/// With `w` the left vector of the mode and `g` the forcing, constant within a piece,
/// `m_k = w x_k + w g / lambda` obeys `m_(k+1) = R m_k`. The factor is
/// `sum u_k m_(k+1) / sum u_k m_k`, `u_k = conj(m_k) / d_k^2` with `d_k` what digits leave
/// open in `m_k`: weighted least squares.
///
/// # Domain
/// All states in the file, evenly spaced rows, inputs that are constant between jumps,
/// distinct eigenvalues whose vectors are not nearly dependent. A mode whose rows do not
/// all agree with one factor is left out: it has none.
///
/// # Error bound
/// For what the digits have lost: with `e_k` the errors of `m_k` and `r_k` the roundings of
/// the step, the factor is off by `(sum e_k (u_(k-1) - R u_k) + sum u_k r_k) / sum u_k m_k`
/// whatever the weights, and each term is bounded. The roundings `r_k` are an allowance:
/// 32 units of the sums of magnitudes of one step, more where steps are long.
///
/// # Errors
/// Why no factor can be read off.
///
/// # Cost
/// `size^3`, and `rows * size^2`.
pub fn growth(linear: &Linear, record: &Record, steps: u64) -> Result<Vec<Growth>, Unmeasured> {
    let size = linear.size();
    let places = record.states(size).ok_or(Unmeasured::States)?;
    let (spacing, spacing_doubt) = record.spacing.ok_or(Unmeasured::Spacing)?;
    if !linear.is_steady() {
        return Err(Unmeasured::Inputs);
    }
    let peaks = record.peaks();
    let scale = |&place: &usize| match peaks[place] {
        peak if peak > 0.0 && peak.is_finite() => peak,
        _ => 1.0,
    };
    let scales: Vec<f64> = places.iter().map(scale).collect();
    let modes = modes(linear, &scales).ok_or(Unmeasured::Modes)?;
    let reader = Reader {
        linear,
        record,
        places,
        pieces: record.pieces(linear),
        step: spacing / steps.max(1) as f64,
        steps: steps.max(1) as f64,
    };
    let mut found = Vec::new();
    for mode in &modes.list {
        let size = mode.eigenvalue.norm();
        if mode.eigenvalue.im < 0.0 || size <= STILL * modes.norm {
            continue;
        }
        let amplitudes: Vec<Vec<Amplitude>> = reader
            .pieces
            .iter()
            .map(|piece| reader.amplitudes(piece, mode, modes.norm))
            .collect();
        let fits = SKIPS.iter();
        if let Some((factor, doubt, pairs)) = fits.filter_map(|&s| fit(&amplitudes, s)).next() {
            found.push(Growth {
                eigenvalue: mode.eigenvalue,
                z: mode.eigenvalue * spacing,
                z_doubt: spacing * mode.doubt + spacing_doubt * size,
                factor,
                doubt,
                pairs,
            });
        }
    }
    if found.is_empty() {
        return Err(Unmeasured::Rows);
    }
    Ok(found)
}

/// One eigenvalue with its left vector.
struct Mode {
    eigenvalue: Complex<f64>,
    /// How far the eigenvalue is known.
    doubt: f64,
    /// Over the states.
    left: Vec<Complex<f64>>,
    /// What other modes may leak into this one by rounding of the vector, relative to the
    /// magnitudes added up.
    leak: f64,
}

struct Modes {
    list: Vec<Mode>,
    /// Of the matrix, states relative to their peaks.
    norm: f64,
}

/// The modes in units of the states' peaks, where they are well apart.
fn modes(linear: &Linear, scales: &[f64]) -> Option<Modes> {
    let n = linear.size();
    let matrix = DMatrix::from_fn(n, n, |i, j| {
        Complex::new(linear.matrix[(i, j)] * scales[j] / scales[i], 0.0)
    });
    let norm = matrix.norm();
    if !norm.is_finite() {
        return None;
    }
    let (turn, upper) = Schur::try_new(matrix, f64::EPSILON, schur_turns(n))?.unpack();
    let value = |k: usize| upper[(k, k)];
    let mut nearest = vec![f64::INFINITY; n];
    for (i, nearest) in nearest.iter_mut().enumerate() {
        for j in (0..n).filter(|&j| j != i) {
            let gap = (value(i) - value(j)).norm();
            if gap <= COINCIDE * value(i).norm().max(value(j).norm()) {
                return None;
            }
            *nearest = nearest.min(gap);
        }
    }
    // Vectors of the triangle by substitution, turned back.
    let mut vectors = DMatrix::from_element(n, n, Complex::new(0.0, 0.0));
    for k in 0..n {
        vectors[(k, k)] = Complex::new(1.0, 0.0);
        for i in (0..k).rev() {
            let terms = (i + 1..=k).map(|j| upper[(i, j)] * vectors[(j, k)]);
            let sum: Complex<f64> = terms.sum();
            vectors[(i, k)] = -sum / (value(i) - value(k));
        }
        let length = vectors.column(k).norm();
        vectors.column_mut(k).unscale_mut(length);
    }
    let vectors = turn * vectors;
    let lefts = vectors.clone().try_inverse()?;
    let condition = vectors.norm() * lefts.norm();
    // Also where it is not a number.
    if condition.is_nan() || condition > CONDITION * n as f64 {
        return None;
    }
    let rounding = 4.0 * n as f64 * f64::EPSILON * norm;
    let mode = |k: usize| {
        // A lone state is its own mode.
        let (doubt, leak) = if n == 1 {
            (f64::EPSILON * value(k).norm(), 0.0)
        } else {
            let length = lefts.row(k).norm();
            (rounding * length, rounding * condition / nearest[k])
        };
        let real = value(k).im.abs() <= doubt;
        Mode {
            eigenvalue: if real {
                Complex::new(value(k).re, 0.0)
            } else {
                value(k)
            },
            doubt,
            left: (0..n).map(|j| lefts[(k, j)] / scales[j]).collect(),
            leak,
        }
    };
    let mut list: Vec<Mode> = (0..n).map(mode).collect();
    list.sort_by(|a, b| a.eigenvalue.norm().total_cmp(&b.eigenvalue.norm()));
    Some(Modes { list, norm })
}

/// A mode in one row.
struct Amplitude {
    value: Complex<f64>,
    /// What digits leave open.
    doubt: f64,
    /// What the step from here may add by rounding.
    rounding: f64,
}

struct Reader<'a> {
    linear: &'a Linear,
    record: &'a Record,
    places: Vec<usize>,
    pieces: Vec<Piece>,
    step: f64,
    steps: f64,
}

impl Reader<'_> {
    fn amplitudes(&self, piece: &Piece, mode: &Mode, norm: f64) -> Vec<Amplitude> {
        let (linear, n) = (self.linear, self.linear.size());
        let window = &self.record.windows[piece.window];
        let mut forcing = vec![0.0; n];
        let begin = window.times[piece.start];
        linear.forcing(begin, Side::After, 0.0, &mut forcing);
        let sizes: Vec<f64> = (0..n).map(|i| self.size_of_forcing(i, begin)).collect();
        let pull = mode.left.iter().zip(&forcing).map(|(w, g)| w * *g);
        let rest = pull.sum::<Complex<f64>>() / mode.eigenvalue;
        let pulls = mode.left.iter().zip(&sizes).map(|(w, g)| w.norm() * g);
        let unsure = f64::EPSILON * (8.0 + n as f64) + mode.doubt / mode.eigenvalue.norm();
        let rest_doubt = unsure * pulls.sum::<f64>() / mode.eigenvalue.norm();
        let own = f64::EPSILON * (4.0 + n as f64) + mode.leak;
        // Stages of an explicit method exceed the states by as much as this.
        let stages = ROUNDINGS * (norm * self.step).min(3.0).exp() * self.record.unit;
        let amplitude = |row: usize| {
            let at = |state: usize| row * self.record.width() + self.places[state];
            let (mut value, mut doubt, mut rounding) = (rest, rest_doubt, 0.0);
            for (j, weight) in mode.left.iter().enumerate() {
                let (x, size) = (window.values[at(j)], weight.norm());
                value += weight * x;
                doubt += size * (window.doubts[at(j)] + own * x.abs());
                let terms = linear.matrix.row(j).iter().enumerate();
                let rate: f64 = terms.map(|(i, a)| (a * window.values[at(i)]).abs()).sum();
                rounding += size * (x.abs() + self.step * (rate + sizes[j]));
            }
            // Programs that add up their time have steps that are off by its rounding.
            let clock = 2.0 * f64::EPSILON * window.times[row].abs();
            Amplitude {
                value,
                doubt,
                rounding: self.steps
                    * (stages * rounding + clock * mode.eigenvalue.norm() * value.norm()),
            }
        };
        let rows = piece.start..piece.start + piece.rows;
        rows.map(amplitude).collect()
    }

    fn size_of_forcing(&self, state: usize, time: f64) -> f64 {
        let inputs = self.linear.drive[state].iter().zip(&self.linear.signals);
        let sizes = inputs.map(|(b, signal)| (b * signal.at(time, Side::After, 0.0)).abs());
        self.linear.constant[state].abs() + sizes.sum::<f64>()
    }
}

/// The factor, how far it is known, and the pairs of rows behind it; `None` where there are
/// none, or where they do not agree with one factor.
fn fit(pieces: &[Vec<Amplitude>], skip: usize) -> Option<(Complex<f64>, f64, usize)> {
    let clear = |row: &Amplitude| row.value.norm() > CLEAR * row.doubt;
    let pairs = || {
        let windows = pieces.iter().flat_map(|rows| rows.windows(2).skip(skip));
        windows.filter(|pair| clear(&pair[0]))
    };
    let weight = |row: &Amplitude| row.value.conj() / row.doubt.max(f64::MIN_POSITIVE).powi(2);
    // Weights can leave the range of numbers: all are taken relative to one.
    let unit = pairs()
        .map(|pair| weight(&pair[0]).norm())
        .fold(0.0, f64::max);
    if unit == 0.0 || !unit.is_finite() {
        return None;
    }
    let weight = |row: &Amplitude| weight(row) / unit;
    let mut count = 0;
    let (mut above, mut below) = (Complex::new(0.0, 0.0), 0.0);
    let mut lost = 0.0;
    for pair in pairs() {
        let u = weight(&pair[0]);
        above += u * pair[1].value;
        below += (u * pair[0].value).re;
        lost += u.norm() * pair[0].doubt;
        count += 1;
    }
    let factor = above / below;
    let mut off = 0.0;
    for rows in pieces {
        let mut before = Complex::new(0.0, 0.0);
        for (place, row) in rows.iter().enumerate() {
            let used = place >= skip && place + 1 < rows.len() && clear(row);
            let u = if used {
                weight(row)
            } else {
                Complex::new(0.0, 0.0)
            };
            off += (before - factor * u).norm() * row.doubt + u.norm() * row.rounding;
            before = u;
        }
    }
    let doubt = off / (below - lost);
    let agrees = |pair: &[Amplitude]| {
        let (from, to) = (&pair[0], &pair[1]);
        let left = (to.value - factor * from.value).norm();
        let allowed = to.doubt + factor.norm() * from.doubt + from.rounding;
        left <= allowed + doubt * (from.value.norm() + from.doubt)
    };
    (count > 0 && doubt.is_finite() && pairs().all(agrees)).then_some((factor, doubt, count))
}

/// Factors at steps longer than this do not show what happens as the step shrinks.
const SMALL: f64 = 1.0;
/// Pairs of points that lie so near to zero need no extrapolation.
const TINY: f64 = 0.05;
/// Of a pair of larger points the next term of the series can make a wrong whole number.
const NEAR_ZERO: f64 = 0.5;
/// A difference from `exp` counts where it is this many times its doubt.
const SEEN: f64 = 4.0;
/// Steps of neighbouring points differ by this factor at least.
const LEAST_RATIO: f64 = 1.3;
/// An exponent this far from a whole number, or known no better, tells nothing.
const OFF: f64 = 0.25;

/// A measured difference from `exp` in one step.
#[derive(Clone, Copy)]
struct Point {
    mode: Complex<f64>,
    size: f64,
    gap: f64,
    doubt: f64,
}

/// How much factors are like `exp(z)`; each comes with the number of steps that its rows
/// are apart.
///
/// # Formula
/// `|ln(R exp(-z))| = C |z|^q (1 + a z + ...)` in one step: `q` from the smallest pairs of
/// `z` of a mode, extrapolated to `z = 0` where there are three, rounded to a whole number.
/// Such a method shares `q` coefficients with the series of `exp`.
///
/// # Domain
/// Exponents that are not within a quarter of a whole number, or on which two modes
/// disagree, are [`Likeness::Unseen`].
pub fn likeness(factors: &[(Growth, u64)]) -> Likeness {
    let points = factors.iter().filter_map(|&(growth, steps)| {
        let steps = steps.max(1) as f64;
        let relative = growth.doubt / growth.factor.norm();
        let size = growth.z.norm() / steps;
        // The logarithm is taken of what is near one.
        (relative < 0.5 && size <= SMALL).then(|| Point {
            mode: growth.eigenvalue,
            size,
            gap: (growth.factor * (-growth.z).exp()).ln().norm() / steps,
            doubt: (2.0 * relative + growth.z_doubt) / steps,
        })
    });
    let mut points: Vec<Point> = points.collect();
    points.sort_by(|a, b| a.size.total_cmp(&b.size));
    let unlike = |point: &Point| point.gap > point.doubt;
    if !points.iter().any(unlike) {
        // Even Gauss's sixth order would be seen there: it is off by z^7 / 100800.
        let tells = |point: &Point| point.doubt < 2e-6 * point.size.powi(7);
        return match points.iter().any(tells) {
            true => Likeness::Exact,
            false => Likeness::Unseen,
        };
    }
    points.retain(|point| point.gap >= SEEN * point.doubt);
    let mut modes: Vec<Complex<f64>> = Vec::new();
    for point in &points {
        if !modes.contains(&point.mode) {
            modes.push(point.mode);
        }
    }
    let of_mode = |mode: &Complex<f64>| {
        let own = points.iter().filter(|point| point.mode == *mode);
        exponent(&own.copied().collect::<Vec<_>>())
    };
    let mut found: Vec<u32> = modes.iter().filter_map(of_mode).collect();
    if found.is_empty() {
        // A single run has one point of each mode.
        found.extend(exponent(&points));
    }
    match found[..] {
        [first, ref others @ ..] if others.iter().all(|q| *q == first) => {
            Likeness::Coefficients(first)
        }
        _ => Likeness::Unseen,
    }
}

/// The exponent with which gaps fall with the size, smallest points first.
fn exponent(points: &[Point]) -> Option<u32> {
    let mut spread: Vec<Point> = Vec::new();
    for point in points {
        if spread
            .last()
            .is_none_or(|last| point.size >= LEAST_RATIO * last.size)
        {
            spread.push(*point);
        }
    }
    /// Slope, its doubt, and what the next term of the series is weighted with in it.
    fn slope(fine: &Point, coarse: &Point) -> (f64, f64, f64) {
        let ratio = (coarse.size / fine.size).ln();
        let doubt = |point: &Point| point.doubt / (point.gap - point.doubt);
        (
            (coarse.gap / fine.gap).ln() / ratio,
            (doubt(fine) + doubt(coarse)) / ratio,
            (coarse.size - fine.size) / ratio,
        )
    }
    let whole = |value: f64, doubt: f64| {
        let nearest = value.round();
        (nearest >= 1.0 && doubt <= OFF && (value - nearest).abs() <= OFF).then_some(nearest as u32)
    };
    // The smallest pair may be hidden by its digits where the next one is not.
    for from in 0..spread.len().saturating_sub(1) {
        let (steep, doubt, lever) = slope(&spread[from], &spread[from + 1]);
        if doubt > OFF {
            continue;
        }
        let alone = whole(steep, doubt).filter(|_| spread[from + 1].size <= NEAR_ZERO);
        let Some(third) = spread
            .get(from + 2)
            .filter(|_| spread[from + 1].size > TINY)
        else {
            return alone;
        };
        let (next, next_doubt, next_lever) = slope(&spread[from + 1], third);
        let share = lever / (next_lever - lever);
        let far = doubt + share * (doubt + next_doubt);
        return whole(steep - share * (next - steep), far).or(alone);
    }
    None
}
