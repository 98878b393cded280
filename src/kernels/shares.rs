//! Shares of several densities in their mixture, by tiles of draws.

use ndarray::{ArrayView2, ArrayViewMut2, Axis};

use super::lease::Lease;
use super::vector::exp::exp;
use super::vector::ln::{is_ordinary, ln};
use super::vector::transpose::{LINE, columns_to_rows, rows_to_columns};
use super::vector::{Arithmetic, Work, dispatch, tree};

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
    /// `Σ c P_j P_k` for `k ≤ j`, row after row, without the first density: it is held.
    pub products: Vec<f64>,
}

/// Draws with those that fill the last tile.
pub fn padded(draws: usize) -> usize {
    draws.next_multiple_of(TILE)
}

/// Some draws, each with a unit of its own in which its largest density is 1; the densities in
/// these units are kept elsewhere, tile after tile, column after column.
pub struct Tiles {
    /// Log of each draw's unit.
    units: Vec<f64>,
    counts: Vec<f64>,
}

impl Tiles {
    /// `Q_k = exp(log q_k + shift_k − unit)`, written into `scaled`; draws on which all vanish count
    /// nothing.
    pub fn new(
        log_densities: ArrayView2<'_, f64>,
        counts: &[f64],
        shift: &[f64],
        scaled: &mut [f64],
    ) -> Self {
        let whole = padded(log_densities.nrows());
        let mut tiles = Self {
            units: vec![0.0; whole],
            counts: counts.to_vec(),
        };
        tiles.counts.resize(whole, 0.0);
        let parts = log_densities.axis_chunks_iter(Axis(0), TILE);
        let scaled = scaled.chunks_mut(TILE * shift.len());
        for (tile, (part, scaled)) in parts.zip(scaled).enumerate() {
            let first = tile * TILE;
            dispatch(Scale {
                part,
                shift,
                scaled,
                units: &mut tiles.units[first..][..TILE],
                counts: &mut tiles.counts[first..][..TILE],
            });
        }
        tiles
    }

    /// The sums over the draws of these tiles; the first ones alone unless `all` are asked for.
    pub fn sums(&self, scaled: &[f64], constants: &Constants, all: bool) -> Sums {
        let densities = constants.factors.len();
        let mut lanes = Lanes::new(densities);
        let mut shares = Lease::new(TILE * densities);
        let tiles = self
            .counts
            .chunks(TILE)
            .zip(scaled.chunks(TILE * densities));
        for (counts, scaled) in tiles {
            let factors = &constants.factors;
            if all {
                dispatch(Add {
                    scaled,
                    factors,
                    counts,
                    shares: &mut shares,
                    lanes: &mut lanes,
                });
            } else {
                dispatch(AddFirsts {
                    scaled,
                    factors,
                    counts,
                    firsts: &mut lanes.firsts,
                });
            }
        }
        let mut sums = lanes.sums();
        if !all {
            for (first, factor) in sums.firsts.iter_mut().zip(&constants.factors) {
                *first *= factor;
            }
        }
        sums
    }

