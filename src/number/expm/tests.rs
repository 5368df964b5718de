use super::*;
use crate::number::Quad;

fn matrix(rows: &[&[f64]]) -> Matrix<Double> {
    let mut matrix = Matrix::zero(rows.len());
    for (i, row) in rows.iter().enumerate() {
        for (j, &x) in row.iter().enumerate() {
            matrix[(i, j)] = Double::from(x);
        }
    }
    matrix
}

fn run<T: Real>(rows: &[&[f64]], start: &[f64], time: f64) -> (Vec<Double>, Vec<f64>) {
    let table = Propagator::<T>::new(&matrix(rows), time).unwrap();
    let mut flow = Flow::exact(start.iter().map(|&x| T::from_f64(x)).collect());
    table.advance(&mut flow, Double::from(time));
    let bound = table.bound(&flow);
    (flow.value.into_iter().map(Real::to_double).collect(), bound)
}

/// The bound holds against twice the precision, and is not absurdly wide.
fn check(rows: &[&[f64]], start: &[f64], time: f64, looseness: f64) {
    let (values, bounds) = run::<Double>(rows, start, time);
    let (better, better_bounds) = run::<Quad>(rows, start, time);
    let start_size = start.iter().map(|x| x.abs()).fold(0.0, f64::max);
    let size = better
        .iter()
        .map(|x| x.to_f64().abs())
        .fold(start_size, f64::max);
    for i in 0..values.len() {
        let gap = (values[i] - better[i]).abs().to_f64();
        assert!(
            gap <= bounds[i] + better_bounds[i],
            "entry {i}: {gap:e} > {:e}",
            bounds[i]
        );
        assert!(
            bounds[i] <= looseness * size,
            "entry {i}: bound {:e} of {size:e}",
            bounds[i]
        );
    }
}

#[test]
fn scalar_decay_is_the_exponential() {
    for time in [1e-12, 0.3, 1.0, 7.7, 300.0] {
        let (value, bound) = run::<Double>(&[&[-1.0]], &[1.0], time);
        let gap = (value[0] - Double::from(-time).exp()).abs().to_f64();
        assert!(gap <= bound[0] + 1e-31, "{time}: {gap:e}");
    }
}

#[test]
fn rotation_over_a_million_periods() {
    let rows: &[&[f64]] = &[&[0.0, 1.0], &[-1.0, 0.0]];
    let time = 6_283_185.0;
    let (value, _) = run::<Double>(rows, &[1.0, 0.0], time);
    let (sine, cosine) = Double::from(time).sin_cos();
    assert!((value[0] - cosine).abs().to_f64() < 1e-24);
    assert!((value[1] + sine).abs().to_f64() < 1e-24);
    check(rows, &[1.0, 0.0], time, 1e-18);
}

#[test]
fn bounds_hold_for_stiff_defective_and_non_normal_matrices() {
    check(
        &[&[-1e-6, 0.0, 0.0], &[1.0, -1.0, 0.0], &[0.0, 1e6, -1e6]],
        &[1.0, 0.0, 2.0],
        1e6,
        1e-14,
    );
    check(&[&[-1.0, 1.0], &[1.0, -1e6]], &[1.0, 1.0], 20.0, 1e-22);
    check(
        &[&[-0.5, 1.0, 0.0], &[0.0, -0.5, 1.0], &[0.0, 0.0, -0.5]],
        &[1.0, -2.0, 4.0],
        64.0,
        1e-12,
    );
    check(
        &[&[-1.0, 128.0, 16.0], &[0.0, -1.1, 128.0], &[0.0, 0.0, -1.2]],
        &[1.0, 1.0, 1.0],
        8.0,
        1e-24,
    );
    check(
        &[&[0.5, -3.0, 0.0], &[3.0, 0.5, 0.0], &[1.0, 0.0, 0.25]],
        &[1.0, 0.0, -0.5],
        100.0,
        1e-20,
    );
}

#[test]
fn two_steps_are_one_step() {
    let rows: &[&[f64]] = &[&[-0.2, 1.0], &[-9.0, -0.1]];
    let table = Propagator::<Double>::new(&matrix(rows), 10.0).unwrap();
    let start = || Flow::exact(vec![Double::from(1.0), Double::from(0.5)]);
    let mut once = start();
    table.advance(&mut once, Double::from(7.25));
    let mut twice = start();
    table.advance(&mut twice, Double::from(2.125));
    let step = table.tabulate(Double::from(5.125));
    table.step(&mut twice, &step);
    let bounds = (table.bound(&once), table.bound(&twice));
    for i in 0..2 {
        let gap = (once.value[i] - twice.value[i]).abs().to_f64();
        assert!(gap <= bounds.0[i] + bounds.1[i]);
        assert!(gap < 1e-29);
    }
}

#[test]
fn determinant_is_the_exponential_of_the_trace() {
    let rows: &[&[f64]] = &[&[-49.0, 24.0], &[-64.0, 31.0]];
    let (first, _) = run::<Double>(rows, &[1.0, 0.0], 0.5);
    let (second, _) = run::<Double>(rows, &[0.0, 1.0], 0.5);
    let determinant = first[0] * second[1] - first[1] * second[0];
    let gap = (determinant / Double::from(-9.0).exp() - Double::ONE).abs();
    assert!(gap.to_f64() < 1e-22, "{gap:?}");
}

#[test]
fn outside_the_domain_there_is_no_table() {
    assert!(Propagator::<Double>::new(&matrix(&[&[1e30]]), 1e10).is_none());
    assert!(Propagator::<Double>::new(&matrix(&[&[f64::NAN]]), 1.0).is_none());
    assert!(Propagator::<Double>::new(&matrix(&[&[-1.0]]), f64::INFINITY).is_none());
    // A pure integrator has no time scale of its own.
    let (value, _) = run::<Double>(&[&[0.0, 1.0], &[0.0, 0.0]], &[1.0, 2.0], 3.0);
    assert_eq!(value[0].to_f64(), 7.0);
}
