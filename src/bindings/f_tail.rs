//! Upper tail of the F distribution.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1};
use pyo3::exceptions::PyValueError;
use pyo3::prelude::*;

use super::arrays::vector;
use crate::kernels::f_tail as kernel;

/// `P(X > f)` with `first` degrees of freedom above and `second`, one an entry, below.
#[pyfunction]
pub fn f_tail<'py>(
    py: Python<'py>,
    f: PyReadonlyArray1<'py, f64>,
    first: f64,
    second: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let (f, second) = (vector("f", &f)?, vector("second", &second)?);
    if f.len() != second.len() {
        let message = format!("f has {} entries, second has {}", f.len(), second.len());
        return Err(PyValueError::new_err(message));
    }
    let values: Vec<f64> = f
        .iter()
        .zip(second.iter())
        .map(|(&f, &second)| kernel::f_tail(f, first, second))
        .collect();
    Ok(values.into_pyarray(py))
}
