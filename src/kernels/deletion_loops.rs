//! The loops over one column of [`super::deletion_column`]. Sums run over 16 lanes, these over blocks
//! of 4096 draws.

use super::vector::exp::exp;
use super::vector::{Arithmetic, Work, tree};
use super::weight_sums::larger;

pub(super) const LANES: usize = 16;
pub(super) const BLOCK: usize = 4096;

/// Takes `largest` off `x` and writes the exponentials; their sum, and the least `x`.
pub struct Exponentials<'a> {
    /// Logarithms.
    pub x: &'a mut [f64],
    /// Their largest.
    pub largest: f64,
    /// Where the exponentials go.
    pub weights: &'a mut [f64],
}

impl Work for Exponentials<'_> {
    type Output = (f64, f64);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (f64, f64) {
        let (mut total, mut least, mut lowest) = (0.0, [0.0; LANES], 0.0);
        let largest = self.largest;
        for (x, r) in self.x.chunks_mut(BLOCK).zip(self.weights.chunks_mut(BLOCK)) {
            let mut lanes = [0.0; LANES];
            let ((x, x_rest), (r, r_rest)) =
                (x.as_chunks_mut::<LANES>(), r.as_chunks_mut::<LANES>());
            for (x, r) in x.iter_mut().zip(r) {
                for lane in 0..LANES {
                    x[lane] -= largest;
                    r[lane] = exp::<A>(x[lane]);
                    lanes[lane] += r[lane];
                    least[lane] = larger(-x[lane], least[lane]);
                }
            }
            let mut rest = [0.0; LANES];
            for (sum, (x, r)) in rest.iter_mut().zip(x_rest.iter_mut().zip(r_rest)) {
                *x -= largest;
                *r = exp::<A>(*x);
                *sum = *r;
                lowest = larger(-*x, lowest);
            }
            total += tree(plus(lanes, rest));
        }
        (total, -least.into_iter().fold(lowest, f64::max))
    }
}

/// Writes `exp(least − x)`: the density where the weight is its inverse. The sum.
pub struct Density<'a> {
    /// Log weights.
    pub x: &'a [f64],
    /// The least of them.
    pub least: f64,
    /// Where the density goes.
    pub density: &'a mut [f64],
}

impl Work for Density<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        let (mut total, least) = (0.0, self.least);
        for (x, y) in self.x.chunks(BLOCK).zip(self.density.chunks_mut(BLOCK)) {
            let mut lanes = [0.0; LANES];
            let ((x, x_rest), (y, y_rest)) = (x.as_chunks::<LANES>(), y.as_chunks_mut::<LANES>());
            for (x, y) in x.iter().zip(y) {
                for lane in 0..LANES {
                    y[lane] = exp::<A>(least - x[lane]);
                    lanes[lane] += y[lane];
                }
            }
            let mut rest = [0.0; LANES];
            for (sum, (x, y)) in rest.iter_mut().zip(x_rest.iter().zip(y_rest)) {
                *y = exp::<A>(least - x);
                *sum = *y;
            }
            total += tree(plus(lanes, rest));
        }
        total
    }
}

/// `raw += 1/n − weight/total` and `in_sample += density/total − 1/n`.
pub struct AddBoth<'a> {
    /// Weights and their sum.
    pub weights: (&'a [f64], f64),
    /// Densities and their sum.
    pub density: (&'a [f64], f64),
    /// The first total.
    pub raw: &'a mut [f64],
    /// The second one.
    pub in_sample: &'a mut [f64],
}

impl Work for AddBoth<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let equal = 1.0 / self.raw.len() as f64;
        let (of_weights, of_density) = (1.0 / self.weights.1, 1.0 / self.density.1);
        for (sum, weight) in self.raw.iter_mut().zip(self.weights.0) {
            *sum += A::mul_add(-of_weights, *weight, equal);
        }
        for (sum, density) in self.in_sample.iter_mut().zip(self.density.0) {
            *sum += A::mul_add(of_density, *density, -equal);
        }
    }
}

