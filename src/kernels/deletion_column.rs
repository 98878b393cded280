//! One column left out: weights, smoothed, and what follows from them while they lie in the cache.

use super::deletion::{Base, FIGURES, Order, fault};
use super::deletion_lags::{Lagged, Layout};
use super::deletion_loops::{
    AddBoth, Density, Exponentials, Finite, Moments, Powers, Ratios, Scaled, Sums, Survey, Weighed,
    maximum_of,
};
use super::error::KernelError;
use super::largest::{Ranked, Spread};
use super::ordered::{Interrupt, sum};
use super::tail::{Fitted, Room, Scale, tail_length, with_room};
use super::vector::dispatch;
use super::vector::dot::dot;
use super::vector::exp::exp_slice;

/// Weights whose largest is below `exp` of this are formed anew from it: squares of far smaller ones
/// would vanish.
const FAR_BELOW: f64 = -20.0;

/// Ratios of smoothed to raw weights are taken in units of the largest where that is beyond `exp` of
/// this.
const FAR_ABOVE: f64 = 300.0;

/// What all columns share.
pub struct Shared<'a> {
    /// Normalised base weights.
    pub base: Vec<f64>,
    log_weights: Option<&'a [f64]>,
    order: Order<'a>,
    layout: Option<&'a Layout>,
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
    shared: &'a Shared<'a>,
    lagged: Option<Lagged<'a>>,
    /// Weights on the scale on which the largest log weight is 0.
    weights: Vec<f64>,
    /// Densities of what is scored, the largest 1.
    density: Vec<f64>,
    /// An influence series.
    series: Vec<f64>,
    left_out: Vec<f64>,
    raw: Vec<f64>,
    in_sample: Vec<f64>,
    /// Draws of the tail of the column at hand.
    tail: Vec<Replaced>,
    ratios: Vec<f64>,
    keeps_weights: bool,
}

/// What is known of a column once its weights are smoothed.
struct Smoothed {
    /// How far the logarithms were shifted beyond the largest log ratio.
    shift: f64,
    sums: Sums,
    /// What the ratios in the tail are in units of: 1, or the largest where that would overflow.
    /// Its logarithm and its inverse.
    lift: f64,
    unit: f64,
    shape: f64,
    efficiency: f64,
    p_value: f64,
    /// Largest of the smoothed logarithms, on their own scale.
    top: f64,
}

/// A draw of the tail, and its smoothed weight over its raw one.
struct Replaced {
    index: usize,
    ratio: f64,
}

/// Scores of a column; `series` of [`Work`] then holds the influence of the left-out one.
struct Scored {
    score: f64,
    in_sample: f64,
    spread: f64,
}

impl<'a> Work<'a> {
    /// Room for columns of these draws; `keeps_weights` if columns are to hold `n (w − v)` at the end.
    pub fn new(shared: &'a Shared<'a>, keeps_weights: bool) -> Self {
        let zeros = || vec![0.0; shared.draws()];
        Self {
            shared,
            lagged: shared.layout.map(Lagged::new),
            weights: zeros(),
            density: zeros(),
            series: zeros(),
            left_out: zeros(),
            raw: zeros(),
            in_sample: zeros(),
            tail: Vec::new(),
            ratios: Vec::new(),
            keeps_weights,
        }
    }

    /// Series summed over the columns done: left-out score, raw weights, in-sample score.
    pub fn totals(self) -> [Vec<f64>; 3] {
        let count = self.left_out.len() as f64;
        [self.left_out, self.raw, self.in_sample]
            .map(|sums| sums.into_iter().map(|sum| count * sum).collect())
    }

    /// Figures of a column of log densities, which is overwritten.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`], [`KernelError::Memory`].
    pub fn column(
        &mut self,
        held: &mut [f64],
        scored: Option<&[f64]>,
        interrupt: &Interrupt<'_>,
    ) -> Result<[f64; FIGURES], KernelError> {
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
            return Ok(found);
        }
        let (smoothed, scores) = match (scored, self.shared.log_weights) {
            (None, None) => self.alone(held, survey, interrupt)?,
            _ => self.general(held, scored, survey, interrupt)?,
        };
        let (error, contributions) = self.error(smoothed.efficiency, interrupt)?;
        if self.keeps_weights {
            dispatch(Scaled {
                weights: &self.weights,
                base: &self.shared.base,
                total: smoothed.sums.total,
                out: held,
            });
        }
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
        Ok(found)
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
    fn survey(&self, x: &mut [f64]) -> Survey {
        dispatch(Ratios {
            x,
            log_weights: self.shared.log_weights,
        })
    }

