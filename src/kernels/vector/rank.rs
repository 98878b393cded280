//! The value of a rank among a few hundred, by counting: a vector of comparisons is cheaper than the
//! branches of a selection.

use super::{Arithmetic, Work, dispatch, tree};
use crate::kernels::weight_sums::larger;

const LANES: usize = 16;

/// Divisions after which values are taken to be too close to each other, or too far apart.
const MOST_STEPS: usize = 48;

/// The value of `rank`, 1 for the largest, of finite `values`; nothing unless there are as many.
pub fn nth_largest(values: &[f64], rank: usize) -> Option<f64> {
    if rank == 0 || rank > values.len() {
        return None;
    }
    divided(values, rank).or_else(|| {
        let mut all = values.to_vec();
        let place = all.len() - rank;
        Some(*all.select_nth_unstable_by(place, f64::total_cmp).1)
    })
}

fn divided(values: &[f64], rank: usize) -> Option<f64> {
    #[cfg(target_arch = "x86_64")]
    if is_x86_feature_detected!("avx512f")
        && is_x86_feature_detected!("avx512dq")
        && is_x86_feature_detected!("avx2")
        && is_x86_feature_detected!("fma")
    {
        // SAFETY: the features that the function is compiled for were found just above.
        return unsafe { x86::divided(values, rank) };
    }
    dispatch(Dividing { values, rank })
}

/// [`nth_largest`] for processors that cannot count comparisons.
pub struct Dividing<'a> {
    /// Where to look.
    pub values: &'a [f64],
    /// For which rank.
    pub rank: usize,
}

impl Work for Dividing<'_> {
    type Output = Option<f64>;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Option<f64> {
        divide(self.values, self.rank, |least| count(self.values, least))
    }
}

/// Divides an interval until its upper part holds `rank` values; nothing where that takes too long.
#[inline(always)]
fn divide(values: &[f64], rank: usize, count: impl Fn(f64) -> usize) -> Option<f64> {
    let (mut low, mut high) = (-largest(values, |x| -x), largest(values, |x| x));
    let (mut at_low, mut at_high) = (values.len() as f64, count(high) as f64);
    let sought = rank as f64;
    if at_high >= sought {
        return Some(high);
    }
    for step in 0..MOST_STEPS {
        // By the counts at both ends, aimed in turns to either side of the rank by as much as counts
        // scatter, so that both ends draw near.
        let between = at_low - at_high;
        let aside = if step % 2 == 0 { 0.5 } else { -0.5 } * between.sqrt();
        let share = ((at_low - sought - aside) / between).clamp(0.1, 0.9);
        let middle = low + share * (high - low);
        if !(middle > low && middle < high) {
            return None;
        }
        let found = count(middle);
        if found == rank {
            let least = |x: f64| if x >= middle { -x } else { f64::NEG_INFINITY };
            return Some(-largest(values, least));
        }
        if found > rank {
            (low, at_low) = (middle, found as f64);
        } else {
            (high, at_high) = (middle, found as f64);
        }
    }
    None
}

#[inline(always)]
fn count(values: &[f64], least: f64) -> usize {
    let mut counts = [0.0; LANES];
    let (chunks, rest) = values.as_chunks::<LANES>();
    let mut padded = [f64::NEG_INFINITY; LANES];
    padded[..rest.len()].copy_from_slice(rest);
    for chunk in chunks.iter().chain(std::iter::once(&padded)) {
        for lane in 0..LANES {
            counts[lane] += if chunk[lane] >= least { 1.0 } else { 0.0 };
        }
    }
    tree(counts) as usize
}

#[inline(always)]
fn largest(values: &[f64], of: impl Fn(f64) -> f64) -> f64 {
    let mut most = [f64::NEG_INFINITY; LANES];
    let (chunks, rest) = values.as_chunks::<LANES>();
    for chunk in chunks {
        for lane in 0..LANES {
            most[lane] = larger(of(chunk[lane]), most[lane]);
        }
    }
    for (most, &value) in most.iter_mut().zip(rest) {
        *most = larger(of(value), *most);
    }
    for half in [8, 4, 2, 1] {
        for lane in 0..half {
            most[lane] = larger(most[lane + half], most[lane]);
        }
    }
    most[0]
}

#[cfg(target_arch = "x86_64")]
mod x86 {
    use super::divide;
    use std::arch::x86_64::{
        __m512i, _CMP_GE_OQ, _mm512_add_epi64, _mm512_cmp_pd_mask, _mm512_loadu_pd,
        _mm512_mask_add_epi64, _mm512_mask_cmp_pd_mask, _mm512_maskz_loadu_pd,
        _mm512_reduce_add_epi64, _mm512_set1_epi64, _mm512_set1_pd, _mm512_setzero_si512,
    };

    /// Values of a vector.
    const LANES: usize = 8;

    #[target_feature(enable = "avx512f,avx512dq,avx2,fma")]
    pub(super) fn divided(values: &[f64], rank: usize) -> Option<f64> {
        divide(values, rank, |least| count(values, least))
    }

    #[inline]
    #[target_feature(enable = "avx512f,avx512dq,avx2,fma")]
    fn count(values: &[f64], least: f64) -> usize {
        let (bounds, one) = (_mm512_set1_pd(least), _mm512_set1_epi64(1));
        let mut counts: [__m512i; 4] = [_mm512_setzero_si512(); 4];
        let (blocks, rest) = values.as_chunks::<{ 4 * LANES }>();
        for block in blocks {
            for (place, count) in counts.iter_mut().enumerate() {
                // SAFETY: the four parts of an array of four times as many.
                let row = unsafe { _mm512_loadu_pd(block.as_ptr().add(place * LANES)) };
                let found = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(row, bounds);
                *count = _mm512_mask_add_epi64(*count, found, *count, one);
            }
        }
        for (rest, count) in rest.chunks(LANES).zip(&mut counts) {
            let there = u8::MAX >> (LANES - rest.len());
            // SAFETY: only the entries that are there are read.
            let row = unsafe { _mm512_maskz_loadu_pd(there, rest.as_ptr()) };
            let found = _mm512_mask_cmp_pd_mask::<_CMP_GE_OQ>(there, row, bounds);
            *count = _mm512_mask_add_epi64(*count, found, *count, one);
        }
        let [a, b, c, d] = counts;
        let all = _mm512_add_epi64(_mm512_add_epi64(a, b), _mm512_add_epi64(c, d));
        _mm512_reduce_add_epi64(all) as usize
    }
}
