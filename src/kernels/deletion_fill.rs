//! Some draws of the weights of a block of columns, as [`super::deletion_products`] takes them.

use super::deletion_loops::LANES;
use super::deletion_products::{DRAWS, TOGETHER};
use super::vector::select::at_least;
use super::vector::{Arithmetic, Work, tree};

/// Share of a draw from which on its square is formed by itself, in columns where some draw has one
/// of [`CARRIED`]: where few draws carry a shift it lies close to their own values, and sums of powers
/// would cancel.
const LARGE: f64 = 0.01;
const CARRIED: f64 = 0.05;

/// Some draws of `x = n (w − v)` of a block of columns: themselves; in single precision without those
/// of large shares; these squared; and sums of squares over all draws so far.
pub(super) struct Block {
    used: usize,
    pub(super) x: Vec<[f64; DRAWS]>,
    pub(super) single: Vec<[f32; DRAWS]>,
    pub(super) square: Vec<[f32; DRAWS]>,
    pub(super) squares: Vec<f64>,
    /// Column, draw and `x` of draws with large shares.
    pub(super) large: Vec<(usize, usize, f64)>,
    places: Vec<u32>,
}

impl Block {
    pub(super) fn new(used: usize) -> Self {
        let columns = used.next_multiple_of(TOGETHER);
        Self {
            used,
            x: vec![[0.0; DRAWS]; columns],
            single: vec![[0.0; DRAWS]; columns],
            square: vec![[0.0; DRAWS]; columns],
            squares: vec![0.0; columns],
            large: Vec::new(),
            places: Vec::new(),
        }
    }

    /// Room for columns that are worked on together.
    pub(super) fn columns(&self) -> usize {
        self.x.len()
    }
}

/// Takes some draws from `start` on, those of `base`.
pub(super) struct Fill<'a> {
    pub(super) weights: &'a [f64],
    pub(super) apart: usize,
    /// What weights are multiplied by, and the largest share.
    pub(super) scales: &'a [(f64, f64)],
    pub(super) start: usize,
    pub(super) draws: usize,
    pub(super) base: &'a [f64],
    pub(super) block: &'a mut Block,
}

impl Work for Fill<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let block = self.block;
        let length = self.base.len().min(DRAWS);
        for column in 0..block.used {
            let weights = &self.weights[column * self.apart + self.start..][..length];
            let x = &mut block.x[column];
            let (scale, share) = self.scales[column];
            for ((x, weight), b) in x.iter_mut().zip(weights).zip(self.base) {
                *x = A::mul_add(scale, *weight, -b);
            }
            x[length..].fill(0.0);
            let (single, square) = (&mut block.single[column], &mut block.square[column]);
            if share > CARRIED {
                let least = LARGE * self.draws as f64 / scale;
                let mut rest = *x;
                block.places.clear();
                at_least(weights, 1.0, least, &mut block.places);
                for draw in block.places.iter().map(|&place| place as usize) {
                    block.large.push((column, self.start + draw, rest[draw]));
                    rest[draw] = 0.0;
                }
                block.squares[column] += narrowed::<A>(&rest, single, square);
            } else {
                block.squares[column] += narrowed::<A>(x, single, square);
            }
        }
    }
}

/// Writes `x` and `x²` in single precision; `Σ x²`.
#[inline(always)]
fn narrowed<A: Arithmetic>(
    x: &[f64; DRAWS],
    single: &mut [f32; DRAWS],
    square: &mut [f32; DRAWS],
) -> f64 {
    for ((single, square), x) in single.iter_mut().zip(square).zip(x) {
        *single = *x as f32;
        *square = (x * x) as f32;
    }
    let mut squares = [0.0; LANES];
    for x in x.as_chunks::<LANES>().0 {
        for lane in 0..LANES {
            squares[lane] = A::mul_add(x[lane], x[lane], squares[lane]);
        }
    }
    tree(squares)
}
