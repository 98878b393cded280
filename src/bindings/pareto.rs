//! The generalised Pareto fit.

use numpy::PyReadonlyArray1;
use pyo3::prelude::*;

use super::arrays::vector;
use super::errors::detached;
use crate::kernels::error::KernelError;
use crate::kernels::pareto;

/// Shape and scale of the generalised Pareto distribution fitted to exceedances `x`, `(n,)`.
#[pyfunction]
pub fn pareto_fit(py: Python<'_>, x: PyReadonlyArray1<'_, f64>) -> PyResult<(f64, f64)> {
    let x = vector("x", &x)?;
    if x.is_empty() {
        return Err(KernelError::Empty { argument: "x" }.into());
    }
    let fit = detached(py, |_| Ok(pareto::fit(&x)))?;
    Ok((fit.shape, fit.scale))
}
