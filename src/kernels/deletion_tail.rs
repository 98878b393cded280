//! The tail of one column of [`super::deletion_common`], and what follows from its draws.

use super::deletion_loops::LANES;
use super::deletion_pair::{HIDDEN, weight_and_density};
use super::largest::Ranked;
use super::vector::exp::exp;
use super::vector::{Arithmetic, Work, dispatch, tree};

/// Draws of a tail that was replaced; behind the last one, whole vectors are filled with draws that
/// add nothing.
#[derive(Default)]
pub struct TailDraws {
    /// Where they are, as many as there are.
    pub places: Vec<usize>,
    /// Logarithms as they were, the largest 0, and smoothed.
    logs: Vec<[f64; LANES]>,
    smooth: Vec<[f64; LANES]>,
    /// Weights as they were, and smoothed.
    pub raw: Vec<[f64; LANES]>,
    /// Smoothed weights.
    pub weights: Vec<[f64; LANES]>,
    /// Inverses of the weights as they were.
    pub density: Vec<[f64; LANES]>,
    /// Smoothed weights over those as they were.
    pub ratios: Vec<[f64; LANES]>,
}

/// Sums over the tail.
#[derive(Default)]
pub struct TailSums {
    /// Of the smoothed weights.
    pub total: f64,
    /// Of their squares.
    pub squares: f64,
    /// Of smoothed weights times their logarithms.
    pub spread: f64,
    /// Of the weights as they were.
    pub raw: f64,
    /// Of the densities.
    pub density: f64,
    /// Of the ratios.
    pub ratios: f64,
    /// Of ratios times densities.
    pub products: f64,
}

impl TailDraws {
    /// Draws with their logarithms as they were, and what these are replaced by; sums over them.
    pub fn fill(&mut self, ranked: &[Ranked], smooth: &[f64]) -> TailSums {
        let count = ranked.len();
        self.places.clear();
        self.places
            .extend(ranked.iter().map(|draw| draw.1 as usize));
        let lines = count.div_ceil(LANES);
        for room in [
            &mut self.logs,
            &mut self.smooth,
            &mut self.raw,
            &mut self.weights,
            &mut self.density,
            &mut self.ratios,
        ] {
            room.clear();
            room.resize(lines, [HIDDEN; LANES]);
        }
        let logs = self.logs.as_flattened_mut();
        for (log, draw) in logs.iter_mut().zip(ranked) {
            *log = draw.0;
        }
        if let Some(target) = self.smooth.as_flattened_mut().get_mut(..count) {
            target.copy_from_slice(smooth);
        }
        dispatch(Fill(self))
    }

    /// `Σ z²` and `Σ z³` over the tail, where `z` is a ratio times one number less a smoothed weight
    /// times another.
    pub fn powers(&self, of_ratio: f64, of_weight: f64) -> (f64, f64) {
        dispatch(Powers {
            tail: self,
            of_ratio,
            of_weight,
        })
    }
}

struct Fill<'a>(&'a mut TailDraws);

impl Work for Fill<'_> {
    type Output = TailSums;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> TailSums {
        let mut sums = [[0.0; LANES]; 7];
        let lines = self.0.logs.iter().zip(&self.0.smooth);
        let from = self.0.raw.iter_mut().zip(self.0.density.iter_mut());
        let to = self.0.weights.iter_mut().zip(self.0.ratios.iter_mut());
        for ((logs, smooth), ((raw, density), (weights, ratios))) in lines.zip(from.zip(to)) {
            for lane in 0..LANES {
                (raw[lane], density[lane]) = weight_and_density::<A>(logs[lane]);
                weights[lane] = exp::<A>(smooth[lane]);
                ratios[lane] = weights[lane] * density[lane];
            }
            for lane in 0..LANES {
                let (weight, ratio) = (weights[lane], ratios[lane]);
                sums[0][lane] += weight;
                sums[1][lane] = A::mul_add(weight, weight, sums[1][lane]);
                sums[2][lane] = A::mul_add(weight, smooth[lane], sums[2][lane]);
                sums[3][lane] += raw[lane];
                sums[4][lane] += density[lane];
                sums[5][lane] += ratio;
                sums[6][lane] = A::mul_add(ratio, density[lane], sums[6][lane]);
            }
        }
        let [total, squares, spread, raw, density, ratios, products] = sums.map(tree);
        TailSums {
            total,
            squares,
            spread,
            raw,
            density,
            ratios,
            products,
        }
    }
}

struct Powers<'a> {
    tail: &'a TailDraws,
    of_ratio: f64,
    of_weight: f64,
}

impl Work for Powers<'_> {
    type Output = (f64, f64);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (f64, f64) {
        let [mut squares, mut cubes] = [[0.0; LANES]; 2];
        for (ratios, weights) in self.tail.ratios.iter().zip(&self.tail.weights) {
            for lane in 0..LANES {
                let z = A::mul_add(
                    ratios[lane],
                    self.of_ratio,
                    -(weights[lane] * self.of_weight),
                );
                squares[lane] = A::mul_add(z, z, squares[lane]);
                cubes[lane] = A::mul_add(z * z, z, cubes[lane]);
            }
        }
        (tree(squares), tree(cubes))
    }
}
