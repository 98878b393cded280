//! Log weights that sum to one.

use numpy::{PyReadonlyArray1, PyReadwriteArray1};
use pyo3::prelude::*;

use super::arrays::vector;
use super::errors::detached;
use crate::kernels::weigh::weigh as weigh_into;

/// Writes the log weights `x`, `(n,)`, normalised, into `out`, contiguous; returns log-sum-exp, both
/// effective sizes and the largest share.
#[pyfunction]
pub fn weigh(
    py: Python<'_>,
    x: PyReadonlyArray1<'_, f64>,
    mut out: PyReadwriteArray1<'_, f64>,
) -> PyResult<(f64, f64, f64, f64)> {
    let (x, out) = (vector("x", &x)?, out.as_slice_mut()?);
    let sums = detached(py, |interrupt| weigh_into(&x, out, interrupt))?;
    Ok((
        sums.log_sum(),
        sums.effective_size(),
        sums.entropy_size(),
        sums.largest_share(),
    ))
}
