//! The order of values, by digits of their bits (least digit first; Knuth, The Art of Computer
//! Programming 3, section 5.2.5).

use super::error::KernelError;
use super::log_sum::range;
use super::ordered::Interrupt;
use super::vector::{Arithmetic, TWO_52, Work, dispatch};

/// Bits of a digit: a table of counters of this size stays in the nearest cache.
const DIGIT: u32 = 11;

/// Digits of 64 bits.
const DIGITS: usize = 6;

/// Most values that are sorted by buckets first: beyond, these leave the caches.
const MOST_IN_BUCKETS: usize = 65_536;

/// Most values of a bucket that are sorted by insertion.
const MOST_INSERTED: u32 = 32;

/// Indices of `x` in ascending order of value; equal values keep their order, `−0` comes before
/// `+0`, NaN last or, if negative, first.
pub fn order(x: &[f64]) -> Vec<u32> {
    // A watch that never stops anything.
    order_unless(x, &Interrupt::never()).unwrap_or_default()
}

/// As [`order`], for long columns.
///
/// # Errors
/// [`KernelError::Interrupted`].
pub fn order_unless(x: &[f64], interrupt: &Interrupt<'_>) -> Result<Vec<u32>, KernelError> {
    if let Some(order) = by_buckets(x) {
        return Ok(order);
    }
    let mut keyed: Vec<(u64, u32)> = x.iter().zip(0..).map(|(&x, i)| (rank(x), i)).collect();
    let mut other = vec![(0, 0); keyed.len()];
    let counts = counts(&keyed);
    for (digit, counts) in counts.iter().enumerate() {
        interrupt.check()?;
        if counts.contains(&keyed.len()) {
            continue;
        }
        let mut starts = [0; 1 << DIGIT];
        let mut start = 0;
        for (place, count) in starts.iter_mut().zip(counts) {
            *place = start;
            start += count;
        }
        for &pair in &keyed {
            let place = &mut starts[digit_of(pair.0, digit)];
            other[*place] = pair;
            *place += 1;
        }
        std::mem::swap(&mut keyed, &mut other);
    }
    Ok(keyed.iter().map(|pair| pair.1).collect())
}

/// The order by buckets of equal width and insertion, where values are spread evenly enough.
fn by_buckets(x: &[f64]) -> Option<Vec<u32>> {
    let (low, high) = range(x);
    let count = x.len().next_power_of_two();
    let scale = (count - 1) as f64 / (high - low);
    if x.len() > MOST_IN_BUCKETS || !(low.is_finite() && scale.is_finite()) {
        return None;
    }
    let mut buckets = vec![0; x.len()];
    if !dispatch(Buckets {
        x,
        low,
        scale,
        buckets: &mut buckets,
    }) {
        return None;
    }
    let keyed = x.iter().zip(0..).map(|(&x, index)| (rank(x), index));
    let (mut starts, mut sorted) = (vec![0; count + 1], vec![(0, 0); x.len()]);
    distribute(keyed, &buckets, &mut starts, &mut sorted)
        .then(|| sorted.iter().map(|pair| pair.1).collect())
}

/// Writes `values` in ascending order of their keys into `sorted`, of as many entries; equal keys
/// keep their order. Each comes with its bucket, and keys of one bucket lie below those of the next.
/// False, and nothing written, where a bucket is too full. `starts` holds zeros, one more than there
/// are buckets, which are a power of two.
pub(super) fn distribute<K: Copy + PartialOrd>(
    values: impl Iterator<Item = (K, u32)>,
    buckets: &[u32],
    starts: &mut [u32],
    sorted: &mut [(K, u32)],
) -> bool {
    // A division would cost more than all else here.
    let mask = starts.len() - 2;
    for &bucket in buckets {
        starts[(bucket as usize & mask) + 1] += 1;
    }
    let (mut start, mut most) = (0, 0);
    for place in starts.iter_mut() {
        most = most.max(*place);
        start += *place;
        *place = start;
    }
    if most > MOST_INSERTED {
        return false;
    }
    for (one, &bucket) in values.zip(buckets) {
        let start = &mut starts[bucket as usize & mask];
        sorted[*start as usize] = one;
        *start += 1;
    }
    for end in 1..sorted.len() {
        let one = sorted[end];
        let mut place = end;
        while place > 0 && sorted[place - 1].0 > one.0 {
            sorted[place] = sorted[place - 1];
            place -= 1;
        }
        sorted[place] = one;
    }
    true
}

/// The bucket of every value; whether all are numbers.
struct Buckets<'a> {
    x: &'a [f64],
    low: f64,
    scale: f64,
    buckets: &'a mut [u32],
}

impl Work for Buckets<'_> {
    type Output = bool;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> bool {
        let mut numbers = true;
        for (bucket, &x) in self.buckets.iter_mut().zip(self.x) {
            numbers &= !x.is_nan();
            *bucket = ((x - self.low) * self.scale + TWO_52).to_bits() as u32;
        }
        numbers
    }
}

fn counts(keyed: &[(u64, u32)]) -> Vec<[usize; 1 << DIGIT]> {
    let mut counts = vec![[0; 1 << DIGIT]; DIGITS];
    for &(rank, _) in keyed {
        for (digit, counts) in counts.iter_mut().enumerate() {
            counts[digit_of(rank, digit)] += 1;
        }
    }
    counts
}

fn digit_of(rank: u64, digit: usize) -> usize {
    ((rank >> (DIGIT * digit as u32)) & ((1 << DIGIT) - 1)) as usize
}

/// An integer that rises with `x` as [`f64::total_cmp`] does.
fn rank(x: f64) -> u64 {
    let bits = x.to_bits();
    bits ^ ((((bits as i64) >> 63) as u64) | (1 << 63))
}

/// # Errors
/// [`KernelError::Range`] when a column is too long for 32-bit indices.
pub fn expect_countable(draws: usize) -> Result<(), KernelError> {
    if i32::try_from(draws).is_ok() {
        return Ok(());
    }
    Err(KernelError::Range {
        argument: "x",
        expected: "at most 2147483647 draws",
        found: draws as f64,
    })
}

/// `order` if it holds every index from 0 once.
///
/// # Errors
/// [`KernelError::Range`] with the first entry that is out of place.
pub fn expect_order(order: Vec<u32>) -> Result<Vec<u32>, KernelError> {
    let mut seen = vec![false; order.len()];
    for &index in &order {
        match seen.get_mut(index as usize) {
            Some(seen) if !*seen => *seen = true,
            _ => {
                return Err(KernelError::Range {
                    argument: "order",
                    expected: "every index of the draws once, as sort_order gives them",
                    found: f64::from(index),
                });
            }
        }
    }
    Ok(order)
}
