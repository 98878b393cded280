//! Long-run variances of series that lie in the rows of a [`Layout`]: those of [`super::long_run`], of
//! all draws and of single chains from the same sums of products.

use std::ops::Range;

use super::error::KernelError;
use super::lane_products::{Products, TOGETHER};
use super::lanes::{Group, LANES, Layout, Row};
use super::lease::Lease;
use super::long_run::{efficiency, variances};
use super::ordered::Interrupt;
use super::vector::{Arithmetic, Work, dispatch};

/// Lags up to which series are worked on here.
const MOST_LAGS: usize = 256;

/// Shorter halves are units without an inner structure.
const SHORT: usize = 4;

/// Below this variance, in squares of the mean, what varies may be rounding.
const ROUNDING: f64 = 1e-18;

/// Variance and long-run variance of a series.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Spread {
    /// As [`super::mean::mean_square`].
    pub variance: f64,
    /// As [`super::long_run::long_run_variance`].
    pub long_run: f64,
}

impl Spread {
    /// As [`super::long_run::efficiency`].
    pub fn efficiency(&self) -> f64 {
        efficiency([self.variance, self.long_run])
    }
}

/// A series in rows, what is known of its halves, and its sums of products as far as they are formed.
#[derive(Default)]
pub struct Series {
    /// Entries of all rows; 0 where there is no draw.
    pub entries: Lease,
    /// Sum of each half.
    pub totals: Vec<f64>,
    means: Vec<f64>,
    /// `Σ c_i c_{i+t}` of the centred halves, lag after lag.
    products: Vec<f64>,
}

impl Series {
    /// Puts `z`, shape `(n,)`, in the place of the series.
    pub fn put(&mut self, z: &[f64], layout: &Layout) {
        self.begin(layout);
        layout.place(z, &mut self.entries);
        for group in layout.groups() {
            let sums = dispatch(Sums(rows_of(&self.entries, group)));
            self.add(group, &sums);
        }
    }

    /// Makes room, and forgets what was known of the series before.
    pub fn begin(&mut self, layout: &Layout) {
        if self.entries.len() != layout.entries() {
            self.entries = Lease::new(layout.entries());
        }
        self.totals.clear();
        self.means.clear();
        self.products.clear();
    }

    /// Takes the sums of the halves of the next group.
    pub fn add(&mut self, group: &Group, sums: &Row) {
        let known = sums.iter().zip(group.lengths).take(group.halves.len());
        for (&sum, length) in known {
            self.totals.push(sum);
            self.means.push(sum / length as f64);
        }
    }

    /// The rows of a group.
    pub fn rows(&self, group: &Group) -> &[Row] {
        rows_of(&self.entries, group)
    }

    /// Spread over the halves `part`, taken as the halves of all chains that there are.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`]; [`KernelError::Memory`].
    pub fn spread(
        &mut self,
        part: Range<usize>,
        layout: &Layout,
        interrupt: &Interrupt<'_>,
    ) -> Result<Spread, KernelError> {
        if let Some(found) = self.quickly(&part, layout) {
            return Ok(found);
        }
        let z = layout.restored(&self.entries);
        let halves = &layout.halves()[part];
        let (Some(first), Some(last)) = (halves.first(), halves.last()) else {
            return Ok(Spread {
                variance: f64::NAN,
                long_run: f64::NAN,
            });
        };
        let moved: Vec<_> = halves
            .iter()
            .map(|half| half.start - first.start..half.end - first.start)
            .collect();
        let [variance, long_run] = variances(&z[first.start..last.end], &moved, interrupt)?;
        Ok(Spread { variance, long_run })
    }

    /// Nothing where halves are short, the series is not finite or varies by no more than rounding,
    /// or more lags are needed than are worth it.
    fn quickly(&mut self, part: &Range<usize>, layout: &Layout) -> Option<Spread> {
        let halves = layout.halves().get(part.clone())?;
        let shortest = halves.iter().map(Range::len).min()?;
        if shortest < SHORT {
            return None;
        }
        let draws = halves.iter().map(Range::len).sum::<usize>() as f64;
        let share = |half: &Range<usize>| half.len() as f64 / draws;
        let means = self.means.get(part.clone())?;
        let first = *means.first()?;
        let of_halves = || halves.iter().zip(means);
        let overall = first
            + of_halves()
                .map(|(half, mean)| share(half) * (mean - first))
                .sum::<f64>();
        let apart =
            |(half, mean): (&Range<usize>, &f64)| share(half) * (mean - overall) * (mean - overall);
        let between: f64 = of_halves().map(apart).sum();
        if !between.is_finite() {
            return None;
        }
        let squares = self.products(0, layout)[part.clone()].iter().sum::<f64>();
        let variance = squares / draws + between;
        if !(variance > ROUNDING * overall * overall && variance.is_finite()) {
            return None;
        }
        let count = halves.len() as f64;
        let sequence = Sequence {
            halves,
            draws,
            between: if count > 1.0 {
                count / (count - 1.0) * between
            } else {
                0.0
            },
        };
        let weight = |half: &Range<usize>| half.len() as f64 / (half.len() as f64 - 1.0);
        let long_run = sequence.long_run(|lag| {
            let terms = halves.iter().zip(&self.products(lag, layout)[part.clone()]);
            terms.map(|(half, p)| weight(half) * p).sum::<f64>() / draws
        })?;
        Some(Spread { variance, long_run })
    }

