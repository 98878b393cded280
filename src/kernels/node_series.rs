//! Influence series of weighted means in the rows of a [`Layout`]: formed, and all their sums taken, in
//! one pass each.

use super::lane_series::{Series, rows_of, rows_of_mut};
use super::lanes::{LANES, Layout, Row};
use super::node_moments::Moments;
use super::signed_tail::Sides;
use super::vector::{Arithmetic, Work, dispatch};
use super::weight_sums::larger;

pub(super) const ZERO: Row = [0.0; LANES];

/// A node's weights, and what of them a column is weighed by.
#[derive(Clone, Copy)]
pub struct Weighing<'a> {
    /// Weights, in rows.
    pub w: &'a [f64],
    /// The same before smoothing.
    pub raw: &'a [f64],
    /// The weighted mean.
    pub moved: f64,
    /// For every half, its chain's own weighted mean.
    pub own_means: &'a [f64],
    /// And the draws of its chain over the weight of the chain, 0 without any.
    pub own_scales: &'a [f64],
}

/// The series of a weighted mean.
#[derive(Default)]
pub struct Formed {
    /// `z = n w (f − m)`.
    pub z: Series,
    /// The same from unsmoothed weights.
    pub raw: Series,
    /// The series of the mean of each chain alone.
    pub alone: Series,
}

impl Formed {
    /// Forms all of them for the column `f`; the sums of z, and the sides of its twin.
    pub fn influence(&mut self, f: &[f64], by: Weighing<'_>, layout: &Layout) -> (Moments, Sides) {
        let mut found = Found::NONE;
        for series in [&mut self.z, &mut self.raw, &mut self.alone] {
            series.begin(layout);
        }
        for group in layout.groups() {
            let of_lanes = |of_halves: &[f64]| {
                let mut row = ZERO;
                let part = of_halves.get(group.halves.clone()).unwrap_or_default();
                row[..part.len()].copy_from_slice(part);
                row
            };
            let sums = dispatch(Influence {
                weights: [
                    rows_of(f, group),
                    rows_of(by.w, group),
                    rows_of(by.raw, group),
                ],
                into: [&mut self.z, &mut self.raw, &mut self.alone]
                    .map(|series| rows_of_mut(&mut series.entries, group)),
                moved: by.moved,
                scale: layout.draws() as f64,
                own_means: of_lanes(by.own_means),
                own_scales: of_lanes(by.own_scales),
            });
            self.z.add(group, &sums.first);
            self.raw.add(group, &sums.raw);
            self.alone.add(group, &sums.alone);
            found.merge(&sums);
        }
        found.told(layout.draws())
    }

    /// Takes `n v f` off z, and the same with unsmoothed base weights off its twin.
    pub fn take_base(&mut self, f: &[f64], v: [&[f64]; 2], layout: &Layout) -> (Moments, Sides) {
        let mut found = Found::NONE;
        for series in [&mut self.z, &mut self.raw] {
            series.begin(layout);
        }
        for group in layout.groups() {
            let sums = dispatch(TakeBase {
                f: rows_of(f, group),
                v: v.map(|v| rows_of(v, group)),
                scale: layout.draws() as f64,
                into: [&mut self.z, &mut self.raw]
                    .map(|series| rows_of_mut(&mut series.entries, group)),
            });
            self.z.add(group, &sums.first);
            self.raw.add(group, &sums.raw);
            found.merge(&sums);
        }
        found.told(layout.draws())
    }

    /// Makes z and its twin nothing at all.
    pub fn clear(&mut self, layout: &Layout) {
        for series in [&mut self.z, &mut self.raw] {
            series.entries.fill(0.0);
            series.begin(layout);
            for group in layout.groups() {
                series.add(group, &ZERO);
            }
        }
    }
}

/// Sums over a group, lane by lane.
struct Found {
    first: Row,
    second: Row,
    third: Row,
    beside: Row,
    largest: Row,
    raw: Row,
    above: Row,
    below: Row,
    alone: Row,
}

impl Found {
    const NONE: Self = Self {
        first: ZERO,
        second: ZERO,
        third: ZERO,
        beside: ZERO,
        largest: ZERO,
        raw: ZERO,
        above: ZERO,
        below: ZERO,
        alone: ZERO,
    };

    fn merge(&mut self, other: &Self) {
        add(&other.first, &mut self.first);
        add(&other.second, &mut self.second);
        add(&other.third, &mut self.third);
        add(&other.beside, &mut self.beside);
        add(&other.above, &mut self.above);
        add(&other.below, &mut self.below);
        add(&other.raw, &mut self.raw);
        self.largest = each(|lane| larger(other.largest[lane], self.largest[lane]));
    }

