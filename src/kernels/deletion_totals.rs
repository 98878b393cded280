//! Contributions of columns to the sums over columns, of a few columns at a time: the sums are then
//! read and written once for all of them.

use super::deletion_column::Work;
use super::deletion_pair::Settle;
use super::lease::Lease;
use super::vector::dispatch;

/// Most columns at a time, and numbers of all of them unless a single one has more.
const COLUMNS: usize = 4;
const NUMBERS: usize = 1 << 18;

/// Draws at a time.
const DRAWS: usize = 512;

/// Columns that the totals lack.
pub(super) struct Deferred {
    draws: usize,
    most: usize,
    /// Densities, column after column.
    densities: Lease,
    columns: Vec<Column>,
    /// What the draws of their tails add to what follows from the weights.
    extra: Vec<Extra>,
}

/// How weights and densities of a column enter the totals.
pub(super) struct Column {
    /// Where its weights lie.
    pub(super) place: usize,
    /// The left-out series is the first less the second times the weight.
    pub(super) constant: f64,
    pub(super) factor: f64,
    /// One over the sums of the raw weights and of the densities.
    pub(super) units: (f64, f64),
}

struct Extra {
    draw: usize,
    left_out: f64,
    raw: f64,
}

impl Deferred {
    pub(super) fn new(draws: usize) -> Self {
        let most = (NUMBERS / draws.max(1)).clamp(1, COLUMNS);
        Self {
            draws,
            most,
            densities: Lease::new(most * draws),
            columns: Vec::new(),
            extra: Vec::new(),
        }
    }

    /// Room for the densities of the next column.
    pub(super) fn next(&mut self) -> &mut [f64] {
        let start = self.columns.len() * self.draws;
        &mut self.densities[start..][..self.draws]
    }
}

impl Work<'_> {
    /// Keeps in mind the column whose tail was found last.
    pub(super) fn defer(&mut self, column: Column) {
        let draws = &self.draws;
        let ratios = draws.ratios.as_flattened().iter();
        let weights = draws
            .weights
            .as_flattened()
            .iter()
            .zip(draws.raw.as_flattened());
        let tail = draws.places.iter().zip(ratios.zip(weights));
        self.deferred
            .extra
            .extend(tail.map(|(&draw, (ratio, (weight, raw)))| Extra {
                draw,
                left_out: (ratio - 1.0) * column.constant,
                raw: (weight - raw) * column.units.0,
            }));
        self.deferred.columns.push(column);
    }

    /// Whether [`Self::settle`] is due.
    pub fn is_full(&self) -> bool {
        self.deferred.columns.len() >= self.deferred.most
    }

    /// Adds the columns that the totals lack, of which `x` holds the weights, one every `apart`
    /// entries.
    pub fn settle(&mut self, x: &[f64], apart: usize) {
        let Deferred {
            draws,
            densities,
            columns,
            extra,
            ..
        } = &mut self.deferred;
        let draws = *draws;
        for start in (0..draws).step_by(DRAWS) {
            let range = start..draws.min(start + DRAWS);
            for (column, density) in columns.iter().zip(densities.chunks(draws)) {
                dispatch(Settle {
                    weights: &x[column.place * apart..][range.clone()],
                    density: &density[range.clone()],
                    constant: column.constant,
                    factor: column.factor,
                    units: column.units,
                    equal: 1.0 / draws as f64,
                    totals: [
                        &mut self.left_out[range.clone()],
                        &mut self.raw[range.clone()],
                        &mut self.in_sample[range.clone()],
                    ],
                });
            }
        }
        for extra in extra.drain(..) {
            self.left_out[extra.draw] += extra.left_out;
            self.raw[extra.draw] += extra.raw;
        }
        columns.clear();
    }
}
