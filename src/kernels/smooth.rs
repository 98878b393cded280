//! Pareto smoothing of the largest weights.

use super::log_sum::{maximum, normalise_in_place};
use super::tail::{Tail, fit_tail, tail_length};

/// Writes smoothed, normalised log weights into `out` and returns the tail shape `k`.
///
/// `x` holds log weights up to a constant, `out` log weights, both of shape `(n,)`;
/// `relative_efficiency` is that of the base draws for these weights, 1 for unordered draws.
///
/// The `M = ⌈min(n/5, 3 √(n/e))⌉` largest weights are replaced by `u + F⁻¹((z − ½)/M)`,
/// `z = 1..M`, in rank order and at most the largest raw weight; `u` is the next largest raw weight
/// and `F` the generalised Pareto distribution of [`super::pareto::fit`] with shrunk shape, fitted
/// to the exceedances over `u`. Weights are raw ones, `exp(x − max x)`.
///
/// Edges: a weight that is 0 on that scale is never in the tail and never the cut-off, so that `M`
/// is at most one below the number of positive weights; ties keep their input order; fewer than 5
/// tail draws are not smoothed and have shape `+inf`; a constant tail is not smoothed and has shape
/// `−inf`. An entry `−inf` stays `−inf`. NaN or `+inf` in `x` gives NaN throughout.
///
/// Source: Vehtari, Simpson, Gelman, Yao & Gabry (2024), JMLR 25.
pub fn smooth(x: &[f64], relative_efficiency: f64, out: &mut [f64]) -> f64 {
    let Some((shifted, tail)) = tail_of(x, relative_efficiency) else {
        out.fill(f64::NAN);
        return f64::NAN;
    };
    out.copy_from_slice(&shifted);
    if let Tail::Fitted {
        ranked,
        cutoff,
        fit,
    } = &tail
    {
        let base = cutoff.exp();
        let length = ranked.len() as f64;
        for (rank, &index) in ranked.iter().enumerate() {
            let quantile = fit.quantile((rank as f64 + 0.5) / length);
            out[index] = (base + quantile).min(1.0).ln();
        }
    }
    // The smoothed weights may all lie far below the raw maximum: the shift is found anew.
    normalise_in_place(out);
    tail.shape()
}

/// Tail shape that [`smooth`] returns, without the smoothed weights.
pub fn tail_shape(x: &[f64], relative_efficiency: f64) -> f64 {
    tail_of(x, relative_efficiency).map_or(f64::NAN, |(_, tail)| tail.shape())
}

/// `x − max x` and its tail; nothing when `x` holds NaN or `+inf`.
fn tail_of(x: &[f64], relative_efficiency: f64) -> Option<(Vec<f64>, Tail)> {
    let largest = maximum(x);
    if largest == f64::NEG_INFINITY {
        return Some((x.to_vec(), Tail::Short));
    }
    if !largest.is_finite() {
        return None;
    }
    let shifted: Vec<f64> = x.iter().map(|entry| entry - largest).collect();
    let positive = shifted.iter().filter(|&&entry| is_positive(entry)).count();
    let length = tail_length(x.len(), relative_efficiency).min(positive.saturating_sub(1));
    let tail = fit_tail(&shifted, length, f64::exp, difference);
    Some((shifted, tail))
}

/// Whether `exp(entry) > 0`, without an exponential for ordinary entries.
fn is_positive(entry: f64) -> bool {
    entry > -700.0 || entry.exp() > 0.0
}

/// `exp(value) − exp(cutoff)` for `cutoff ≤ value ≤ 0`.
fn difference(value: f64, cutoff: f64) -> f64 {
    let distance = value - cutoff;
    // Near the cut-off the difference of two exponentials cancels; far above it, from 710 on, the
    // other form is 0 times infinity.
    if distance < 0.5 {
        cutoff.exp() * distance.exp_m1()
    } else {
        value.exp() - cutoff.exp()
    }
}
