//! Worth of weights.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray1, PyArray2};
use pyo3::prelude::*;

use super::arrays::{Numbers, with_view};
use super::errors::detached;
use crate::kernels::reductions::column_sums;
use crate::kernels::weight_sums::{Sums, form};

/// Effective sample size of every column of the log weights `x`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn effective_size<'py>(
    py: Python<'py>,
    x: Numbers<'py>,
    entropy: bool,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let sizes: Vec<f64> = with_view!("x", x, |x| detached(py, |interrupt| {
        Ok(if entropy {
            let sums = column_sums::<_, { form::SPREAD }>(x, interrupt)?;
            sums.iter().map(Sums::entropy_size).collect()
        } else {
            let sums = column_sums::<_, { form::SQUARES }>(x, interrupt)?;
            sums.iter().map(Sums::effective_size).collect()
        })
    }))?;
    Ok(sizes.into_pyarray(py))
}

/// Largest normalised weight of every column of the log weights `x`, `(n, k)`: `(k,)`.
#[pyfunction]
pub fn largest_share<'py>(py: Python<'py>, x: Numbers<'py>) -> PyResult<Bound<'py, PyArray1<f64>>> {
    let sums = with_view!("x", x, |x| detached(py, |interrupt| {
        column_sums::<_, { form::TOTAL }>(x, interrupt)
    }))?;
    let shares: Vec<f64> = sums.iter().map(Sums::largest_share).collect();
    Ok(shares.into_pyarray(py))
}

/// Log-sum-exp, both effective sizes and the largest share of every column of the log weights
/// `x`, `(n, k)`, in one pass: `(4, k)`.
#[pyfunction]
pub fn describe<'py>(py: Python<'py>, x: Numbers<'py>) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let sums = with_view!("x", x, |x| detached(py, |interrupt| {
        column_sums::<_, { form::ALL }>(x, interrupt)
    }))?;
    let figures = [
        Sums::log_sum,
        Sums::effective_size,
        Sums::entropy_size,
        Sums::largest_share,
    ];
    let out = Array2::from_shape_fn((4, sums.len()), |(figure, column)| {
        figures[figure](&sums[column])
    });
    Ok(out.into_pyarray(py))
}
