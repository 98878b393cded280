//! The weighted mean of each chain, with its error.

use std::ops::Range;

use super::error::KernelError;
use super::long_run::of_summary;
use super::mean::{Power, powers, sum_blocks};
use super::ordered::{Interrupt, map_tasks};
use super::summary::{Source, Summary};
use super::vector::{Arithmetic, Work, dispatch};

/// Below this mass squares of weights would vanish; such weights are lifted by a power of two first.
pub(super) const LEAST_MASS: f64 = 1e-120;
const LIFT: f64 = f64::from_bits((1023 + 600) << 52);

/// What a chain says of a weighted mean.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ChainMean {
    /// `W = Σ w` over the chain.
    pub mass: f64,
    /// `μ = Σ w ψ / W`.
    pub mean: f64,
    /// Long-run variance of `T w (ψ − μ) / W`, T the length of the chain.
    pub long_run: f64,
    /// `Σ (w/W)²`.
    pub squares: f64,
    /// `Σ w (ψ − μ)² / W`.
    pub variance: f64,
}

/// The [`ChainMean`] of `ψ = f − centre` of every chain from one edge to the next; `f` of shape
/// `(n,)`, weights `w` on the natural scale, of the same shape, or empty for equal ones.
///
/// A draw of weight 0 is left out; a chain without weight has no mean but NaN.
///
/// # Errors
/// [`KernelError::Interrupted`]; [`KernelError::Memory`].
pub fn chain_means(
    f: &[f64],
    centre: f64,
    w: &[f64],
    chains: &[Range<usize>],
    interrupt: &Interrupt<'_>,
) -> Result<Vec<ChainMean>, KernelError> {
    map_tasks(chains.to_vec(), interrupt, |chain| {
        let f = &f[chain.clone()];
        match w.get(chain) {
            Some(w) if !w.is_empty() => weighted(f, centre, w, interrupt),
            _ => equal(f, centre, interrupt),
        }
    })
}

fn equal(f: &[f64], centre: f64, interrupt: &Interrupt<'_>) -> Result<ChainMean, KernelError> {
    let halves = halves_of(f.len());
    let summary = Summary::new(Source::Given(f), &halves, f.len(), interrupt)?;
    Ok(ChainMean {
        mass: f.len() as f64,
        mean: summary.mean() - centre,
        long_run: of_summary(&summary, interrupt)?,
        squares: 1.0 / f.len() as f64,
        variance: summary.mean_square(),
    })
}

pub(super) fn weighted(
    f: &[f64],
    centre: f64,
    w: &[f64],
    interrupt: &Interrupt<'_>,
) -> Result<ChainMean, KernelError> {
    let mass = sum_blocks(w, &[], 0.0, Power::First);
    if mass > 0.0 && mass < LEAST_MASS {
        let lifted: Vec<f64> = w.iter().map(|w| w * LIFT).collect();
        let found = weighted(f, centre, &lifted, interrupt)?;
        return Ok(ChainMean { mass, ..found });
    }
    let mean = sum_blocks(f, w, centre, Power::First) / mass;
    let (squares, _) = powers(w, 0.0, 1.0 / mass);
    let scale = f.len() as f64 / mass;
    let fill = |range: Range<usize>, out: &mut [f64]| {
        dispatch(Influence {
            f: &f[range.clone()],
            w: &w[range],
            centre,
            mean,
            scale,
            out,
        });
    };
    let halves = halves_of(f.len());
    let summary = Summary::new(Source::Made(&fill), &halves, f.len(), interrupt)?;
    Ok(ChainMean {
        mass,
        mean,
        long_run: of_summary(&summary, interrupt)?,
        squares,
        variance: sum_blocks(f, w, centre + mean, Power::Second) / mass,
    })
}

/// Both halves of a chain of `length` draws, as [`super::long_run::chains`] splits it.
pub(super) fn halves_of(length: usize) -> Vec<Range<usize>> {
    if length < super::long_run::FEWEST_SPLIT {
        return std::iter::once(0..length).collect();
    }
    vec![0..length / 2, length / 2..length]
}

/// `scale w ((f − centre) − mean)`, 0 without weight.
struct Influence<'a> {
    f: &'a [f64],
    w: &'a [f64],
    centre: f64,
    mean: f64,
    scale: f64,
    out: &'a mut [f64],
}

impl Work for Influence<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for ((target, &f), &w) in self.out.iter_mut().zip(self.f).zip(self.w) {
            let z = self.scale * w * ((f - self.centre) - self.mean);
            *target = if w == 0.0 { 0.0 } else { z };
        }
    }
}
