//! Pareto smoothing.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1, PyReadonlyArray2, PyReadwriteArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, matrix_mut, vector};
use super::errors::detached;
use crate::kernels;
use crate::kernels::columns::{expect_shape, map_columns, map_columns_into};

/// Writes smoothed, normalised log weights into `out`, `(n, k)`; returns tail shapes, `(k,)`.
#[pyfunction]
pub fn smooth<'py>(
    py: Python<'py>,
    x: PyReadonlyArray2<'py, f64>,
    relative_efficiency: PyReadonlyArray1<'py, f64>,
    mut out: PyReadwriteArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let x = matrix("x", &x)?;
    let out = matrix_mut("out", &mut out)?;
    let efficiency = vector("relative_efficiency", &relative_efficiency)?;
    expect_shape("relative_efficiency", &[x.ncols()], &[efficiency.len()])?;
    expect_shape("out", x.shape(), out.shape())?;
    let shapes = detached(py, |interrupt| {
        map_columns_into(x, out, interrupt, |column, index, target| {
            Ok(kernels::smooth::smooth(column, efficiency[index], target))
        })
    })?;
    Ok(shapes.into_pyarray(py))
}

/// Tail shape of every column of the log weights `x`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn tail_shape<'py>(
    py: Python<'py>,
    x: PyReadonlyArray2<'py, f64>,
    relative_efficiency: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let x = matrix("x", &x)?;
    let efficiency = vector("relative_efficiency", &relative_efficiency)?;
    expect_shape("relative_efficiency", &[x.ncols()], &[efficiency.len()])?;
    let shapes = detached(py, |interrupt| {
        map_columns(x, interrupt, |column, index| {
            Ok(kernels::smooth::tail_shape(column, efficiency[index]))
        })
    })?;
    Ok(shapes.into_pyarray(py))
}
