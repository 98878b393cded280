//! One column left out: weights, smoothed, and what follows from them while they lie in the cache.

use super::deletion::{Base, FIGURES, Order, fault};
use super::deletion_lags::{Lagged, Layout};
use super::deletion_loops::Sums;
use super::deletion_survey::{Finite, Ratios, Survey};
use super::deletion_tail::TailDraws;
use super::deletion_totals::Deferred;
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::dispatch;

/// What all columns share.
pub struct Shared<'a> {
    /// Normalised base weights.
    pub base: Vec<f64>,
    pub(super) log_weights: Option<&'a [f64]>,
    pub(super) order: Order<'a>,
    pub(super) layout: Option<&'a Layout>,
}

impl<'a> Shared<'a> {
    /// From the base and the layout of its chains, if it has an order.
    pub fn new(base: Base<'a>, draws: usize, layout: Option<&'a Layout>) -> Self {
        let equal = || vec![1.0 / draws as f64; draws];
        let weights = base
            .log_weights
            .map_or_else(equal, |logs| logs.iter().map(|log| log.exp()).collect());
        Self {
            base: weights,
            log_weights: base.log_weights,
            order: base.order,
            layout,
        }
    }

    fn draws(&self) -> usize {
        self.base.len()
    }
}

/// Room for the work on columns, and the sums over those that are done.
pub struct Work<'a> {
    pub(super) shared: &'a Shared<'a>,
    pub(super) lagged: Option<Lagged<'a>>,
    /// Weights on the scale on which the largest log weight is 0.
    pub(super) weights: Vec<f64>,
    /// Densities of what is scored, the largest 1.
    pub(super) density: Vec<f64>,
    /// An influence series.
    pub(super) series: Vec<f64>,
    pub(super) left_out: Vec<f64>,
    pub(super) raw: Vec<f64>,
    pub(super) in_sample: Vec<f64>,
    /// Draws of the tail of the column at hand.
    pub(super) tail: Vec<Replaced>,
    pub(super) ratios: Vec<f64>,
    /// The same of a column of the common kind.
    pub(super) draws: TailDraws,
    pub(super) deferred: Deferred,
}

/// What is known of a column once its weights are smoothed.
pub(super) struct Smoothed {
    /// How far the logarithms were shifted beyond the largest log ratio.
    pub(super) shift: f64,
    pub(super) sums: Sums,
    /// What the ratios in the tail are in units of: 1, or the largest where that would overflow.
    /// Its logarithm and its inverse.
    pub(super) lift: f64,
    pub(super) unit: f64,
    pub(super) shape: f64,
    pub(super) efficiency: f64,
    pub(super) p_value: f64,
    /// Largest of the smoothed logarithms, on their own scale.
    pub(super) top: f64,
}

impl Smoothed {
    /// Where nothing had to be shifted.
    pub(super) fn plain(sums: Sums, shape: f64, top: f64, agreement: (f64, f64)) -> Self {
        let (efficiency, p_value) = agreement;
        Self {
            shift: 0.0,
            sums,
            lift: 0.0,
            unit: 1.0,
            shape,
            efficiency,
            p_value,
            top,
        }
    }
}

/// A draw of the tail, and its smoothed weight over its raw one.
pub(super) struct Replaced {
    pub(super) index: usize,
    pub(super) ratio: f64,
}

/// Weights of a column, its scores, `Σ z²` and `Σ z³` of its series.
pub(super) type Known = (Smoothed, Scored, (f64, f64));

/// Scores of a column; `series` of [`Work`] then holds the influence of the left-out one.
pub(super) struct Scored {
    pub(super) score: f64,
    pub(super) in_sample: f64,
    pub(super) spread: f64,
}

impl<'a> Work<'a> {
    /// Room for columns of these draws.
    pub fn new(shared: &'a Shared<'a>) -> Self {
        let zeros = || vec![0.0; shared.draws()];
        Self {
            shared,
            lagged: shared.layout.map(Lagged::new),
            weights: Vec::new(),
            density: Vec::new(),
            series: Vec::new(),
            left_out: zeros(),
            raw: zeros(),
            in_sample: zeros(),
            tail: Vec::new(),
            ratios: Vec::new(),
            draws: TailDraws::default(),
            deferred: Deferred::new(shared.draws()),
        }
    }

