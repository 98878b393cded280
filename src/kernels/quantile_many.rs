//! Weighted quantiles of one column under many sets of weights: sorted once.

use ndarray::{ArrayView1, ArrayView2};

use super::quantile::{interpolate, quantile};
use super::vector::{Arithmetic, Work, dispatch};

/// Sets of weights that are worked on together.
pub const LANES: usize = 8;

/// Draws between two running sums that are kept.
const BLOCK: usize = 64;

/// Up to [`LANES`] sets of weights, one row a draw, so that one load brings all of them.
pub struct Weights {
    rows: Vec<[f64; LANES]>,
    legal: [bool; LANES],
}

impl Weights {
    /// The columns of `w`, shape `(n, m)` with `m` at most [`LANES`]; missing ones are 0.
    pub fn new(w: ArrayView2<'_, f64>) -> Self {
        let rows: Vec<[f64; LANES]> = w.rows().into_iter().map(row_of).collect();
        let mut legal = [true; LANES];
        for row in &rows {
            for (legal, weight) in legal.iter_mut().zip(row) {
                *legal &= *weight >= 0.0 && weight.is_finite();
            }
        }
        Self { rows, legal }
    }

    fn lane(&self, lane: usize) -> Vec<f64> {
        self.rows.iter().map(|row| row[lane]).collect()
    }
}

fn row_of(row: ArrayView1<'_, f64>) -> [f64; LANES] {
    if let Some(whole) = row.to_slice().and_then(|row| row.first_chunk()) {
        return *whole;
    }
    let mut lanes = [0.0; LANES];
    for (lane, weight) in lanes.iter_mut().zip(row) {
        *lane = *weight;
    }
    lanes
}

/// A column with the order of its values.
pub struct Sorted<'a> {
    /// The values as they came.
    pub x: &'a [f64],
    /// Their indices in ascending order of value.
    pub order: &'a [u32],
    /// Whether no two values are equal and none is NaN: else equal values must share a step.
    pub distinct: bool,
}

impl<'a> Sorted<'a> {
    /// `order` must hold every index of `x` once.
    pub fn new(x: &'a [f64], order: &'a [u32]) -> Self {
        let value = |place: usize| x[order[place] as usize];
        let distinct = (1..order.len()).all(|place| value(place - 1) < value(place))
            && !x.iter().any(|x| x.is_nan());
        Self { x, order, distinct }
    }
}

/// Quantiles of `column` at `probs` under the weights of each lane, as
/// [`super::quantile::quantile`] defines them: `write(lane, prob_index, quantile)`.
pub fn quantiles(
    column: &Sorted<'_>,
    weights: &Weights,
    probs: &[f64],
    mut write: impl FnMut(usize, usize, f64),
) {
    if !column.distinct {
        let mut out = vec![0.0; probs.len()];
        for lane in 0..LANES {
            let w = weights.lane(lane);
            let levels = probs.iter().copied();
            quantile(column.x, &w, Some(column.order), levels, &mut out);
            for (level, &value) in out.iter().enumerate() {
                write(lane, level, value);
            }
        }
        return;
    }
    let sums = dispatch(RunningSums {
        order: column.order,
        rows: &weights.rows,
    });
    for lane in 0..LANES {
        let search = Search {
            column,
            rows: &weights.rows,
            sums: &sums,
            lane,
        };
        let total = sums.last().map_or(0.0, |sums| sums[lane]);
        let usable = weights.legal[lane] && total > 0.0 && total.is_finite();
        for (level, &prob) in probs.iter().enumerate() {
            let value = if usable && !prob.is_nan() {
                search.at(prob * total)
            } else {
                f64::NAN
            };
            write(lane, level, value);
        }
    }
}

/// Sums of the weights before each block of sorted draws, and the totals last.
struct RunningSums<'a> {
    order: &'a [u32],
    rows: &'a [[f64; LANES]],
}

impl Work for RunningSums<'_> {
    type Output = Vec<[f64; LANES]>;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Vec<[f64; LANES]> {
        let mut sums = Vec::with_capacity(self.order.len() / BLOCK + 2);
        let mut before = [0.0; LANES];
        sums.push(before);
        for block in self.order.chunks(BLOCK) {
            let mut within = [0.0; LANES];
            for &index in block {
                let row = &self.rows[index as usize];
                for lane in 0..LANES {
                    within[lane] += row[lane];
                }
            }
            for lane in 0..LANES {
                before[lane] += within[lane];
            }
            sums.push(before);
        }
        sums
    }
}

struct Search<'a> {
    column: &'a Sorted<'a>,
    rows: &'a [[f64; LANES]],
    sums: &'a [[f64; LANES]],
    lane: usize,
}

impl Search<'_> {
    fn weight(&self, place: usize) -> f64 {
        self.rows[self.column.order[place] as usize][self.lane]
    }

    fn value(&self, place: usize) -> f64 {
        self.column.x[self.column.order[place] as usize]
    }

    /// The value at which the interpolated running sum of weights is `target`.
    fn at(&self, target: f64) -> f64 {
        let draws = self.column.order.len();
        let ends = &self.sums[1..];
        let mut block = ends.partition_point(|sums| sums[self.lane] < target);
        // The midpoint sought lies in this block, or is the first of the next one with weight.
        while block < ends.len() {
            let mut within = 0.0;
            for place in block * BLOCK..draws.min((block + 1) * BLOCK) {
                let weight = self.weight(place);
                let below = self.sums[block][self.lane] + within;
                if weight > 0.0 && below + 0.5 * weight >= target {
                    return self.between(place, below, target);
                }
                within += weight;
            }
            block += 1;
        }
        self.before(draws).map_or(f64::NAN, |last| self.value(last))
    }

    /// The last draw with weight before `place`.
    fn before(&self, place: usize) -> Option<usize> {
        (0..place).rev().find(|&place| self.weight(place) > 0.0)
    }

    /// Between the draw at `place`, which has `below` before it, and the one before.
    fn between(&self, place: usize, below: f64, target: f64) -> f64 {
        let Some(before) = self.before(place) else {
            return self.value(place);
        };
        let low = below - 0.5 * self.weight(before);
        let high = below + 0.5 * self.weight(place);
        // Rounding may have put the target a little below the midpoint before.
        let share = ((target - low) / (high - low)).max(0.0);
        interpolate(self.value(before), self.value(place), share)
    }
}
