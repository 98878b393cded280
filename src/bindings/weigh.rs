//! Weights that sum to one.

use numpy::{PyReadonlyArray1, PyReadwriteArray1};
use pyo3::prelude::*;

use super::arrays::vector;
use super::errors::detached;
use crate::kernels::smooth_weights::{Weighed, smooth_weights as smooth_weights_into};
use crate::kernels::weigh::weigh as weigh_into;
use crate::kernels::weight_sums::Sums;

/// Log-sum-exp, both effective sizes and the largest share.
type Figures = (f64, f64, f64, f64);

/// The fields of [`Sums`].
type Plain = (f64, f64, f64, f64);

/// Writes the weights of the log weights `x`, `(n,)`, normalised, into `out`, contiguous; returns
/// log-sum-exp, both effective sizes and the largest share; and the sums for `smooth_weights`.
#[pyfunction]
pub fn weigh(
    py: Python<'_>,
    x: PyReadonlyArray1<'_, f64>,
    mut out: PyReadwriteArray1<'_, f64>,
) -> PyResult<(Figures, Plain)> {
    let (x, out) = (vector("x", &x)?, out.as_slice_mut()?);
    let sums = detached(py, |interrupt| weigh_into(&x, out, interrupt))?;
    let plain = (sums.maximum, sums.total, sums.squares, sums.spread);
    Ok((figures(&sums), plain))
}

/// Writes smoothed weights, natural scale, of the log weights `x`, `(n,)`, into `out`, contiguous,
/// from what `weigh` has found; returns the tail shape, and figures of the result as `weigh` does.
#[pyfunction]
pub fn smooth_weights(
    py: Python<'_>,
    x: PyReadonlyArray1<'_, f64>,
    raw: PyReadonlyArray1<'_, f64>,
    sums: Plain,
    relative_efficiency: f64,
    mut out: PyReadwriteArray1<'_, f64>,
) -> PyResult<(f64, Figures)> {
    let (x, raw, out) = (vector("x", &x)?, vector("raw", &raw)?, out.as_slice_mut()?);
    let (maximum, total, squares, spread) = sums;
    let of = Weighed {
        x: &x,
        raw: &raw,
        sums: Sums {
            maximum,
            total,
            squares,
            spread,
        },
    };
    let (shape, sums) = detached(py, |interrupt| {
        smooth_weights_into(of, relative_efficiency, out, interrupt)
    })?;
    Ok((shape, figures(&sums)))
}

fn figures(sums: &Sums) -> Figures {
    (
        sums.log_sum(),
        sums.effective_size(),
        sums.entropy_size(),
        sums.largest_share(),
    )
}
