use _core::kernels::effective::{effective_size, entropy_size, largest_share};
use _core::kernels::log_sum::{log_sum_exp, normalise};
use _core::kernels::ordered::Interrupt;
use _core::kernels::weigh::weigh;
use proptest::prelude::*;

use super::support::{close, fixed, log_weights};

proptest! {
    #![proptest_config(fixed(300))]

    // 1e-14: all sums are formed in one order, whichever of them are formed; an exponential is off
    // by at most 1.1 units in the last place, and subnormal weights by their last digit.
    #[test]
    fn one_pass_says_what_each_kernel_says(x in log_weights(6000)) {
        let (mut out, mut twin) = (vec![0.0; x.len()], vec![0.0; x.len()]);
        let sums = weigh(&x, &mut out, &Interrupt::never()).unwrap();
        normalise(&x, &mut twin);
        for (weight, log) in out.iter().zip(&twin) {
            prop_assert!((weight - log.exp()).abs() <= 3e-16 * log.exp() + 1e-323);
        }
        prop_assert!(close(sums.log_sum(), log_sum_exp(&x), 1e-14));
        prop_assert!(close(sums.effective_size(), effective_size(&x), 1e-14));
        prop_assert!(close(sums.entropy_size(), entropy_size(&x), 1e-14));
        prop_assert!(close(sums.largest_share(), largest_share(&x), 1e-14));
    }
}

#[test]
fn subnormal_weights_are_not_lost() {
    let mut out = [0.0; 3];
    weigh(&[0.0, -720.0, -800.0], &mut out, &Interrupt::never()).unwrap();
    assert_eq!(out, [1.0, (-720.0_f64).exp(), 0.0]);
    assert!(out[1] > 0.0);
}

#[test]
fn bad_entries_show_in_the_sum_and_lengths_must_agree() {
    let found = |x: &[f64]| weigh(x, &mut vec![0.0; x.len()], &Interrupt::never()).unwrap();
    assert!(found(&[0.0, f64::NAN]).log_sum().is_nan());
    assert_eq!(found(&[0.0, f64::INFINITY]).log_sum(), f64::INFINITY);
    assert_eq!(found(&[f64::NEG_INFINITY; 3]).log_sum(), f64::NEG_INFINITY);
    assert!(weigh(&[0.0], &mut [0.0, 0.0], &Interrupt::never()).is_err());
}
