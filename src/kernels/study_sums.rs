//! The first pass of [`super::study`], and what it tells the second.

use std::ops::Range;

use super::chain_means::halves_of;
use super::vector::{Arithmetic, Work, dispatch};
use super::weight_sums::larger;

/// Draws of a block.
const BLOCK: usize = 1024;

const LANES: usize = 8;

/// Fewest draws whose tails are collected on the way; shorter series are simply formed.
pub(super) const FEWEST_COLLECTED: usize = 65_536;

/// Draws looked at to guess where a tail begins, and the rank among them that is taken: 0.6 % of
/// all draws, twice what a million draws of efficiency ½ need on a side.
const SAMPLE: usize = 5_000;
const SAMPLE_RANK: usize = 30;

/// Draws in a row, with what makes influence values of them.
#[derive(Clone, Copy)]
pub struct Stretch<'a> {
    /// Values.
    pub f: &'a [f64],
    /// Weights.
    pub w: &'a [f64],
    /// Weights before smoothing.
    pub raw: &'a [f64],
    /// What is taken off values: `ψ = f − centre`.
    pub centre: f64,
    /// Number of all draws.
    pub count: f64,
}

impl Stretch<'_> {
    /// The stretch from one draw to another.
    pub fn part(&self, from: usize, to: usize) -> Self {
        Self {
            f: &self.f[from..to],
            w: &self.w[from..to],
            raw: &self.raw[from..to],
            ..*self
        }
    }

    /// Influence value of one draw on raw weights.
    pub fn raw_influence(&self, draw: usize) -> f64 {
        self.count * self.raw[draw] * (self.f[draw] - self.centre)
    }
}

/// Sums over a stretch.
#[derive(Debug, Clone, Copy)]
pub struct Sums {
    /// `Σ w`, `Σ w²`, `Σ w ψ`, `Σ w ψ²`, `Σ r ψ` on raw weights r, `Σ ψ`.
    pub sums: [f64; 6],
    /// Smallest ψ, w and r.
    pub low: [f64; 3],
    /// Largest ψ, w and r.
    pub high: [f64; 3],
}

impl Sums {
    /// Sums over nothing.
    pub const NONE: Self = Self {
        sums: [0.0; 6],
        low: [f64::INFINITY; 3],
        high: [f64::NEG_INFINITY; 3],
    };

    /// Sums over both.
    pub fn merge(self, other: Self) -> Self {
        Self {
            sums: std::array::from_fn(|i| self.sums[i] + other.sums[i]),
            low: std::array::from_fn(|i| self.low[i].min(other.low[i])),
            high: std::array::from_fn(|i| self.high[i].max(other.high[i])),
        }
    }

    /// The sums of a stretch, block by block.
    pub fn of(stretch: Stretch<'_>) -> Self {
        let count = stretch.f.len();
        (0..count)
            .step_by(BLOCK)
            .map(|from| dispatch(Added(stretch.part(from, count.min(from + BLOCK)))))
            .fold(Self::NONE, Self::merge)
    }
}

struct Added<'a>(Stretch<'a>);

impl Work for Added<'_> {
    type Output = Sums;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Sums {
        let mut lanes = [Sums::NONE; LANES];
        let mut sums = [[0.0; LANES]; 6];
        let mut low = [[f64::INFINITY; LANES]; 3];
        let mut high = [[f64::NEG_INFINITY; LANES]; 3];
        let Stretch {
            f, w, raw, centre, ..
        } = self.0;
        let (f, w, raw) = (
            f.as_chunks::<LANES>(),
            w.as_chunks::<LANES>(),
            raw.as_chunks::<LANES>(),
        );
        for ((f, w), r) in f.0.iter().zip(w.0).zip(raw.0) {
            for lane in 0..LANES {
                let (psi, w, r) = (f[lane] - centre, w[lane], r[lane]);
                let product = w * psi;
                sums[0][lane] += w;
                sums[1][lane] += w * w;
                sums[2][lane] += product;
                sums[3][lane] += product * psi;
                sums[4][lane] += r * psi;
                sums[5][lane] += psi;
                for (place, value) in [psi, w, r].into_iter().enumerate() {
                    low[place][lane] = -larger(-value, -low[place][lane]);
                    high[place][lane] = larger(value, high[place][lane]);
                }
            }
        }
        for (lane, ((f, w), r)) in f.1.iter().zip(w.1).zip(raw.1).enumerate() {
            let psi = f - centre;
            let terms = [*w, w * w, w * psi, w * psi * psi, r * psi, psi];
            lanes[lane] = Sums {
                sums: terms,
                low: [psi, *w, *r],
                high: [psi, *w, *r],
            };
        }
        for (lane, rest) in lanes.iter_mut().enumerate() {
            let of_lane = Sums {
                sums: std::array::from_fn(|i| sums[i][lane]),
                low: std::array::from_fn(|i| low[i][lane]),
                high: std::array::from_fn(|i| high[i][lane]),
            };
            *rest = of_lane.merge(*rest);
        }
        lanes.into_iter().fold(Sums::NONE, Sums::merge)
    }
}

