//! The long-run variance of a series of draws in chains.

use std::ops::Range;

use super::error::KernelError;
use super::mean::{mean, mean_square};
use super::ordered::{Interrupt, sum_by};

/// Fewest draws of a chain that is split in two.
const FEWEST_SPLIT: usize = 8;

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
/// # Errors
/// [`KernelError::Interrupted`] only.
///
/// Source: Geyer (1992), Statistical Science 7, 473-483, section 3.3.
pub fn long_run_variance(
    z: &[f64],
    chains: &[Range<usize>],
    interrupt: &Interrupt<'_>,
) -> Result<f64, KernelError> {
    if z.iter().any(|entry| !entry.is_finite()) {
        return Ok(f64::NAN);
    }
    let mean_length = z.len() as f64 / chains.len() as f64;
    let between = between(z, chains);
    if mean_length >= SHORT {
        return within_chains(&Centred::new(z, chains), mean_length, between, interrupt);
    }
    if chains.len() == 1 {
        return Ok(mean_square(z));
    }
    Ok(mean_length * between)
}

/// `M/(M−1) Σ n_m (z̄_m − z̄)² / n`; 0 for one chain.
fn between(z: &[f64], chains: &[Range<usize>]) -> f64 {
    if chains.len() < 2 {
        return 0.0;
    }
    let overall = mean(z);
    let count = chains.len() as f64;
    let spread = sum_by(chains.len(), |m| {
        let distance = mean(&z[chains[m].clone()]) - overall;
        chains[m].len() as f64 * distance * distance
    });
    count / (count - 1.0) * spread / z.len() as f64
}

fn within_chains(
    centred: &Centred<'_>,
    mean_length: f64,
    between: f64,
    interrupt: &Interrupt<'_>,
) -> Result<f64, KernelError> {
    let within = centred.autocovariance(0);
    let variance = within * (1.0 - 1.0 / mean_length) + between;
    let at_lag = |lag| variance - within + centred.autocovariance(lag);
    let mut total = 0.0;
    let mut least = f64::INFINITY;
    for lag in (0..centred.longest.saturating_sub(1)).step_by(2) {
        interrupt.check()?;
        let even = if lag == 0 { variance } else { at_lag(lag) };
        let pair = even + at_lag(lag + 1);
        // NaN comes from series whose squares overflow; it must end the search too.
        if pair.is_nan() || pair <= 0.0 {
            break;
        }
        least = pair.min(least);
        total += least;
    }
    let floor = variance / (centred.values.len() as f64).max(10.0).log10();
    Ok((2.0 * total - variance).max(floor))
}

/// The series with the mean of its chain taken off.
struct Centred<'a> {
    values: Vec<f64>,
    chains: &'a [Range<usize>],
    longest: usize,
}

impl<'a> Centred<'a> {
    fn new(z: &[f64], chains: &'a [Range<usize>]) -> Self {
        let mut values = z.to_vec();
        for range in chains {
            let centre = mean(&z[range.clone()]);
            for entry in &mut values[range.clone()] {
                *entry -= centre;
            }
        }
        let longest = chains.iter().map(Range::len).max().unwrap_or(0);
        Self {
            values,
            chains,
            longest,
        }
    }

    /// `a_t` of [`long_run_variance`]; `a_0 = W`.
    fn autocovariance(&self, lag: usize) -> f64 {
        let count = self.values.len() as f64;
        sum_by(self.chains.len(), |m| {
            let chain = &self.values[self.chains[m].clone()];
            let length = chain.len();
            if length <= lag || length < 2 {
                return 0.0;
            }
            let later = &chain[lag..];
            let products = sum_by(length - lag, |i| chain[i] * later[i]);
            length as f64 / (count * (length as f64 - 1.0)) * products
        })
    }
}
