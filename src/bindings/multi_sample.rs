//! Relative constants of several densities.

use numpy::{IntoPyArray, PyArray1, PyArray2, PyArrayMethods, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels::multi_sample::{Delivery, Problem, multi_sample_into};

/// Constants, shares, logs of the mixture, and the last step.
type Solved<'py> = (
    Bound<'py, PyArray1<f64>>,
    Bound<'py, PyArray2<f64>>,
    Bound<'py, PyArray1<f64>>,
    f64,
);

/// Constants `f` `(K,)` of densities `(n, K)`; shares `(n, K)`, logs of the mixture `(n,)`, and the
/// length of the last step.
#[pyfunction]
pub fn multi_sample<'py>(
    py: Python<'py>,
    log_densities: PyReadonlyArray2<'py, f64>,
    counts: PyReadonlyArray1<'py, f64>,
    sizes: PyReadonlyArray1<'py, f64>,
    start: PyReadonlyArray1<'py, f64>,
    solve: bool,
) -> PyResult<Solved<'py>> {
    let log_densities = matrix("log_densities", &log_densities)?;
    let counts = vector("counts", &counts)?;
    let sizes = vector("sizes", &sizes)?;
    let start = vector("start", &start)?;
    let (draws, densities) = log_densities.dim();
    // NumPy reuses the memory of arrays that have gone; fresh memory would cost half of the time.
    let made = py
        .import("numpy")?
        .call_method1("empty", ((draws, densities),))?;
    let shares = made.cast_into::<PyArray2<f64>>()?;
    let log_mixture = PyArray1::<f64>::zeros(py, draws, false);
    let (mut into, mut logs) = (shares.readwrite(), log_mixture.readwrite());
    let delivery = Delivery {
        shares: into.as_array_mut(),
        log_mixture: logs.as_slice_mut()?,
    };
    let problem = Problem {
        log_densities,
        counts: &counts,
        sizes: &sizes,
    };
    let (constants, last_step) = detached(py, |interrupt| {
        multi_sample_into(problem, &start, solve, delivery, interrupt)
    })?;
    drop((into, logs));
    Ok((constants.into_pyarray(py), shares, log_mixture, last_step))
}
