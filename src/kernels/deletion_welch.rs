//! Whether chains agree, by Welch's test (1951, Biometrika 38).

use super::chains::{FEWEST, FREEDOM};
use super::f_tail::f_tail;

/// The p-value of means, their variances and degrees of freedom.
pub(super) fn welch(chains: &[(f64, f64, f64)]) -> f64 {
    let mut freedoms: Vec<f64> = chains.iter().map(|chain| chain.2).collect();
    freedoms.sort_unstable_by(f64::total_cmp);
    let middle = freedoms.len() / 2;
    let median = if freedoms.len().is_multiple_of(2) {
        (freedoms[middle - 1] + freedoms[middle]) / 2.0
    } else {
        freedoms[middle]
    };
    let precision = |variance: f64| if variance > 0.0 { 1.0 / variance } else { 0.0 };
    let total: f64 = chains.iter().map(|chain| precision(chain.1)).sum();
    if median * FREEDOM < FEWEST || total == 0.0 {
        return 1.0;
    }
    let centre: f64 = chains.iter().map(|c| precision(c.1) * c.0).sum::<f64>() / total;
    let (mut q, mut spread) = (0.0, 0.0);
    for &(mean, variance, freedom) in chains {
        q += precision(variance) * (mean - centre).powi(2);
        spread += (1.0 - precision(variance) / total).powi(2) / freedom;
    }
    let count = chains.len() as f64;
    let square = count * count - 1.0;
    let f = q / (count - 1.0) / (1.0 + 2.0 * (count - 2.0) / square * spread);
    let second = square / (3.0 * if spread > 0.0 { spread } else { 1.0 });
    f_tail(f, count - 1.0, second)
}
