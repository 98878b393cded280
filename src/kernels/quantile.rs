//! The weighted empirical distribution, and its quantiles.

use super::error::KernelError;
use super::ordered::{Interrupt, sum_by};
use super::sorting;

/// Draws between two looks at the caller's wish to stop.
pub(super) const PART: usize = 65_536;

/// Quantiles at `probs`, shape `(m,)`, of the draws `x` with weights `w`, both of shape `(n,)`,
/// written into `out`, shape `(m,)`. Weights are on the natural scale, not necessarily normalised.
///
/// The distribution passes through the midpoints `F(x_(i)) = (Σ_{j<i} w_(j) + w_(i)/2) / Σ w` of
/// the sorted distinct values and is linear between them; equal values share one step, their
/// weights added. Below the first midpoint the quantile is the smallest value, above the last the
/// largest. Draws of weight 0 are skipped. A NaN among `x` where `w > 0`, a NaN in `probs`, bad
/// weights, no positive weight or an impossible order give NaN.
///
/// Source: Hyndman & Fan (1996), American Statistician 50, 361-365, type 5, which this is when
/// weights are equal and values distinct.
///
/// `order` are the indices of `x` in ascending order of value, where they are known.
pub fn quantile(
    x: &[f64],
    w: &[f64],
    order: Option<&[u32]>,
    probs: impl Iterator<Item = f64>,
    out: &mut [f64],
) {
    // A watch that never stops anything.
    let _ = quantile_unless(x, w, order, probs, out, &Interrupt::never());
}

/// As [`quantile`], for long columns.
///
/// # Errors
/// [`KernelError::Interrupted`].
pub fn quantile_unless(
    x: &[f64],
    w: &[f64],
    order: Option<&[u32]>,
    probs: impl Iterator<Item = f64>,
    out: &mut [f64],
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    match Steps::new(x, w, order, interrupt)? {
        None => out.fill(f64::NAN),
        Some(steps) => {
            for (target, prob) in out.iter_mut().zip(probs) {
                *target = steps.quantile(prob);
            }
        }
    }
    Ok(())
}

/// A weighted empirical distribution: distinct values in ascending order, with the weight up to
/// and including each.
pub(super) struct Steps {
    values: Vec<f64>,
    /// `cumulated[i]` is the weight below `values[i]`; one longer than `values`.
    cumulated: Vec<f64>,
}

impl Steps {
    /// Nothing when a draw that counts is NaN, when a weight is negative or not finite, when no
    /// weight is positive, or when `order` leads outside.
    pub(super) fn new(
        x: &[f64],
        w: &[f64],
        order: Option<&[u32]>,
        interrupt: &Interrupt<'_>,
    ) -> Result<Option<Self>, KernelError> {
        let found;
        let order = match order {
            Some(order) => order,
            None => {
                found = sorting::order_unless(x, interrupt)?;
                &found
            }
        };
        let mut draws: Vec<(f64, f64)> = Vec::with_capacity(x.len());
        for part in order.chunks(PART) {
            interrupt.check()?;
            for &index in part {
                let pair = (x.get(index as usize), w.get(index as usize));
                let (Some(&value), Some(&weight)) = pair else {
                    return Ok(None);
                };
                if !(weight >= 0.0 && weight.is_finite()) || (weight > 0.0 && value.is_nan()) {
                    return Ok(None);
                }
                if weight > 0.0 {
                    draws.push((value, weight));
                }
            }
        }
        let steps = Self::merged(&draws, interrupt)?;
        let total = steps.total();
        Ok((total > 0.0 && total.is_finite()).then_some(steps))
    }

    fn merged(draws: &[(f64, f64)], interrupt: &Interrupt<'_>) -> Result<Self, KernelError> {
        let mut values = Vec::with_capacity(draws.len());
        let mut cumulated = Vec::with_capacity(draws.len() + 1);
        let mut below = Compensated::default();
        cumulated.push(0.0);
        for tied in draws.chunk_by(|a, b| a.0 == b.0) {
            if values.len().is_multiple_of(PART) {
                interrupt.check()?;
            }
            values.push(tied[0].0);
            below.add(sum_by(tied.len(), |i| tied[i].1));
            cumulated.push(below.value());
        }
        Ok(Self { values, cumulated })
    }

    pub(super) fn len(&self) -> usize {
        self.values.len()
    }

    pub(super) fn value(&self, index: usize) -> f64 {
        self.values[index]
    }

    pub(super) fn total(&self) -> f64 {
        self.cumulated.last().copied().unwrap_or(0.0)
    }

    /// Weight of the values `lower..=upper`.
    pub(super) fn mass(&self, lower: usize, upper: usize) -> f64 {
        self.cumulated[upper + 1] - self.cumulated[lower]
    }

    fn midpoint(&self, index: usize) -> f64 {
        0.5 * (self.cumulated[index] + self.cumulated[index + 1])
    }

    fn quantile(&self, prob: f64) -> f64 {
        if prob.is_nan() {
            return f64::NAN;
        }
        let target = prob * self.total();
        // Number of midpoints below the target; they rise, since every step has positive weight.
        let mut above = 0;
        let mut end = self.len();
        while above < end {
            let middle = above + (end - above) / 2;
            if self.midpoint(middle) < target {
                above = middle + 1;
            } else {
                end = middle;
            }
        }
        if above == 0 {
            return self.values[0];
        }
        if above == self.len() {
            return self.values[above - 1];
        }
        let (low, high) = (self.midpoint(above - 1), self.midpoint(above));
        let share = (target - low) / (high - low);
        interpolate(self.values[above - 1], self.values[above], share)
    }
}

/// `a + share (b − a)` for `share` in `(0, 1]`, exact at 1 and without overflow.
pub(super) fn interpolate(a: f64, b: f64, share: f64) -> f64 {
    if share >= 1.0 {
        return b;
    }
    if (a < 0.0) == (b < 0.0) {
        return (a + share * (b - a)).min(b);
    }
    (1.0 - share) * a + share * b
}

/// A running sum that carries its own rounding error along (Neumaier 1974, ZAMM 54, 39-51).
#[derive(Default)]
pub(super) struct Compensated {
    sum: f64,
    lost: f64,
}

impl Compensated {
    pub(super) fn add(&mut self, term: f64) {
        let next = self.sum + term;
        self.lost += if self.sum.abs() >= term.abs() {
            (self.sum - next) + term
        } else {
            (term - next) + self.sum
        };
        self.sum = next;
    }

    pub(super) fn value(&self) -> f64 {
        self.sum + self.lost
    }
}
