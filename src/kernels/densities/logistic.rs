//! Densities that need an exponential: logistic, Gumbel, Weibull.

use super::family::{Family, is_moderate};
use super::gamma::at_edge;
use super::hyper::Triple;
use crate::kernels::vector::Arithmetic;
use crate::kernels::vector::exp::exp;
use crate::kernels::vector::ln::ln;

/// Exponents up to here are in reach of the fast exponential, with room for rounding.
const MOST: f64 = 700.0;

/// `−|z| − 2 log(1 + e^(−|z|)) − log scale`, `z = (x − location)/scale`; hyperparameters location,
/// scale.
pub struct Logistic {
    location: f64,
    by_scale: f64,
    constant: f64,
}

impl Family for Logistic {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            location: hyper[0],
            by_scale: 1.0 / hyper[1],
            constant: -ln::<A>(hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, _x: f64) -> bool {
        true
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let z = ((x - self.location) * self.by_scale).abs();
        A::mul_add(-2.0, ln::<A>(1.0 + exp::<A>(-z)), self.constant - z)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let z = ((x - hyper[0]) / hyper[1]).abs();
        -z - 2.0 * libm::log1p(libm::exp(-z)) - libm::log(hyper[1])
    }
}

/// `−z − e^(−z) − log scale`, `z = (x − location)/scale`; hyperparameters location, scale.
pub struct Gumbel {
    location: f64,
    by_scale: f64,
    constant: f64,
}

impl Family for Gumbel {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            location: hyper[0],
            by_scale: 1.0 / hyper[1],
            constant: -ln::<A>(hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        (x - self.location) * self.by_scale >= -MOST
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let z = (x - self.location) * self.by_scale;
        self.constant - z - exp::<A>(-z)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let z = (x - hyper[0]) / hyper[1];
        if z == f64::NEG_INFINITY {
            return z;
        }
        -z - libm::exp(-z) - libm::log(hyper[1])
    }
}

/// `log(k/s) + (k − 1) log(x/s) − (x/s)^k` from 0 on; hyperparameters shape k, scale s.
pub struct Weibull {
    by_scale: f64,
    shape: f64,
    most: f64,
    constant: f64,
}

impl Family for Weibull {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[0]) & is_moderate(hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            by_scale: 1.0 / hyper[1],
            shape: hyper[0],
            most: exp::<A>((MOST / hyper[0]).min(MOST)),
            constant: ln::<A>(hyper[0]) - ln::<A>(hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        (f64::MIN_POSITIVE..=self.most).contains(&(x * self.by_scale))
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let log = ln::<A>(x * self.by_scale);
        let fall = exp::<A>(self.shape * log);
        A::mul_add(self.shape - 1.0, log, self.constant - fall)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let [shape, scale, _] = hyper;
        if x < 0.0 || x == f64::INFINITY {
            return f64::NEG_INFINITY;
        }
        let constant = libm::log(shape) - libm::log(scale);
        if x == 0.0 {
            return at_edge(shape, constant);
        }
        let log = if is_moderate(x / scale) {
            libm::log(x / scale)
        } else {
            libm::log(x) - libm::log(scale)
        };
        let fall = libm::exp(shape * log);
        if fall == f64::INFINITY {
            return f64::NEG_INFINITY;
        }
        constant + (shape - 1.0) * log - fall
    }
}