    /// Room for what not every column needs.
    pub(super) fn make_room(&mut self) {
        let draws = self.shared.draws();
        for room in [&mut self.weights, &mut self.density, &mut self.series] {
            room.resize(draws, 0.0);
        }
    }

    /// Series summed over the columns done: left-out score, raw weights, in-sample score.
    pub fn totals(self) -> [Vec<f64>; 3] {
        let count = self.left_out.len() as f64;
        [self.left_out, self.raw, self.in_sample]
            .map(|sums| sums.into_iter().map(|sum| count * sum).collect())
    }

    /// Figures of a column of log densities, which is overwritten; and what its weights then have to
    /// be multiplied by to have mean 1. Totals may lack it until [`Self::settle`], for which `place`
    /// is kept in mind. Meanwhile the `next` column is asked for.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`], [`KernelError::Memory`].
    pub fn column(
        &mut self,
        held: &mut [f64],
        (place, next): (usize, &[f64]),
        scored: Option<&[f64]>,
        interrupt: &Interrupt<'_>,
    ) -> Result<([f64; FIGURES], f64), KernelError> {
        let mut found = [f64::NAN; FIGURES];
        let mut faults = scored.map_or(0, |scored| self.faults(scored) & !fault::IMPOSSIBLE);
        if self.shared.log_weights.is_some() {
            faults |= self.faults(held);
        }
        let mut survey = self.survey(held);
        if !survey.is_finite() && self.shared.log_weights.is_none() {
            held.iter_mut().for_each(|entry| *entry = -*entry);
            faults |= self.faults(held);
            survey = self.survey(held);
        }
        if survey.largest == f64::NEG_INFINITY {
            faults |= fault::IMPOSSIBLE;
        }
        found[11] = f64::from(faults);
        if faults & (fault::NAN | fault::IMPOSSIBLE) != 0 {
            held.fill(f64::NAN);
            return Ok((found, f64::NAN));
        }
        if self.lagged.is_some() || !matches!(self.shared.order, Order::Independent) {
            self.make_room();
        }
        let known = match (scored, self.shared.log_weights) {
            (None, None) => self.common(held, (place, next), survey, interrupt)?,
            _ => None,
        };
        let (smoothed, scores, powers) = match (known, scored, self.shared.log_weights) {
            (Some(known), _, _) => known,
            (None, None, None) => self.alone(held, survey, interrupt)?,
            _ => self.general(held, scored, survey, interrupt)?,
        };
        let (error, contributions) = self.error(powers, smoothed.efficiency, interrupt)?;
        let sums = &smoothed.sums;
        found[..11].copy_from_slice(&[
            scores.score,
            error,
            scores.in_sample,
            smoothed.shape,
            sums.total * sums.total / sums.squares,
            (sums.total.ln() - sums.spread / sums.total).exp(),
            smoothed.top.exp() / sums.total,
            scores.spread,
            contributions,
            smoothed.efficiency,
            smoothed.p_value,
        ]);
        Ok((found, held.len() as f64 / sums.total))
    }

    fn faults(&self, x: &[f64]) -> u8 {
        if dispatch(Finite(x)) {
            return 0;
        }
        let mut found = 0;
        for (entry, weight) in x.iter().zip(&self.shared.base) {
            found |= match *entry {
                x if x.is_nan() => fault::NAN,
                f64::INFINITY => fault::INFINITE,
                f64::NEG_INFINITY if *weight > 0.0 => fault::IMPOSSIBLE,
                _ => 0,
            };
        }
        found
    }

    /// Log densities to log ratios, and what they look like.
    fn survey(&mut self, x: &mut [f64]) -> Survey {
        dispatch(Ratios {
            x,
            log_weights: self.shared.log_weights,
        })
    }
}

/// `exp(shift) squares/mean² − 1`, the variance of a density over its squared mean.
pub(super) fn spread(shift: f64, squares: f64, mean: f64) -> f64 {
    (shift + squares.ln() - 2.0 * mean.ln()).max(0.0).exp_m1()
}
