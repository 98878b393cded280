use _core::kernels::error::KernelError;
use _core::kernels::influence::influence;
use _core::kernels::ordered::Interrupt;
use ndarray::Array2;
use proptest::prelude::*;

use super::support::{Stream, close, fixed};

fn found(loglik: &Array2<f64>, f: &Array2<f64>) -> Array2<f64> {
    let mut out = Array2::zeros((f.ncols(), loglik.ncols()));
    influence(loglik.view(), f.view(), out.view_mut(), &Interrupt::never()).unwrap();
    out
}

/// One deletion and one quantity at a time, on the natural scale.
fn twin(loglik: &Array2<f64>, f: &Array2<f64>, i: usize, p: usize) -> f64 {
    let draws = loglik.nrows();
    let (mut weights, mut weighted, mut plain) = (0.0, 0.0, 0.0);
    for s in 0..draws {
        let weight = (-loglik[[s, i]]).exp();
        weights += weight;
        weighted += weight * f[[s, p]];
        plain += f[[s, p]];
    }
    weighted / weights - plain / draws as f64
}

proptest! {
    #![proptest_config(fixed(100))]

    // 1e-11: the twin adds up to 200 terms one by one and subtracts two means.
    #[test]
    fn every_entry_is_the_shift_of_one_mean_by_one_deletion(
        draws in 1..200_usize, observations in 1..20_usize, quantities in 0..5_usize, seed: u64
    ) {
        let mut stream = Stream::new(seed);
        let loglik = Array2::from_shape_simple_fn((draws, observations), || 2.0 * stream.normal() - 5.0);
        let f = Array2::from_shape_simple_fn((draws, quantities), || stream.normal());
        let out = found(&loglik, &f);
        for ((p, i), &shift) in out.indexed_iter() {
            prop_assert!(close(shift, twin(&loglik, &f, i, p), 1e-11));
        }
    }
}

#[test]
fn an_observation_without_information_moves_nothing() {
    let mut stream = Stream::new(2);
    let f = Array2::from_shape_simple_fn((64, 2), || 1e6 + stream.normal());
    let out = found(&Array2::from_elem((64, 1), -1e5), &f);
    // The quantity is centred first: its offset of 1e6 leaves a rounding of 1e-10.
    assert!(out.iter().all(|shift| shift.abs() < 1e-9), "{out:?}");
}

#[test]
fn bad_content_stays_in_its_row_or_column() {
    let mut stream = Stream::new(2);
    let mut loglik = Array2::from_shape_simple_fn((30, 3), || stream.normal());
    let mut f = Array2::from_shape_simple_fn((30, 2), || stream.normal());
    loglik[[4, 1]] = f64::NEG_INFINITY;
    f[[9, 0]] = f64::NAN;
    let out = found(&loglik, &f);
    for ((p, i), shift) in out.indexed_iter() {
        assert_eq!(shift.is_nan(), p == 0 || i == 1, "{p} {i} {shift}");
    }
    // A draw that the observation rules in for certain has no weight without it, and no harm done.
    loglik[[4, 1]] = f64::INFINITY;
    assert!(found(&loglik, &f)[[1, 1]].is_finite());
}

#[test]
fn arrays_that_do_not_fit_are_refused() {
    let (loglik, f) = (Array2::<f64>::zeros((10, 3)), Array2::<f64>::zeros((9, 2)));
    let mut out = Array2::zeros((2, 3));
    let refused = influence(loglik.view(), f.view(), out.view_mut(), &Interrupt::never());
    assert_eq!(
        refused,
        Err(KernelError::Shape {
            argument: "f",
            expected: vec![10, 2],
            found: vec![9, 2]
        })
    );
    let f = Array2::<f64>::zeros((10, 4));
    let refused = influence(loglik.view(), f.view(), out.view_mut(), &Interrupt::never());
    assert_eq!(
        refused,
        Err(KernelError::Shape {
            argument: "out",
            expected: vec![4, 3],
            found: vec![2, 3]
        })
    );
}
