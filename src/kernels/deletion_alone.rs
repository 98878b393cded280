//! One column left out, equal base weights, and what is scored is what is deleted.
//!
//! A draw whose weight is not replaced has `w exp(L)` the same as any other such draw: only the tail is
//! looked at. The series of a few columns are added to the totals together, while their weights lie
//! in the second cache.

use super::deletion::{FIGURES, Order};
use super::deletion_alone_loops::{Both, GROUP, Member, Totals};
use super::deletion_column::{Replaced, Scored, Smoothed, Work, spread};
use super::deletion_error::contributions;
use super::deletion_loops::Weighed;
use super::deletion_survey::Survey;
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::dispatch;

/// A column of which all is known but the sums over its series.
#[derive(Default)]
pub(super) struct Pending {
    /// Weights, in the tail such that `left_out[0] − left_out[1] w` is the series there too.
    weights: Vec<f64>,
    density: Vec<f64>,
    left_out: [f64; 2],
    raw: f64,
    in_sample: f64,
    column: usize,
    /// Whether error and contributions follow from the sums: draws are independent.
    lacks_error: bool,
}

/// Sums over a column before it is smoothed.
struct Raw {
    total: f64,
    density: f64,
    largest: f64,
}

impl Work<'_> {
    /// Takes log densities, which are finite.
    pub(super) fn alone(
        &mut self,
        x: &mut [f64],
        survey: Survey,
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        let (sums, density) = dispatch(Both {
            x,
            largest: survey.largest,
            weights: &mut self.weights,
            density: &mut self.density,
        });
        let smoothed = self.smoothed(x, survey.spread(), Some(&sums), interrupt)?;
        self.keep_weights(smoothed.sums.total, x);
        let raw = Raw {
            total: sums.total,
            density,
            largest: survey.largest,
        };
        let scale = self.scale(&smoothed);
        let scores = self.scores(&smoothed, &raw, scale);
        let mut pending = self.set_tail(&smoothed, &raw, scale);
        let (mut error, mut contributions) = (f64::NAN, f64::NAN);
        if !pending.lacks_error {
            let [constant, factor] = pending.left_out;
            dispatch(Weighed {
                weights: &self.weights,
                constant,
                factor,
                out: &mut self.series,
            });
            (error, contributions) = self.error(smoothed.efficiency, interrupt)?;
        }
        let mut found = [0.0; FIGURES];
        found[..FIGURES - 1].copy_from_slice(&smoothed.figures(&scores, error, contributions));
        self.figures.push(found);
        std::mem::swap(&mut pending.weights, &mut self.weights);
        std::mem::swap(&mut pending.density, &mut self.density);
        self.pending.push(pending);
        if self.pending.len() == GROUP {
            self.add_pending();
        }
        Ok(())
    }

    /// `Σ w exp(L)` in units of the ratios.
    fn scale(&self, smoothed: &Smoothed) -> f64 {
        let body = smoothed.unit * (self.weights.len() - self.tail.len()) as f64;
        body + self.tail.iter().map(|draw| draw.ratio).sum::<f64>()
    }

    fn scores(&self, smoothed: &Smoothed, raw: &Raw, scale: f64) -> Scored {
        let extra = |draw: &Replaced| (draw.ratio - smoothed.unit) * self.density[draw.index];
        let squares = smoothed.unit * raw.density + self.tail.iter().map(extra).sum::<f64>();
        let (total, count) = (smoothed.sums.total, self.weights.len() as f64);
        Scored {
            score: smoothed.lift - raw.largest - smoothed.shift + scale.ln() - total.ln(),
            in_sample: -raw.largest + (raw.density / count).ln(),
            spread: spread(smoothed.shift - smoothed.lift, squares * total, scale),
        }
    }

    /// Changes the weights of the tail such that the series is one formula for all draws, and adds
    /// what the series of raw weights then lacks.
    fn set_tail(&mut self, smoothed: &Smoothed, raw: &Raw, scale: f64) -> Pending {
        let total = smoothed.sums.total;
        let of_raw = smoothed.shift.exp() / raw.total;
        for draw in &self.tail {
            let weight = &mut self.weights[draw.index];
            *weight += total * (smoothed.unit - draw.ratio) / scale;
            self.raw[draw.index] += of_raw * *weight - draw.raw / raw.total;
        }
        let (mut weights, mut density) = self.spare.pop().unwrap_or_default();
        let draws = self.weights.len();
        weights.resize(draws, 0.0);
        density.resize(draws, 0.0);
        Pending {
            weights,
            density,
            left_out: [smoothed.unit / scale, 1.0 / total],
            raw: of_raw,
            in_sample: 1.0 / raw.density,
            column: self.figures.len(),
            lacks_error: matches!(self.shared.order, Order::Independent),
        }
    }

    /// Adds the series of the columns that wait for it.
    pub(super) fn add_pending(&mut self) {
        let equal = 1.0 / self.left_out.len() as f64;
        let nothing = Member {
            weights: &self.shared.base,
            density: &self.shared.base,
            left_out: [0.0; 2],
            raw: 0.0,
            in_sample: 0.0,
            equal: 0.0,
        };
        let mut members = [nothing; GROUP];
        for (member, pending) in members.iter_mut().zip(&self.pending) {
            *member = Member {
                weights: &pending.weights,
                density: &pending.density,
                left_out: pending.left_out,
                raw: pending.raw,
                in_sample: pending.in_sample,
                equal,
            };
        }
        let sums = dispatch(Totals {
            members,
            totals: [&mut self.left_out, &mut self.raw, &mut self.in_sample],
        });
        for (pending, [squares, cubes]) in self.pending.drain(..).zip(sums) {
            if pending.lacks_error {
                let figures = &mut self.figures[pending.column];
                figures[1] = squares.sqrt();
                figures[8] = contributions((squares, cubes));
            }
            self.spare.push((pending.weights, pending.density));
        }
    }
}
