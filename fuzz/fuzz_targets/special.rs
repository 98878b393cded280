//! Special functions: probabilities stay probabilities, and every series ends.
#![no_main]

use _core::kernels::densities::incomplete_beta::beta_tails;
use _core::kernels::densities::incomplete_gamma::gamma_tails;
use _core::kernels::densities::normal_tail::{log_normal_cdf, skew_normal_tails};
use _core::kernels::densities::stirling::{digamma, log_beta};
use _core::kernels::f_tail::f_tail;
use _core::kernels::special::{ln_gamma, normal_cdf, normal_quantile};
use libfuzzer_sys::fuzz_target;
use steelyard_fuzz::Words;

/// Rounding of logarithms near 0, which both tails have in turn.
const ROUNDING: f64 = 1e-9;

fuzz_target!(|data: &[u8]| {
    let mut words = Words::new(data);
    for _ in 0..words.length(64) {
        let (x, first, second) = (words.number(), words.number(), words.number());
        let cdf = normal_cdf(x);
        assert_eq!(cdf.is_nan(), x.is_nan());
        assert!(
            cdf.is_nan() || (0.0..=1.0).contains(&cdf),
            "normal_cdf({x:e}) = {cdf:e}"
        );
        let log_cdf = log_normal_cdf(x);
        assert!(
            x.is_nan() || log_cdf <= 0.0,
            "log_normal_cdf({x:e}) = {log_cdf:e}"
        );
        let quantile = normal_quantile(x);
        assert_eq!(
            quantile.is_nan(),
            !(0.0..=1.0).contains(&x),
            "normal_quantile({x:e})"
        );
        assert_eq!(
            ln_gamma(x).is_nan(),
            x.is_nan() || x < 0.0,
            "ln_gamma({x:e})"
        );
        let _ = (digamma(x), log_beta(first, second));
        let tail = f_tail(x, first, second);
        assert!(
            tail.is_nan() || (0.0..=1.0).contains(&tail),
            "f_tail({x:e}, {first:e}, {second:e}) = {tail:e}"
        );
        wild_tails(x, first, second);
        tame_tails(&mut words);
    }
});

/// Arguments outside the ranges that callers keep to: no panic, no endless loop.
fn wild_tails(x: f64, first: f64, second: f64) {
    let _ = gamma_tails(first, x);
    let _ = beta_tails(first, second, x, 1.0 - x);
    let _ = skew_normal_tails(x, first);
}

fn tame_tails(words: &mut Words<'_>) {
    let mut shape = || 1e-2 + words.share() * 10.0_f64.powi(i32::from(words.byte() % 5));
    let (a, b) = (shape(), shape());
    let (x, slant) = (words.share(), 20.0 * words.share() - 10.0);
    let gamma = gamma_tails(a, 2.0 * a * x);
    complementary(
        gamma[0],
        gamma[1],
        &format!("gamma_tails({a:e}, {:e})", 2.0 * a * x),
    );
    let beta = beta_tails(a, b, x, 1.0 - x);
    complementary(
        beta[0],
        beta[1],
        &format!("beta_tails({a:e}, {b:e}, {x:e})"),
    );
    let z = 16.0 * x - 8.0;
    let (lower, upper) = skew_normal_tails(z, slant);
    complementary(
        lower,
        upper,
        &format!("skew_normal_tails({z:e}, {slant:e})"),
    );
}

/// Logarithms of two probabilities that add up to one.
fn complementary(lower: f64, upper: f64, of: &str) {
    assert!(
        lower <= ROUNDING && upper <= ROUNDING,
        "{of}: {lower:e}, {upper:e}"
    );
    let total = lower.exp() + upper.exp();
    assert!((total - 1.0).abs() < ROUNDING, "{of}: {lower:e}, {upper:e}");
}
