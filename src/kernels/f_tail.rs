//! Upper tail of the F distribution.

use statrs::function::beta::checked_beta_reg;

/// `P(X > f)` for `X` distributed as F with `first` and `second` degrees of freedom, natural scale.
///
/// `I_z(second/2, first/2)` at `z = second / (second + first f)`, the regularised incomplete beta
/// function (DLMF 8.17). 1 for `f ≤ 0`, 0 for `f = +inf`; NaN for NaN or degrees of freedom that
/// are not positive and finite.
pub fn f_tail(f: f64, first: f64, second: f64) -> f64 {
    let usable = |d: f64| d > 0.0 && d.is_finite();
    if f.is_nan() || !usable(first) || !usable(second) {
        return f64::NAN;
    }
    if f <= 0.0 {
        return 1.0;
    }
    if f == f64::INFINITY {
        return 0.0;
    }
    let z = second / (second + first * f);
    let tail = checked_beta_reg(0.5 * second, 0.5 * first, z.clamp(0.0, 1.0)).unwrap_or(f64::NAN);
    // The continued fraction can end some roundings outside.
    tail.clamp(0.0, 1.0)
}
