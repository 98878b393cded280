//! Products of weights with powers of quantities, over some draws at a time.

use super::vector::narrow::{self, ROW};
use super::vector::{Arithmetic, Work, dispatch};

/// Draws of which panels and weights lie in the nearest cache together, and whose products are summed
/// in single precision.
pub(super) const DRAWS: usize = 128;

/// Columns whose sums lie in registers, with a panel of one unit; half as many with one of two.
pub(super) const TOGETHER: usize = narrow::COLUMNS;

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
