//! Weights that sum to one, with everything that one pass says of them.

use ndarray::{ArrayView1, Axis};

use super::columns::expect_shape;
use super::error::KernelError;
use super::ordered::{Interrupt, map_tasks};
use super::reductions::column_sums;
use super::vector::exp::{LEAST, exp};
use super::vector::{Arithmetic, Work, dispatch};
use super::weight_sums::{Sums, form};

/// Entries of a task.
pub(super) const TASK: usize = 65_536;

/// Entries looked at together.
const BLOCK: usize = 1024;

/// Writes `exp(x_s − log Σ exp(x))` of log weights `x` into `out`, both of shape `(n,)`, and returns
/// the sums of `x`; the exponents are those of [`super::log_sum::normalise`].
///
/// # Errors
/// [`KernelError::Shape`] for different lengths; [`KernelError::Interrupted`].
pub fn weigh(x: &[f64], out: &mut [f64], interrupt: &Interrupt<'_>) -> Result<Sums, KernelError> {
    expect_shape("out", &[x.len()], &[out.len()])?;
    let column = ArrayView1::from(x).insert_axis(Axis(1));
    let found = column_sums::<f64, { form::ALL }>(column, interrupt)?;
    let sums = found.first().copied().unwrap_or(Sums::NONE);
    exponentials(x, sums.offsets(), out, interrupt)?;
    Ok(sums)
}

/// Writes `exp((x − first) − second)` into `out`, of equal length.
///
/// # Errors
/// [`KernelError::Interrupted`].
pub(super) fn exponentials(
    x: &[f64],
    offsets: (f64, f64),
    out: &mut [f64],
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let tasks = x.chunks(TASK).zip(out.chunks_mut(TASK)).collect();
    map_tasks(tasks, interrupt, |(x, out)| {
        for (x, out) in x.chunks(BLOCK).zip(out.chunks_mut(BLOCK)) {
            if dispatch(Write { x, out, offsets }) {
                by_themselves(x, out, offsets);
            }
        }
        Ok(())
    })?;
    Ok(())
}

/// As [`Write`], subnormal weights too: one that is not 0 counts as a draw that is not lost.
fn by_themselves(x: &[f64], out: &mut [f64], (first, second): (f64, f64)) {
    for (target, entry) in out.iter_mut().zip(x) {
        let exponent = (entry - first) - second;
        if exponent < LEAST {
            *target = exponent.exp();
        }
    }
}

/// Writes exponentials, those below the normal numbers as 0; whether there are any.
struct Write<'a> {
    x: &'a [f64],
    out: &'a mut [f64],
    offsets: (f64, f64),
}

impl Work for Write<'_> {
    type Output = bool;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> bool {
        let (first, second) = self.offsets;
        let mut any = false;
        for (target, entry) in self.out.iter_mut().zip(self.x) {
            let exponent = (entry - first) - second;
            any |= exponent < LEAST;
            *target = exp::<A>(exponent);
        }
        any
    }
}
