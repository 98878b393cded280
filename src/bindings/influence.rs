//! Influence of deletions.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray2, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{Numbers, matrix, with_view};
use super::errors::detached;
use crate::kernels;

/// Influence of deleting each observation on each quantity: `(N, P)`.
#[pyfunction]
pub fn influence<'py>(
    py: Python<'py>,
    loglik: Numbers<'py>,
    f: PyReadonlyArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let f = matrix("f", &f)?;
    let out = with_view!("loglik", loglik, |loglik| {
        let mut out = Array2::zeros((loglik.ncols(), f.ncols()));
        detached(py, |interrupt| {
            kernels::influence::influence(loglik, f, out.view_mut().reversed_axes(), interrupt)
        })?;
        out
    });
    Ok(out.into_pyarray(py))
}
