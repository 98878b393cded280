//! The loops over the halves of chains of [`super::deletion_lags`].

use super::deletion_lags::{Layout, TOGETHER};
use super::deletion_loops::{LANES, plus};
use super::vector::{Arithmetic, Work, tree};

/// Writes `z − z̄_m` of every half into its place.
pub(super) struct Centre<'a> {
    pub(super) z: &'a [f64],
    pub(super) layout: &'a Layout,
    pub(super) centred: &'a mut [f64],
    pub(super) means: &'a mut [f64],
}

impl Work for Centre<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let halves = self.layout.halves.iter().zip(&self.layout.places);
        for ((half, &place), mean) in halves.zip(self.means) {
            let z = &self.z[half.clone()];
            let centred = &mut self.centred[place..place + z.len()];
            let count = z.len() as f64;
            let rough = lane_sum(z) / count;
            for (target, entry) in centred.iter_mut().zip(z) {
                *target = entry - rough;
            }
            // The rounding of the first mean is taken out: the mean of a constant is that constant.
            let rest = lane_sum(centred) / count;
            for target in centred.iter_mut() {
                *target -= rest;
            }
            *mean = rough + rest;
        }
    }
}

#[inline(always)]
fn lane_sum(x: &[f64]) -> f64 {
    let mut lanes = [0.0; LANES];
    let (chunks, rest) = x.as_chunks::<LANES>();
    for chunk in chunks {
        for lane in 0..LANES {
            lanes[lane] += chunk[lane];
        }
    }
    let mut last = [0.0; LANES];
    last[..rest.len()].copy_from_slice(rest);
    tree(plus(lanes, last))
}

/// `Σ c_i c_{i+t}` of every half at [`TOGETHER`] lags from `lag` on.
pub(super) struct Products<'a> {
    pub(super) lag: usize,
    pub(super) layout: &'a Layout,
    pub(super) centred: &'a [f64],
    pub(super) sums: &'a mut [[f64; TOGETHER]],
}

impl Work for Products<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let halves = self.layout.halves.iter().zip(&self.layout.places);
        for ((half, &place), sums) in halves.zip(self.sums) {
            let length = half.len().next_multiple_of(LANES);
            let early = self.centred[place..place + length].as_chunks::<LANES>().0;
            let later: [&[[f64; LANES]]; TOGETHER] = std::array::from_fn(|t| {
                let begin = place + self.lag + t;
                &self.centred[begin..begin + length].as_chunks().0[..early.len()]
            });
            let mut lanes = [[0.0; LANES]; TOGETHER];
            for (chunk, a) in early.iter().enumerate() {
                for (lanes, b) in lanes.iter_mut().zip(&later) {
                    for lane in 0..LANES {
                        lanes[lane] = A::mul_add(a[lane], b[chunk][lane], lanes[lane]);
                    }
                }
            }
            *sums = lanes.map(tree);
        }
    }
}
