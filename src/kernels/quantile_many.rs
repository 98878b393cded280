//! Weighted quantiles of one column under many sets of weights: sorted once.

use ndarray::{ArrayView1, ArrayView2};

use super::quantile::{interpolate, quantile};
use super::vector::{Arithmetic, Work, dispatch};

/// Columns whose running sums are formed together: one load of the weights serves all.
const TOGETHER: usize = 4;

/// Sets of weights that are worked on together.
pub const LANES: usize = 8;

/// Draws between two running sums that are kept.
const BLOCK: usize = 32;

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
    /// The block of the sorted draws that each draw lies in.
    blocks: Vec<u32>,
}

impl<'a> Sorted<'a> {
    /// `order` must hold every index of `x` once.
    pub fn new(x: &'a [f64], order: &'a [u32]) -> Self {
        let value = |place: usize| x[order[place] as usize];
        let distinct = (1..order.len()).all(|place| value(place - 1) < value(place))
            && !x.iter().any(|x| x.is_nan());
        let mut blocks = vec![0; order.len()];
        for (block, indices) in order.chunks(BLOCK).enumerate() {
            for &index in indices {
                blocks[index as usize] = block as u32;
            }
        }
        Self {
            x,
            order,
            distinct,
            blocks,
        }
    }
}

/// Quantiles of `columns` at `probs` under the weights of each lane, as
/// [`super::quantile::quantile`] defines them: `write(column, lane, prob_index, quantile)`. All
/// columns have as many draws as the weights.
pub fn column_quantiles(
    columns: &[Sorted<'_>],
    weights: &Weights,
    probs: &[f64],
    mut write: impl FnMut(usize, usize, usize, f64),
) {
    let (groups, rest) = columns.as_chunks::<TOGETHER>();
    for (group, columns) in groups.iter().enumerate() {
        let sums = running_sums(columns.each_ref(), weights);
        for (place, (column, sums)) in columns.iter().zip(&sums).enumerate() {
            let at = group * TOGETHER + place;
            column.quantiles(weights, sums, probs, |lane, level, value| {
                write(at, lane, level, value);
            });
        }
    }
    for (place, column) in rest.iter().enumerate() {
        let at = groups.len() * TOGETHER + place;
        quantiles(column, weights, probs, |lane, level, value| {
            write(at, lane, level, value);
        });
    }
}

/// As [`column_quantiles`], of one column: `write(lane, prob_index, quantile)`.
pub fn quantiles(
    column: &Sorted<'_>,
    weights: &Weights,
    probs: &[f64],
    write: impl FnMut(usize, usize, f64),
) {
    let [sums] = running_sums([column], weights);
    column.quantiles(weights, &sums, probs, write);
}

/// The sums of each lane before each block of sorted draws, and the totals last.
type Running = Vec<[f64; LANES]>;

fn running_sums<const N: usize>(columns: [&Sorted<'_>; N], weights: &Weights) -> [Running; N] {
    let count = |column: &Sorted<'_>| column.order.len().div_ceil(BLOCK);
    let mut sums = columns.map(|column| vec![[0.0; LANES]; count(column) + 1]);
    dispatch(BlockSums {
        rows: &weights.rows,
        blocks: columns.map(|column| &column.blocks[..]),
        sums: &mut sums,
    });
    for sums in &mut sums {
        let mut before = [0.0; LANES];
        for sum in sums.iter_mut() {
            for (before, sum) in before.iter_mut().zip(sum) {
                let next = *before + *sum;
                *sum = *before;
                *before = next;
            }
        }
    }
    sums
}

/// Adds the weights of every draw to the block that it lies in, column by column.
struct BlockSums<'a, const N: usize> {
    rows: &'a [[f64; LANES]],
    blocks: [&'a [u32]; N],
    sums: &'a mut [Running; N],
}

impl<const N: usize> Work for BlockSums<'_, N> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let draws = self.blocks.map(<[u32]>::len).into_iter().min();
        let rows = &self.rows[..draws.unwrap_or(0).min(self.rows.len())];
        let blocks = self.blocks.map(|blocks| &blocks[..rows.len()]);
        for (draw, row) in rows.iter().enumerate() {
            for (blocks, sums) in blocks.iter().zip(self.sums.iter_mut()) {
                let sum = &mut sums[blocks[draw] as usize];
                for lane in 0..LANES {
                    sum[lane] += row[lane];
                }
            }
        }
    }
}

/// How many of `ends` lie below the target, lane by lane.
struct Below<'a> {
    ends: &'a [[f64; LANES]],
    targets: [f64; LANES],
}

impl Work for Below<'_> {
    type Output = [f64; LANES];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [f64; LANES] {
        let mut counts = [0.0; LANES];
        for ends in self.ends {
            for lane in 0..LANES {
                let below = ends[lane] < self.targets[lane];
                counts[lane] += if below { 1.0 } else { 0.0 };
            }
        }
        counts
    }
}

impl Sorted<'_> {
    fn quantiles(
        &self,
        weights: &Weights,
        sums: &[[f64; LANES]],
        probs: &[f64],
        mut write: impl FnMut(usize, usize, f64),
    ) {
        if !self.distinct {
            let mut out = vec![0.0; probs.len()];
            for lane in 0..LANES {
                let w = weights.lane(lane);
                let levels = probs.iter().copied();
                quantile(self.x, &w, Some(self.order), levels, &mut out);
                for (level, &value) in out.iter().enumerate() {
                    write(lane, level, value);
                }
            }
            return;
        }
        let totals = sums.last().copied().unwrap_or([0.0; LANES]);
        for (level, &prob) in probs.iter().enumerate() {
            let targets = totals.map(|total| prob * total);
            let blocks = dispatch(Below {
                ends: sums.get(1..).unwrap_or_default(),
                targets,
            });
            for lane in 0..LANES {
                let search = Search {
                    column: self,
                    rows: &weights.rows,
                    sums,
                    lane,
                };
                let total = totals[lane];
                let usable = weights.legal[lane] && total > 0.0 && total.is_finite();
                let value = if usable && !prob.is_nan() {
                    search.at(targets[lane], blocks[lane] as usize)
                } else {
                    f64::NAN
                };
                write(lane, level, value);
            }
        }
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

    /// The value at which the interpolated running sum of weights is `target`, `block` being the
    /// first one at whose end the sum reaches it.
    fn at(&self, target: f64, mut block: usize) -> f64 {
        let draws = self.column.order.len();
        // The midpoint sought lies in this block, or is the first of the next one with weight.
        while block + 1 < self.sums.len() {
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
