//! Shares of several densities in their mixture, by tiles of draws.

use ndarray::{ArrayView2, ArrayViewMut2, Axis};

use super::lease::Lease;
use super::vector::exp::exp;
use super::vector::ln::{is_ordinary, ln};
use super::vector::{Arithmetic, Work, dispatch};

/// Draws of a tile; one a lane.
const TILE: usize = 256;

const LANES: usize = 16;

/// Products formed with one reading of a column.
const TOGETHER: usize = 4;

/// `exp(d_k)` for constants that moved by `d_k`.
pub struct Constants {
    factors: Vec<f64>,
}

impl Constants {
    /// From how far each constant moved since the densities were scaled.
    pub fn new(moved: &[f64]) -> Self {
        Self {
            factors: moved.iter().map(|&d| libm::exp(d)).collect(),
        }
    }
}

/// Sums over draws, with the shares `P_k` and what each draw counts, `c`.
pub struct Sums {
    /// `Σ c log Σ_k exp(d_k) Q_k`.
    pub logs: f64,
    /// `Σ c P_k`.
    pub firsts: Vec<f64>,
    /// `Σ c P_j P_k` for `k ≤ j`, row after row.
    pub products: Vec<f64>,
}

/// Densities of some draws, each draw in a unit of its own in which the largest is 1.
pub struct Tiles {
    densities: usize,
    /// Tile after tile, column after column.
    scaled: Vec<f64>,
    /// Log of each draw's unit.
    units: Vec<f64>,
    counts: Vec<f64>,
}

impl Tiles {
    /// `Q_k = exp(log q_k + shift_k − unit)`; draws on which all vanish count nothing.
    pub fn new(log_densities: ArrayView2<'_, f64>, counts: &[f64], shift: &[f64]) -> Self {
        let (rows, densities) = log_densities.dim();
        let whole = rows.next_multiple_of(TILE);
        let mut tiles = Self {
            densities,
            scaled: vec![0.0; whole * densities],
            units: vec![0.0; whole],
            counts: counts.to_vec(),
        };
        tiles.counts.resize(whole, 0.0);
        let parts = log_densities.axis_chunks_iter(Axis(0), TILE);
        for (tile, part) in parts.enumerate() {
            let first = tile * TILE;
            dispatch(Scale {
                part,
                shift,
                scaled: &mut tiles.scaled[first * densities..][..TILE * densities],
                units: &mut tiles.units[first..][..TILE],
                counts: &mut tiles.counts[first..][..TILE],
            });
        }
        tiles
    }

    /// The sums over the draws of these tiles.
    pub fn sums(&self, constants: &Constants) -> Sums {
        let densities = self.densities;
        let mut sums = Sums {
            logs: 0.0,
            firsts: vec![0.0; densities],
            products: vec![0.0; densities * (densities + 1) / 2],
        };
        let mut shares = Lease::new(TILE * densities);
        for (tile, counts) in self.counts.chunks(TILE).enumerate() {
            dispatch(Add {
                scaled: &self.scaled[tile * TILE * densities..][..TILE * densities],
                factors: &constants.factors,
                counts,
                shares: &mut shares,
                sums: &mut sums,
            });
        }
        sums
    }

    /// Writes the shares, and the logs of the mixture.
    pub fn deliver(
        &self,
        constants: &Constants,
        mut shares: ArrayViewMut2<'_, f64>,
        logs: &mut [f64],
    ) {
        let parts = shares.axis_chunks_iter_mut(Axis(0), TILE);
        for (tile, (into, logs)) in parts.zip(logs.chunks_mut(TILE)).enumerate() {
            dispatch(Deliver {
                scaled: &self.scaled[tile * TILE * self.densities..][..TILE * self.densities],
                factors: &constants.factors,
                units: &self.units[tile * TILE..][..TILE],
                shares: into,
                logs,
            });
        }
    }
}

struct Deliver<'a> {
    scaled: &'a [f64],
    factors: &'a [f64],
    units: &'a [f64],
    shares: ArrayViewMut2<'a, f64>,
    logs: &'a mut [f64],
}

impl Work for Deliver<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(mut self) {
        let mut total = totals::<A>(self.scaled, self.factors);
        for ((log, unit), total) in self.logs.iter_mut().zip(self.units).zip(&mut total) {
            let known = *unit > f64::NEG_INFINITY;
            *log = unit
                + if is_ordinary(*total) {
                    ln::<A>(*total)
                } else {
                    libm::log(*total)
                };
            *total = if known { 1.0 / *total } else { 0.0 };
        }
        let densities = self.factors.len();
        let columns = self.scaled.chunks_exact(TILE).zip(self.factors);
        match self.shares.as_slice_mut() {
            Some(rows) => {
                for (k, (column, factor)) in columns.enumerate() {
                    let places = rows[k..].iter_mut().step_by(densities);
                    for ((place, entry), total) in places.zip(column).zip(&total) {
                        *place = factor * entry * total;
                    }
                }
            }
            None => {
                for (mut into, (column, factor)) in
                    self.shares.columns_mut().into_iter().zip(columns)
                {
                    for ((place, entry), total) in into.iter_mut().zip(column).zip(&total) {
                        *place = factor * entry * total;
                    }
                }
            }
        }
    }
}

/// `Σ_k exp(d_k) Q_k` of every draw of a tile.
#[inline(always)]
fn totals<A: Arithmetic>(scaled: &[f64], factors: &[f64]) -> [f64; TILE] {
    let mut total = [0.0; TILE];
    for (column, &factor) in scaled.chunks_exact(TILE).zip(factors) {
        for row in 0..TILE {
            total[row] = A::mul_add(factor, column[row], total[row]);
        }
    }
    total
}

