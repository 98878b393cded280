//! Resampling.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1};
use pyo3::prelude::*;

use super::arrays::vector;
use super::errors::detached;
use crate::kernels;
use crate::kernels::error::KernelError;

/// Ascending indices, `(size,)`, chosen by the weights `w`, `(n,)`.
#[pyfunction]
pub fn resample<'py>(
    py: Python<'py>,
    w: PyReadonlyArray1<'py, f64>,
    size: usize,
    method: &str,
    key: &[u8],
) -> PyResult<Bound<'py, PyArray1<i64>>> {
    let w = vector("w", &w)?;
    let method: kernels::resample::Method = method.parse()?;
    let key = <[u8; 32]>::try_from(key).map_err(|_| KernelError::Key { found: key.len() })?;
    let chosen = detached(py, |interrupt| {
        kernels::resample::resample_unless(&w, size, method, key, interrupt)
    })?;
    Ok(chosen.into_pyarray(py))
}
