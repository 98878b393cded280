//! Everything that the verdict of a node rests on, from its log ratios in one call: the weights are
//! formed, smoothed and described once, and every quantity is studied while they are in the cache.
//!
//! The figures are those of the single kernels, which this one calls on contiguous columns.

use super::chains::{Chains, Test};
use super::error::KernelError;
use super::lane_series::Series;
use super::largest_weights::LargestWeights;
use super::lease::Lease;
use super::log_sum::range;
use super::long_run;
use super::mean::contributions;
use super::node_batches::Batches;
use super::node_series::{Formed, Moments, Sides, Weighing, either_side, half_sums};
use super::ordered::Interrupt;
use super::signed_tail::{sides_shape, signed_tail_shape};
use super::smooth_weights::{Weighed, smooth_weights};
use super::weigh::weigh;

/// Figures of the weights of a node.
pub const WEIGHT_FIGURES: usize = 10;

/// Figures of a quantity, or of its shift, at a node.
pub const SERIES_FIGURES: usize = 9;

/// What all nodes share.
pub struct Common {
    columns: Vec<Column>,
    /// Weights of the base, smoothed and not, in rows.
    own: [Lease; 2],
    equal_base: bool,
    chains: Chains,
    batches: Batches,
    shift: bool,
}

/// A quantity with its base mean taken off.
struct Column {
    /// In rows.
    entries: Lease,
    low: f64,
    high: f64,
    /// Base mean of an event, 0 and 1; else NaN.
    event: f64,
    /// Mean under the smoothed weights of the base.
    own: f64,
}

/// What is asked of all nodes.
#[derive(Clone, Copy)]
pub struct Asked<'a> {
    /// Weights of the base, smoothed and not, normalised, `(n,)`.
    pub own: [&'a [f64]; 2],
    /// Whether draws without a weight of the base's own move nothing when all ratios are equal.
    pub equal_base: bool,
    /// Where batches of draws begin and, last, end, over which the last series of a column is added up.
    pub batches: &'a [i64],
    /// Whether differences from the base are studied too.
    pub shift: bool,
}

impl Common {
    /// For quantities of `(n,)` each, with their base mean taken off, and whether each of these is an
    /// event, 0 and 1, and then its base mean; else NaN.
    ///
    /// # Errors
    /// [`KernelError::Starts`] when batches do not rise from 0 to the number of draws.
    pub fn new<'a>(
        columns: impl Iterator<Item = (&'a [f64], f64)>,
        chains: Chains,
        asked: Asked<'_>,
    ) -> Result<Self, KernelError> {
        let layout = chains.layout();
        let in_rows = |series: &[f64]| {
            let mut entries = Lease::new(layout.entries());
            layout.place(series, &mut entries);
            entries
        };
        let own = asked.own.map(in_rows);
        let columns = columns.map(|(f, event)| {
            let (low, high) = range(f);
            let entries = in_rows(f);
            Column {
                own: half_sums(&entries, &own[0], layout).iter().sum(),
                entries,
                low,
                high,
                event,
            }
        });
        let batches = long_run::chains(asked.batches, layout.draws(), false)?;
        Ok(Self {
            columns: columns.collect(),
            own,
            equal_base: asked.equal_base,
            batches: Batches::new(&batches, layout),
            shift: asked.shift,
            chains,
        })
    }

    /// Numbers that [`study`] writes.
    pub fn width(&self) -> usize {
        let series = SERIES_FIGURES * (1 + usize::from(self.shift));
        WEIGHT_FIGURES + self.columns.len() * (series + self.batches.count())
    }
}

/// Weights of a node, smoothed and not, in rows, and their sums over halves.
#[derive(Default)]
struct Weights {
    linear: Series,
    raw: Series,
    squares: Vec<f64>,
    varies: bool,
}

/// Writes into `out`, of [`Common::width`] numbers, for log ratios `x`, shape `(n,)`, with the log
/// weights of the base added: log of their sum of exponentials; tail shape; effective size and its
/// entropy form; largest share; share of the tail in `Σ w²`; separate excursions of the largest
/// weights; p-value of the chains' shares; share of draws without weight; 1 unless all weights are
/// equal. Then for every column its figures (see [`study_series`]), those of the shift where that
/// is wanted, and the batch sums of the last of these series. Smoothed weights, normalised, go to
/// `weights` where it is not empty.
///
/// # Errors
/// [`KernelError::Interrupted`]; [`KernelError::Memory`].
pub fn study(
    x: &[f64],
    common: &Common,
    weights: &mut [f64],
    out: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let (about, rest) = out.split_at_mut(WEIGHT_FIGURES);
    weigh_node(x, common, weights, about, room, interrupt)?;
    let series = SERIES_FIGURES * (1 + usize::from(common.shift));
    let each = series + common.batches.count();
    for (column, out) in common.columns.iter().zip(rest.chunks_mut(each.max(1))) {
        interrupt.check()?;
        let (figures, sums) = out.split_at_mut(series);
        let (of_value, of_shift) = figures.split_at_mut(SERIES_FIGURES);
        study_column(column, common, of_value, room, interrupt)?;
        if !column.event.is_nan() {
            let linear = &room.node.linear.entries;
            [of_value[7], of_value[8]] = either_side(&column.entries, 0.5 - column.event, linear);
        }
        if common.shift {
            study_shift(column, common, of_value[0], of_shift, room, interrupt)?;
        }
        common
            .batches
            .sums(&room.formed.z, common.chains.layout(), sums);
    }
    Ok(())
}

