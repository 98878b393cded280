//! How many draws a set of weights is worth. Nothing here needs normalised weights.

use super::log_sum::maximum;
use super::ordered::{sum, sum_by};

/// Effective sample size `(Σ r)² / Σ r²` of the weights `r = exp(x − max x)`, shape `(n,)`.
///
/// Lies in `[1, n]`. Without a positive weight it is 0; NaN or `+inf` in `x` gives NaN.
///
/// Source: Kish (1965), *Survey Sampling*; Kong, Liu & Wong (1994), JASA 89, 278-288.
pub fn effective_size(x: &[f64]) -> f64 {
    let largest = maximum(x);
    if largest == f64::NEG_INFINITY {
        return 0.0;
    }
    let weights = raw_weights(x, largest);
    let total = sum(&weights);
    let squares = sum_by(weights.len(), |s| weights[s] * weights[s]);
    // The largest weight is 1 here, so that neither sum can underflow.
    total * total / squares
}

/// Entropy form `exp(−Σ w log w)` of the effective sample size, `w = exp(x) / Σ exp(x)`, with
/// `0 · log 0 = 0`; `x` holds log weights, shape `(n,)`.
///
/// Lies in `[1, n]` and is never below [`effective_size`]. Without a positive weight it is 0; NaN
/// or `+inf` in `x` gives NaN.
pub fn entropy_size(x: &[f64]) -> f64 {
    let largest = maximum(x);
    if largest == f64::NEG_INFINITY {
        return 0.0;
    }
    let weights = raw_weights(x, largest);
    let total = sum(&weights);
    // −Σ w log w = log Σ r − (Σ r log r) / Σ r, which needs no second logarithm per draw.
    let spread = sum_by(weights.len(), |s| {
        if weights[s] == 0.0 {
            0.0
        } else {
            weights[s] * (x[s] - largest)
        }
    });
    (total.ln() - spread / total).exp()
}

/// Largest normalised weight, `1 / Σ exp(x − max x)`, of log weights `x`, shape `(n,)`; natural
/// scale, 0 without a positive weight, NaN if `x` holds NaN or `+inf`.
pub fn largest_share(x: &[f64]) -> f64 {
    let largest = maximum(x);
    if largest == f64::NEG_INFINITY {
        return 0.0;
    }
    1.0 / sum_by(x.len(), |s| (x[s] - largest).exp())
}

fn raw_weights(x: &[f64], largest: f64) -> Vec<f64> {
    x.iter().map(|entry| (entry - largest).exp()).collect()
}