    /// `Σ c_i c_{i+lag}` of every half.
    fn products(&mut self, lag: usize, layout: &Layout) -> &[f64] {
        let count = layout.halves().len();
        while self.products.len() <= lag * count {
            self.extend(layout);
        }
        &self.products[lag * count..][..count]
    }

    fn extend(&mut self, layout: &Layout) {
        let count = layout.halves().len();
        let (start, lag) = (self.products.len(), self.products.len() / count.max(1));
        self.products.resize(start + TOGETHER * count, 0.0);
        for group in layout.groups() {
            let mut means = [0.0; LANES];
            for (to, mean) in means.iter_mut().zip(&self.means[group.halves.clone()]) {
                *to = *mean;
            }
            let found = dispatch(Products {
                rows: rows_of(&self.entries, group),
                group,
                means: &means,
                lag,
            });
            for (step, sums) in found.iter().enumerate() {
                let place = start + step * count + group.halves.start;
                let into = &mut self.products[place..][..group.halves.len()];
                into.copy_from_slice(&sums[..group.halves.len()]);
            }
        }
    }
}

/// The rows of a group in the entries of all.
pub fn rows_of<'a>(entries: &'a [f64], group: &Group) -> &'a [Row] {
    &entries.as_chunks::<LANES>().0[group.rows.clone()]
}

/// The rows of a group, to be written.
pub fn rows_of_mut<'a>(entries: &'a mut [f64], group: &Group) -> &'a mut [Row] {
    &mut entries.as_chunks_mut::<LANES>().0[group.rows.clone()]
}

/// Geyer's sequence of pairs of autocovariances, see [`super::long_run::long_run_variance`].
struct Sequence<'a> {
    halves: &'a [Range<usize>],
    draws: f64,
    /// `B` there.
    between: f64,
}

impl Sequence<'_> {
    /// From the autocovariances `a_t`; nothing where more lags are needed than are worth it.
    fn long_run(&self, mut at: impl FnMut(usize) -> f64) -> Option<f64> {
        let longest = self.halves.iter().map(Range::len).max()?;
        let mean_length = self.draws / self.halves.len() as f64;
        let within = at(0);
        let variance = within * (1.0 - 1.0 / mean_length) + self.between;
        let shift = variance - within;
        let (mut total, mut least) = (0.0, f64::INFINITY);
        for lag in (0..longest.saturating_sub(1)).step_by(2) {
            if lag >= MOST_LAGS {
                return None;
            }
            let even = if lag == 0 { variance } else { shift + at(lag) };
            let gamma: f64 = even + (shift + at(lag + 1));
            if gamma.is_nan() || gamma <= 0.0 {
                break;
            }
            least = gamma.min(least);
            total += least;
        }
        let floor = variance / self.draws.max(10.0).log10();
        Some((2.0 * total - variance).max(floor))
    }
}

/// Sums of rows, lane by lane.
pub(super) struct Sums<'a>(pub(super) &'a [Row]);

impl Work for Sums<'_> {
    type Output = Row;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Row {
        let mut sums = [[0.0; LANES]; 4];
        let (blocks, rest) = self.0.as_chunks::<4>();
        for block in blocks {
            for (sum, row) in sums.iter_mut().zip(block) {
                for lane in 0..LANES {
                    sum[lane] += row[lane];
                }
            }
        }
        for (sum, row) in sums.iter_mut().zip(rest) {
            for lane in 0..LANES {
                sum[lane] += row[lane];
            }
        }
        std::array::from_fn(|lane| {
            (sums[0][lane] + sums[1][lane]) + (sums[2][lane] + sums[3][lane])
        })
    }
}
