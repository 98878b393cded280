//! Sums of exponentials.

use numpy::{IntoPyArray, PyArray1, PyReadwriteArray2};
use pyo3::prelude::*;

use super::arrays::{Numbers, matrix_mut, with_view};
use super::errors::detached;
use crate::kernels::reductions::{column_sums, normalise_columns};
use crate::kernels::weight_sums::{Sums, form};

/// Log-sum-exp of every column of the log weights `x`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn log_sum_exp<'py>(py: Python<'py>, x: Numbers<'py>) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let sums = with_view!("x", x, |x| detached(py, |interrupt| {
        column_sums::<_, { form::TOTAL }>(x, interrupt)
    }))?;
    Ok(sums
        .iter()
        .map(Sums::log_sum)
        .collect::<Vec<f64>>()
        .into_pyarray(py))
}

/// Writes the normalised log weights into `out`, `(n, k)`, and returns the log sums, `(k,)`.
#[pyfunction]
pub fn normalise<'py>(
    py: Python<'py>,
    x: Numbers<'py>,
    mut out: PyReadwriteArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let out = matrix_mut("out", &mut out)?;
    let sums = with_view!("x", x, |x| detached(py, |interrupt| {
        normalise_columns(x, out, interrupt)
    }))?;
    Ok(sums.into_pyarray(py))
}
