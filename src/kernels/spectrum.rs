//! Long-run variances of many short series: those of [`super::long_run`] from one work array.
//!
//! Chains are centred into the array with zeros between them, scaled so that the weights of unequal
//! chains are in the entries: a lag is then one sum of products over the whole array.

use std::ops::Range;

use super::error::KernelError;
use super::long_run::{efficiency, long_run_variance};
use super::mean::mean_square;
use super::ordered::Interrupt;
use super::vector::{Arithmetic, Work, dispatch};

/// Zeros between chains: up to this lag chains cannot meet.
const GAP: usize = 64;

/// Lags that are formed together.
const TOGETHER: usize = 4;

/// Lags up to which series are worked on here.
const MOST_LAGS: usize = 256;

/// Shorter chains are units without an inner structure.
const SHORT: usize = 4;

/// Longer series gain nothing here.
const LONG: usize = 65_536;

/// Below this variance, in squares of the mean, what varies may be rounding.
const ROUNDING: f64 = 1e-18;

const LANES: usize = 16;

/// Variance and long-run variance of a series.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Spread {
    /// As [`super::mean::mean_square`].
    pub variance: f64,
    /// As [`super::long_run::long_run_variance`].
    pub long_run: f64,
}

impl Spread {
    /// As [`super::long_run::efficiency`].
    pub fn efficiency(&self) -> f64 {
        efficiency([self.variance, self.long_run])
    }
}

/// Spread of the series `z`, shape `(n,)`, over `chains` as [`super::long_run::chains`] gives
/// them; `room` is a work array of any content.
///
/// # Errors
/// [`KernelError::Interrupted`]; [`KernelError::Memory`].
pub fn spread(
    z: &[f64],
    chains: &[Range<usize>],
    room: &mut Vec<f64>,
    interrupt: &Interrupt<'_>,
) -> Result<Spread, KernelError> {
    let usual = z.len() <= LONG && chains.iter().all(|range| range.len() >= SHORT);
    if usual
        && !z.is_empty()
        && let Some(found) = Placed::new(z, chains, room).and_then(|placed| placed.spread())
    {
        return Ok(found);
    }
    Ok(Spread {
        variance: mean_square(z),
        long_run: long_run_variance(z, chains, interrupt)?,
    })
}

/// The centred chains in the work array.
struct Placed<'a> {
    entries: &'a [f64],
    chains: &'a [Range<usize>],
    draws: f64,
    /// `B` of the long-run variance, and the mean square about the overall mean.
    between: f64,
    variance: f64,
}

impl<'a> Placed<'a> {
    /// Nothing where the series is not finite or varies by no more than rounding.
    fn new(z: &[f64], chains: &'a [Range<usize>], room: &'a mut Vec<f64>) -> Option<Self> {
        let draws = z.len() as f64;
        room.resize(z.len() + GAP * (chains.len() + 1), 0.0);
        let mut means = Vec::with_capacity(chains.len());
        let (mut within, mut start) = (0.0, 0);
        for range in chains {
            let length = range.len() as f64;
            let part = &z[range.clone()];
            let mean = dispatch(Sum(part)) / length;
            let root = (length / (draws * (length - 1.0))).sqrt();
            let into = &mut room[start..start + range.len()];
            within += dispatch(Centre {
                part,
                mean,
                root,
                into,
            });
            means.push(mean);
            start += range.len() + GAP;
            room[start - GAP..start].fill(0.0);
        }
        room[start..].fill(0.0);
        let share = |m: usize| chains[m].len() as f64 / draws;
        let first = means[0];
        let overall = first
            + (0..means.len())
                .map(|m| share(m) * (means[m] - first))
                .sum::<f64>();
        let apart = |m: usize| share(m) * (means[m] - overall) * (means[m] - overall);
        let spread: f64 = (0..means.len()).map(apart).sum();
        let variance = within / draws + spread;
        if !(variance > ROUNDING * overall * overall && variance.is_finite()) {
            return None;
        }
        let count = means.len() as f64;
        Some(Self {
            entries: room,
            chains,
            draws,
            between: if count > 1.0 {
                count / (count - 1.0) * spread
            } else {
                0.0
            },
            variance,
        })
    }

