//! Sums of weights that all quantities of a node, or one of them, need.

use super::lane_series::rows_of;
use super::lanes::{LANES, Layout, Row};
use super::node_series::{ZERO, add, add_product, each, tree};
use super::vector::{Arithmetic, Work, dispatch};

/// `Σ w f` over each half.
pub fn half_sums(f: &[f64], w: &[f64], layout: &Layout) -> Vec<f64> {
    let mut sums = Vec::with_capacity(layout.halves().len());
    for group in layout.groups() {
        let found = dispatch(WeightedSums {
            f: rows_of(f, group),
            w: rows_of(w, group),
        });
        sums.extend_from_slice(&found[..group.halves.len()]);
    }
    sums
}

struct WeightedSums<'a> {
    f: &'a [Row],
    w: &'a [Row],
}

impl Work for WeightedSums<'_> {
    type Output = Row;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Row {
        let mut sums = [ZERO; 4];
        let (f, f_rest) = self.f.as_chunks::<4>();
        let (w, w_rest) = self.w.as_chunks::<4>();
        for (f, w) in f.iter().zip(w) {
            for ((sum, f), w) in sums.iter_mut().zip(f).zip(w) {
                add_product::<A>(w, f, sum);
            }
        }
        for ((sum, f), w) in sums.iter_mut().zip(f_rest).zip(w_rest) {
            add_product::<A>(w, f, sum);
        }
        each(|lane| (sums[0][lane] + sums[1][lane]) + (sums[2][lane] + sums[3][lane]))
    }
}

/// Effective draws `(Σ w)²/Σ w²` where `f > least`, and where not.
pub fn either_side(f: &[f64], least: f64, w: &[f64]) -> [f64; 2] {
    dispatch(EitherSide { f, least, w }).map(|[total, squares]| {
        if squares > 0.0 {
            total * total / squares
        } else {
            0.0
        }
    })
}

struct EitherSide<'a> {
    f: &'a [f64],
    least: f64,
    w: &'a [f64],
}

impl Work for EitherSide<'_> {
    type Output = [[f64; 2]; 2];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [[f64; 2]; 2] {
        let mut sums = [ZERO; 4];
        let (f, f_rest) = self.f.as_chunks::<LANES>();
        let (w, w_rest) = self.w.as_chunks::<LANES>();
        for (f, w) in f.iter().zip(w) {
            self.add::<A>(f, w, &mut sums);
        }
        for (f, w) in f_rest.iter().zip(w_rest) {
            self.add::<A>(&one(*f), &one(*w), &mut sums);
        }
        let [a, b, c, d] = sums.map(tree);
        [[a, b], [c, d]]
    }
}

impl EitherSide<'_> {
    #[inline(always)]
    fn add<A: Arithmetic>(&self, f: &[f64; LANES], w: &[f64; LANES], sums: &mut [[f64; LANES]; 4]) {
        let (mut inside, mut outside) = (ZERO, ZERO);
        for lane in 0..LANES {
            inside[lane] = if f[lane] > self.least { w[lane] } else { 0.0 };
        }
        for lane in 0..LANES {
            outside[lane] = w[lane] - inside[lane];
        }
        add(&inside, &mut sums[0]);
        add_product::<A>(&inside, &inside, &mut sums[1]);
        add(&outside, &mut sums[2]);
        add_product::<A>(&outside, &outside, &mut sums[3]);
    }
}

/// Lanes of which one is in use.
#[inline(always)]
fn one(value: f64) -> [f64; LANES] {
    let mut lanes = ZERO;
    lanes[0] = value;
    lanes
}
