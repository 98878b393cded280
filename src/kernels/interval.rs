//! The shortest interval that holds a given share of the weight.

use super::error::KernelError;
use super::ordered::Interrupt;
use super::quantile::{PART, Steps};

/// Share of the total weight by which an interval may fall short, for the rounding of sums.
const SLACK: f64 = 1e-12;

/// # Errors
/// [`KernelError::Range`] unless `mass` lies in `(0, 1]`.
pub fn expect_mass(mass: f64) -> Result<(), KernelError> {
    if mass > 0.0 && mass <= 1.0 {
        return Ok(());
    }
    Err(KernelError::Range {
        argument: "mass",
        expected: "a number above 0 and at most 1",
        found: mass,
    })
}

/// Ends of the shortest interval `[x_(i), x_(j)]` that holds at least the share `mass` of the
/// weight, `(lower, upper)`; of equally short ones the first.
///
/// `x` and `w` have shape `(n,)`; `w` are weights on the natural scale, not necessarily normalised.
/// Equal values count together; draws of weight 0 are skipped. `mass` may be missed by `1e-12` of
/// the total weight, which absorbs the rounding of sums. `order` are the indices of `x` in ascending
/// order of value, where they are known. NaN in `x` where `w > 0`, bad weights or
/// no positive weight give NaN twice.
///
/// Source: Chen & Shao (1999), Journal of Computational and Graphical Statistics 8, 69-92, whose
/// interval this is for weighted draws.
pub fn shortest_interval(x: &[f64], w: &[f64], order: Option<&[u32]>, mass: f64) -> (f64, f64) {
    shortest_unless(x, w, order, mass, &Interrupt::never()).unwrap_or((f64::NAN, f64::NAN))
}

/// As [`shortest_interval`], for long columns.
///
/// # Errors
/// [`KernelError::Interrupted`].
pub fn shortest_unless(
    x: &[f64],
    w: &[f64],
    order: Option<&[u32]>,
    mass: f64,
    interrupt: &Interrupt<'_>,
) -> Result<(f64, f64), KernelError> {
    let Some(steps) = Steps::new(x, w, order, interrupt)? else {
        return Ok((f64::NAN, f64::NAN));
    };
    let needed = (mass - SLACK) * steps.total();
    let mut best = (f64::NAN, f64::NAN);
    let mut shortest = f64::INFINITY;
    let mut upper = 0;
    for lower in 0..steps.len() {
        if lower.is_multiple_of(PART) {
            interrupt.check()?;
        }
        upper = upper.max(lower);
        while upper < steps.len() && steps.mass(lower, upper) < needed {
            upper += 1;
        }
        if upper == steps.len() {
            break;
        }
        let ends = (steps.value(lower), steps.value(upper));
        let length = ends.1 - ends.0;
        // The first is always taken, since infinite ends make every length infinite or NaN.
        if lower == 0 || length < shortest {
            shortest = length;
            best = ends;
        }
    }
    Ok(best)
}
