//! The largest values of a column in order, without sorting the column.

use super::sorting::distribute;
use super::vector::select::at_least;
use super::vector::{Arithmetic, TWO_52, Work, dispatch};

/// Rank at which the cut of the sample is aimed: its count varies by a fifth.
const SAMPLE_RANK: usize = 24;

/// How fast the habit of columns follows the last one.
const FOLLOW: f64 = 0.125;

/// A value and its index.
pub type Ranked = (f64, u32);

/// The `count` largest of `sign · values` in ascending order, and the next largest value; nothing
/// unless there are more values than `count`. Equal values rank in input order; NaN is passed over.
pub fn largest(values: &[f64], sign: f64, count: usize) -> Option<(Vec<Ranked>, f64)> {
    let mut finder = Finder::default();
    let cutoff = finder.find(values, sign, count, None)?;
    Some((finder.ranked, cutoff))
}

/// What [`largest`] needs again and again, and what it learns.
#[derive(Default)]
pub struct Finder {
    /// The largest values of the last search, as [`largest`] gives them.
    pub ranked: Vec<Ranked>,
    places: Vec<u32>,
    spare: Vec<Ranked>,
    buckets: Vec<u32>,
    starts: Vec<u32>,
    habit: Habit,
}

/// Mean and standard deviation of a column, roughly.
pub type Spread = (f64, f64);

impl Finder {
    /// As [`largest`]: fills `ranked` and returns the next largest value.
    ///
    /// With the `spread` of the values the guess where the largest begin comes from the columns
    /// before. A guess only decides what is looked at, never what is found.
    pub fn find(
        &mut self,
        values: &[f64],
        sign: f64,
        count: usize,
        spread: Option<Spread>,
    ) -> Option<f64> {
        if count >= values.len() {
            return None;
        }
        let needed = count + 1;
        let share = needed as f64 / values.len() as f64;
        let enough = needed..4 * needed;
        let known = spread.and_then(|spread| self.habit.guess(spread, share));
        if let Some(least) = known {
            self.collect(values, sign, least);
        }
        if known.is_none() || !enough.contains(&self.ranked.len()) {
            self.collect(values, sign, guess(values, sign, needed));
        }
        if !enough.contains(&self.ranked.len()) {
            self.collect(values, sign, f64::NEG_INFINITY);
            let found = &mut self.ranked;
            if found.len() < needed {
                return None; // NaN is no value that could be ranked
            }
            let below = found.len() - needed;
            found.select_nth_unstable_by(below, |a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
            found.drain(..below);
            found.sort_unstable_by_key(|ranked| ranked.1);
        }
        self.sort();
        let below = self.ranked.len() - needed;
        let cutoff = self.ranked[below].0;
        self.ranked.drain(..=below);
        if let Some(spread) = spread {
            self.habit.learn(spread, share, cutoff);
        }
        Some(cutoff)
    }

    /// The values of at least `least`, in input order.
    fn collect(&mut self, values: &[f64], sign: f64, least: f64) {
        self.places.clear();
        at_least(values, sign, least, &mut self.places);
        self.ranked.clear();
        let pairs = self
            .places
            .iter()
            .map(|&place| (sign * values[place as usize], place));
        self.ranked.extend(pairs);
    }

    /// Sorts by value; equal values keep their order. Buckets, then insertion: tails thin out
    /// evenly enough, and where they do not a general sort takes over.
    fn sort(&mut self) {
        self.buckets.clear();
        self.buckets.resize(self.ranked.len(), 0);
        let count = (2 * self.ranked.len()).next_power_of_two();
        let spread = dispatch(Buckets {
            ranked: &self.ranked,
            count,
            buckets: &mut self.buckets,
        });
        let (starts, sorted) = (&mut self.starts, &mut self.spare);
        starts.clear();
        starts.resize(count + 1, 0);
        sorted.clear();
        sorted.resize(self.ranked.len(), (0.0, 0));
        let ranked = self.ranked.iter().copied();
        if spread && distribute(ranked, &self.buckets, starts, sorted) {
            std::mem::swap(&mut self.ranked, sorted);
        } else {
            self.ranked.sort_by(|a, b| a.0.total_cmp(&b.0));
        }
    }
}

/// Where the largest values of the columns before began, in standard deviations from the mean.
#[derive(Default)]
struct Habit {
    /// Logarithm of the share of values that were sought.
    share: f64,
    height: f64,
    /// Mean distance of a column from that.
    doubt: f64,
}

impl Habit {
    /// The height at another share: the tail of a normal distribution falls about so fast.
    fn at(&self, share: f64) -> f64 {
        self.height + 0.5 * (self.share - share.ln())
    }

    /// A value that a few more than the sought are likely to reach.
    fn guess(&self, (mean, deviation): Spread, share: f64) -> Option<f64> {
        let least = mean + deviation * (self.at(share) - 3.0 * self.doubt - 0.02);
        (self.doubt > 0.0 && least.is_finite()).then_some(least)
    }

    fn learn(&mut self, (mean, deviation): Spread, share: f64, cutoff: f64) {
        let height = (cutoff - mean) / deviation;
        if !height.is_finite() {
            return;
        }
        if self.doubt == 0.0 {
            (self.height, self.doubt) = (height, 0.05);
        } else {
            let missed = height - self.at(share);
            self.height = self.at(share) + FOLLOW * missed;
            // One column of another kind must not spoil the guess for all that follow.
            self.doubt += FOLLOW * (missed.abs().min(0.2) - self.doubt);
        }
        self.share = share.ln();
    }
}

/// A value that between `needed` and three times as many values are likely to reach.
pub(super) fn guess(values: &[f64], sign: f64, needed: usize) -> f64 {
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
        let (scale, most) = (1.0 / (high - low), (self.count - 1) as f64);
        if !(scale.is_finite() && low.is_finite()) {
            return false;
        }
        for (bucket, &(value, _)) in self.buckets.iter_mut().zip(self.ranked) {
            // Tails thin out: narrow buckets where values crowd, wide ones where they are few.
            let rest = 1.0 - (value - low) * scale;
            let square = rest * rest;
            let place = most - most * (square * square);
            *bucket = (place + TWO_52).to_bits() as u32;
        }
        true
    }
}
