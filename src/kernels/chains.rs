//! Whether chains agree about a weighted mean, and the long-run variance over all of them.

use std::ops::Range;

use super::error::KernelError;
use super::f_tail::f_tail;
use super::lane_series::{Series, Spread};
use super::lanes::Layout;
use super::long_run;
use super::ordered::Interrupt;

/// Shorter chains, or chains of fewer effective draws, know too little of their own errors.
pub(super) const SHORTEST: usize = 50;
pub(super) const FEWEST: f64 = 20.0;

/// A spectral estimate from `n` effective draws varies like a chi-square of about a third as many.
pub(super) const FREEDOM: f64 = 3.0;

/// From this many chains on, chains taken as independent units estimate a variance well enough.
pub(super) const MANY: usize = 20;

/// Chains and their halves, in the rows of a layout.
pub struct Chains {
    whole: Vec<Range<usize>>,
    /// Which halves are a chain's.
    halves: Vec<Range<usize>>,
    layout: Layout,
    ordered: bool,
}

impl Chains {
    /// Chains of `draws` draws that begin at `starts`, which ends with `draws`; `ordered` if the order
    /// of the draws is one of time.
    ///
    /// # Errors
    /// [`KernelError::Starts`] when `starts` does not rise from 0 to `draws`.
    pub fn new(starts: &[i64], draws: usize, ordered: bool) -> Result<Self, KernelError> {
        let whole = long_run::chains(starts, draws, false)?;
        let split = long_run::chains(starts, draws, true)?;
        let half_at = |draw: usize| split.partition_point(|half| half.end <= draw);
        let halves = whole
            .iter()
            .map(|range| half_at(range.start)..half_at(range.end))
            .collect();
        let layout = if ordered {
            Layout::new(split)
        } else {
            Layout::unordered(draws)
        };
        Ok(Self {
            whole,
            halves,
            layout,
            ordered,
        })
    }

    /// How many there are.
    pub fn count(&self) -> usize {
        self.whole.len()
    }

    /// Whether the order of the draws is one of time.
    pub fn ordered(&self) -> bool {
        self.ordered
    }

    /// Where the draws lie.
    pub fn layout(&self) -> &Layout {
        &self.layout
    }

    /// Whether two draws, the first below the second, belong to different chains.
    pub fn separate(&self, first: u32, second: u32) -> bool {
        let chain = |draw: u32| {
            self.whole
                .partition_point(|range| range.end <= draw as usize)
        };
        chain(first) != chain(second)
    }

    /// Variance and long-run variance of a series over split chains; with many chains the latter is
    /// at least that of chains taken as independent units, since short chains cannot show their own
    /// autocorrelation.
    ///
    /// # Errors
    /// As [`Series::spread`].
    pub fn spread(&self, z: &mut Series, interrupt: &Interrupt<'_>) -> Result<Spread, KernelError> {
        let found = z.spread(0..self.layout.halves().len(), &self.layout, interrupt)?;
        if self.count() < MANY {
            return Ok(found);
        }
        let overall = z.totals.iter().sum::<f64>() / self.layout.draws() as f64;
        let apart = |chain: usize| {
            let length = self.whole[chain].len() as f64;
            let apart = self.sum(chain, &z.totals) / length - overall;
            length * apart * apart
        };
        let units = (0..self.count()).map(apart).sum::<f64>() / (self.count() as f64 - 1.0);
        Ok(Spread {
            long_run: found.long_run.max(units),
            ..found
        })
    }

    /// Sum over the halves of a chain.
    fn sum(&self, chain: usize, of_halves: &[f64]) -> f64 {
        of_halves[self.halves[chain].clone()].iter().sum()
    }

    /// Whether chains are long enough to know their own errors.
    pub fn tell(&self) -> bool {
        let shortest = self.whole.iter().map(Range::len).min().unwrap_or(0);
        self.ordered && self.count() > 1 && shortest >= SHORTEST
    }

    /// For every half, the weighted mean of its chain, and the draws of the chain over its weight, 0
    /// without any; from the sums `Σ w f` and `Σ w` of the halves.
    pub fn alone(&self, moments: &[f64], masses: &[f64]) -> [Vec<f64>; 2] {
        let (mut means, mut scales) = (Vec::new(), Vec::new());
        for (chain, (range, halves)) in self.whole.iter().zip(&self.halves).enumerate() {
            let mass = self.sum(chain, masses);
            let (mean, scale) = if mass > 0.0 {
                (self.sum(chain, moments) / mass, range.len() as f64 / mass)
            } else {
                (0.0, 0.0)
            };
            means.resize(means.len() + halves.len(), mean);
            scales.resize(scales.len() + halves.len(), scale);
        }
        [means, scales]
    }

