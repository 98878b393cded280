//! Logarithms of tails of normal and skew-normal distributions.

use std::f64::consts::{FRAC_PI_2, LN_2, PI};

use super::stirling::{HALF_LN_2PI, log_complement};
use crate::kernels::special::normal_cdf;

/// Below this the asymptotic series for Mills' ratio is exact to the last bit.
const SERIES_BELOW: f64 = -20.0;

/// Terms of that series.
const TERMS: u32 = 10;

/// `log Φ(x)`.
///
/// Relative error against 60-digit arithmetic at 900 points from −1e9 to 37: at most 4e-16.
pub fn log_normal_cdf(x: f64) -> f64 {
    if x > 0.0 {
        return libm::log1p(-normal_cdf(-x));
    }
    if x >= SERIES_BELOW || x.is_nan() {
        return libm::log(normal_cdf(x));
    }
    if x == f64::NEG_INFINITY {
        return x;
    }
    // DLMF 7.12.1: Φ(x) = φ(x)/|x| (1 − 1/x² + 3/x⁴ − 15/x⁶ + …).
    let by_square = 1.0 / (x * x);
    let rest = (1..=TERMS).rev().fold(0.0, |rest, k| {
        -f64::from(2 * k - 1) * by_square * (1.0 + rest)
    });
    -0.5 * x * x - libm::log(-x) - HALF_LN_2PI + libm::log1p(rest)
}

/// `(log F(z), log(1 − F(z)))` of the standard skew-normal distribution.
///
/// Below 0, for a slant `α ≥ 0`, `F(z) = Φ(z) − 2T(z, α)` with Owen's function `T` cancels; what is
/// left of the integral that defines `T` is `(1/π)∫_α^∞ exp(−½z²(1 + t²))/(1 + t²) dt` (*derived*),
/// all of one sign. The other cases follow by `F(z; −α) = 2Φ(z) − F(z; α)` and reflection.
///
/// Relative error of both logarithms against 40-digit quadrature at 150 points, slants up to 1000:
/// at most 1.3e-13, and that at z = 1e-8; mostly some 1e-15.
pub fn skew_normal_tails(z: f64, slant: f64) -> (f64, f64) {
    if z.is_nan() || slant.is_nan() {
        return (f64::NAN, f64::NAN);
    }
    if z > 0.0 {
        let (lower, upper) = skew_normal_tails(-z, -slant);
        return (upper, lower);
    }
    if z == f64::NEG_INFINITY {
        return (z, 0.0);
    }
    let lower = if slant >= 0.0 {
        log_light_tail(-z, slant)
    } else {
        let whole = LN_2 + log_normal_cdf(z);
        whole + log_complement(log_light_tail(-z, -slant) - whole)
    };
    (lower, log_complement(lower))
}

/// `log (1/π)∫_α^∞ exp(−½h²(1 + t²))/(1 + t²) dt` for `h, α ≥ 0`.
fn log_light_tail(h: f64, slant: f64) -> f64 {
    if h == 0.0 {
        return libm::log(libm::atan2(1.0, slant) / PI);
    }
    if h == f64::INFINITY {
        return f64::NEG_INFINITY;
    }
    // With t = α + s the leading factor comes out and the rest falls over `width` of s.
    let square = 1.0 + slant * slant;
    let width = 1.0 / (h * (1.0 + h * slant));
    let rest = exp_sinh(|s| {
        let t = slant + s * width;
        libm::exp(-0.5 * h * h * s * width * (2.0 * slant + s * width)) / (1.0 + t * t)
    });
    -0.5 * h * h * square + libm::log(rest * width / PI)
}

/// `∫_0^∞ f(s) ds` by double-exponential quadrature (Takahasi & Mori 1974), `s = exp(½π sinh τ)`.
fn exp_sinh(f: impl Fn(f64) -> f64) -> f64 {
    const STEP: f64 = 1.0 / 32.0;
    const REACH: i32 = 138;
    (-REACH..=REACH)
        .map(|index| {
            let tau = f64::from(index) * STEP;
            let s = libm::exp(FRAC_PI_2 * libm::sinh(tau));
            f(s) * s * FRAC_PI_2 * libm::cosh(tau) * STEP
        })
        .filter(|term| term.is_finite())
        .sum()
}
