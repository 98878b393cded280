//! Weighted means of chains.

use ndarray::Array3;
use numpy::{IntoPyArray, PyArray3, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::errors::detached;
use crate::kernels::chain_means::{ChainMean, chain_means as means_of};
use crate::kernels::columns::{expect_shape, map_columns};
use crate::kernels::long_run;

/// Mass, weighted mean, long-run variance, `Σ (w/W)²` and variance of every chain of every column of `f`,
/// `(n, k)`, with weights `w`, `(n,)`, or equal ones: `(5, chains, k)`.
#[pyfunction]
#[pyo3(signature = (f, w, starts))]
pub fn chain_means<'py>(
    py: Python<'py>,
    f: PyReadonlyArray2<'py, f64>,
    w: Option<PyReadonlyArray1<'py, f64>>,
    starts: PyReadonlyArray1<'py, i64>,
) -> PyResult<Bound<'py, PyArray3<f64>>> {
    let f = matrix("f", &f)?;
    let given = w.as_ref().map(|w| vector("w", w)).transpose()?;
    let w = given.as_deref().unwrap_or_default();
    if given.is_some() {
        expect_shape("w", &[f.nrows()], &[w.len()])?;
    }
    let chains = long_run::chains(&vector("starts", &starts)?, f.nrows(), false)?;
    let found = detached(py, |interrupt| {
        map_columns(f, interrupt, |column, _| {
            means_of(column, 0.0, w, &chains, interrupt)
        })
    })?;
    Ok(table(&found, chains.len(), |chains| chains).into_pyarray(py))
}

/// Figures of chains as `(5, chains, columns)`.
pub(super) fn table<T>(
    found: &[T],
    chains: usize,
    of: impl Fn(&T) -> &Vec<ChainMean>,
) -> Array3<f64> {
    Array3::from_shape_fn((5, chains, found.len()), |(figure, chain, column)| {
        let chain = of(&found[column])[chain];
        [
            chain.mass,
            chain.mean,
            chain.long_run,
            chain.squares,
            chain.variance,
        ][figure]
    })
}
