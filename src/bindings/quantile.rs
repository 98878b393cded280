//! Weighted quantiles.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray2, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels;
use crate::kernels::columns::{expect_shape, map_columns_into};

/// Weighted quantiles of every column of `x`, `(n, k)`, at its column of `probs`: `(m, k)`.
#[pyfunction]
pub fn quantile<'py>(
    py: Python<'py>,
    x: PyReadonlyArray2<'py, f64>,
    w: PyReadonlyArray1<'py, f64>,
    probs: PyReadonlyArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let x = matrix("x", &x)?;
    let w = vector("w", &w)?;
    let probs = matrix("probs", &probs)?;
    expect_shape("w", &[x.nrows()], &[w.len()])?;
    expect_shape("probs", &[probs.nrows(), x.ncols()], probs.shape())?;
    let mut out = Array2::zeros(probs.dim());
    detached(py, |interrupt| {
        map_columns_into(x, out.view_mut(), interrupt, |column, index, target| {
            let levels = probs.column(index);
            kernels::quantile::quantile(column, &w, levels.iter().copied(), target);
            Ok(())
        })
    })?;
    Ok(out.into_pyarray(py))
}
