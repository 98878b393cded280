//! The largest entries.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1};
use pyo3::prelude::*;

use super::arrays::vector;
use super::errors::detached;
use crate::kernels::largest::largest as largest_of;
use crate::kernels::sorting;

/// Indices of the `count` largest entries of `x`, `(n,)`, in ascending order of entry, and the next
/// largest entry; nothing unless there are more entries than `count`. NaN is passed over.
#[pyfunction]
pub fn largest<'py>(
    py: Python<'py>,
    x: PyReadonlyArray1<'py, f64>,
    count: usize,
) -> PyResult<Option<(Bound<'py, PyArray1<i64>>, f64)>> {
    let x = vector("x", &x)?;
    sorting::expect_countable(x.len())?;
    let found = detached(py, |_| Ok(largest_of(&x, 1.0, count)))?;
    Ok(found.map(|(ranked, cutoff)| {
        let indices: Vec<i64> = ranked.iter().map(|&(_, index)| i64::from(index)).collect();
        (indices.into_pyarray(py), cutoff)
    }))
}
