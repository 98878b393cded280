//! Pareto smoothing of the largest weights.

use super::log_sum::maximum;
use super::reductions::slice_sums;
use super::tail::{Scale, Tail, fit_tail, tail_length};
use super::weight_sums::form;

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
    let largest = maximum(x);
    if largest == f64::NEG_INFINITY {
        out.fill(f64::NEG_INFINITY);
        return f64::INFINITY;
    }
    if !largest.is_finite() {
        out.fill(f64::NAN);
        return f64::NAN;
    }
    let tail = tail_of(x, largest, relative_efficiency);
    for (target, entry) in out.iter_mut().zip(x) {
        *target = entry - largest;
    }
    let Tail::Fitted {
        ranked,
        cutoff,
        fit,
    } = &tail
    else {
        let (maximum, log_total) = slice_sums::<{ form::TOTAL }>(out).offsets();
        take_off(out, maximum, log_total);
        return tail.shape();
    };
    let smoothed = fit.log_quantiles(cutoff.exp(), ranked.len());
    // Body and tail are added up apart, so that no part is taken off again; and the smoothed
    // weights may all lie far below the raw maximum, so that the shift is found anew.
    for &(_, index) in ranked {
        out[index as usize] = f64::NEG_INFINITY;
    }
    let body = slice_sums::<{ form::TOTAL }>(out);
    let all = body.merge(slice_sums::<{ form::TOTAL }>(&smoothed));
    let (maximum, log_total) = all.offsets();
    take_off(out, maximum, log_total);
    for (&(_, index), value) in ranked.iter().zip(&smoothed) {
        out[index as usize] = (value - maximum) - log_total;
    }
    tail.shape()
}

fn take_off(out: &mut [f64], maximum: f64, log_total: f64) {
    for entry in out {
        *entry = (*entry - maximum) - log_total;
    }
}

/// Tail shape that [`smooth`] returns, without the smoothed weights.
pub fn tail_shape(x: &[f64], relative_efficiency: f64) -> f64 {
    let largest = maximum(x);
    if largest == f64::NEG_INFINITY {
        return f64::INFINITY;
    }
    if !largest.is_finite() {
        return f64::NAN;
    }
    tail_of(x, largest, relative_efficiency).shape()
}

/// The tail of `x`, whose maximum is finite.
fn tail_of(x: &[f64], largest: f64, relative_efficiency: f64) -> Tail {
    let length = tail_length(x.len(), relative_efficiency);
    let tail = fit_tail(x, length, Scale::Log(largest));
    match &tail {
        // Where the cut-off has weight every draw of the tail has.
        Tail::Fitted { cutoff, .. } if *cutoff > -700.0 => return tail,
        Tail::Constant => return tail,
        _ => {}
    }
    let positive = x.iter().filter(|&&x| (x - largest).exp() > 0.0).count();
    if positive > length {
        return tail;
    }
    fit_tail(x, positive.saturating_sub(1), Scale::Log(largest))
}
