//! Worth of weights.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::matrix;
use super::errors::detached;
use crate::kernels::columns::map_columns;
use crate::kernels::effective;

/// Effective sample size of every column of the log weights `x`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn effective_size<'py>(
    py: Python<'py>,
    x: PyReadonlyArray2<'py, f64>,
    entropy: bool,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let x = matrix("x", &x)?;
    let kernel = if entropy {
        effective::entropy_size
    } else {
        effective::effective_size
    };
    let sizes = detached(py, |interrupt| {
        map_columns(x, interrupt, |column, _| Ok(kernel(column)))
    })?;
    Ok(sizes.into_pyarray(py))
}

/// Largest normalised weight of every column of the log weights `x`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn largest_share<'py>(
    py: Python<'py>,
    x: PyReadonlyArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let x = matrix("x", &x)?;
    let shares = detached(py, |interrupt| {
        map_columns(x, interrupt, |column, _| {
            Ok(effective::largest_share(column))
        })
    })?;
    Ok(shares.into_pyarray(py))
}
