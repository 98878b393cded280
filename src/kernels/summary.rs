//! A series of draws in chains, looked at a chain at a time while that lies in the caches.

use std::ops::{Deref, Range};

use super::error::KernelError;
use super::lease::Lease;
use super::mean::mean;
use super::ordered::{Interrupt, map_tasks, sum_by};
use super::vector::dot::lagged;

/// Lags that are formed together.
pub(super) const TOGETHER: usize = 4;

/// Lags of the first look: most series of draws that mix ask for no more.
pub(super) const FIRST: usize = 2 * TOGETHER;

/// Draws of a task that forms some lags.
const TASK: usize = 65_536;

/// Where the entries of a series come from: they lie in memory, or are made a range at a time.
#[derive(Clone, Copy)]
pub enum Source<'a> {
    /// The whole series.
    Given(&'a [f64]),
    /// What writes a range of it.
    Made(&'a (dyn Fn(Range<usize>, &mut [f64]) + Sync)),
}

/// A series of draws in chains after the first look at it, a chain at a time while it lies in the
/// caches: the mean and the first few lags of every chain. What [`super::long_run`] starts from.
pub struct Summary<'a> {
    source: Source<'a>,
    pub(super) chains: &'a [Range<usize>],
    pub(super) draws: usize,
    pub(super) looks: Vec<Look>,
}

/// Mean of a chain, and sums of products at the first lags, a part of the chain each.
pub(super) struct Look {
    pub(super) mean: f64,
    pub(super) products: Vec<[f64; FIRST]>,
}

impl Look {
    fn new(chain: &[f64]) -> Self {
        let mean = mean(chain);
        let products = parts(&(0..chain.len()))
            .map(|part| first_products(chain, part, mean))
            .collect();
        Self { mean, products }
    }

    pub(super) fn squares(&self) -> f64 {
        self.products.iter().map(|products| products[0]).sum()
    }
}

impl<'a> Summary<'a> {
    /// The summary of `draws` draws over `chains` as [`super::long_run::chains`] gives them.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`].
    pub fn new(
        source: Source<'a>,
        chains: &'a [Range<usize>],
        draws: usize,
        interrupt: &Interrupt<'_>,
    ) -> Result<Self, KernelError> {
        let looks = map_tasks(chains.to_vec(), interrupt, |range| {
            Ok(match source {
                Source::Given(z) => Look::new(&z[range]),
                Source::Made(fill) => {
                    let mut chain = Lease::new(range.len());
                    fill(range, &mut chain);
                    Look::new(&chain)
                }
            })
        })?;
        Ok(Self {
            source,
            chains,
            draws,
            looks,
        })
    }

    /// The summary of a series that was looked at elsewhere.
    pub(super) fn from_looks(
        source: Source<'a>,
        chains: &'a [Range<usize>],
        draws: usize,
        looks: Vec<Look>,
    ) -> Self {
        Self {
            source,
            chains,
            draws,
            looks,
        }
    }

    /// Mean of all draws; NaN without any.
    pub fn mean(&self) -> f64 {
        let Some(first) = self.looks.first() else {
            return f64::NAN;
        };
        // From the first mean on, so that equal means have no spread at all.
        let beyond = |m: usize| self.share(m) * (self.looks[m].mean - first.mean);
        first.mean + sum_by(self.looks.len(), beyond)
    }

    /// `Σ_s (z_s − z̄)² / n` as [`super::mean::mean_square`], up to rounding; exactly 0 for constant `z`.
    pub fn mean_square(&self) -> f64 {
        let (overall, draws) = (self.mean(), self.draws as f64);
        sum_by(self.looks.len(), |m| {
            let distance = self.looks[m].mean - overall;
            self.looks[m].squares() / draws + self.share(m) * distance * distance
        })
    }

    /// `n_m / n`.
    fn share(&self, m: usize) -> f64 {
        self.chains[m].len() as f64 / self.draws as f64
    }

    /// `M/(M−1) Σ n_m (z̄_m − z̄)² / n`; 0 for one chain.
    pub(super) fn between(&self) -> f64 {
        if self.looks.len() < 2 {
            return 0.0;
        }
        let (count, overall) = (self.looks.len() as f64, self.mean());
        let spread = sum_by(self.looks.len(), |m| {
            let distance = self.looks[m].mean - overall;
            self.share(m) * distance * distance
        });
        count / (count - 1.0) * spread
    }

    /// All entries of the series.
    pub(super) fn entries(&self) -> Entries<'a> {
        match self.source {
            Source::Given(z) => Entries::Given(z),
            Source::Made(fill) => {
                let mut z = Lease::new(self.draws);
                for range in self.chains {
                    fill(range.clone(), &mut z[range.clone()]);
                }
                Entries::Made(z)
            }
        }
    }
}

pub(super) enum Entries<'a> {
    Given(&'a [f64]),
    Made(Lease),
}

impl Deref for Entries<'_> {
    type Target = [f64];

    fn deref(&self) -> &[f64] {
        match self {
            Self::Given(z) => z,
            Self::Made(z) => z,
        }
    }
}

/// A chain cut into parts of [`TASK`] draws.
pub(super) fn parts(chain: &Range<usize>) -> impl Iterator<Item = Range<usize>> + use<> {
    let end = chain.end;
    chain
        .clone()
        .step_by(TASK)
        .map(move |from| from..end.min(from + TASK))
}

/// Sums of products of `part` of a chain with what follows it in the chain, for [`TOGETHER`] lags
/// from `lag` on.
pub(super) fn products(
    z: &[f64],
    chain: Range<usize>,
    part: Range<usize>,
    lag: usize,
    centre: f64,
) -> [f64; TOGETHER] {
    // Up to here every draw has a partner at all lags.
    let whole = part
        .end
        .min((chain.end + 1).saturating_sub(lag + TOGETHER))
        .max(part.start);
    let mut sums = [0.0; TOGETHER];
    if whole > part.start {
        sums = lagged(z, part.start, whole, lag, centre);
    }
    for i in whole..part.end {
        for (t, sum) in sums.iter_mut().enumerate() {
            if i + lag + t < chain.end {
                *sum += (z[i] - centre) * (z[i + lag + t] - centre);
            }
        }
    }
    sums
}

/// [`products`] of `part` of a whole chain at the [`FIRST`] lags.
pub(super) fn first_products(chain: &[f64], part: Range<usize>, centre: f64) -> [f64; FIRST] {
    let mut first = [0.0; FIRST];
    for (group, sums) in first.chunks_mut(TOGETHER).enumerate() {
        let lag = group * TOGETHER;
        sums.copy_from_slice(&products(chain, 0..chain.len(), part.clone(), lag, centre));
    }
    first
}
