//! Probabilities of counts: Poisson, binomial, negative binomial. `−inf` off the whole numbers.

use super::family::{Family, is_moderate};
use super::hyper::Triple;
use super::stirling::{
    HALF_LN_2PI, SERIES, log_beta, log_beta_kernel, log_gamma_kernel, log_share,
};
use crate::kernels::vector::Arithmetic;
use crate::kernels::vector::ln::ln;

/// Above these counts and means the sum of plain terms would cancel visibly.
const LARGEST: f64 = 256.0;

/// Steps by which the argument of [`log_gamma`] is raised to where its series holds.
const STEPS: f64 = 8.0;

/// `log Γ(s)` for `0 < s ≤ 1024` without branches: Stirling's series 8 steps higher, less the
/// logarithm of what lies between. Log probabilities built on it are within 2e-13 of the larger of
/// 1 and themselves, for counts, means and dispersions up to 256 (40-digit arithmetic).
#[inline(always)]
fn log_gamma<A: Arithmetic>(s: f64) -> f64 {
    let between = (s * (s + 7.0)) * ((s + 1.0) * (s + 6.0));
    let between = between * (((s + 2.0) * (s + 5.0)) * ((s + 3.0) * (s + 4.0)));
    let raised = s + STEPS;
    let inverse = 1.0 / raised;
    let u = inverse * inverse;
    let v = u * u;
    // Written out: a loop over the coefficients would keep the compiler from working on lanes.
    let c = &SERIES;
    let even = A::mul_add(v, A::mul_add(v, A::mul_add(v, c[8], c[6]), c[4]), c[2]);
    let odd = A::mul_add(v, A::mul_add(v, A::mul_add(v, c[7], c[5]), c[3]), c[1]);
    let rest = A::mul_add(u, A::mul_add(u, even, odd), c[0]);
    let large = A::mul_add(raised - 0.5, ln::<A>(raised), HALF_LN_2PI - raised);
    A::mul_add(rest, inverse, large) - ln::<A>(between)
}

/// Whether `k` is a whole number from 0 to `most`.
#[inline(always)]
fn is_count(k: f64, most: f64) -> bool {
    (k >= 0.0) & (k <= most) & (k == k.floor())
}

/// What a value that is no count from 0 to `most` has for an answer.
fn outside(k: f64, most: f64) -> Option<f64> {
    if k.is_nan() {
        Some(f64::NAN)
    } else if is_count(k, most) && k < f64::INFINITY {
        None
    } else {
        Some(f64::NEG_INFINITY)
    }
}

/// `k log λ − λ − log k!`; hyperparameter rate λ.
pub struct Poisson {
    rate: f64,
    log_rate: f64,
}

impl Family for Poisson {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[0]) & (hyper[0] <= LARGEST)
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            rate: hyper[0],
            log_rate: ln::<A>(hyper[0]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, k: f64) -> bool {
        is_count(k, LARGEST)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, k: f64) -> f64 {
        let rise = A::mul_add(k, self.log_rate, -self.rate);
        let log_factorial = log_gamma::<A>(k + 1.0);
        if k == 0.0 { rise } else { rise - log_factorial }
    }

    fn careful(hyper: Triple, k: f64) -> f64 {
        let rate = hyper[0];
        if let Some(answer) = outside(k, f64::INFINITY) {
            return answer;
        }
        if k == 0.0 {
            return -rate;
        }
        log_gamma_kernel(k + 1.0, rate) - libm::log(rate)
    }
}

/// `log C(n, k) + k log p + (n − k) log(1 − p)`; hyperparameters n, p.
pub struct Binomial {
    n: f64,
    constant: f64,
    log_p: f64,
    log_q: f64,
}

impl Family for Binomial {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        // 1 − p must keep its digits, which are what is taken of small p.
        (hyper[0] <= LARGEST) & (1e-300..1.0).contains(&hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            n: hyper[0],
            constant: log_gamma::<A>(hyper[0] + 1.0),
            log_p: ln::<A>(hyper[1]),
            log_q: ln::<A>(1.0 - hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, k: f64) -> bool {
        is_count(k, self.n)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, k: f64) -> f64 {
        let failures = self.n - k;
        let powers = A::mul_add(k, self.log_p, failures * self.log_q);
        let ways = self.constant - log_gamma::<A>(k + 1.0) - log_gamma::<A>(failures + 1.0);
        if (k == 0.0) | (failures == 0.0) {
            powers
        } else {
            powers + ways
        }
    }

    fn careful(hyper: Triple, k: f64) -> f64 {
        let [n, p, _] = hyper;
        if let Some(answer) = outside(k, n) {
            return answer;
        }
        let failures = n - k;
        if k == 0.0 || failures == 0.0 {
            return certain(k, libm::log(p)) + certain(failures, libm::log1p(-p));
        }
        if p == 0.0 || p == 1.0 {
            return f64::NEG_INFINITY;
        }
        let rest = libm::log(p) + libm::log1p(-p) + libm::log(n + 1.0);
        log_beta_kernel(k + 1.0, failures + 1.0, p, 1.0 - p) - rest
    }
}

/// `count · log`, where nothing is certain: `0 log 0 = 0`.
fn certain(count: f64, log: f64) -> f64 {
    if count == 0.0 { 0.0 } else { count * log }
}

/// `log Γ(k + d) − log k! − log Γ(d) + d log(d/(d + m)) + k log(m/(d + m))`; hyperparameters mean m,
/// dispersion d.
pub struct NegativeBinomial {
    dispersion: f64,
    constant: f64,
    log_y: f64,
}

impl Family for NegativeBinomial {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        let [mean, dispersion, _] = hyper;
        (1e-100..=LARGEST).contains(&mean) & (1e-3..=LARGEST).contains(&dispersion)
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        let [mean, dispersion, _] = hyper;
        let log_whole = ln::<A>(mean + dispersion);
        let log_x = ln::<A>(dispersion) - log_whole;
        Self {
            dispersion,
            constant: A::mul_add(dispersion, log_x, -log_gamma::<A>(dispersion)),
            log_y: ln::<A>(mean) - log_whole,
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, k: f64) -> bool {
        is_count(k, LARGEST)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, k: f64) -> f64 {
        let ways = log_gamma::<A>(k + self.dispersion) - log_gamma::<A>(k + 1.0);
        A::mul_add(k, self.log_y, self.constant + ways)
    }

    fn careful(hyper: Triple, k: f64) -> f64 {
        let [mean, dispersion, _] = hyper;
        if let Some(answer) = outside(k, f64::INFINITY) {
            return answer;
        }
        let ratio = mean / dispersion;
        if k == 0.0 {
            return dispersion * log_share(dispersion, mean);
        }
        let rest = libm::log(dispersion + k);
        if !is_moderate(ratio) {
            let (log_x, log_y) = (log_share(dispersion, mean), log_share(mean, dispersion));
            return dispersion * log_x + k * log_y - log_beta(dispersion, k + 1.0) - rest;
        }
        let (x, y) = (1.0 / (1.0 + ratio), 1.0 / (1.0 + 1.0 / ratio));
        log_beta_kernel(dispersion, k + 1.0, x, y) - libm::log(y) - rest
    }
}
