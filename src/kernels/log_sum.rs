//! Sums of exponentials, on the log scale.

use super::reductions::slice_sums;
use super::vector::{Arithmetic, Work, dispatch};
use super::weight_sums::{form, larger};

/// `log Σ_s exp(x_s)` of log weights `x`, shape `(n,)`, on the log scale.
///
/// Evaluated as `m + log Σ exp(x_s − m)` with `m = max x`, so that nothing overflows and the
/// largest term never underflows. No entry, or `−inf` throughout, gives `−inf`; an entry `+inf`
/// gives `+inf`; NaN gives NaN.
pub fn log_sum_exp(x: &[f64]) -> f64 {
    slice_sums::<{ form::TOTAL }>(x).log_sum()
}

/// Writes `x_s − log Σ exp(x)` into `out` and returns the log sum; both on the log scale, both of
/// shape `(n,)`.
///
/// Evaluated as `(x_s − m) − log Σ exp(x − m)`: the maximum is taken off first, because the sum of
/// both, formed first, loses the digits that an offset of `1e5` pushes out. `−inf` throughout
/// stays `−inf`; an entry `+inf` or NaN gives NaN.
pub fn normalise(x: &[f64], out: &mut [f64]) -> f64 {
    let sums = slice_sums::<{ form::TOTAL }>(x);
    let (maximum, log_total) = sums.offsets();
    for (target, &entry) in out.iter_mut().zip(x) {
        *target = (entry - maximum) - log_total;
    }
    sums.log_sum()
}

/// Largest entry; NaN if any entry is NaN; `−inf` without entries.
pub fn maximum(x: &[f64]) -> f64 {
    dispatch(Maximum(x))
}

/// Smallest and largest entry that are numbers; `(+inf, −inf)` without one.
pub fn range(x: &[f64]) -> (f64, f64) {
    dispatch(Range(x))
}

struct Range<'a>(&'a [f64]);

impl Work for Range<'_> {
    type Output = (f64, f64);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (f64, f64) {
        let (mut low, mut high) = ([f64::INFINITY; 16], [f64::NEG_INFINITY; 16]);
        let (chunks, rest) = self.0.as_chunks::<16>();
        for chunk in chunks {
            for lane in 0..16 {
                low[lane] = -larger(-chunk[lane], -low[lane]);
                high[lane] = larger(chunk[lane], high[lane]);
            }
        }
        for (lane, &x) in rest.iter().enumerate() {
            low[lane] = -larger(-x, -low[lane]);
            high[lane] = larger(x, high[lane]);
        }
        (
            low.iter().copied().fold(f64::INFINITY, f64::min),
            high.iter().copied().fold(f64::NEG_INFINITY, f64::max),
        )
    }
}

struct Maximum<'a>(&'a [f64]);

impl Work for Maximum<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        let (mut most, mut nans) = ([f64::NEG_INFINITY; 32], [0.0; 32]);
        let (chunks, rest) = self.0.as_chunks::<32>();
        let mut last = [f64::NEG_INFINITY; 32];
        last[..rest.len()].copy_from_slice(rest);
        for chunk in chunks {
            for lane in 0..32 {
                most[lane] = larger(chunk[lane], most[lane]);
                nans[lane] += if chunk[lane].is_nan() { 1.0 } else { 0.0 };
            }
        }
        for lane in 0..32 {
            most[lane] = larger(last[lane], most[lane]);
            nans[lane] += if last[lane].is_nan() { 1.0 } else { 0.0 };
        }
        if nans.iter().any(|&count| count > 0.0) {
            return f64::NAN;
        }
        most.iter().fold(f64::NEG_INFINITY, |a, &b| larger(b, a))
    }
}
