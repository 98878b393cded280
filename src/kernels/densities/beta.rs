//! The beta density.

use super::family::{Family, is_moderate};
use super::gamma::at_edge;
use super::hyper::Triple;
use super::stirling::{log_beta, log_beta_kernel};
use crate::kernels::vector::Arithmetic;
use crate::kernels::vector::ln::ln_two;

/// Above these shapes the two logarithms would cancel visibly.
const LARGEST_SHAPE: f64 = 1024.0;

/// `(a − 1) log x + (b − 1) log(1 − x) − log B(a, b)`; hyperparameters a, b.
pub struct Beta {
    rise: f64,
    fall: f64,
    constant: f64,
}

impl Family for Beta {
    #[inline(always)]
    fn shape(hyper: Triple) -> [f64; 2] {
        [hyper[0], hyper[1]]
    }

    fn normaliser(shape: [f64; 2]) -> f64 {
        -log_beta(shape[0], shape[1])
    }

    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        let [a, b, _] = hyper;
        is_moderate(a) & is_moderate(b) & (a <= LARGEST_SHAPE) & (b <= LARGEST_SHAPE)
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, normaliser: f64) -> Self {
        Self {
            rise: hyper[0] - 1.0,
            fall: hyper[1] - 1.0,
            constant: normaliser,
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        (f64::MIN_POSITIVE..1.0).contains(&x)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let (below, above) = ln_two::<A>(x, 1.0 - x);
        A::mul_add(
            self.fall,
            above,
            A::mul_add(self.rise, below, self.constant),
        )
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let [a, b, _] = hyper;
        if x.is_nan() {
            return f64::NAN;
        }
        if !(0.0..=1.0).contains(&x) {
            return f64::NEG_INFINITY;
        }
        if x == 0.0 {
            return at_edge(a, -log_beta(a, b));
        }
        if x == 1.0 {
            return at_edge(b, -log_beta(a, b));
        }
        log_beta_kernel(a, b, x, 1.0 - x) - libm::log(x) - libm::log1p(-x)
    }
}
