//! Shortest intervals.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray2, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels::columns::{expect_shape, map_columns_into};
use crate::kernels::interval;

/// Lower and upper end of the shortest interval of every column of `x`, `(n, k)`: `(2, k)`.
#[pyfunction]
pub fn shortest_interval<'py>(
    py: Python<'py>,
    x: PyReadonlyArray2<'py, f64>,
    w: PyReadonlyArray1<'py, f64>,
    mass: f64,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let x = matrix("x", &x)?;
    let w = vector("w", &w)?;
    expect_shape("w", &[x.nrows()], &[w.len()])?;
    interval::expect_mass(mass)?;
    let mut out = Array2::zeros((2, x.ncols()));
    detached(py, |interrupt| {
        map_columns_into(x, out.view_mut(), interrupt, |column, _, target| {
            let (lower, upper) = interval::shortest_interval(column, &w, mass);
            target.copy_from_slice(&[lower, upper]);
            Ok(())
        })
    })?;
    Ok(out.into_pyarray(py))
}
