//! Weighted quantiles of one column under many sets of weights: sorted once.

use ndarray::ArrayView2;

use super::quantile::{interpolate, quantile};
use super::vector::{Arithmetic, Work, dispatch};

/// Sets of weights that are worked on together.
pub const LANES: usize = 8;

/// Draws between two running sums that are kept.
const BLOCK: usize = 32;

/// The weights of a draw, in a cache line of their own.
#[derive(Clone)]
#[repr(align(64))]
struct Row([f64; LANES]);

/// Up to [`LANES`] sets of weights, one row a draw, so that one load brings all of them.
pub struct Weights {
    rows: Vec<Row>,
    legal: [bool; LANES],
}

impl Weights {
    /// The columns of `w`, shape `(n, m)` with `m` at most [`LANES`]; missing ones are 0.
    pub fn new(w: ArrayView2<'_, f64>) -> Self {
        let none = Self::of(vec![Row([0.0; LANES]); w.nrows()]);
        Self::sets(w).into_iter().next().unwrap_or(none)
    }

    /// The columns of `w`, shape `(n, m)`, [`LANES`] by [`LANES`]: a row is read in one go.
    pub fn sets(w: ArrayView2<'_, f64>) -> Vec<Self> {
        let count = w.ncols().div_ceil(LANES);
        let mut sets = vec![vec![Row([0.0; LANES]); w.nrows()]; count];
        for (draw, row) in w.rows().into_iter().enumerate() {
            let mut done = 0;
            if let Some(row) = row.to_slice() {
                let whole = row.as_chunks::<LANES>().0;
                for (set, lanes) in sets.iter_mut().zip(whole) {
                    set[draw].0 = *lanes;
                }
                done = whole.len() * LANES;
            }
            for (column, weight) in row.iter().enumerate().skip(done) {
                sets[column / LANES][draw].0[column % LANES] = *weight;
            }
        }
        sets.into_iter().map(Self::of).collect()
    }

    fn of(rows: Vec<Row>) -> Self {
        let legal = dispatch(Legal(&rows));
        Self { rows, legal }
    }

    fn lane(&self, lane: usize) -> Vec<f64> {
        self.rows.iter().map(|row| row.0[lane]).collect()
    }
}

/// Whether all weights of a lane are finite and not negative.
struct Legal<'a>(&'a [Row]);

impl Work for Legal<'_> {
    type Output = [bool; LANES];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [bool; LANES] {
        let mut bad = [0_u64; LANES];
        for row in self.0 {
            for (bad, weight) in bad.iter_mut().zip(&row.0) {
                *bad |= u64::from(!(0.0..=f64::MAX).contains(weight));
            }
        }
        bad.map(|bad| bad == 0)
    }
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
    write: impl FnMut(usize, usize, f64),
) {
    let sums = dispatch(RunningSums {
        order: column.order,
        rows: &weights.rows,
    });
    column.quantiles(weights, &sums, probs, write);
}

/// Sums of the weights before each block of sorted draws, and the totals last.
struct RunningSums<'a> {
    order: &'a [u32],
    rows: &'a [Row],
}

impl Work for RunningSums<'_> {
    type Output = Vec<[f64; LANES]>;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Vec<[f64; LANES]> {
        let mut sums = Vec::with_capacity(self.order.len() / BLOCK + 2);
        let mut before = [0.0; LANES];
        sums.push(before);
        for block in self.order.chunks(BLOCK) {
            // Several sums, so that none waits for the one before.
            let [mut a, mut b, mut c, mut d] = [[0.0; LANES]; 4];
            let (groups, rest) = block.as_chunks::<4>();
            for [i, j, k, l] in groups {
                add(&mut a, &self.rows[*i as usize].0);
                add(&mut b, &self.rows[*j as usize].0);
                add(&mut c, &self.rows[*k as usize].0);
                add(&mut d, &self.rows[*l as usize].0);
            }
            for index in rest {
                add(&mut a, &self.rows[*index as usize].0);
            }
            add(&mut a, &b);
            add(&mut c, &d);
            add(&mut a, &c);
            add(&mut before, &a);
            sums.push(before);
        }
        sums
    }
}

#[inline(always)]
fn add(sum: &mut [f64; LANES], row: &[f64; LANES]) {
    for lane in 0..LANES {
        sum[lane] += row[lane];
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
    /// Lane after lane, equal values sharing a step.
    fn one_by_one(
        &self,
        weights: &Weights,
        probs: &[f64],
        mut write: impl FnMut(usize, usize, f64),
    ) {
        let mut out = vec![0.0; probs.len()];
        for lane in 0..LANES {
            let w = weights.lane(lane);
            let levels = probs.iter().copied();
            quantile(self.x, &w, Some(self.order), levels, &mut out);
            for (level, &value) in out.iter().enumerate() {
                write(lane, level, value);
            }
        }
    }

    fn quantiles(
        &self,
        weights: &Weights,
        sums: &[[f64; LANES]],
        probs: &[f64],
        mut write: impl FnMut(usize, usize, f64),
    ) {
        if !self.distinct {
            self.one_by_one(weights, probs, write);
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
    rows: &'a [Row],
    sums: &'a [[f64; LANES]],
    lane: usize,
}

impl Search<'_> {
    fn weight(&self, place: usize) -> f64 {
        self.rows[self.column.order[place] as usize].0[self.lane]
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
