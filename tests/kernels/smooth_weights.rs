use _core::kernels::ordered::Interrupt;
use _core::kernels::reductions::slice_sums;
use _core::kernels::smooth::smooth;
use _core::kernels::smooth_weights::{Weighed, smooth_weights};
use _core::kernels::weigh::weigh;
use _core::kernels::weight_sums::form;
use proptest::prelude::*;

use super::support::{close, fixed, log_weights};

/// Compares with the smoothed log weights: shapes to the last bit, for the same tail is fitted;
/// weights and sums to 1e-12, some thousand roundings of 1e-16 at most.
fn agrees(x: &[f64], efficiency: f64) -> Result<(), TestCaseError> {
    let never = Interrupt::never();
    let (mut raw, mut out, mut logs) = (vec![0.0; x.len()], vec![0.0; x.len()], vec![0.0; x.len()]);
    let sums = weigh(x, &mut raw, &never).unwrap();
    let of = Weighed { x, raw: &raw, sums };
    let (shape, sums) = smooth_weights(of, efficiency, &mut out, &never).unwrap();
    prop_assert_eq!(shape.to_bits(), smooth(x, efficiency, &mut logs).to_bits());
    for (weight, log) in out.iter().zip(&logs) {
        prop_assert!((weight - log.exp()).abs() <= 1e-12 * log.exp() + 1e-300);
    }
    let twin = slice_sums::<{ form::ALL }>(&logs);
    prop_assert!(close(sums.effective_size(), twin.effective_size(), 1e-12));
    prop_assert!(close(sums.entropy_size(), twin.entropy_size(), 1e-12));
    prop_assert!(close(sums.largest_share(), twin.largest_share(), 1e-12));
    Ok(())
}

proptest! {
    #![proptest_config(fixed(300))]

    #[test]
    fn they_are_the_exponentials_of_smoothed_log_weights(
        x in log_weights(6000),
        efficiency in 0.05..1.0_f64,
    ) {
        agrees(&x, efficiency)?;
    }

    // Steep enough for tails that hold everything, and for weights that vanish.
    #[test]
    fn however_steep_they_are(x in log_weights(2000), steepness in 1.0..300.0_f64) {
        let steep: Vec<f64> = x.iter().map(|x| steepness * x).collect();
        agrees(&steep, 1.0)?;
    }

    #[test]
    fn ties_at_the_cutoff_count_once(x in log_weights(2000)) {
        let tied: Vec<f64> = x.iter().map(|x| (2.0 * x).round()).collect();
        agrees(&tied, 1.0)?;
    }
}

#[test]
fn lengths_must_agree_and_no_weight_has_no_shape() {
    let never = Interrupt::never();
    let x = [f64::NEG_INFINITY; 3];
    let mut raw = [0.0; 3];
    let sums = weigh(&x, &mut raw, &never).unwrap();
    let of = Weighed {
        x: &x,
        raw: &raw,
        sums,
    };
    let mut out = [1.0; 3];
    let (shape, sums) = smooth_weights(of, 1.0, &mut out, &never).unwrap();
    assert_eq!((shape, sums.total, out), (f64::INFINITY, 0.0, [0.0; 3]));
    assert!(smooth_weights(of, 1.0, &mut [0.0], &never).is_err());
}
