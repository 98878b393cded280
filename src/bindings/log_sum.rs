//! Sums of exponentials.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray2, PyReadwriteArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, matrix_mut};
use super::errors::detached;
use crate::kernels::columns::{expect_shape, map_columns, map_columns_into};
use crate::kernels::log_sum;

/// Log-sum-exp of every column of the log weights `x`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn log_sum_exp<'py>(
    py: Python<'py>,
    x: PyReadonlyArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let x = matrix("x", &x)?;
    let sums = detached(py, |interrupt| {
        map_columns(x, interrupt, |column, _| Ok(log_sum::log_sum_exp(column)))
    })?;
    Ok(sums.into_pyarray(py))
}

/// Writes the normalised log weights into `out`, `(n, k)`, and returns the log sums, `(k,)`.
#[pyfunction]
pub fn normalise<'py>(
    py: Python<'py>,
    x: PyReadonlyArray2<'py, f64>,
    mut out: PyReadwriteArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let x = matrix("x", &x)?;
    let out = matrix_mut("out", &mut out)?;
    expect_shape("out", x.shape(), out.shape())?;
    let sums = detached(py, |interrupt| {
        map_columns_into(x, out, interrupt, |column, _, target| {
            Ok(log_sum::normalise(column, target))
        })
    })?;
    Ok(sums.into_pyarray(py))
}
