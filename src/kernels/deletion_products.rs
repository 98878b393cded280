//! Products of weights with powers of quantities, over some draws at a time.

use super::deletion_loops::LANES;
use super::vector::narrow::{self, ROW};
use super::vector::select::at_least;
use super::vector::{Arithmetic, Work, dispatch, tree};

/// Draws of which panels and weights lie in the nearest cache together, and whose products are summed
/// in single precision.
pub(super) const DRAWS: usize = 128;

/// Columns whose sums lie in registers, with a panel of one unit; half as many with one of two.
const TOGETHER: usize = narrow::COLUMNS;

/// Bytes of half a row of a panel, which has one or two halves.
const UNIT: usize = 64;

/// A number that products are summed in.
pub(super) trait Number: Copy + Into<f64> {
    const ZERO: Self;
    fn mul_add<A: Arithmetic>(a: Self, b: Self, c: Self) -> Self;
    fn rounded(x: f64) -> Self;
    /// Adds products with a panel of `width` entries.
    fn add(width: usize, f: &[Self], x: &[[Self; DRAWS]], sums: &mut [f64]);
}

impl Number for f64 {
    const ZERO: Self = 0.0;

    #[inline(always)]
    fn mul_add<A: Arithmetic>(a: Self, b: Self, c: Self) -> Self {
        A::mul_add(a, b, c)
    }

    fn rounded(x: f64) -> Self {
        x
    }

    fn add(width: usize, f: &[Self], x: &[[Self; DRAWS]], sums: &mut [f64]) {
        if width == 8 {
            each::<Self, 8, TOGETHER>(x, sums, |x| dispatch(Products { f, x }));
        } else {
            each::<Self, 16, { TOGETHER / 2 }>(x, sums, |x| dispatch(Products { f, x }));
        }
    }
}

impl Number for f32 {
    const ZERO: Self = 0.0;

    #[inline(always)]
    fn mul_add<A: Arithmetic>(a: Self, b: Self, c: Self) -> Self {
        A::mul_add_single(a, b, c)
    }

    fn rounded(x: f64) -> Self {
        x as f32
    }

    fn add(width: usize, f: &[Self], x: &[[Self; DRAWS]], sums: &mut [f64]) {
        if width == ROW {
            let f = f.as_chunks().0;
            each::<Self, ROW, TOGETHER>(x, sums, |x| narrow::products(f, x));
        } else {
            each::<Self, 32, { TOGETHER / 2 }>(x, sums, |x| dispatch(Products { f, x }));
        }
    }
}

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
        let unit = UNIT / size_of::<T>();
        let width = 2 * unit;
        let panel = |first: usize| {
            let used = width.min(entries - first);
            let padded = used.next_multiple_of(unit);
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
            T::add(width, f, x, sums);
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

/// Adds what `products` finds of `C` columns at a time.
fn each<T: Number, const W: usize, const C: usize>(
    x: &[[T; DRAWS]],
    sums: &mut [f64],
    products: impl Fn(&[[T; DRAWS]; C]) -> [[T; W]; C],
) {
    let parts = x.as_chunks::<C>().0.iter();
    for (x, sums) in parts.zip(sums.chunks_mut(C * W)) {
        let terms = &products(x);
        dispatch(Add {
            sums,
            terms: terms.as_flattened(),
        });
    }
}

/// `Σ x f` of `C` columns over some draws, rows of `W` entries.
struct Products<'a, T, const W: usize, const C: usize> {
    f: &'a [T],
    x: &'a [[T; DRAWS]; C],
}

impl<T: Number, const W: usize, const C: usize> Work for Products<'_, T, W, C> {
    type Output = [[T; W]; C];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Self::Output {
        let mut lanes = [[T::ZERO; W]; C];
        for (s, f) in self.f.as_chunks::<W>().0.iter().enumerate() {
            for (lanes, x) in lanes.iter_mut().zip(self.x) {
                let x = x[s % DRAWS];
                for lane in 0..W {
                    lanes[lane] = T::mul_add::<A>(x, f[lane], lanes[lane]);
                }
            }
        }
        lanes
    }
}

