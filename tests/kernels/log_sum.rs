use _core::kernels::log_sum::{log_sum_exp, maximum, normalise};
use proptest::prelude::*;

use super::support::{assert_close, close, fixed, log_weights};

/// The definition, with the offset taken off beforehand and the terms added from small to large.
fn twin(x: &[f64]) -> f64 {
    let offset = x
        .iter()
        .copied()
        .filter(|entry| entry.is_finite())
        .fold(f64::NEG_INFINITY, f64::max);
    if offset == f64::NEG_INFINITY {
        return offset;
    }
    let mut terms: Vec<f64> = x.iter().map(|entry| (entry - offset).exp()).collect();
    terms.sort_by(f64::total_cmp);
    offset + terms.iter().sum::<f64>().ln()
}

proptest! {
    #![proptest_config(fixed(500))]

    // 1e-14: a few roundings of a sum of at most 600 positive terms.
    #[test]
    fn the_log_sum_is_the_logarithm_of_the_sum(x in log_weights(600)) {
        prop_assert!(close(log_sum_exp(&x), twin(&x), 1e-14));
    }

    #[test]
    fn normalised_weights_add_up_to_one(x in log_weights(600)) {
        prop_assume!(maximum(&x) > f64::NEG_INFINITY);
        let mut out = vec![0.0; x.len()];
        let log_sum = normalise(&x, &mut out);
        prop_assert_eq!(log_sum.to_bits(), log_sum_exp(&x).to_bits());
        let total: f64 = out.iter().map(|entry| entry.exp()).sum();
        prop_assert!((total - 1.0).abs() < 1e-13, "{total}");
    }

    #[test]
    fn an_offset_that_is_exact_changes_no_digit_of_the_normalised_weights(
        x in prop::collection::vec(-512..512_i32, 1..200), offset in -1_000_000..1_000_000_i32
    ) {
        let plain: Vec<f64> = x.iter().map(|&entry| f64::from(entry) / 64.0).collect();
        let moved: Vec<f64> = plain.iter().map(|entry| entry + f64::from(offset)).collect();
        let (mut a, mut b) = (vec![0.0; x.len()], vec![0.0; x.len()]);
        normalise(&plain, &mut a);
        normalise(&moved, &mut b);
        prop_assert_eq!(a, b);
    }
}

#[test]
fn edges_of_the_log_sum_are_defined() {
    assert_eq!(log_sum_exp(&[]), f64::NEG_INFINITY);
    assert_eq!(log_sum_exp(&[f64::NEG_INFINITY; 3]), f64::NEG_INFINITY);
    assert_eq!(log_sum_exp(&[0.0, f64::INFINITY]), f64::INFINITY);
    assert!(log_sum_exp(&[f64::INFINITY, f64::NAN]).is_nan());
    assert!(log_sum_exp(&[f64::NAN; 2]).is_nan());
    assert_eq!(log_sum_exp(&[1e300]), 1e300);
}

#[test]
fn a_column_without_weight_stays_without_weight() {
    let mut out = [1.0, 2.0];
    assert_eq!(
        normalise(&[f64::NEG_INFINITY; 2], &mut out),
        f64::NEG_INFINITY
    );
    assert_eq!(out, [f64::NEG_INFINITY; 2]);
}

#[test]
fn one_draw_takes_all() {
    let mut out = [0.0; 3];
    normalise(&[-5000.0, 0.0, f64::NEG_INFINITY], &mut out);
    assert_close(&out, &[-5000.0, 0.0, f64::NEG_INFINITY], 0.0);
}
