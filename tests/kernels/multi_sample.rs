use _core::kernels::multi_sample::{Solution, multi_sample};
use _core::kernels::ordered::{Interrupt, set_threads};
use _core::kernels::positive::solve;
use ndarray::Array2;
use proptest::prelude::*;

use super::support::{Stream, assert_close, close, fixed};

fn solved(log_q: &Array2<f64>, counts: &[f64], sizes: &[f64], start: &[f64]) -> Solution {
    multi_sample(
        log_q.view(),
        counts,
        sizes,
        start,
        true,
        &Interrupt::never(),
    )
    .unwrap()
}

/// The equation itself, again and again, in plain arithmetic.
fn twin(log_q: &Array2<f64>, counts: &[f64], sizes: &[f64]) -> Vec<f64> {
    let mut f = vec![0.0; sizes.len()];
    for _ in 0..20_000 {
        let mut next = vec![0.0; f.len()];
        for (row, count) in log_q.rows().into_iter().zip(counts) {
            let mixture: f64 = (0..f.len()).map(|l| sizes[l] * (f[l] + row[l]).exp()).sum();
            for (next, log_q) in next.iter_mut().zip(row) {
                *next += count * log_q.exp() / mixture;
            }
        }
        for (f, next) in f.iter_mut().zip(&next) {
            *f = -next.ln();
        }
        let first = f[0];
        f.iter_mut().for_each(|f| *f -= first);
    }
    f
}

/// Draws of normal densities with random centres, and what each counts.
fn wells(seed: u64, fits: usize, draws: usize) -> (Array2<f64>, Vec<f64>, Vec<f64>) {
    let mut stream = Stream::new(seed);
    let centres: Vec<f64> = (0..fits).map(|_| stream.normal()).collect();
    let shares: Vec<f64> = (0..fits).map(|_| 0.2 + 0.8 * stream.uniform()).collect();
    let x: Vec<f64> = (0..fits * draws)
        .map(|s| centres[s / draws] + stream.normal())
        .collect();
    let log_q = Array2::from_shape_fn((x.len(), fits), |(s, k)| {
        -0.5 * (x[s] - centres[k]).powi(2) + k as f64
    });
    let counts = (0..x.len()).map(|s| shares[s / draws]).collect();
    let sizes = shares.iter().map(|share| share * draws as f64).collect();
    (log_q, counts, sizes)
}

proptest! {
    #![proptest_config(fixed(12))]

    // 1e-8: the twin converges linearly.
    #[test]
    fn constants_solve_the_equation(seed: u64, fits in 1..5_usize, draws in 20..60_usize) {
        let (log_q, counts, sizes) = wells(seed, fits, draws);
        let found = solved(&log_q, &counts, &sizes, &vec![0.0; fits]);
        assert_close(&found.constants, &twin(&log_q, &counts, &sizes), 1e-8);
        for (k, size) in sizes.iter().enumerate() {
            let sum: f64 = counts.iter().zip(found.shares.column(k)).map(|(c, p)| c * p).sum();
            prop_assert!(close(sum / size, 1.0, 1e-10), "{sum} {size}");
        }
        for (s, row) in log_q.rows().into_iter().enumerate() {
            let f = &found.constants;
            let mixture: f64 = (0..fits).map(|l| sizes[l] * (f[l] + row[l]).exp()).sum();
            prop_assert!(close(found.log_mixture[s], mixture.ln(), 1e-12));
        }
    }

    // 1e-9: the last step is below 1e-7, and the one after it about its square.
    #[test]
    fn where_the_search_begins_does_not_matter(seed: u64, far in -2000.0..2000.0_f64) {
        let (log_q, counts, sizes) = wells(seed, 3, 50);
        let near = solved(&log_q, &counts, &sizes, &[0.0; 3]);
        let start = [0.0, far, -0.3 * far];
        assert_close(&solved(&log_q, &counts, &sizes, &start).constants, &near.constants, 1e-9);
    }

    // 1e-9: a system of condition below 1e4.
    #[test]
    fn positive_systems_are_solved(seed: u64, size in 1..12_usize) {
        let mut stream = Stream::new(seed);
        let half = Array2::from_shape_simple_fn((size, size), || stream.normal());
        let matrix = half.dot(&half.t()) + Array2::<f64>::eye(size);
        let x: Vec<f64> = (0..size).map(|_| stream.normal()).collect();
        let b = matrix.dot(&ndarray::arr1(&x)).to_vec();
        assert_close(&solve(matrix.as_slice().unwrap(), &b), &x, 1e-9);
    }
}

