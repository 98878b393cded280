//! The tail shape of influence values, which may be heavy on either side.

use super::largest::largest_values;
use super::pareto::{self, FEWEST};
use super::tail::tail_length;
use super::vector::{Arithmetic, Work, dispatch};

const LANES: usize = 8;

/// Tail shape of influence values `z`, shape `(n,)`, natural scale, any sign.
///
/// Each sign is a side of its own: its absolute values above 0, `S` of them, with a tail of
/// `M = ⌈min(S/5, 3 √(S/e))⌉`, fitted as weights are in [`super::smooth::smooth`]. A side with
/// fewer than 5 tail draws does not count; a constant tail has `−inf`. The result is the larger
/// shape of the sides that count, `−inf` if none does. It does not change with the unit of `z`.
/// NaN or an infinite entry gives NaN.
pub fn signed_tail_shape(z: &[f64], relative_efficiency: f64) -> f64 {
    let sides = dispatch(Sides(z));
    if sides.zero.is_nan() {
        return f64::NAN;
    }
    let upper = side_shape(z, 1.0, sides.above as usize, relative_efficiency);
    let lower = side_shape(z, -1.0, sides.below as usize, relative_efficiency);
    upper.max(lower)
}

/// Values above and below 0; 0, or NaN where a value is not finite.
struct Found {
    above: f64,
    below: f64,
    zero: f64,
}

struct Sides<'a>(&'a [f64]);

impl Work for Sides<'_> {
    type Output = Found;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Found {
        let (mut above, mut below, mut zero) = ([0.0; LANES], [0.0; LANES], [0.0; LANES]);
        let (chunks, rest) = self.0.as_chunks::<LANES>();
        let mut padded = [0.0; LANES];
        padded[..rest.len()].copy_from_slice(rest);
        for chunk in chunks.iter().chain(std::iter::once(&padded)) {
            for lane in 0..LANES {
                above[lane] += if chunk[lane] > 0.0 { 1.0 } else { 0.0 };
            }
            for lane in 0..LANES {
                below[lane] += if chunk[lane] < 0.0 { 1.0 } else { 0.0 };
            }
            // A product with 0 is 0 but for NaN and infinities; the loop has no branch.
            for lane in 0..LANES {
                zero[lane] += 0.0 * chunk[lane];
            }
        }
        Found {
            above: above.iter().sum(),
            below: below.iter().sum(),
            zero: zero.iter().sum(),
        }
    }
}

fn side_shape(z: &[f64], sign: f64, side: usize, relative_efficiency: f64) -> f64 {
    let length = tail_length(side, relative_efficiency);
    if length < FEWEST {
        return f64::NEG_INFINITY;
    }
    // At most a fifth of the side, so that the cut-off has the same sign.
    let Some((mut tail, cutoff)) = largest_values(z, sign, length) else {
        return f64::INFINITY;
    };
    tail.iter_mut().for_each(|value| *value -= cutoff);
    pareto::fit_any(&mut tail).shrunk(length).shape
}
