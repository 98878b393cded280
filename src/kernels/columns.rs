//! A kernel for one column, applied to every column of an array of any strides.
//!
//! Columns are gathered in blocks into a contiguous buffer of the task, because a cache line of a
//! C-ordered array holds eight neighbours and a page many more; a column that is contiguous
//! already is used where it lies. The values a kernel sees are the same either way.

use ndarray::{ArrayView2, ArrayViewMut1, ArrayViewMut2, Axis};

use super::blocks::{LINE, MOST_COLUMNS, distance, gather, has_contiguous_columns, spread};
use super::entry::Entry;
use super::error::KernelError;
use super::lease::Lease;
use super::ordered::{Interrupt, map_tasks, threads};
use super::vector::stream::LARGE;

/// Columns of a block that are contiguous both where they are read and where they are written.
const FEW_COLUMNS: usize = 4;

/// Most entries of one task's buffer, 32 MiB, unless a single column is longer.
const BUFFER: usize = 4 << 20;

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
    let results = map_tasks(parts(x, width), interrupt, |(first, view)| {
        let gathered = Gathered::new(view, interrupt)?;
        (0..view.ncols())
            .map(|column| {
                interrupt.check()?;
                kernel(gathered.column(column), first + column)
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
    out: ArrayViewMut2<'_, f64>,
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
    let results = map_tasks(
        pairs(x, out, width),
        interrupt,
        |(first, view, mut into)| {
            let gathered = Gathered::new(view, interrupt)?;
            let mut results = Vec::with_capacity(view.ncols());
            let mut staged = Staged::new(into.view_mut());
            for column in 0..view.ncols() {
                interrupt.check()?;
                results.push(staged.fill(column, |target| {
                    kernel(gathered.column(column), first + column, target)
                })?);
            }
            staged.finish(past, interrupt)?;
            Ok(results)
        },
    )?;
    Ok(results.into_iter().flatten().collect())
}

/// `kernel(column, index)` for a copy of every column of `x` that the kernel changes; the changed
/// columns are written into `out`, of equal shape.
///
/// # Errors
/// As [`map_columns_into`].
pub fn map_columns_in_place<E, T, F>(
    x: ArrayView2<'_, E>,
    out: ArrayViewMut2<'_, f64>,
    interrupt: &Interrupt<'_>,
    kernel: F,
) -> Result<Vec<T>, KernelError>
where
    E: Entry,
    T: Send,
    F: Fn(&mut [f64], usize) -> Result<T, KernelError> + Sync,
{
    expect_shape("out", x.shape(), out.shape())?;
    let past = out.len() > LARGE;
    let rows = x.nrows();
    let mut width = block_width(x.dim());
    if has_contiguous_columns(x) && has_contiguous_columns(out.view()) {
        width = width.min(FEW_COLUMNS);
    }
    let results = map_tasks(pairs(x, out, width), interrupt, |(first, view, into)| {
        let distance = distance(rows);
        let mut buffer = Lease::new(distance * view.ncols());
        gather(view, &mut buffer, interrupt)?;
        let mut results = Vec::with_capacity(view.ncols());
        for (place, column) in buffer.chunks_mut(distance).enumerate() {
            interrupt.check()?;
            results.push(kernel(&mut column[..rows], first + place)?);
        }
        spread(&buffer, into, past, interrupt)?;
        Ok(results)
    })?;
    Ok(results.into_iter().flatten().collect())
}

/// `x` cut into blocks of at most `width` columns, each with the index of its first one.
fn parts<E>(x: ArrayView2<'_, E>, width: usize) -> Vec<(usize, ArrayView2<'_, E>)> {
    let mut parts = Vec::with_capacity(x.ncols() / width + 2);
    let (mut first, mut right) = (0, x);
    let mut next = first_width::<E>(x.as_ptr().addr(), x.strides()[1], width);
    while first < x.ncols() {
        next = next.min(x.ncols() - first);
        let (part, rest) = right.split_at(Axis(1), next);
        parts.push((first, part));
        right = rest;
        first += next;
        next = width;
    }
    parts
}

/// Index of the first column, columns to read, columns to write.
type Pair<'a, 'b, E> = (usize, ArrayView2<'a, E>, ArrayViewMut2<'b, f64>);

/// Both arrays cut into blocks of at most `width` columns.
fn pairs<'a, 'b, E>(
    x: ArrayView2<'a, E>,
    out: ArrayViewMut2<'b, f64>,
    width: usize,
) -> Vec<Pair<'a, 'b, E>> {
    let columns = x.ncols();
    let mut pairs = Vec::with_capacity(columns / width + 2);
    let (mut first, mut right, mut into) = (0, x, out);
    let mut next = first_width::<f64>(into.as_ptr().addr(), into.strides()[1], width);
    while first < columns {
        next = next.min(columns - first);
        let (part, rest) = right.split_at(Axis(1), next);
        let (target, behind) = into.split_at(Axis(1), next);
        pairs.push((first, part, target));
        (right, into) = (rest, behind);
        first += next;
        next = width;
    }
    pairs
}

/// The width of the first block, such that the others begin with a cache line where rows do.
fn first_width<E>(address: usize, stride: isize, width: usize) -> usize {
    let line = LINE * size_of::<f64>();
    let over = address % line / size_of::<E>().max(1);
    if stride == 1 && over < width {
        width - over
    } else {
        width
    }
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
        let mut buffer = Lease::new(distance(rows) * view.ncols());
        gather(view, &mut buffer, interrupt)?;
        Ok(Self::Copied { rows, buffer })
    }

    fn column(&self, index: usize) -> &[f64] {
        match self {
            Self::InPlace(columns) => columns[index],
            Self::Copied { rows, buffer } => &buffer[index * distance(*rows)..][..*rows],
        }
    }
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

    fn finish(self, past: bool, interrupt: &Interrupt<'_>) -> Result<(), KernelError> {
        if self.buffer.is_empty() {
            return Ok(());
        }
        spread(&self.buffer, self.into, past, interrupt)
    }
}
