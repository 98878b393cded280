//! A kernel for one column, applied to every column of an array of any strides.
//!
//! Columns are gathered in blocks of eight into a contiguous buffer of the task, because one
//! cache line of a C-ordered array holds as many neighbours; a column that is contiguous already
//! is used where it lies. The values a kernel sees are the same either way.

use ndarray::{ArrayView2, ArrayViewMut1, ArrayViewMut2, Axis};

use super::entry::Entry;
use super::error::KernelError;
use super::ordered::{Interrupt, map_tasks};

/// Columns gathered together.
const BLOCK: usize = 8;

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
    let width = block_width(x.nrows());
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
    let width = block_width(x.nrows());
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
        staged.finish(interrupt)?;
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

fn block_width(rows: usize) -> usize {
    (BUFFER / rows.max(1)).clamp(1, BLOCK)
}

/// The columns of a block, each contiguous.
enum Gathered<'a> {
    InPlace(Vec<&'a [f64]>),
    Copied { rows: usize, buffer: Vec<f64> },
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
        let mut buffer = vec![0.0; rows * view.ncols()];
        for (row, entries) in view.rows().into_iter().enumerate() {
            if row.is_multiple_of(ROWS) {
                interrupt.check()?;
            }
            for (column, entry) in entries.iter().enumerate() {
                buffer[column * rows + row] = entry.wide();
            }
        }
        Ok(Self::Copied { rows, buffer })
    }

    fn column(&self, index: usize) -> &[f64] {
        match self {
            Self::InPlace(columns) => columns[index],
            Self::Copied { rows, buffer } => &buffer[index * rows..(index + 1) * rows],
        }
    }
}

/// Columns to be written, through a contiguous buffer where they are not contiguous themselves.
struct Staged<'a> {
    into: ArrayViewMut2<'a, f64>,
    buffer: Vec<f64>,
}

impl<'a> Staged<'a> {
    fn new(mut into: ArrayViewMut2<'a, f64>) -> Self {
        let in_place = into
            .columns_mut()
            .into_iter()
            .all(|mut column| column.as_slice_mut().is_some());
        let size = if in_place { 0 } else { into.len() };
        Self {
            into,
            buffer: vec![0.0; size],
        }
    }

    fn fill<T>(&mut self, index: usize, write: impl FnOnce(&mut [f64]) -> T) -> T {
        let rows = self.into.nrows();
        if !self.buffer.is_empty() {
            return write(&mut self.buffer[index * rows..(index + 1) * rows]);
        }
        let mut column: ArrayViewMut1<'_, f64> = self.into.column_mut(index);
        match column.as_slice_mut() {
            Some(target) => write(target),
            // Only a block without entries gets here.
            None => write(&mut []),
        }
    }

    fn finish(mut self, interrupt: &Interrupt<'_>) -> Result<(), KernelError> {
        if self.buffer.is_empty() {
            return Ok(());
        }
        let rows = self.into.nrows();
        for (row, mut entries) in self.into.rows_mut().into_iter().enumerate() {
            if row.is_multiple_of(ROWS) {
                interrupt.check()?;
            }
            for (column, entry) in entries.iter_mut().enumerate() {
                *entry = self.buffer[column * rows + row];
            }
        }
        Ok(())
    }
}
