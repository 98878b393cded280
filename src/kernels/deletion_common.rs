//! One column left out as in [`super::deletion_alone`], where log ratios are neither far apart nor
//! huge: weights and their inverses are then on one scale, and neither they nor their squares leave
//! the numbers.

use super::deletion::Order;
use super::deletion_column::{Known, Scored, Smoothed, Work, spread};
use super::deletion_loops::{Powers, Sums, Weighed};
use super::deletion_pair::{Both, HIDDEN, Pair, Raw, WeighedPowers};
use super::deletion_smooth::FAR_BELOW;
use super::deletion_survey::Survey;
use super::deletion_tail::TailSums;
use super::deletion_totals::Column;
use super::error::KernelError;
use super::ordered::Interrupt;
use super::smooth::tail_of;
use super::tail::{Found, with_room};
use super::vector::dispatch;

/// How far apart log ratios are here at most, and how large.
const MOST_RANGE: f64 = 300.0;
const MOST_LARGEST: f64 = 1e15;

/// The tail of a column: its shape, its largest smoothed logarithm, and sums over its draws.
struct Tail {
    shape: f64,
    top: f64,
    sums: TailSums,
}

impl Work<'_> {
    /// A draw whose weight is not replaced has `w exp(L)` the same as any other such draw: only the
    /// tail is looked at. Nothing, and the column as it was, where it is not of the common kind.
    pub(super) fn common(
        &mut self,
        x: &mut [f64],
        (place, next): (usize, &[f64]),
        survey: Survey,
        interrupt: &Interrupt<'_>,
    ) -> Result<Option<Known>, KernelError> {
        let (count, largest) = (x.len() as f64, survey.largest);
        if !(largest.abs() < MOST_LARGEST && largest - survey.least < MOST_RANGE) {
            return Ok(None);
        }
        let (efficiency, p_value) = self.agreement(x, largest, interrupt)?;
        let tail = self.find_tail(x, survey, efficiency);
        if tail.top < FAR_BELOW {
            return Ok(None);
        }
        let (body, density) = self.weights_and_densities(x, largest, next);
        let (shape, top, tail) = (tail.shape, tail.top, tail.sums);
        let sums = Sums {
            total: body.total + tail.total,
            squares: body.squares + tail.squares,
            spread: body.spread + tail.spread,
        };
        // Without the tail `w exp(L)` is 1 on this scale.
        let scale = count - self.draws.places.len() as f64 + tail.ratios;
        let squares = density + tail.products;
        let density = density + tail.density;
        let scored = Scored {
            score: scale.ln() - largest - sums.total.ln(),
            in_sample: (density / count).ln() - largest,
            spread: spread(0.0, squares * sums.total, scale),
        };
        let powers = self.powers(x, sums.total, scale);
        self.defer(Column {
            place,
            constant: 1.0 / scale,
            factor: 1.0 / sums.total,
            units: (1.0 / (body.total + tail.raw), 1.0 / density),
        });
        let smoothed = Smoothed::plain(sums, shape, top, (efficiency, p_value));
        Ok(Some((smoothed, scored, powers)))
    }

    /// Relative efficiency of the raw weights, and whether chains agree about them.
    fn agreement(
        &mut self,
        x: &[f64],
        largest: f64,
        interrupt: &Interrupt<'_>,
    ) -> Result<(f64, f64), KernelError> {
        let Some(lagged) = &mut self.lagged else {
            return Ok((1.0, 1.0));
        };
        let weights = &mut self.weights;
        dispatch(Raw {
            x,
            largest,
            weights,
        });
        lagged.take(weights);
        let efficiency = lagged.efficiency(weights, interrupt)?;
        Ok((efficiency, lagged.chains_p_value(weights, 1.0, interrupt)?))
    }

    /// Finds the tail and what replaces it.
    fn find_tail(&mut self, x: &[f64], survey: Survey, efficiency: f64) -> Tail {
        let (draws, largest) = (&mut self.draws, survey.largest);
        with_room(|room| {
            let found = tail_of(x, largest, survey.spread(0.0), efficiency, room);
            let shape = found.shape();
            let Found::Fitted { cutoff, fit } = found else {
                let sums = draws.fill(&[], &[]);
                return Tail {
                    shape,
                    top: 0.0,
                    sums,
                };
            };
            let ranked = &room.finder.ranked;
            let logs = room.quantiles.logs(fit, cutoff.exp(), ranked.len());
            Tail {
                shape,
                top: logs.iter().copied().fold(cutoff, f64::max),
                sums: draws.fill(ranked, logs),
            }
        })
    }

    /// Log ratios to weights, but for the tail; densities beside them. Sums of both without the tail.
    fn weights_and_densities(&mut self, x: &mut [f64], largest: f64, next: &[f64]) -> (Sums, f64) {
        put(x, &self.draws.places, |_| HIDDEN);
        let density = self.deferred.next();
        let Both { sums, density: sum } = dispatch(Pair {
            x,
            largest,
            density,
            next,
        });
        let values = self.draws.density.as_flattened();
        put(density, &self.draws.places, |rank| values[rank]);
        (sums, sum)
    }

    /// `Σ z²` and `Σ z³` of the series, which is written out where draws are not independent; puts the
    /// smoothed weights into their places.
    fn powers(&mut self, x: &mut [f64], total: f64, scale: f64) -> (f64, f64) {
        let (constant, factor) = (1.0 / scale, 1.0 / total);
        let draws = &self.draws;
        let weights = draws.weights.as_flattened();
        if let Order::Independent = self.shared.order {
            // What adds nothing, the tail being added apart.
            put(x, &draws.places, |_| total / scale);
            let body = dispatch(WeighedPowers {
                weights: x,
                constant,
                factor,
            });
            put(x, &draws.places, |rank| weights[rank]);
            let tail = draws.powers(constant, factor);
            return (body.0 + tail.0, body.1 + tail.1);
        }
        put(x, &draws.places, |rank| weights[rank]);
        dispatch(Weighed {
            weights: x,
            constant,
            factor,
            out: &mut self.series,
        });
        let ratios = draws.ratios.as_flattened();
        put(&mut self.series, &draws.places, |rank| {
            ratios[rank] * constant - weights[rank] * factor
        });
        dispatch(Powers {
            z: &self.series,
            to: &mut [],
        })
    }
}

/// Writes values to some places.
fn put(x: &mut [f64], places: &[usize], value: impl Fn(usize) -> f64) {
    for (rank, &place) in places.iter().enumerate() {
        x[place] = value(rank);
    }
}
