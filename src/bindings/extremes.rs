//! Smallest and largest entry.

use numpy::PyReadonlyArray1;
use pyo3::prelude::*;

use super::arrays::vector;
use super::errors::detached;
use crate::kernels::extremes::extremes as extremes_of;

/// Smallest and largest entry of `x`, `(n,)`; both NaN if any entry is.
#[pyfunction]
pub fn extremes(py: Python<'_>, x: PyReadonlyArray1<'_, f64>) -> PyResult<(f64, f64)> {
    let x = vector("x", &x)?;
    detached(py, |interrupt| extremes_of(&x, interrupt))
}