struct Scale<'a> {
    part: ArrayView2<'a, f64>,
    shift: &'a [f64],
    scaled: &'a mut [f64],
    units: &'a mut [f64],
    counts: &'a mut [f64],
}

impl Work for Scale<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let rows = self.part.nrows();
        let mut tops = [f64::NEG_INFINITY; TILE];
        let densities = self.shift.len();
        match self.part.as_slice() {
            Some(entries) => {
                for (row, (entries, top)) in
                    entries.chunks_exact(densities).zip(&mut tops).enumerate()
                {
                    for (k, (entry, shift)) in entries.iter().zip(self.shift).enumerate() {
                        let value = entry + shift;
                        self.scaled[k * TILE + row] = value;
                        *top = if value > *top { value } else { *top };
                    }
                }
            }
            None => {
                let columns = self.scaled.chunks_exact_mut(TILE).zip(self.shift);
                for (entries, (column, shift)) in self.part.columns().into_iter().zip(columns) {
                    for ((into, entry), top) in column.iter_mut().zip(entries).zip(&mut tops) {
                        let value = entry + shift;
                        *into = value;
                        *top = if value > *top { value } else { *top };
                    }
                }
            }
        }
        self.units.copy_from_slice(&tops);
        for (top, count) in tops.iter_mut().zip(&mut *self.counts) {
            if *top == f64::NEG_INFINITY {
                // Padding, or a draw that no density knows: any share, and no weight.
                *count = 0.0;
                *top = 0.0;
            }
        }
        for column in self.scaled.chunks_exact_mut(TILE) {
            for row in 0..TILE {
                column[row] = exp::<A>(column[row] - tops[row]);
            }
        }
        for row in 0..TILE {
            if row >= rows || self.units[row] == f64::NEG_INFINITY {
                self.scaled[row] = 1.0;
            }
        }
    }
}

struct Add<'a> {
    scaled: &'a [f64],
    factors: &'a [f64],
    counts: &'a [f64],
    shares: &'a mut [f64],
    sums: &'a mut Sums,
}

impl Work for Add<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let mut total = totals::<A>(self.scaled, self.factors);
        self.sums.logs += logs::<A>(&total, self.counts);
        for total in &mut total {
            *total = 1.0 / *total;
        }
        let columns = self.scaled.chunks_exact(TILE).zip(self.factors);
        for (into, (column, &factor)) in self.shares.chunks_exact_mut(TILE).zip(columns) {
            for row in 0..TILE {
                into[row] = factor * column[row] * total[row];
            }
        }
        let mut place = 0;
        for (j, own) in self.shares.chunks_exact(TILE).enumerate() {
            let mut weighted = [0.0; TILE];
            for row in 0..TILE {
                weighted[row] = self.counts[row] * own[row];
            }
            self.sums.firsts[j] += lanes_sum(&weighted);
            let others = &self.shares[..(j + 1) * TILE];
            for four in others.chunks(TOGETHER * TILE) {
                products::<A>(&weighted, four, &mut self.sums.products[place..]);
                place += four.len() / TILE;
            }
        }
    }
}

/// `Σ c log total`; draws that count nothing add nothing.
#[inline(always)]
fn logs<A: Arithmetic>(total: &[f64; TILE], counts: &[f64]) -> f64 {
    let mut terms = [0.0; TILE];
    let mut all = true;
    for row in 0..TILE {
        all &= is_ordinary(total[row]);
        terms[row] = counts[row] * ln::<A>(total[row]);
    }
    if !all {
        for row in 0..TILE {
            let nothing = counts[row] == 0.0;
            terms[row] = if nothing {
                0.0
            } else {
                counts[row] * libm::log(total[row])
            };
        }
    }
    lanes_sum(&terms)
}

#[inline(always)]
fn lanes_sum(values: &[f64; TILE]) -> f64 {
    let mut sums = [0.0; LANES];
    for chunk in values.as_chunks::<LANES>().0 {
        for lane in 0..LANES {
            sums[lane] += chunk[lane];
        }
    }
    tree(sums)
}

/// Adds `Σ w P_k` for up to four columns to the first entries of `into`.
#[inline(always)]
fn products<A: Arithmetic>(weighted: &[f64; TILE], columns: &[f64], into: &mut [f64]) {
    if columns.len() == TOGETHER * TILE {
        let found = dots::<A, TOGETHER>(weighted, columns);
        for (into, found) in into.iter_mut().zip(found) {
            *into += found;
        }
        return;
    }
    for (into, column) in into.iter_mut().zip(columns.chunks_exact(TILE)) {
        *into += dots::<A, 1>(weighted, column)[0];
    }
}

#[inline(always)]
fn dots<A: Arithmetic, const N: usize>(weighted: &[f64; TILE], columns: &[f64]) -> [f64; N] {
    let mut sums = [[0.0; LANES]; N];
    for (place, chunk) in weighted.as_chunks::<LANES>().0.iter().enumerate() {
        for (column, sums) in sums.iter_mut().enumerate() {
            let other = &columns[column * TILE + place * LANES..][..LANES];
            for lane in 0..LANES {
                sums[lane] = A::mul_add(chunk[lane], other[lane], sums[lane]);
            }
        }
    }
    sums.map(tree)
}

#[inline(always)]
fn tree(mut lanes: [f64; LANES]) -> f64 {
    for half in [8, 4, 2, 1] {
        for lane in 0..half {
            lanes[lane] += lanes[lane + half];
        }
    }
    lanes[0]
}