fn weigh_node(
    x: &[f64],
    common: &Common,
    weights: &mut [f64],
    about: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let (draws, chains, node) = (x.len(), &common.chains, &mut room.node);
    let [mut raw, mut linear] = [Lease::new(draws), Lease::new(draws)];
    let raw_sums = weigh(x, &mut raw, interrupt)?;
    node.varies = raw.iter().any(|w| *w != raw[0]);
    node.raw.put(&raw, chains.layout());
    let mut efficiency = 1.0;
    if chains.ordered() && node.varies {
        efficiency = chains.spread(&mut node.raw, interrupt)?.efficiency();
    }
    let weighed = Weighed {
        x,
        raw: &raw,
        sums: raw_sums,
    };
    let (shape, sums) = smooth_weights(weighed, efficiency, &mut linear, interrupt)?;
    if !weights.is_empty() {
        weights.copy_from_slice(&linear);
    }
    node.linear.put(&linear, chains.layout());
    let entries = &node.linear.entries;
    node.squares = half_sums(entries, entries, chains.layout());
    let mut share = 1.0;
    if chains.ordered() && chains.count() > 1 {
        let total: f64 = node.linear.totals.iter().sum();
        let squares: f64 = node.squares.iter().sum();
        let pooled = (squares - total * total / draws as f64) / draws as f64;
        let largest = sums.largest_share();
        share = chains.equal_agreement(&mut node.linear, pooled, largest, interrupt)?;
    }
    let tail = LargestWeights::new(&raw, efficiency);
    let apart = if chains.ordered() && node.varies {
        tail.excursions(chains, efficiency)
    } else {
        f64::INFINITY
    };
    let lost = raw.iter().filter(|w| **w == 0.0).count() as f64 / draws as f64;
    let varies = f64::from(u8::from(node.varies));
    about.copy_from_slice(&[
        raw_sums.log_sum(),
        shape,
        sums.effective_size(),
        sums.entropy_size(),
        sums.largest_share(),
        tail.share,
        apart,
        share,
        lost,
        varies,
    ]);
    Ok(())
}

/// Work arrays that a task keeps for all its nodes.
#[derive(Default)]
pub struct Room {
    node: Weights,
    formed: Formed,
}

fn study_column(
    column: &Column,
    common: &Common,
    figures: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let (chains, layout, node) = (&common.chains, common.chains.layout(), &room.node);
    let moments = half_sums(&column.entries, &node.linear.entries, layout);
    let moved: f64 = moments.iter().sum();
    let tell = chains.tell();
    let [own_means, own_scales] = if tell {
        chains.alone(&moments, &node.linear.totals)
    } else {
        [Vec::new(), Vec::new()]
    };
    let by = Weighing {
        w: &node.linear.entries,
        raw: &node.raw.entries,
        moved,
        own_means: &own_means,
        own_scales: &own_scales,
    };
    let (of_z, sides) = room.formed.influence(&column.entries, by, layout);
    figures[0] = moved;
    figures[1] = of_z.beside / layout.draws() as f64;
    figures[2] = 1.0;
    if tell {
        let test = Test {
            masses: &node.linear.totals,
            moments: &moments,
            squares: &node.squares,
            pooled: figures[1],
            largest: (column.high - moved).max(moved - column.low),
        };
        figures[2] = chains.agreement(&mut room.formed.alone, &test, interrupt)?;
    }
    study_series((&of_z, sides), chains, figures, &mut room.formed, interrupt)
}

/// The same of the shift, from what [`study_column`] left in `room`.
fn study_shift(
    column: &Column,
    common: &Common,
    moved: f64,
    figures: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let (chains, layout) = (&common.chains, common.chains.layout());
    let mut found = (Moments::default(), Sides::NONE);
    if common.equal_base && !room.node.varies {
        // Ratios that are all the same move nothing, rounding or not.
        room.formed.clear(layout);
        figures[..2].fill(0.0);
    } else {
        let own = common.own.each_ref().map(|own| &own[..]);
        found = room.formed.take_base(&column.entries, own, layout);
        figures[0] = moved - column.own;
        figures[1] = found.0.variance();
    }
    figures[2] = 1.0;
    if chains.ordered() {
        let (variance, largest) = (figures[1], found.0.largest);
        let z = &mut room.formed.z;
        figures[2] = chains.equal_agreement(z, variance, largest, interrupt)?;
    }
    study_series(
        (&found.0, found.1),
        chains,
        figures,
        &mut room.formed,
        interrupt,
    )
}

/// Fills entries 3 and on of the figures of a series: long-run variance of z; efficiency and tail
/// shape of its twin from unsmoothed weights; contributions of z.
fn study_series(
    (of_z, sides): (&Moments, Sides),
    chains: &Chains,
    figures: &mut [f64],
    formed: &mut Formed,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    (figures[3], figures[4]) = (of_z.variance(), 1.0);
    if chains.ordered() {
        figures[3] = chains.spread(&mut formed.z, interrupt)?.long_run;
        figures[4] = chains.spread(&mut formed.raw, interrupt)?.efficiency();
    }
    figures[5] = if sides.finite {
        sides_shape(&formed.raw.entries, [sides.above, sides.below], figures[4])
    } else {
        signed_tail_shape(&formed.raw.entries, figures[4])
    };
    let carried = of_z.contributions();
    figures[6] = if carried.is_nan() {
        contributions(&chains.layout().restored(&formed.z.entries))
    } else {
        carried
    };
    Ok(())
}
