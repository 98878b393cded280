//! Special functions of the standard normal distribution and of densities.

use std::f64::consts::{FRAC_1_SQRT_2, PI, SQRT_2};

use statrs::function::erf::erfc_inv;

/// `√½ − FRAC_1_SQRT_2`: what the rounded constant leaves out.
const FRAC_1_SQRT_2_REST: f64 = -4.833_646_656_726_457e-17;

/// Standard normal distribution function `Φ(x) = ½ erfc(−x/√2)`.
///
/// Relative error at most 4e-16 from `x = −37.5`, where `Φ` leaves the normal numbers, to 9,
/// measured against 60-digit arithmetic.
pub fn normal_cdf(x: f64) -> f64 {
    let scaled = -x * FRAC_1_SQRT_2;
    let value = libm::erfc(scaled);
    // erfc has the slope −2/√π exp(−y²): in the lower tail the last bit of y is worth 2y² bits of
    // the result, 10 of them at −26, so the rounding of y is put back.
    let rest = (-x).mul_add(FRAC_1_SQRT_2, -scaled) - x * FRAC_1_SQRT_2_REST;
    let slope = -2.0 / PI.sqrt() * (-scaled * scaled).exp();
    if scaled.is_finite() {
        0.5 * (value + slope * rest)
    } else {
        0.5 * value
    }
}

/// Standard normal quantile `Φ⁻¹(p) = −√2 erfc⁻¹(2p)`; `∓inf` at 0 and 1, NaN outside `[0, 1]`.
///
/// Relative error at most 4e-16 for `p` from 1e-307 to `1 − 1e-15`, measured against 50-digit
/// arithmetic.
pub fn normal_quantile(p: f64) -> f64 {
    if !(0.0..=1.0).contains(&p) {
        return f64::NAN;
    }
    // Added to 0, so that the median is 0 and not -0.
    0.0 - SQRT_2 * erfc_inv(2.0 * p)
}

/// `log Γ(x)` for `x > 0`; `+inf` at 0, NaN below.
///
/// Measured against 60-digit arithmetic at 9,000 points from 1e-10 to 1e300, closely around 1 and
/// 2 included: relative error at most 4e-16. The same function of statrs 0.19 keeps an absolute
/// error of 6e-15 near 1 and 2 but no relative one (5e-3 there), 1e-12 elsewhere.
pub fn ln_gamma(x: f64) -> f64 {
    if x < 0.0 { f64::NAN } else { libm::lgamma(x) }
}
