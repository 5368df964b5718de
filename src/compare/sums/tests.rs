//! Sums against their definitions, written out over all rows; groups and parts against one row
//! after the other.

use super::*;

/// Numbers from 0 to 1, the same in every run.
struct Dice(u64);

impl Dice {
    fn roll(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(6364136223846793005).wrapping_add(1);
        (self.0 >> 11) as f64 / 2f64.powi(53)
    }

    fn below(&mut self, count: usize) -> usize {
        (self.roll() * count as f64) as usize
    }
}

/// Rows of one channel, list by list.
#[derive(Clone, Default)]
struct Table {
    times: Vec<Double>,
    blurs: Vec<f64>,
    written: Vec<f64>,
    exact: Vec<f64>,
    signed: Vec<f64>,
    doubts: [Vec<f64>; 2],
    in_full: bool,
    /// The size of everything.
    scale: f64,
}

/// The most by which `exp(-t/9) sin(2t)` changes in a unit of time.
const RATE: f64 = 2.2;

impl Table {
    /// Errors of many sizes on a damped oscillation, in any unit; some rows repeat their time, with
    /// a jump, or their value, some values were rounded to zero, some errors are equal.
    fn random(dice: &mut Dice, rows: usize) -> Table {
        let mut table = Table {
            in_full: dice.roll() < 0.3,
            scale: 10f64.powi(dice.below(7) as i32 - 3),
            ..Table::default()
        };
        let (spread, coarse) = (4.0 * dice.roll(), 10f64.powf(-4.0 * dice.roll()));
        let (tied, infinite) = (dice.roll() < 0.3, dice.roll() < 0.1);
        let (mut time, mut offset) = (3.0 * dice.roll(), 0.0);
        for _ in 0..rows {
            if dice.roll() < 0.9 {
                time += 0.01 + 0.2 * dice.roll();
            } else {
                offset += table.scale * (dice.roll() - 0.5);
            }
            let exact = table.scale * (-time / 9.0).exp() * (2.0 * time).sin() + offset;
            let error = (dice.roll() - 0.5) * 10f64.powf(-spread * dice.roll() - 1.0);
            let error = match tied {
                true => (64.0 * error).round() / 64.0,
                false => error,
            };
            let signed = match dice.below(50) {
                0 if infinite => f64::INFINITY,
                _ => table.scale * error,
            };
            let written = match dice.below(20) {
                0 => 0.0,
                1 => table.written.last().copied().unwrap_or(1.0),
                _ => exact + signed,
            };
            let full = half_ulp(written) * (1.0 + dice.roll());
            let pattern = if table.in_full {
                full
            } else {
                table.scale * coarse * if tied { 1.0 } else { dice.roll() }
            };
            table.times.push(Double::from(time));
            table.blurs.push(1e-3 * dice.roll());
            table.written.push(written);
            table.exact.push(exact);
            table.signed.push(signed);
            table.doubts[0].push(pattern);
            table.doubts[1].push(full);
        }
        table
    }

    fn printed(&self) -> Resolution {
        match self.in_full {
            true => Resolution::Full,
            false => Resolution::Significant(5),
        }
    }

    fn rows(&self, from: usize, to: usize) -> Rows<'_> {
        let spans = self.times[from..to].windows(2);
        let spans = spans.map(|two| two[1].to_f64() - two[0].to_f64());
        Rows {
            times: &self.times[from..to],
            blurs: &self.blurs[from..to],
            written: &self.written[from..to],
            exact: &self.exact[from..to],
            signed: &self.signed[from..to],
            doubts: [&self.doubts[0][from..to], &self.doubts[1][from..to]],
            shortest: spans.fold(f64::INFINITY, f64::min),
            rate: self.scale * RATE * (-self.times[from].to_f64() / 9.0).exp(),
            in_full: self.in_full,
        }
    }

    /// Row by row.
    fn sums(&self, limit: Limit, from: usize, to: usize) -> Sums {
        let mut sums = Sums::new(limit);
        let rows = self.rows(from, to);
        for row in 0..to - from {
            sums.add(rows.mark(row), rows.exact[row], 0.0);
        }
        sums
    }

    fn sums_of_groups(&self, dice: &mut Dice, limit: Limit) -> Sums {
        let mut sums = Sums::new(limit);
        let mut from = 0;
        while from < self.times.len() {
            let to = (from + 1 + dice.below(12)).min(self.times.len());
            sums.add_group(&self.rows(from, to), 0.0);
            from = to;
        }
        sums
    }
}

/// Where rows tie in their errors, they tie in their limits as well.
fn limit(dice: &mut Dice, table: &Table) -> Limit {
    let tied = table.doubts[0].windows(2).all(|two| two[0] == two[1]);
    Limit {
        absolute: table.scale * 10f64.powf(-3.0 * dice.roll() - 1.0),
        relative: if tied { 0.0 } else { 0.3 * dice.roll() },
        of_peak: dice.roll() < 0.3,
    }
}

