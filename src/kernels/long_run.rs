//! The long-run variance of a series of draws in chains.

use std::ops::Range;

use super::correlation::Spectrum;
use super::error::KernelError;
use super::ordered::{Interrupt, map_tasks};
use super::summary::{Entries, Source, Summary, TOGETHER, parts, products};

/// Fewest draws of a chain that is split in two.
pub(super) const FEWEST_SPLIT: usize = 8;

/// Lags that are formed a few after the other; beyond, all at once. Chains that mix end before;
/// chains that do not, or that disagree, would go on to the last lag.
const DIRECT_LAGS: usize = 256;

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
/// `LRV = n̄ M/(M−1) Σ n_m (z̄_m − z̄)² / n`, or the mean square when there is one. Constant `z` has
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
    of_summary(
        &Summary::new(Source::Given(z), chains, z.len(), interrupt)?,
        interrupt,
    )
}

/// [`long_run_variance`] of a series that has been looked at.
///
/// # Errors
/// As there.
pub fn of_summary(summary: &Summary<'_>, interrupt: &Interrupt<'_>) -> Result<f64, KernelError> {
    let looks = &summary.looks;
    if looks.is_empty() || !looks.iter().all(|look| look.mean.is_finite()) {
        return Ok(f64::NAN);
    }
    interrupt.check()?;
    let mean_length = summary.draws as f64 / summary.chains.len() as f64;
    let between = summary.between();
    if mean_length >= SHORT {
        return within_chains(&mut Lags::new(summary), mean_length, between, interrupt);
    }
    if summary.chains.len() == 1 {
        return Ok(summary.mean_square());
    }
    Ok(mean_length * between)
}

/// Mean square about the mean, and long-run variance, of the series `z` over `chains`.
///
/// # Errors
/// As [`long_run_variance`].
pub fn variances(
    z: &[f64],
    chains: &[Range<usize>],
    interrupt: &Interrupt<'_>,
) -> Result<[f64; 2], KernelError> {
    let summary = Summary::new(Source::Given(z), chains, z.len(), interrupt)?;
    Ok([summary.mean_square(), of_summary(&summary, interrupt)?])
}

/// `min(1, var/LRV)` from [`variances`], in (0, 1]; 1 for a constant and where there is none.
pub fn efficiency([square, long_run]: [f64; 2]) -> f64 {
    let ratio = square / long_run;
    if long_run > 0.0 && ratio.is_finite() && ratio > 0.0 {
        ratio.min(1.0)
    } else {
        1.0
    }
}

fn within_chains(
    lags: &mut Lags<'_>,
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
    let floor = variance / (lags.summary.draws as f64).max(10.0).log10();
    Ok((2.0 * total - variance).max(floor))
}

/// The autocovariances `a_t` of [`long_run_variance`], formed when they are asked for.
struct Lags<'a> {
    summary: &'a Summary<'a>,
    entries: Option<Entries<'a>>,
    longest: usize,
    known: Vec<f64>,
}

impl<'a> Lags<'a> {
    fn new(summary: &'a Summary<'a>) -> Self {
        let longest = summary.chains.iter().map(Range::len).max().unwrap_or(0);
        let looks = summary.looks.iter().enumerate();
        let sums = looks.flat_map(|(m, look)| look.products.iter().map(move |sums| (m, *sums)));
        Self {
            summary,
            entries: None,
            longest,
            known: weighted(summary, sums).to_vec(),
        }
    }

    /// `a_t`; `a_0 = W`.
    fn at(&mut self, lag: usize, interrupt: &Interrupt<'_>) -> Result<f64, KernelError> {
        if lag >= self.known.len() {
            interrupt.check()?;
            let summary = self.summary;
            let z = self.entries.get_or_insert_with(|| summary.entries());
            if lag < DIRECT_LAGS {
                let next = next(summary, z, lag, interrupt)?;
                self.known.extend(next);
            } else {
                self.known = all(summary, z, self.longest, interrupt)?;
            }
        }
        Ok(self.known[lag])
    }
}

/// `a_t` for [`TOGETHER`] lags from `lag` on.
fn next(
    summary: &Summary<'_>,
    z: &[f64],
    lag: usize,
    interrupt: &Interrupt<'_>,
) -> Result<[f64; TOGETHER], KernelError> {
    let chains = summary.chains.iter().enumerate();
    let tasks: Vec<_> = chains
        .flat_map(|(m, chain)| parts(chain).map(move |part| (m, part)))
        .collect();
    let sums = map_tasks(tasks, interrupt, |(m, part)| {
        let (chain, centre) = (summary.chains[m].clone(), summary.looks[m].mean);
        Ok((m, products(z, chain, part, lag, centre)))
    })?;
    Ok(weighted(summary, sums))
}

/// Sums of products of parts of chains, weighted by `n_m / (n (n_m − 1))`.
fn weighted<const N: usize>(
    summary: &Summary<'_>,
    sums: impl IntoIterator<Item = (usize, [f64; N])>,
) -> [f64; N] {
    let mut total = [0.0; N];
    for (m, sums) in sums {
        for (total, sum) in total.iter_mut().zip(sums) {
            *total += weight(summary, m) * sum;
        }
    }
    total
}

/// `n_m / (n (n_m − 1))`; 0 for a chain of one draw.
fn weight(summary: &Summary<'_>, m: usize) -> f64 {
    let (length, count) = (summary.chains[m].len() as f64, summary.draws as f64);
    if length < 2.0 {
        return 0.0;
    }
    length / (count * (length - 1.0))
}

/// `a_t` for every lag below the longest chain.
fn all(
    summary: &Summary<'_>,
    z: &[f64],
    longest: usize,
    interrupt: &Interrupt<'_>,
) -> Result<Vec<f64>, KernelError> {
    let scaled = |m: usize| -> Vec<f64> {
        let (root, centre) = (weight(summary, m).sqrt(), summary.looks[m].mean);
        let chain = &z[summary.chains[m].clone()];
        chain.iter().map(|entry| root * (entry - centre)).collect()
    };
    let chains: Vec<usize> = (0..summary.chains.len()).collect();
    let mut spectrum = Spectrum::new(longest)?;
    for two in chains.chunks(2) {
        let first = scaled(two[0]);
        let second = two.get(1).map(|&m| scaled(m)).unwrap_or_default();
        spectrum.add(&first, &second, interrupt)?;
    }
    let mut all = spectrum.correlations(interrupt)?;
    all.resize(longest + 1, 0.0);
    Ok(all)
}