    /// Writes the shares, and the logs of the mixture.
    pub fn deliver(
        &self,
        scaled: &[f64],
        constants: &Constants,
        mut shares: ArrayViewMut2<'_, f64>,
        logs: &mut [f64],
    ) {
        let whole = TILE * constants.factors.len();
        let mut columns = Lease::new(whole);
        let parts = shares.axis_chunks_iter_mut(Axis(0), TILE);
        let parts = parts.zip(logs.chunks_mut(TILE)).zip(scaled.chunks(whole));
        for (((into, logs), scaled), units) in parts.zip(self.units.chunks(TILE)) {
            dispatch(Deliver {
                scaled,
                factors: &constants.factors,
                units,
                columns: &mut columns,
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
    columns: &'a mut [f64],
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
        let from = self.scaled.chunks_exact(TILE).zip(self.factors);
        for (column, (entries, factor)) in self.columns.chunks_exact_mut(TILE).zip(from) {
            for row in 0..TILE {
                column[row] = factor * entries[row] * total[row];
            }
        }
        match self.shares.as_slice_mut() {
            Some(rows) => turn_back(self.columns, rows, self.factors.len()),
            None => {
                let columns = self.columns.chunks_exact(TILE);
                for (mut into, column) in self.shares.columns_mut().into_iter().zip(columns) {
                    for (place, entry) in into.iter_mut().zip(column) {
                        *place = *entry;
                    }
                }
            }
        }
    }
}

/// Writes the columns of a tile as rows of `densities` entries.
#[inline(always)]
fn turn_back(columns: &[f64], rows: &mut [f64], densities: usize) {
    for (eight, rows) in rows.chunks_mut(LINE * densities).enumerate() {
        let first = eight * LINE;
        let mut done = 0;
        if rows.len() == LINE * densities {
            let mut lines: [&mut [f64]; LINE] = Default::default();
            for (line, row) in lines.iter_mut().zip(rows.chunks_exact_mut(densities)) {
                *line = row;
            }
            done = columns_to_rows(&columns[first..], TILE, lines);
        }
        for (row, line) in rows.chunks_exact_mut(densities).enumerate() {
            for (k, entry) in line.iter_mut().enumerate().skip(done) {
                *entry = columns[k * TILE + first + row];
            }
        }
    }
}

/// Writes rows of `densities` entries as the columns of a tile.
#[inline(always)]
fn turn(rows: &[f64], columns: &mut [f64], densities: usize) {
    for (eight, rows) in rows.chunks(LINE * densities).enumerate() {
        let first = eight * LINE;
        let mut done = 0;
        if rows.len() == LINE * densities {
            let mut lines: [&[f64]; LINE] = Default::default();
            for (line, row) in lines.iter_mut().zip(rows.chunks_exact(densities)) {
                *line = row;
            }
            done = rows_to_columns(lines, &mut columns[first..], TILE);
        }
        for (row, line) in rows.chunks_exact(densities).enumerate() {
            for (k, entry) in line.iter().enumerate().skip(done) {
                columns[k * TILE + first + row] = *entry;
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
        match self.part.as_slice() {
            Some(entries) => turn(entries, self.scaled, self.shift.len()),
            None => {
                let columns = self.scaled.chunks_exact_mut(TILE);
                for (entries, column) in self.part.columns().into_iter().zip(columns) {
                    for (into, entry) in column.iter_mut().zip(entries) {
                        *into = *entry;
                    }
                }
            }
        }
        for (column, shift) in self.scaled.chunks_exact_mut(TILE).zip(self.shift) {
            column[rows..].fill(f64::NEG_INFINITY);
            for (entry, top) in column.iter_mut().zip(&mut tops) {
                *entry += shift;
                *top = if *entry > *top { *entry } else { *top };
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

/// [`Sums`] of which every lane has its part: to add them up costs as much as to form them.
struct Lanes {
    logs: [f64; LANES],
    firsts: Vec<[f64; LANES]>,
    products: Vec<[f64; LANES]>,
}

impl Lanes {
    fn new(densities: usize) -> Self {
        Self {
            logs: [0.0; LANES],
            firsts: vec![[0.0; LANES]; densities],
            products: vec![[0.0; LANES]; densities * (densities - 1) / 2],
        }
    }

    fn sums(self) -> Sums {
        Sums {
            logs: tree(self.logs),
            firsts: self.firsts.into_iter().map(tree).collect(),
            products: self.products.into_iter().map(tree).collect(),
        }
    }
}

struct Add<'a> {
    scaled: &'a [f64],
    factors: &'a [f64],
    counts: &'a [f64],
    shares: &'a mut [f64],
    lanes: &'a mut Lanes,
}

impl Work for Add<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let mut total = totals::<A>(self.scaled, self.factors);
        add(&mut self.lanes.logs, &logs::<A>(&total, self.counts));
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
            add(&mut self.lanes.firsts[j], &weighted);
            let others = &self.shares[TILE.min(j * TILE)..][..j * TILE];
            products::<A>(&weighted, others, &mut self.lanes.products[place..]);
            place += j;
        }
    }
}

struct AddFirsts<'a> {
    scaled: &'a [f64],
    factors: &'a [f64],
    counts: &'a [f64],
    firsts: &'a mut [[f64; LANES]],
}

impl Work for AddFirsts<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let mut weights = totals::<A>(self.scaled, self.factors);
        for (weight, count) in weights.iter_mut().zip(self.counts) {
            *weight = count / *weight;
        }
        products::<A>(&weights, self.scaled, self.firsts);
    }
}

/// `c log total`; 0 for draws that count nothing.
#[inline(always)]
fn logs<A: Arithmetic>(total: &[f64; TILE], counts: &[f64]) -> [f64; TILE] {
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
    terms
}

#[inline(always)]
fn add(lanes: &mut [f64; LANES], values: &[f64; TILE]) {
    let mut sums = [0.0; LANES];
    for chunk in values.as_chunks::<LANES>().0 {
        for lane in 0..LANES {
            sums[lane] += chunk[lane];
        }
    }
    for lane in 0..LANES {
        lanes[lane] += sums[lane];
    }
}

/// Adds `Σ w P_k` to the entry of each column.
#[inline(always)]
fn products<A: Arithmetic>(weighted: &[f64; TILE], columns: &[f64], into: &mut [[f64; LANES]]) {
    let parts = columns.chunks(TOGETHER * TILE);
    for (into, columns) in into.chunks_mut(TOGETHER).zip(parts) {
        match columns.len() / TILE {
            1 => dots::<A, 1>(weighted, columns, into),
            2 => dots::<A, 2>(weighted, columns, into),
            3 => dots::<A, 3>(weighted, columns, into),
            _ => dots::<A, TOGETHER>(weighted, columns, into),
        }
    }
}

#[inline(always)]
fn dots<A: Arithmetic, const N: usize>(
    weighted: &[f64; TILE],
    columns: &[f64],
    into: &mut [[f64; LANES]],
) {
    let mut sums = [[0.0; LANES]; N];
    for (place, chunk) in weighted.as_chunks::<LANES>().0.iter().enumerate() {
        for (column, sums) in sums.iter_mut().enumerate() {
            let other = &columns[column * TILE + place * LANES..][..LANES];
            for lane in 0..LANES {
                sums[lane] = A::mul_add(chunk[lane], other[lane], sums[lane]);
            }
        }
    }
    for (into, sums) in into.iter_mut().zip(sums) {
        for lane in 0..LANES {
            into[lane] += sums[lane];
        }
    }
}
