//! What the sums of an influence series say of it.

/// Sums of a series `z` in one pass.
#[derive(Debug, Clone, Copy, Default)]
pub struct Moments {
    pub(super) count: f64,
    pub(super) first: f64,
    pub(super) second: f64,
    pub(super) third: f64,
    /// `Σ z ψ` of the pass that formed it.
    pub beside: f64,
    /// The largest `|z|`.
    pub largest: f64,
}

impl Moments {
    /// `Σ (z − z̄)²/n`; 0 without entries.
    pub fn variance(&self) -> f64 {
        if self.count == 0.0 {
            return 0.0;
        }
        (self.second - self.first * (self.first / self.count)) / self.count
    }

    /// `(Σ c²)³/(Σ c³)²` of the centred series, as [`super::mean::contributions`]: exact enough
    /// since such a series is centred already, but for rounding. `+inf` for a constant series; NaN
    /// where a power leaves the range of numbers.
    pub fn contributions(&self) -> f64 {
        let mean = self.first / self.count;
        let second = self.second - self.first * mean;
        if self.second == 0.0 {
            return f64::INFINITY;
        }
        let third = self.third - mean * (3.0 * self.second - 2.0 * self.first * mean);
        if !(third.is_finite() && second > f64::MIN_POSITIVE) {
            return f64::NAN;
        }
        let ratio = second / third;
        second * ratio * ratio
    }
}
