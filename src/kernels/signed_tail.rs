//! The tail shape of influence values, which may be heavy on either side.

use super::pareto::{self, FEWEST};
use super::tail::{Room, tail_length, with_room};
use super::vector::rank::nth_largest;
use super::vector::select::beyond;
use super::vector::{Arithmetic, Work, dispatch};

const LANES: usize = 8;

/// Rank at which the bounds of the sample are aimed: their counts vary by a fifth.
const SAMPLE_RANK: usize = 24;

/// Tail shape of influence values `z`, shape `(n,)`, natural scale, any sign.
///
/// Each sign is a side of its own: its absolute values above 0, `S` of them, with a tail of
/// `M = ⌈min(S/5, 3 √(S/e))⌉`, fitted as weights are in [`super::smooth::smooth`]. A side with
/// fewer than 5 tail draws does not count; a constant tail has `−inf`. The result is the larger
/// shape of the sides that count, `−inf` if none does. It does not change with the unit of `z`.
/// NaN or an infinite entry gives NaN.
pub fn signed_tail_shape(z: &[f64], relative_efficiency: f64) -> f64 {
    let sides = dispatch(CountSides(z));
    if !sides.finite {
        return f64::NAN;
    }
    sides_shape(z, sides, relative_efficiency)
}

/// How many values of a series lie above 0 and below.
#[derive(Debug, Clone, Copy, Default)]
pub struct Sides {
    /// Whether all values are numbers; a false alarm is possible where they are huge.
    pub finite: bool,
    /// Above.
    pub above: usize,
    /// Below.
    pub below: usize,
}

impl Sides {
    /// No values but 0.
    pub const NONE: Self = Self {
        finite: true,
        above: 0,
        below: 0,
    };
}

/// The same where the sides are known, and all values are finite.
pub(super) fn sides_shape(z: &[f64], sides: Sides, relative_efficiency: f64) -> f64 {
    let lengths = [sides.above, sides.below].map(|side| {
        let length = tail_length(side, relative_efficiency);
        if length < FEWEST { 0 } else { length }
    });
    if lengths == [0, 0] {
        return f64::NEG_INFINITY;
    }
    with_room(|room| {
        let Room {
            sample,
            beyond: found,
            exceedances,
            ..
        } = room;
        let [low, high] = bounds(z, lengths, sample);
        beyond(z, low, high, found);
        let upper = side_shape(z, 1.0, lengths[0], (found, high), exceedances);
        found.iter_mut().for_each(|value| *value = -*value);
        let lower = side_shape(z, -1.0, lengths[1], (found, -low), exceedances);
        upper.max(lower)
    })
}

/// Values of both signs beyond which a few more lie than are sought; 0 where a sample cannot tell.
fn bounds(z: &[f64], lengths: [usize; 2], sample: &mut Vec<f64>) -> [f64; 2] {
    let most = lengths[0].max(lengths[1]) + 1;
    let size = SAMPLE_RANK * z.len() / (2 * most);
    if size < 2 * SAMPLE_RANK || 4 * size > z.len() {
        return [0.0; 2];
    }
    sample.clear();
    sample.extend(z.iter().step_by(z.len() / size));
    // Twice what is sought of the longer tail; of the other as much more as a small sample needs.
    let rank = |length: usize| {
        (SAMPLE_RANK * (length + 1))
            .div_ceil(most)
            .max(SAMPLE_RANK / 3)
    };
    let mut bound = |length: usize| {
        let bound = if length == 0 {
            f64::INFINITY
        } else {
            nth_largest(sample, rank(length)).unwrap_or(0.0).max(0.0)
        };
        sample.iter_mut().for_each(|value| *value = -*value);
        bound
    };
    let high = bound(lengths[0]);
    [-bound(lengths[1]), high]
}

/// Shape of the `length` largest of `sign · z`; those of at least `bound` are among `found`.
fn side_shape(
    z: &[f64],
    sign: f64,
    length: usize,
    (found, bound): (&mut Vec<f64>, f64),
    exceedances: &mut Vec<f64>,
) -> f64 {
    if length == 0 {
        return f64::NEG_INFINITY;
    }
    let mut all = Vec::new();
    let mut values = &found[..];
    let mut cutoff = nth_largest(values, length + 1);
    if bound == 0.0 || !cutoff.is_some_and(|cutoff| cutoff >= bound) {
        all.extend(z.iter().map(|z| sign * z).filter(|z| *z > 0.0));
        values = &all;
        cutoff = nth_largest(values, length + 1);
    }
    // At most a fifth of the side, so that the cut-off is one of its values.
    let Some(cutoff) = cutoff else {
        return f64::INFINITY;
    };
    beyond(values, f64::NEG_INFINITY, cutoff.next_up(), exceedances);
    exceedances.iter_mut().for_each(|value| *value -= cutoff);
    // What ties with the cut-off does not exceed it.
    exceedances.resize(length, 0.0);
    pareto::fit_any(exceedances).shrunk(length).shape
}

struct CountSides<'a>(&'a [f64]);

impl Work for CountSides<'_> {
    type Output = Sides;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Sides {
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
        let count = |lanes: [f64; LANES]| lanes.iter().sum::<f64>() as usize;
        Sides {
            finite: !zero.iter().sum::<f64>().is_nan(),
            above: count(above),
            below: count(below),
        }
    }
}