/// Equal to the last bit, but for the order in which squares were added.
fn assert_same(found: &Deviation, expected: &Deviation) {
    let apart = (found.rms - expected.rms).abs();
    assert!(apart <= 1e-14 * expected.rms || found.rms == expected.rms);
    let mut found = found.clone();
    found.rms = expected.rms;
    assert_eq!(format!("{found:?}"), format!("{expected:?}"));
}

#[test]
fn sums_are_what_their_definitions_say() {
    let mut dice = Dice(1);
    for _ in 0..200 {
        let table = Table::random(&mut dice, 40);
        let limit = limit(&mut dice, &table);
        let found = table.sums(limit, 0, 40).conclude(table.printed());
        let place = usize::from(found.resolution != table.printed());
        let errors: Vec<f64> = table.signed.iter().map(|e| e.abs()).collect();
        let doubts = &table.doubts[place];
        let largest = |score: &dyn Fn(usize) -> f64| (0..40).map(score).fold(f64::MIN, f64::max);
        let peak = largest(&|row| table.exact[row].abs());
        let allowed = |row: usize| match limit.of_peak {
            true => limit.absolute + limit.relative * peak,
            false => limit.absolute + limit.relative * table.exact[row].abs(),
        };
        assert_eq!(found.rows, 40);
        assert_eq!(found.worst, largest(&|row| errors[row]));
        assert_eq!(found.peak, peak);
        assert_eq!(found.end, table.signed[39]);
        let mean = errors.iter().map(|e| e * e).sum::<f64>() / 40.0;
        assert!((found.rms - mean.sqrt()).abs() <= 1e-14 * found.rms || found.rms == mean.sqrt());
        let steepest = (1..40)
            .map(|row| {
                let span = table.times[row].to_f64() - table.times[row - 1].to_f64();
                let change = (table.exact[row] - table.exact[row - 1]).abs();
                if span > 0.0 { change / span } else { 0.0 }
            })
            .fold(0.0, f64::max);
        assert_eq!(found.steepest, steepest);
        let worst = (0..40).find(|&row| errors[row] == found.worst).unwrap();
        assert_eq!(found.worst_at, table.times[worst].to_f64());
        assert_eq!(found.worst_resolution, doubts[worst]);
        assert_eq!(found.worst_limit, allowed(worst));
        let near = |found: f64, expected: f64| {
            (found - expected).abs() <= 1e-15 * table.scale || found == expected
        };
        let certain = largest(&|row| errors[row] + doubts[row] - allowed(row));
        let broken = largest(&|row| errors[row] - doubts[row] - allowed(row));
        assert!(near(found.margin.certain, certain), "{found:?}");
        assert!(near(found.margin.broken, broken), "{found:?}");
        let used = largest(&|row| errors[row] / allowed(row));
        assert_eq!(found.margin.used, used);
        let decisive = (0..40)
            .find(|&row| errors[row] / allowed(row) == used)
            .unwrap();
        assert_eq!(found.decisive.at, table.times[decisive].to_f64());
        assert_eq!(found.decisive.limit, allowed(decisive));
        let most = |row: usize| (errors[row] + doubts[row]) / allowed(row);
        let doubtful = (0..40).find(|&row| most(row) == largest(&most)).unwrap();
        assert_eq!(found.doubtful.at, table.times[doubtful].to_f64());
        assert_eq!(found.doubtful.error, errors[doubtful]);
        assert_eq!(found.doubtful.resolution, doubts[doubtful]);
        assert_eq!(found.doubtful.limit, allowed(doubtful));
        let sizes = table.written.iter().map(|value| value.abs());
        let ends = [
            sizes.clone().fold(f64::INFINITY, f64::min),
            sizes.fold(0.0, f64::max),
        ];
        assert_eq!(table.sums(limit, 0, 40).sizes(), ends);
    }
}

#[test]
fn a_straight_line_is_as_steep_in_groups_as_row_by_row() {
    let mut dice = Dice(5);
    for _ in 0..100 {
        // The rounding of times and values makes some pairs steeper than the rate.
        let mut table = Table::random(&mut dice, 200);
        table.times = (0..200)
            .map(|k| Double::from(0.01 * f64::from(k)))
            .collect();
        table.exact = table.times.iter().map(|time| time.to_f64() / 3.0).collect();
        let limit = limit(&mut dice, &table);
        let single = table.sums(limit, 0, 200);
        let mut groups = Sums::new(limit);
        for from in (0..200).step_by(10) {
            let rate = 1.0 / 3.0;
            groups.add_group(
                &Rows {
                    rate,
                    ..table.rows(from, from + 10)
                },
                0.0,
            );
        }
        assert_eq!(groups.steepest, single.steepest);
    }
}

#[test]
fn a_plot_shows_the_part_of_the_limit_that_an_error_uses() {
    let mark = Mark {
        time: Double::from(1.0),
        blur: 0.0,
        written: 4.5,
        signed: -0.5,
        size: 5.0,
        doubts: [0.0, 0.0],
    };
    let limit = |of_peak: bool| Limit {
        absolute: 1.0,
        relative: 0.2,
        of_peak,
    };
    assert_eq!(mark.share_of(&limit(false)), 0.25);
    // The peak is not known yet, and the same for all rows.
    assert_eq!(mark.share_of(&limit(true)), 0.5);
}

