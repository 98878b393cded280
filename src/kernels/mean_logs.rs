//! Means of `log(1 − b x)` for many `b`, by one logarithm of a product instead of many logarithms.

use std::f64::consts::LN_2;

use super::vector::ln::ln_slice;
use super::vector::{Arithmetic, TWO_52, Work, dispatch};

/// Below this `|b|` the mean of `log1p(−b x)` is formed by its series.
const SMALL: f64 = 0.03;

/// Terms of that series: the rest is below `SMALL^12`.
const TERMS: usize = 11;

/// `mean log1p(−b x)` for every `b`, exceedances `x` in `[0, 1]`.
pub fn mean_logs<const N: usize>(x: &[f64], b: [f64; N]) -> [f64; N] {
    let (products, exponents) = dispatch(Products { x, b: &b });
    let mut logs = [0.0; N];
    ln_slice(&products, &mut logs);
    let count = x.len() as f64;
    std::array::from_fn(|lane| {
        if b[lane] == 0.0 {
            return 0.0;
        }
        if b[lane].abs() < SMALL {
            return dispatch(SmallLogs { x, b: b[lane] }) / count;
        }
        (exponents[lane] * LN_2 + logs[lane]) / count
    })
}

/// `Π (1 − b x)` over `x` for every `b` as mantissa and exponent: one logarithm instead of many.
struct Products<'a, const N: usize> {
    x: &'a [f64],
    b: &'a [f64; N],
}

impl<const N: usize> Work for Products<'_, N> {
    type Output = ([f64; N], [f64; N]);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> ([f64; N], [f64; N]) {
        let (mut even, mut odd) = ([1.0; N], [1.0; N]);
        let (mut exponents, b) = ([0.0; N], *self.b);
        for group in self.x.chunks(2 * group_size(self.b)) {
            let (pairs, rest) = group.as_chunks::<2>();
            for [first, second] in pairs {
                for lane in 0..N {
                    even[lane] *= A::mul_add(-b[lane], *first, 1.0);
                    odd[lane] *= A::mul_add(-b[lane], *second, 1.0);
                }
            }
            for last in rest {
                for lane in 0..N {
                    even[lane] *= A::mul_add(-b[lane], *last, 1.0);
                }
            }
            for lane in 0..N {
                exponents[lane] += take_exponent(&mut even[lane]);
                exponents[lane] += take_exponent(&mut odd[lane]);
            }
        }
        for lane in 0..N {
            even[lane] *= odd[lane];
        }
        (even, exponents)
    }
}

/// Factors that can be multiplied before a product, in [1, 2) at first, leaves the normal numbers.
#[inline(always)]
fn group_size(b: &[f64]) -> usize {
    let (mut least, mut most) = (1.0_f64, 1.0_f64);
    for b in b {
        least = least.min(1.0 - b);
        most = most.max(1.0 - b);
    }
    let bits = most.log2().max(-least.log2()).max(1.0);
    ((1000.0 / bits) as usize).clamp(1, 64)
}

/// Leaves a positive normal number in [1, 2) and returns the power of two taken out.
#[inline(always)]
fn take_exponent(x: &mut f64) -> f64 {
    let bits = x.to_bits();
    *x = f64::from_bits((bits & ((1 << 52) - 1)) | 1.0_f64.to_bits());
    // The exponent as the last bits of 2^52, which as a number is exact.
    f64::from_bits((bits >> 52) | TWO_52.to_bits()) - (TWO_52 + 1023.0)
}

/// `Σ log1p(−b x)` for `|b| < SMALL`, by the series: the sum is small itself, and keeps its digits.
struct SmallLogs<'a> {
    x: &'a [f64],
    b: f64,
}

impl Work for SmallLogs<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        let mut lanes = [0.0; 8];
        for chunk in self.x.chunks(8) {
            for (lane, x) in lanes.iter_mut().zip(chunk) {
                let y = self.b * x;
                let mut series = 1.0 / TERMS as f64;
                for term in (1..TERMS).rev() {
                    series = A::mul_add(series, y, 1.0 / term as f64);
                }
                *lane -= series * y;
            }
        }
        ((lanes[0] + lanes[4]) + (lanes[2] + lanes[6]))
            + ((lanes[1] + lanes[5]) + (lanes[3] + lanes[7]))
    }
}
