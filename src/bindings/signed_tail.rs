//! Tail shape of influence values.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels::columns::{expect_shape, map_columns};
use crate::kernels::signed_tail;

/// Tail shape of every column of the influence values `z`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn signed_tail_shape<'py>(
    py: Python<'py>,
    z: PyReadonlyArray2<'py, f64>,
    relative_efficiency: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let z = matrix("z", &z)?;
    let efficiency = vector("relative_efficiency", &relative_efficiency)?;
    expect_shape("relative_efficiency", &[z.ncols()], &[efficiency.len()])?;
    let shapes = detached(py, |interrupt| {
        map_columns(z, interrupt, |column, index| {
            Ok(signed_tail::signed_tail_shape(column, efficiency[index]))
        })
    })?;
    Ok(shapes.into_pyarray(py))
}