    /// Nothing where more lags are needed than are worth it.
    fn spread(&self) -> Option<Spread> {
        let mean_length = self.draws / self.chains.len() as f64;
        let longest = self.chains.iter().map(Range::len).max()?;
        let mut lags = self.lags(0);
        let within = lags[0];
        let variance = within * (1.0 - 1.0 / mean_length) + self.between;
        let shift = variance - within;
        let (mut total, mut least) = (0.0, f64::INFINITY);
        for lag in (0..longest.saturating_sub(1)).step_by(2) {
            if lag >= MOST_LAGS {
                return None;
            }
            if lag > 0 && lag % TOGETHER == 0 {
                lags = self.lags(lag);
            }
            let pair = &lags[lag % TOGETHER..][..2];
            let even = if lag == 0 { variance } else { shift + pair[0] };
            let gamma: f64 = even + (shift + pair[1]);
            if gamma.is_nan() || gamma <= 0.0 {
                break;
            }
            least = gamma.min(least);
            total += least;
        }
        let floor = variance / self.draws.max(10.0).log10();
        Some(Spread {
            variance: self.variance,
            long_run: (2.0 * total - variance).max(floor),
        })
    }

    /// Autocovariances at [`TOGETHER`] lags from `lag` on.
    fn lags(&self, lag: usize) -> [f64; TOGETHER] {
        if lag + TOGETHER <= GAP {
            return self.products(0, self.entries.len() - GAP, lag);
        }
        let (mut sums, mut start) = ([0.0; TOGETHER], 0);
        for range in self.chains {
            if range.len() > lag {
                let found = self.products(start, start + range.len() - lag, lag);
                sums.iter_mut()
                    .zip(found)
                    .for_each(|(sum, found)| *sum += found);
            }
            start += range.len() + GAP;
        }
        sums
    }

    fn products(&self, from: usize, to: usize, lag: usize) -> [f64; TOGETHER] {
        dispatch(Products {
            early: &self.entries[from..to],
            later: std::array::from_fn(|t| &self.entries[from + lag + t..to + lag + t]),
        })
    }
}

struct Sum<'a>(&'a [f64]);

impl Work for Sum<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        let mut sums = [0.0; LANES];
        let (chunks, rest) = self.0.as_chunks::<LANES>();
        for chunk in chunks {
            for lane in 0..LANES {
                sums[lane] += chunk[lane];
            }
        }
        for (sum, entry) in sums.iter_mut().zip(rest) {
            *sum += entry;
        }
        tree(sums)
    }
}

/// Writes `root (z − mean)`; the sum of squares without the root.
struct Centre<'a> {
    part: &'a [f64],
    mean: f64,
    root: f64,
    into: &'a mut [f64],
}

impl Work for Centre<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        let mut sums = [0.0; LANES];
        let (chunks, rest) = self.part.as_chunks::<LANES>();
        let (into, into_rest) = self.into.as_chunks_mut::<LANES>();
        for (chunk, into) in chunks.iter().zip(into) {
            let mut centred = [0.0; LANES];
            for lane in 0..LANES {
                centred[lane] = chunk[lane] - self.mean;
            }
            for lane in 0..LANES {
                sums[lane] = A::mul_add(centred[lane], centred[lane], sums[lane]);
            }
            for lane in 0..LANES {
                into[lane] = self.root * centred[lane];
            }
        }
        for ((sum, entry), into) in sums.iter_mut().zip(rest).zip(into_rest) {
            let centred = entry - self.mean;
            *sum += centred * centred;
            *into = self.root * centred;
        }
        tree(sums)
    }
}

struct Products<'a> {
    early: &'a [f64],
    later: [&'a [f64]; TOGETHER],
}

impl Work for Products<'_> {
    type Output = [f64; TOGETHER];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [f64; TOGETHER] {
        let mut sums = [[0.0; LANES]; TOGETHER];
        let (chunks, rest) = self.early.as_chunks::<LANES>();
        let later = self.later.map(|later| later.as_chunks::<LANES>());
        let whole = later.map(|later| &later.0[..chunks.len()]);
        for (place, early) in chunks.iter().enumerate() {
            for (sums, later) in sums.iter_mut().zip(&whole) {
                for lane in 0..LANES {
                    sums[lane] = A::mul_add(early[lane], later[place][lane], sums[lane]);
                }
            }
        }
        for (sums, later) in sums.iter_mut().zip(&later) {
            for ((sum, early), later) in sums.iter_mut().zip(rest).zip(later.1) {
                *sum = A::mul_add(*early, *later, *sum);
            }
        }
        sums.map(tree)
    }
}

/// As [`super::vector::tree`], with which, here and in [`super::node_series`], a node took 7 % longer.
#[inline(always)]
fn tree(mut lanes: [f64; LANES]) -> f64 {
    for half in [8, 4, 2, 1] {
        for lane in 0..half {
            lanes[lane] += lanes[lane + half];
        }
    }
    lanes[0]
}
