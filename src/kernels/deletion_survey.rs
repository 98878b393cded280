//! What the log ratios of one column look like.

use super::deletion_loops::LANES;
use super::vector::{Arithmetic, Work, dispatch, tree};
use super::weight_sums::larger;

/// Whether all entries are finite.
pub struct Finite<'a>(pub &'a [f64]);

impl Work for Finite<'_> {
    type Output = bool;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> bool {
        let magnitude = |entry: &f64| entry.to_bits() & (u64::MAX >> 1);
        self.0.iter().map(magnitude).fold(0, u64::max) < f64::INFINITY.to_bits()
    }
}

/// What log ratios look like: their number, extremes, sum and sum of squares of their distances from
/// the first.
#[derive(Clone, Copy)]
pub struct Survey {
    count: f64,
    origin: f64,
    /// The largest of them that is a number.
    pub largest: f64,
    /// The least of them that is a number.
    pub least: f64,
    sum: f64,
    squares: f64,
}

impl Survey {
    /// Whether all of them are; a false alarm is possible where they are huge.
    pub fn is_finite(&self) -> bool {
        self.sum.is_finite()
    }

    /// Mean and standard deviation of the ratios less `above`.
    pub fn spread(&self, above: f64) -> Option<(f64, f64)> {
        let mean = self.sum / self.count;
        let deviation = (self.squares / self.count - mean * mean).sqrt();
        let known = mean.is_finite() && deviation > 0.0 && deviation.is_finite();
        known.then_some((mean + (self.origin - above), deviation))
    }
}

/// Log densities to log ratios `log v − x`, in place. A draw without base weight has none.
pub struct Ratios<'a> {
    /// Log densities.
    pub x: &'a mut [f64],
    /// Log base weights, where they are not equal.
    pub log_weights: Option<&'a [f64]>,
}

impl Work for Ratios<'_> {
    type Output = Survey;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Survey {
        let first = self.x.first().copied().unwrap_or(0.0);
        match self.log_weights {
            None => surveyed::<A>(self.x, -first, |x| -x),
            Some(logs) => {
                for (x, &log) in self.x.iter_mut().zip(logs) {
                    *x = if log == f64::NEG_INFINITY {
                        log
                    } else {
                        log - *x
                    };
                }
                let first = self.x.first().copied().unwrap_or(0.0);
                surveyed::<A>(self.x, first, |x| x)
            }
        }
    }
}

#[inline(always)]
fn surveyed<A: Arithmetic>(x: &mut [f64], origin: f64, change: impl Fn(f64) -> f64) -> Survey {
    let [mut most, mut least] = [[f64::NEG_INFINITY; LANES]; 2];
    let [mut sums, mut squares] = [[0.0; LANES]; 2];
    let count = x.len() as f64;
    let (chunks, rest) = x.as_chunks_mut::<LANES>();
    for chunk in chunks {
        for lane in 0..LANES {
            let value = change(chunk[lane]);
            chunk[lane] = value;
            most[lane] = larger(value, most[lane]);
            least[lane] = larger(-value, least[lane]);
            sums[lane] += value - origin;
            squares[lane] = A::mul_add(value - origin, value - origin, squares[lane]);
        }
    }
    let mut last = (f64::NEG_INFINITY, f64::NEG_INFINITY, 0.0, 0.0);
    for entry in rest {
        *entry = change(*entry);
        let d = *entry - origin;
        last.0 = larger(*entry, last.0);
        last.1 = larger(-*entry, last.1);
        (last.2, last.3) = (last.2 + d, last.3 + d * d);
    }
    Survey {
        count,
        origin,
        largest: most.into_iter().fold(last.0, f64::max),
        least: -least.into_iter().fold(last.1, f64::max),
        sum: tree(sums) + last.2,
        squares: tree(squares) + last.3,
    }
}

/// The largest entry; `−inf` without one.
pub fn maximum_of(x: &[f64]) -> f64 {
    dispatch(Maximum(x))
}

struct Maximum<'a>(&'a [f64]);

impl Work for Maximum<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        lane_maximum(self.0)
    }
}

#[inline(always)]
fn lane_maximum(x: &[f64]) -> f64 {
    let mut lanes = [f64::NEG_INFINITY; LANES];
    let (chunks, rest) = x.as_chunks::<LANES>();
    for chunk in chunks {
        for lane in 0..LANES {
            lanes[lane] = larger(chunk[lane], lanes[lane]);
        }
    }
    let last = rest.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    lanes.into_iter().fold(last, f64::max)
}
