//! Draws laid out so that the halves of chains lie side by side, eight in a row: sums over each half
//! then need no sum across a vector, and a lag is a distance of rows.

use std::ops::Range;

use super::lease::Lease;
use super::vector::transpose::{LINE, columns_to_rows, rows_to_columns};

/// Halves side by side.
pub const LANES: usize = LINE;

/// One draw of each.
pub type Row = [f64; LANES];

/// Where every draw lies. A half that ends before others, and a place without one, is filled with 0.
pub struct Layout {
    halves: Vec<Range<usize>>,
    groups: Vec<Group>,
    rows: usize,
    /// What a place without a half is filled from.
    zeros: Vec<f64>,
}

/// Up to [`LANES`] halves.
pub struct Group {
    /// Which ones.
    pub halves: Range<usize>,
    /// Their rows.
    pub rows: Range<usize>,
    /// Draws of each; places without a half have none.
    pub lengths: [usize; LANES],
    /// Rows in which all halves have a draw.
    pub full: usize,
}

impl Layout {
    /// For `halves` as [`super::long_run::chains`] gives them, which cover all draws in order.
    pub fn new(halves: Vec<Range<usize>>) -> Self {
        let (mut groups, mut rows, mut longest_idle) = (Vec::new(), 0, 0);
        for first in (0..halves.len()).step_by(LANES) {
            let of_group = first..halves.len().min(first + LANES);
            let mut lengths = [0; LANES];
            for (length, half) in lengths.iter_mut().zip(&halves[of_group.clone()]) {
                *length = half.len();
            }
            let present = &lengths[..of_group.len()];
            let longest = present.iter().copied().max().unwrap_or(0);
            if present.len() < LANES {
                longest_idle = longest;
            }
            groups.push(Group {
                full: present.iter().copied().min().unwrap_or(0),
                halves: of_group,
                rows: rows..rows + longest,
                lengths,
            });
            rows += longest;
        }
        Self {
            halves,
            groups,
            rows,
            zeros: vec![0.0; longest_idle],
        }
    }

    /// Draws without an order, in eight parts.
    pub fn unordered(draws: usize) -> Self {
        let part = draws.div_ceil(LANES).max(1);
        let starts = (0..draws).step_by(part);
        Self::new(starts.map(|start| start..draws.min(start + part)).collect())
    }

    /// The halves.
    pub fn halves(&self) -> &[Range<usize>] {
        &self.halves
    }

    /// Their groups.
    pub fn groups(&self) -> &[Group] {
        &self.groups
    }

    /// Entries of a series in rows.
    pub fn entries(&self) -> usize {
        self.rows * LANES
    }

    /// Draws.
    pub fn draws(&self) -> usize {
        self.halves.last().map_or(0, |half| half.end)
    }

    /// Writes `series`, shape `(n,)`, into `rows`, of [`Self::entries`] numbers.
    pub fn place(&self, series: &[f64], rows: &mut [f64]) {
        for group in &self.groups {
            let into = &mut rows[group.rows.start * LANES..group.rows.end * LANES];
            let mut halves = [&self.zeros[..]; LANES];
            for (lane, half) in self.halves[group.halves.clone()].iter().enumerate() {
                halves[lane] = &series[half.clone()];
            }
            let done = rows_to_columns(halves, into, LANES);
            for (row, target) in into.chunks_mut(LANES).enumerate().skip(done) {
                for (target, half) in target.iter_mut().zip(&halves) {
                    *target = half.get(row).copied().unwrap_or(0.0);
                }
            }
        }
    }

    /// The series that [`Self::place`] placed.
    pub fn restored(&self, rows: &[f64]) -> Lease {
        let mut series = Lease::new(self.draws());
        let mut rest = &mut series[..];
        for group in &self.groups {
            let from = &rows[group.rows.start * LANES..group.rows.end * LANES];
            let mut halves: [&mut [f64]; LANES] = std::array::from_fn(|_| &mut [][..]);
            for (half, length) in halves.iter_mut().zip(group.lengths) {
                let (front, behind) = rest.split_at_mut(length);
                (*half, rest) = (front, behind);
            }
            let done = columns_to_rows(from, LANES, halves.each_mut().map(|half| &mut **half));
            for (row, entries) in from.chunks(LANES).enumerate().skip(done) {
                for (half, entry) in halves.iter_mut().zip(entries) {
                    if let Some(target) = half.get_mut(row) {
                        *target = *entry;
                    }
                }
            }
        }
        series
    }
}
