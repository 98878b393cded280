//! Weighted means, variances and covariances, and the mean square that serves draws without time
//! order.

use super::log_sum::range;
use super::ordered::sum_by;
use super::vector::{Arithmetic, Work, dispatch, tree};

/// Draws of a block.
pub(super) const BLOCK: usize = 4096;

/// Sums that are formed side by side.
pub(super) const LANES: usize = 16;

/// `Σ_s w_s f_s` for weights `w` on the natural scale; both of shape `(n,)`.
///
/// A draw of weight 0 is left out altogether, so that an infinite or undefined `f_s` there does no
/// harm. `w` is used as it is: it should sum to 1.
pub fn weighted_mean(f: &[f64], w: &[f64]) -> f64 {
    sum_blocks(f, w, 0.0, Power::First)
}

/// Weighted mean of `f` and its weighted mean square about that mean, `Σ w (f − μ)²`; as
/// [`weighted_mean`].
pub fn weighted_moments(f: &[f64], w: &[f64]) -> (f64, f64) {
    let centre = weighted_mean(f, w);
    (centre, sum_blocks(f, w, centre, Power::Second))
}

/// Arithmetic mean of `z`, shape `(n,)`: exact for constant `z`, NaN without entries.
pub fn mean(z: &[f64]) -> f64 {
    let count = z.len() as f64;
    let rough = sum_blocks(z, &[], 0.0, Power::First) / count;
    let rough = if rough.is_finite() {
        rough
    } else {
        // The sum may overflow where the mean does not.
        sum_by(z.len(), |s| z[s] / count)
    };
    // The second pass takes out the rounding of the first: a mean far from 0 keeps its last digits,
    // and the mean of a constant is that constant. Without entries it is 0/0.
    rough + sum_blocks(z, &[], rough, Power::First) / count
}

/// `Σ_s (z_s − z̄)² / n`, shape `(n,)`: the long-run variance of independent draws, with `1/n` so
/// that uniform weights give the plain variance of the draws themselves.
///
/// Constant `z` gives exactly 0; no entry, NaN or an infinite entry gives NaN.
pub fn mean_square(z: &[f64]) -> f64 {
    let centre = mean(z);
    if !centre.is_finite() {
        return f64::NAN;
    }
    sum_blocks(z, &[], centre, Power::Second) / z.len() as f64
}

/// `(Σ c²)³ / (Σ c³)²` of the centred series `c = z − z̄`, shape `(n,)`: the number of draws over the
/// squared skewness, which is how many draws carry the series on its heavier side.
///
/// `+inf` for a symmetric or a constant series; no entry, NaN or an infinite entry gives NaN.
pub fn contributions(z: &[f64]) -> f64 {
    let centre = mean(z);
    if !centre.is_finite() {
        return f64::NAN;
    }
    let (low, high) = range(z);
    let top = (high - centre).max(centre - low);
    if top == 0.0 {
        return f64::INFINITY;
    }
    // In units of the largest no power overflows, and that of the largest is 1.
    let (squares, cubes) = powers(z, centre, 1.0 / top);
    squares * squares * squares / (cubes * cubes)
}

/// `Σ c²` and `Σ c³` for `c = (z − centre) · unit`.
pub(super) fn powers(z: &[f64], centre: f64, unit: f64) -> (f64, f64) {
    let (mut squares, mut cubes) = (0.0, 0.0);
    for z in z.chunks(BLOCK) {
        let found = dispatch(Cubes { z, centre, unit });
        squares += found.0;
        cubes += found.1;
    }
    (squares, cubes)
}

struct Cubes<'a> {
    z: &'a [f64],
    centre: f64,
    unit: f64,
}

impl Work for Cubes<'_> {
    type Output = (f64, f64);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (f64, f64) {
        let c = |z: f64| (z - self.centre) * self.unit;
        let squares = lane_sum(self.z, self.z, |z, _| c(z) * c(z));
        (squares, lane_sum(self.z, self.z, |z, _| c(z) * c(z) * c(z)))
    }
}

/// Power of the deviations that are added.
#[derive(Clone, Copy, PartialEq)]
pub(super) enum Power {
    First,
    Second,
}

/// `Σ w (f − centre)^power` without the draws of weight 0; without weights each counts once.
pub(super) fn sum_blocks(f: &[f64], w: &[f64], centre: f64, power: Power) -> f64 {
    let blocks = f.len().div_ceil(BLOCK);
    sum_by(blocks, |block| {
        let range = block * BLOCK..f.len().min((block + 1) * BLOCK);
        block_sum(&f[range.clone()], w.get(range), centre, power)
    })
}

/// [`sum_blocks`] of at most [`BLOCK`] draws.
pub(super) fn block_sum(f: &[f64], w: Option<&[f64]>, centre: f64, power: Power) -> f64 {
    dispatch(BlockSum {
        f,
        w,
        centre,
        power,
    })
}

struct BlockSum<'a> {
    f: &'a [f64],
    w: Option<&'a [f64]>,
    centre: f64,
    power: Power,
}

impl Work for BlockSum<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        let centre = self.centre;
        match (self.w, self.power) {
            (None, Power::First) => lane_sum(self.f, self.f, |f, _| f - centre),
            (None, Power::Second) => lane_sum(self.f, self.f, |f, _| (f - centre) * (f - centre)),
            (Some(w), Power::First) => lane_sum(self.f, w, |f, w| counted(w, w * (f - centre))),
            (Some(w), Power::Second) => lane_sum(self.f, w, |f, w| {
                counted(w, w * ((f - centre) * (f - centre)))
            }),
        }
    }
}

#[inline(always)]
fn counted(weight: f64, term: f64) -> f64 {
    if weight == 0.0 { 0.0 } else { term }
}

#[inline(always)]
fn lane_sum(f: &[f64], w: &[f64], term: impl Fn(f64, f64) -> f64) -> f64 {
    let mut sums = [0.0; LANES];
    let ((f, f_rest), (w, w_rest)) = (f.as_chunks::<LANES>(), w.as_chunks::<LANES>());
    for (f, w) in f.iter().zip(w) {
        for lane in 0..LANES {
            sums[lane] += term(f[lane], w[lane]);
        }
    }
    for (sum, (f, w)) in sums.iter_mut().zip(f_rest.iter().zip(w_rest)) {
        *sum += term(*f, *w);
    }
    tree(sums)
}
