//! The sums of [`super::weight_sums`] of every column of an array of any strides, without a copy.
//!
//! Rows that are contiguous are streamed, many columns at a time; columns that are contiguous are
//! read where they lie; of anything else a few columns at a time are gathered.

use ndarray::{ArrayView2, ArrayViewMut2, Axis};

use super::columns::expect_shape;
use super::entry::Entry;
use super::error::KernelError;
use super::ordered::{Interrupt, map_tasks};
use super::vector::stream::{LARGE, copy_past, fence};
use super::vector::{Arithmetic, Work, dispatch};
use super::weight_sums::{BLOCK, Sums};
use super::weight_tiles::{ColumnSums, State, TileSums};

/// Fewest columns whose rows are streamed.
const FEWEST_STREAMED: usize = 32;

/// Columns of a task that streams rows.
const STREAMED: usize = 2560;

/// Entries of a task that reads columns.
const TASK: usize = 65_536;

/// Entries of a row that are written at a time.
const PIECE: usize = 512;

/// Columns gathered at a time.
const GATHERED: usize = 8;

/// The sums of every column of `x`, shape `(n, k)`, those that `FORM` names (see
/// [`super::weight_sums::form`]).
///
/// # Errors
/// [`KernelError::Interrupted`] only.
pub fn column_sums<E: Entry, const FORM: u8>(
    x: ArrayView2<'_, E>,
    interrupt: &Interrupt<'_>,
) -> Result<Vec<Sums>, KernelError> {
    let blocks = x.nrows().div_ceil(BLOCK);
    let parts = map_tasks(tiles(x, task_width(x)), interrupt, |view| {
        Ok(block_sums::<E, FORM>(view))
    })?;
    let mut sums = vec![Sums::NONE; x.ncols()];
    let mut first = 0;
    for of_part in parts.chunks(blocks.max(1)) {
        for block in of_part {
            for (sum, &later) in sums[first..].iter_mut().zip(block) {
                *sum = sum.merge(later);
            }
        }
        first += of_part[0].len();
    }
    for (column, sums) in sums.iter_mut().enumerate() {
        if sums.total.is_nan() && x.column(column).iter().any(|entry| entry.wide().is_nan()) {
            sums.maximum = f64::NAN;
        }
    }
    Ok(sums)
}

/// The sums of one contiguous column, as [`column_sums`] forms them.
pub fn slice_sums<const FORM: u8>(x: &[f64]) -> Sums {
    let blocks = x.chunks(BLOCK);
    let merged = blocks
        .map(|block| dispatch(ColumnSums::<f64, FORM>(block)))
        .reduce(Sums::merge);
    let mut sums = merged.unwrap_or(Sums::NONE);
    if sums.total.is_nan() && x.iter().any(|entry| entry.is_nan()) {
        sums.maximum = f64::NAN;
    }
    sums
}

/// Writes `x_s − log Σ exp(x)` of every column into `out`, of equal shape, and returns the log
/// sums; see [`super::log_sum::normalise`].
///
/// # Errors
/// [`KernelError::Shape`], [`KernelError::Interrupted`].
pub fn normalise_columns<E: Entry>(
    x: ArrayView2<'_, E>,
    out: ArrayViewMut2<'_, f64>,
    interrupt: &Interrupt<'_>,
) -> Result<Vec<f64>, KernelError> {
    expect_shape("out", x.shape(), out.shape())?;
    let sums = column_sums::<E, { super::weight_sums::form::TOTAL }>(x, interrupt)?;
    let offsets: Vec<(f64, f64)> = sums.iter().map(Sums::offsets).collect();
    let width = task_width(x);
    let past = out.len() > LARGE;
    let blocks = x.nrows().div_ceil(BLOCK);
    let tasks: Vec<_> = tiles(x, width)
        .into_iter()
        .zip(tiles_mut(out, width))
        .enumerate()
        .map(|(task, (view, into))| (view, into, &offsets[task / blocks * width..]))
        .collect();
    map_tasks(tasks, interrupt, |(view, into, offsets)| {
        write_block(view, into, offsets, past);
        Ok(())
    })?;
    Ok(sums.iter().map(Sums::log_sum).collect())
}

fn task_width<E>(x: ArrayView2<'_, E>) -> usize {
    if is_streamed(x) {
        STREAMED
    } else {
        (TASK / x.nrows().clamp(1, BLOCK)).max(1)
    }
}

/// Whether rows are contiguous, and long enough to stream.
fn is_streamed<E>(x: ArrayView2<'_, E>) -> bool {
    x.ncols() >= FEWEST_STREAMED && x.strides()[1] == 1
}

