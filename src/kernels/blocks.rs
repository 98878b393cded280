//! Blocks of columns in a contiguous buffer: gathered from an array of any strides, and spread back.

use ndarray::{ArrayView2, ArrayViewMut2, Axis};

use super::entry::Entry;
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::stream::{copy_past, fence, prefetch};
pub(super) use super::vector::transpose::LINE;
use super::vector::transpose::{columns_to_rows, rows_to_columns};

/// Most columns of a block.
pub(super) const MOST_COLUMNS: usize = 64;

/// Rows copied between two looks at the caller's wish to stop: the first touch of a row of a fresh
/// or memory-mapped array can cost a large page.
const ROWS: usize = 256;

/// Strips of rows that are asked for ahead.
const AHEAD: usize = 1;

/// Rows of a tile that is turned as a whole.
type Strip = [[f64; MOST_COLUMNS]; LINE];

/// Distance of two columns in a buffer, an odd number of cache lines: columns a power of two apart
/// would fall into the same few places of a cache.
pub(super) fn distance(rows: usize) -> usize {
    LINE * (rows.div_ceil(LINE) | 1)
}

/// Whether every column is contiguous.
pub(super) fn has_contiguous_columns<E>(view: ArrayView2<'_, E>) -> bool {
    view.strides()[0] == 1 || view.nrows() < 2
}

/// Copies the columns of `view`, shape `(n, k)`, to `buffer`, [`distance`] apart.
pub(super) fn gather<E: Entry>(
    view: ArrayView2<'_, E>,
    buffer: &mut [f64],
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let distance = distance(view.nrows());
    if has_contiguous_columns(view) {
        for (column, entries) in view.columns().into_iter().enumerate() {
            interrupt.check()?;
            let target = &mut buffer[column * distance..];
            if let Some(entries) = entries.to_slice().and_then(E::as_wide) {
                target[..entries.len()].copy_from_slice(entries);
                continue;
            }
            for (target, entry) in target.iter_mut().zip(entries) {
                *target = entry.wide();
            }
        }
        return Ok(());
    }
    for (part, strip) in view.axis_chunks_iter(Axis(0), LINE).enumerate() {
        if part.is_multiple_of(ROWS / LINE) {
            interrupt.check()?;
        }
        foresee(view, (part + AHEAD) * LINE);
        gather_strip(strip, &mut buffer[part * LINE..], distance);
    }
    Ok(())
}

/// Asks for the cache lines of [`LINE`] rows from `first` on.
fn foresee<E: Entry>(view: ArrayView2<'_, E>, first: usize) {
    for row in first..view.nrows().min(first + LINE) {
        if let Some(row) = view.index_axis(Axis(0), row).as_slice() {
            prefetch(row);
        }
    }
}

/// At most [`LINE`] rows to columns, whole tiles at a time where rows are contiguous.
pub(super) fn gather_strip<E: Entry>(
    strip: ArrayView2<'_, E>,
    buffer: &mut [f64],
    distance: usize,
) {
    let whole = turn_rows(strip, buffer, distance);
    for (row, entries) in strip.outer_iter().enumerate() {
        for (column, entry) in entries.iter().enumerate().skip(whole) {
            buffer[column * distance + row] = entry.wide();
        }
    }
}

/// The number of columns done.
fn turn_rows<E: Entry>(strip: ArrayView2<'_, E>, buffer: &mut [f64], distance: usize) -> usize {
    if strip.nrows() != LINE || strip.strides()[1] != 1 {
        return 0;
    }
    let mut rows: [&[E]; LINE] = [&[]; LINE];
    for (row, target) in rows.iter_mut().enumerate() {
        *target = strip
            .index_axis_move(Axis(0), row)
            .to_slice()
            .unwrap_or_default();
    }
    if let [
        Some(a),
        Some(b),
        Some(c),
        Some(d),
        Some(e),
        Some(f),
        Some(g),
        Some(h),
    ] = rows.map(E::as_wide)
    {
        return rows_to_columns([a, b, c, d, e, f, g, h], buffer, distance);
    }
    let mut done = 0;
    let mut wide: Strip = [[0.0; MOST_COLUMNS]; LINE];
    while done + LINE <= strip.ncols() {
        let width = MOST_COLUMNS.min(strip.ncols() - done);
        for (wide, row) in wide.iter_mut().zip(rows) {
            for (wide, entry) in wide.iter_mut().zip(&row[done..done + width]) {
                *wide = entry.wide();
            }
        }
        let lines = wide.each_ref().map(|row| &row[..width]);
        done += rows_to_columns(lines, &mut buffer[done * distance..], distance);
    }
    done
}

/// Copies the columns in `buffer`, [`distance`] apart, to `into`; `past` the caches where they are
/// not needed soon.
pub(super) fn spread(
    buffer: &[f64],
    mut into: ArrayViewMut2<'_, f64>,
    past: bool,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let rows = into.nrows();
    let distance = distance(rows);
    if has_contiguous_columns(into.view()) {
        for (column, mut target) in into.columns_mut().into_iter().enumerate() {
            interrupt.check()?;
            if let Some(target) = target.as_slice_mut() {
                copy(&buffer[column * distance..][..rows], target, past);
            }
        }
        fence();
        return Ok(());
    }
    let mut wide: Strip = [[0.0; MOST_COLUMNS]; LINE];
    for (part, strip) in into.axis_chunks_iter_mut(Axis(0), LINE).enumerate() {
        if part.is_multiple_of(ROWS / LINE) {
            interrupt.check()?;
        }
        spread_strip(&buffer[part * LINE..], distance, strip, &mut wide, past);
    }
    fence();
    Ok(())
}

/// Columns to at most [`LINE`] rows: first side by side in `wide`, then row after row, because a
/// cache line that is written past the caches must be written whole and at once.
fn spread_strip(
    buffer: &[f64],
    distance: usize,
    mut strip: ArrayViewMut2<'_, f64>,
    wide: &mut Strip,
    past: bool,
) {
    let mut first = 0;
    for mut part in strip.axis_chunks_iter_mut(Axis(1), MOST_COLUMNS) {
        let columns = part.ncols();
        let mut whole = 0;
        let buffer = &buffer[first * distance..];
        if part.nrows() == LINE {
            let rows = wide.each_mut().map(|row| &mut row[..columns]);
            whole = columns_to_rows(buffer, distance, rows);
        }
        for (row, (mut into, wide)) in part.outer_iter_mut().zip(wide.iter_mut()).enumerate() {
            for (column, entry) in wide.iter_mut().enumerate().take(columns).skip(whole) {
                *entry = buffer[column * distance + row];
            }
            match into.as_slice_mut() {
                Some(into) => copy(&wide[..columns], into, past),
                None => into.assign(&ndarray::aview1(&wide[..columns])),
            }
        }
        first += columns;
    }
}

fn copy(from: &[f64], to: &mut [f64], past: bool) {
    if past {
        copy_past(from, to);
    } else {
        to.copy_from_slice(from);
    }
}
