//! The long-run variance of a series of draws in chains.

use std::ops::Range;

use super::correlation::Spectrum;
use super::error::KernelError;
use super::mean::{mean, mean_square};
use super::ordered::{Interrupt, map_tasks, sum_by};
use super::vector::dot::lagged;
use super::vector::{Arithmetic, Work, dispatch};

/// Fewest draws of a chain that is split in two.
const FEWEST_SPLIT: usize = 8;

/// Lags that are formed a few after the other; beyond, all at once. Chains that mix end before;
/// chains that do not, or that disagree, would go on to the last lag.
const DIRECT_LAGS: usize = 256;

/// Lags that are formed together.
const TOGETHER: usize = 4;

/// Draws of a task that forms some lags.
const TASK: usize = 65_536;

/// Below this mean length chains are units without an inner structure.
const SHORT: f64 = 4.0;

/// Where chains begin and end: positions `0 = s_0 < … < s_C = n` as ranges, each chain of at least
/// 8 draws split into halves if `split` is set (the first gets `⌊T/2⌋`, the second the rest).
///
/// # Errors
/// [`KernelError::Starts`] when `starts` does not rise from 0 to `draws`.
pub fn chains(starts: &[i64], draws: usize, split: bool) -> Result<Vec<Range<usize>>, KernelError> {
    let edges = edges(starts, draws)?;
    let mut ranges = Vec::new();
    for pair in edges.windows(2) {
        let (from, to) = (pair[0], pair[1]);
        if split && to - from >= FEWEST_SPLIT {
            let middle = from + (to - from) / 2;
            ranges.push(from..middle);
            ranges.push(middle..to);
        } else {
            ranges.push(from..to);
        }
    }
    Ok(ranges)
}

fn edges(starts: &[i64], draws: usize) -> Result<Vec<usize>, KernelError> {
    let wrong = |position: usize| KernelError::Starts {
        position,
        found: starts.get(position).copied(),
        draws,
    };
    let mut edges: Vec<usize> = Vec::with_capacity(starts.len());
    for (position, &start) in starts.iter().enumerate() {
        let edge = usize::try_from(start).map_err(|_| wrong(position))?;
        let rises = edges.last().map_or(edge == 0, |&before| edge > before);
        if !rises || edge > draws {
            return Err(wrong(position));
        }
        edges.push(edge);
    }
    match edges.last() {
        Some(&last) if last == draws => Ok(edges),
        _ => Err(wrong(starts.len())),
    }
}

/// Long-run variance of the series `z`, shape `(n,)`, over `chains` as [`chains`] gives them:
/// `n` times the variance of the mean of `z`.
///
/// With `M` chains of lengths `n_m`, `n̄ = n/M`, centred series `c_m = z − z̄_m`:
/// `W = Σ n_m W_m / n` (`W_m` with `n_m − 1`), `B = M/(M−1) Σ n_m (z̄_m − z̄)² / n`,
/// `γ_0 = W (1 − 1/n̄) + B`, `γ_t = γ_0 − W + a_t`, `a_t = Σ n_m/(n (n_m − 1)) Σ_i c_i c_{i+t}`,
/// `Γ_j = γ_{2j} + γ_{2j+1}`, kept while positive and made non-increasing;
/// `LRV = −γ_0 + 2 Σ Γ_j`, at least `γ_0 / log10 max(n, 10)`: an antithetic chain earns no
/// unlimited credit (this bound is ours). The between-chain part `B` stays in at every lag.
///
/// Chains of fewer than 4 draws on average are independent units:
/// `LRV = n̄ M/(M−1) Σ n_m (z̄_m − z̄)² / n`, or [`mean_square`] when there is one. Constant `z` has
/// exactly 0; no draw, NaN or an infinite entry gives NaN.
///
/// From lag 256 on all `a_t` come from one Fourier transform, error about `1e-15 a_0`, so that
/// chains which mix slowly or disagree cost `n log n` and not `n²`.
///
/// # Errors
/// [`KernelError::Interrupted`]; [`KernelError::Memory`].
///
/// Source: Geyer (1992), Statistical Science 7, 473-483, section 3.3.
pub fn long_run_variance(
    z: &[f64],
    chains: &[Range<usize>],
    interrupt: &Interrupt<'_>,
) -> Result<f64, KernelError> {
    if z.is_empty() || !is_finite(z) {
        return Ok(f64::NAN);
    }
    interrupt.check()?;
    let mean_length = z.len() as f64 / chains.len() as f64;
    let means: Vec<f64> = chains.iter().map(|range| mean(&z[range.clone()])).collect();
    let between = between(&means, chains, z.len());
    if mean_length >= SHORT {
        let lags = Lags::new(z, chains, &means);
        return within_chains(lags, mean_length, between, interrupt);
    }
    if chains.len() == 1 {
        return Ok(mean_square(z));
    }
    Ok(mean_length * between)
}

/// `M/(M−1) Σ n_m (z̄_m − z̄)² / n`; 0 for one chain.
fn between(means: &[f64], chains: &[Range<usize>], draws: usize) -> f64 {
    let Some(&first) = means.first().filter(|_| means.len() > 1) else {
        return 0.0;
    };
    let (count, draws) = (chains.len() as f64, draws as f64);
    let share = |m: usize| chains[m].len() as f64 / draws;
    // From the first mean on, so that equal means have no spread at all.
    let overall = first + sum_by(means.len(), |m| share(m) * (means[m] - first));
    let spread = sum_by(means.len(), |m| {
        share(m) * (means[m] - overall) * (means[m] - overall)
    });
    count / (count - 1.0) * spread
}

