//! Number of threads.

use pyo3::prelude::*;

use crate::kernels::ordered;

/// Sets the number of threads of this process.
#[pyfunction]
pub fn set_threads(n: usize) -> PyResult<()> {
    Ok(ordered::set_threads(n)?)
}

/// Number of threads in use.
#[pyfunction]
pub fn threads() -> usize {
    ordered::threads()
}
