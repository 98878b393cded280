//! Sums of products of columns with the rows of a panel, whole vectors of which stay in registers: a
//! compiler would go along the draws instead and collect its numbers one by one.

use super::{Arithmetic, Work, dispatch};

/// Columns that are worked on together.
pub const COLUMNS: usize = 8;

/// Most vectors of a row.
pub const MOST_UNITS: usize = 3;

/// A number that products are summed in.
pub trait Number: Copy + Into<f64> {
    /// Nothing.
    const ZERO: Self;

    /// Numbers of a vector of 64 bytes.
    const UNIT: usize;

    /// `a·b + c`.
    fn mul_add<A: Arithmetic>(a: Self, b: Self, c: Self) -> Self;

    /// The nearest to `x`.
    fn rounded(x: f64) -> Self;

    /// `Σ_s x_s f_s` for rows `f_s` of `U` vectors, `W` numbers, and every column `x`, of which there
    /// are as many numbers at least.
    fn products<const U: usize, const W: usize, const N: usize>(
        f: &[[Self; W]],
        x: &[[Self; N]; COLUMNS],
    ) -> [[Self; W]; COLUMNS];

    /// Adds the products of [`COLUMNS`] columns at a time with rows of so many vectors, up to
    /// [`MOST_UNITS`]; sums column after column.
    fn add<const N: usize>(units: usize, f: &[Self], x: &[[Self; N]], sums: &mut [f64]);
}

/// Adds the products with rows of `U` vectors, `W` numbers, of some columns at a time.
fn add<T: Number, const U: usize, const W: usize, const N: usize>(
    f: &[T],
    x: &[[T; N]],
    sums: &mut [f64],
) {
    let f = f.as_chunks::<W>().0;
    let parts = x.as_chunks::<COLUMNS>().0.iter();
    for (x, sums) in parts.zip(sums.chunks_mut(COLUMNS * W)) {
        let terms = &T::products::<U, W, N>(f, x);
        dispatch(Add {
            sums,
            terms: terms.as_flattened(),
        });
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

/// The loop of [`Number::products`] for other processors.
pub struct Products<'a, T, const W: usize, const N: usize> {
    /// Rows.
    pub f: &'a [[T; W]],
    /// Columns.
    pub x: &'a [[T; N]; COLUMNS],
}

impl<T: Number, const W: usize, const N: usize> Work for Products<'_, T, W, N> {
    type Output = [[T; W]; COLUMNS];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Self::Output {
        let mut sums = [[T::ZERO; W]; COLUMNS];
        for (sums, x) in sums.iter_mut().zip(self.x) {
            for (f, &x) in self.f.iter().zip(x) {
                for (sum, &f) in sums.iter_mut().zip(f) {
                    *sum = T::mul_add::<A>(x, f, *sum);
                }
            }
        }
        sums
    }
}

macro_rules! number {
    ($number:ty, $unit:literal, $mul_add:ident, $x86:ident) => {
        impl Number for $number {
            const ZERO: Self = 0.0;

            const UNIT: usize = $unit;

            #[inline(always)]
            fn mul_add<A: Arithmetic>(a: Self, b: Self, c: Self) -> Self {
                A::$mul_add(a, b, c)
            }

            fn rounded(x: f64) -> Self {
                x as Self
            }

            fn products<const U: usize, const W: usize, const N: usize>(
                f: &[[Self; W]],
                x: &[[Self; N]; COLUMNS],
            ) -> [[Self; W]; COLUMNS] {
                const { assert!(W == U * $unit && U <= MOST_UNITS) };
                let f = &f[..f.len().min(N)];
                #[cfg(target_arch = "x86_64")]
                if is_x86_feature_detected!("avx512f") {
                    // SAFETY: the feature that the function is compiled for was found just above.
                    return unsafe { x86::$x86::<U, W, N>(f, x) };
                }
                dispatch(Products { f, x })
            }

            fn add<const N: usize>(units: usize, f: &[Self], x: &[[Self; N]], sums: &mut [f64]) {
                match units {
                    1 => add::<Self, 1, $unit, N>(f, x, sums),
                    2 => add::<Self, 2, { 2 * $unit }, N>(f, x, sums),
                    _ => add::<Self, 3, { 3 * $unit }, N>(f, x, sums),
                }
            }
        }
    };
}

number!(f64, 8, mul_add, doubles);
number!(f32, 16, mul_add_single, singles);

#[cfg(target_arch = "x86_64")]
mod x86 {
    use super::{COLUMNS, Number};
    use std::arch::x86_64::{
        _mm512_fmadd_pd, _mm512_fmadd_ps, _mm512_loadu_pd, _mm512_loadu_ps, _mm512_set1_pd,
        _mm512_set1_ps, _mm512_setzero_pd, _mm512_setzero_ps, _mm512_storeu_pd, _mm512_storeu_ps,
    };

    macro_rules! products {
        ($name:ident, $number:ty, $zero:ident, $load:ident, $set:ident, $add:ident, $store:ident) => {
            #[target_feature(enable = "avx512f")]
            pub(super) fn $name<const U: usize, const W: usize, const N: usize>(
                f: &[[$number; W]],
                x: &[[$number; N]; COLUMNS],
            ) -> [[$number; W]; COLUMNS] {
                const UNIT: usize = <$number as Number>::UNIT;
                let mut sums = [[$zero(); U]; COLUMNS];
                for (s, row) in f.iter().enumerate().take(N) {
                    let mut units = [$zero(); U];
                    for (unit, row) in units.iter_mut().zip(row.as_chunks::<UNIT>().0) {
                        // SAFETY: a chunk has the entries of a vector.
                        *unit = unsafe { $load(row.as_ptr()) };
                    }
                    for (sums, x) in sums.iter_mut().zip(x) {
                        let x = $set(x[s]);
                        for (sum, unit) in sums.iter_mut().zip(&units) {
                            *sum = $add(x, *unit, *sum);
                        }
                    }
                }
                let mut found = [[0.0; W]; COLUMNS];
                for (found, sums) in found.iter_mut().zip(sums) {
                    for (found, sum) in found.as_chunks_mut::<UNIT>().0.iter_mut().zip(sums) {
                        // SAFETY: a chunk has the entries of a vector.
                        unsafe { $store(found.as_mut_ptr(), sum) };
                    }
                }
                found
            }
        };
    }

    products!(
        doubles,
        f64,
        _mm512_setzero_pd,
        _mm512_loadu_pd,
        _mm512_set1_pd,
        _mm512_fmadd_pd,
        _mm512_storeu_pd
    );
    products!(
        singles,
        f32,
        _mm512_setzero_ps,
        _mm512_loadu_ps,
        _mm512_set1_ps,
        _mm512_fmadd_ps,
        _mm512_storeu_ps
    );
}
