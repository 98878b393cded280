//! Log densities and the special functions behind them.

use ndarray::Array2;
use numpy::{IntoPyArray, PyArray1, PyArray2, PyReadonlyArray1, PyReadwriteArray1};
use pyo3::exceptions::PyValueError;
use pyo3::prelude::*;

use super::arrays::vector;
use super::errors::detached;
use super::special::each;
use crate::kernels::densities::hyper::Hyper;
use crate::kernels::densities::{Kind, incomplete_beta, incomplete_gamma, normal_tail, stirling};
use crate::kernels::error::KernelError;
use crate::kernels::ordered::map_tasks;

/// Writes the log density of `family` at every `x` into `out`, both contiguous, `(n,)`.
///
/// Every array of `hyper` has `m` entries; entry `i` of `x` has number `(i // repeat) % m`.
#[pyfunction]
pub fn log_density(
    py: Python<'_>,
    family: &str,
    x: PyReadonlyArray1<'_, f64>,
    hyper: Vec<PyReadonlyArray1<'_, f64>>,
    repeat: usize,
    mut out: PyReadwriteArray1<'_, f64>,
) -> PyResult<()> {
    let kind = Kind::named(family).ok_or_else(|| {
        let names: Vec<&str> = Kind::names().collect();
        PyValueError::new_err(format!(
            "family: expected one of {}, got '{family}'; choose one of these",
            names.join(", ")
        ))
    })?;
    let (x, out) = (x.as_slice()?, out.as_slice_mut()?);
    let values = hyper
        .iter()
        .map(|each| each.as_slice())
        .collect::<Result<Vec<_>, _>>()?;
    let hyper = Hyper::new(&values, repeat)?;
    detached(py, |interrupt| kind.log_density(x, &hyper, out, interrupt))
}

/// Digamma function at every `x`.
#[pyfunction]
pub fn digamma<'py>(
    py: Python<'py>,
    x: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    each(py, "x", &x, stirling::digamma)
}

/// Log of the standard normal distribution function at every `x`.
#[pyfunction]
pub fn log_normal_cdf<'py>(
    py: Python<'py>,
    x: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray1<f64>>> {
    each(py, "x", &x, normal_tail::log_normal_cdf)
}

/// Log of the beta function at every pair: `(1, n)`.
#[pyfunction]
pub fn log_beta<'py>(
    py: Python<'py>,
    a: PyReadonlyArray1<'py, f64>,
    b: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    rows(py, [("a", a), ("b", b)], |[a, b]| {
        [stirling::log_beta(a, b)]
    })
}

/// Rows `log P`, `log Q`, and their derivatives in `a`: `(4, n)`.
#[pyfunction]
pub fn gamma_tails<'py>(
    py: Python<'py>,
    a: PyReadonlyArray1<'py, f64>,
    x: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    rows(py, [("a", a), ("x", x)], |[a, x]| {
        incomplete_gamma::gamma_tails(a, x)
    })
}

/// Rows `log I`, `log(1 − I)`, derivatives of the first in `a` and `b`, of the second: `(6, n)`.
#[pyfunction]
pub fn beta_tails<'py>(
    py: Python<'py>,
    a: PyReadonlyArray1<'py, f64>,
    b: PyReadonlyArray1<'py, f64>,
    x: PyReadonlyArray1<'py, f64>,
    y: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    rows(
        py,
        [("a", a), ("b", b), ("x", x), ("y", y)],
        |[a, b, x, y]| incomplete_beta::beta_tails(a, b, x, y),
    )
}

/// Rows log of the distribution function and of one minus it, standard skew-normal: `(2, n)`.
#[pyfunction]
pub fn skew_normal_tails<'py>(
    py: Python<'py>,
    z: PyReadonlyArray1<'py, f64>,
    slant: PyReadonlyArray1<'py, f64>,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    rows(py, [("z", z), ("slant", slant)], |[z, slant]| {
        let (lower, upper) = normal_tail::skew_normal_tails(z, slant);
        [lower, upper]
    })
}

/// A function of `N` numbers with `M` results, at every entry of arrays of equal length: `(M, n)`.
fn rows<'py, const N: usize, const M: usize>(
    py: Python<'py>,
    arguments: [(&'static str, PyReadonlyArray1<'py, f64>); N],
    function: impl Fn([f64; N]) -> [f64; M] + Sync + Send,
) -> PyResult<Bound<'py, PyArray2<f64>>> {
    let mut entries: Vec<[f64; N]> = Vec::new();
    for (column, (name, array)) in arguments.iter().enumerate() {
        let values = vector(name, array)?;
        if column == 0 {
            entries.resize(values.len(), [0.0; N]);
        }
        if values.len() != entries.len() {
            Err(KernelError::Shape {
                argument: name,
                expected: vec![entries.len()],
                found: vec![values.len()],
            })?;
        }
        for (entry, value) in entries.iter_mut().zip(values.iter()) {
            entry[column] = *value;
        }
    }
    let blocks: Vec<&[[f64; N]]> = entries.chunks(512).collect();
    let results = detached(py, |interrupt| {
        map_tasks(blocks, interrupt, |block| {
            Ok(block
                .iter()
                .map(|&entry| function(entry))
                .collect::<Vec<_>>())
        })
    })?;
    let results = results.concat();
    let out = Array2::from_shape_fn((M, results.len()), |(row, at)| results[at][row]);
    Ok(out.into_pyarray(py))
}
