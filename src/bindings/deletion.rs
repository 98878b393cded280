//! Deletions.

use numpy::{IntoPyArray, PyArray2, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::prelude::*;

use super::arrays::{Numbers, matrix, vector, with_view};
use super::errors::reporting;
use crate::kernels::deletion::{self, Base, Order};

/// Figures of columns left out, `(k, 12)`; series summed over them, `(3, n)`; shifts of quantities
/// and the squares of their series, `(k, P)` each.
type Found<'py> = (
    Bound<'py, PyArray2<f64>>,
    Bound<'py, PyArray2<f64>>,
    Bound<'py, PyArray2<f64>>,
    Bound<'py, PyArray2<f64>>,
);

/// What leaving out the columns of `held`, `(n, k)`, does; see `kernels::deletion::delete`.
///
/// Draws in chains come with `starts`, draws that came several times with `repeats`. `scored`, where
/// it is not `held`, is float64 as `held` then is.
#[pyfunction]
#[pyo3(signature = (held, f, scored=None, log_weights=None, starts=None, repeats=None, progress=None))]
#[expect(clippy::too_many_arguments, reason = "the signature is Python's")]
pub fn delete<'py>(
    py: Python<'py>,
    held: Numbers<'py>,
    f: PyReadonlyArray2<'py, f64>,
    scored: Option<PyReadonlyArray2<'py, f64>>,
    log_weights: Option<PyReadonlyArray1<'py, f64>>,
    starts: Option<PyReadonlyArray1<'py, i64>>,
    repeats: Option<PyReadonlyArray1<'py, i64>>,
    progress: Option<Py<PyAny>>,
) -> PyResult<Found<'py>> {
    let f = matrix("f", &f)?;
    let logs = log_weights
        .as_ref()
        .map(|logs| vector("log_weights", logs))
        .transpose()?;
    let starts = starts
        .as_ref()
        .map(|starts| vector("starts", starts))
        .transpose()?;
    let repeats = repeats
        .as_ref()
        .map(|repeats| vector("repeats", repeats))
        .transpose()?;
    let base = Base {
        log_weights: logs.as_deref(),
        order: match (&starts, &repeats) {
            (Some(starts), _) => Order::Chains(starts),
            (None, Some(repeats)) => Order::Repeated(repeats),
            (None, None) => Order::Independent,
        },
    };
    let scored = scored
        .as_ref()
        .map(|scored| matrix("scored", scored))
        .transpose()?;
    let found = match (&held, scored) {
        (Numbers::Double(held), scored) => {
            let held = matrix("held", held)?;
            reporting(py, progress.as_ref(), |interrupt| {
                deletion::delete(held, scored, base, f, interrupt)
            })?
        }
        (Numbers::Single(_), Some(_)) => {
            return Err(pyo3::exceptions::PyTypeError::new_err(
                "held: expected float64 beside scored, got float32; convert it",
            ));
        }
        (Numbers::Single(_), None) => with_view!("held", held, |held| {
            reporting(py, progress.as_ref(), |interrupt| {
                deletion::delete(held, None, base, f, interrupt)
            })?
        }),
    };
    Ok((
        found.figures.into_pyarray(py),
        found.totals.into_pyarray(py),
        found.shift.into_pyarray(py),
        found.shift_square.into_pyarray(py),
    ))
}
