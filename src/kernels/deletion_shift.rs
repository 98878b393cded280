//! What a block of deletions does to quantities: products of their weights with the powers of the
//! quantities, in registers.

use ndarray::ArrayView2;

use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::{Arithmetic, Work, dispatch};

/// Quantities of a panel: lanes.
const LANES: usize = 16;

/// Draws of which panels and weights lie in the nearest cache together, and whose squares are summed
/// in single precision.
const DRAWS: usize = 256;

/// Columns whose sums lie in registers: those of shifts, and those of their squares.
const TOGETHER: usize = 4;
const PAIR: usize = 2;

/// Sums of a column and a quantity that squares of the series are made of.
const SQUARES: usize = 5;

/// Standardised quantities by panels of [`LANES`], draw after draw, and their powers.
pub struct Panels {
    count: usize,
    draws: usize,
    /// Panel after panel: `f`.
    first: Vec<[f64; LANES]>,
    /// Panel after panel: `f`, `f²`, `f³`.
    powers: Vec<[[f32; LANES]; 3]>,
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
        let panels = count.div_ceil(LANES);
        let mut first = vec![[0.0; LANES]; panels * draws];
        let mut powers = vec![[[0.0; LANES]; 3]; panels * draws];
        let base: Vec<f64> = weights.iter().map(|v| draws as f64 * v).collect();
        let mut own = vec![0.0; count];
        for ((s, quantity), &f) in quantities.indexed_iter() {
            let (place, lane) = (quantity / LANES * draws + s, quantity % LANES);
            first[place][lane] = f;
            for (power, value) in [f, f * f, f * f * f].into_iter().enumerate() {
                powers[place][power][lane] = value as f32;
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
        let mut found = Vec::new();
        if self.is_empty() {
            return Ok(Shifts { count: 0, found });
        }
        let panels = self.count.div_ceil(LANES);
        let mut sums = Sums::new(panels * columns.next_multiple_of(TOGETHER));
        let mut block = Block::new(columns);
        for start in (0..self.draws).step_by(DRAWS) {
            interrupt.check()?;
            let length = DRAWS.min(self.draws - start);
            dispatch(Fill {
                x,
                apart,
                base: &self.base[start..start + length],
                start,
                block: &mut block,
            });
            for panel in 0..panels {
                let rows = panel * self.draws + start;
                dispatch(Products {
                    first: &self.first[rows..rows + length],
                    powers: &self.powers[rows..rows + length],
                    block: &block,
                    sums: &mut sums,
                    panel,
                });
            }
        }
        for column in 0..columns {
            for quantity in 0..self.count {
                let place = quantity / LANES * block.columns + column;
                let lane = quantity % LANES;
                let squares = sums.squares[place].map(|sum| sum[lane]);
                let pair = (block.squares[column], block.products[column]);
                let shift = sums.first[place][lane] / self.draws as f64;
                found.push(self.finish(shift, squares, pair, quantity));
            }
        }
        Ok(Shifts {
            count: self.count,
            found,
        })
    }

    /// With `x = n (w − v)`, `b = n v` the series is `n z = x (f − m) − b m (f² + 1)/2`: in this form
    /// nothing cancels however little the weights differ from those of the base.
    fn finish(
        &self,
        m: f64,
        [xx_f, xx_ff, xb_f, xb_ff, xb_fff]: [f64; SQUARES],
        (xx, xb): (f64, f64),
        quantity: usize,
    ) -> (f64, f64) {
        let target = xx_ff - 2.0 * m * xx_f + m * m * xx;
        let both = m * (xb_fff + xb_f - m * xb_ff - m * xb);
        let square = target - both + m * m * self.own[quantity];
        (m, square.max(0.0) / (self.draws as f64).powi(2))
    }
}

/// Some draws of the weights of a block of columns, and sums over all draws so far.
struct Block {
    /// Columns, a multiple of [`TOGETHER`].
    columns: usize,
    used: usize,
    length: usize,
    /// `x`.
    first: Vec<[f64; DRAWS]>,
    /// `x²` and `x b`.
    second: Vec<[[f32; DRAWS]; 2]>,
    /// `Σ x²`, `Σ x b`.
    squares: Vec<f64>,
    products: Vec<f64>,
}

impl Block {
    fn new(used: usize) -> Self {
        let columns = used.next_multiple_of(TOGETHER);
        Self {
            columns,
            used,
            length: 0,
            first: vec![[0.0; DRAWS]; columns],
            second: vec![[[0.0; DRAWS]; 2]; columns],
            squares: vec![0.0; columns],
            products: vec![0.0; columns],
        }
    }
}

/// Sums over draws, one entry a panel and column.
struct Sums {
    first: Vec<[f64; LANES]>,
    squares: Vec<[[f64; LANES]; SQUARES]>,
}

impl Sums {
    fn new(entries: usize) -> Self {
        Self {
            first: vec![[0.0; LANES]; entries],
            squares: vec![[[0.0; LANES]; SQUARES]; entries],
        }
    }
}

struct Fill<'a> {
    x: &'a [f64],
    apart: usize,
    base: &'a [f64],
    start: usize,
    block: &'a mut Block,
}

