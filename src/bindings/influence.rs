//! Influence of deletions.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray2, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{Numbers, matrix, with_view};
use super::errors::reporting;
use crate::kernels;

/// Influence of deleting each observation on each quantity: `(N, P)`.
#[pyfunction]
#[pyo3(signature = (loglik, f, progress=None))]
pub fn influence<'py>(
    py: Python<'py>,
    loglik: Numbers<'py>,
    f: PyReadonlyArray2<'py, f64>,
    progress: Option<Py<PyAny>>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let f = matrix("f", &f)?;
    let out = with_view!("loglik", loglik, |loglik| {
        let mut out = Array2::zeros((loglik.ncols(), f.ncols()));
        reporting(py, progress.as_ref(), |interrupt| {
            kernels::influence::influence(loglik, f, out.view_mut().reversed_axes(), interrupt)
        })?;
        out
    });
    Ok(out.into_pyarray(py))
}
