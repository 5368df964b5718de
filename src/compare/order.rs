//! The order that a ladder of runs shows, as far as it can be seen.

/// One run of a ladder.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Rung {
    /// Its step, or its error setting.
    pub setting: f64,
    /// Its worst error.
    pub error: f64,
    /// What the printed digits resolve there.
    pub resolution: f64,
    /// Largest exact value.
    pub peak: f64,
    /// Number of rows, for what rounding can have added up to.
    pub rows: u64,
    /// What the rounding of the latest time stamp moves the exact value at most.
    pub clock: f64,
}

/// Two neighbouring rungs and the order between them.
///
/// # Formula
/// `ln(E1/E2) / ln(h1/h2)`; the interval has each error at either end of what
/// resolution and rounding leave open.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pair {
    /// Settings, the coarser first.
    pub settings: (f64, f64),
    /// The order.
    pub order: f64,
    /// Its least value.
    pub low: f64,
    /// Its greatest value.
    pub high: f64,
}

/// What can be seen of the order.
#[derive(Clone, Debug, PartialEq)]
pub enum Sight {
    /// Pairs from the coarsest to the finest, and how many of the finest agree.
    Pairs {
        /// At least one.
        pairs: Vec<Pair>,
        /// From one to all.
        agreeing: usize,
        /// Rungs whose errors count.
        usable: usize,
        /// Even the finest error is too large for its order to have settled.
        large: bool,
    },
    /// Every rung is at rounding level: there is no order to see.
    ExactForThisCase,
    /// Fewer than two rungs count; the reason in words.
    TooFew(String),
}

/// An error must stand this many times above its doubt to count; a quarter of that
/// serves where it leaves fewer than two rungs.
const CLEAR: [f64; 2] = [10.0, 2.5];
/// Errors above this fraction of the peak are not yet those of small steps.
const LARGE: f64 = 0.1;
/// Steps of neighbouring runs must differ by this factor ([roache-1998] gives 1.1).
const LEAST_RATIO: f64 = 1.09;
/// Rounding can add up to this fraction of the peak over many steps.
const ADDED_UP: f64 = 1e-9;
/// Orders that differ by less agree (common practice, no source; `[celik-2008]` ask for
/// judgement).
const AGREEMENT: f64 = 0.15;

impl Rung {
    /// What rounding may have done to a run: a few eps of the peak, and up to 4 eps for
    /// each row, at most 4000, where the code adds up its time (seen on libraries at
    /// fixed step, printed in full).
    pub fn rounding(&self) -> f64 {
        let steps = (4.0 * self.rows as f64).min(4000.0);
        // The clock is read off anew in every row, or runs wrong more and more.
        let clock = self.clock * (4.0 + (self.rows as f64).min(1000.0) / 4.0);
        f64::EPSILON * self.peak * (16.0 + steps) + clock
    }

    fn doubt(&self) -> f64 {
        self.resolution + self.rounding()
    }

    fn is_clear(&self, factor: f64) -> bool {
        self.error >= factor * self.doubt()
    }

    fn is_below_the_solution(&self) -> bool {
        self.error.is_finite() && self.error < 0.5 * self.peak
    }
}

