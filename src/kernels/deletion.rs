//! What leaving out each observation does: one pass over the log likelihood, by blocks of columns.
//!
//! No weights are kept. A task gathers a few columns, works each of them out ([`super::deletion_column`]),
//! adds its influence series to running sums over columns, and at the end multiplies the weights of
//! all its columns into the quantities ([`super::deletion_shift`]).

use std::ops::Range;

use ndarray::{Array2, ArrayView2, Axis};

use super::blocks::{distance, gather};
use super::columns::expect_shape;
use super::deletion_column::{Shared, Work as ColumnWork};
use super::deletion_lags::Layout;
use super::deletion_shift::{Panels, Shifts};
use super::entry::Entry;
use super::error::KernelError;
use super::lease::Lease;
use super::long_run;
use super::ordered::{Interrupt, map_tasks};

/// Columns of a task, gathered together: of a row as much as a processor fetches well. A fixed number:
/// series are summed task by task, and their last digits must not depend on how many threads there
/// are.
const COLUMNS: usize = 128;

/// Most entries of a task's buffer, 32 MiB, unless a single column is longer.
const BUFFER: usize = 4 << 20;

/// Figures of one column, in this order: log score, its Monte Carlo error, in-sample log score, tail
/// shape, effective size, its entropy form, largest share, variance of the density over its squared
/// mean, contributions, relative efficiency, p-value of the chains' shares, and [`fault`]s.
pub const FIGURES: usize = 12;

/// Why the figures of a column are not there; added up.
pub mod fault {
    /// NaN in the column.
    pub const NAN: u8 = 1;
    /// `+inf` in it: a density that is no number.
    pub const INFINITE: u8 = 2;
    /// `−inf` at a draw that has weight: without the observation that draw would have all of it.
    pub const IMPOSSIBLE: u8 = 4;
}

/// How draws hang together, for Monte Carlo errors.
#[derive(Debug, Clone, Copy)]
pub enum Order<'a> {
    /// Chains that begin at these positions, `0 = s_0 < … < s_C = n`.
    Chains(&'a [i64]),
    /// Independent draws.
    Independent,
    /// Independent but for draws that came several times: the number of each draw's value.
    Repeated(&'a [i64]),
}

/// Draws that all deletions share.
#[derive(Debug, Clone, Copy)]
pub struct Base<'a> {
    /// Normalised log weights of the base, `(n,)`; nothing where all are equal.
    pub log_weights: Option<&'a [f64]>,
    /// How the draws hang together.
    pub order: Order<'a>,
}

/// What [`delete`] finds.
pub struct Deletions {
    /// `(k, FIGURES)`.
    pub figures: Array2<f64>,
    /// Influence series summed over columns, `(3, n)`: of the left-out score, of the same with raw
    /// weights, and of the in-sample score.
    pub totals: Array2<f64>,
    /// Shifts `Σ w f` of standardised quantities, `(k, P)`.
    pub shift: Array2<f64>,
    /// `Σ z²` of their influence series, `(k, P)`.
    pub shift_square: Array2<f64>,
}

/// Leaves out what the columns of `held`, `(n, k)`, hold: log densities of what is deleted. `scored`
/// holds those of what is scored, where that is something else. `quantities`, `(n, P)`, have base
/// mean 0 and base variance 1.
///
/// Weights are `w ∝ v exp(−held)` with base weights `v`, smoothed as by [`super::smooth::smooth`]; a
/// score is `log Σ w exp(scored)`, its influence series `n w (exp(scored)/p − 1)` with `p` the
/// exponential of the score; its error the root of the long-run variance over `n`. Shifts have the
/// series `w (f − m) − v f − v m (f² − 1)/2`: target mean, base mean and base sd. Its squares are
/// summed in single precision over 128 draws at a time: relative error about 1e-5.
///
/// # Errors
/// [`KernelError::Shape`], [`KernelError::Starts`], [`KernelError::Interrupted`].
///
/// Source: Gelfand, Dey & Chang (1992), Bayesian Statistics 4, 147-167, for the weights and scores.
pub fn delete<E: Entry>(
    held: ArrayView2<'_, E>,
    scored: Option<ArrayView2<'_, E>>,
    base: Base<'_>,
    quantities: ArrayView2<'_, f64>,
    interrupt: &Interrupt<'_>,
) -> Result<Deletions, KernelError> {
    let (draws, columns) = held.dim();
    expect(held.dim(), scored, base, quantities)?;
    let layout = match base.order {
        Order::Chains(starts) => Some(Layout::new(
            long_run::chains(starts, draws, false)?,
            long_run::chains(starts, draws, true)?,
        )),
        _ => None,
    };
    let shared = Shared::new(base, draws, layout.as_ref());
    let panels = Panels::new(quantities, &shared.base);
    let width = (2 * BUFFER / draws.max(1)).clamp(1, COLUMNS);
    let tasks: Vec<Range<usize>> = (0..columns)
        .step_by(width)
        .map(|start| start..columns.min(start + width))
        .collect();
    let parts = map_tasks(tasks, interrupt, |range| {
        one_task(held, scored, range, &shared, &panels, interrupt)
    })?;
    Ok(joined(parts, draws, columns, quantities.ncols()))
}

