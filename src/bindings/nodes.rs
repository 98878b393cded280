//! Nodes: many targets over the same draws.

use ndarray::{Array2, ArrayView2, ArrayViewMut2, Axis, CowArray, Ix2};
use numpy::{IntoPyArray, PyArray2, PyReadonlyArray1, PyReadonlyArray2, PyReadwriteArray2};
use pyo3::prelude::*;

use super::arrays::{matrix, matrix_mut, vector};
use super::errors::detached;
use crate::kernels::chains::Chains;
use crate::kernels::columns::expect_shape;
use crate::kernels::error::KernelError;
use crate::kernels::node_common::{Asked, Common};
use crate::kernels::nodes::{Room, study};
use crate::kernels::ordered::{Interrupt, map_tasks};

/// Nodes of one task.
const NODES: usize = 8;

/// Figures of every node, log ratios `(B, n)` in C order, for quantities `(q, n)` in C order:
/// `(B, width)`. Smoothed weights go to `weights`, `(B, n)`, where it is given.
#[pyfunction]
#[expect(
    clippy::too_many_arguments,
    reason = "flat arrays are what crosses the border"
)]
pub fn study_nodes<'py>(
    py: Python<'py>,
    ratios: PyReadonlyArray2<'py, f64>,
    columns: PyReadonlyArray2<'py, f64>,
    events: PyReadonlyArray1<'py, f64>,
    own: PyReadonlyArray2<'py, f64>,
    equal_base: bool,
    starts: PyReadonlyArray1<'py, i64>,
    ordered: bool,
    batches: PyReadonlyArray1<'py, i64>,
    shift: bool,
    mut weights: Option<PyReadwriteArray2<'py, f64>>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let (ratios, columns) = (matrix("ratios", &ratios)?, matrix("columns", &columns)?);
    let draws = ratios.ncols();
    let (events, own) = (vector("events", &events)?, matrix("own", &own)?);
    expect_shape("columns", &[columns.nrows(), draws], columns.shape())?;
    expect_shape("events", &[columns.nrows()], &[events.len()])?;
    expect_shape("own", &[2, draws], own.shape())?;
    let weights = match &mut weights {
        Some(weights) => Some(matrix_mut("weights", weights)?),
        None => None,
    };
    if let Some(weights) = &weights {
        expect_shape("weights", ratios.shape(), weights.shape())?;
    }
    let (columns, own) = (columns.as_standard_layout(), own.as_standard_layout());
    let (columns, own) = (rows(&columns), rows(&own));
    let common = Common::new(
        columns.into_iter().zip(events.iter().copied()),
        Chains::new(&vector("starts", &starts)?, draws, ordered)?,
        Asked {
            own: [own[0], own[1]],
            equal_base,
            batches: &vector("batches", &batches)?,
            shift,
        },
    )?;
    let figures = detached(py, |interrupt| each(ratios, &common, weights, interrupt))?;
    Ok(figures.into_pyarray(py))
}

/// The rows of an array in C order.
fn rows<'a>(array: &'a CowArray<'_, f64, Ix2>) -> Vec<&'a [f64]> {
    array
        .outer_iter()
        .map(|row| row.to_slice().unwrap_or_default())
        .collect()
}

fn each(
    ratios: ArrayView2<'_, f64>,
    common: &Common,
    mut weights: Option<ArrayViewMut2<'_, f64>>,
    interrupt: &Interrupt<'_>,
) -> Result<Array2<f64>, KernelError> {
    let mut out = Array2::zeros((ratios.nrows(), common.width()));
    let mut kept = weights
        .iter_mut()
        .flat_map(|all| all.axis_iter_mut(Axis(0)));
    let mut nodes = ratios
        .axis_iter(Axis(0))
        .zip(out.axis_iter_mut(Axis(0)))
        .map(|(ratio, out)| (ratio, out, kept.next()));
    let mut tasks = Vec::new();
    loop {
        let some: Vec<_> = nodes.by_ref().take(NODES).collect();
        if some.is_empty() {
            break;
        }
        tasks.push(some);
    }
    map_tasks(tasks, interrupt, |nodes| {
        let (mut room, mut found) = (Room::default(), vec![0.0; common.width()]);
        let mut linear = Vec::new();
        for (ratio, mut out, into) in nodes {
            let given = ratio.as_standard_layout();
            let given = given.as_slice().unwrap_or_default();
            linear.resize(into.as_ref().map_or(0, |into| into.len()), 0.0);
            study(given, common, &mut linear, &mut found, &mut room, interrupt)?;
            out.iter_mut()
                .zip(&found)
                .for_each(|(out, found)| *out = *found);
            if let Some(mut into) = into {
                into.iter_mut()
                    .zip(&linear)
                    .for_each(|(into, w)| *into = *w);
            }
        }
        Ok(())
    })?;
    drop(nodes);
    Ok(out)
}