fn within_chains(
    mut lags: Lags<'_>,
    mean_length: f64,
    between: f64,
    interrupt: &Interrupt<'_>,
) -> Result<f64, KernelError> {
    let within = lags.at(0, interrupt)?;
    let variance = within * (1.0 - 1.0 / mean_length) + between;
    let shift = variance - within;
    let mut total = 0.0;
    let mut least = f64::INFINITY;
    for lag in (0..lags.longest.saturating_sub(1)).step_by(2) {
        let even = if lag == 0 {
            variance
        } else {
            shift + lags.at(lag, interrupt)?
        };
        let gamma = even + (shift + lags.at(lag + 1, interrupt)?);
        // NaN comes from series whose squares overflow; it must end the search too.
        if gamma.is_nan() || gamma <= 0.0 {
            break;
        }
        least = gamma.min(least);
        total += least;
    }
    let floor = variance / (lags.z.len() as f64).max(10.0).log10();
    Ok((2.0 * total - variance).max(floor))
}

fn is_finite(z: &[f64]) -> bool {
    dispatch(IsFinite(z))
}

struct IsFinite<'a>(&'a [f64]);

impl Work for IsFinite<'_> {
    type Output = bool;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> bool {
        // The largest exponent is that of infinities and NaN.
        let magnitude = |entry: &f64| entry.to_bits() & (u64::MAX >> 1);
        let most = self.0.iter().map(magnitude).fold(0, u64::max);
        most < f64::INFINITY.to_bits()
    }
}

/// The autocovariances `a_t` of [`long_run_variance`], formed when they are asked for.
struct Lags<'a> {
    z: &'a [f64],
    chains: &'a [Range<usize>],
    means: &'a [f64],
    longest: usize,
    known: Vec<f64>,
}

impl<'a> Lags<'a> {
    fn new(z: &'a [f64], chains: &'a [Range<usize>], means: &'a [f64]) -> Self {
        let longest = chains.iter().map(Range::len).max().unwrap_or(0);
        Self {
            z,
            chains,
            means,
            longest,
            known: Vec::new(),
        }
    }

    /// `a_t`; `a_0 = W`.
    fn at(&mut self, lag: usize, interrupt: &Interrupt<'_>) -> Result<f64, KernelError> {
        if lag >= self.known.len() {
            interrupt.check()?;
            if lag < DIRECT_LAGS {
                let next = self.next(lag, interrupt)?;
                self.known.extend(next);
            } else {
                self.known = self.all(interrupt)?;
            }
        }
        Ok(self.known[lag])
    }

    /// `a_t` for [`TOGETHER`] lags from `lag` on.
    fn next(&self, lag: usize, interrupt: &Interrupt<'_>) -> Result<[f64; TOGETHER], KernelError> {
        let mut tasks = Vec::new();
        for (m, range) in self.chains.iter().enumerate() {
            for from in range.clone().step_by(TASK) {
                tasks.push((m, from..range.end.min(from + TASK)));
            }
        }
        let sums = map_tasks(tasks, interrupt, |(m, part)| {
            Ok((m, self.products(m, part, lag)))
        })?;
        let mut next = [0.0; TOGETHER];
        for (m, sums) in sums {
            for (next, sum) in next.iter_mut().zip(sums) {
                *next += self.weight(m) * sum;
            }
        }
        Ok(next)
    }

    /// Sums of products of `part` of chain `m` with what follows it in the chain.
    fn products(&self, m: usize, part: Range<usize>, lag: usize) -> [f64; TOGETHER] {
        let (end, centre) = (self.chains[m].end, self.means[m]);
        // Up to here every draw has a partner at all lags.
        let whole = part
            .end
            .min((end + 1).saturating_sub(lag + TOGETHER))
            .max(part.start);
        let mut sums = [0.0; TOGETHER];
        if whole > part.start {
            sums = lagged(self.z, part.start, whole, lag, centre);
        }
        for i in whole..part.end {
            for (t, sum) in sums.iter_mut().enumerate() {
                if i + lag + t < end {
                    *sum += (self.z[i] - centre) * (self.z[i + lag + t] - centre);
                }
            }
        }
        sums
    }

    /// `n_m / (n (n_m − 1))`; 0 for a chain of one draw.
    fn weight(&self, m: usize) -> f64 {
        let (count, length) = (self.z.len() as f64, self.chains[m].len() as f64);
        if length < 2.0 {
            return 0.0;
        }
        length / (count * (length - 1.0))
    }

    /// `a_t` for every lag below the longest chain.
    fn all(&self, interrupt: &Interrupt<'_>) -> Result<Vec<f64>, KernelError> {
        let scaled = |m: usize| -> Vec<f64> {
            let (root, centre) = (self.weight(m).sqrt(), self.means[m]);
            let chain = &self.z[self.chains[m].clone()];
            chain.iter().map(|entry| root * (entry - centre)).collect()
        };
        let chains: Vec<usize> = (0..self.chains.len()).collect();
        let mut spectrum = Spectrum::new(self.longest)?;
        for two in chains.chunks(2) {
            let first = scaled(two[0]);
            let second = two.get(1).map(|&m| scaled(m)).unwrap_or_default();
            spectrum.add(&first, &second, interrupt)?;
        }
        let mut all = spectrum.correlations(interrupt)?;
        all.resize(self.longest + 1, 0.0);
        Ok(all)
    }
}