#[test]
fn exact_values_are_sharp_unless_their_bound_touches_a_digit_or_a_decision() {
    // A limit, a resolution and a bound of the exact values, in terms of the errors.
    const UNIT: f64 = 4.0;
    let is_sharp = |allowed: f64, resolution: f64, bound: f64| {
        let limit = Limit {
            absolute: UNIT * allowed,
            relative: 0.0,
            of_peak: false,
        };
        let mut sums = Sums::new(limit);
        for row in 0..4 {
            let mark = Mark {
                time: Double::from(f64::from(row)),
                blur: 0.0,
                written: 7.0,
                signed: UNIT,
                size: 6.0,
                doubts: [UNIT * resolution; 2],
            };
            sums.add(mark, 6.0, UNIT * bound);
        }
        sums.is_sharp(Resolution::Significant(3))
    };
    assert!(is_sharp(2.0, 0.25, 1e-6));
    // Known to a part in 2048 of the root mean square of the errors, no less.
    assert!(is_sharp(2.0, 0.25, 1.0 / 2048.0));
    assert!(!is_sharp(2.0, 0.25, 1.01 / 2048.0));
    // `1 + 0.25 - limit` and `1 - 0.25 - limit` have to stay clear of nought by twice the bound.
    for allowed in [1.25, 0.75] {
        assert!(!is_sharp(allowed, 0.25, 1e-6));
        for side in [-1.0, 1.0] {
            assert!(!is_sharp(allowed + side * 1.9e-6, 0.25, 1e-6));
            assert!(is_sharp(allowed + side * 2.1e-6, 0.25, 1e-6));
        }
    }
    // Nor may the largest error be about a tenth of the resolution.
    assert!(!is_sharp(30.0, 10.0, 1e-6));
    assert!(!is_sharp(30.0, 10.09, 1e-6));
    assert!(is_sharp(30.0, 10.2, 1e-6) && is_sharp(30.0, 9.8, 1e-6));
}

#[test]
fn groups_give_what_one_row_after_the_other_gives() {
    let mut dice = Dice(2);
    for _ in 0..400 {
        let table = Table::random(&mut dice, 200);
        let limit = limit(&mut dice, &table);
        let single = table.sums(limit, 0, 200);
        let groups = table.sums_of_groups(&mut dice, limit);
        assert_eq!(groups.telling, single.telling);
        assert_eq!(groups.ends, single.ends);
        assert_eq!(groups.written, single.written);
        assert_eq!(groups.largest_in_units, single.largest_in_units);
        if !table.in_full {
            assert_eq!(groups.sizes(), single.sizes());
            // Either assumption on the digits may turn out to be the right one.
            assert_eq!(groups.margin(1), single.margin(1));
        }
        assert_same(
            &groups.conclude(table.printed()),
            &single.conclude(table.printed()),
        );
    }
}

#[test]
fn parts_joined_give_what_the_whole_gives() {
    let mut dice = Dice(3);
    for _ in 0..400 {
        let table = Table::random(&mut dice, 60);
        let limit = limit(&mut dice, &table);
        let whole = table.sums(limit, 0, 60);
        let (one, two) = (dice.below(30), 30 + dice.below(30));
        let mut joined = table.sums(limit, 0, one);
        joined.join(&table.sums(limit, one, two));
        joined.join(&table.sums(limit, two, 60));
        assert_eq!(joined.telling, whole.telling);
        assert_eq!(joined.ends, whole.ends);
        assert_eq!(joined.written, whole.written);
        assert_eq!(joined.sizes(), whole.sizes());
        assert_eq!(joined.largest_in_units, whole.largest_in_units);
        assert_same(
            &joined.conclude(table.printed()),
            &whole.conclude(table.printed()),
        );
    }
}

#[test]
fn digits_are_refuted_by_eight_rows_far_below_their_resolution() {
    let printed = Resolution::Decimals(2);
    let conclude = |rows: usize, error: f64, same: bool| {
        let mut sums = Sums::new(Limit {
            absolute: 1.0,
            relative: 0.0,
            of_peak: false,
        });
        for row in 0..rows {
            let written = if same { 1.0 } else { 1.0 + row as f64 };
            let mark = Mark {
                time: Double::from(row as f64),
                blur: 0.0,
                written,
                signed: error,
                size: written,
                doubts: [5e-3, half_ulp(written)],
            };
            sums.add(mark, written, 0.0);
        }
        sums.conclude(printed).resolution
    };
    // A tenth of half a unit of two decimals is 5e-4.
    assert_eq!(conclude(8, 4.9e-4, false), Resolution::Full);
    assert_eq!(conclude(7, 4.9e-4, false), printed);
    assert_eq!(conclude(8, 5.1e-4, false), printed);
    // Exactly a tenth is not below it.
    assert_eq!(conclude(8, 5e-4, false), printed);
    // Values that stay where they are tell once.
    assert_eq!(conclude(80, 4.9e-4, true), printed);
}