/// Shirts & Chodera's equation on fifteen draws of three harmonic wells, solved at 30 digits.
#[test]
fn fifteen_draws_of_three_wells() {
    let x = [
        -1.2, -0.4, 0.1, 0.6, 1.5, -0.3, 0.2, 0.5, 0.9, 1.4, 0.4, 0.8, 1.0, 1.3, 1.7,
    ];
    let wells = [(1.0, 0.0), (2.0, 0.5), (4.0, 1.0)];
    let log_q = Array2::from_shape_fn((15, 3), |(s, k)| {
        -0.5 * wells[k].0 * f64::powi(x[s] - wells[k].1, 2)
    });
    let found = solved(&log_q, &[1.0; 15], &[5.0; 3], &[0.0; 3]);
    let expected = [0.0, 0.238_935_025_542_408, 0.514_010_266_823_190_6];
    assert_close(&found.constants, &expected, 1e-13);
}

#[test]
fn bits_do_not_depend_on_the_number_of_threads() {
    let (log_q, counts, sizes) = wells(3, 4, 5000);
    let mut bits = Vec::new();
    for threads in [1, 2, 7] {
        set_threads(threads).unwrap();
        let found = solved(&log_q, &counts, &sizes, &[0.0; 4]);
        bits.push((found.constants, found.log_mixture, found.shares));
    }
    set_threads(2).unwrap();
    assert!(bits.windows(2).all(|pair| pair[0] == pair[1]));
}

#[test]
fn fits_without_a_draw_in_common_stay_where_they_begin() {
    let none = f64::NEG_INFINITY;
    let log_q = ndarray::arr2(&[[0.0, none], [0.1, none], [none, 0.0], [none, 0.2]]);
    let found = solved(&log_q, &[1.0; 4], &[2.0; 2], &[0.0, 3.0]);
    assert_eq!(found.constants, [0.0, 3.0]);
    assert_eq!(found.shares.column(0).to_vec(), [1.0, 1.0, 0.0, 0.0]);
    // A draw that no density knows has no shares and moves nothing.
    let log_q = ndarray::arr2(&[[0.0, -1.0], [none, none], [-1.0, 0.0]]);
    let found = solved(&log_q, &[1.0; 3], &[1.0; 2], &[0.0; 2]);
    assert_close(&found.constants, &[0.0, 0.0], 1e-12);
    assert_eq!(found.shares.row(1).to_vec(), [0.0, 0.0]);
    assert_eq!(found.log_mixture[1], none);
}

#[test]
fn arguments_that_do_not_fit_are_refused() {
    let log_q = Array2::zeros((4, 2));
    let refused = |counts: &[f64], sizes: &[f64], start: &[f64]| {
        multi_sample(
            log_q.view(),
            counts,
            sizes,
            start,
            true,
            &Interrupt::never(),
        )
        .is_err()
    };
    assert!(refused(&[1.0; 3], &[2.0; 2], &[0.0; 2]));
    assert!(refused(&[1.0; 4], &[2.0; 3], &[0.0; 2]));
    assert!(refused(&[1.0; 4], &[2.0; 2], &[0.0; 1]));
    assert!(refused(&[1.0; 4], &[2.0, 0.0], &[0.0; 2]));
    let empty = Array2::zeros((0, 2));
    let none = Interrupt::never();
    assert!(multi_sample(empty.view(), &[], &[1.0; 2], &[0.0; 2], true, &none).is_err());
}