    fn told(self, draws: usize) -> (Moments, Sides) {
        let moments = Moments {
            count: draws as f64,
            first: tree(self.first),
            second: tree(self.second),
            third: tree(self.third),
            beside: tree(self.beside),
            largest: self.largest.into_iter().fold(0.0, f64::max),
        };
        let sides = Sides {
            finite: tree(self.raw).is_finite(),
            above: tree(self.above) as usize,
            below: tree(self.below) as usize,
        };
        (moments, sides)
    }

    /// Adds a row of z.
    #[inline(always)]
    fn add_value<A: Arithmetic>(&mut self, z: &Row) {
        let square = each(|lane| z[lane] * z[lane]);
        add(z, &mut self.first);
        add(&square, &mut self.second);
        add_product::<A>(&square, z, &mut self.third);
    }

    /// Adds a row of the twin of z.
    #[inline(always)]
    fn add_raw(&mut self, raw: &Row) {
        add(raw, &mut self.raw);
        add(
            &each(|lane| if raw[lane] > 0.0 { 1.0 } else { 0.0 }),
            &mut self.above,
        );
        add(
            &each(|lane| if raw[lane] < 0.0 { 1.0 } else { 0.0 }),
            &mut self.below,
        );
    }
}

struct Influence<'a> {
    weights: [&'a [Row]; 3],
    into: [&'a mut [Row]; 3],
    moved: f64,
    scale: f64,
    own_means: Row,
    own_scales: Row,
}

impl Work for Influence<'_> {
    type Output = Found;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Found {
        let mut sums = Found::NONE;
        let [f, w, raw] = self.weights;
        let [z, z_raw, z_alone] = self.into;
        let into = z.iter_mut().zip(z_raw).zip(z_alone);
        for (((f, w), raw), ((z, z_raw), z_alone)) in f.iter().zip(w).zip(raw).zip(into) {
            // Formed apart from memory: a store that is read again would stand in the way.
            let psi = each(|lane| f[lane] - self.moved);
            let value = each(|lane| self.scale * w[lane] * psi[lane]);
            let twin = each(|lane| self.scale * raw[lane] * psi[lane]);
            let alone =
                each(|lane| self.own_scales[lane] * w[lane] * (f[lane] - self.own_means[lane]));
            (*z, *z_raw, *z_alone) = (value, twin, alone);
            sums.add_value::<A>(&value);
            add_product::<A>(&value, &psi, &mut sums.beside);
            sums.add_raw(&twin);
            add(&alone, &mut sums.alone);
        }
        sums
    }
}

struct TakeBase<'a> {
    f: &'a [Row],
    v: [&'a [Row]; 2],
    scale: f64,
    into: [&'a mut [Row]; 2],
}

impl Work for TakeBase<'_> {
    type Output = Found;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Found {
        let mut sums = Found::NONE;
        let ([v, v_raw], [z, z_raw]) = (self.v, self.into);
        let weights = v.iter().zip(v_raw);
        for ((f, (v, v_raw)), (z, z_raw)) in self.f.iter().zip(weights).zip(z.iter_mut().zip(z_raw))
        {
            let value = each(|lane| z[lane] - self.scale * v[lane] * f[lane]);
            let twin = each(|lane| z_raw[lane] - self.scale * v_raw[lane] * f[lane]);
            (*z, *z_raw) = (value, twin);
            sums.add_value::<A>(&value);
            let size = each(|lane| value[lane].abs());
            sums.largest = each(|lane| larger(size[lane], sums.largest[lane]));
            sums.add_raw(&twin);
        }
        sums
    }
}

#[inline(always)]
pub(super) fn each(entry: impl Fn(usize) -> f64) -> Row {
    std::array::from_fn(entry)
}

/// `sum + a b`, lane by lane. One loop for each sum: several in one are not vectorised.
#[inline(always)]
pub(super) fn add_product<A: Arithmetic>(
    a: &[f64; LANES],
    b: &[f64; LANES],
    sum: &mut [f64; LANES],
) {
    for lane in 0..LANES {
        sum[lane] = A::mul_add(a[lane], b[lane], sum[lane]);
    }
}

#[inline(always)]
pub(super) fn add(a: &[f64; LANES], sum: &mut [f64; LANES]) {
    for lane in 0..LANES {
        sum[lane] += a[lane];
    }
}

/// As [`super::vector::tree`], with which a node took 7 % longer.
#[inline(always)]
pub(super) fn tree(mut lanes: [f64; LANES]) -> f64 {
    for half in [4, 2, 1] {
        for lane in 0..half {
            lanes[lane] += lanes[lane + half];
        }
    }
    lanes[0]
}
