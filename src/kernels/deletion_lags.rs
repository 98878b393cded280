//! Long-run variances of one series after another over the same chains, and whether chains agree.
//!
//! The formulas are those of [`super::long_run`]; what differs is the way to them. The halves of the
//! chains lie centred in one array with zeros between, so that a few lags of all halves come from one
//! loop without an edge; and the sums of every half are kept, so that the variance of each chain by
//! itself costs no further pass.

use std::ops::Range;

use super::chains::{FREEDOM, MANY, SHORTEST};
use super::deletion_lag_loops::{Centre, Products};
use super::deletion_loops::LANES;
use super::deletion_welch::welch;
use super::error::KernelError;
use super::long_run::{efficiency, long_run_variance};
use super::ordered::Interrupt;
use super::vector::dispatch;

/// Lags that are formed together.
pub(super) const TOGETHER: usize = 6;

/// Batches of lags; a series that needs more goes to [`long_run_variance`].
const BATCHES: usize = 8;

/// Zeros behind every half: as many as the largest lag and what a whole vector reads beyond it.
const GAP: usize = TOGETHER * BATCHES + LANES;

/// Shorter halves are left to [`long_run_variance`].
const SHORTEST_HALF: usize = 16;

/// Chains and their halves.
pub struct Layout {
    chains: Vec<Range<usize>>,
    pub(super) halves: Vec<Range<usize>>,
    /// Halves of each chain.
    of_chain: Vec<Range<usize>>,
    /// Where each half begins in the padded array.
    pub(super) places: Vec<usize>,
    padded: usize,
    is_long: bool,
}

impl Layout {
    /// A layout of chains and of the same split into halves.
    pub fn new(chains: Vec<Range<usize>>, halves: Vec<Range<usize>>) -> Self {
        let (mut places, mut padded) = (Vec::with_capacity(halves.len()), 0);
        for half in &halves {
            places.push(padded);
            padded += half.len().next_multiple_of(LANES) + GAP;
        }
        let mut of_chain = Vec::with_capacity(chains.len());
        let mut first = 0;
        for chain in &chains {
            let count = halves[first..]
                .iter()
                .take_while(|half| half.end <= chain.end)
                .count();
            of_chain.push(first..first + count);
            first += count;
        }
        Self {
            is_long: halves.iter().all(|half| half.len() >= SHORTEST_HALF),
            chains,
            halves,
            of_chain,
            places,
            padded,
        }
    }
}

/// One series, centred, and what is known of its lags.
pub struct Lagged<'a> {
    layout: &'a Layout,
    centred: Vec<f64>,
    means: Vec<f64>,
    /// Sums of products, batch after batch, half after half.
    sums: Vec<[f64; TOGETHER]>,
    batches: usize,
}

impl<'a> Lagged<'a> {
    /// Room for series over a layout.
    pub fn new(layout: &'a Layout) -> Self {
        let halves = layout.halves.len();
        Self {
            layout,
            centred: vec![0.0; layout.padded],
            means: vec![0.0; halves],
            sums: vec![[0.0; TOGETHER]; halves * BATCHES],
            batches: 0,
        }
    }

    /// Takes a new series `(n,)`.
    pub fn take(&mut self, z: &[f64]) {
        self.batches = 0;
        dispatch(Centre {
            z,
            layout: self.layout,
            centred: &mut self.centred,
            means: &mut self.means,
        });
    }

    /// Sums of products of a half at a lag; nothing beyond the last batch.
    fn sum(&mut self, half: usize, lag: usize) -> Option<f64> {
        let batch = lag / TOGETHER;
        if batch >= BATCHES {
            return None;
        }
        let halves = self.layout.halves.len();
        while self.batches <= batch {
            dispatch(Products {
                lag: self.batches * TOGETHER,
                layout: self.layout,
                centred: &self.centred,
                sums: &mut self.sums[self.batches * halves..][..halves],
            });
            self.batches += 1;
        }
        Some(self.sums[batch * halves + half][lag % TOGETHER])
    }

    fn length(&self, half: usize) -> f64 {
        self.layout.halves[half].len() as f64
    }

    /// `Σ n_m z̄_m / n` of some halves, from the first on.
    fn mean(&self, halves: Range<usize>) -> f64 {
        let first = self.means[halves.start];
        let (mut total, mut sum) = (0.0, 0.0);
        for half in halves {
            total += self.length(half);
            sum += self.length(half) * (self.means[half] - first);
        }
        first + sum / total
    }

    /// `Σ n_m (z̄_m − z̄)² / n`.
    fn spread(&self, halves: Range<usize>) -> f64 {
        let mean = self.mean(halves.clone());
        let (mut total, mut sum) = (0.0, 0.0);
        for half in halves {
            total += self.length(half);
            sum += self.length(half) * (self.means[half] - mean).powi(2);
        }
        sum / total
    }

    /// `Σ (z − z̄)² / n` of the whole series.
    pub fn mean_square(&mut self) -> f64 {
        let all = 0..self.layout.halves.len();
        let draws: f64 = all.clone().map(|half| self.length(half)).sum();
        let within: f64 = all.clone().filter_map(|half| self.sum(half, 0)).sum();
        within / draws + self.spread(all)
    }

