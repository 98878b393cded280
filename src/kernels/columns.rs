//! A kernel for one column, applied to every column of an array of any strides.
//!
//! Columns are gathered in blocks into a contiguous buffer of the task, because a cache line of a
//! C-ordered array holds eight neighbours and a page many more; a column that is contiguous
//! already is used where it lies. The values a kernel sees are the same either way.

use ndarray::{ArrayView2, ArrayViewMut1, ArrayViewMut2, Axis};

use super::entry::Entry;
use super::error::KernelError;
use super::lease::Lease;
use super::ordered::{Interrupt, map_tasks, threads};
use super::vector::stream::{LARGE, copy_past, fence};

/// Most columns gathered together: from 8 to 64 the time per column halves.
const MOST_COLUMNS: usize = 64;

/// Entries of a cache line; rows and columns of a tile that is turned as a whole.
pub(super) const LINE: usize = 8;

/// Most entries of one task's buffer, 32 MiB, unless a single column is longer.
const BUFFER: usize = 4 << 20;

/// Rows copied between two looks at the caller's wish to stop: the first touch of a row of a fresh
/// or memory-mapped array can cost a large page.
const ROWS: usize = 256;

/// `kernel(column, index)` for every column of `x`, shape `(n, k)`; the results in column order.
///
/// # Errors
/// The error of the first column that fails, or [`KernelError::Interrupted`].
pub fn map_columns<E, T, F>(
    x: ArrayView2<'_, E>,
    interrupt: &Interrupt<'_>,
    kernel: F,
) -> Result<Vec<T>, KernelError>
where
    E: Entry,
    T: Send,
    F: Fn(&[f64], usize) -> Result<T, KernelError> + Sync,
{
    let width = block_width(x.dim());
    let blocks: Vec<_> = x.axis_chunks_iter(Axis(1), width).enumerate().collect();
    let results = map_tasks(blocks, interrupt, |(block, view)| {
        let gathered = Gathered::new(view, interrupt)?;
        (0..view.ncols())
            .map(|column| {
                interrupt.check()?;
                kernel(gathered.column(column), block * width + column)
            })
            .collect::<Result<Vec<T>, KernelError>>()
    })?;
    Ok(results.into_iter().flatten().collect())
}

/// `kernel(column, index, out_column)` for every column of `x`; `out` has the shape `(m, k)`, and
/// every kernel fills its column of it.
///
/// # Errors
/// [`KernelError::Shape`] when `out` has another number of columns; else as [`map_columns`].
pub fn map_columns_into<E, T, F>(
    x: ArrayView2<'_, E>,
    mut out: ArrayViewMut2<'_, f64>,
    interrupt: &Interrupt<'_>,
    kernel: F,
) -> Result<Vec<T>, KernelError>
where
    E: Entry,
    T: Send,
    F: Fn(&[f64], usize, &mut [f64]) -> Result<T, KernelError> + Sync,
{
    expect_shape("out", &[out.nrows(), x.ncols()], out.shape())?;
    let past = out.len() > LARGE;
    let width = block_width(x.dim());
    let blocks: Vec<_> = x
        .axis_chunks_iter(Axis(1), width)
        .zip(out.axis_chunks_iter_mut(Axis(1), width))
        .enumerate()
        .collect();
    let results = map_tasks(blocks, interrupt, |(block, (view, mut into))| {
        let gathered = Gathered::new(view, interrupt)?;
        let mut results = Vec::with_capacity(view.ncols());
        let mut staged = Staged::new(into.view_mut());
        for column in 0..view.ncols() {
            interrupt.check()?;
            let index = block * width + column;
            results.push(staged.fill(column, |target| {
                kernel(gathered.column(column), index, target)
            })?);
        }
        staged.finish(past, interrupt)?;
        Ok(results)
    })?;
    Ok(results.into_iter().flatten().collect())
}

/// # Errors
/// [`KernelError::Shape`] unless `found` equals `expected`.
pub fn expect_shape(
    argument: &'static str,
    expected: &[usize],
    found: &[usize],
) -> Result<(), KernelError> {
    if expected == found {
        return Ok(());
    }
    Err(KernelError::Shape {
        argument,
        expected: expected.to_vec(),
        found: found.to_vec(),
    })
}

fn block_width((rows, columns): (usize, usize)) -> usize {
    // Narrower where there would be too few tasks for the threads.
    let shared = columns.div_ceil(2 * threads()).next_multiple_of(LINE);
    (BUFFER / rows.max(1)).clamp(1, MOST_COLUMNS.min(shared.max(1)))
}

/// Distance of two columns in a buffer, an odd number of cache lines: columns a power of two apart
/// would fall into the same few places of a cache.
pub(super) fn distance(rows: usize) -> usize {
    LINE * (rows.div_ceil(LINE) | 1)
}

/// The columns of a block, each contiguous.
enum Gathered<'a> {
    InPlace(Vec<&'a [f64]>),
    Copied { rows: usize, buffer: Lease },
}

