use _core::kernels::mean::{mean, mean_square, weighted_mean};
use proptest::prelude::*;

use super::support::{close, fixed, values, weighted};

proptest! {
    #![proptest_config(fixed(300))]

    // 1e-12: the twin adds up to 600 terms one by one.
    #[test]
    fn the_mean_square_is_the_mean_of_squares_about_the_mean(z in values(600)) {
        let count = z.len() as f64;
        let centre: f64 = z.iter().sum::<f64>() / count;
        let square: f64 = z.iter().map(|z| (z - centre).powi(2)).sum::<f64>() / count;
        prop_assert!(close(mean(&z), centre, 1e-12));
        prop_assert!(close(mean_square(&z), square, 1e-12));
    }

    #[test]
    fn the_weighted_mean_is_the_sum_of_products((f, w) in weighted(600)) {
        let total: f64 = f.iter().zip(&w).map(|(f, w)| f * w).sum();
        prop_assert!(close(weighted_mean(&f, &w), total, 1e-11));
    }
}

#[test]
fn draws_without_weight_do_no_harm() {
    let f = [f64::NAN, 2.0, f64::INFINITY, f64::NEG_INFINITY];
    assert_eq!(weighted_mean(&f, &[0.0, 1.0, 0.0, -0.0]), 2.0);
    assert!(weighted_mean(&f, &[0.1, 0.9, 0.0, 0.0]).is_nan());
}

proptest! {
    #![proptest_config(fixed(500))]

    #[test]
    fn the_mean_of_a_constant_is_that_constant(
        level in prop_oneof![-1e3..1e3, -1e-300..1e-300, -1e300..1e300], count in 1..5000_usize
    ) {
        let z = vec![level; count];
        prop_assert_eq!(mean(&z), level);
        prop_assert_eq!(mean_square(&z), 0.0);
    }
}

#[test]
fn a_constant_series_has_no_spread_at_all() {
    // 0.1 is not exact, and 7 of them do not add up to 0.7.
    assert_eq!(mean(&[0.1; 7]), 0.1);
    assert_eq!(mean_square(&[0.1; 7]), 0.0);
}

#[test]
fn a_mean_far_from_zero_keeps_its_spread() {
    let z: Vec<f64> = (0..1000).map(|s| 1e8 + f64::from(s % 2)).collect();
    assert_eq!(mean_square(&z), 0.25);
}

#[test]
fn nothing_and_bad_content_give_nan() {
    assert!(mean_square(&[]).is_nan());
    assert!(mean_square(&[1.0, f64::NAN]).is_nan());
    assert!(mean_square(&[1.0, f64::INFINITY]).is_nan());
    assert_eq!(weighted_mean(&[], &[]), 0.0);
}