/// What a ladder shows; the rungs may come in any order.
pub fn observe(rungs: &[Rung]) -> Sight {
    let mut rungs = rungs.to_vec();
    rungs.sort_by(|a, b| b.setting.total_cmp(&a.setting));
    if rungs.len() < 2 {
        return Sight::TooFew("an order needs at least two runs with different steps".to_owned());
    }
    if let Some(pair) = rungs
        .windows(2)
        .find(|pair| pair[0].setting == pair[1].setting)
    {
        return Sight::TooFew(format!("two runs have the step {}", pair[0].setting));
    }
    let close = |pair: &&[Rung]| pair[0].setting < LEAST_RATIO * pair[1].setting;
    if let Some(pair) = rungs.windows(2).find(close) {
        let (coarse, fine) = (pair[0].setting, pair[1].setting);
        return Sight::TooFew(format!(
            "the steps {coarse} and {fine} are too close to each other"
        ));
    }
    // Resolution does not count here: what is hidden by few digits is not exact.
    if rungs
        .iter()
        .all(|rung| rung.error <= 2.0 * rung.rounding() && rung.resolution <= rung.rounding())
    {
        return Sight::ExactForThisCase;
    }
    let usable = |factor: f64| -> Vec<Rung> {
        let counts = |rung: &&Rung| rung.is_clear(factor) && rung.is_below_the_solution();
        let mut usable: Vec<Rung> = rungs.iter().filter(counts).copied().collect();
        // Tiny errors that grow as the step shrinks are rounding that has added up over
        // the steps, even where it exceeds what is usual.
        while let [.., coarse, fine] = usable[..]
            && fine.error >= coarse.error
            && fine.error < ADDED_UP * fine.peak
        {
            usable.pop();
        }
        usable
    };
    let all_tiny = rungs.iter().all(|rung| rung.error < ADDED_UP * rung.peak);
    let falls = |two: &[Rung]| two[1].error < 0.8 * two[0].error;
    let in_full = rungs.iter().all(|rung| rung.resolution <= rung.rounding());
    if all_tiny && in_full && !rungs.windows(2).any(falls) {
        return Sight::ExactForThisCase;
    }
    let clear = CLEAR
        .iter()
        .map(|&factor| usable(factor))
        .find(|usable| usable.len() >= 2);
    let Some(usable) = clear else {
        return Sight::TooFew(why_too_few(&rungs));
    };
    let pairs: Vec<Pair> = usable
        .windows(2)
        .map(|pair| between(&pair[0], &pair[1]))
        .collect();
    let agreeing = agreeing(&pairs);
    let large = usable
        .last()
        .is_some_and(|rung| rung.error > LARGE * rung.peak);
    Sight::Pairs {
        pairs,
        agreeing,
        usable: usable.len(),
        large,
    }
}

/// How many of the finest pairs agree.
pub fn agreeing(pairs: &[Pair]) -> usize {
    let mut agreeing = 1;
    while agreeing < pairs.len() {
        let finer = &pairs[pairs.len() - agreeing];
        let coarser = &pairs[pairs.len() - agreeing - 1];
        let overlap = finer.low <= coarser.high && coarser.low <= finer.high;
        if !overlap && (finer.order - coarser.order).abs() > AGREEMENT {
            break;
        }
        agreeing += 1;
    }
    agreeing
}

fn why_too_few(rungs: &[Rung]) -> String {
    let count = |test: &dyn Fn(&Rung) -> bool| rungs.iter().filter(|rung| test(rung)).count();
    let coarse = count(&|rung| !rung.is_clear(CLEAR[1]) && rung.resolution > rung.rounding());
    let rounded = count(&|rung| !rung.is_clear(CLEAR[1]) && rung.resolution <= rung.rounding());
    let large = count(&|rung| !rung.is_below_the_solution());
    let mut reasons = Vec::new();
    for (count, what) in [
        (coarse, "hidden by the printed digits"),
        (rounded, "at rounding level"),
        (large, "above half the peak of the channel"),
    ] {
        if count > 0 {
            reasons.push(format!("{count} of {} errors {what}", rungs.len()));
        }
    }
    reasons.join(", ")
}

