//! Relative constants of several densities.

use numpy::{IntoPyArray, PyArray1, PyArray2, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels;

/// Constants, shares, logs of the mixture, and the last step.
type Solved<'py> = (
    Bound<'py, PyArray1<f64>>,
    Bound<'py, PyArray2<f64>>,
    Bound<'py, PyArray1<f64>>,
    f64,
);

/// Constants `f` `(K,)` of densities `(n, K)`; shares `(n, K)`, logs of the mixture `(n,)`, and the
/// length of the last step.
#[pyfunction]
pub fn multi_sample<'py>(
    py: Python<'py>,
    log_densities: PyReadonlyArray2<'py, f64>,
    counts: PyReadonlyArray1<'py, f64>,
    sizes: PyReadonlyArray1<'py, f64>,
    start: PyReadonlyArray1<'py, f64>,
    solve: bool,
) -> PyResult<Solved<'py>> {
    let log_densities = matrix("log_densities", &log_densities)?;
    let counts = vector("counts", &counts)?;
    let sizes = vector("sizes", &sizes)?;
    let start = vector("start", &start)?;
    let found = detached(py, |interrupt| {
        kernels::multi_sample::multi_sample(
            log_densities,
            &counts,
            &sizes,
            &start,
            solve,
            interrupt,
        )
    })?;
    Ok((
        found.constants.into_pyarray(py),
        found.shares.into_pyarray(py),
        found.log_mixture.into_pyarray(py),
        found.last_step,
    ))
}
