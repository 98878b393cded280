//! Everything that the influence series of a weighted mean says of its error, from the draws and
//! their weights, in two passes. The series are formed a block at a time in the nearest cache, never
//! as arrays, unless more lags are asked for than the first look has.

use std::ops::Range;

use super::chain_means::{ChainMean, LEAST_MASS, halves_of, weighted};
use super::error::KernelError;
use super::lease::Lease;
use super::long_run::{efficiency, of_summary};
use super::ordered::{Interrupt, map_tasks, sum_by};
use super::pareto::FEWEST;
use super::signed_tail::signed_tail_shape;
use super::study_blocks::{Found, look};
use super::study_sums::{FEWEST_COLLECTED, Known, Stretch, Sums, known};
use super::summary::{Look, Source, Summary};
use super::tail::{Scale, fit_tail, tail_length};

/// Draws in chains with their weights.
#[derive(Clone, Copy)]
pub struct Weighted<'a> {
    /// Weights that sum to one, natural scale, shape `(n,)`.
    pub w: &'a [f64],
    /// The same before smoothing.
    pub raw: &'a [f64],
    /// Chains.
    pub chains: &'a [Range<usize>],
    /// Their halves, as [`super::long_run::chains`] splits them.
    pub halves: &'a [Range<usize>],
}

/// Figures of the series `z = n w ψ`, `ψ = f − centre`.
#[derive(Debug, Clone, PartialEq)]
pub struct Study {
    /// `Σ w ψ²`.
    pub spread: f64,
    /// Long-run variance of z.
    pub long_run: f64,
    /// Efficiency `min(1, var/LRV)` of z on raw weights.
    pub efficiency: f64,
    /// Tail shape of z on raw weights, at that efficiency.
    pub shape: f64,
    /// Efficiency of ψ itself.
    pub own: f64,
    /// As [`super::mean::contributions`] of z.
    pub contributions: f64,
    /// Largest `|ψ|`.
    pub largest: f64,
    /// The chains, as [`super::chain_means::chain_means`] tells them.
    pub chains: Vec<ChainMean>,
}

/// The [`Study`] of `f`, shape `(n,)`, centred at `centre`.
///
/// # Errors
/// [`KernelError::Interrupted`]; [`KernelError::Memory`].
pub fn study(
    f: &[f64],
    centre: f64,
    of: Weighted<'_>,
    interrupt: &Interrupt<'_>,
) -> Result<Study, KernelError> {
    let (w, raw, count) = (of.w, of.raw, f.len() as f64);
    let all = Stretch {
        f,
        w,
        raw,
        centre,
        count,
    };
    let passes = Passes::run(all, of, interrupt)?;
    let total = passes.total;
    let [z, rough, own] = [0, 1, 2].map(|series| passes.looks(series));
    let form =
        |series: usize| move |range: Range<usize>, out: &mut [f64]| all.form(series, range, out);
    let fills = [form(0), form(1), form(2)];
    let summary = |looks, series: usize| {
        Summary::from_looks(Source::Made(&fills[series]), of.halves, f.len(), looks)
    };
    let (z, rough, own) = (summary(z, 0), summary(rough, 1), summary(own, 2));
    let both = |summary: &Summary<'_>| Ok([summary.mean_square(), of_summary(summary, interrupt)?]);
    let rough_efficiency = efficiency(both(&rough)?);
    Ok(Study {
        spread: total.sums[3],
        long_run: of_summary(&z, interrupt)?,
        efficiency: rough_efficiency,
        shape: passes.shape(rough_efficiency, &rough),
        own: efficiency(both(&own)?),
        contributions: passes.contributions(&z),
        largest: total.high[0].abs().max(total.low[0].abs()),
        chains: passes.chain_means(interrupt)?,
    })
}

impl Stretch<'_> {
    /// Entries of z, of z on raw weights, or of ψ.
    fn form(&self, series: usize, range: Range<usize>, out: &mut [f64]) {
        let weights = if series == 0 { self.w } else { self.raw };
        let draws = self.f[range.clone()].iter().zip(&weights[range]);
        for (target, (f, w)) in out.iter_mut().zip(draws) {
            let psi = f - self.centre;
            *target = if series == 2 {
                psi
            } else {
                self.count * w * psi
            };
        }
    }

    /// Entries of z of a chain alone, `scale w (ψ − mean)`.
    fn form_alone(&self, mean: f64, scale: f64, range: Range<usize>, out: &mut [f64]) {
        for (target, draw) in out.iter_mut().zip(range) {
            let (w, psi) = (self.w[draw], self.f[draw] - self.centre);
            let z = scale * w * (psi - mean);
            *target = if w == 0.0 { 0.0 } else { z };
        }
    }
}

/// Both passes over the halves of all chains.
struct Passes<'a> {
    all: Stretch<'a>,
    of: Weighted<'a>,
    /// Sums over each half, and over all.
    sums: Vec<Sums>,
    total: Sums,
    known: Vec<Known>,
    found: Vec<Found>,
}

