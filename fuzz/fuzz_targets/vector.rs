//! Exponentials and logarithms of whole slices against those of the standard library.
#![no_main]

use _core::kernels::vector::exp::{LEAST, MOST, exp_slice};
use _core::kernels::vector::ln::{is_ordinary, ln_slice};
use libfuzzer_sys::fuzz_target;
use steelyard_fuzz::{Words, close};

/// Four units in the last place: twice what both sides may be off together.
const ULPS: f64 = 4.0 * f64::EPSILON;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    let count = words.length(512);
    let x = words.numbers(count);
    let mut powers = x.clone();
    exp_slice(&mut powers);
    for (&x, &power) in x.iter().zip(&powers) {
        if x < LEAST {
            assert_eq!(power, 0.0, "exp({x:e})");
        } else if x <= MOST {
            assert!(close(power, x.exp(), ULPS), "exp({x:e}) = {power:e}");
        } else {
            assert!(x > MOST || power.is_nan(), "exp(NaN) = {power:e}");
        }
    }
    let mut logs = vec![7.0; count];
    ln_slice(&x, &mut logs);
    for (&x, &log) in x.iter().zip(&logs) {
        if is_ordinary(x) {
            assert!(close(log, x.ln(), ULPS), "ln({x:e}) = {log:e}");
        }
    }
});