/// What the second pass needs of the first.
#[derive(Debug, Clone, Copy)]
pub struct Known {
    /// Means of the four series over the half: z, z on raw weights, ψ, and z of the chain alone.
    pub means: [f64; 4],
    /// Weighted mean of ψ over the chain.
    pub chain_mean: f64,
    /// Length of the chain over its mass.
    pub scale: f64,
    /// Unit in which cubes are added.
    pub unit: f64,
    /// From where on, and down to where, raw influence values are kept.
    pub cuts: [f64; 2],
}

/// What the second pass needs to know of each half.
pub(super) fn known(
    all: Stretch<'_>,
    chains: &[Range<usize>],
    sums: &[Sums],
    total: Sums,
) -> Vec<Known> {
    let cuts = cuts(all);
    let (psi, w) = (total.high[0].max(-total.low[0]), total.high[1]);
    let bound = all.count * w * psi;
    // Any unit in which no cube overflows.
    let unit = if bound > 0.0 { 1.0 / bound } else { 1.0 };
    let mut known = Vec::with_capacity(sums.len());
    for chain in chains {
        let first = known.len();
        let halves = halves_of(chain.len());
        let of_chain = &sums[first..first + halves.len()];
        let mass: f64 = of_chain.iter().map(|half| half.sums[0]).sum();
        let chain_mean = of_chain.iter().map(|half| half.sums[2]).sum::<f64>() / mass;
        let scale = chain.len() as f64 / mass;
        for (half, range) in of_chain.iter().zip(&halves) {
            known.push(Known {
                means: means(half, range.len() as f64, all.count, chain_mean, scale),
                chain_mean,
                scale,
                unit,
                cuts,
            });
        }
    }
    known
}

/// Means of the four series over half a chain. What is constant is its own mean to the last bit.
fn means(half: &Sums, draws: f64, count: f64, chain_mean: f64, scale: f64) -> [f64; 4] {
    let [w, _, product, _, rough, psi] = half.sums.map(|sum| sum / draws);
    let is_constant = |place: usize| half.low[place] == half.high[place];
    let (value, weight, raw) = (half.low[0], half.low[1], half.low[2]);
    let mut means = [
        count * product,
        count * rough,
        psi,
        scale * (product - chain_mean * w),
    ];
    if is_constant(1) && weight == 0.0 {
        (means[0], means[3]) = (0.0, 0.0);
    }
    if is_constant(0) {
        means[2] = value;
        if is_constant(1) && weight != 0.0 {
            means[0] = count * weight * value;
            means[3] = scale * weight * (value - chain_mean);
        }
        if is_constant(2) {
            means[1] = count * raw * value;
        }
    }
    means
}

/// From where on, and down to where, raw influence values are likely to lie in a tail; beyond all
/// where they are not collected.
fn cuts(all: Stretch<'_>) -> [f64; 2] {
    let draws = all.f.len();
    if draws < FEWEST_COLLECTED {
        return [f64::INFINITY, f64::NEG_INFINITY];
    }
    let step = draws / SAMPLE;
    let mut sample: Vec<f64> = (0..draws)
        .step_by(step)
        .map(|draw| all.raw_influence(draw))
        .collect();
    let last = sample.len() - 1;
    let upper = *sample
        .select_nth_unstable_by(last - SAMPLE_RANK, f64::total_cmp)
        .1;
    let lower = *sample.select_nth_unstable_by(SAMPLE_RANK, f64::total_cmp).1;
    [upper, lower]
}
