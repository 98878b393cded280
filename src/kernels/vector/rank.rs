//! The value of a rank among a few hundred, by counting: a vector of comparisons is cheaper than the
//! branches of a selection.

use super::{Arithmetic, Work, dispatch, tree};
use crate::kernels::weight_sums::larger;

const LANES: usize = 16;

/// Halvings after which values are taken to be too close to each other, or too far apart.
const MOST_STEPS: usize = 48;

/// The value of `rank`, 1 for the largest, of finite `values`; nothing unless there are as many.
pub fn nth_largest(values: &[f64], rank: usize) -> Option<f64> {
    if rank == 0 || rank > values.len() {
        return None;
    }
    halved(values, rank).or_else(|| {
        let mut all = values.to_vec();
        let place = all.len() - rank;
        Some(*all.select_nth_unstable_by(place, f64::total_cmp).1)
    })
}

/// How many of `values` are at least `least`.
pub fn count_at_least(values: &[f64], least: f64) -> usize {
    dispatch(Count { values, least })
}

fn halved(values: &[f64], rank: usize) -> Option<f64> {
    #[cfg(target_arch = "x86_64")]
    if is_x86_feature_detected!("avx512f")
        && is_x86_feature_detected!("avx512dq")
        && is_x86_feature_detected!("avx2")
        && is_x86_feature_detected!("fma")
        && is_x86_feature_detected!("popcnt")
    {
        // SAFETY: the features that the function is compiled for were found just above.
        return unsafe { x86::halved(values, rank) };
    }
    dispatch(Halving { values, rank })
}

struct Count<'a> {
    values: &'a [f64],
    least: f64,
}

impl Work for Count<'_> {
    type Output = usize;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> usize {
        count(self.values, self.least)
    }
}

/// [`nth_largest`] for processors that cannot count comparisons.
pub struct Halving<'a> {
    /// Where to look.
    pub values: &'a [f64],
    /// For which rank.
    pub rank: usize,
}

impl Work for Halving<'_> {
    type Output = Option<f64>;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Option<f64> {
        halve(self.values, self.rank, |least| count(self.values, least))
    }
}

/// Halves an interval until its upper part holds `rank` values; nothing where that takes too long.
#[inline(always)]
fn halve(values: &[f64], rank: usize, count: impl Fn(f64) -> usize) -> Option<f64> {
    let (mut low, mut high) = (-largest(values, |x| -x), largest(values, |x| x));
    if count(high) >= rank {
        return Some(high);
    }
    for _ in 0..MOST_STEPS {
        let middle = low + 0.5 * (high - low);
        if !(middle > low && middle < high) {
            return None;
        }
        let found = count(middle);
        if found == rank {
            let least = |x: f64| if x >= middle { -x } else { f64::NEG_INFINITY };
            return Some(-largest(values, least));
        }
        if found > rank {
            low = middle;
        } else {
            high = middle;
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
    use super::halve;
    use std::arch::x86_64::{
        _CMP_GE_OQ, _mm512_cmp_pd_mask, _mm512_loadu_pd, _mm512_mask_cmp_pd_mask,
        _mm512_maskz_loadu_pd, _mm512_set1_pd,
    };

    #[target_feature(enable = "avx512f,avx512dq,avx2,fma,popcnt")]
    pub(super) fn halved(values: &[f64], rank: usize) -> Option<f64> {
        halve(values, rank, |least| count(values, least))
    }

    #[inline]
    #[target_feature(enable = "avx512f,avx512dq,avx2,fma,popcnt")]
    fn count(values: &[f64], least: f64) -> usize {
        let bounds = _mm512_set1_pd(least);
        let (chunks, rest) = values.as_chunks::<16>();
        let mut count = 0;
        for chunk in chunks {
            // SAFETY: both halves of an array of sixteen.
            let (low, high) = unsafe {
                let start = chunk.as_ptr();
                (_mm512_loadu_pd(start), _mm512_loadu_pd(start.add(8)))
            };
            let low = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(low, bounds);
            let high = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(high, bounds);
            count += (u32::from(low) | (u32::from(high) << 8)).count_ones();
        }
        for rest in rest.chunks(8) {
            let there = u8::MAX >> (8 - rest.len());
            // SAFETY: only the entries that are there are read.
            let row = unsafe { _mm512_maskz_loadu_pd(there, rest.as_ptr()) };
            count += _mm512_mask_cmp_pd_mask::<_CMP_GE_OQ>(there, row, bounds).count_ones();
        }
        count as usize
    }
}
