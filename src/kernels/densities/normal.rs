//! Normal, half-normal and log-normal densities.

use super::family::{Family, is_moderate};
use super::hyper::Triple;
use super::stirling::HALF_LN_2PI;
use crate::kernels::vector::Arithmetic;
use crate::kernels::vector::ln::{is_ordinary, ln};

/// `½ log(2/π)`.
const HALF_LN_2_BY_PI: f64 = -0.225_791_352_644_727_4;

/// `−½ z² − log sd − ½ log 2π`, `z = (x − mean)/sd`; hyperparameters mean, sd.
pub struct Normal {
    mean: f64,
    by_sd: f64,
    constant: f64,
}

impl Family for Normal {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            mean: hyper[0],
            by_sd: 1.0 / hyper[1],
            constant: -ln::<A>(hyper[1]) - HALF_LN_2PI,
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, _x: f64) -> bool {
        true
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let z = (x - self.mean) * self.by_sd;
        A::mul_add(-0.5 * z, z, self.constant)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let z = (x - hyper[0]) / hyper[1];
        -0.5 * z * z - libm::log(hyper[1]) - HALF_LN_2PI
    }
}

/// `−½ (x/scale)² − log scale + ½ log(2/π)` from 0 on; hyperparameter scale.
pub struct HalfNormal {
    by_scale: f64,
    constant: f64,
}

impl Family for HalfNormal {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[0])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            by_scale: 1.0 / hyper[0],
            constant: HALF_LN_2_BY_PI - ln::<A>(hyper[0]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, _x: f64) -> bool {
        true
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let z = x * self.by_scale;
        let inside = A::mul_add(-0.5 * z, z, self.constant);
        if x < 0.0 { f64::NEG_INFINITY } else { inside }
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        if x < 0.0 {
            return f64::NEG_INFINITY;
        }
        let z = x / hyper[0];
        -0.5 * z * z - libm::log(hyper[0]) + HALF_LN_2_BY_PI
    }
}

/// `−½ z² − log x − log s − ½ log 2π`, `z = (log x − m)/s`; hyperparameters m = log_mean,
/// s = log_sd.
pub struct LogNormal {
    log_mean: f64,
    by_sd: f64,
    constant: f64,
}

impl Family for LogNormal {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            log_mean: hyper[0],
            by_sd: 1.0 / hyper[1],
            constant: -ln::<A>(hyper[1]) - HALF_LN_2PI,
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        is_ordinary(x)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let log_x = ln::<A>(x);
        let z = (log_x - self.log_mean) * self.by_sd;
        A::mul_add(-0.5 * z, z, self.constant) - log_x
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        if x <= 0.0 || x == f64::INFINITY {
            return f64::NEG_INFINITY;
        }
        let log_x = libm::log(x);
        let z = (log_x - hyper[0]) / hyper[1];
        -0.5 * z * z - log_x - libm::log(hyper[1]) - HALF_LN_2PI
    }
}
