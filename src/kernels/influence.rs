//! How far each observation moves each quantity.

use ndarray::{ArrayView2, ArrayViewMut2, Axis};

use super::columns::{expect_shape, map_columns};
use super::entry::Entry;
use super::error::KernelError;
use super::mean::mean;
use super::ordered::{Interrupt, map_tasks};
use super::vector::exp::exp;
use super::vector::{Arithmetic, Work, dispatch};
use super::weight_sums::{distance, larger, shift};

/// Observations of a tile; one a lane.
const TILE: usize = 64;

/// Draws that are added together.
const GROUP: usize = 8;

/// Writes the influence of deleting each observation, `Σ_s w_s^(i) f_sp − mean_s f_sp`, into `out`,
/// shape `(P, N)`; `w^(i) ∝ exp(−L_si)` are the raw deletion weights, not smoothed.
///
/// `loglik` holds the log likelihood values `L`, shape `(n, N)`, log scale; `quantities` holds `f`,
/// shape `(n, P)`. The result has the unit of `f`. NaN or `−inf` in a column of `loglik`, NaN or an
/// infinite entry in one of `f` give NaN in its row or column.
///
/// # Errors
/// [`KernelError::Shape`] when the draws of both or the shape of `out` do not fit;
/// [`KernelError::Interrupted`].
///
/// Source: Gelfand, Dey & Chang (1992), Bayesian Statistics 4, 147-167, for the deletion weights.
pub fn influence<E: Entry>(
    loglik: ArrayView2<'_, E>,
    quantities: ArrayView2<'_, f64>,
    mut out: ArrayViewMut2<'_, f64>,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let (draws, observations) = loglik.dim();
    expect_shape("f", &[draws, quantities.ncols()], quantities.shape())?;
    expect_shape("out", &[quantities.ncols(), observations], out.shape())?;
    let centred = centred(quantities, interrupt)?;
    let tasks: Vec<_> = loglik
        .axis_chunks_iter(Axis(1), TILE)
        .zip(out.axis_chunks_iter_mut(Axis(1), TILE))
        .collect();
    map_tasks(tasks, interrupt, |(part, mut into)| {
        let mut tile = Tile::new(quantities.ncols());
        let mut rows = [[f64::NEG_INFINITY; TILE]; GROUP];
        for (group, strip) in part.axis_chunks_iter(Axis(0), GROUP).enumerate() {
            if group.is_multiple_of(64) {
                interrupt.check()?;
            }
            negative_rows(strip, &mut rows);
            let width = GROUP * quantities.ncols();
            dispatch(AddRows {
                rows: &rows,
                f: &centred[group * width..][..width],
                tile: &mut tile,
            });
        }
        for ((quantity, lane), target) in into.indexed_iter_mut() {
            *target = tile.sums[quantity][lane] / tile.total[lane];
        }
        Ok(())
    })?;
    Ok(())
}

/// Quantities with their means taken off, draw after draw, padded with zeros to whole groups.
fn centred(
    quantities: ArrayView2<'_, f64>,
    interrupt: &Interrupt<'_>,
) -> Result<Vec<f64>, KernelError> {
    let (draws, count) = quantities.dim();
    let means = map_columns(quantities, interrupt, |column, _| Ok(mean(column)))?;
    let mut values = Vec::with_capacity(draws.next_multiple_of(GROUP) * count);
    for row in quantities.rows() {
        values.extend(row.iter().zip(&means).map(|(entry, centre)| entry - centre));
    }
    values.resize(draws.next_multiple_of(GROUP) * count, 0.0);
    Ok(values)
}

/// At most [`GROUP`] draws of at most [`TILE`] observations, negated; `−inf` where there is none.
fn negative_rows<E: Entry>(strip: ArrayView2<'_, E>, rows: &mut Rows) {
    if strip.dim() != (GROUP, TILE) {
        *rows = [[f64::NEG_INFINITY; TILE]; GROUP];
    }
    if strip.strides()[1] == 1 {
        for (row, entries) in rows.iter_mut().zip(strip.outer_iter()) {
            if let Some(entries) = entries.to_slice() {
                dispatch(Negated { entries, row });
            }
        }
        return;
    }
    for (lane, entries) in strip.columns().into_iter().enumerate() {
        for (row, entry) in rows.iter_mut().zip(entries) {
            row[lane] = -entry.wide();
        }
    }
}

/// Draws that are added together.
type Rows = [[f64; TILE]; GROUP];

struct Negated<'a, E> {
    entries: &'a [E],
    row: &'a mut [f64; TILE],
}

impl<E: Entry> Work for Negated<'_, E> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (target, entry) in self.row.iter_mut().zip(self.entries) {
            *target = -entry.wide();
        }
    }
}

/// Sums over the draws so far of the weights of each observation, `r = exp(−L − maximum)`.
struct Tile {
    maximum: [f64; TILE],
    total: [f64; TILE],
    /// `Σ r f` of each quantity.
    sums: Vec<[f64; TILE]>,
}

impl Tile {
    fn new(quantities: usize) -> Self {
        Self {
            maximum: [f64::NEG_INFINITY; TILE],
            total: [0.0; TILE],
            sums: vec![[0.0; TILE]; quantities],
        }
    }
}

/// Adds a group of draws to a tile; `f` holds the quantities draw after draw.
struct AddRows<'a> {
    rows: &'a Rows,
    f: &'a [f64],
    tile: &'a mut Tile,
}

impl Work for AddRows<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let Tile {
            maximum,
            total,
            sums,
        } = self.tile;
        let mut tops = *maximum;
        for row in self.rows {
            for (top, &entry) in tops.iter_mut().zip(row) {
                *top = larger(entry, *top);
            }
        }
        if tops.iter().zip(&*maximum).any(|(top, before)| top > before) {
            let mut factors = [0.0; TILE];
            for lane in 0..TILE {
                factors[lane] = exp::<A>(distance(maximum[lane], tops[lane]));
                total[lane] *= factors[lane];
            }
            for sums in sums.iter_mut() {
                for (sum, factor) in sums.iter_mut().zip(&factors) {
                    *sum *= factor;
                }
            }
            *maximum = tops;
        }
        let mut r = [[0.0; TILE]; GROUP];
        for (r, row) in r.iter_mut().zip(self.rows) {
            for lane in 0..TILE {
                r[lane] = exp::<A>(row[lane] - shift(tops[lane]));
            }
        }
        for lane in 0..TILE {
            total[lane] += ((r[0][lane] + r[4][lane]) + (r[2][lane] + r[6][lane]))
                + ((r[1][lane] + r[5][lane]) + (r[3][lane] + r[7][lane]));
        }
        let count = sums.len();
        for (quantity, sums) in sums.iter_mut().enumerate() {
            let f: [f64; GROUP] = std::array::from_fn(|row| self.f[row * count + quantity]);
            for lane in 0..TILE {
                let mut sum = sums[lane];
                for row in 0..GROUP {
                    sum = A::mul_add(f[row], r[row][lane], sum);
                }
                sums[lane] = sum;
            }
        }
    }
}
