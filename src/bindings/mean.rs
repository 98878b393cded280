//! Means.

use ndarray::{Array2, ArrayView2};
use numpy::{IntoPyArray, PyArray1, PyArray2, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels::columns::map_columns;
use crate::kernels::error::KernelError;
use crate::kernels::ordered::Interrupt;
use crate::kernels::{mean, moments};

/// Mean square about the mean of every column of `z`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn mean_square<'py>(
    py: Python<'py>,
    z: PyReadonlyArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let z = matrix("z", &z)?;
    let squares = detached(py, |interrupt| {
        map_columns(z, interrupt, |column, _| Ok(mean::mean_square(column)))
    })?;
    Ok(squares.into_pyarray(py))
}

/// How many draws carry every column of `z`, `(n, k)`, on its heavier side: `(k,)`.
#[pyfunction]
pub fn contributions<'py>(
    py: Python<'py>,
    z: PyReadonlyArray2<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let z = matrix("z", &z)?;
    let counts = detached(py, |interrupt| {
        map_columns(z, interrupt, |column, _| Ok(mean::contributions(column)))
    })?;
    Ok(counts.into_pyarray(py))
}

/// `Σ w f` of every column of `f`, `(n, k)`, with weights `w`, `(n,)`: `(k,)`.
#[pyfunction]
pub fn weighted_mean<'py>(
    py: Python<'py>,
    f: PyReadonlyArray2<'py, f64>,
    w: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let means = weighted(py, &f, &w, moments::weighted_means)?;
    Ok(means.into_pyarray(py))
}

/// Weighted mean and weighted mean square about it of every column of `f`, `(n, k)`: `(2, k)`.
#[pyfunction]
pub fn weighted_moments<'py>(
    py: Python<'py>,
    f: PyReadonlyArray2<'py, f64>,
    w: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let (means, squares) = weighted(py, &f, &w, moments::weighted_moments)?;
    let out = Array2::from_shape_fn((2, means.len()), |(moment, column)| {
        if moment == 0 {
            means[column]
        } else {
            squares[column]
        }
    });
    Ok(out.into_pyarray(py))
}

/// Weighted covariance matrix of the columns of `f`, `(n, k)`: `(k, k)`.
#[pyfunction]
pub fn weighted_covariance<'py>(
    py: Python<'py>,
    f: PyReadonlyArray2<'py, f64>,
    w: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let out = weighted(py, &f, &w, moments::covariance)?;
    Ok(out.into_pyarray(py))
}

fn weighted<'py, T: Send>(
    py: Python<'py>,
    f: &PyReadonlyArray2<'py, f64>,
    w: &PyReadonlyArray1<'py, f64>,
    kernel: impl Fn(ArrayView2<'_, f64>, &[f64], &Interrupt<'_>) -> Result<T, KernelError> + Sync,
) -> PyResult<T> {
    let (f, w) = (matrix("f", f)?, vector("w", w)?);
    detached(py, |interrupt| kernel(f, &w, interrupt))
}
