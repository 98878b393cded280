//! The upper tail of a set of draws: how long it is, which draws lie in it, and how heavy it is.

use super::pareto::{self, FEWEST, Pareto};

/// Tail length `M = ⌈min(S/5, 3 √(S/e))⌉` of `S` draws with relative efficiency `e`, the rule of
/// Vehtari, Simpson, Gelman, Yao & Gabry (2024), JMLR 25.
pub fn tail_length(draws: usize, relative_efficiency: f64) -> usize {
    let count = draws as f64;
    (3.0 * (count / relative_efficiency).sqrt())
        .min(count / 5.0)
        .ceil() as usize
}

/// What became of a tail.
#[derive(Debug, Clone, PartialEq)]
pub enum Tail {
    /// Too few draws to say anything.
    Short,
    /// All draws in it are equal.
    Constant,
    /// Draws and the distribution fitted to their exceedances over the cut-off.
    Fitted {
        /// Indices of the tail draws in ascending order of value; ties in input order.
        ranked: Vec<usize>,
        /// Largest value that is not in the tail.
        cutoff: f64,
        /// Fit whose shape is shrunk; location 0, so that it describes exceedances.
        fit: Pareto,
    },
}

impl Tail {
    /// Tail shape: `+inf` for a short tail, `−inf` for a constant one.
    pub fn shape(&self) -> f64 {
        match self {
            Self::Short => f64::INFINITY,
            Self::Constant => f64::NEG_INFINITY,
            Self::Fitted { fit, .. } => fit.shape,
        }
    }
}

/// The `length` largest of `values`, fitted. `natural` takes a value to the natural scale;
/// `exceedance(value, cutoff)` is the difference there.
///
/// `length` must leave at least one value below the tail, the cut-off; else the tail is short.
pub fn fit_tail(
    values: &[f64],
    length: usize,
    natural: impl Fn(f64) -> f64,
    exceedance: impl Fn(f64, f64) -> f64,
) -> Tail {
    if length < FEWEST || length >= values.len() {
        return Tail::Short;
    }
    let (ranked, cutoff) = largest(values, length);
    let tail: Vec<f64> = ranked.iter().map(|&index| values[index]).collect();
    let ends = (tail.first().copied(), tail.last().copied());
    if let (Some(least), Some(most)) = ends
        && natural(least) == natural(most)
    {
        return Tail::Constant;
    }
    let exceedances: Vec<f64> = tail
        .iter()
        .map(|&value| exceedance(value, cutoff))
        .collect();
    let fit = pareto::fit_sorted(&exceedances).shrunk(length);
    Tail::Fitted {
        ranked,
        cutoff,
        fit,
    }
}

/// Indices of the `length` largest values in ascending order, and the largest value left. Among
/// equal values the earlier index ranks lower.
fn largest(values: &[f64], length: usize) -> (Vec<usize>, f64) {
    let by_rank = |a: &usize, b: &usize| values[*a].total_cmp(&values[*b]).then_with(|| a.cmp(b));
    let mut order: Vec<usize> = (0..values.len()).collect();
    let below = values.len() - length - 1;
    let (_, &mut cutoff, upper) = order.select_nth_unstable_by(below, by_rank);
    upper.sort_unstable_by(by_rank);
    (upper.to_vec(), values[cutoff])
}
