//! The order of values, by digits of their bits (least digit first; Knuth, The Art of Computer
//! Programming 3, section 5.2.5).

use super::error::KernelError;
use super::ordered::Interrupt;

/// Bits of a digit: a table of counters of this size stays in the nearest cache.
const DIGIT: u32 = 11;

/// Digits of 64 bits.
const DIGITS: usize = 6;

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