impl Work for Fill<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let length = self.base.len();
        self.block.length = length;
        for column in 0..self.block.used {
            let x = &self.x[column * self.apart + self.start..][..length];
            self.block.first[column][..length].copy_from_slice(x);
            let [squares, products] = &mut self.block.second[column];
            let (mut xx, mut xb) = (0.0, 0.0);
            for (s, (x, b)) in x.iter().zip(self.base).enumerate() {
                squares[s] = (x * x) as f32;
                products[s] = (x * b) as f32;
                xx += x * x;
                xb += x * b;
            }
            self.block.squares[column] += xx;
            self.block.products[column] += xb;
        }
    }
}

struct Products<'a> {
    first: &'a [[f64; LANES]],
    powers: &'a [[[f32; LANES]; 3]],
    block: &'a Block,
    sums: &'a mut Sums,
    panel: usize,
}

impl Work for Products<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let (block, offset) = (self.block, self.panel * self.block.columns);
        let sums = &mut self.sums.first[offset..offset + block.columns];
        let columns = block.first.as_chunks::<TOGETHER>().0;
        for (x, sums) in columns.iter().zip(sums.as_chunks_mut::<TOGETHER>().0) {
            let mut lanes = *sums;
            for (s, f) in self.first.iter().enumerate() {
                for (lanes, x) in lanes.iter_mut().zip(x) {
                    for lane in 0..LANES {
                        lanes[lane] = A::mul_add(x[s % DRAWS], f[lane], lanes[lane]);
                    }
                }
            }
            *sums = lanes;
        }
        let sums = &mut self.sums.squares[offset..offset + block.columns];
        let columns = block.second.as_chunks::<PAIR>().0;
        for (x, sums) in columns.iter().zip(sums.as_chunks_mut::<PAIR>().0) {
            let mut lanes = [[[0.0_f32; LANES]; SQUARES]; PAIR];
            for (s, [f, ff, fff]) in self.powers.iter().enumerate() {
                for (lanes, [xx, xb]) in lanes.iter_mut().zip(x) {
                    let (xx, xb) = (xx[s % DRAWS], xb[s % DRAWS]);
                    for lane in 0..LANES {
                        lanes[0][lane] = A::mul_add_single(xx, f[lane], lanes[0][lane]);
                        lanes[1][lane] = A::mul_add_single(xx, ff[lane], lanes[1][lane]);
                        lanes[2][lane] = A::mul_add_single(xb, f[lane], lanes[2][lane]);
                        lanes[3][lane] = A::mul_add_single(xb, ff[lane], lanes[3][lane]);
                        lanes[4][lane] = A::mul_add_single(xb, fff[lane], lanes[4][lane]);
                    }
                }
            }
            for (sums, lanes) in sums.iter_mut().zip(&lanes) {
                for (sums, lanes) in sums.iter_mut().zip(lanes) {
                    for (sum, lane) in sums.iter_mut().zip(lanes) {
                        *sum += f64::from(*lane);
                    }
                }
            }
        }
    }
}
