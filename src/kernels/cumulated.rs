//! Running sums of weights, as resampling needs them: quick, exact to the last digits, and flat
//! where a weight is 0.

use super::error::KernelError;
use super::quantile::Compensated;
use super::vector::{Arithmetic, Work, dispatch, tree};

/// Weights whose sum is formed before their running sums.
const BLOCK: usize = 64;

/// Blocks whose running sums are formed side by side: a sum waits for the one before.
const TOGETHER: usize = 4;

/// Most shares that are handed over at a time.
pub const SHARES: usize = BLOCK * TOGETHER;

/// Non-negative weights with the running sums of their blocks.
pub struct Cumulated<'a> {
    weights: &'a [f64],
    /// A power of two that takes the weights to where no sum overflows.
    scale: f64,
    /// Sum of all blocks before each one; the total last.
    before: Vec<f64>,
    /// The last draw whose weight is positive.
    last: usize,
}

impl<'a> Cumulated<'a> {
    /// # Errors
    /// [`KernelError::NoWeight`] when a weight is negative or not finite or none is positive.
    pub fn new(weights: &'a [f64]) -> Result<Self, KernelError> {
        let mut scale = 1.0;
        let (mut before, largest) = block_sums(weights, scale)?;
        if !(1e-200..1e200).contains(&largest) {
            scale = unit(largest);
            before = block_sums(weights, scale)?.0;
        }
        let Some(last) = weights.iter().rposition(|&weight| weight > 0.0) else {
            return Err(KernelError::NoWeight { offender: None });
        };
        Ok(Self {
            weights,
            scale,
            before,
            last,
        })
    }

    /// Number of weights.
    pub fn len(&self) -> usize {
        self.weights.len()
    }

    /// Whether there is no weight; never so.
    pub fn is_empty(&self) -> bool {
        self.weights.is_empty()
    }

    /// The last draw with weight.
    pub fn last(&self) -> usize {
        self.last
    }

    /// The weights in a unit of which [`Self::total`] is the sum.
    pub fn scaled(&self) -> impl Iterator<Item = f64> {
        self.weights.iter().map(|weight| weight * self.scale)
    }

    /// Sum of the scaled weights.
    pub fn total(&self) -> f64 {
        self.before.last().copied().unwrap_or(0.0)
    }

    /// `each(first, shares)` for block after block: `whole · C_s / C`, `C_s` the weight up to and
    /// including draw `s`. Shares never fall, stay where a weight is 0, and end with `whole`.
    pub fn shares(&self, whole: f64, mut each: impl FnMut(usize, &[f64])) {
        let factor = whole / self.total();
        let mut shares = [0.0; SHARES];
        for (group, weights) in self.weights.chunks(SHARES).enumerate() {
            let first = group * SHARES;
            let shares = &mut shares[..weights.len()];
            let before = &self.before[group * TOGETHER..];
            self.running(weights, before, shares);
            let blocks = shares.chunks_mut(BLOCK).zip(weights.chunks(BLOCK));
            for ((shares, weights), end) in blocks.zip(&before[1..]) {
                let end = (end * factor).min(whole);
                dispatch(Scaled {
                    shares,
                    factor,
                    end,
                });
                // The end of a block is the start of the next, else a weight of 0 there could gain.
                let positive = weights.iter().rposition(|&weight| weight > 0.0);
                shares[positive.unwrap_or(0)..].fill(end);
            }
            if self.last < first + weights.len() {
                shares[self.last.saturating_sub(first)..].fill(whole);
            }
            each(first, shares);
        }
    }

    /// The running sums of each block, from those `before` it on.
    fn running(&self, weights: &[f64], before: &[f64], sums: &mut [f64]) {
        let whole: Option<&mut [f64; SHARES]> = sums.first_chunk_mut();
        if let (Some(sums), Some(weights), Some(before)) =
            (whole, weights.first_chunk::<SHARES>(), before.first_chunk())
        {
            let mut running: [f64; TOGETHER] = *before;
            for place in 0..BLOCK {
                for (block, running) in running.iter_mut().enumerate() {
                    *running += weights[block * BLOCK + place] * self.scale;
                    sums[block * BLOCK + place] = *running;
                }
            }
            return;
        }
        let blocks = sums.chunks_mut(BLOCK).zip(weights.chunks(BLOCK));
        for ((sums, weights), before) in blocks.zip(before) {
            let mut running = *before;
            for (sum, weight) in sums.iter_mut().zip(weights) {
                running += weight * self.scale;
                *sum = running;
            }
        }
    }

    /// Replaces each of `positions`, the bits of numbers that rise from 0 to `whole`, by the first
    /// index whose share of `whole` lies above it; by the last index with weight where none does.
    pub fn merge(&self, positions: &mut [i64], whole: f64) {
        let mut reached = 0;
        self.shares(whole, |first, shares| {
            let rest = &mut positions[reached..];
            let middle = shares.len() / 2;
            let early = below(rest, shares[..middle].last().copied().unwrap_or(0.0));
            let (early, later) = rest.split_at_mut(early);
            let late = below(later, shares.last().copied().unwrap_or(0.0));
            let late = &mut later[..late];
            reached += early.len() + late.len();
            let (low, high) = shares.split_at(middle);
            merge_two(
                Cursor::new(early, low, first),
                Cursor::new(late, high, first + middle),
            );
        });
        positions[reached..].fill(self.last as i64);
    }
}