fn expect<E: Entry>(
    (draws, columns): (usize, usize),
    scored: Option<ArrayView2<'_, E>>,
    base: Base<'_>,
    quantities: ArrayView2<'_, f64>,
) -> Result<(), KernelError> {
    if draws == 0 {
        return Err(KernelError::Empty { argument: "held" });
    }
    if let Some(scored) = scored {
        expect_shape("scored", &[draws, columns], scored.shape())?;
    }
    if let Some(log_weights) = base.log_weights {
        expect_shape("log_weights", &[draws], &[log_weights.len()])?;
    }
    if let Order::Repeated(repeats) = base.order {
        expect_shape("repeats", &[draws], &[repeats.len()])?;
        if let Some(&wrong) = repeats
            .iter()
            .find(|&&r| usize::try_from(r).map_or(true, |r| r >= draws))
        {
            return Err(KernelError::Range {
                argument: "repeats",
                expected: "numbers from 0 to one below the number of draws",
                found: wrong as f64,
            });
        }
    }
    expect_shape("f", &[draws, quantities.ncols()], quantities.shape())
}

/// What a task finds of its columns.
struct Part {
    figures: Vec<[f64; FIGURES]>,
    totals: [Vec<f64>; 3],
    shifts: Shifts,
}

fn one_task<E: Entry>(
    held: ArrayView2<'_, E>,
    scored: Option<ArrayView2<'_, E>>,
    range: Range<usize>,
    shared: &Shared<'_>,
    panels: &Panels,
    interrupt: &Interrupt<'_>,
) -> Result<Part, KernelError> {
    let draws = held.nrows();
    let apart = distance(draws);
    let mut work = ColumnWork::new(shared);
    let mut figures = Vec::with_capacity(range.len());
    let mut shifts = Shifts::none(panels);
    let together = (BUFFER / draws.max(1)).clamp(1, COLUMNS);
    for start in range.clone().step_by(together) {
        let block = start..range.end.min(start + together);
        let mut buffer = gathered(held, block.clone(), interrupt)?;
        let other = match scored {
            Some(scored) => Some(gathered(scored, block.clone(), interrupt)?),
            None => None,
        };
        let mut scales = Vec::with_capacity(block.len());
        for index in 0..block.len() {
            interrupt.check()?;
            let (column, next) = buffer[index * apart..].split_at_mut(apart);
            let (column, next) = (
                &mut column[..draws],
                (index, &next[..draws.min(next.len())]),
            );
            let scored = other.as_ref().map(|other| &other[index * apart..][..draws]);
            let (found, scale) = work.column(column, next, scored, interrupt)?;
            scales.push((scale, found[6]));
            figures.push(found);
            if work.is_full() || index + 1 == block.len() {
                work.settle(&buffer, apart);
            }
        }
        panels.add_shifts(&buffer, apart, &scales, &mut shifts, interrupt)?;
    }
    Ok(Part {
        figures,
        totals: work.totals(),
        shifts,
    })
}

/// Some columns of `x`, each contiguous, [`distance`] entries apart.
fn gathered<E: Entry>(
    x: ArrayView2<'_, E>,
    range: Range<usize>,
    interrupt: &Interrupt<'_>,
) -> Result<Lease, KernelError> {
    let mut buffer = Lease::new(distance(x.nrows()) * range.len());
    let view = x.slice_axis_move(Axis(1), range.into());
    gather(view, &mut buffer, interrupt)?;
    Ok(buffer)
}

/// The parts in order: sums over columns are added task by task.
fn joined(parts: Vec<Part>, draws: usize, columns: usize, quantities: usize) -> Deletions {
    let mut found = Deletions {
        figures: Array2::zeros((columns, FIGURES)),
        totals: Array2::zeros((3, draws)),
        shift: Array2::zeros((columns, quantities)),
        shift_square: Array2::zeros((columns, quantities)),
    };
    let mut column = 0;
    for part in parts {
        for (row, total) in part.totals.iter().enumerate() {
            for (sum, term) in found.totals.row_mut(row).iter_mut().zip(total) {
                *sum += term;
            }
        }
        for (index, figures) in part.figures.iter().enumerate() {
            for (target, figure) in found.figures.row_mut(column).iter_mut().zip(figures) {
                *target = *figure;
            }
            for quantity in 0..quantities {
                let (shift, square) = part.shifts.of(index, quantity);
                found.shift[(column, quantity)] = shift;
                found.shift_square[(column, quantity)] = square;
            }
            column += 1;
        }
    }
    found
}
