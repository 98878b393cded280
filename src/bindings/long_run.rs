//! Long-run variance.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray1, PyArray2, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels::columns::map_columns;
use crate::kernels::long_run;

/// Long-run variance of every column of `z`, `(n, k)`, over chains: `(k,)`.
#[pyfunction]
pub fn long_run_variance<'py>(
    py: Python<'py>,
    z: PyReadonlyArray2<'py, f64>,
    starts: PyReadonlyArray1<'py, i64>,
    split: bool,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let z = matrix("z", &z)?;
    let chains = long_run::chains(&vector("starts", &starts)?, z.nrows(), split)?;
    let variances = detached(py, |interrupt| {
        map_columns(z, interrupt, |column, _| {
            long_run::long_run_variance(column, &chains, interrupt)
        })
    })?;
    Ok(variances.into_pyarray(py))
}

/// Mean square about the mean, and long-run variance, of every column of `z`, `(n, k)`, over
/// chains: `(2, k)`.
#[pyfunction]
pub fn variances<'py>(
    py: Python<'py>,
    z: PyReadonlyArray2<'py, f64>,
    starts: PyReadonlyArray1<'py, i64>,
    split: bool,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let z = matrix("z", &z)?;
    let chains = long_run::chains(&vector("starts", &starts)?, z.nrows(), split)?;
    let found = detached(py, |interrupt| {
        map_columns(z, interrupt, |column, _| {
            long_run::variances(column, &chains, interrupt)
        })
    })?;
    let out = Array2::from_shape_fn((2, found.len()), |(figure, column)| found[column][figure]);
    Ok(out.into_pyarray(py))
}
