//! One column left out under any base weights, with anything scored.

use super::deletion_column::{Known, Scored, Work, spread};
use super::deletion_loops::Exponentials;
use super::deletion_survey::{Survey, maximum_of};
use super::error::KernelError;
use super::ordered::{Interrupt, sum};
use super::vector::dispatch;
use super::vector::dot::dot;
use super::vector::exp::exp_slice;

impl Work<'_> {
    /// Any base weights, and anything that is scored.
    pub(super) fn general(
        &mut self,
        x: &mut [f64],
        scored: Option<&[f64]>,
        survey: Survey,
        interrupt: &Interrupt<'_>,
    ) -> Result<Known, KernelError> {
        self.make_room();
        let base = &self.shared.base;
        let own = self.own(x, scored);
        let (raw_total, _) = dispatch(Exponentials {
            x,
            largest: survey.largest,
            weights: &mut self.weights,
        });
        let shares = match scored {
            None => base.iter(),
            Some(_) => {
                let (_, sum) = self.joint(x, &own);
                self.series.iter_mut().for_each(|share| *share /= sum);
                self.series.iter()
            }
        };
        for ((sum, share), weight) in self.raw.iter_mut().zip(shares).zip(&self.weights) {
            *sum += share - weight / raw_total;
        }
        let smoothed = self.smoothed(x, survey.spread(survey.largest), interrupt)?;
        let (top, joint) = self.joint(x, &own);
        let highest = maximum_of(&own);
        for (target, value) in self.density.iter_mut().zip(&own) {
            *target = value - highest;
        }
        exp_slice(&mut self.density);
        let squares = dot(&self.series, &self.density);
        let density = dot(&self.density, base);
        for ((sum, value), v) in self.in_sample.iter_mut().zip(&self.density).zip(base) {
            *sum += v * value / density - v;
        }
        let total = smoothed.sums.total;
        for (entry, weight) in self.series.iter_mut().zip(&self.weights) {
            *entry = *entry / joint - weight / total;
        }
        let scores = Scored {
            score: top + joint.ln() - total.ln(),
            in_sample: highest + density.ln(),
            spread: spread(highest - top, squares * total, joint),
        };
        let powers = self.keep(x);
        Ok((smoothed, scores, powers))
    }

    /// Log densities of what is scored; where that is what was deleted, `x` with the base weights put
    /// back. Draws without weight have none.
    fn own(&self, x: &[f64], scored: Option<&[f64]>) -> Vec<f64> {
        let logs = self.shared.log_weights.unwrap_or(&[]);
        let value = |s: usize| match (scored, logs.get(s)) {
            (_, Some(&f64::NEG_INFINITY)) => f64::NEG_INFINITY,
            (Some(scored), _) => scored[s],
            (None, log) => log.copied().unwrap_or(0.0) - x[s],
        };
        (0..x.len()).map(value).collect()
    }

    /// Writes `exp(x + own)` over its largest into `series`; that largest logarithm, and the sum.
    fn joint(&mut self, x: &[f64], own: &[f64]) -> (f64, f64) {
        for ((target, ratio), value) in self.series.iter_mut().zip(x).zip(own) {
            *target = ratio + value;
        }
        let top = maximum_of(&self.series);
        self.series.iter_mut().for_each(|target| *target -= top);
        exp_slice(&mut self.series);
        (top, sum(&self.series))
    }
}
