//! Stores that pass by the caches: a large result is not read again soon, and an ordinary store
//! reads every cache line before it writes it.

/// Entries from which on a result is too large for the caches.
pub const LARGE: usize = 1 << 20;

/// Copies `from` to `to`, of equal length, past the caches where it lies on 16-byte boundaries.
/// Call [`fence`] before another thread reads what was written.
#[cfg(target_arch = "x86_64")]
pub fn copy_past(from: &[f64], to: &mut [f64]) {
    use std::arch::x86_64::{_mm_loadu_pd, _mm_stream_pd};
    let pairs = from.len().min(to.len()) / 2;
    if !to.as_ptr().addr().is_multiple_of(16) {
        to.copy_from_slice(from);
        return;
    }
    let (source, target) = (from.as_ptr(), to.as_mut_ptr());
    for pair in 0..pairs {
        // SAFETY: entries 2·pair and 2·pair + 1 exist in both slices by the bound on `pairs`; the
        // target lies on a 16-byte boundary, as was asked above, and so does every second entry;
        // SSE2 belongs to every x86-64 processor.
        unsafe {
            _mm_stream_pd(target.add(2 * pair), _mm_loadu_pd(source.add(2 * pair)));
        }
    }
    to[2 * pairs..].copy_from_slice(&from[2 * pairs..]);
}

/// Copies `from` to `to`, of equal length.
#[cfg(not(target_arch = "x86_64"))]
pub fn copy_past(from: &[f64], to: &mut [f64]) {
    to.copy_from_slice(from);
}

/// Orders the stores of [`copy_past`] before all later ones, those that tell another thread.
pub fn fence() {
    #[cfg(target_arch = "x86_64")]
    // SAFETY: an instruction of SSE, which belongs to every x86-64 processor.
    unsafe {
        std::arch::x86_64::_mm_sfence();
    }
}
