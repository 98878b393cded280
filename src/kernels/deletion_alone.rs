//! One column left out under equal base weights, where what is scored is what is deleted: whatever it
//! holds. Columns of the common kind are left to [`super::deletion_common`].

use super::deletion_column::{Known, Replaced, Scored, Work, spread};
use super::deletion_loops::{AddBoth, Density, Exponentials, Powers, Weighed};
use super::deletion_survey::Survey;
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::dispatch;

impl Work<'_> {
    /// A draw whose weight is not replaced has `w exp(L)` the same as any other such draw: only the
    /// tail is looked at.
    pub(super) fn alone(
        &mut self,
        x: &mut [f64],
        survey: Survey,
        interrupt: &Interrupt<'_>,
    ) -> Result<Known, KernelError> {
        self.make_room();
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
        let smoothed = self.smoothed(x, survey.spread(largest), interrupt)?;
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
        let powers = self.keep(x);
        Ok((smoothed, scores, powers))
    }

    /// Leaves the weights in the column, and adds the series to its total.
    pub(super) fn keep(&mut self, x: &mut [f64]) -> (f64, f64) {
        x.copy_from_slice(&self.weights);
        dispatch(Powers {
            z: &self.series,
            to: &mut self.left_out,
        })
    }
}
