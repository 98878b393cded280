//! How far each observation moves each quantity.

use ndarray::{ArrayView2, ArrayViewMut2};

use super::columns::{expect_shape, map_columns, map_columns_into};
use super::error::KernelError;
use super::log_sum::maximum;
use super::mean::mean;
use super::ordered::{Interrupt, sum_by};

/// Writes the influence of deleting each observation, `Σ_s w_s^(i) f_sp − mean_s f_sp`, into `out`,
/// shape `(P, N)`; `w^(i) ∝ exp(−L_si)` are the raw deletion weights, not smoothed.
///
/// `loglik` holds the log likelihood values `L`, shape `(n, N)`, log scale; `quantities` holds `f`,
/// shape `(n, P)`. The result has the unit of `f`. NaN or `−inf` in a column of `loglik`, NaN or an
/// infinite entry in one of `f` give NaN in its row or column.
///
/// # Errors
/// [`KernelError::Shape`] when the draws of both or the shape of `out` do not fit;
/// [`KernelError::Interrupted`].
///
/// Source: Gelfand, Dey & Chang (1992), Bayesian Statistics 4, 147-167, for the deletion weights.
pub fn influence(
    loglik: ArrayView2<'_, f64>,
    quantities: ArrayView2<'_, f64>,
    out: ArrayViewMut2<'_, f64>,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let (draws, observations) = loglik.dim();
    expect_shape("f", &[draws, quantities.ncols()], quantities.shape())?;
    expect_shape("out", &[quantities.ncols(), observations], out.shape())?;
    let centred = map_columns(quantities, interrupt, |column, _| {
        let centre = mean(column);
        Ok(column
            .iter()
            .map(|entry| entry - centre)
            .collect::<Vec<f64>>())
    })?;
    map_columns_into(loglik, out, interrupt, |column, _, target| {
        shifts(column, &centred, target);
        Ok(())
    })?;
    Ok(())
}

/// `Σ_s w_s f_s` for every centred quantity, with `w ∝ exp(−loglik)`.
fn shifts(loglik: &[f64], centred: &[Vec<f64>], out: &mut [f64]) {
    let negative: Vec<f64> = loglik.iter().map(|entry| -entry).collect();
    let largest = maximum(&negative);
    let weights: Vec<f64> = negative
        .iter()
        .map(|entry| (entry - largest).exp())
        .collect();
    let total = sum_by(weights.len(), |s| weights[s]);
    for (target, quantity) in out.iter_mut().zip(centred) {
        *target = sum_by(weights.len(), |s| weights[s] * quantity[s]) / total;
    }
}
