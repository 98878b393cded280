//! Special functions.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1};
use pyo3::prelude::*;

use super::arrays::vector;
use super::errors::detached;
use crate::kernels::ordered::map_slice;
use crate::kernels::special;

/// Standard normal distribution function at every `x`.
#[pyfunction]
pub fn normal_cdf<'py>(
    py: Python<'py>,
    x: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    each(py, "x", &x, special::normal_cdf)
}

/// Standard normal quantile at every `p`.
#[pyfunction]
pub fn normal_quantile<'py>(
    py: Python<'py>,
    p: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    each(py, "p", &p, special::normal_quantile)
}

/// `function` at every entry of `array`.
pub(super) fn each<'py>(
    py: Python<'py>,
    argument: &'static str,
    array: &PyReadonlyArray1<'py, f64>,
    function: impl Fn(f64) -> f64 + Sync + Send,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let entries = vector(argument, array)?;
    let values = detached(py, |interrupt| map_slice(&entries, interrupt, function))?;
    Ok(values.into_pyarray(py))
}
