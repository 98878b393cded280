//! The loops over one column of [`super::deletion_common`].

use super::deletion_loops::{BLOCK, LANES, Sums, plus};
use super::vector::exp::{LEAST, exp, exp_both};
use super::vector::stream::prefetch_far;
use super::vector::{Arithmetic, Work, tree};

/// Takes `largest` off logarithms at most 708 below it and replaces them by their exponentials, with
/// the inverses beside them; both are 0 where the logarithm is [`HIDDEN`]. Their sums.
pub struct Pair<'a> {
    /// Logarithms, then weights.
    pub x: &'a mut [f64],
    /// Their largest.
    pub largest: f64,
    /// Where the inverses go: densities where the weight is one over them.
    pub density: &'a mut [f64],
    /// What is read after this, and is asked for meanwhile.
    pub next: &'a [f64],
}

/// Stands for a draw that is left out of the sums.
pub const HIDDEN: f64 = f64::MIN;

/// What [`Pair`] adds up: of the weights, and the sum of the densities.
pub struct Both {
    /// Of the weights.
    pub sums: Sums,
    /// Sum of the densities.
    pub density: f64,
}

impl Work for Pair<'_> {
    type Output = Both;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Both {
        let (mut found, largest) = ([0.0; 4], self.largest);
        let mut next = self.next.as_chunks::<LANES>().0.iter();
        for (x, y) in self.x.chunks_mut(BLOCK).zip(self.density.chunks_mut(BLOCK)) {
            let [mut total, mut squares, mut spread, mut density] = [[0.0; LANES]; 4];
            let ((x, x_rest), (y, y_rest)) =
                (x.as_chunks_mut::<LANES>(), y.as_chunks_mut::<LANES>());
            for (x, y) in x.iter_mut().zip(y) {
                if let Some(next) = next.next() {
                    prefetch_far(next);
                }
                for lane in 0..LANES {
                    let log = x[lane] - largest;
                    (x[lane], y[lane]) = weight_and_density::<A>(log);
                    total[lane] += x[lane];
                    squares[lane] = A::mul_add(x[lane], x[lane], squares[lane]);
                    spread[lane] = A::mul_add(x[lane], log, spread[lane]);
                    density[lane] += y[lane];
                }
            }
            let mut rest = [[0.0; LANES]; 4];
            for (lane, (x, y)) in x_rest.iter_mut().zip(y_rest).enumerate() {
                let log = *x - largest;
                (*x, *y) = weight_and_density::<A>(log);
                rest[0][lane] = *x;
                rest[1][lane] = *x * *x;
                rest[2][lane] = *x * log;
                rest[3][lane] = *y;
            }
            let lanes = [total, squares, spread, density];
            for (found, (lanes, rest)) in found.iter_mut().zip(lanes.into_iter().zip(rest)) {
                *found += tree(plus(lanes, rest));
            }
        }
        let [total, squares, spread, density] = found;
        Both {
            sums: Sums {
                total,
                squares,
                spread,
            },
            density,
        }
    }
}

#[inline(always)]
pub(super) fn weight_and_density<A: Arithmetic>(log: f64) -> (f64, f64) {
    let (weight, density) = exp_both::<A>(log);
    if log < LEAST {
        (0.0, 0.0)
    } else {
        (weight, density)
    }
}

/// `Σ z²` and `Σ z³` of `z = constant − factor · weight`.
pub struct WeighedPowers<'a> {
    /// Weights.
    pub weights: &'a [f64],
    /// What they are taken off.
    pub constant: f64,
    /// Times what.
    pub factor: f64,
}

impl Work for WeighedPowers<'_> {
    type Output = (f64, f64);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (f64, f64) {
        let mut found = (0.0, 0.0);
        for weights in self.weights.chunks(BLOCK) {
            let [mut squares, mut cubes] = [[0.0; LANES]; 2];
            let (chunks, rest) = weights.as_chunks::<LANES>();
            for weights in chunks {
                for lane in 0..LANES {
                    let z = A::mul_add(-self.factor, weights[lane], self.constant);
                    let square = z * z;
                    squares[lane] += square;
                    cubes[lane] = A::mul_add(square, z, cubes[lane]);
                }
            }
            let mut last = [[0.0; LANES]; 2];
            for (lane, &weight) in rest.iter().enumerate() {
                let z = A::mul_add(-self.factor, weight, self.constant);
                last[0][lane] = z * z;
                last[1][lane] = z * z * z;
            }
            found.0 += tree(plus(squares, last[0]));
            found.1 += tree(plus(cubes, last[1]));
        }
        found
    }
}

/// Adds what columns with these weights and densities, draw by draw, contribute to the totals.
pub struct Settle<'a> {
    /// Weights.
    pub weights: &'a [f64],
    /// Densities.
    pub density: &'a [f64],
    /// By which weights are taken off what, for the left-out score.
    pub constant: f64,
    /// Times what.
    pub factor: f64,
    /// One over the sum of the raw weights, and of the densities.
    pub units: (f64, f64),
    /// One over the number of draws.
    pub equal: f64,
    /// Totals: left-out score, raw weights, in-sample score.
    pub totals: [&'a mut [f64]; 3],
}

impl Work for Settle<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let (equal, (of_raw, of_density)) = (self.equal, self.units);
        // One simple loop for each: together they would not become whole vectors.
        let [left_out, raw, in_sample] = self.totals;
        for (sum, weight) in left_out.iter_mut().zip(self.weights) {
            *sum += A::mul_add(-self.factor, *weight, self.constant);
        }
        for (sum, weight) in raw.iter_mut().zip(self.weights) {
            *sum += A::mul_add(-of_raw, *weight, equal);
        }
        for (sum, density) in in_sample.iter_mut().zip(self.density) {
            *sum += A::mul_add(of_density, *density, -equal);
        }
    }
}

/// Writes `exp(x − largest)`.
pub struct Raw<'a> {
    /// Logarithms.
    pub x: &'a [f64],
    /// Their largest.
    pub largest: f64,
    /// Where the exponentials go.
    pub weights: &'a mut [f64],
}

impl Work for Raw<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (x, weights) in self.x.chunks(LANES).zip(self.weights.chunks_mut(LANES)) {
            for (x, weight) in x.iter().zip(weights) {
                *weight = exp::<A>(x - self.largest);
            }
        }
    }
}