    /// Long-run variance of the series over all chains; `z` is that series.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`], [`KernelError::Memory`].
    pub fn long_run(&mut self, z: &[f64], interrupt: &Interrupt<'_>) -> Result<f64, KernelError> {
        let all = 0..self.layout.halves.len();
        let found = match self.geyer(all) {
            Some(found) => found,
            None => long_run_variance(z, &self.layout.halves, interrupt)?,
        };
        let chains = self.layout.chains.len();
        if chains < MANY {
            return Ok(found);
        }
        let centre = self.mean(0..self.layout.halves.len());
        let mut spread = 0.0;
        for (chain, halves) in self.layout.chains.iter().zip(&self.layout.of_chain) {
            spread += chain.len() as f64 * (self.mean(halves.clone()) - centre).powi(2);
        }
        Ok(found.max(spread / (chains as f64 - 1.0)))
    }

    /// The estimate of [`long_run_variance`] over some halves, where few lags are enough.
    fn geyer(&mut self, halves: Range<usize>) -> Option<f64> {
        if !self.layout.is_long {
            return None;
        }
        let count = halves.len() as f64;
        let draws: f64 = halves.clone().map(|half| self.length(half)).sum();
        let longest = halves
            .clone()
            .map(|half| self.layout.halves[half].len())
            .max()?;
        let between = if halves.len() > 1 {
            count / (count - 1.0) * self.spread(halves.clone())
        } else {
            0.0
        };
        let within = self.covariance(halves.clone(), draws, 0)?;
        let variance = within * (1.0 - count / draws) + between;
        let shift = variance - within;
        let (mut total, mut least) = (0.0, f64::INFINITY);
        for lag in (0..longest - 1).step_by(2) {
            let even = if lag == 0 {
                variance
            } else {
                shift + self.covariance(halves.clone(), draws, lag)?
            };
            let gamma = even + (shift + self.covariance(halves.clone(), draws, lag + 1)?);
            if gamma.is_nan() || gamma <= 0.0 {
                break;
            }
            least = gamma.min(least);
            total += least;
        }
        Some((2.0 * total - variance).max(variance / draws.max(10.0).log10()))
    }

    /// `Σ n_m/(n (n_m − 1)) Σ c c_{+t}`.
    fn covariance(&mut self, halves: Range<usize>, draws: f64, lag: usize) -> Option<f64> {
        let mut sum = 0.0;
        for half in halves {
            let length = self.length(half);
            sum += length / (draws * (length - 1.0)) * self.sum(half, lag)?;
        }
        Some(sum)
    }

    /// [`long_run_variance`] of one chain of the series `z`.
    fn of_one_chain(
        &self,
        z: &[f64],
        chain: usize,
        interrupt: &Interrupt<'_>,
    ) -> Result<f64, KernelError> {
        let range = self.layout.chains[chain].clone();
        let halves: Vec<Range<usize>> = self.layout.halves[self.layout.of_chain[chain].clone()]
            .iter()
            .map(|half| half.start - range.start..half.end - range.start)
            .collect();
        long_run_variance(&z[range], &halves, interrupt)
    }

    /// As [`super::long_run::efficiency`].
    ///
    /// # Errors
    /// As [`Self::long_run`].
    pub fn efficiency(&mut self, z: &[f64], interrupt: &Interrupt<'_>) -> Result<f64, KernelError> {
        let long_run = self.long_run(z, interrupt)?;
        Ok(efficiency([self.mean_square(), long_run]))
    }

    /// Whether the chains agree about the mean of the series `z` of positive numbers: a p-value by
    /// Welch (1951), Biometrika 38; 1 where chains are too short to tell.
    ///
    /// A chain's error is at least that of as many independent draws.
    ///
    /// # Errors
    /// As [`Self::long_run`].
    pub fn chains_p_value(
        &mut self,
        z: &[f64],
        largest: f64,
        interrupt: &Interrupt<'_>,
    ) -> Result<f64, KernelError> {
        let count = self.layout.chains.len();
        if count < 2 || self.layout.chains.iter().any(|c| c.len() < SHORTEST) {
            return Ok(1.0);
        }
        let pooled = self.mean_square();
        // Differences in the last digits are rounding, not chains that disagree.
        let rounding = (1e-10 * largest).powi(2);
        let mut found = Vec::with_capacity(count);
        for chain in 0..count {
            let length = self.layout.chains[chain].len() as f64;
            let halves = self.layout.of_chain[chain].clone();
            let long_run = match self.geyer(halves.clone()) {
                Some(found) => found,
                None => self.of_one_chain(z, chain, interrupt)?,
            };
            let variance = (long_run / length).max(pooled / length).max(rounding);
            let effective = if variance > 0.0 {
                pooled / variance
            } else {
                length
            };
            found.push((self.mean(halves), variance, (effective / FREEDOM).max(1.0)));
        }
        Ok(welch(&found))
    }
}