/// How many of `positions`, rising, lie below `share`: most likely a few hundred.
fn below(positions: &[i64], share: f64) -> usize {
    // Numbers that are not negative compare as their bits do, which is quicker.
    let bits = share.to_bits() as i64;
    let mut end = SHARES;
    while positions.get(end).is_some_and(|&position| position < bits) {
        end *= 2;
    }
    let near = &positions[..end.min(positions.len())];
    near.partition_point(|&position| position < bits)
}

/// A merge under way: every position lies below the last share.
struct Cursor<'a> {
    positions: &'a mut [i64],
    shares: &'a [f64],
    first: usize,
    reached: usize,
    place: usize,
}

impl<'a> Cursor<'a> {
    fn new(positions: &'a mut [i64], shares: &'a [f64], first: usize) -> Self {
        Self {
            positions,
            shares,
            first,
            reached: 0,
            place: 0,
        }
    }

    #[inline(always)]
    fn is_open(&self) -> bool {
        self.reached < self.positions.len() && self.place < self.shares.len()
    }

    /// One step without a branch: which list is ahead cannot be predicted.
    #[inline(always)]
    fn step(&mut self) {
        let position = &mut self.positions[self.reached];
        let above = *position < self.shares[self.place].to_bits() as i64;
        let index = (self.first + self.place) as i64;
        *position = if above { index } else { *position };
        self.reached += usize::from(above);
        self.place += usize::from(!above);
    }
}

/// Both merges, in turns: a step waits for the one before.
fn merge_two(mut low: Cursor<'_>, mut high: Cursor<'_>) {
    while low.is_open() && high.is_open() {
        low.step();
        high.step();
    }
    while low.is_open() {
        low.step();
    }
    while high.is_open() {
        high.step();
    }
}

/// A power of two near `1/largest`, exact also where that leaves the normal numbers.
fn unit(largest: f64) -> f64 {
    let exponent = (largest.to_bits() >> 52) as i64 - 1023;
    f64::from_bits(((1023 - exponent.clamp(-1000, 1000)) as u64) << 52)
}

/// Compensated sums of the scaled weights before each block, the total last; and the largest
/// weight, not scaled.
fn block_sums(weights: &[f64], scale: f64) -> Result<(Vec<f64>, f64), KernelError> {
    let mut running = Compensated::default();
    let mut largest = 0.0;
    let mut before = Vec::with_capacity(weights.len().div_ceil(BLOCK) + 1);
    before.push(0.0);
    for (number, block) in weights.chunks(BLOCK).enumerate() {
        let found = dispatch(BlockSum { block, scale });
        let mut most = found.most;
        if !is_legal(most) || most.is_sign_negative() {
            if let Some(place) = block.iter().position(|&weight| !is_legal(weight)) {
                let offender = Some((number * BLOCK + place, block[place]));
                return Err(KernelError::NoWeight { offender });
            }
            // Only a negative zero brings us here.
            most = block.iter().copied().fold(0.0, f64::max);
        }
        largest = most.max(largest);
        running.add(found.sum);
        // Whatever the rounding, the sums must not fall.
        let value = running.value();
        before.push(before.last().map_or(value, |&last| value.max(last)));
    }
    Ok((before, largest))
}

/// Running sums to shares, at most that at the end of the block.
struct Scaled<'a> {
    shares: &'a mut [f64],
    factor: f64,
    end: f64,
}

impl Work for Scaled<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for share in self.shares {
            let scaled = *share * self.factor;
            *share = if scaled < self.end { scaled } else { self.end };
        }
    }
}

struct BlockSum<'a> {
    block: &'a [f64],
    scale: f64,
}

struct Found {
    sum: f64,
    /// The weight with the largest bits.
    most: f64,
}

fn is_legal(weight: f64) -> bool {
    weight >= 0.0 && weight.is_finite()
}

impl Work for BlockSum<'_> {
    type Output = Found;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Found {
        let (mut sum, mut most) = ([0.0; 16], [0_u64; 16]);
        let (chunks, rest) = self.block.as_chunks::<16>();
        for chunk in chunks {
            for (sum, weight) in sum.iter_mut().zip(chunk) {
                *sum += weight * self.scale;
            }
        }
        for chunk in chunks {
            for (most, weight) in most.iter_mut().zip(chunk) {
                *most = weight.to_bits().max(*most);
            }
        }
        for ((sum, most), weight) in sum.iter_mut().zip(&mut most).zip(rest) {
            *sum += weight * self.scale;
            *most = weight.to_bits().max(*most);
        }
        // Bits of numbers that are not negative rise with them; all others lie above.
        let most = most.iter().copied().fold(0, u64::max);
        Found {
            sum: tree(sum),
            most: f64::from_bits(most),
        }
    }
}
