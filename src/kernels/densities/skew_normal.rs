//! The skew-normal density.

use std::f64::consts::{FRAC_1_SQRT_2, LN_2};

use super::family::{Family, is_moderate};
use super::hyper::Triple;
use super::normal_tail::log_normal_cdf;
use super::stirling::HALF_LN_2PI;
use crate::kernels::vector::Arithmetic;
use crate::kernels::vector::exp::exp;
use crate::kernels::vector::ln::ln;

/// Where the variable of the approximation vanishes.
const CENTRE: f64 = 3.75;

/// `(1 + 2t) exp(t²) erfc(t)` for `t ≥ 0` as a polynomial in `(t − CENTRE)/(t + CENTRE)` (the
/// substitution of Shepherd & Laframboise 1981, Mathematics of Computation 36, 249-253),
/// interpolated at Chebyshev nodes in 50-digit arithmetic; relative error 1e-16.
const SCALED: [f64; 25] = [
    1.2375126308378275,
    -0.14024059858554697,
    0.0035854154854644293,
    0.0822767384901452,
    -0.10880393014174886,
    0.09230432116037748,
    -0.05869339858963677,
    0.028362277418956406,
    -0.009746579558029276,
    0.0017556258528952954,
    0.0002937136655913448,
    -0.0002901540805408417,
    5.164909889268241e-05,
    2.238423915508223e-05,
    -1.1444146237700524e-05,
    -9.73559896736775e-07,
    1.751637648849062e-06,
    -5.7218230603224086e-08,
    -2.5866850716155884e-07,
    2.3263508708859124e-08,
    3.8675334242222354e-08,
    -3.744210080962018e-09,
    -5.1739902140113095e-09,
    3.1114333809799254e-10,
    4.2514714447963895e-10,
];

/// `log Φ(u)` without branches, `u` finite: within 6e-16 of the larger of 1 and itself.
#[inline(always)]
fn log_cdf<A: Arithmetic>(u: f64) -> f64 {
    let t = u.abs() * FRAC_1_SQRT_2;
    let y = (t - CENTRE) / (t + CENTRE);
    let v = y * y;
    let w = v * v;
    let c = &SCALED;
    // Written out: a loop over the coefficients would keep the compiler from working on lanes.
    let first = A::mul_add(w, A::mul_add(w, A::mul_add(w, c[24], c[20]), c[16]), c[12]);
    let first = A::mul_add(w, A::mul_add(w, A::mul_add(w, first, c[8]), c[4]), c[0]);
    let second = A::mul_add(w, A::mul_add(w, A::mul_add(w, c[21], c[17]), c[13]), c[9]);
    let second = A::mul_add(w, A::mul_add(w, second, c[5]), c[1]);
    let third = A::mul_add(w, A::mul_add(w, A::mul_add(w, c[22], c[18]), c[14]), c[10]);
    let third = A::mul_add(w, A::mul_add(w, third, c[6]), c[2]);
    let fourth = A::mul_add(w, A::mul_add(w, A::mul_add(w, c[23], c[19]), c[15]), c[11]);
    let fourth = A::mul_add(w, A::mul_add(w, fourth, c[7]), c[3]);
    let low = A::mul_add(y, second, first);
    let scaled = A::mul_add(v, A::mul_add(y, fourth, third), low) * 0.5 / (1.0 + 2.0 * t);
    let fall = -0.5 * u * u;
    // Below 0 the tail itself, above 0 what it leaves of 1.
    let tail = A::mul_add(exp::<A>(fall), -scaled, 1.0);
    let log = ln::<A>(if u > 0.0 { tail } else { scaled });
    if u > 0.0 { log } else { fall + log }
}

/// `log 2 − log scale + log φ(z) + log Φ(slant z)`, `z = (x − location)/scale`; hyperparameters
/// location, scale, slant.
pub struct SkewNormal {
    location: f64,
    by_scale: f64,
    slant: f64,
    constant: f64,
}

impl Family for SkewNormal {
    #[inline(always)]
    fn is_plain(hyper: Triple) -> bool {
        is_moderate(hyper[1])
    }

    #[inline(always)]
    fn new<A: Arithmetic>(hyper: Triple, _normaliser: f64) -> Self {
        Self {
            location: hyper[0],
            by_scale: 1.0 / hyper[1],
            slant: hyper[2],
            constant: LN_2 - HALF_LN_2PI - ln::<A>(hyper[1]),
        }
    }

    #[inline(always)]
    fn is_ordinary(&self, x: f64) -> bool {
        (((x - self.location) * self.by_scale).abs() < 1e150) & (self.slant.abs() < 1e150)
    }

    #[inline(always)]
    fn fast<A: Arithmetic>(&self, x: f64) -> f64 {
        let z = (x - self.location) * self.by_scale;
        A::mul_add(-0.5 * z, z, self.constant) + log_cdf::<A>(self.slant * z)
    }

    fn careful(hyper: Triple, x: f64) -> f64 {
        let z = (x - hyper[0]) / hyper[1];
        if z.is_infinite() {
            return f64::NEG_INFINITY;
        }
        LN_2 - HALF_LN_2PI - libm::log(hyper[1]) - 0.5 * z * z + log_normal_cdf(hyper[2] * z)
    }
}
