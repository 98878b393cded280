//! The generalised Pareto distribution: its fit to exceedances, and its quantiles.

use super::log_sum::normalise_in_place;
use super::ordered::{sum, sum_by};

/// Fewest exceedances that are fitted.
pub const FEWEST: usize = 5;

/// Grid constant `m = 20 + ⌊√n⌋` of the paper.
const GRID: usize = 20;

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

/// As [`fit`], for exceedances in ascending order.
pub fn fit_sorted(x: &[f64]) -> Pareto {
    let (Some(&least), Some(&largest)) = (x.first(), x.last()) else {
        return Pareto::UNDEFINED;
    };
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
    let b = likely_b(&unit);
    let shape = mean_log(&unit, b);
    let scale = if b == 0.0 { mean(&unit) } else { -shape / b };
    Pareto {
        shape,
        scale: scale * largest,
    }
}

/// Likelihood-weighted mean of the grid `b_j` for sorted exceedances whose largest is 1.
fn likely_b(x: &[f64]) -> f64 {
    let count = x.len();
    let quartile = quartile(x);
    let points = GRID + count.isqrt();
    let grid: Vec<f64> = (1..=points)
        .map(|j| 1.0 + (1.0 - (points as f64 / (j as f64 - 0.5)).sqrt()) / (3.0 * quartile))
        .collect();
    let mut log_weights: Vec<f64> = grid.iter().map(|&b| profile(x, b)).collect();
    normalise_in_place(&mut log_weights);
    sum_by(points, |j| log_weights[j].exp() * grid[j])
}

/// The exceedance of rank `⌊n/4 + ½⌋`, or the smallest positive one if that is 0.
fn quartile(x: &[f64]) -> f64 {
    let rank = (x.len() + 2) / 4;
    let at_rank = x.get(rank.saturating_sub(1)).copied().unwrap_or(0.0);
    let positive = if at_rank > 0.0 {
        at_rank
    } else {
        x.iter().copied().find(|&entry| entry > 0.0).unwrap_or(1.0)
    };
    positive.max(LEAST_QUARTILE)
}

fn profile(x: &[f64], b: f64) -> f64 {
    let count = x.len() as f64;
    if b == 0.0 {
        return -count * mean(x).ln() - count;
    }
    let shape = mean_log(x, b);
    count * ((-b / shape).ln() - shape - 1.0)
}

fn mean_log(x: &[f64], b: f64) -> f64 {
    sum_by(x.len(), |i| (-b * x[i]).ln_1p()) / x.len() as f64
}

fn mean(x: &[f64]) -> f64 {
    sum(x) / x.len() as f64
}
