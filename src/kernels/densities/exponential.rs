//! Exponential, Laplace, Pareto and constant densities.

use std::f64::consts::LN_2;

use super::family::{Family, is_moderate};
use super::hyper::Triple;
use crate::kernels::vector::Arithmetic;
use crate::kernels::vector::ln::{is_ordinary, ln};

/// Above this Pareto shape the rounding of `x/minimum` would show.
const LARGEST_SHAPE: f64 = 1024.0;

/// `log rate − rate x` from 0 on; hyperparameter rate.
pub struct Exponential {
    rate: f64,
    constant: f64,
}

impl Family for Exponential {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[0])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            rate: hyper[0],
            constant: ln::<A>(hyper[0]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, _x: f64) -> bool {
        true
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let inside = A::mul_add(-self.rate, x, self.constant);
        if x < 0.0 { f64::NEG_INFINITY } else { inside }
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        if x < 0.0 {
            return f64::NEG_INFINITY;
        }
        libm::log(hyper[0]) - hyper[0] * x
    }
}

/// `−|x − location|/scale − log 2 scale`; hyperparameters location, scale.
pub struct Laplace {
    location: f64,
    by_scale: f64,
    constant: f64,
}

impl Family for Laplace {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            location: hyper[0],
            by_scale: 1.0 / hyper[1],
            constant: -LN_2 - ln::<A>(hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, _x: f64) -> bool {
        true
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        A::mul_add(-(x - self.location).abs(), self.by_scale, self.constant)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        -((x - hyper[0]) / hyper[1]).abs() - LN_2 - libm::log(hyper[1])
    }
}

/// `log a − log m − (a + 1) log(x/m)` from m on; hyperparameters shape a, minimum m.
pub struct Pareto {
    minimum: f64,
    by_minimum: f64,
    fall: f64,
    constant: f64,
}

impl Family for Pareto {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[0]) & is_moderate(hyper[1]) & (hyper[0] <= LARGEST_SHAPE)
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            minimum: hyper[1],
            by_minimum: 1.0 / hyper[1],
            fall: -(hyper[0] + 1.0),
            constant: ln::<A>(hyper[0]) - ln::<A>(hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        is_ordinary(x * self.by_minimum)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let inside = A::mul_add(self.fall, ln::<A>(x * self.by_minimum), self.constant);
        if x < self.minimum {
            f64::NEG_INFINITY
        } else {
            inside
        }
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let [shape, minimum, _] = hyper;
        if x < minimum || x == f64::INFINITY {
            return f64::NEG_INFINITY;
        }
        let log_minimum = libm::log(minimum);
        let log = if x < 2.0 * minimum {
            libm::log1p((x - minimum) / minimum)
        } else {
            libm::log(x) - log_minimum
        };
        libm::log(shape) - log_minimum - (shape + 1.0) * log
    }
}

/// `−log(upper − lower)`, or 0 where a limit is infinite, between the limits; hyperparameters
/// lower, upper.
pub struct Flat {
    lower: f64,
    upper: f64,
    level: f64,
}

impl Family for Flat {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[1] - hyper[0])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            lower: hyper[0],
            upper: hyper[1],
            level: -ln::<A>(hyper[1] - hyper[0]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        !x.is_nan()
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        if (x >= self.lower) & (x <= self.upper) {
            self.level
        } else {
            f64::NEG_INFINITY
        }
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let [lower, upper, _] = hyper;
        if x.is_nan() {
            return f64::NAN;
        }
        if !(x >= lower && x <= upper && x.is_finite()) {
            return f64::NEG_INFINITY;
        }
        if !(lower.is_finite() && upper.is_finite()) {
            return 0.0;
        }
        // Halves, because the width of the whole range of numbers overflows.
        -libm::log(0.5 * upper - 0.5 * lower) - LN_2
    }
}
