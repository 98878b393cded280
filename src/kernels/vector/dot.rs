//! Sums of products of slices, in one fixed order: 16 lanes over 4096 entries, then the blocks.

use super::{Arithmetic, Work, dispatch, tree};

/// Entries of a block.
const BLOCK: usize = 4096;

const LANES: usize = 16;

/// `Σ a b` over slices of equal length.
pub fn dot(a: &[f64], b: &[f64]) -> f64 {
    blocks(a.len(), |start, end| {
        dispatch(Dots {
            a: &a[start..end],
            b: [&b[start..end]],
            centre: 0.0,
        })
    })[0]
}

/// `Σ (z_i − c)(z_{i+t} − c)` for `N` lags `t` from `lag` on, over `i` from `from` to `to`, all read
/// once; `to + lag + N − 1` must lie in `z`.
pub fn lagged<const N: usize>(
    z: &[f64],
    from: usize,
    to: usize,
    lag: usize,
    centre: f64,
) -> [f64; N] {
    let early = &z[from..to];
    let later: [&[f64]; N] = std::array::from_fn(|t| &z[from + lag + t..to + lag + t]);
    blocks(early.len(), |start, end| {
        dispatch(Dots {
            a: &early[start..end],
            b: later.map(|later| &later[start..end]),
            centre,
        })
    })
}

fn blocks<const N: usize>(length: usize, part: impl Fn(usize, usize) -> [f64; N]) -> [f64; N] {
    let mut totals = [0.0; N];
    for start in (0..length).step_by(BLOCK) {
        let found = part(start, length.min(start + BLOCK));
        for (total, found) in totals.iter_mut().zip(found) {
            *total += found;
        }
    }
    totals
}

struct Dots<'a, const N: usize> {
    a: &'a [f64],
    b: [&'a [f64]; N],
    centre: f64,
}

impl<const N: usize> Work for Dots<'_, N> {
    type Output = [f64; N];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [f64; N] {
        let centre = self.centre;
        let mut sums = [[0.0; LANES]; N];
        let (chunks, rest) = self.a.as_chunks::<LANES>();
        let others = self.b.map(|b| b.as_chunks::<LANES>());
        let whole = others.map(|b| &b.0[..chunks.len()]);
        for (place, a) in chunks.iter().enumerate() {
            for (sums, b) in sums.iter_mut().zip(&whole) {
                for lane in 0..LANES {
                    sums[lane] = A::mul_add(a[lane] - centre, b[place][lane] - centre, sums[lane]);
                }
            }
        }
        for (sums, b) in sums.iter_mut().zip(&others) {
            for ((sum, a), b) in sums.iter_mut().zip(rest).zip(b.1) {
                *sum = A::mul_add(*a - centre, *b - centre, *sum);
            }
        }
        sums.map(tree)
    }
}
