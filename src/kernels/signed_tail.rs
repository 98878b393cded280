//! The tail shape of influence values, which may be heavy on either side.

use super::pareto::FEWEST;
use super::tail::{Scale, fit_tail, tail_length};

/// Tail shape of influence values `z`, shape `(n,)`, natural scale, any sign.
///
/// Each sign is a side of its own: its absolute values above 0, `S` of them, with a tail of
/// `M = ⌈min(S/5, 3 √(S/e))⌉`, fitted as weights are in [`super::smooth::smooth`]. A side with
/// fewer than 5 tail draws does not count; a constant tail has `−inf`. The result is the larger
/// shape of the sides that count, `−inf` if none does. It does not change with the unit of `z`.
/// NaN or an infinite entry gives NaN.
pub fn signed_tail_shape(z: &[f64], relative_efficiency: f64) -> f64 {
    // A product with 0 is 0 but for NaN and infinities; the loop has no branch.
    if z.iter().fold(0.0, |any, entry| any + 0.0 * entry).is_nan() {
        return f64::NAN;
    }
    let upper = side_shape(z, 1.0, relative_efficiency);
    let lower = side_shape(z, -1.0, relative_efficiency);
    upper.max(lower)
}

fn side_shape(z: &[f64], sign: f64, relative_efficiency: f64) -> f64 {
    let side = z.iter().map(|entry| usize::from(sign * entry > 0.0)).sum();
    let length = tail_length(side, relative_efficiency);
    if length < FEWEST {
        return f64::NEG_INFINITY;
    }
    // At most a fifth of the side, so that the cut-off has the same sign.
    fit_tail(z, length, Scale::Natural(sign)).shape()
}