/// `x` cut into parts of `width` columns, these into blocks of rows; the blocks of the first part
/// come first.
fn tiles<E>(x: ArrayView2<'_, E>, width: usize) -> Vec<ArrayView2<'_, E>> {
    let mut tiles = Vec::new();
    let mut right = x;
    while right.ncols() > 0 {
        let (mut below, rest) = right.split_at(Axis(1), width.min(right.ncols()));
        right = rest;
        while below.nrows() > 0 {
            let (tile, rest) = below.split_at(Axis(0), BLOCK.min(below.nrows()));
            tiles.push(tile);
            below = rest;
        }
    }
    tiles
}

/// As [`tiles`].
fn tiles_mut(out: ArrayViewMut2<'_, f64>, width: usize) -> Vec<ArrayViewMut2<'_, f64>> {
    let mut tiles = Vec::new();
    let mut right = out;
    while right.ncols() > 0 {
        let columns = width.min(right.ncols());
        let (mut below, rest) = right.split_at(Axis(1), columns);
        right = rest;
        while below.nrows() > 0 {
            let rows = BLOCK.min(below.nrows());
            let (tile, rest) = below.split_at(Axis(0), rows);
            tiles.push(tile);
            below = rest;
        }
    }
    tiles
}

/// The sums of every column of at most [`BLOCK`] rows.
fn block_sums<E: Entry, const FORM: u8>(x: ArrayView2<'_, E>) -> Vec<Sums> {
    if is_streamed(x) {
        let rows: Option<Vec<&[E]>> = (0..x.nrows())
            .map(|row| x.index_axis_move(Axis(0), row).to_slice())
            .collect();
        if let Some(rows) = rows {
            return streamed_sums::<E, FORM>(&rows, x.ncols());
        }
    }
    let mut sums = Vec::with_capacity(x.ncols());
    let mut buffer = Vec::new();
    for part in x.axis_chunks_iter(Axis(1), GATHERED) {
        let columns: Option<Vec<&[E]>> = (0..part.ncols())
            .map(|column| part.index_axis_move(Axis(1), column).to_slice())
            .collect();
        match columns {
            Some(columns) => {
                sums.extend(columns.iter().map(|x| dispatch(ColumnSums::<E, FORM>(x))));
            }
            None => {
                gather(part, &mut buffer);
                let columns = buffer.chunks(part.nrows());
                sums.extend(columns.map(|x| dispatch(ColumnSums::<f64, FORM>(x))));
            }
        }
    }
    sums
}

fn streamed_sums<E: Entry, const FORM: u8>(rows: &[&[E]], columns: usize) -> Vec<Sums> {
    let none = vec![E::NONE; columns];
    let mut state = State::new(columns);
    dispatch(TileSums::<E, FORM> {
        rows,
        none: &none,
        state: &mut state,
    });
    (0..columns).map(|column| state.column(column)).collect()
}

/// The columns of `x` one after the other.
fn gather<E: Entry>(x: ArrayView2<'_, E>, buffer: &mut Vec<f64>) {
    let rows = x.nrows();
    buffer.resize(rows * x.ncols(), 0.0);
    for (row, entries) in x.rows().into_iter().enumerate() {
        for (column, entry) in entries.iter().enumerate() {
            buffer[column * rows + row] = entry.wide();
        }
    }
}

/// `out = (x − maximum) − log total` for the offsets of every column.
fn write_block<E: Entry>(
    x: ArrayView2<'_, E>,
    mut out: ArrayViewMut2<'_, f64>,
    offsets: &[(f64, f64)],
    past: bool,
) {
    if is_streamed(x) && is_streamed(out.view()) {
        let (maxima, logs): (Vec<f64>, Vec<f64>) = offsets[..x.ncols()].iter().copied().unzip();
        for (x, mut out) in x.rows().into_iter().zip(out.rows_mut()) {
            if let (Some(x), Some(out)) = (x.to_slice(), out.as_slice_mut()) {
                write_row(x, &maxima, &logs, out, past);
            }
        }
        fence();
        return;
    }
    let columns = x.columns().into_iter().zip(out.columns_mut());
    for ((x, mut out), &(maximum, log_total)) in columns.zip(offsets) {
        match (x.to_slice(), out.as_slice_mut()) {
            (Some(x), Some(out)) => dispatch(WriteColumn {
                x,
                maximum,
                log_total,
                out,
            }),
            _ => {
                for (target, entry) in out.iter_mut().zip(x) {
                    *target = (entry.wide() - maximum) - log_total;
                }
            }
        }
    }
}

/// One row, in pieces that stay in the nearest cache; `past` the caches where the result is large.
fn write_row<E: Entry>(x: &[E], maxima: &[f64], logs: &[f64], out: &mut [f64], past: bool) {
    let mut buffer = [0.0; PIECE];
    for (piece, into) in out.chunks_mut(PIECE).enumerate() {
        let range = piece * PIECE..piece * PIECE + into.len();
        let staged = &mut buffer[..into.len()];
        let row = |out| WriteRow {
            x: &x[range.clone()],
            maxima: &maxima[range.clone()],
            logs: &logs[range],
            out,
        };
        if past {
            dispatch(row(staged));
            copy_past(staged, into);
        } else {
            dispatch(row(into));
        }
    }
}

struct WriteRow<'a, E> {
    x: &'a [E],
    maxima: &'a [f64],
    logs: &'a [f64],
    out: &'a mut [f64],
}

impl<E: Entry> Work for WriteRow<'_, E> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let offsets = self.maxima.iter().zip(self.logs);
        for ((target, entry), (maximum, log_total)) in self.out.iter_mut().zip(self.x).zip(offsets)
        {
            *target = (entry.wide() - maximum) - log_total;
        }
    }
}

struct WriteColumn<'a, E> {
    x: &'a [E],
    maximum: f64,
    log_total: f64,
    out: &'a mut [f64],
}

impl<E: Entry> Work for WriteColumn<'_, E> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (target, entry) in self.out.iter_mut().zip(self.x) {
            *target = (entry.wide() - self.maximum) - self.log_total;
        }
    }
}
