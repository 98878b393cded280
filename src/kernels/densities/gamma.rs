//! Gamma and inverse-gamma densities.

use super::family::{Family, is_moderate};
use super::hyper::Triple;
use super::stirling::{HALF_LN_2PI, log_gamma_kernel, stirling_rest};
use crate::kernels::special::ln_gamma;
use crate::kernels::vector::Arithmetic;
use crate::kernels::vector::ln::{is_ordinary, ln};

/// `(a − 1) log a − a − log Γ(a)`: with `t` the value over its mean the gamma density is
/// `log b + this + (a − 1) log t − a(t − 1)`, whose terms stay small around the mean.
fn log_constant(a: f64) -> f64 {
    -0.5 * libm::log(a) - HALF_LN_2PI - stirling_rest(a)
}

/// `a log b − log Γ(a) + (a − 1) log x − b x`; hyperparameters shape a, rate b.
pub struct Gamma {
    by_mean: f64,
    shape: f64,
    constant: f64,
}

impl Family for Gamma {
    #[inline(always)]
    fn shape(hyper: Triple) -> [f64; 2] {
        [hyper[0], 0.0]
    }

    fn normaliser(shape: [f64; 2]) -> f64 {
        log_constant(shape[0])
    }

    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[0]) & is_moderate(hyper[1]) & is_moderate(hyper[1] / hyper[0])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, normaliser: f64) -> Self {
        Self {
            by_mean: hyper[1] / hyper[0],
            shape: hyper[0],
            constant: normaliser + ln::<A>(hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        is_ordinary(x * self.by_mean)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let t = x * self.by_mean;
        let risen = A::mul_add(self.shape - 1.0, ln::<A>(t), self.constant);
        A::mul_add(-self.shape, t - 1.0, risen)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let [shape, rate, _] = hyper;
        if x < 0.0 || rate * x == f64::INFINITY {
            return f64::NEG_INFINITY;
        }
        if x == 0.0 {
            return at_edge(shape, libm::log(rate));
        }
        if is_moderate(rate * x) {
            return log_gamma_kernel(shape, rate * x) - libm::log(x);
        }
        let (log_rate, log_x) = (libm::log(rate), libm::log(x));
        (shape - 1.0) * (log_rate + log_x) + log_rate - rate * x - ln_gamma(shape)
    }
}

/// Log density at an edge that it approaches like `distance^(shape − 1)`; `level` is the value for
/// a shape of exactly 1.
pub fn at_edge(shape: f64, level: f64) -> f64 {
    if shape > 1.0 {
        f64::NEG_INFINITY
    } else if shape < 1.0 {
        f64::INFINITY
    } else {
        level
    }
}

/// `a log b − log Γ(a) − (a + 1) log x − b/x`; hyperparameters shape a, scale b.
pub struct InverseGamma {
    ratio: f64,
    shape: f64,
    constant: f64,
}

impl Family for InverseGamma {
    #[inline(always)]
    fn shape(hyper: Triple) -> [f64; 2] {
        [hyper[0], 0.0]
    }

    fn normaliser(shape: [f64; 2]) -> f64 {
        log_constant(shape[0])
    }

    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[0]) & is_moderate(hyper[1]) & is_moderate(hyper[1] / hyper[0])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, normaliser: f64) -> Self {
        let ratio = hyper[1] / hyper[0];
        Self {
            ratio,
            shape: hyper[0],
            constant: normaliser + ln::<A>(hyper[1]) - 2.0 * ln::<A>(ratio),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        is_ordinary(self.ratio / x)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let t = self.ratio / x;
        let risen = A::mul_add(self.shape + 1.0, ln::<A>(t), self.constant);
        A::mul_add(-self.shape, t - 1.0, risen)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let [shape, scale, _] = hyper;
        if x <= 0.0 || x == f64::INFINITY || scale / x == f64::INFINITY {
            return f64::NEG_INFINITY;
        }
        if is_moderate(scale / x) {
            return log_gamma_kernel(shape, scale / x) - libm::log(x);
        }
        let log_x = libm::log(x);
        shape * (libm::log(scale) - log_x) - log_x - scale / x - ln_gamma(shape)
    }
}
