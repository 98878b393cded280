//! Sums of products of the rows of a layout with rows some lags later.

use super::lanes::{Group, LANES, Row};
use super::vector::{Arithmetic, Work};

/// Lags that are formed together.
pub(super) const TOGETHER: usize = 8;

/// `Σ c_i c_{i+t}` for [`TOGETHER`] lags from `lag` on.
pub(super) struct Products<'a> {
    pub(super) rows: &'a [Row],
    pub(super) group: &'a Group,
    pub(super) means: &'a Row,
    pub(super) lag: usize,
}

impl Work for Products<'_> {
    type Output = [Row; TOGETHER];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [Row; TOGETHER] {
        let (means, lag) = (*self.means, self.lag);
        let centred = |row: &Row| -> Row { std::array::from_fn(|lane| row[lane] - means[lane]) };
        let mut sums = [[0.0; LANES]; TOGETHER];
        let full = &self.rows[..self.group.full];
        let mut done = 0;
        if let Some(later) = full.get(lag..)
            && let Some(first) = later.first_chunk::<TOGETHER>()
        {
            let mut ring = first.each_ref().map(centred);
            let early = full.as_chunks::<TOGETHER>().0;
            let next = later[TOGETHER..].as_chunks::<TOGETHER>().0;
            for (early, next) in early.iter().zip(next) {
                for step in 0..TOGETHER {
                    let now = centred(&early[step]);
                    for apart in 0..TOGETHER {
                        let then = &ring[(step + apart) % TOGETHER];
                        for lane in 0..LANES {
                            sums[apart][lane] =
                                A::mul_add(now[lane], then[lane], sums[apart][lane]);
                        }
                    }
                    ring[step] = centred(&next[step]);
                }
            }
            done = next.len() * TOGETHER;
        }
        self.add_last::<A>(done, &mut sums);
        sums
    }
}

impl Products<'_> {
    /// The products of the rows from `first` on, some of which end before others.
    #[inline(always)]
    fn add_last<A: Arithmetic>(&self, first: usize, sums: &mut [Row; TOGETHER]) {
        for place in first..self.rows.len().saturating_sub(self.lag) {
            let now = self.centred(place);
            for (apart, sum) in sums.iter_mut().enumerate() {
                let then = self.centred(place + self.lag + apart);
                for lane in 0..LANES {
                    sum[lane] = A::mul_add(now[lane], then[lane], sum[lane]);
                }
            }
        }
    }

    /// A row, 0 where a half has no draw.
    #[inline(always)]
    fn centred(&self, place: usize) -> Row {
        let Some(row) = self.rows.get(place) else {
            return [0.0; LANES];
        };
        if place < self.group.full {
            return std::array::from_fn(|lane| row[lane] - self.means[lane]);
        }
        std::array::from_fn(|lane| {
            if place < self.group.lengths[lane] {
                row[lane] - self.means[lane]
            } else {
                0.0
            }
        })
    }
}
