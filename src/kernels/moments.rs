//! Weighted means, variances and covariances of the columns of an array, by blocks of rows: long
//! columns are never copied as a whole. The bits are those of [`super::mean`] on each column.

use ndarray::{Array2, ArrayView2, Axis};

use super::blocks::{LINE, distance, gather_strip};
use super::columns::expect_shape;
use super::error::KernelError;
use super::lease::Lease;
use super::mean::{BLOCK, LANES, Power, block_sum};
use super::ordered::{Interrupt, map_tasks, sum_by};
use super::vector::dot::dot;
use super::vector::{Arithmetic, Work, dispatch};

/// Most columns gathered together.
const COLUMNS: usize = 64;

/// `Σ_s w_s f_s` of every column of `f`, shape `(n, k)`; as [`super::mean::weighted_mean`].
///
/// # Errors
/// [`KernelError::Shape`] when `w` has another length; [`KernelError::Interrupted`].
pub fn weighted_means(
    f: ArrayView2<'_, f64>,
    w: &[f64],
    interrupt: &Interrupt<'_>,
) -> Result<Vec<f64>, KernelError> {
    expect_shape("w", &[f.nrows()], &[w.len()])?;
    let centres = vec![0.0; f.ncols()];
    sums(f, w, &centres, Power::First, interrupt)
}

/// Weighted means and mean squares about them of every column of `f`; as
/// [`super::mean::weighted_moments`].
///
/// # Errors
/// As [`weighted_means`].
pub fn weighted_moments(
    f: ArrayView2<'_, f64>,
    w: &[f64],
    interrupt: &Interrupt<'_>,
) -> Result<(Vec<f64>, Vec<f64>), KernelError> {
    let means = weighted_means(f, w, interrupt)?;
    let squares = sums(f, w, &means, Power::Second, interrupt)?;
    Ok((means, squares))
}

/// `Σ_s w_s (f_si − μ_i)(f_sj − μ_j)` of the columns of `f`, shape `(n, k)`: shape `(k, k)`.
///
/// `w`, shape `(n,)`, on the natural scale, should sum to 1; draws of weight 0 are left out.
///
/// # Errors
/// As [`weighted_means`].
pub fn covariance(
    f: ArrayView2<'_, f64>,
    w: &[f64],
    interrupt: &Interrupt<'_>,
) -> Result<Array2<f64>, KernelError> {
    let means = weighted_means(f, w, interrupt)?;
    let columns = f.ncols();
    let tasks: Vec<_> = f
        .axis_chunks_iter(Axis(0), BLOCK)
        .zip(w.chunks(BLOCK))
        .collect();
    let parts = map_tasks(tasks, interrupt, |(rows, w)| {
        let mut centred = Block::new(rows);
        let mut weighted = Lease::new(w.len());
        let mut products = Vec::with_capacity(columns * (columns + 1) / 2);
        for (column, centre) in means.iter().enumerate() {
            for (entry, weight) in centred.column_mut(column).iter_mut().zip(w) {
                // A draw of weight 0 becomes 0, whatever its value.
                *entry = if *weight == 0.0 { 0.0 } else { *entry - centre };
            }
        }
        for i in 0..columns {
            interrupt.check()?;
            for ((weighted, entry), weight) in weighted.iter_mut().zip(centred.column(i)).zip(w) {
                *weighted = entry * weight;
            }
            products.extend((0..=i).map(|j| dot(&weighted, centred.column(j))));
        }
        Ok(products)
    })?;
    Ok(Array2::from_shape_fn((columns, columns), |(i, j)| {
        let place = i.max(j) * (i.max(j) + 1) / 2 + i.min(j);
        sum_by(parts.len(), |part| parts[part][place])
    }))
}

