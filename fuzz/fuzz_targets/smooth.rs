//! Pareto fits, smoothing, and tail shapes.
#![no_main]

use _core::kernels::log_sum::log_sum_exp;
use _core::kernels::pareto;
use _core::kernels::signed_tail::signed_tail_shape;
use _core::kernels::smooth::{smooth, tail_shape};
use libfuzzer_sys::fuzz_target;
use steelyard_fuzz::{Words, close};

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let wild = words.flag();
    let efficiency = if wild {
        words.number()
    } else {
        1.0 / (1.0 + words.share() * 99.0)
    };
    let count = words.length(4096);
    let x = if wild {
        words.numbers(count)
    } else {
        words.log_weights(count)
    };
    fitted(&x);
    both_sides(&x, efficiency);
    smoothed(&x, efficiency);
});

fn fitted(x: &[f64]) {
    let fit = pareto::fit(x);
    assert!(fit.shape != f64::INFINITY);
    if fit.shape.is_finite() {
        assert!(fit.scale >= 0.0, "{fit:?}");
    }
    // Exceedances near the largest double have a scale beyond it.
    if fit.shape.is_finite() && fit.scale.is_finite() {
        let quantiles = [0.0, 0.25, 0.5, 0.99].map(|p| fit.quantile(p));
        assert!(quantiles.is_sorted(), "{quantiles:?} of {fit:?}");
    }
}

fn both_sides(x: &[f64], efficiency: f64) {
    let shape = signed_tail_shape(x, efficiency);
    assert_eq!(shape.is_nan(), x.iter().any(|entry| !entry.is_finite()));
    let mirrored: Vec<f64> = x.iter().map(|entry| -entry).collect();
    assert!(close(shape, signed_tail_shape(&mirrored, efficiency), 0.0));
}

fn smoothed(x: &[f64], efficiency: f64) {
    let mut out = vec![7.0; x.len()];
    let shape = smooth(x, efficiency, &mut out);
    assert!(close(shape, tail_shape(x, efficiency), 0.0));
    if x.iter()
        .any(|entry| entry.is_nan() || *entry == f64::INFINITY)
    {
        assert!(shape.is_nan() && out.iter().all(|entry| entry.is_nan()));
        return;
    }
    assert!(!shape.is_nan());
    let largest = x.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if largest == f64::NEG_INFINITY {
        assert!(out.iter().all(|&entry| entry == f64::NEG_INFINITY));
        return;
    }
    // 1e-9: rounding of a sum of at most 4096 terms.
    assert!(log_sum_exp(&out).abs() < 1e-9);
    for (&before, &after) in x.iter().zip(&out) {
        // A weight of zero stays one, and one that counts is not lost.
        assert!(after <= 1e-9 && (before > f64::NEG_INFINITY || after == f64::NEG_INFINITY));
        assert!(
            before < largest || after > f64::NEG_INFINITY,
            "the largest weight became zero"
        );
    }
}
