//! Influence series of weighted means.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray2, PyArray3, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, vector};
use super::chain_means::table;
use super::errors::detached;
use crate::kernels::columns::{expect_shape, map_columns};
use crate::kernels::long_run;
use crate::kernels::study::{Study, Weighted, study as study_of};

/// Figures of columns, and of their chains.
type Figures<'py> = (Bound<'py, PyArray2<f64>>, Bound<'py, PyArray3<f64>>);

/// Spread, long-run variance, efficiency and tail shape on raw weights, efficiency of the draws
/// themselves, contributions and largest deviation of every column of `f`, `(n, k)`, about its
/// entry of `centre`, `(k,)`: `(7, k)`; and its chains, as `chain_means` tells them.
#[pyfunction]
#[pyo3(signature = (f, centre, w, raw, starts))]
pub fn study<'py>(
    py: Python<'py>,
    f: PyReadonlyArray2<'py, f64>,
    centre: PyReadonlyArray1<'py, f64>,
    w: PyReadonlyArray1<'py, f64>,
    raw: PyReadonlyArray1<'py, f64>,
    starts: PyReadonlyArray1<'py, i64>,
) -> PyResult<Figures<'py>> {
    let f = matrix("f", &f)?;
    let centre = vector("centre", &centre)?;
    let (w, raw) = (vector("w", &w)?, vector("raw", &raw)?);
    expect_shape("centre", &[f.ncols()], &[centre.len()])?;
    expect_shape("w", &[f.nrows()], &[w.len()])?;
    expect_shape("raw", &[f.nrows()], &[raw.len()])?;
    let starts = vector("starts", &starts)?;
    let chains = long_run::chains(&starts, f.nrows(), false)?;
    let halves = long_run::chains(&starts, f.nrows(), true)?;
    let of = Weighted {
        w: &w,
        raw: &raw,
        chains: &chains,
        halves: &halves,
    };
    let found = detached(py, |interrupt| {
        map_columns(f, interrupt, |column, index| {
            study_of(column, centre[index], of, interrupt)
        })
    })?;
    let figures = Array2::from_shape_fn((7, found.len()), |(figure, column)| {
        figures(&found[column])[figure]
    });
    let chains = table(&found, chains.len(), |study| &study.chains);
    Ok((figures.into_pyarray(py), chains.into_pyarray(py)))
}

fn figures(of: &Study) -> [f64; 7] {
    [
        of.spread,
        of.long_run,
        of.efficiency,
        of.shape,
        of.own,
        of.contributions,
        of.largest,
    ]
}
