//! How many draws a set of weights is worth. Nothing here needs normalised weights.

use super::reductions::slice_sums;
use super::weight_sums::form;

/// Effective sample size `(Σ r)² / Σ r²` of the weights `r = exp(x − max x)`, shape `(n,)`.
///
/// Lies in `[1, n]`. Without a positive weight it is 0; NaN or `+inf` in `x` gives NaN.
///
/// Source: Kish (1965), *Survey Sampling*; Kong, Liu & Wong (1994), JASA 89, 278-288.
pub fn effective_size(x: &[f64]) -> f64 {
    slice_sums::<{ form::SQUARES }>(x).effective_size()
}

/// Entropy form `exp(−Σ w log w)` of the effective sample size, `w = exp(x) / Σ exp(x)`, with
/// `0 · log 0 = 0`; `x` holds log weights, shape `(n,)`.
///
/// Lies in `[1, n]` and is never below [`effective_size`]. Without a positive weight it is 0; NaN
/// or `+inf` in `x` gives NaN.
pub fn entropy_size(x: &[f64]) -> f64 {
    slice_sums::<{ form::SPREAD }>(x).entropy_size()
}

/// Largest normalised weight, `1 / Σ exp(x − max x)`, of log weights `x`, shape `(n,)`; natural
/// scale, 0 without a positive weight, NaN if `x` holds NaN or `+inf`.
pub fn largest_share(x: &[f64]) -> f64 {
    slice_sums::<{ form::TOTAL }>(x).largest_share()
}