/// Sums of weights `r = exp(x)`.
pub struct Sums {
    /// `Σ r`.
    pub total: f64,
    /// `Σ r²`.
    pub squares: f64,
    /// `Σ r x`, with `0 · −inf = 0`.
    pub spread: f64,
}

/// Forms [`Sums`].
pub struct Moments<'a> {
    /// Logarithms.
    pub x: &'a [f64],
    /// Their exponentials.
    pub weights: &'a [f64],
}

impl Work for Moments<'_> {
    type Output = Sums;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Sums {
        let mut sums = Sums {
            total: 0.0,
            squares: 0.0,
            spread: 0.0,
        };
        for (x, r) in self.x.chunks(BLOCK).zip(self.weights.chunks(BLOCK)) {
            let [mut total, mut squares, mut spread] = [[0.0; LANES]; 3];
            let ((x, x_rest), (r, r_rest)) = (x.as_chunks::<LANES>(), r.as_chunks::<LANES>());
            for (x, r) in x.iter().zip(r) {
                for lane in 0..LANES {
                    total[lane] += r[lane];
                    squares[lane] = A::mul_add(r[lane], r[lane], squares[lane]);
                    spread[lane] = A::mul_add(r[lane], larger(x[lane], -1000.0), spread[lane]);
                }
            }
            let mut rest = [[0.0; LANES]; 3];
            for (lane, (&x, &r)) in x_rest.iter().zip(r_rest).enumerate() {
                rest[0][lane] = r;
                rest[1][lane] = r * r;
                rest[2][lane] = r * larger(x, -1000.0);
            }
            sums.total += tree(plus(total, rest[0]));
            sums.squares += tree(plus(squares, rest[1]));
            sums.spread += tree(plus(spread, rest[2]));
        }
        sums
    }
}

/// `constant − factor · weight`.
pub struct Weighed<'a> {
    /// Weights.
    pub weights: &'a [f64],
    /// What they are taken off.
    pub constant: f64,
    /// Times what.
    pub factor: f64,
    /// Where the result goes.
    pub out: &'a mut [f64],
}

impl Work for Weighed<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (target, weight) in self.out.iter_mut().zip(self.weights) {
            *target = A::mul_add(-self.factor, *weight, self.constant);
        }
    }
}

/// `Σ z²` and `Σ z³` of a series, which is added to a total where there is one.
pub struct Powers<'a> {
    /// The series.
    pub z: &'a [f64],
    /// To what it is added; as long as the series, or empty.
    pub to: &'a mut [f64],
}

impl Work for Powers<'_> {
    type Output = (f64, f64);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (f64, f64) {
        for (sum, z) in self.to.iter_mut().zip(self.z) {
            *sum += z;
        }
        let mut found = (0.0, 0.0);
        for z in self.z.chunks(BLOCK) {
            let (mut squares, mut cubes) = ([0.0; LANES], [0.0; LANES]);
            let (chunks, rest) = z.as_chunks::<LANES>();
            for z in chunks {
                for lane in 0..LANES {
                    let square = z[lane] * z[lane];
                    squares[lane] += square;
                    cubes[lane] = A::mul_add(square, z[lane], cubes[lane]);
                }
            }
            let mut last = [[0.0; LANES]; 2];
            for (lane, &z) in rest.iter().enumerate() {
                last[0][lane] = z * z;
                last[1][lane] = z * z * z;
            }
            found.0 += tree(plus(squares, last[0]));
            found.1 += tree(plus(cubes, last[1]));
        }
        found
    }
}

/// Rests are added up apart, so that the lanes of the loop stay in registers.
#[inline(always)]
pub(super) fn plus(a: [f64; LANES], b: [f64; LANES]) -> [f64; LANES] {
    std::array::from_fn(|lane| a[lane] + b[lane])
}