    /// Equal base weights, and what is scored is what is deleted. A draw whose weight is not replaced
    /// has `w exp(L)` the same as any other such draw: only the tail is looked at.
    fn alone(
        &mut self,
        x: &mut [f64],
        survey: Survey,
        interrupt: &Interrupt<'_>,
    ) -> Result<(Smoothed, Scored), KernelError> {
        let (count, largest) = (x.len() as f64, survey.largest);
        let (raw_total, least) = dispatch(Exponentials {
            x,
            largest,
            weights: &mut self.weights,
        });
        let density = dispatch(Density {
            x,
            least,
            density: &mut self.density,
        });
        dispatch(AddBoth {
            weights: (&self.weights, raw_total),
            density: (&self.density, density),
            raw: &mut self.raw,
            in_sample: &mut self.in_sample,
        });
        let smoothed = self.smoothed(x, survey.spread(), interrupt)?;
        let body = smoothed.unit * (count - self.tail.len() as f64);
        let scale = body + self.tail.iter().map(|draw| draw.ratio).sum::<f64>();
        let total = smoothed.sums.total;
        let extra = |draw: &Replaced| (draw.ratio - smoothed.unit) * self.density[draw.index];
        let squares = smoothed.unit * density + self.tail.iter().map(extra).sum::<f64>();
        let lift = smoothed.lift;
        let rest = lift - largest - smoothed.shift;
        let scores = Scored {
            score: rest + scale.ln() - total.ln(),
            in_sample: -(largest + least) + (density / count).ln(),
            spread: spread(smoothed.shift - lift - least, squares * total, scale),
        };
        dispatch(Weighed {
            weights: &self.weights,
            constant: smoothed.unit / scale,
            factor: 1.0 / total,
            out: &mut self.series,
        });
        for draw in &self.tail {
            let weight = self.weights[draw.index] / total;
            self.series[draw.index] = draw.ratio / scale - weight;
        }
        Ok((smoothed, scores))
    }

    /// Any base weights, and anything that is scored.
    fn general(
        &mut self,
        x: &mut [f64],
        scored: Option<&[f64]>,
        survey: Survey,
        interrupt: &Interrupt<'_>,
    ) -> Result<(Smoothed, Scored), KernelError> {
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
        let smoothed = self.smoothed(x, survey.spread(), interrupt)?;
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
        Ok((smoothed, scores))
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

    /// Smooths the logarithms `x`, largest 0, and the weights; with their sums.
    fn smoothed(
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
            let fitted = tail_of(x, spread, efficiency, room);
            let Fitted::Fitted { cutoff, fit } = fitted else {
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

    /// Monte Carlo error and contributions of the series `n z`, which is added to the total.
    fn error(
        &mut self,
        efficiency: f64,
        interrupt: &Interrupt<'_>,
    ) -> Result<(f64, f64), KernelError> {
        let mut powers = dispatch(Powers {
            z: &self.series,
            to: &mut self.left_out,
        });
        let count = self.series.len() as f64;
        if let Order::Repeated(repeats) = self.shared.order {
            let mut sums = vec![0.0; self.series.len()];
            for (entry, &repeat) in self.series.iter().zip(repeats) {
                if let Some(sum) = usize::try_from(repeat).ok().and_then(|r| sums.get_mut(r)) {
                    *sum += entry;
                }
            }
            powers = dispatch(Powers {
                z: &sums,
                to: &mut [],
            });
        }
        // The series is the influence over n, and its mean is 0.
        let variance = match &mut self.lagged {
            Some(lagged) => {
                lagged.take(&self.series);
                count * lagged.long_run(&self.series, interrupt)?
            }
            None => powers.0,
        };
        Ok((variance.sqrt(), efficiency.sqrt() * contributions(powers)))
    }
}

/// `exp(shift) squares/mean² − 1`, the variance of a density over its squared mean.
fn spread(shift: f64, squares: f64, mean: f64) -> f64 {
    (shift + squares.ln() - 2.0 * mean.ln()).max(0.0).exp_m1()
}

/// `(Σ z²)³/(Σ z³)²`; `+inf` for a symmetric series.
fn contributions((squares, cubes): (f64, f64)) -> f64 {
    if squares == 0.0 || cubes == 0.0 {
        return f64::INFINITY;
    }
    squares.powi(3) / (cubes * cubes)
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

/// The tail of log weights whose largest is 0, as [`super::smooth::smooth`] finds it.
fn tail_of(x: &[f64], spread: Option<Spread>, efficiency: f64, room: &mut Room) -> Fitted {
    let length = tail_length(x.len(), efficiency);
    let tail = room.fit(x, length, Scale::Log(0.0), spread);
    match tail {
        Fitted::Fitted { cutoff, .. } if cutoff > -700.0 => return tail,
        Fitted::Constant => return tail,
        _ => {}
    }
    let positive = x.iter().filter(|&&x| x.exp() > 0.0).count();
    if positive > length {
        return tail;
    }
    room.fit(x, positive.saturating_sub(1), Scale::Log(0.0), None)
}
