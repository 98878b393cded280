//! Shortest intervals.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray2, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{Numbers, vector, with_view};
use super::errors::detached;
use super::quantile::{expect_order, given_order, order_of};
use crate::kernels::columns::{expect_shape, map_columns_into};
use crate::kernels::interval;

/// Lower and upper end of the shortest interval of every column of `x`, `(n, k)`: `(2, k)`.
/// `order` is what `sort_order` gives for `x`.
#[pyfunction]
#[pyo3(signature = (x, w, mass, order=None))]
pub fn shortest_interval<'py>(
    py: Python<'py>,
    x: Numbers<'py>,
    w: PyReadonlyArray1<'py, f64>,
    mass: f64,
    order: Option<PyReadonlyArray2<'py, i32>>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let w = vector("w", &w)?;
    interval::expect_mass(mass)?;
    let order = given_order(&order)?;
    let out = with_view!("x", x, |x| {
        expect_shape("w", &[x.nrows()], &[w.len()])?;
        expect_order(order, x.shape())?;
        let mut out = Array2::zeros((2, x.ncols()));
        detached(py, |interrupt| {
            map_columns_into(x, out.view_mut(), interrupt, |column, index, target| {
                let order = order_of(column, order, index, interrupt)?;
                let (lower, upper) =
                    interval::shortest_unless(column, &w, Some(&order), mass, interrupt)?;
                target.copy_from_slice(&[lower, upper]);
                Ok(())
            })
        })?;
        out
    });
    Ok(out.into_pyarray(py))
}
