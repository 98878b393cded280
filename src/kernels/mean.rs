//! Weighted means, and the mean square that serves draws without time order.

use super::ordered::sum_by;

/// `Σ_s w_s f_s` for weights `w` on the natural scale; both of shape `(n,)`.
///
/// A draw of weight 0 is left out altogether, so that an infinite or undefined `f_s` there does no
/// harm. `w` is used as it is: it should sum to 1.
pub fn weighted_mean(f: &[f64], w: &[f64]) -> f64 {
    sum_by(f.len().min(w.len()), |s| {
        if w[s] == 0.0 { 0.0 } else { w[s] * f[s] }
    })
}

/// Arithmetic mean of `z`, shape `(n,)`: exact for constant `z`, NaN without entries.
pub fn mean(z: &[f64]) -> f64 {
    let count = z.len() as f64;
    let rough = sum_by(z.len(), |s| z[s] / count);
    // The second pass takes out the rounding of the first: a mean far from 0 keeps its last digits,
    // and the mean of a constant is that constant. Without entries it is 0/0.
    rough + sum_by(z.len(), |s| z[s] - rough) / count
}

/// `Σ_s (z_s − z̄)² / n`, shape `(n,)`: the long-run variance of independent draws, with `1/n` so
/// that uniform weights give the plain variance of the draws themselves.
///
/// Constant `z` gives exactly 0; no entry, NaN or an infinite entry gives NaN.
pub fn mean_square(z: &[f64]) -> f64 {
    let centre = mean(z);
    if !centre.is_finite() {
        return f64::NAN;
    }
    sum_by(z.len(), |s| (z[s] - centre) * (z[s] - centre)) / z.len() as f64
}
