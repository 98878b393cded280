//! What a block of deletions does to quantities: products of their weights with the powers of the
//! quantities, in registers.

use std::ops::Range;

use ndarray::ArrayView2;

use super::deletion_loops::{LANES as SUM_LANES, tree};
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::{Arithmetic, Work, dispatch};

/// Quantities of a panel in double precision, and powers of one in single precision: lanes.
const LANES: usize = 8;
const WIDE: usize = 16;

/// Draws of which panels and weights lie in the nearest cache together, and whose squares are summed
/// in single precision.
const DRAWS: usize = 256;

/// Columns whose sums lie in registers.
const TOGETHER: usize = 8;

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

    /// Shifts under weights `w` of which `x` holds `n (w − v)`, one column every `apart` entries.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`].
    pub fn shifts(
        &self,
        x: &[f64],
        apart: usize,
        columns: usize,
        interrupt: &Interrupt<'_>,
    ) -> Result<Shifts, KernelError> {
        if self.is_empty() {
            let found = Vec::new();
            return Ok(Shifts { count: 0, found });
        }
        let mut block = Block::new(columns, self.count);
        for start in (0..self.draws).step_by(DRAWS) {
            interrupt.check()?;
            let range = start..self.draws.min(start + DRAWS);
            dispatch(Fill {
                x,
                apart,
                start,
                base: &self.base[range.clone()],
                block: &mut block,
            });
            dispatch(Products {
                panels: self,
                range,
                block: &mut block,
            });
        }
        let mut found = Vec::with_capacity(columns * self.count);
        for column in 0..columns {
            found.extend((0..self.count).map(|quantity| self.one(&block, column, quantity)));
        }
        let count = self.count;
        Ok(Shifts { count, found })
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
}

/// Some draws of the weights of a block of columns, and sums over all draws so far.
struct Block {
    used: usize,
    /// `x`, `x²` and `x b` of so many columns at a time, and these of every draw.
    x: Vec<[f64; DRAWS]>,
    xx: Vec<[f32; DRAWS]>,
    xb: Vec<[f32; DRAWS]>,
    /// `Σ x f`; `Σ x² f`, `Σ x² f²`; `Σ x b f` and so on to `f³`.
    first: Sums<LANES>,
    squares: Sums<WIDE>,
    products: Sums<WIDE>,
    /// `Σ x²` and `Σ x b`.
    alone: Vec<(f64, f64)>,
}

impl Block {
    fn new(used: usize, quantities: usize) -> Self {
        let columns = used.next_multiple_of(TOGETHER);
        Self {
            used,
            x: vec![[0.0; DRAWS]; columns],
            xx: vec![[0.0; DRAWS]; columns],
            xb: vec![[0.0; DRAWS]; columns],
            first: Sums::new(columns, quantities),
            squares: Sums::new(columns, 2 * quantities),
            products: Sums::new(columns, 3 * quantities),
            alone: vec![(0.0, 0.0); columns],
        }
    }
}

/// Sums over draws, panel after panel and column after column.
struct Sums<const W: usize> {
    columns: usize,
    lanes: Vec<[f64; W]>,
}

impl<const W: usize> Sums<W> {
    fn new(columns: usize, entries: usize) -> Self {
        Self {
            columns,
            lanes: vec![[0.0; W]; entries.div_ceil(W) * columns],
        }
    }

    fn of(&self, entry: usize, column: usize) -> f64 {
        self.lanes[entry / W * self.columns + column][entry % W]
    }
}

struct Fill<'a> {
    x: &'a [f64],
    apart: usize,
    start: usize,
    base: &'a [f64],
    block: &'a mut Block,
}

impl Work for Fill<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let length = self.base.len().min(DRAWS);
        for column in 0..self.block.used {
            let source = &self.x[column * self.apart + self.start..][..length];
            let x = &mut self.block.x[column];
            *x = [0.0; DRAWS];
            x[..length].copy_from_slice(source);
            let mut b = [0.0; DRAWS];
            b[..length].copy_from_slice(&self.base[..length]);
            let (xx, xb) = (&mut self.block.xx[column], &mut self.block.xb[column]);
            let [mut squares, mut products] = [[0.0; SUM_LANES]; 2];
            for start in (0..DRAWS).step_by(SUM_LANES) {
                for lane in 0..SUM_LANES {
                    let (x, b) = (x[start + lane], b[start + lane]);
                    xx[start + lane] = (x * x) as f32;
                    xb[start + lane] = (x * b) as f32;
                    squares[lane] = A::mul_add(x, x, squares[lane]);
                    products[lane] = A::mul_add(x, b, products[lane]);
                }
            }
            self.block.alone[column].0 += tree(squares);
            self.block.alone[column].1 += tree(products);
        }
    }
}

struct Products<'a> {
    panels: &'a Panels,
    range: Range<usize>,
    block: &'a mut Block,
}

impl Work for Products<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let Block {
            x,
            xx,
            xb,
            first,
            squares,
            products,
            ..
        } = self.block;
        let rows = |panel: usize| {
            let begin = panel * self.panels.draws;
            begin + self.range.start..begin + self.range.end
        };
        let columns = first.columns;
        for (panel, sums) in first.lanes.chunks_mut(columns).enumerate() {
            double::<A>(&self.panels.first[rows(panel)], x, sums);
        }
        for (panel, sums) in squares.lanes.chunks_mut(columns).enumerate() {
            single::<A>(&self.panels.powers[rows(panel)], xx, sums);
        }
        for (panel, sums) in products.lanes.chunks_mut(columns).enumerate() {
            single::<A>(&self.panels.powers[rows(panel)], xb, sums);
        }
    }
}

/// `Σ x f` over some draws, added to the sums of a panel.
#[inline(always)]
fn double<A: Arithmetic>(f: &[[f64; LANES]], x: &[[f64; DRAWS]], sums: &mut [[f64; LANES]]) {
    let columns = x.as_chunks::<TOGETHER>().0;
    for (x, sums) in columns.iter().zip(sums.as_chunks_mut::<TOGETHER>().0) {
        let mut lanes = *sums;
        for (s, f) in f.iter().enumerate() {
            for column in 0..TOGETHER {
                for lane in 0..LANES {
                    let sum = lanes[column][lane];
                    lanes[column][lane] = A::mul_add(x[column][s % DRAWS], f[lane], sum);
                }
            }
        }
        *sums = lanes;
    }
}

/// The same in single precision.
#[inline(always)]
fn single<A: Arithmetic>(f: &[[f32; WIDE]], x: &[[f32; DRAWS]], sums: &mut [[f64; WIDE]]) {
    let columns = x.as_chunks::<TOGETHER>().0;
    for (x, sums) in columns.iter().zip(sums.as_chunks_mut::<TOGETHER>().0) {
        let mut lanes = [[0.0; WIDE]; TOGETHER];
        for (s, f) in f.iter().enumerate() {
            for column in 0..TOGETHER {
                for lane in 0..WIDE {
                    let sum = lanes[column][lane];
                    lanes[column][lane] = A::mul_add_single(x[column][s % DRAWS], f[lane], sum);
                }
            }
        }
        for (sums, lanes) in sums.iter_mut().zip(&lanes) {
            for (sum, lane) in sums.iter_mut().zip(lanes) {
                *sum += f64::from(*lane);
            }
        }
    }
}
