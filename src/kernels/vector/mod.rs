//! Loops compiled for several instruction sets, the best of which is chosen at run time.
//!
//! A loop is written once, as [`Work`]; [`dispatch`] runs the copy that the processor can run. The
//! copies differ in one thing, whether `a·b + c` is rounded once ([`Fused`]) or twice
//! ([`Separate`]). All x86-64 processors with AVX2 and all aarch64 ones round once and give the
//! same bits; only an x86-64 processor without fused multiply-add may differ from them, in the
//! last bits.

// The uses of `unsafe` in the crate: calling a copy after its instruction set was detected, and the
// loads and stores of `panel`, `rank`, `select`, `stream` and `transpose`.
#![allow(unsafe_code)]

pub mod dot;
pub mod exp;
pub mod ln;
pub mod panel;
pub mod rank;
pub mod select;
pub mod stream;
pub mod transpose;

/// How `a·b + c` is formed.
pub trait Arithmetic {
    /// `a·b + c`.
    fn mul_add(a: f64, b: f64, c: f64) -> f64;

    /// The same in single precision.
    fn mul_add_single(a: f32, b: f32, c: f32) -> f32;

    /// The upper 12 bits as a signed number, which is exact.
    #[inline(always)]
    fn upper_12(bits: u64) -> f64 {
        // AVX2 cannot convert an integer, so it is moved by 2048 and read off as the fraction of a
        // number near 2^52.
        let moved = (bits >> 52) ^ 0x800;
        f64::from_bits(moved | TWO_52.to_bits()) - (TWO_52 + 2048.0)
    }
}

/// `2^52`, whose last bit is worth one: an integer below it, added or or-ed, is in the last bits.
pub const TWO_52: f64 = 4_503_599_627_370_496.0;

/// One rounding, by an instruction of the processor.
pub struct Fused;

/// As [`Fused`], with the same bits, where integers can be converted as well.
pub struct Converting;

/// Two roundings; without the instruction a fused operation would be a slow library call.
pub struct Separate;

impl Arithmetic for Fused {
    #[inline(always)]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a.mul_add(b, c)
    }

    #[inline(always)]
    fn mul_add_single(a: f32, b: f32, c: f32) -> f32 {
        a.mul_add(b, c)
    }
}

impl Arithmetic for Converting {
    #[inline(always)]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a.mul_add(b, c)
    }

    #[inline(always)]
    fn mul_add_single(a: f32, b: f32, c: f32) -> f32 {
        a.mul_add(b, c)
    }

    #[inline(always)]
    fn upper_12(bits: u64) -> f64 {
        ((bits as i64) >> 52) as f64
    }
}

impl Arithmetic for Separate {
    #[inline(always)]
    fn mul_add(a: f64, b: f64, c: f64) -> f64 {
        a * b + c
    }

    #[inline(always)]
    fn mul_add_single(a: f32, b: f32, c: f32) -> f32 {
        a * b + c
    }
}

/// A loop over slices. `run` must be `#[inline(always)]`, with everything hot that it calls: only
/// what is inlined is compiled for the instruction set.
pub trait Work {
    /// What the loop returns.
    type Output;

    /// Runs the loop.
    fn run<A: Arithmetic>(self) -> Self::Output;
}

/// The sum of the lanes, a power of two of them up to 32, half upon half.
#[inline(always)]
pub fn tree<const N: usize>(mut lanes: [f64; N]) -> f64 {
    for half in [16, 8, 4, 2, 1] {
        if half < N {
            for lane in 0..half {
                lanes[lane] += lanes[lane + half];
            }
        }
    }
    lanes[0]
}

/// Runs `work` with the best instruction set of this processor.
#[cfg(target_arch = "x86_64")]
pub fn dispatch<W: Work>(work: W) -> W::Output {
    let fused = is_x86_feature_detected!("avx2") && is_x86_feature_detected!("fma");
    if fused && is_x86_feature_detected!("avx512f") && is_x86_feature_detected!("avx512dq") {
        // SAFETY: the four features that the function is compiled for were found just above.
        return unsafe { with_avx512(work) };
    }
    if fused {
        // SAFETY: both features that the function is compiled for were found just above.
        return unsafe { with_avx2(work) };
    }
    work.run::<Separate>()
}

/// Runs `work`; fused multiply-add belongs to every aarch64 processor.
#[cfg(target_arch = "aarch64")]
pub fn dispatch<W: Work>(work: W) -> W::Output {
    work.run::<Fused>()
}

/// Runs `work` without any assumption on the processor.
#[cfg(not(any(target_arch = "x86_64", target_arch = "aarch64")))]
pub fn dispatch<W: Work>(work: W) -> W::Output {
    work.run::<Separate>()
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx512f,avx512dq,avx2,fma")]
fn with_avx512<W: Work>(work: W) -> W::Output {
    work.run::<Converting>()
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "avx2,fma")]
fn with_avx2<W: Work>(work: W) -> W::Output {
    work.run::<Fused>()
}

/// Runs `work` as a processor without AVX2 would, for tests and benchmarks.
pub fn dispatch_plain<W: Work>(work: W) -> W::Output {
    work.run::<Separate>()
}

/// Runs `work` as a processor with AVX2 but without AVX-512 would, for tests and benchmarks;
/// nothing where there is no AVX2.
#[cfg(target_arch = "x86_64")]
pub fn dispatch_avx2<W: Work>(work: W) -> Option<W::Output> {
    if is_x86_feature_detected!("avx2") && is_x86_feature_detected!("fma") {
        // SAFETY: both features that the function is compiled for were found just above.
        return Some(unsafe { with_avx2(work) });
    }
    None
}
