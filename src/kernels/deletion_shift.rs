//! What a block of deletions does to quantities: products of their weights with the powers of the
//! quantities, in registers.

use std::ops::Range;

use ndarray::ArrayView2;

use super::deletion_products::{Anew, Block, Double, Fill, Single, add};
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::dispatch;

/// Quantities of a panel in double precision, and powers of one in single precision: lanes.
pub(super) const LANES: usize = 16;
pub(super) const WIDE: usize = 32;

/// Draws of which panels and weights lie in the nearest cache together, and whose squares are summed
/// in single precision.
pub(super) const DRAWS: usize = 256;

/// Columns whose sums lie in registers.
pub(super) const TOGETHER: usize = 4;

/// Largest share of a draw from which on squares are summed anew in double precision: where few draws
/// carry a shift it lies close to their own values, and sums of powers would cancel.
const CARRIED: f64 = 0.05;

/// Standardised quantities by panels, draw after draw, and their powers.
pub struct Panels {
    count: usize,
    draws: usize,
    /// Panel after panel: `f`.
    first: Vec<[f64; LANES]>,
    /// Panel after panel: all `f`, then all `f²`, then all `f³`.
    powers: Vec<[f32; WIDE]>,
    /// `n v`.
    base: Vec<f64>,
    /// `Σ (n v)² (f² + 1)²/4`.
    own: Vec<f64>,
}

/// Shifts of a block of columns, and the squares of their series.
pub struct Shifts {
    count: usize,
    found: Vec<(f64, f64)>,
}

impl Shifts {
    /// Those of no column yet.
    pub fn none(panels: &Panels) -> Self {
        Self {
            count: panels.count,
            found: Vec::new(),
        }
    }

    /// `Σ w f`, and `Σ z²`.
    pub fn of(&self, column: usize, quantity: usize) -> (f64, f64) {
        self.found[column * self.count + quantity]
    }
}

impl Panels {
    /// Panels of `quantities`, `(n, P)`, for base weights `(n,)`.
    pub fn new(quantities: ArrayView2<'_, f64>, weights: &[f64]) -> Self {
        let (draws, count) = quantities.dim();
        let mut first = vec![[0.0; LANES]; count.div_ceil(LANES) * draws];
        let mut powers = vec![[0.0; WIDE]; (3 * count).div_ceil(WIDE) * draws];
        let base: Vec<f64> = weights.iter().map(|v| draws as f64 * v).collect();
        let mut own = vec![0.0; count];
        for ((s, quantity), &f) in quantities.indexed_iter() {
            first[quantity / LANES * draws + s][quantity % LANES] = f;
            for (power, value) in [f, f * f, f * f * f].into_iter().enumerate() {
                let place = power * count + quantity;
                powers[place / WIDE * draws + s][place % WIDE] = value as f32;
            }
            own[quantity] += (base[s] * (f * f + 1.0) / 2.0).powi(2);
        }
        Self {
            count,
            draws,
            first,
            powers,
            base,
            own,
        }
    }

    /// Whether there are no quantities.
    pub fn is_empty(&self) -> bool {
        self.count == 0
    }

    /// Adds the shifts under weights that are those in `x`, one column every `apart` entries, times a
    /// scale such that their mean is 1; with it comes the largest share of a draw.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`].
    pub fn add_shifts(
        &self,
        x: &[f64],
        apart: usize,
        scales: &[(f64, f64)],
        shifts: &mut Shifts,
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        if self.is_empty() {
            return Ok(());
        }
        let mut block = Block::new(scales.len(), self.count);
        for start in (0..self.draws).step_by(DRAWS) {
            interrupt.check()?;
            let range = start..self.draws.min(start + DRAWS);
            dispatch(Fill {
                x,
                apart,
                scales,
                start,
                base: &self.base[range.clone()],
                block: &mut block,
            });
            self.multiply(range, &mut block);
        }
        for (column, &(scale, share)) in scales.iter().enumerate() {
            let row = (0..self.count).map(|quantity| self.one(&block, column, quantity));
            let first = shifts.found.len();
            shifts.found.extend(row);
            if share > CARRIED {
                let x = &x[column * apart..][..self.draws];
                self.sum_anew(x, scale, &mut shifts.found[first..]);
            }
        }
        Ok(())
    }

    /// Adds some draws to the sums of a block.
    fn multiply(&self, range: Range<usize>, block: &mut Block) {
        let rows = |panel: usize| {
            let begin = panel * self.draws;
            begin + range.start..begin + range.end
        };
        let columns = block.first.columns;
        for (panel, sums) in block.first.lanes.chunks_mut(columns).enumerate() {
            let f = &self.first[rows(panel)];
            let parts = block.x.as_chunks().0.iter();
            for (x, sums) in parts.zip(sums.chunks_mut(TOGETHER)) {
                add(sums, &dispatch(Double { f, x }));
            }
        }
        for (x, sums) in [
            (&block.xx, &mut block.squares),
            (&block.xb, &mut block.products),
        ] {
            for (panel, sums) in sums.lanes.chunks_mut(columns).enumerate() {
                let f = &self.powers[rows(panel)];
                for (x, sums) in x.as_chunks().0.iter().zip(sums.chunks_mut(TOGETHER)) {
                    add(sums, &dispatch(Single { f, x }));
                }
            }
        }
    }

    /// With `x = n (w − v)`, `b = n v` the series is `n z = x (f − m) − b m (f² + 1)/2`: in this form
    /// nothing cancels however little the weights differ from those of the base.
    fn one(&self, block: &Block, column: usize, quantity: usize) -> (f64, f64) {
        let squares = |power: usize| block.squares.of(power * self.count + quantity, column);
        let products = |power: usize| block.products.of(power * self.count + quantity, column);
        let (xx, xb) = block.alone[column];
        let m = block.first.of(quantity, column) / self.draws as f64;
        let target = squares(1) - 2.0 * m * squares(0) + m * m * xx;
        let both = m * (products(2) + products(0) - m * products(1) - m * xb);
        let square = target - both + m * m * self.own[quantity];
        (m, square.max(0.0) / (self.draws as f64).powi(2))
    }

    /// The squares of one column, series by series.
    fn sum_anew(&self, x: &[f64], scale: f64, found: &mut [(f64, f64)]) {
        let panels = self.first.chunks(self.draws);
        for (f, found) in panels.zip(found.chunks_mut(LANES)) {
            let mut m = [0.0; LANES];
            for (m, (shift, _)) in m.iter_mut().zip(&*found) {
                *m = *shift;
            }
            let sums = dispatch(Anew {
                f,
                x,
                scale,
                base: &self.base,
                m,
            });
            for ((_, square), sum) in found.iter_mut().zip(sums) {
                *square = sum / (self.draws as f64).powi(2);
            }
        }
    }
}
