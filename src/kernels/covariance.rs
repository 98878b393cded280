//! The weighted covariance matrix of columns.

use ndarray::{Array2, ArrayView2};

use super::columns::{expect_shape, map_columns};
use super::error::KernelError;
use super::mean::weighted_mean;
use super::ordered::{Interrupt, map_tasks};
use super::vector::dot::dot;

/// `Σ_s w_s (f_si − μ_i)(f_sj − μ_j)` of the columns of `f`, shape `(n, k)`: shape `(k, k)`.
///
/// `w`, shape `(n,)`, on the natural scale, should sum to 1; draws of weight 0 are left out.
///
/// # Errors
/// [`KernelError::Shape`], [`KernelError::Interrupted`].
pub fn covariance(
    f: ArrayView2<'_, f64>,
    w: &[f64],
    interrupt: &Interrupt<'_>,
) -> Result<Array2<f64>, KernelError> {
    expect_shape("w", &[f.nrows()], &[w.len()])?;
    // A draw of weight 0 becomes 0 in both, whatever its value.
    let counted = |weight: f64, value: f64| if weight == 0.0 { 0.0 } else { value };
    let centred = map_columns(f, interrupt, |column, _| {
        let centre = weighted_mean(column, w);
        let pairs = column.iter().zip(w);
        Ok(pairs
            .map(|(f, &w)| counted(w, f - centre))
            .collect::<Vec<f64>>())
    })?;
    let rows = map_tasks((0..centred.len()).collect(), interrupt, |i| {
        let weighted: Vec<f64> = centred[i].iter().zip(w).map(|(f, w)| f * w).collect();
        Ok((0..=i)
            .map(|j| dot(&weighted, &centred[j]))
            .collect::<Vec<f64>>())
    })?;
    Ok(Array2::from_shape_fn((rows.len(), rows.len()), |(i, j)| {
        rows[i.max(j)][i.min(j)]
    }))
}
