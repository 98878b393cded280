//! Stores that pass by the caches: a large result is not read again soon, and an ordinary store
//! reads every cache line before it writes it.

/// Entries from which on a result is too large for the caches.
pub const LARGE: usize = 1 << 20;

/// Entries of a cache line.
#[cfg(target_arch = "x86_64")]
const LINE: usize = 8;

/// Its bytes.
#[cfg(target_arch = "x86_64")]
const LINE_BYTES: usize = 64;

/// Copies `from` to `to`, of equal length, past the caches; the parts of cache lines at both ends
/// through them, because a line written in part costs a read as well. Call [`fence`] before another
/// thread reads what was written.
#[cfg(target_arch = "x86_64")]
pub fn copy_past(from: &[f64], to: &mut [f64]) {
    use std::arch::x86_64::{_mm_loadu_pd, _mm_stream_pd};
    let length = from.len().min(to.len());
    let before = to.as_ptr().align_offset(LINE_BYTES).min(length);
    let (head, from) = from[..length].split_at(before);
    let (target, to) = to.split_at_mut(before);
    target.copy_from_slice(head);
    let (lines, rest) = from.as_chunks::<LINE>();
    let (targets, last) = to[..from.len()].as_chunks_mut::<LINE>();
    for (line, target) in lines.iter().zip(targets) {
        let (source, target) = (line.as_ptr(), target.as_mut_ptr());
        for pair in 0..LINE / 2 {
            // SAFETY: entries 2·pair and 2·pair + 1 exist in both arrays; the targets lie on 64-byte
            // boundaries by the split above, every second entry so on a 16-byte one; SSE2 belongs
            // to every x86-64 processor.
            unsafe {
                _mm_stream_pd(target.add(2 * pair), _mm_loadu_pd(source.add(2 * pair)));
            }
        }
    }
    last.copy_from_slice(rest);
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

/// Asks for the cache lines of `entries`, which will be read soon: rows that lie far apart are no
/// stream that a processor foresees.
pub fn prefetch<T>(entries: &[T]) {
    #[cfg(target_arch = "x86_64")]
    {
        use std::arch::x86_64::{_MM_HINT_T0, _mm_prefetch};
        for line in entries.chunks(LINE_BYTES / size_of::<T>().max(1)) {
            // SAFETY: a hint, which may name any address; SSE belongs to every x86-64 processor.
            unsafe { _mm_prefetch::<_MM_HINT_T0>(line.as_ptr().cast()) };
        }
    }
    #[cfg(not(target_arch = "x86_64"))]
    let _ = entries;
}

/// As [`prefetch`], as far as the cache next to the nearest, for what is read a little later.
#[inline(always)]
pub fn prefetch_far<T>(entries: &[T]) {
    #[cfg(target_arch = "x86_64")]
    {
        use std::arch::x86_64::{_MM_HINT_T1, _mm_prefetch};
        for line in entries.chunks(LINE_BYTES / size_of::<T>().max(1)) {
            // SAFETY: a hint, which may name any address; SSE belongs to every x86-64 processor.
            unsafe { _mm_prefetch::<_MM_HINT_T1>(line.as_ptr().cast()) };
        }
    }
    #[cfg(not(target_arch = "x86_64"))]
    let _ = entries;
}
