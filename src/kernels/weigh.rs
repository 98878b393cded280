//! Log weights that sum to one, with everything that one pass says of them.

use ndarray::{ArrayView1, Axis};

use super::columns::expect_shape;
use super::error::KernelError;
use super::ordered::{Interrupt, map_tasks};
use super::reductions::column_sums;
use super::vector::{Arithmetic, Work, dispatch};
use super::weight_sums::{Sums, form};

/// Entries of a task.
const TASK: usize = 65_536;

/// Writes `x_s − log Σ exp(x)` of log weights `x` into `out`, both of shape `(n,)`, and returns the
/// sums of `x`; the bits are those of [`super::log_sum::normalise`].
///
/// # Errors
/// [`KernelError::Shape`] for different lengths; [`KernelError::Interrupted`].
pub fn weigh(x: &[f64], out: &mut [f64], interrupt: &Interrupt<'_>) -> Result<Sums, KernelError> {
    expect_shape("out", &[x.len()], &[out.len()])?;
    let column = ArrayView1::from(x).insert_axis(Axis(1));
    let found = column_sums::<f64, { form::ALL }>(column, interrupt)?;
    let sums = found.first().copied().unwrap_or(Sums::NONE);
    let (maximum, log_total) = sums.offsets();
    let tasks = x.chunks(TASK).zip(out.chunks_mut(TASK)).collect();
    map_tasks(tasks, interrupt, |(x, out)| {
        dispatch(Write {
            x,
            out,
            maximum,
            log_total,
        });
        Ok(())
    })?;
    Ok(sums)
}

struct Write<'a> {
    x: &'a [f64],
    out: &'a mut [f64],
    maximum: f64,
    log_total: f64,
}

impl Work for Write<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (target, entry) in self.out.iter_mut().zip(self.x) {
            *target = (entry - self.maximum) - self.log_total;
        }
    }
}
