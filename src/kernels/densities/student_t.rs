//! Student's t and Cauchy densities, whole and folded at 0.

use std::f64::consts::{LN_2, PI};

use super::family::{Family, is_moderate};
use super::hyper::Triple;
use super::stirling::log_beta;
use crate::kernels::vector::Arithmetic;
use crate::kernels::vector::ln::ln;

/// Above these degrees of freedom the rounding of `1 + z²/ν`, times `½(ν + 1)`, would show.
const MOST_DEGREES: f64 = 1024.0;

/// Below these, `log ν` is all that matters.
const SMALLEST_DEGREES: f64 = 1e-300;

/// `log Γ((ν+1)/2) − log Γ(ν/2) − ½ log νπ`.
fn log_constant(df: f64) -> f64 {
    if df < SMALLEST_DEGREES {
        // Half of them may underflow; B(ν/2, ½) is 2/ν there.
        return 0.5 * libm::log(df) - LN_2;
    }
    -log_beta(0.5 * df, 0.5) - 0.5 * libm::log(df)
}

/// `−½(ν + 1) log(1 + z²/ν)` for `z ≥ 0`.
fn careful_fall(df: f64, z: f64) -> f64 {
    let ratio = z * z / df;
    let log = if ratio < f64::INFINITY {
        libm::log1p(ratio)
    } else {
        2.0 * libm::log(z) - libm::log(df)
    };
    -0.5 * (df + 1.0) * log
}

/// `log Γ((ν+1)/2) − log Γ(ν/2) − ½ log νπ − log scale − ½(ν + 1) log(1 + z²/ν)`,
/// `z = (x − location)/scale`; hyperparameters ν = df, location, scale.
pub struct StudentT {
    location: f64,
    by_scale: f64,
    by_df: f64,
    half: f64,
    constant: f64,
}

impl Family for StudentT {
    #[inline(always)]
    fn shape(hyper: Triple) -> [f64; 2] {
        [hyper[0], 0.0]
    }

    fn normaliser(shape: [f64; 2]) -> f64 {
        log_constant(shape[0])
    }

    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[2]) & is_moderate(hyper[0]) & (hyper[0] <= MOST_DEGREES)
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, normaliser: f64) -> Self {
        Self {
            location: hyper[1],
            by_scale: 1.0 / hyper[2],
            by_df: 1.0 / hyper[0],
            half: -0.5 * (hyper[0] + 1.0),
            constant: normaliser - ln::<A>(hyper[2]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        let z = (x - self.location) * self.by_scale;
        z * z * self.by_df < f64::INFINITY
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let z = (x - self.location) * self.by_scale;
        let log = ln::<A>(1.0 + z * z * self.by_df);
        A::mul_add(self.half, log, self.constant)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let z = ((x - hyper[1]) / hyper[2]).abs();
        log_constant(hyper[0]) - libm::log(hyper[2]) + careful_fall(hyper[0], z)
    }
}

/// Twice the density of [`StudentT`] at location 0, from 0 on; hyperparameters df, scale.
pub struct HalfStudentT(StudentT);

impl Family for HalfStudentT {
    #[inline(always)]
    fn shape(hyper: Triple) -> [f64; 2] {
        [hyper[0], 0.0]
    }

    fn normaliser(shape: [f64; 2]) -> f64 {
        LN_2 + log_constant(shape[0])
    }

    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        StudentT::is_plain([hyper[0], 0.0, hyper[1]])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, normaliser: f64) -> Self {
        Self(StudentT::new::<A>([hyper[0], 0.0, hyper[1]], normaliser))
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        self.0.is_ordinary(x)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let inside = self.0.fast::<A>(x);
        if x < 0.0 { f64::NEG_INFINITY } else { inside }
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        if x < 0.0 {
            return f64::NEG_INFINITY;
        }
        LN_2 + StudentT::careful([hyper[0], 0.0, hyper[1]], x)
    }
}

/// `−log π − log scale − log(1 + z²)`; hyperparameters location, scale.
pub struct Cauchy {
    location: f64,
    by_scale: f64,
    constant: f64,
}

impl Family for Cauchy {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            location: hyper[0],
            by_scale: 1.0 / hyper[1],
            constant: -ln::<A>(PI) - ln::<A>(hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        let z = (x - self.location) * self.by_scale;
        z * z < f64::INFINITY
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let z = (x - self.location) * self.by_scale;
        self.constant - ln::<A>(A::mul_add(z, z, 1.0))
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let z = ((x - hyper[0]) / hyper[1]).abs();
        -libm::log(PI) - libm::log(hyper[1]) + careful_fall(1.0, z)
    }
}

/// Twice the density of [`Cauchy`] at location 0, from 0 on; hyperparameter scale.
pub struct HalfCauchy(Cauchy);

impl Family for HalfCauchy {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[0])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        let mut whole = Cauchy::new::<A>([0.0, hyper[0], 0.0], 0.0);
        whole.constant += LN_2;
        Self(whole)
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        self.0.is_ordinary(x)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let inside = self.0.fast::<A>(x);
        if x < 0.0 { f64::NEG_INFINITY } else { inside }
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        if x < 0.0 {
            return f64::NEG_INFINITY;
        }
        LN_2 + Cauchy::careful([0.0, hyper[0], 0.0], x)
    }
}