impl<'a> Gathered<'a> {
    fn new<E: Entry>(
        view: ArrayView2<'a, E>,
        interrupt: &Interrupt<'_>,
    ) -> Result<Self, KernelError> {
        let in_place: Option<Vec<&'a [f64]>> = (0..view.ncols())
            .map(|column| E::as_wide(view.index_axis_move(Axis(1), column).to_slice()?))
            .collect();
        if let Some(columns) = in_place {
            return Ok(Self::InPlace(columns));
        }
        let rows = view.nrows();
        let distance = distance(rows);
        let mut buffer = Lease::new(distance * view.ncols());
        for (part, strip) in view.axis_chunks_iter(Axis(0), LINE).enumerate() {
            if part.is_multiple_of(ROWS / LINE) {
                interrupt.check()?;
            }
            gather_strip(strip, &mut buffer[part * LINE..], distance);
        }
        Ok(Self::Copied { rows, buffer })
    }

    fn column(&self, index: usize) -> &[f64] {
        match self {
            Self::InPlace(columns) => columns[index],
            Self::Copied { rows, buffer } => &buffer[index * distance(*rows)..][..*rows],
        }
    }
}

/// At most [`LINE`] rows to columns, whole tiles at a time where rows are contiguous.
pub(super) fn gather_strip<E: Entry>(
    strip: ArrayView2<'_, E>,
    buffer: &mut [f64],
    distance: usize,
) {
    let rows: Vec<&[E]> = strip
        .outer_iter()
        .filter_map(|row| row.to_slice())
        .collect();
    let whole = match <[&[E]; LINE]>::try_from(rows) {
        Ok(rows) => gather_tiles(rows, buffer, distance),
        Err(_) => 0,
    };
    for (row, entries) in strip.outer_iter().enumerate() {
        for (column, entry) in entries.iter().enumerate().skip(whole) {
            buffer[column * distance + row] = entry.wide();
        }
    }
}

/// The number of columns done.
fn gather_tiles<E: Entry>(rows: [&[E]; LINE], buffer: &mut [f64], distance: usize) -> usize {
    let tiles = rows.map(|row| row.as_chunks::<LINE>().0);
    for tile in 0..tiles[0].len() {
        let lines = tiles.map(|row| &row[tile]);
        for column in 0..LINE {
            let start = (tile * LINE + column) * distance;
            if let Some(target) = buffer[start..].first_chunk_mut::<LINE>() {
                for (target, line) in target.iter_mut().zip(lines) {
                    *target = line[column].wide();
                }
            }
        }
    }
    tiles[0].len() * LINE
}

/// Columns to be written, through a contiguous buffer where they are not contiguous themselves.
struct Staged<'a> {
    into: ArrayViewMut2<'a, f64>,
    buffer: Lease,
}

impl<'a> Staged<'a> {
    fn new(mut into: ArrayViewMut2<'a, f64>) -> Self {
        let in_place = into
            .columns_mut()
            .into_iter()
            .all(|mut column| column.as_slice_mut().is_some());
        let size = if in_place {
            0
        } else {
            distance(into.nrows()) * into.ncols()
        };
        Self {
            into,
            buffer: Lease::new(size),
        }
    }

    fn fill<T>(&mut self, index: usize, write: impl FnOnce(&mut [f64]) -> T) -> T {
        let rows = self.into.nrows();
        if !self.buffer.is_empty() {
            return write(&mut self.buffer[index * distance(rows)..][..rows]);
        }
        let mut column: ArrayViewMut1<'_, f64> = self.into.column_mut(index);
        match column.as_slice_mut() {
            Some(target) => write(target),
            // Only a block without entries gets here.
            None => write(&mut []),
        }
    }

    fn finish(mut self, past: bool, interrupt: &Interrupt<'_>) -> Result<(), KernelError> {
        if self.buffer.is_empty() {
            return Ok(());
        }
        let distance = distance(self.into.nrows());
        let strips = self.into.axis_chunks_iter_mut(Axis(0), LINE);
        for (part, strip) in strips.into_iter().enumerate() {
            if part.is_multiple_of(ROWS / LINE) {
                interrupt.check()?;
            }
            spread_strip(&self.buffer[part * LINE..], distance, strip, past);
        }
        fence();
        Ok(())
    }
}

/// Columns to at most [`LINE`] rows, whole tiles at a time where rows are contiguous.
fn spread_strip(buffer: &[f64], distance: usize, mut strip: ArrayViewMut2<'_, f64>, past: bool) {
    let columns = strip.ncols();
    let rows: Option<Vec<&mut [f64]>> =
        strip.outer_iter_mut().map(|row| row.into_slice()).collect();
    let whole = match rows.map(<[&mut [f64]; LINE]>::try_from) {
        Some(Ok(rows)) => spread_tiles(buffer, distance, rows, past),
        _ => 0,
    };
    for column in whole..columns {
        for (row, mut entries) in strip.outer_iter_mut().enumerate() {
            entries[column] = buffer[column * distance + row];
        }
    }
}

/// The number of columns done.
fn spread_tiles(buffer: &[f64], distance: usize, rows: [&mut [f64]; LINE], past: bool) -> usize {
    let count = rows[0].len() / LINE * LINE;
    let mut rows = rows.map(|row| row[..count].as_chunks_mut::<LINE>().0);
    for tile in 0..count / LINE {
        let mut lines = [[0.0; LINE]; LINE];
        for column in 0..LINE {
            let start = (tile * LINE + column) * distance;
            if let Some(source) = buffer[start..].first_chunk::<LINE>() {
                for (line, entry) in lines.iter_mut().zip(source) {
                    line[column] = *entry;
                }
            }
        }
        for (row, line) in rows.iter_mut().zip(&lines) {
            if past {
                copy_past(line, &mut row[tile]);
            } else {
                row[tile] = *line;
            }
        }
    }
    count
}