fn between(coarse: &Rung, fine: &Rung) -> Pair {
    let ratio = (coarse.setting / fine.setting).ln();
    let slope = |a: f64, b: f64| (a / b).ln() / ratio;
    let (coarse_doubt, fine_doubt) = (coarse.doubt(), fine.doubt());
    Pair {
        settings: (coarse.setting, fine.setting),
        order: slope(coarse.error, fine.error),
        low: slope(coarse.error - coarse_doubt, fine.error + fine_doubt),
        high: slope(coarse.error + coarse_doubt, fine.error - fine_doubt),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    impl Pair {
        /// Of a halved setting, with so much doubt to either side.
        pub(crate) fn around(order: f64, half: f64) -> Pair {
            Pair {
                settings: (2.0, 1.0),
                order,
                low: order - half,
                high: order + half,
            }
        }
    }

    fn ladder(errors: &[f64]) -> Vec<Rung> {
        let rung = |(k, &error): (usize, &f64)| Rung {
            setting: 0.1 / 2f64.powi(k as i32),
            error,
            resolution: 1e-17,
            peak: 1.0,
            rows: 10 << k,
            clock: 0.0,
        };
        errors.iter().enumerate().map(rung).collect()
    }

    fn finest(sight: Sight) -> (f64, usize) {
        match sight {
            Sight::Pairs {
                pairs, agreeing, ..
            } => (pairs.last().unwrap().order, agreeing),
            other => panic!("{other:?}"),
        }
    }

    // Burden, Faires, Numerical Analysis: the problem of tables 5.1 and 5.8; errors at
    // t = 2 and orders recomputed, entry OR05 of published-checks.md (D).
    #[test]
    fn orders_of_a_worked_example() {
        let euler = [0.43968745, 0.24197192, 0.12746574, 0.065495054, 0.033207654];
        let mut rungs = ladder(&euler);
        for rung in &mut rungs {
            rung.peak = 5.3;
        }
        let Sight::Pairs {
            pairs,
            agreeing,
            usable,
            ..
        } = observe(&rungs)
        else {
            panic!()
        };
        assert_eq!((agreeing, usable), (4, 5));
        for (pair, expected) in pairs
            .iter()
            .zip([0.8616387, 0.9247301, 0.9606517, 0.9798702])
        {
            assert!((pair.order - expected).abs() < 1e-6, "{pair:?}");
        }
    }

    #[test]
    fn rungs_at_rounding_level_do_not_count() {
        let (order, agreeing) = finest(observe(&ladder(&[1e-4, 6.25e-6, 3.9e-7, 3e-15, 4e-15])));
        assert!((order - 4.0).abs() < 0.01);
        assert_eq!(agreeing, 2);
        assert_eq!(
            observe(&ladder(&[1e-15, 3e-15, 2e-15])),
            Sight::ExactForThisCase
        );
        let sight = observe(&ladder(&[1e-5, 3e-15, 2e-15]));
        assert_eq!(
            sight,
            Sight::TooFew("2 of 3 errors at rounding level".to_owned())
        );
    }

    #[test]
    fn rounding_that_has_added_up_shows_no_order() {
        assert_eq!(
            observe(&ladder(&[2e-12, 5e-12, 1.1e-11, 2e-11])),
            Sight::ExactForThisCase
        );
        let (order, _) = finest(observe(&ladder(&[1e-7, 6.25e-9, 4e-10, 9e-10])));
        assert!((order - 4.0).abs() < 0.05, "{order}");
    }

    #[test]
    fn coarse_digits_widen_the_interval_and_then_hide_the_order() {
        let mut rungs = ladder(&[1e-2, 5e-3, 2.5e-3]);
        rungs.iter_mut().for_each(|rung| rung.resolution = 5e-4);
        let Sight::Pairs { pairs, .. } = observe(&rungs) else {
            panic!()
        };
        assert!(pairs[0].low < 0.85 && pairs[0].high > 1.15);
        rungs.iter_mut().for_each(|rung| rung.resolution = 5e-2);
        let sight = observe(&rungs);
        assert_eq!(
            sight,
            Sight::TooFew("3 of 3 errors hidden by the printed digits".to_owned())
        );
        // Small errors under coarse digits are hidden, not exact.
        rungs.iter_mut().for_each(|rung| rung.error = 1e-16);
        assert!(matches!(observe(&rungs), Sight::TooFew(_)));
    }

    #[test]
    fn unstable_rungs_and_equal_steps_are_left_out_or_refused() {
        let (order, _) = finest(observe(&ladder(&[1e9, 3.0, 1e-2, 2.5e-3])));
        assert!((order - 2.0).abs() < 1e-3);
        let mut rungs = ladder(&[1e-2, 5e-3]);
        rungs[1].setting = rungs[0].setting;
        assert_eq!(
            observe(&rungs),
            Sight::TooFew("two runs have the step 0.1".to_owned())
        );
        assert!(matches!(observe(&rungs[..1]), Sight::TooFew(_)));
    }

    #[test]
    fn what_rounding_may_have_done_grows_with_rows_and_clock() {
        let rounding = |rows: u64, peak: f64, clock: f64| {
            let rung = Rung {
                setting: 0.1,
                error: 0.0,
                resolution: 0.0,
                peak,
                rows,
                clock,
            };
            rung.rounding() / f64::EPSILON
        };
        // Sixteen and four for each row, for a thousand of them at most.
        assert_eq!(rounding(0, 2.0, 0.0), 32.0);
        assert_eq!(rounding(10, 2.0, 0.0), 112.0);
        assert_eq!(rounding(1000, 1.0, 0.0), 4016.0);
        assert_eq!(rounding(5000, 1.0, 0.0), 4016.0);
        // The clock four times and a quarter for each row, likewise.
        let eps = f64::EPSILON;
        assert_eq!(rounding(8, 0.0, eps), 6.0);
        assert_eq!(rounding(1000, 0.0, eps), 254.0);
        assert_eq!(rounding(5000, 0.0, eps), 254.0);
    }

    #[test]
    fn pairs_agree_where_they_overlap_or_are_near() {
        let pair = Pair::around;
        assert_eq!(agreeing(&[pair(1.0, 0.0)]), 1);
        assert_eq!(agreeing(&[pair(1.0, 0.0), pair(1.14, 0.0)]), 2);
        assert_eq!(agreeing(&[pair(1.0, 0.0), pair(1.16, 0.0)]), 1);
        assert_eq!(agreeing(&[pair(1.16, 0.0), pair(1.0, 0.0)]), 1);
        for [coarser, finer] in [[1.0, 2.0], [2.0, 1.0]] {
            assert_eq!(agreeing(&[pair(coarser, 0.6), pair(finer, 0.6)]), 2);
            assert_eq!(agreeing(&[pair(coarser, 0.4), pair(finer, 0.4)]), 1);
            assert_eq!(agreeing(&[pair(coarser, 0.9), pair(finer, 0.2)]), 2);
        }
        // From the finest on, up to the first that does not.
        let orders = [1.0, 1.5, 1.9, 2.0, 2.0].map(|order| pair(order, 0.0));
        assert_eq!(agreeing(&orders), 3);
    }

    #[test]
    fn rungs_count_between_their_doubt_and_half_the_peak() {
        let few = |errors: &[f64]| match observe(&ladder(errors)) {
            Sight::TooFew(why) => why,
            other => panic!("{other:?}"),
        };
        assert_eq!(
            few(&[0.51, 0.1]),
            "1 of 2 errors above half the peak of the channel"
        );
        assert_eq!(
            few(&[0.5, 0.1]),
            "1 of 2 errors above half the peak of the channel"
        );
        assert_eq!(finest(observe(&ladder(&[0.49, 0.1]))).1, 1);
        assert_eq!(
            few(&[f64::INFINITY, 0.1]),
            "1 of 2 errors above half the peak of the channel"
        );
        // Larger than a tenth of the peak the finest error is not yet that of a small step.
        let large = |fine: f64| match observe(&ladder(&[0.4, fine])) {
            Sight::Pairs { large, .. } => large,
            other => panic!("{other:?}"),
        };
        assert!(large(0.11) && !large(0.09) && !large(0.1));
        // Ten times their doubt, or two and a half where that leaves fewer than two.
        let rungs = |doubt: f64| {
            let mut rungs = ladder(&[4e-2, 2e-2, 1e-2]);
            rungs.iter_mut().for_each(|rung| rung.resolution = doubt);
            match observe(&rungs) {
                Sight::Pairs { usable, .. } => usable,
                _ => 0,
            }
        };
        assert_eq!(
            [0.9e-3, 1.1e-3, 2.1e-3, 7.9e-3, 8.1e-3].map(rungs),
            [3, 2, 3, 2, 0]
        );
        // Steps nine in a hundred apart.
        let close = |ratio: f64| {
            let mut rungs = ladder(&[2e-2, 1e-2]);
            rungs[0].setting = ratio * rungs[1].setting;
            observe(&rungs)
        };
        assert!(matches!(close(1.095), Sight::Pairs { .. }));
        let text = "the steps 0.05425 and 0.05 are too close to each other".to_owned();
        assert_eq!(close(1.085), Sight::TooFew(text));
    }
}
