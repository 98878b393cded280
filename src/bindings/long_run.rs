//! Long-run variance.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1, PyReadonlyArray2};
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
