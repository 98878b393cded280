//! Smallest and largest entry, and whether all are numbers.

use super::error::KernelError;
use super::log_sum::range;
use super::ordered::{Interrupt, map_tasks};
use super::vector::{Arithmetic, Work, dispatch};

/// Entries of a task.
const TASK: usize = 65_536;

/// Smallest and largest entry of `x`, shape `(n,)`; both NaN if any entry is, `(+inf, −inf)`
/// without entries.
///
/// # Errors
/// [`KernelError::Interrupted`].
pub fn extremes(x: &[f64], interrupt: &Interrupt<'_>) -> Result<(f64, f64), KernelError> {
    let parts = x.chunks(TASK).collect();
    let found = map_tasks(parts, interrupt, |part| {
        Ok((range(part), dispatch(HasNan(part))))
    })?;
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for ((least, most), has_nan) in found {
        if has_nan {
            return Ok((f64::NAN, f64::NAN));
        }
        (low, high) = (low.min(least), high.max(most));
    }
    Ok((low, high))
}

struct HasNan<'a>(&'a [f64]);

impl Work for HasNan<'_> {
    type Output = bool;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> bool {
        self.0.iter().fold(false, |any, entry| any | entry.is_nan())
    }
}
