//! Weighted quantiles.

use ndarray::{Array2, Array3, ArrayView2, Axis};
use numpy::{IntoPyArray, PyArray2, PyArray3, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{Numbers, matrix, vector, with_view};
use super::errors::detached;
use crate::kernels;
use crate::kernels::columns::{expect_shape, map_columns, map_columns_into};
use crate::kernels::error::KernelError;
use crate::kernels::ordered::{Interrupt, map_tasks};
use crate::kernels::quantile_many::{LANES, Sorted, Weights, quantiles};
use crate::kernels::sorting;

/// Sets of weights of a task.
const TOGETHER: usize = 4 * LANES;

/// Indices of every column of `x`, `(n, k)`, in ascending order of value: `(n, k)`.
#[pyfunction]
pub fn sort_order<'py>(py: Python<'py>, x: Numbers<'py>) -> PyResult<Bound<'py, PyArray2<i32>>> {
    let out = with_view!("x", x, |x| detached(py, |interrupt| {
        kernels::sorting::expect_countable(x.nrows())?;
        let orders = map_columns(x, interrupt, |column, _| {
            sorting::order_unless(column, interrupt)
        })?;
        Ok(Array2::from_shape_fn(
            (x.ncols(), x.nrows()),
            |(column, place)| orders[column][place] as i32,
        ))
    }))?;
    Ok(out.reversed_axes().into_pyarray(py))
}

/// Weighted quantiles of every column of `x`, `(n, k)`, at its column of `probs`: `(m, k)`.
/// `order` is what [`sort_order`] gives for `x`.
#[pyfunction]
#[pyo3(signature = (x, w, probs, order=None))]
pub fn quantile<'py>(
    py: Python<'py>,
    x: Numbers<'py>,
    w: PyReadonlyArray1<'py, f64>,
    probs: PyReadonlyArray2<'py, f64>,
    order: Option<PyReadonlyArray2<'py, i32>>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let w = vector("w", &w)?;
    let probs = matrix("probs", &probs)?;
    let order = given_order(&order)?;
    let mut out = Array2::zeros(probs.dim());
    with_view!("x", x, |x| {
        expect_shape("w", &[x.nrows()], &[w.len()])?;
        expect_shape("probs", &[probs.nrows(), x.ncols()], probs.shape())?;
        expect_order(order, x.shape())?;
        detached(py, |interrupt| {
            map_columns_into(x, out.view_mut(), interrupt, |column, index, target| {
                let levels = probs.column(index).into_iter().copied();
                let order = order_of(column, order, index, interrupt)?;
                kernels::quantile::quantile_unless(
                    column,
                    &w,
                    Some(&order),
                    levels,
                    target,
                    interrupt,
                )
            })
        })
    })?;
    Ok(out.into_pyarray(py))
}

/// Weighted quantiles at `probs`, `(p,)`, of every column of `x`, `(n, k)`, under every column of
/// the weights `w`, `(n, m)`: `(p, m, k)`. Columns are sorted once.
#[pyfunction]
#[pyo3(signature = (x, w, probs, order=None))]
pub fn quantile_many<'py>(
    py: Python<'py>,
    x: Numbers<'py>,
    w: PyReadonlyArray2<'py, f64>,
    probs: PyReadonlyArray1<'py, f64>,
    order: Option<PyReadonlyArray2<'py, i32>>,
) -> PyResult<Bound<'py, PyArray3<f64>>> {
    let w = matrix("w", &w)?;
    let probs = vector("probs", &probs)?;
    let order = given_order(&order)?;
    let out = with_view!("x", x, |x| {
        expect_shape("w", &[x.nrows(), w.ncols()], w.shape())?;
        expect_order(order, x.shape())?;
        detached(py, |interrupt| {
            kernels::sorting::expect_countable(x.nrows())?;
            let sorted = map_columns(x, interrupt, |column, index| {
                let order = match order {
                    Some(order) => sorting::expect_order(column_of(order, index))?,
                    None => sorting::order_unless(column, interrupt)?,
                };
                Ok((column.to_vec(), order))
            })?;
            under_each(&sorted, w, &probs, interrupt)
        })
    })?;
    Ok(out.into_pyarray(py))
}

fn under_each(
    sorted: &[(Vec<f64>, Vec<u32>)],
    w: ArrayView2<'_, f64>,
    probs: &[f64],
    interrupt: &Interrupt<'_>,
) -> Result<Array3<f64>, KernelError> {
    let columns: Vec<Sorted<'_>> = sorted
        .iter()
        .map(|(x, order)| Sorted::new(x, order))
        .collect();
    let parts: Vec<ArrayView2<'_, f64>> = w.axis_chunks_iter(Axis(1), TOGETHER).collect();
    let found = map_tasks(parts, interrupt, |part| {
        let mut out = Array3::zeros((probs.len(), part.ncols(), columns.len()));
        for (set, weights) in Weights::sets(part).iter().enumerate() {
            for (index, column) in columns.iter().enumerate() {
                interrupt.check()?;
                quantiles(column, weights, probs, |lane, level, value| {
                    if let Some(target) = out.get_mut((level, set * LANES + lane, index)) {
                        *target = value;
                    }
                });
            }
        }
        Ok(out)
    })?;
    let mut out = Array3::zeros((probs.len(), w.ncols(), columns.len()));
    for (mut into, part) in out.axis_chunks_iter_mut(Axis(1), TOGETHER).zip(found) {
        into.assign(&part);
    }
    Ok(out)
}

pub(super) fn given_order<'a>(
    order: &'a Option<PyReadonlyArray2<'_, i32>>,
) -> Result<Option<ArrayView2<'a, i32>>, KernelError> {
    order
        .as_ref()
        .map(|order| matrix("order", order))
        .transpose()
}

pub(super) fn expect_order(
    order: Option<ArrayView2<'_, i32>>,
    shape: &[usize],
) -> Result<(), KernelError> {
    order.map_or(Ok(()), |order| expect_shape("order", shape, order.shape()))
}

/// The order given for a column, or the one found.
pub(super) fn order_of(
    x: &[f64],
    order: Option<ArrayView2<'_, i32>>,
    column: usize,
    interrupt: &Interrupt<'_>,
) -> Result<Vec<u32>, KernelError> {
    match order {
        Some(order) => Ok(column_of(order, column)),
        None => sorting::order_unless(x, interrupt),
    }
}

/// A negative entry becomes one that no array reaches.
fn column_of(order: ArrayView2<'_, i32>, column: usize) -> Vec<u32> {
    order
        .column(column)
        .iter()
        .map(|&index| index as u32)
        .collect()
}
