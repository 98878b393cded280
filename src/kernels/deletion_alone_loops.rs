//! The loops over columns of [`super::deletion_alone`].

use super::deletion_loops::{BLOCK, Sums};
use super::vector::exp::exp_both;
use super::vector::{Arithmetic, Work};

/// Draws whose sums are formed side by side.
const SIDE: usize = 8;

/// Log densities to log ratios whose largest is 0, with their exponentials and the inverses of these:
/// weights and densities. Sums of the weights, and of the densities.
pub(super) struct Both<'a> {
    /// Log densities `x`, which become `−x − largest`.
    pub(super) x: &'a mut [f64],
    pub(super) largest: f64,
    pub(super) weights: &'a mut [f64],
    pub(super) density: &'a mut [f64],
}

impl Work for Both<'_> {
    type Output = (Sums, f64);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (Sums, f64) {
        let mut found = [0.0; 4];
        let blocks = self.x.chunks_mut(BLOCK).zip(self.weights.chunks_mut(BLOCK));
        for ((x, r), d) in blocks.zip(self.density.chunks_mut(BLOCK)) {
            let main = x.len() / SIDE * SIDE;
            let (x, x_rest) = x.split_at_mut(main);
            let (r, r_rest) = r.split_at_mut(main);
            let (d, d_rest) = d.split_at_mut(main);
            let lanes = both::<A, SIDE>(x, self.largest, r, d);
            let rest = both::<A, 1>(x_rest, self.largest, r_rest, d_rest);
            for (sum, (main, rest)) in found.iter_mut().zip(lanes.into_iter().zip(rest)) {
                *sum += main + rest;
            }
        }
        let [total, squares, spread, density] = found;
        let sums = Sums {
            total,
            squares,
            spread,
        };
        (sums, density)
    }
}

/// Entries are taken into registers first: that way the compiler need not ask whether arrays overlap.
#[inline(always)]
fn both<A: Arithmetic, const N: usize>(
    x: &mut [f64],
    largest: f64,
    weights: &mut [f64],
    density: &mut [f64],
) -> [f64; 4] {
    let (mut total, mut squares, mut spread, mut densities) =
        ([0.0; N], [0.0; N], [0.0; N], [0.0; N]);
    let x = x.as_chunks_mut::<N>().0.iter_mut();
    let weights = weights.as_chunks_mut::<N>().0.iter_mut();
    let density = density.as_chunks_mut::<N>().0.iter_mut();
    for ((x, weights), density) in x.zip(weights).zip(density) {
        let (mut a, mut r, mut d) = (*x, [0.0; N], [0.0; N]);
        for lane in 0..N {
            a[lane] = -a[lane] - largest;
            (r[lane], d[lane]) = exp_both::<A>(a[lane]);
        }
        for lane in 0..N {
            total[lane] += r[lane];
            squares[lane] = A::mul_add(r[lane], r[lane], squares[lane]);
            // As a difference: beside another sum of products compilers mix the lanes of the two.
            spread[lane] -= r[lane] * -a[lane];
            densities[lane] += d[lane];
        }
        (*x, *weights, *density) = (a, r, d);
    }
    [
        halved(total),
        halved(squares),
        halved(spread),
        halved(densities),
    ]
}

/// The sum of a power of two of lanes.
#[inline(always)]
fn halved<const N: usize>(mut lanes: [f64; N]) -> f64 {
    let mut half = N / 2;
    while half > 0 {
        for lane in 0..half {
            lanes[lane] += lanes[lane + half];
        }
        half /= 2;
    }
    lanes[0]
}

/// Columns whose series are added to the totals together.
pub(super) const GROUP: usize = 4;

/// What the series of a column are made of: `left_out[0] − left_out[1] w`, `equal − raw w` and
/// `in_sample d − equal`.
#[derive(Clone, Copy)]
pub(super) struct Member<'a> {
    pub(super) weights: &'a [f64],
    pub(super) density: &'a [f64],
    pub(super) left_out: [f64; 2],
    pub(super) raw: f64,
    pub(super) in_sample: f64,
    pub(super) equal: f64,
}

/// Adds the series of some columns to the totals; `Σ z²` and `Σ z³` of the left-out one of each.
pub(super) struct Totals<'a> {
    pub(super) members: [Member<'a>; GROUP],
    /// Of the left-out score, of raw weights, of the in-sample score.
    pub(super) totals: [&'a mut [f64]; 3],
}

impl Work for Totals<'_> {
    type Output = [[f64; 2]; GROUP];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Self::Output {
        let mut found = [[0.0; 2]; GROUP];
        let mut totals = self.totals;
        let draws = totals[0].len();
        for start in (0..draws).step_by(BLOCK) {
            let end = draws.min(start + BLOCK);
            let main = start + (end - start) / SIDE * SIDE;
            let part = totals.each_mut().map(|total| &mut total[start..main]);
            let lanes = added::<A, SIDE>(&self.members, start, part);
            let part = totals.each_mut().map(|total| &mut total[main..end]);
            let rest = added::<A, 1>(&self.members, main, part);
            for (found, (main, rest)) in found.iter_mut().zip(lanes.into_iter().zip(rest)) {
                found[0] += main[0] + rest[0];
                found[1] += main[1] + rest[1];
            }
        }
        found
    }
}

#[inline(always)]
fn added<'a, A: Arithmetic, const N: usize>(
    members: &[Member<'a>; GROUP],
    start: usize,
    totals: [&mut [f64]; 3],
) -> [[f64; 2]; GROUP] {
    let (mut squares, mut cubes) = ([[0.0; N]; GROUP], [[0.0; N]; GROUP]);
    let length = totals[0].len();
    let [left_out, raw, in_sample] = totals.map(|total| total.as_chunks_mut::<N>().0);
    let rows = left_out.len();
    let chunks = |x: &'a [f64]| &x[start..start + length].as_chunks::<N>().0[..rows];
    let weights = members.each_ref().map(|member| chunks(member.weights));
    let density = members.each_ref().map(|member| chunks(member.density));
    let totals = left_out.iter_mut().zip(raw).zip(in_sample);
    for (row, ((left_out, raw), in_sample)) in totals.enumerate() {
        let (mut l, mut r, mut i) = (*left_out, *raw, *in_sample);
        for (index, member) in members.iter().enumerate() {
            let (w, d) = (weights[index][row], density[index][row]);
            for lane in 0..N {
                let z = A::mul_add(-member.left_out[1], w[lane], member.left_out[0]);
                l[lane] += z;
                squares[index][lane] = A::mul_add(z, z, squares[index][lane]);
                cubes[index][lane] = A::mul_add(z * z, z, cubes[index][lane]);
                r[lane] += A::mul_add(-member.raw, w[lane], member.equal);
                i[lane] += A::mul_add(member.in_sample, d[lane], -member.equal);
            }
        }
        (*left_out, *raw, *in_sample) = (l, r, i);
    }
    std::array::from_fn(|index| [halved(squares[index]), halved(cubes[index])])
}
