//! Sums of products in single precision where a row of the one factor is a single vector: a compiler
//! would go along the draws instead and collect its numbers one by one.

use super::{Arithmetic, Work, dispatch};

/// Entries of a row.
pub const ROW: usize = 16;

/// Columns that are worked on together.
pub const COLUMNS: usize = 8;

/// Sums of one column.
pub type Lanes = [f32; ROW];

/// `Σ_s x_s f_s` for rows `f_s` and every column `x`, of which there are as many numbers at least.
pub fn products<const N: usize>(f: &[Lanes], x: &[[f32; N]; COLUMNS]) -> [Lanes; COLUMNS] {
    let f = &f[..f.len().min(N)];
    #[cfg(target_arch = "x86_64")]
    if is_x86_feature_detected!("avx512f") {
        // SAFETY: the feature that the function is compiled for was found just above.
        return unsafe { x86::products(f, x) };
    }
    dispatch(Products { f, x })
}

/// The loop of [`products`] for other processors.
pub struct Products<'a, const N: usize> {
    /// Rows.
    pub f: &'a [Lanes],
    /// Columns.
    pub x: &'a [[f32; N]; COLUMNS],
}

impl<const N: usize> Work for Products<'_, N> {
    type Output = [Lanes; COLUMNS];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Self::Output {
        let mut sums = [[0.0; ROW]; COLUMNS];
        for (sums, x) in sums.iter_mut().zip(self.x) {
            for (f, &x) in self.f.iter().zip(x) {
                for (sum, &f) in sums.iter_mut().zip(f) {
                    *sum = A::mul_add_single(x, f, *sum);
                }
            }
        }
        sums
    }
}

#[cfg(target_arch = "x86_64")]
mod x86 {
    use super::{COLUMNS, Lanes, ROW};
    use std::arch::x86_64::{
        _mm512_fmadd_ps, _mm512_loadu_ps, _mm512_set1_ps, _mm512_setzero_ps, _mm512_storeu_ps,
    };

    #[target_feature(enable = "avx512f")]
    pub(super) fn products<const N: usize>(
        f: &[Lanes],
        x: &[[f32; N]; COLUMNS],
    ) -> [Lanes; COLUMNS] {
        let mut sums = [_mm512_setzero_ps(); COLUMNS];
        for (s, row) in f.iter().enumerate().take(N) {
            // SAFETY: a row has the sixteen entries that are loaded.
            let row = unsafe { _mm512_loadu_ps(row.as_ptr()) };
            for (sum, x) in sums.iter_mut().zip(x) {
                *sum = _mm512_fmadd_ps(_mm512_set1_ps(x[s]), row, *sum);
            }
        }
        let mut found = [[0.0; ROW]; COLUMNS];
        for (found, sum) in found.iter_mut().zip(sums) {
            // SAFETY: the target has the sixteen entries that are stored.
            unsafe { _mm512_storeu_ps(found.as_mut_ptr(), sum) };
        }
        found
    }
}