    /// p-value of the hypothesis that the chains agree about a weighted mean: Welch's test of the
    /// chain means, whose errors come from their own long-run variance and are at least those of as
    /// many independent draws as the chain's weights are worth. 1 with fewer than two chains that
    /// have weight, or where chains are too short or too slow to know their errors.
    ///
    /// `alone` is the series of each chain's own mean.
    ///
    /// # Errors
    /// As [`Series::spread`].
    ///
    /// Source: Welch (1951), Biometrika 38, 330-336.
    pub fn agreement(
        &self,
        alone: &mut Series,
        test: &Test<'_>,
        interrupt: &Interrupt<'_>,
    ) -> Result<f64, KernelError> {
        if !self.tell() {
            return Ok(1.0);
        }
        let mut opinions = Vec::with_capacity(self.count());
        for (chain, range) in self.whole.iter().enumerate() {
            let [mass, moment, squares] =
                [test.masses, test.moments, test.squares].map(|sums| self.sum(chain, sums));
            if mass > 0.0 {
                let halves = self.halves[chain].clone();
                let found = alone.spread(halves, &self.layout, interrupt)?;
                let count = range.len() as f64;
                let worth = test.pooled * (squares / (mass * mass));
                let variance = (found.long_run / count).max(worth).max(test.rounding());
                opinions.push(Opinion::new(moment / mass, variance, test.pooled, count));
            }
        }
        Ok(welch(&opinions))
    }

    /// [`Self::agreement`] about the plain mean of `z`, whose variance is `pooled` and whose largest
    /// absolute value is `largest`.
    ///
    /// # Errors
    /// As that.
    pub fn equal_agreement(
        &self,
        z: &mut Series,
        pooled: f64,
        largest: f64,
        interrupt: &Interrupt<'_>,
    ) -> Result<f64, KernelError> {
        if !self.tell() {
            return Ok(1.0);
        }
        let mut opinions = Vec::with_capacity(self.count());
        for (chain, range) in self.whole.iter().enumerate() {
            let count = range.len() as f64;
            let mean = self.sum(chain, &z.totals) / count;
            let found = z.spread(self.halves[chain].clone(), &self.layout, interrupt)?;
            let variance = (found.long_run / count)
                .max(pooled / count)
                .max(rounding(largest));
            opinions.push(Opinion::new(mean, variance, pooled, count));
        }
        Ok(welch(&opinions))
    }
}

/// What the chains are asked about: a weighted mean, about which the weighted mean square is `pooled`
/// and the largest distance `largest`; and sums over halves.
pub struct Test<'a> {
    /// `Σ w`.
    pub masses: &'a [f64],
    /// `Σ w f`.
    pub moments: &'a [f64],
    /// `Σ w²`.
    pub squares: &'a [f64],
    /// Weighted variance.
    pub pooled: f64,
    /// Largest `|f − m|`.
    pub largest: f64,
}

impl Test<'_> {
    fn rounding(&self) -> f64 {
        rounding(self.largest)
    }
}

/// Variance of a chain's mean below which differences are rounding, not chains that disagree.
fn rounding(largest: f64) -> f64 {
    1e-20 * (largest * largest)
}

/// What one chain says of a weighted mean.
struct Opinion {
    mean: f64,
    precision: f64,
    freedom: f64,
}

impl Opinion {
    fn new(mean: f64, variance: f64, pooled: f64, count: f64) -> Self {
        let positive = variance > 0.0;
        let effective = if positive { pooled / variance } else { count };
        Self {
            mean,
            precision: if positive { 1.0 / variance } else { 0.0 },
            freedom: (effective / FREEDOM).max(1.0),
        }
    }
}

fn welch(opinions: &[Opinion]) -> f64 {
    if opinions.len() < 2 {
        return 1.0;
    }
    let mut freedoms: Vec<f64> = opinions.iter().map(|o| o.freedom).collect();
    freedoms.sort_unstable_by(f64::total_cmp);
    let middle = freedoms.len() / 2;
    let median = if freedoms.len() % 2 == 1 {
        freedoms[middle]
    } else {
        0.5 * (freedoms[middle - 1] + freedoms[middle])
    };
    let total: f64 = opinions.iter().map(|o| o.precision).sum();
    if median * FREEDOM < FEWEST || total <= 0.0 {
        return 1.0;
    }
    let count = opinions.len() as f64;
    let centre = opinions.iter().map(|o| o.precision * o.mean).sum::<f64>() / total;
    let apart = |o: &Opinion| o.precision * (o.mean - centre) * (o.mean - centre);
    let q: f64 = opinions.iter().map(apart).sum();
    let loose = |o: &Opinion| {
        let rest = 1.0 - o.precision / total;
        rest * rest / o.freedom
    };
    let spread: f64 = opinions.iter().map(loose).sum();
    let correction = 1.0 + 2.0 * (count - 2.0) / (count * count - 1.0) * spread;
    let second = (count * count - 1.0) / (3.0 * if spread > 0.0 { spread } else { 1.0 });
    f_tail(q / (count - 1.0) / correction, count - 1.0, second)
}
