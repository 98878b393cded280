//! Resampling.

use numpy::{PyArray1, PyArrayMethods, PyReadonlyArray1};
use pyo3::prelude::*;
use pyo3::types::PySlice;

use super::arrays::vector;
use super::errors::detached;
use crate::kernels::error::KernelError;
use crate::kernels::points::COPIES;
use crate::kernels::resample::{Method, expect_room, resample_into};

/// Ascending indices, `(size,)`, chosen by the weights `w`, `(n,)`.
#[pyfunction]
pub fn resample<'py>(
    py: Python<'py>,
    w: PyReadonlyArray1<'py, f64>,
    size: usize,
    method: &str,
    key: &[u8],
) -> PyResult<Bound<'py, PyAny>> {
    let w = vector("w", &w)?;
    let method: Method = method.parse()?;
    let key = <[u8; 32]>::try_from(key).map_err(|_| KernelError::Key { found: key.len() })?;
    expect_room(&w, size, method)?;
    // NumPy's own memory comes in large pages: for a million indices half of the time is first touch.
    let made = py
        .import("numpy")?
        .call_method1("empty", (size + COPIES, "int64"))?;
    let mut chosen = made.cast::<PyArray1<i64>>()?.readwrite();
    let entries = chosen.as_slice_mut()?;
    detached(py, |interrupt| {
        resample_into(&w, entries, method, key, interrupt)
    })?;
    drop(chosen);
    made.get_item(PySlice::new(py, 0, size as isize, 1))
}
