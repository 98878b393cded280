//! Where values are large: the positions of the few that reach a bound.

use super::{Arithmetic, Work, dispatch};

/// Values that are compared at a time.
const CHUNK: usize = 16;

/// Appends to `found` the indices, in order, at which `sign · values` is at least `least`; `values`
/// are fewer than `2^32`.
pub fn at_least(values: &[f64], sign: f64, least: f64, found: &mut Vec<u32>) {
    #[cfg(target_arch = "x86_64")]
    if is_x86_feature_detected!("avx512f") {
        // SAFETY: the feature that the function is compiled for was found just above.
        unsafe { x86::at_least(values, sign, least, found) };
        return;
    }
    dispatch(AtLeast {
        values,
        sign,
        least,
        found,
    });
}

/// The loop of [`at_least`] for processors that cannot compress a vector.
pub struct AtLeast<'a> {
    /// Where to look.
    pub values: &'a [f64],
    /// 1, or −1 for small values.
    pub sign: f64,
    /// The bound.
    pub least: f64,
    /// Where to append.
    pub found: &'a mut Vec<u32>,
}

impl Work for AtLeast<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let (chunks, rest) = self.values.as_chunks::<CHUNK>();
        for (number, chunk) in chunks.iter().enumerate() {
            let mut mask = 0_u32;
            for (lane, value) in chunk.iter().enumerate() {
                mask |= u32::from(self.sign * value >= self.least) << lane;
            }
            while mask != 0 {
                let lane = mask.trailing_zeros();
                mask &= mask - 1;
                self.found.push((number * CHUNK) as u32 + lane);
            }
        }
        for (value, index) in rest.iter().zip((chunks.len() * CHUNK) as u32..) {
            if self.sign * value >= self.least {
                self.found.push(index);
            }
        }
    }
}

/// Replaces `found` by the values of at least `high` or at most `low`, in order.
pub fn beyond(values: &[f64], low: f64, high: f64, found: &mut Vec<f64>) {
    found.clear();
    #[cfg(target_arch = "x86_64")]
    if is_x86_feature_detected!("avx512f") {
        // SAFETY: the feature that the function is compiled for was found just above.
        unsafe { x86::beyond(values, low, high, found) };
        return;
    }
    found.extend(
        values
            .iter()
            .filter(|value| **value >= high || **value <= low),
    );
}

#[cfg(target_arch = "x86_64")]
mod x86 {
    use super::CHUNK;
    use std::arch::x86_64::{
        _CMP_GE_OQ, _CMP_LE_OQ, _mm512_add_epi32, _mm512_cmp_pd_mask, _mm512_loadu_pd,
        _mm512_maskz_compress_epi32, _mm512_maskz_compress_pd, _mm512_mul_pd, _mm512_set1_epi32,
        _mm512_set1_pd, _mm512_setr_epi32, _mm512_storeu_pd, _mm512_storeu_si512,
    };

    /// Values between two looks at the room that is left.
    const PART: usize = 64 * CHUNK;

    #[target_feature(enable = "avx512f")]
    pub(super) fn at_least(values: &[f64], sign: f64, least: f64, found: &mut Vec<u32>) {
        let (signs, bounds) = (_mm512_set1_pd(sign), _mm512_set1_pd(least));
        let first = _mm512_setr_epi32(0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15);
        for (part, values) in values.chunks(PART).enumerate() {
            found.reserve(PART + CHUNK);
            let (chunks, rest) = values.as_chunks::<CHUNK>();
            let mut length = found.len();
            let mut places = _mm512_add_epi32(first, _mm512_set1_epi32((part * PART) as i32));
            for chunk in chunks {
                // SAFETY: both halves of an array of sixteen.
                let (low, high) = unsafe {
                    let start = chunk.as_ptr();
                    (_mm512_loadu_pd(start), _mm512_loadu_pd(start.add(8)))
                };
                let low = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(_mm512_mul_pd(low, signs), bounds);
                let high = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(_mm512_mul_pd(high, signs), bounds);
                let mask = u16::from(low) | (u16::from(high) << 8);
                let chosen = _mm512_maskz_compress_epi32(mask, places);
                // SAFETY: room for a whole chunk behind all that this part can add was reserved;
                // the first entries of `chosen`, as many as `mask` has bits, are indices.
                unsafe { _mm512_storeu_si512(found.as_mut_ptr().add(length).cast(), chosen) };
                length += mask.count_ones() as usize;
                places = _mm512_add_epi32(places, _mm512_set1_epi32(CHUNK as i32));
            }
            // SAFETY: the entries up to `length` were written just above, within the room reserved.
            unsafe { found.set_len(length) };
            let before = (part * PART + chunks.len() * CHUNK) as u32;
            for (value, index) in rest.iter().zip(before..) {
                if sign * value >= least {
                    found.push(index);
                }
            }
        }
    }

    /// Values of a vector.
    const LANES: usize = 8;

    #[target_feature(enable = "avx512f")]
    pub(super) fn beyond(values: &[f64], low: f64, high: f64, found: &mut Vec<f64>) {
        let (lows, highs) = (_mm512_set1_pd(low), _mm512_set1_pd(high));
        for values in values.chunks(PART) {
            found.reserve(PART + LANES);
            let (chunks, rest) = values.as_chunks::<LANES>();
            let mut length = found.len();
            for chunk in chunks {
                // SAFETY: all of an array of eight.
                let row = unsafe { _mm512_loadu_pd(chunk.as_ptr()) };
                let mask = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(row, highs)
                    | _mm512_cmp_pd_mask::<_CMP_LE_OQ>(row, lows);
                let chosen = _mm512_maskz_compress_pd(mask, row);
                // SAFETY: room for a whole chunk behind all that this part can add was reserved; the
                // first entries of `chosen`, as many as `mask` has bits, are values.
                unsafe { _mm512_storeu_pd(found.as_mut_ptr().add(length), chosen) };
                length += mask.count_ones() as usize;
            }
            // SAFETY: the entries up to `length` were written just above, within the room reserved.
            unsafe { found.set_len(length) };
            let beyond = |value: &&f64| **value >= high || **value <= low;
            found.extend(rest.iter().filter(beyond));
        }
    }
}
