//! Smoothing one column where it lies, weights and logarithms at once.

use super::deletion_column::{Replaced, Smoothed, Work};
use super::deletion_loops::{Exponentials, Moments};
use super::deletion_survey::maximum_of;
use super::error::KernelError;
use super::largest::{Ranked, Spread};
use super::ordered::Interrupt;
use super::smooth::tail_of;
use super::tail::{Found, with_room};
use super::vector::dispatch;
use super::vector::exp::exp_slice;

/// Weights whose largest is below `exp` of this are formed anew from it: squares of far smaller ones
/// would vanish.
pub(super) const FAR_BELOW: f64 = -20.0;

/// Ratios of smoothed to raw weights are taken in units of the largest where that is beyond `exp` of
/// this.
pub(super) const FAR_ABOVE: f64 = 300.0;

impl Work<'_> {
    /// Smooths the logarithms `x`, largest 0, and the weights; with their sums.
    pub(super) fn smoothed(
        &mut self,
        x: &mut [f64],
        spread: Option<Spread>,
        interrupt: &Interrupt<'_>,
    ) -> Result<Smoothed, KernelError> {
        let (mut efficiency, mut p_value) = (1.0, 1.0);
        if let Some(lagged) = &mut self.lagged {
            lagged.take(&self.weights);
            efficiency = lagged.efficiency(&self.weights, interrupt)?;
            p_value = lagged.chains_p_value(&self.weights, 1.0, interrupt)?;
        }
        let (mut top, mut shift, mut lift) = (0.0, 0.0, 0.0);
        self.tail.clear();
        let (weights, tail, ratios) = (&mut self.weights, &mut self.tail, &mut self.ratios);
        let shape = with_room(|room| {
            let fitted = tail_of(x, 0.0, spread, efficiency, room);
            let Found::Fitted { cutoff, fit } = fitted else {
                return fitted.shape();
            };
            let ranked = &room.finder.ranked;
            let logs = room.quantiles.logs(fit, cutoff.exp(), ranked.len());
            top = logs.iter().copied().fold(cutoff, f64::max);
            shift = if top < FAR_BELOW { top } else { 0.0 };
            lift = exponentials(ranked, logs, ratios);
            let (smooth, ratios) = ratios.split_at(logs.len());
            for (rank, &(_, index)) in ranked.iter().enumerate() {
                let index = index as usize;
                x[index] = logs[rank];
                weights[index] = smooth[rank];
                let ratio = ratios[rank];
                tail.push(Replaced { index, ratio });
            }
            fitted.shape()
        });
        if shift != 0.0 {
            dispatch(Exponentials {
                x,
                largest: shift,
                weights: &mut self.weights,
            });
        }
        Ok(Smoothed {
            shift,
            sums: dispatch(Moments {
                x,
                weights: &self.weights,
            }),
            lift,
            unit: (-lift).exp(),
            shape,
            efficiency,
            p_value,
            top: top - shift,
        })
    }
}

/// Writes the exponentials of the smoothed logarithms and, behind them, of what they are above the
/// raw ones, in units of the largest where that would overflow; the logarithm of the unit.
fn exponentials(ranked: &[Ranked], logs: &[f64], into: &mut Vec<f64>) -> f64 {
    into.clear();
    into.extend_from_slice(logs);
    into.extend(ranked.iter().zip(logs).map(|(draw, log)| log - draw.0));
    let ratios = &mut into[logs.len()..];
    let most = maximum_of(ratios);
    let unit = if most > FAR_ABOVE { most } else { 0.0 };
    ratios.iter_mut().for_each(|ratio| *ratio -= unit);
    exp_slice(into);
    unit
}
