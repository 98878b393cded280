//! The generalised Pareto distribution: its fit to exceedances, and its quantiles.

use super::log_sum::{maximum, range};
use super::mean_logs::mean_logs;
use super::ordered::{sum, sum_by};
use super::vector::exp::{MOST, exp_m1, exp_slice};
use super::vector::ln::{ln, ln_slice};
use super::vector::rank::nth_largest;
use super::vector::{Arithmetic, Work, dispatch};

/// Fewest exceedances that are fitted.
pub const FEWEST: usize = 5;

/// Grid constant `m = 20 + ⌊√n⌋` of the paper.
const GRID: usize = 20;

/// Points of the grid that are worked on together.
const LANES: usize = 16;

/// Least quartile exceedance in units of the largest: below it `1 / x` would overflow, and the
/// grid has long left the region that the data know.
const LEAST_QUARTILE: f64 = 1e-290;

/// A generalised Pareto distribution with location 0.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pareto {
    /// Shape `k`: positive for a heavy tail; moments of order below `1/k` exist.
    pub shape: f64,
    /// Scale `σ`, in the unit of the exceedances.
    pub scale: f64,
}

impl Pareto {
    const UNDEFINED: Self = Self {
        shape: f64::NAN,
        scale: f64::NAN,
    };

    /// The same distribution with its shape drawn towards ½ as by 10 further exceedances,
    /// `(n k + 5) / (n + 10)`, which steadies short tails.
    ///
    /// Source: Vehtari, Simpson, Gelman, Yao & Gabry (2024), JMLR 25.
    pub fn shrunk(self, exceedances: usize) -> Self {
        let count = exceedances as f64;
        Self {
            shape: (count * self.shape + 5.0) / (count + 10.0),
            ..self
        }
    }

    /// Quantile at `p` in `[0, 1)`, natural scale: `σ ((1 − p)^(−k) − 1) / k`, and
    /// `−σ log(1 − p)` for `k = 0`.
    pub fn quantile(self, p: f64) -> f64 {
        let survival = (-p).ln_1p();
        if self.shape == 0.0 {
            return -self.scale * survival;
        }
        self.scale * ((-self.shape * survival).exp_m1() / self.shape)
    }
}

/// `log min(1, base + quantile)` at `(z − ½)/M`, `z = 1..M`, and the room it takes.
#[derive(Default)]
pub struct Quantiles {
    /// `log(1 − (z − ½)/M)` for the last `M`.
    survival: Vec<f64>,
    values: Vec<f64>,
    logs: Vec<f64>,
}

impl Quantiles {
    /// The logarithms for the distribution `fit` and `count` points.
    pub fn logs(&mut self, fit: Pareto, base: f64, count: usize) -> &[f64] {
        if self.survival.len() != count {
            self.survival.resize(count, 0.0);
            dispatch(Survival(&mut self.survival));
        }
        self.values.resize(count, 0.0);
        self.logs.resize(count, 0.0);
        if fit.shape == 0.0 {
            for (value, survival) in self.values.iter_mut().zip(&self.survival) {
                *value = (base - fit.scale * survival).min(1.0);
            }
        } else {
            dispatch(Capped {
                fit,
                base,
                survival: &self.survival,
                values: &mut self.values,
            });
        }
        ln_slice(&self.values, &mut self.logs);
        &self.logs
    }
}

/// `log(1 − p)` at `p = (z − ½)/M`.
struct Survival<'a>(&'a mut [f64]);

impl Work for Survival<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let count = self.0.len() as f64;
        for (rank, value) in self.0.iter_mut().enumerate() {
            let p = (rank as f64 + 0.5) / count;
            // The rounding of 1 − p is put back.
            let rest = 1.0 - p;
            *value = ln::<A>(rest) + ((1.0 - rest) - p) / rest;
        }
    }
}

/// `min(1, base + quantile)`, for shapes other than 0.
struct Capped<'a> {
    fit: Pareto,
    base: f64,
    survival: &'a [f64],
    values: &'a mut [f64],
}

impl Work for Capped<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let Pareto { shape, scale } = self.fit;
        for (value, survival) in self.values.iter_mut().zip(self.survival) {
            let power = (-shape * survival).min(MOST);
            *value = (self.base + scale * (exp_m1::<A>(power) / shape)).min(1.0);
        }
    }
}

