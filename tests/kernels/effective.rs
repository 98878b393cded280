use _core::kernels::effective::{effective_size, entropy_size, largest_share};
use _core::kernels::log_sum::maximum;
use proptest::prelude::*;

use super::support::{close, fixed, log_weights};

/// Normalised weights on the natural scale, by the definition.
fn weights(x: &[f64]) -> Vec<f64> {
    let largest = maximum(x);
    let raw: Vec<f64> = x.iter().map(|entry| (entry - largest).exp()).collect();
    let total: f64 = raw.iter().sum();
    raw.iter().map(|weight| weight / total).collect()
}

proptest! {
    #![proptest_config(fixed(500))]

    // 1e-12: the twin adds up to 600 terms one by one.
    #[test]
    fn sizes_follow_their_definitions(x in log_weights(600)) {
        prop_assume!(maximum(&x) > f64::NEG_INFINITY);
        let w = weights(&x);
        let squares: f64 = w.iter().map(|w| w * w).sum();
        let entropy: f64 = w.iter().filter(|&&w| w > 0.0).map(|w| -w * w.ln()).sum();
        prop_assert!(close(effective_size(&x), 1.0 / squares, 1e-12));
        prop_assert!(close(entropy_size(&x), entropy.exp(), 1e-12));
        prop_assert!(close(largest_share(&x), w.iter().copied().fold(0.0, f64::max), 1e-13));
    }

    #[test]
    fn sizes_lie_between_one_and_the_number_of_draws(x in log_weights(300)) {
        prop_assume!(maximum(&x) > f64::NEG_INFINITY);
        let (plain, entropy) = (effective_size(&x), entropy_size(&x));
        // Rounding of a sum of at most 300 terms.
        let slack = 1.0 + 1e-13;
        prop_assert!(1.0 <= plain * slack && plain <= entropy * slack);
        prop_assert!(entropy <= x.len() as f64 * slack);
        prop_assert!(1.0 / largest_share(&x) <= plain * slack);
    }
}

#[test]
fn equal_weights_are_worth_all_draws() {
    let x = [-1e5; 64];
    assert_eq!(effective_size(&x), 64.0);
    assert!(close(entropy_size(&x), 64.0, 1e-15));
    assert_eq!(largest_share(&x), 1.0 / 64.0);
}

#[test]
fn weights_far_below_zero_do_not_underflow() {
    let x = [-1e5, -1e5 - 1000.0, f64::NEG_INFINITY];
    assert_eq!(effective_size(&x), 1.0);
    assert_eq!(entropy_size(&x), 1.0);
    assert_eq!(largest_share(&x), 1.0);
}

#[test]
fn without_weight_there_is_no_effective_draw_and_nan_stays_nan() {
    for none in [&[][..], &[f64::NEG_INFINITY; 2][..]] {
        assert_eq!(effective_size(none), 0.0);
        assert_eq!(entropy_size(none), 0.0);
        assert_eq!(largest_share(none), 0.0);
    }
    for bad in [[0.0, f64::NAN], [0.0, f64::INFINITY]] {
        assert!(effective_size(&bad).is_nan());
        assert!(entropy_size(&bad).is_nan());
        assert!(largest_share(&bad).is_nan());
    }
}
