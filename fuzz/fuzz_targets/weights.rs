//! Sums, sizes and shares of log weights.
#![no_main]

use _core::kernels::effective::{effective_size, entropy_size, largest_share};
use _core::kernels::log_sum::{log_sum_exp, normalise};
use libfuzzer_sys::fuzz_target;
use steelyard_fuzz::{Words, close};

/// Rounding of sums of at most 4096 terms.
const ROUNDING: f64 = 1e-9;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let wild = words.flag();
    let count = words.length(4096);
    let x = if wild {
        words.numbers(count)
    } else {
        words.log_weights(count)
    };
    let mut out = vec![7.0; count];
    let log_sum = normalise(&x, &mut out);
    assert!(close(log_sum, log_sum_exp(&x), 0.0));
    let sizes = [effective_size(&x), entropy_size(&x), largest_share(&x)];
    if x.iter()
        .any(|entry| entry.is_nan() || *entry == f64::INFINITY)
    {
        assert!(sizes.iter().all(|size| size.is_nan()), "{sizes:?}");
        return;
    }
    if x.iter().all(|&entry| entry == f64::NEG_INFINITY) {
        assert_eq!(sizes, [0.0; 3]);
        assert_eq!(log_sum, f64::NEG_INFINITY);
        assert!(out.iter().all(|&entry| entry == f64::NEG_INFINITY));
        return;
    }
    let [size, entropy, share] = sizes;
    let most = count as f64 * (1.0 + ROUNDING);
    assert!(1.0 - ROUNDING <= size && size <= entropy * (1.0 + ROUNDING) && entropy <= most);
    assert!(1.0 / most <= share && share <= 1.0);
    assert!(log_sum_exp(&out).abs() < ROUNDING);
    for (&before, &after) in x.iter().zip(&out) {
        assert!(after <= ROUNDING);
        assert!(before > f64::NEG_INFINITY || after == f64::NEG_INFINITY);
    }
});
