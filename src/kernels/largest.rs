//! The largest values of a column in order, without sorting the column.

use super::vector::{Arithmetic, Work, dispatch};

/// Values that are compared at a time.
const CHUNK: usize = 16;

/// Rank at which the cut of the sample is aimed: its count varies by a fifth.
const SAMPLE_RANK: usize = 24;

/// Most values of a bucket that are sorted by insertion.
const MOST_INSERTED: u32 = 32;

/// A value and its index.
pub type Ranked = (f64, u32);

/// The `count` largest of `sign · values` in ascending order, and the next largest value; nothing
/// unless there are more values than `count`. Equal values rank in input order; NaN is passed over.
pub fn largest(values: &[f64], sign: f64, count: usize) -> Option<(Vec<Ranked>, f64)> {
    if count >= values.len() {
        return None;
    }
    let needed = count + 1;
    let mut found = dispatch(Collect {
        values,
        sign,
        least: guess(values, sign, needed),
    });
    // The guess only decides what is looked at, never what is found.
    if found.len() < needed || found.len() > 4 * needed {
        found = dispatch(Collect {
            values,
            sign,
            least: f64::NEG_INFINITY,
        });
        if found.len() < needed {
            return None; // NaN is no value that could be ranked
        }
        let below = found.len() - needed;
        found.select_nth_unstable_by(below, |a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
        found.drain(..below);
        found.sort_unstable_by_key(|ranked| ranked.1);
    }
    sort(&mut found);
    let cutoff = found[found.len() - needed].0;
    found.drain(..=found.len() - needed);
    Some((found, cutoff))
}

/// A value that between `needed` and three times as many values are likely to reach.
fn guess(values: &[f64], sign: f64, needed: usize) -> f64 {
    let draws = values.len();
    let size = SAMPLE_RANK * draws / (2 * needed);
    if size < 2 * SAMPLE_RANK || 4 * size > draws {
        return f64::NEG_INFINITY;
    }
    let step = draws / size;
    let mut sample: Vec<f64> = values.iter().step_by(step).map(|x| sign * x).collect();
    let rank = sample.len() - SAMPLE_RANK;
    *sample.select_nth_unstable_by(rank, f64::total_cmp).1
}

/// Values of at least `least`, in input order.
struct Collect<'a> {
    values: &'a [f64],
    sign: f64,
    least: f64,
}

impl Work for Collect<'_> {
    type Output = Vec<Ranked>;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Vec<Ranked> {
        let mut found = Vec::with_capacity(256);
        let (chunks, rest) = self.values.as_chunks::<CHUNK>();
        for (number, chunk) in chunks.iter().enumerate() {
            let mut mask = 0_u32;
            for (lane, value) in chunk.iter().enumerate() {
                mask |= u32::from(self.sign * value >= self.least) << lane;
            }
            while mask != 0 {
                let lane = mask.trailing_zeros();
                mask &= mask - 1;
                let value = self.sign * chunk[lane as usize % CHUNK];
                found.push((value, (number * CHUNK) as u32 + lane));
            }
        }
        for (value, index) in rest.iter().zip((chunks.len() * CHUNK) as u32..) {
            if self.sign * value >= self.least {
                found.push((self.sign * value, index));
            }
        }
        found
    }
}

/// Sorts by value; equal values keep their order. Buckets of equal width, then insertion: tails
/// thin out evenly enough, and where they do not a general sort takes over.
fn sort(ranked: &mut Vec<Ranked>) {
    let mut buckets = vec![0; ranked.len()];
    let count = ranked.len().next_power_of_two();
    let spread = dispatch(Buckets {
        ranked,
        count,
        buckets: &mut buckets,
    });
    if !spread || !distribute(ranked, &buckets, count) {
        ranked.sort_by(|a, b| a.0.total_cmp(&b.0));
    }
}

/// The bucket of every value, of `count` buckets; whether they have a width.
struct Buckets<'a> {
    ranked: &'a [Ranked],
    count: usize,
    buckets: &'a mut [u32],
}

impl Work for Buckets<'_> {
    type Output = bool;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> bool {
        let (mut low, mut high) = ([f64::INFINITY; 8], [f64::NEG_INFINITY; 8]);
        for chunk in self.ranked.chunks(8) {
            for ((low, high), &(value, _)) in low.iter_mut().zip(&mut high).zip(chunk) {
                *low = if value < *low { value } else { *low };
                *high = if value > *high { value } else { *high };
            }
        }
        let low = low.iter().copied().fold(f64::INFINITY, f64::min);
        let high = high.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let scale = (self.count - 1) as f64 / (high - low);
        if !(scale.is_finite() && low.is_finite()) {
            return false;
        }
        for (bucket, &(value, _)) in self.buckets.iter_mut().zip(self.ranked) {
            // An integer below 2^52 added to it is in the last bits.
            *bucket = ((value - low) * scale + 4_503_599_627_370_496.0).to_bits() as u32;
        }
        true
    }
}

/// Whether no bucket was too full, and then the values are sorted.
fn distribute(ranked: &mut Vec<Ranked>, buckets: &[u32], count: usize) -> bool {
    let mut starts = vec![0_u32; count + 1];
    for &bucket in buckets {
        starts[bucket as usize % count + 1] += 1;
    }
    let (mut start, mut most) = (0, 0);
    for place in &mut starts {
        most = most.max(*place);
        start += *place;
        *place = start;
    }
    if most > MOST_INSERTED {
        return false;
    }
    let mut sorted = vec![(0.0, 0); ranked.len()];
    for (&one, &bucket) in ranked.iter().zip(buckets) {
        let start = &mut starts[bucket as usize % count];
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
    *ranked = sorted;
    true
}
