//! Products of weights with powers of quantities, over some draws at a time.

use super::vector::panel::{self, MOST_UNITS, Number};

/// Draws of which panels and weights lie in the nearest cache together, and whose products are summed
/// in single precision.
pub(super) const DRAWS: usize = 128;

/// Columns whose sums lie in registers.
pub(super) const TOGETHER: usize = panel::COLUMNS;

/// A matrix `(n, entries)` by panels of some entries, draw after draw.
pub(super) struct Panels<T> {
    draws: usize,
    /// Entries of all panels but the last, which may have fewer.
    width: usize,
    panels: Vec<Panel<T>>,
}

struct Panel<T> {
    width: usize,
    values: Vec<T>,
}

impl<T: Number> Panels<T> {
    /// The matrix whose entries `value(draw, entry)` gives.
    pub(super) fn new(draws: usize, entries: usize, value: impl Fn(usize, usize) -> f64) -> Self {
        let width = MOST_UNITS * T::UNIT;
        let panel = |first: usize| {
            let used = width.min(entries - first);
            let padded = used.next_multiple_of(T::UNIT);
            let mut values = vec![T::ZERO; draws * padded];
            for (s, row) in values.chunks_mut(padded).enumerate() {
                for (place, target) in row.iter_mut().enumerate().take(used) {
                    *target = T::rounded(value(s, first + place));
                }
            }
            Panel {
                width: padded,
                values,
            }
        };
        Self {
            draws,
            width,
            panels: (0..entries).step_by(width).map(panel).collect(),
        }
    }

    /// Adds the products of some draws from `start` on, for every so many columns.
    pub(super) fn multiply(&self, start: usize, x: &[[T; DRAWS]], sums: &mut Sums) {
        let end = self.draws.min(start + DRAWS);
        for (panel, sums) in self.panels.iter().zip(&mut sums.panels) {
            let width = panel.width;
            let f = &panel.values[start * width..end * width];
            T::add(width / T::UNIT, f, x, sums);
        }
    }

    /// No sums yet, for so many columns.
    pub(super) fn sums(&self, columns: usize) -> Sums {
        let zeros = |panel: &Panel<T>| vec![0.0; panel.width * columns];
        Sums {
            width: self.width,
            columns,
            panels: self.panels.iter().map(zeros).collect(),
        }
    }
}

/// Sums over draws, panel after panel and column after column.
pub(super) struct Sums {
    width: usize,
    columns: usize,
    panels: Vec<Vec<f64>>,
}

impl Sums {
    pub(super) fn of(&self, entry: usize, column: usize) -> f64 {
        let sums = &self.panels[entry / self.width];
        sums[column * (sums.len() / self.columns) + entry % self.width]
    }
}