impl<'a> Passes<'a> {
    fn run(
        all: Stretch<'a>,
        of: Weighted<'a>,
        interrupt: &Interrupt<'_>,
    ) -> Result<Self, KernelError> {
        let part = |range: &Range<usize>| all.part(range.start, range.end);
        let sums = map_tasks(of.halves.iter().collect(), interrupt, |range| {
            Ok(Sums::of(part(range)))
        })?;
        let total = sums.iter().copied().fold(Sums::NONE, Sums::merge);
        let known = known(all, of.chains, &sums, total);
        let tasks = of.halves.iter().zip(&known).collect();
        let found = map_tasks(tasks, interrupt, |(range, known)| {
            Ok(look(part(range), known))
        })?;
        Ok(Self {
            all,
            of,
            sums,
            total,
            known,
            found,
        })
    }

    /// What both passes say of one of the four series.
    fn looks(&self, series: usize) -> Vec<Look> {
        let halves = self.known.iter().zip(&self.found);
        halves
            .map(|(known, found)| one_look(known, found, series))
            .collect()
    }

    /// See [`ChainMean`].
    fn chain_means(&self, interrupt: &Interrupt<'_>) -> Result<Vec<ChainMean>, KernelError> {
        let mut means = Vec::with_capacity(self.of.chains.len());
        let mut first = 0;
        for chain in self.of.chains {
            let halves = halves_of(chain.len());
            let of_chain = first..first + halves.len();
            first = of_chain.end;
            let sums = self.sums[of_chain.clone()].iter().copied();
            let mass = sums.clone().map(|half| half.sums[0]).sum::<f64>();
            if mass > 0.0 && mass < LEAST_MASS {
                let (f, w) = (&self.all.f[chain.clone()], &self.all.w[chain.clone()]);
                means.push(weighted(f, self.all.centre, w, interrupt)?);
                continue;
            }
            let known = &self.known[of_chain.clone()];
            let looks = known.iter().zip(&self.found[of_chain]);
            let looks = looks
                .map(|(known, found)| one_look(known, found, 3))
                .collect();
            let (scale, mean) = (known[0].scale, known[0].chain_mean);
            let part = self.all.part(chain.start, chain.end);
            let fill = |range, out: &mut [f64]| part.form_alone(mean, scale, range, out);
            let series = Summary::from_looks(Source::Made(&fill), &halves, chain.len(), looks);
            means.push(ChainMean {
                mass,
                mean,
                long_run: of_summary(&series, interrupt)?,
                squares: sums.clone().map(|half| half.sums[1]).sum::<f64>() / (mass * mass),
                variance: sums.map(|half| half.sums[3]).sum::<f64>() / mass - mean * mean,
            });
        }
        Ok(means)
    }

    /// Tail shape of z on raw weights.
    fn shape(&self, efficiency: f64, series: &Summary<'_>) -> f64 {
        let formed = || {
            let mut z = Lease::new(self.all.f.len());
            self.all.form(1, 0..self.all.f.len(), &mut z);
            signed_tail_shape(&z, efficiency)
        };
        if self.all.f.len() < FEWEST_COLLECTED || !series.mean().is_finite() {
            return formed();
        }
        let mut shapes = [f64::NEG_INFINITY; 2];
        for (side, sign) in [1.0, -1.0].into_iter().enumerate() {
            let draws = self.found.iter().map(|half| half.sides[side]).sum();
            let length = tail_length(draws, efficiency);
            if length < FEWEST {
                continue;
            }
            let tails = self.found.iter().flat_map(|half| &half.tails[side]);
            let tail: Vec<f64> = tails.copied().collect();
            if tail.len() <= length {
                return formed();
            }
            shapes[side] = fit_tail(&tail, length, Scale::Natural(sign)).shape();
        }
        shapes[0].max(shapes[1])
    }

    /// See [`super::mean::contributions`]; from powers about the means of the halves.
    fn contributions(&self, series: &Summary<'_>) -> f64 {
        let centre = series.mean();
        if !centre.is_finite() {
            return f64::NAN;
        }
        let power = |cubed: bool| {
            sum_by(self.found.len(), move |half| {
                let (look, unit) = (&series.looks[half], self.known[half].unit);
                let distance = (look.mean - centre) * unit;
                let count = series.chains[half].len() as f64;
                let squares = look.squares() * unit * unit;
                if cubed {
                    let across = 3.0 * distance * squares + count * distance.powi(3);
                    self.found[half].cubes + across
                } else {
                    squares + count * distance * distance
                }
            })
        };
        let (squares, cubes) = (power(false), power(true));
        if squares == 0.0 {
            return f64::INFINITY;
        }
        squares * squares * squares / (cubes * cubes)
    }
}

fn one_look(known: &Known, found: &Found, series: usize) -> Look {
    Look {
        mean: known.means[series],
        products: vec![found.products[series]],
    }
}