/// Generalised Pareto distribution fitted to exceedances `x ≥ 0`, shape `(n,)`, natural scale, in
/// any order. The shape is the raw one, not shrunk.
///
/// With `x_(i)` the sorted exceedances and `m = 20 + ⌊√n⌋`, for `j = 1..m`:
/// `b_j = 1/x_(n) + (1 − √(m/(j − ½))) / (3 x_(⌊n/4 + ½⌋))`, `k_j = mean log1p(−b_j x)`, profile
/// log likelihood `n (log(−b_j/k_j) − k_j − 1)`; `b` is the likelihood-weighted mean of `b_j`,
/// `k = mean log1p(−b x)` and `σ = −k/b`.
///
/// Edges: `b_j = 0` has `k_j = 0` and profile `−n log mean x − n`; `b = 0` has `σ = mean x`; a
/// quartile exceedance of 0 is replaced by the smallest positive one. Exceedances that are all
/// equal have shape `−inf` and scale NaN (the likelihood grows without bound as the shape falls).
/// Fewer than 5 exceedances, negative ones, infinite ones or NaN give NaN twice.
///
/// Source: Zhang & Stephens (2009), Technometrics 51, 316-325; their `k` has the opposite sign.
pub fn fit(x: &[f64]) -> Pareto {
    let mut sorted = x.to_vec();
    sorted.sort_unstable_by(f64::total_cmp);
    fit_sorted(&sorted)
}

/// As [`fit`], which it is but for the order of sums: nothing is sorted.
pub fn fit_any(x: &[f64]) -> Pareto {
    let rank = (x.len() + 2) / 4;
    let (least, largest) = range(x);
    match nth_largest(x, (x.len() + 1).saturating_sub(rank)) {
        Some(quartile) if quartile > 0.0 && rank > 0 => fit_between(x, [least, quartile, largest]),
        _ => fit(x),
    }
}

/// As [`fit`], for exceedances in ascending order.
pub fn fit_sorted(x: &[f64]) -> Pareto {
    let (Some(&least), Some(&largest)) = (x.first(), x.last()) else {
        return Pareto::UNDEFINED;
    };
    fit_between(x, [least, quartile(x), largest])
}

/// As [`fit`], the least, the quartile and the largest being known.
fn fit_between(x: &[f64], [least, quartile, largest]: [f64; 3]) -> Pareto {
    let legal = least >= 0.0 && largest.is_finite() && !x.iter().any(|entry| entry.is_nan());
    if x.len() < FEWEST || !legal {
        return Pareto::UNDEFINED;
    }
    if least == largest {
        return Pareto {
            shape: f64::NEG_INFINITY,
            scale: f64::NAN,
        };
    }
    // In units of the largest no grid point can overflow, and the shape has no unit.
    let unit: Vec<f64> = x.iter().map(|entry| entry / largest).collect();
    let b = likely_b(&unit, (quartile / largest).max(LEAST_QUARTILE));
    let [shape] = mean_logs(&unit, [b]);
    let scale = if b == 0.0 { mean(&unit) } else { -shape / b };
    Pareto {
        shape,
        scale: scale * largest,
    }
}

/// Likelihood-weighted mean of the grid `b_j` for exceedances whose largest is 1.
fn likely_b(x: &[f64], quartile: f64) -> f64 {
    let count = x.len() as f64;
    let points = GRID + x.len().isqrt();
    let mut grid: Vec<f64> = (1..=points)
        .map(|j| 1.0 + (1.0 - (points as f64 / (j as f64 - 0.5)).sqrt()) / (3.0 * quartile))
        .collect();
    grid.resize(points.next_multiple_of(LANES), 0.0);
    let mut shapes = Vec::with_capacity(grid.len());
    for lanes in grid.as_chunks::<LANES>().0 {
        shapes.extend(mean_logs(x, *lanes));
    }
    let ratios: Vec<f64> = grid.iter().zip(&shapes).map(|(b, k)| -b / k).collect();
    let mut weights = vec![0.0; grid.len()];
    ln_slice(&ratios, &mut weights);
    weights.truncate(points);
    for (place, weight) in weights.iter_mut().enumerate() {
        *weight = if grid[place] == 0.0 {
            -count * mean(x).ln() - count
        } else {
            count * (*weight - shapes[place] - 1.0)
        };
    }
    let most = maximum(&weights);
    weights.iter_mut().for_each(|weight| *weight -= most);
    exp_slice(&mut weights);
    sum_by(points, |j| weights[j] * grid[j]) / sum(&weights)
}

/// The exceedance of rank `⌊n/4 + ½⌋`, or the smallest positive one if that is 0; in ascending order.
fn quartile(x: &[f64]) -> f64 {
    let rank = (x.len() + 2) / 4;
    let at_rank = x.get(rank.saturating_sub(1)).copied().unwrap_or(0.0);
    if at_rank > 0.0 {
        return at_rank;
    }
    x.iter().copied().find(|&entry| entry > 0.0).unwrap_or(1.0)
}

fn mean(x: &[f64]) -> f64 {
    sum(x) / x.len() as f64
}