/// `Σ w (f − centre)^power` of every column.
fn sums(
    f: ArrayView2<'_, f64>,
    w: &[f64],
    centres: &[f64],
    power: Power,
    interrupt: &Interrupt<'_>,
) -> Result<Vec<f64>, KernelError> {
    let parts = f
        .axis_chunks_iter(Axis(1), COLUMNS)
        .zip(centres.chunks(COLUMNS));
    let mut tasks = Vec::new();
    for (part, centres) in parts {
        let mut below = part;
        for w in w.chunks(BLOCK) {
            let (rows, rest) = below.split_at(Axis(0), w.len());
            tasks.push((rows, w, centres));
            below = rest;
        }
    }
    let found = map_tasks(tasks, interrupt, |(rows, w, centres)| {
        if let Some(entries) = rows.to_slice().filter(|_| rows.ncols() > 1) {
            return Ok(dispatch(RowSums {
                entries,
                w,
                centres,
                power,
            }));
        }
        let block = Block::new(rows);
        let sum = |(column, centre): (usize, &f64)| {
            block_sum(block.column(column), Some(w), *centre, power)
        };
        Ok(centres.iter().enumerate().map(sum).collect::<Vec<f64>>())
    })?;
    let blocks = w.len().div_ceil(BLOCK);
    if blocks == 0 {
        return Ok(vec![0.0; f.ncols()]);
    }
    let column_sum = |column: usize| {
        let of_part = &found[column / COLUMNS * blocks..][..blocks];
        sum_by(blocks, |block| of_part[block][column % COLUMNS])
    };
    Ok((0..f.ncols()).map(column_sum).collect())
}

/// [`block_sum`] of every column of contiguous rows, without turning them: the draws that a column
/// adds to one lane are added to one row of sums.
struct RowSums<'a> {
    entries: &'a [f64],
    w: &'a [f64],
    centres: &'a [f64],
    power: Power,
}

impl Work for RowSums<'_> {
    type Output = Vec<f64>;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Vec<f64> {
        let columns = self.centres.len();
        let mut sums = [[0.0; COLUMNS]; LANES];
        let rows = self.entries.chunks_exact(columns).zip(self.w);
        for (draw, (row, &weight)) in rows.enumerate() {
            if weight == 0.0 {
                continue;
            }
            let entries = row.iter().zip(self.centres);
            let sums = sums[draw % LANES].iter_mut();
            if self.power == Power::First {
                for (sum, (entry, centre)) in sums.zip(entries) {
                    *sum += weight * (entry - centre);
                }
            } else {
                for (sum, (entry, centre)) in sums.zip(entries) {
                    *sum += weight * ((entry - centre) * (entry - centre));
                }
            }
        }
        for half in [8, 4, 2, 1] {
            let (low, high) = sums.split_at_mut(half);
            for (low, high) in low.iter_mut().zip(high) {
                for (low, high) in low.iter_mut().zip(high) {
                    *low += *high;
                }
            }
        }
        sums[0][..columns].to_vec()
    }
}

/// The columns of a block of rows, each contiguous.
struct Block {
    rows: usize,
    entries: Lease,
}

impl Block {
    fn new(view: ArrayView2<'_, f64>) -> Self {
        let rows = view.nrows();
        let mut entries = Lease::new(distance(rows) * view.ncols());
        for (column, from) in view.columns().into_iter().enumerate() {
            match from.to_slice() {
                Some(from) => entries[column * distance(rows)..][..rows].copy_from_slice(from),
                None if column == 0 => gather(view, &mut entries),
                None => {}
            }
        }
        Self { rows, entries }
    }

    fn column(&self, index: usize) -> &[f64] {
        &self.entries[index * distance(self.rows)..][..self.rows]
    }

    fn column_mut(&mut self, index: usize) -> &mut [f64] {
        &mut self.entries[index * distance(self.rows)..][..self.rows]
    }
}

fn gather(view: ArrayView2<'_, f64>, entries: &mut [f64]) {
    let distance = distance(view.nrows());
    for (part, strip) in view.axis_chunks_iter(Axis(0), LINE).enumerate() {
        gather_strip(strip, &mut entries[part * LINE..], distance);
    }
}
