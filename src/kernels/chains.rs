//! Whether chains agree about a weighted mean, and the long-run variance over all of them.

use std::ops::Range;

use super::error::KernelError;
use super::f_tail::f_tail;
use super::log_sum::range;
use super::long_run;
use super::mean::mean;
use super::node_series::{influence, weight_moments};
use super::ordered::Interrupt;
use super::spectrum::{self, Spread};

/// Shorter chains, or chains of fewer effective draws, know too little of their own errors.
pub(super) const SHORTEST: usize = 50;
pub(super) const FEWEST: f64 = 20.0;

/// A spectral estimate from `n` effective draws varies like a chi-square of about a third as many.
pub(super) const FREEDOM: f64 = 3.0;

/// From this many chains on, chains taken as independent units estimate a variance well enough.
pub(super) const MANY: usize = 20;

/// Chains, their halves, and the halves of each by itself.
pub struct Chains {
    whole: Vec<Range<usize>>,
    halves: Vec<Range<usize>>,
    own_halves: Vec<Vec<Range<usize>>>,
}

impl Chains {
    /// Chains of `draws` draws that begin at `starts`, which ends with `draws`.
    ///
    /// # Errors
    /// [`KernelError::Starts`] when `starts` does not rise from 0 to `draws`.
    pub fn new(starts: &[i64], draws: usize) -> Result<Self, KernelError> {
        let whole = long_run::chains(starts, draws, false)?;
        let own_halves = whole
            .iter()
            .map(|range| long_run::chains(&[0, range.len() as i64], range.len(), true))
            .collect::<Result<_, _>>()?;
        Ok(Self {
            whole,
            halves: long_run::chains(starts, draws, true)?,
            own_halves,
        })
    }

    /// How many there are.
    pub fn count(&self) -> usize {
        self.whole.len()
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
    /// As [`spectrum::spread`].
    pub fn spread(
        &self,
        z: &[f64],
        room: &mut Vec<f64>,
        interrupt: &Interrupt<'_>,
    ) -> Result<Spread, KernelError> {
        let found = spectrum::spread(z, &self.halves, room, interrupt)?;
        if self.count() < MANY {
            return Ok(found);
        }
        let (overall, count) = (mean(z), self.count() as f64);
        let apart = |range: &Range<usize>| {
            let apart = mean(&z[range.clone()]) - overall;
            range.len() as f64 * apart * apart
        };
        let units = self.whole.iter().map(apart).sum::<f64>() / (count - 1.0);
        Ok(Spread {
            long_run: found.long_run.max(units),
            ..found
        })
    }

    /// Whether chains are long enough to know their own errors.
    fn tell(&self) -> bool {
        let shortest = self.whole.iter().map(Range::len).min().unwrap_or(0);
        self.count() > 1 && shortest >= SHORTEST
    }

    /// p-value of the hypothesis that the chains agree about a weighted mean: Welch's test of the
    /// chain means, whose errors come from their own long-run variance and are at least those of as
    /// many independent draws as the chain's weights are worth. 1 with fewer than two chains that
    /// have weight, or where chains are too short or too slow to know their errors.
    ///
    /// # Errors
    /// As [`spectrum::spread`].
    ///
    /// Source: Welch (1951), Biometrika 38, 330-336.
    pub fn agreement(
        &self,
        test: &Test<'_>,
        w: &[f64],
        [series, room]: [&mut Vec<f64>; 2],
        interrupt: &Interrupt<'_>,
    ) -> Result<f64, KernelError> {
        if !self.tell() {
            return Ok(1.0);
        }
        let rounding = test.rounding();
        let mut opinions = Vec::with_capacity(self.count());
        for (range, halves) in self.whole.iter().zip(&self.own_halves) {
            let (f, w) = (&test.f[range.clone()], &w[range.clone()]);
            let [mass, moment, squares] = weight_moments(f, w);
            if mass > 0.0 {
                series.resize(f.len(), 0.0);
                let count = f.len() as f64;
                influence(f, w, moment / mass, count / mass, series);
                let found = spectrum::spread(series, halves, room, interrupt)?;
                let worth = test.pooled * (squares / (mass * mass));
                let variance = (found.long_run / count).max(worth).max(rounding);
                opinions.push(Opinion::new(moment / mass, variance, test.pooled, count));
            }
        }
        Ok(welch(&opinions))
    }

    /// [`Self::agreement`] about the plain mean of `z`, whose variance is `pooled`.
    ///
    /// # Errors
    /// As that.
    pub fn equal_agreement(
        &self,
        z: &[f64],
        pooled: f64,
        room: &mut Vec<f64>,
        interrupt: &Interrupt<'_>,
    ) -> Result<f64, KernelError> {
        if !self.tell() {
            return Ok(1.0);
        }
        let test = Test {
            f: z,
            moved: 0.0,
            pooled,
        };
        let rounding = test.rounding();
        let mut opinions = Vec::with_capacity(self.count());
        for (range, halves) in self.whole.iter().zip(&self.own_halves) {
            let part = &z[range.clone()];
            let count = part.len() as f64;
            let found = spectrum::spread(part, halves, room, interrupt)?;
            let variance = (found.long_run / count).max(pooled / count).max(rounding);
            opinions.push(Opinion::new(mean(part), variance, pooled, count));
        }
        Ok(welch(&opinions))
    }
}

/// What the chains are asked about: the weighted mean `moved` of `f`, whose weighted mean square
/// about it is `pooled`.
pub struct Test<'a> {
    /// Values, shape `(n,)`.
    pub f: &'a [f64],
    /// Their weighted mean.
    pub moved: f64,
    /// Their weighted variance.
    pub pooled: f64,
}

impl Test<'_> {
    /// Variance of a chain's mean below which differences are rounding, not chains that disagree.
    fn rounding(&self) -> f64 {
        let (low, high) = range(self.f);
        let largest = (high - self.moved).max(self.moved - low);
        1e-20 * (largest * largest)
    }
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
