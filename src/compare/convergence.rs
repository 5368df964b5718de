//! Three runs compared with each other, where nothing exact is at hand: the order that
//! they show, the value they tend to, and the grid convergence index.

use super::order::Pair;

/// What three runs of falling step say of the error of the finest.
///
/// # Formula
/// `p = |ln|e32/e21| + q(p)| / ln r21`, `q = ln((r21^p - s)/(r32^p - s))`,
/// `s = sign(e32/e21)`; extrapolated `(r21^p f1 - f2)/(r21^p - 1)`; index
/// `1.25 |f1 - f2|/|f1| / (r21^p - 1)`.
///
/// # Source
/// `[celik-2008]` in [`crate::references`]; for equal ratios `[roache-1998]`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Convergence {
    /// Observed order.
    pub order: f64,
    /// Value for a step of zero.
    pub extrapolated: f64,
    /// `|f1 - f2| / |f1|`.
    pub relative_difference: f64,
    /// `|extrapolated - f1| / |extrapolated|`.
    pub extrapolated_difference: f64,
    /// Grid convergence index of the finest run, a fraction.
    pub index: f64,
    /// True where the differences change sign.
    pub oscillating: bool,
}

/// Safety factor for three grids (`[roache-1998]`).
const SAFETY: f64 = 1.25;

/// Evaluates three values, the finest first, with their steps.
///
/// # Domain
/// Steps above zero that rise; values that differ. Otherwise `None`.
///
/// # Error bound
/// The order is iterated until it moves by less than 1e-12.
pub fn grid_convergence(steps: [f64; 3], values: [f64; 3]) -> Option<Convergence> {
    let [fine, middle, coarse] = steps;
    let (r21, r32) = (middle / fine, coarse / middle);
    let (e21, e32) = (values[1] - values[0], values[2] - values[1]);
    let differ = e21 != 0.0 && e32 != 0.0 && e21.is_finite() && e32.is_finite();
    let usable = fine > 0.0 && r21 > 1.0 && r32 > 1.0 && differ;
    if !usable {
        return None;
    }
    let sign = (e32 / e21).signum();
    let mut order = 1.0f64;
    let mut settled = false;
    for _ in 0..1000 {
        let q = ((r21.powf(order) - sign) / (r32.powf(order) - sign)).ln();
        let next = ((e32 / e21).abs().ln() + q).abs() / r21.ln();
        settled = (next - order).abs() < 1e-12 * next.abs().max(1.0);
        order = next;
        if settled || !order.is_finite() {
            break;
        }
    }
    if !settled || order <= 0.0 {
        return None;
    }
    let gain = r21.powf(order);
    let extrapolated = (gain * values[0] - values[1]) / (gain - 1.0);
    let relative_difference = (e21 / values[0]).abs();
    Some(Convergence {
        order,
        extrapolated,
        relative_difference,
        extrapolated_difference: ((extrapolated - values[0]) / extrapolated).abs(),
        index: SAFETY * relative_difference / (gain - 1.0),
        oscillating: sign < 0.0,
    })
}

/// Three neighbouring runs compared with each other at the stamps that they share.
///
/// `differences` are the largest differences between the finer two and between the
/// coarser two, `doubt` what their digits leave open in each, `peak` the largest value.
/// The pair joins the finest setting with the coarsest.
pub fn order_of_three(
    steps: [f64; 3],
    differences: [f64; 2],
    doubt: f64,
    peak: f64,
) -> Option<Pair> {
    let order = |fine: f64, coarse: f64| {
        // Only the differences count, which would drown in a peak.
        let values = [0.0, fine, fine + coarse];
        grid_convergence(steps, values).map(|found| found.order)
    };
    let [fine, coarse] = differences;
    // Differences that do not shrink with the step show no convergence.
    let shrinks = fine < coarse;
    let clear = shrinks && fine > 2.5 * doubt && coarse > 2.5 * doubt && fine < 0.5 * peak;
    if !clear {
        return None;
    }
    Some(Pair {
        settings: (steps[2], steps[0]),
        order: order(fine, coarse)?,
        low: order(fine + doubt, coarse - doubt).unwrap_or(0.0),
        high: order(fine - doubt, coarse + doubt)?,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn three_runs_of_a_known_order_show_it() {
        let error = |h: f64| 0.3 * h.powi(3);
        let steps = [0.1, 0.2, 0.4];
        let differences = [error(0.2) - error(0.1), error(0.4) - error(0.2)];
        let pair = order_of_three(steps, differences, 1e-12, 1.0).unwrap();
        assert!((pair.order - 3.0).abs() < 1e-9, "{pair:?}");
        assert!(pair.low <= pair.order && pair.order <= pair.high);
        assert_eq!(order_of_three(steps, differences, 1e-2, 1.0), None);
    }

    #[test]
    fn values_that_tell_nothing_are_refused() {
        assert_eq!(grid_convergence([1.0, 2.0, 4.0], [1.0, 1.0, 1.0]), None);
        assert_eq!(grid_convergence([1.0, 1.0, 4.0], [1.0, 2.0, 4.0]), None);
        assert_eq!(
            grid_convergence([1.0, 2.0, 4.0], [1.0, f64::NAN, 4.0]),
            None
        );
    }

    #[test]
    fn steps_have_to_rise_and_to_be_above_zero() {
        let values = [1.0, 1.1, 1.5];
        assert!(grid_convergence([1.0, 2.0, 4.0], values).is_some());
        for steps in [
            [1.0, 2.0, 2.0],
            [1.0, 2.0, 1.5],
            [2.0, 1.0, 4.0],
            [0.0, 1.0, 2.0],
            [-1.0, -2.0, -4.0],
        ] {
            assert_eq!(grid_convergence(steps, values), None, "{steps:?}");
        }
        assert_eq!(grid_convergence([1.0, 2.0, 4.0], [1.0, 1.0, 2.0]), None);
        assert_eq!(grid_convergence([1.0, 2.0, 4.0], [1.0, 2.0, 2.0]), None);
    }

    // With halved steps the order is log2 of the differences: the definition, [roache-1998].
    #[test]
    fn doubt_of_the_differences_bounds_the_order() {
        let pair = |fine: f64, coarse: f64, doubt: f64, peak: f64| {
            order_of_three([0.1, 0.2, 0.4], [fine, coarse], doubt, peak)
        };
        for peak in [1.0, 1e-2, 1e6] {
            let found = pair(1e-3, 7e-3, 2e-4, peak).unwrap();
            assert_eq!(found.settings, (0.4, 0.1));
            for (found, expected) in [
                (found.order, 7f64.log2()),
                (found.low, (6.8e-3f64 / 1.2e-3).log2()),
                (found.high, (7.2e-3f64 / 0.8e-3).log2()),
            ] {
                assert!((found - expected).abs() < 1e-11, "{found} {expected}");
            }
        }
        // Differences two and a half times their doubt, below half the peak, that shrink.
        assert!(pair(1e-3, 7e-3, 0.39e-3, 1.0).is_some());
        assert_eq!(pair(1e-3, 7e-3, 0.41e-3, 1.0), None);
        assert!(pair(1e-3, 7e-3, 0.0, 2.1e-3).is_some());
        assert_eq!(pair(1e-3, 7e-3, 0.0, 1.9e-3), None);
        assert_eq!(pair(7e-3, 1e-3, 0.0, 1.0), None);
        assert_eq!(pair(1e-3, 1e-3, 0.0, 1.0), None);
    }
}
