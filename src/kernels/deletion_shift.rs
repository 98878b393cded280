//! What a block of deletions does to quantities: products of their weights with the powers of the
//! quantities, in registers.

use std::ops::Range;

use ndarray::ArrayView2;

use super::deletion_loops::{LANES as SUM_LANES, tree};
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::{Arithmetic, Work, dispatch};

/// Quantities of a panel in double precision, and powers of one in single precision: lanes.
const LANES: usize = 16;
const WIDE: usize = 32;

/// Draws of which panels and weights lie in the nearest cache together, and whose squares are summed
/// in single precision.
const DRAWS: usize = 256;

/// Columns whose sums lie in registers.
const TOGETHER: usize = 4;

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

    /// Adds the shifts under weights `w` of which `x` holds `n (w − v)`, one column every `apart`
    /// entries; `shares` are the largest `w` of each.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`].
    pub fn add_shifts(
        &self,
        x: &[f64],
        apart: usize,
        shares: impl ExactSizeIterator<Item = f64>,
        shifts: &mut Shifts,
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        if self.is_empty() {
            return Ok(());
        }
        let mut block = Block::new(shares.len(), self.count);
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
            self.multiply(range, &mut block);
        }
        for (column, share) in shares.enumerate() {
            let row = (0..self.count).map(|quantity| self.one(&block, column, quantity));
            let first = shifts.found.len();
            shifts.found.extend(row);
            if share > CARRIED {
                let x = &x[column * apart..][..self.draws];
                self.sum_anew(x, &mut shifts.found[first..]);
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
}

impl Panels {
    /// The squares of one column, series by series.
    fn sum_anew(&self, x: &[f64], found: &mut [(f64, f64)]) {
        let panels = self.first.chunks(self.draws);
        for (f, found) in panels.zip(found.chunks_mut(LANES)) {
            let mut m = [0.0; LANES];
            for (m, (shift, _)) in m.iter_mut().zip(&*found) {
                *m = *shift;
            }
            let sums = dispatch(Anew {
                f,
                x,
                base: &self.base,
                m,
            });
            for ((_, square), sum) in found.iter_mut().zip(sums) {
                *square = sum / (self.draws as f64).powi(2);
            }
        }
    }
}

struct Anew<'a> {
    f: &'a [[f64; LANES]],
    x: &'a [f64],
    base: &'a [f64],
    m: [f64; LANES],
}

impl Work for Anew<'_> {
    type Output = [f64; LANES];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Self::Output {
        let mut sums = [0.0; LANES];
        for ((f, &x), &b) in self.f.iter().zip(self.x).zip(self.base) {
            for lane in 0..LANES {
                let (f, m) = (f[lane], self.m[lane]);
                let z = x * (f - m) - b * m * (A::mul_add(f, f, 1.0) / 2.0);
                sums[lane] = A::mul_add(z, z, sums[lane]);
            }
        }
        sums
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

fn add<T: Copy + Into<f64>, const W: usize>(sums: &mut [[f64; W]], terms: &[[T; W]]) {
    for (sum, &term) in sums.iter_mut().flatten().zip(terms.iter().flatten()) {
        *sum += term.into();
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

/// `Σ x f` of some columns over some draws.
struct Double<'a> {
    f: &'a [[f64; LANES]],
    x: &'a [[f64; DRAWS]; TOGETHER],
}

impl Work for Double<'_> {
    type Output = [[f64; LANES]; TOGETHER];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Self::Output {
        let mut lanes = [[0.0; LANES]; TOGETHER];
        for (s, f) in self.f.iter().enumerate() {
            for (lanes, x) in lanes.iter_mut().zip(self.x) {
                let x = x[s % DRAWS];
                for lane in 0..LANES {
                    lanes[lane] = A::mul_add(x, f[lane], lanes[lane]);
                }
            }
        }
        lanes
    }
}

/// The same in single precision.
struct Single<'a> {
    f: &'a [[f32; WIDE]],
    x: &'a [[f32; DRAWS]; TOGETHER],
}

impl Work for Single<'_> {
    type Output = [[f32; WIDE]; TOGETHER];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Self::Output {
        let mut lanes = [[0.0; WIDE]; TOGETHER];
        for (s, f) in self.f.iter().enumerate() {
            for (lanes, x) in lanes.iter_mut().zip(self.x) {
                let x = x[s % DRAWS];
                for lane in 0..WIDE {
                    lanes[lane] = A::mul_add_single(x, f[lane], lanes[lane]);
                }
            }
        }
        lanes
    }
}
