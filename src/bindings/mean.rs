//! Means.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray1, PyArray2, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels::columns::map_columns;
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
    let f = matrix("f", &f)?;
    let w = vector("w", &w)?;
    let means = detached(py, |interrupt| moments::weighted_means(f, &w, interrupt))?;
    Ok(means.into_pyarray(py))
}

/// Weighted mean and weighted mean square about it of every column of `f`, `(n, k)`: `(2, k)`.
#[pyfunction]
pub fn weighted_moments<'py>(
    py: Python<'py>,
    f: PyReadonlyArray2<'py, f64>,
    w: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let f = matrix("f", &f)?;
    let w = vector("w", &w)?;
    let (means, squares) = detached(py, |interrupt| moments::weighted_moments(f, &w, interrupt))?;
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
    let f = matrix("f", &f)?;
    let w = vector("w", &w)?;
    let out = detached(py, |interrupt| moments::covariance(f, &w, interrupt))?;
    Ok(out.into_pyarray(py))
}
