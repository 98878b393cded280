//! Products of weights with powers of quantities, over a few hundred draws at a time.

use super::deletion_loops::LANES as SUM_LANES;
use super::deletion_shift::{DRAWS, LANES, TOGETHER, WIDE};
use super::vector::{Arithmetic, Work, tree};

/// Some draws of the weights of a block of columns, and sums over all draws so far.
pub(super) struct Block {
    pub(super) used: usize,
    /// `x`, `x²` and `x b` of so many columns at a time, and these of every draw.
    pub(super) x: Vec<[f64; DRAWS]>,
    pub(super) xx: Vec<[f32; DRAWS]>,
    pub(super) xb: Vec<[f32; DRAWS]>,
    /// `Σ x f`; `Σ x² f`, `Σ x² f²`; `Σ x b f` and so on to `f³`.
    pub(super) first: Sums<LANES>,
    pub(super) squares: Sums<WIDE>,
    pub(super) products: Sums<WIDE>,
    /// `Σ x²` and `Σ x b`.
    pub(super) alone: Vec<(f64, f64)>,
}

impl Block {
    pub(super) fn new(used: usize, quantities: usize) -> Self {
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
pub(super) struct Sums<const W: usize> {
    pub(super) columns: usize,
    pub(super) lanes: Vec<[f64; W]>,
}

impl<const W: usize> Sums<W> {
    pub(super) fn new(columns: usize, entries: usize) -> Self {
        Self {
            columns,
            lanes: vec![[0.0; W]; entries.div_ceil(W) * columns],
        }
    }

    pub(super) fn of(&self, entry: usize, column: usize) -> f64 {
        self.lanes[entry / W * self.columns + column][entry % W]
    }
}

/// Adds sums over some draws.
pub(super) fn add<T: Copy + Into<f64>, const W: usize>(sums: &mut [[f64; W]], terms: &[[T; W]]) {
    for (sum, &term) in sums.iter_mut().flatten().zip(terms.iter().flatten()) {
        *sum += term.into();
    }
}

pub(super) struct Fill<'a> {
    pub(super) x: &'a [f64],
    pub(super) apart: usize,
    pub(super) scales: &'a [(f64, f64)],
    pub(super) start: usize,
    pub(super) base: &'a [f64],
    pub(super) block: &'a mut Block,
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
            let mut b = [0.0; DRAWS];
            b[..length].copy_from_slice(&self.base[..length]);
            for ((x, weight), b) in x.iter_mut().zip(source).zip(&b) {
                *x = A::mul_add(self.scales[column].0, *weight, -b);
            }
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
pub(super) struct Double<'a> {
    pub(super) f: &'a [[f64; LANES]],
    pub(super) x: &'a [[f64; DRAWS]; TOGETHER],
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
pub(super) struct Single<'a> {
    pub(super) f: &'a [[f32; WIDE]],
    pub(super) x: &'a [[f32; DRAWS]; TOGETHER],
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

pub(super) struct Anew<'a> {
    pub(super) f: &'a [[f64; LANES]],
    pub(super) x: &'a [f64],
    pub(super) scale: f64,
    pub(super) base: &'a [f64],
    pub(super) m: [f64; LANES],
}

impl Work for Anew<'_> {
    type Output = [f64; LANES];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Self::Output {
        let mut sums = [0.0; LANES];
        for ((f, &weight), &b) in self.f.iter().zip(self.x).zip(self.base) {
            let x = A::mul_add(self.scale, weight, -b);
            for lane in 0..LANES {
                let (f, m) = (f[lane], self.m[lane]);
                let z = x * (f - m) - b * m * (A::mul_add(f, f, 1.0) / 2.0);
                sums[lane] = A::mul_add(z, z, sums[lane]);
            }
        }
        sums
    }
}
