//! Pareto smoothing.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1, PyReadwriteArray2};
use pyo3::prelude::*;

use super::arrays::{Numbers, matrix_mut, vector, with_view};
use super::errors::reporting;
use crate::kernels;
use crate::kernels::columns::{expect_shape, map_columns, map_columns_in_place};

/// Writes smoothed, normalised log weights into `out`, `(n, k)`; returns tail shapes, `(k,)`.
#[pyfunction]
#[pyo3(signature = (x, relative_efficiency, out, progress=None))]
pub fn smooth<'py>(
    py: Python<'py>,
    x: Numbers<'py>,
    relative_efficiency: PyReadonlyArray1<'py, f64>,
    mut out: PyReadwriteArray2<'py, f64>,
    progress: Option<Py<PyAny>>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let out = matrix_mut("out", &mut out)?;
    let efficiency = vector("relative_efficiency", &relative_efficiency)?;
    let shapes = with_view!("x", x, |x| {
        expect_shape("relative_efficiency", &[x.ncols()], &[efficiency.len()])?;
        expect_shape("out", x.shape(), out.shape())?;
        reporting(py, progress.as_ref(), |interrupt| {
            map_columns_in_place(x, out, interrupt, |column, index| {
                Ok(kernels::smooth::smooth_in_place(column, efficiency[index]))
            })
        })
    })?;
    Ok(shapes.into_pyarray(py))
}

/// Tail shape of every column of the log weights `x`, `(n, k)`: `(k,)`.
#[pyfunction]
#[pyo3(signature = (x, relative_efficiency, progress=None))]
pub fn tail_shape<'py>(
    py: Python<'py>,
    x: Numbers<'py>,
    relative_efficiency: PyReadonlyArray1<'py, f64>,
    progress: Option<Py<PyAny>>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let efficiency = vector("relative_efficiency", &relative_efficiency)?;
    let shapes = with_view!("x", x, |x| {
        expect_shape("relative_efficiency", &[x.ncols()], &[efficiency.len()])?;
        reporting(py, progress.as_ref(), |interrupt| {
            map_columns(x, interrupt, |column, index| {
                Ok(kernels::smooth::tail_shape(column, efficiency[index]))
            })
        })
    })?;
    Ok(shapes.into_pyarray(py))
}
