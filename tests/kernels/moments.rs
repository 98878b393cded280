use _core::kernels::mean::{contributions, weighted_mean, weighted_moments};
use _core::kernels::moments::{self, covariance, weighted_means};
use _core::kernels::ordered::Interrupt;
use ndarray::{Array2, ShapeBuilder};
use proptest::prelude::*;

use super::support::{Stream, close, fixed, weighted};

proptest! {
    #![proptest_config(fixed(200))]

    // 1e-12: sums of at most 200 terms.
    #[test]
    fn moments_are_sums_over_the_draws_with_weight((f, w) in weighted(200)) {
        let (mean, variance) = weighted_moments(&f, &w);
        let twin: f64 = f.iter().zip(&w).map(|(f, w)| f * w).sum();
        prop_assert!(close(mean, twin, 1e-12));
        prop_assert_eq!(mean.to_bits(), weighted_mean(&f, &w).to_bits());
        let twin: f64 = f.iter().zip(&w).map(|(f, w)| w * (f - mean).powi(2)).sum();
        prop_assert!(close(variance, twin, 1e-12));
    }

    #[test]
    fn covariances_are_those_of_the_pairs(rows in 1..100_usize, columns in 1..6_usize, seed: u64) {
        let mut stream = Stream::new(seed);
        let f = Array2::from_shape_simple_fn((rows, columns), || 5.0 + stream.normal());
        let mut w: Vec<f64> = (0..rows).map(|_| stream.uniform()).collect();
        let total: f64 = w.iter().sum();
        w.iter_mut().for_each(|w| *w /= total);
        let found = covariance(f.view(), &w, &Interrupt::never()).unwrap();
        let mean = |i: usize| -> f64 { (0..rows).map(|s| w[s] * f[(s, i)]).sum() };
        for ((i, j), &found) in found.indexed_iter() {
            let term = |s: usize| w[s] * (f[(s, i)] - mean(i)) * (f[(s, j)] - mean(j));
            let twin: f64 = (0..rows).map(term).sum();
            prop_assert!(close(found, twin, 1e-12), "{found} {twin}");
        }
    }

    // 1e-9: cubes of either sign cancel.
    #[test]
    fn contributions_are_draws_over_squared_skewness(seed: u64, length in 3..300_usize) {
        let mut stream = Stream::new(seed);
        let z: Vec<f64> = (0..length).map(|_| stream.normal().exp()).collect();
        let n = length as f64;
        let mean = z.iter().sum::<f64>() / n;
        let moment = |p: i32| z.iter().map(|z| (z - mean).powi(p)).sum::<f64>() / n;
        let skewness = moment(3) / moment(2).powf(1.5);
        let found = contributions(&z);
        prop_assert!(close(found / (n / skewness.powi(2)), 1.0, 1e-9), "{found}");
    }
}

#[test]
fn draws_without_weight_do_no_harm() {
    let f = [1.0, f64::INFINITY, 3.0, f64::NAN];
    let w = [0.5, 0.0, 0.5, 0.0];
    assert_eq!(weighted_moments(&f, &w), (2.0, 1.0));
    let columns = Array2::from_shape_fn((4, 2), |(s, i)| f[s] * (i + 1) as f64);
    let found = covariance(columns.view(), &w, &Interrupt::never()).unwrap();
    assert_eq!(found, ndarray::arr2(&[[1.0, 2.0], [2.0, 4.0]]));
    assert!(covariance(columns.view(), &[1.0], &Interrupt::never()).is_err());
}

#[test]
fn edges_of_the_contributions_are_defined() {
    assert_eq!(contributions(&[0.1; 9]), f64::INFINITY);
    assert_eq!(contributions(&[-1.0, 1.0]), f64::INFINITY);
    assert!(contributions(&[]).is_nan() && contributions(&[1.0, f64::NAN]).is_nan());
    // No power may overflow: one draw of n apart has n over the square of (n − 2)/√(n − 1).
    let mut z = [0.0; 5];
    z[2] = 1e300;
    assert!(close(contributions(&z), 5.0 * 4.0 / 9.0, 1e-12));
}

#[test]
fn moments_of_columns_have_the_bits_of_each_column() {
    // Lengths and widths around those of blocks, lines and groups of columns.
    for (rows, columns) in [(0, 3), (5, 1), (4096, 2), (4100, 66), (9001, 3)] {
        let mut stream = Stream::new(13);
        let f = Array2::from_shape_simple_fn((rows, columns), || stream.normal());
        let w: Vec<f64> = (0..rows)
            .map(|s| if s % 5 == 0 { 0.0 } else { stream.uniform() })
            .collect();
        let mut fortran = Array2::zeros((rows, columns).f());
        fortran.assign(&f);
        let never = Interrupt::never();
        for f in [f.view(), fortran.view()] {
            let means = weighted_means(f, &w, &never).unwrap();
            let both = moments::weighted_moments(f, &w, &never).unwrap();
            assert_eq!(both.0, means);
            for (index, column) in f.columns().into_iter().enumerate() {
                let expected = weighted_moments(&column.to_vec(), &w);
                assert_eq!((means[index], both.1[index]), expected, "{rows} {columns}");
            }
        }
    }
}