/// Adds terms. A loop of its own: with it in one, sums of products would not stay in registers.
struct Add<'a, T> {
    sums: &'a mut [f64],
    terms: &'a [T],
}

impl<T: Number> Work for Add<'_, T> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (sum, term) in self.sums.iter_mut().zip(self.terms) {
            *sum += (*term).into();
        }
    }
}

/// Share of a draw from which on its square is formed by itself, in columns where some draw has one
/// of [`CARRIED`]: where few draws carry a shift it lies close to their own values, and sums of powers
/// would cancel.
const LARGE: f64 = 0.01;
const CARRIED: f64 = 0.05;

/// Some draws of `x = n (w − v)` of a block of columns: themselves; in single precision without those
/// of large shares; these squared; and sums of squares over all draws so far.
pub(super) struct Block {
    used: usize,
    pub(super) x: Vec<[f64; DRAWS]>,
    pub(super) single: Vec<[f32; DRAWS]>,
    pub(super) square: Vec<[f32; DRAWS]>,
    pub(super) squares: Vec<f64>,
    /// Column, draw and `x` of draws with large shares.
    pub(super) large: Vec<(usize, usize, f64)>,
    places: Vec<u32>,
}

impl Block {
    pub(super) fn new(used: usize) -> Self {
        let columns = used.next_multiple_of(TOGETHER);
        Self {
            used,
            x: vec![[0.0; DRAWS]; columns],
            single: vec![[0.0; DRAWS]; columns],
            square: vec![[0.0; DRAWS]; columns],
            squares: vec![0.0; columns],
            large: Vec::new(),
            places: Vec::new(),
        }
    }

    /// Room for columns that are worked on together.
    pub(super) fn columns(&self) -> usize {
        self.x.len()
    }
}

/// Takes some draws from `start` on, those of `base`.
pub(super) struct Fill<'a> {
    pub(super) weights: &'a [f64],
    pub(super) apart: usize,
    /// What weights are multiplied by, and the largest share.
    pub(super) scales: &'a [(f64, f64)],
    pub(super) start: usize,
    pub(super) draws: usize,
    pub(super) base: &'a [f64],
    pub(super) block: &'a mut Block,
}

impl Work for Fill<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let block = self.block;
        let length = self.base.len().min(DRAWS);
        for column in 0..block.used {
            let weights = &self.weights[column * self.apart + self.start..][..length];
            let x = &mut block.x[column];
            let (scale, share) = self.scales[column];
            for ((x, weight), b) in x.iter_mut().zip(weights).zip(self.base) {
                *x = A::mul_add(scale, *weight, -b);
            }
            x[length..].fill(0.0);
            let (single, square) = (&mut block.single[column], &mut block.square[column]);
            if share > CARRIED {
                let least = LARGE * self.draws as f64 / scale;
                let mut rest = *x;
                block.places.clear();
                at_least(weights, 1.0, least, &mut block.places);
                for draw in block.places.iter().map(|&place| place as usize) {
                    block.large.push((column, self.start + draw, rest[draw]));
                    rest[draw] = 0.0;
                }
                block.squares[column] += narrowed::<A>(&rest, single, square);
            } else {
                block.squares[column] += narrowed::<A>(x, single, square);
            }
        }
    }
}

/// Writes `x` and `x²` in single precision; `Σ x²`.
#[inline(always)]
fn narrowed<A: Arithmetic>(
    x: &[f64; DRAWS],
    single: &mut [f32; DRAWS],
    square: &mut [f32; DRAWS],
) -> f64 {
    for ((single, square), x) in single.iter_mut().zip(square).zip(x) {
        *single = *x as f32;
        *square = (x * x) as f32;
    }
    let mut squares = [0.0; LANES];
    for x in x.as_chunks::<LANES>().0 {
        for lane in 0..LANES {
            squares[lane] = A::mul_add(x[lane], x[lane], squares[lane]);
        }
    }
    tree(squares)
}
