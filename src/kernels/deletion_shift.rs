//! What a block of deletions does to quantities: products of their weights with the powers of the
//! quantities, in registers.

use ndarray::ArrayView2;

use super::deletion_fill::{Block, Fill};
use super::deletion_products::{self as products, DRAWS, Sums};
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::dispatch;

/// Standardised quantities and their powers.
pub struct Panels {
    count: usize,
    draws: usize,
    /// `f`.
    first: products::Panels<f64>,
    /// All `f`, then all `f²`.
    powers: products::Panels<f32>,
    /// All `n v f g`, then all `n v g`, with `g = (f² + 1)/2`.
    of_base: products::Panels<f32>,
    /// `n v`.
    base: Vec<f64>,
    /// `Σ (n v g)²`.
    own: Vec<f64>,
    /// `f` and `n v g`, draw after draw.
    draw_by_draw: Vec<(f64, f64)>,
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

/// Sums over draws of a block of columns.
struct Found {
    first: Sums,
    powers: Sums,
    of_base: Sums,
    squares: Vec<f64>,
    large: Vec<(usize, usize, f64)>,
}

impl Panels {
    /// Panels of `quantities`, `(n, P)`, for base weights `(n,)`.
    pub fn new(quantities: ArrayView2<'_, f64>, weights: &[f64]) -> Self {
        let (draws, count) = quantities.dim();
        let base: Vec<f64> = weights.iter().map(|v| draws as f64 * v).collect();
        let middle = |f: f64| (f * f + 1.0) / 2.0;
        let mut own = vec![0.0; count];
        let mut draw_by_draw = Vec::with_capacity(draws * count);
        for ((s, quantity), &f) in quantities.indexed_iter() {
            own[quantity] += (base[s] * middle(f)).powi(2);
            draw_by_draw.push((f, base[s] * middle(f)));
        }
        let entry = |s: usize, place: usize| {
            let f = quantities[(s, place % count)];
            (f, base[s] * middle(f), place < count)
        };
        Self {
            count,
            draws,
            first: products::Panels::new(draws, count, |s, place| quantities[(s, place)]),
            powers: products::Panels::new(draws, 2 * count, |s, place| match entry(s, place) {
                (f, _, true) => f,
                (f, _, false) => f * f,
            }),
            of_base: products::Panels::new(draws, 2 * count, |s, place| match entry(s, place) {
                (f, g, true) => f * g,
                (_, g, false) => g,
            }),
            base,
            own,
            draw_by_draw,
        }
    }

    /// Whether there are no quantities.
    pub fn is_empty(&self) -> bool {
        self.count == 0
    }

    /// Adds the shifts under weights that are those in `weights`, one column every `apart` entries,
    /// times a scale such that their mean is 1; with it comes the largest share of a draw.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`].
    pub fn add_shifts(
        &self,
        weights: &[f64],
        apart: usize,
        scales: &[(f64, f64)],
        shifts: &mut Shifts,
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        if self.is_empty() {
            return Ok(());
        }
        let sums = self.sums(weights, apart, scales, interrupt)?;
        let mut apart = vec![Vec::new(); scales.len()];
        for &(column, draw, x) in &sums.large {
            apart[column].push((draw, x));
        }
        for (column, large) in apart.iter().enumerate() {
            let row = (0..self.count).map(|quantity| self.one(&sums, column, quantity, large));
            shifts.found.extend(row);
        }
        Ok(())
    }

    fn sums(
        &self,
        weights: &[f64],
        apart: usize,
        scales: &[(f64, f64)],
        interrupt: &Interrupt<'_>,
    ) -> Result<Found, KernelError> {
        let mut block = Block::new(scales.len());
        let mut first = self.first.sums(block.columns());
        let mut powers = self.powers.sums(block.columns());
        let mut of_base = self.of_base.sums(block.columns());
        for start in (0..self.draws).step_by(DRAWS) {
            interrupt.check()?;
            dispatch(Fill {
                weights,
                apart,
                scales,
                start,
                draws: self.draws,
                base: &self.base[start..self.draws.min(start + DRAWS)],
                block: &mut block,
            });
            self.first.multiply(start, &block.x, &mut first);
            self.powers.multiply(start, &block.square, &mut powers);
            self.of_base.multiply(start, &block.single, &mut of_base);
        }
        Ok(Found {
            first,
            powers,
            of_base,
            squares: block.squares,
            large: block.large,
        })
    }

    /// With `x = n (w − v)` the series is `n z = x (f − m) − m n v (f² + 1)/2`: in this form nothing
    /// cancels however little the weights differ from those of the base.
    /// Draws with `large` shares are not in the sums of powers.
    fn one(
        &self,
        sums: &Found,
        column: usize,
        quantity: usize,
        large: &[(usize, f64)],
    ) -> (f64, f64) {
        let second = self.count + quantity;
        let m = sums.first.of(quantity, column) / self.draws as f64;
        let (f, f_squared) = (
            sums.powers.of(quantity, column),
            sums.powers.of(second, column),
        );
        let (f_base, base) = (
            sums.of_base.of(quantity, column),
            sums.of_base.of(second, column),
        );
        let target = f_squared - 2.0 * m * f + m * m * sums.squares[column];
        let both = 2.0 * m * (f_base - m * base);
        let (mut own, mut alone) = (self.own[quantity], 0.0);
        for &(draw, x) in large {
            let (f, g) = self.draw_by_draw[draw * self.count + quantity];
            own -= g * g;
            alone += (x * (f - m) - m * g).powi(2);
        }
        let square = (target - both + m * m * own).max(0.0) + alone;
        (m, square / (self.draws as f64).powi(2))
    }
}
