//! Everything that the verdict of a node rests on, from its log ratios in one call: the weights are
//! formed, smoothed and described once, and every quantity is studied while they are in the cache.
//!
//! The figures are those of the single kernels, which this one calls on contiguous columns.

use super::chains::{Chains, Test};
use super::error::KernelError;
use super::lane_series::Series;
use super::largest_weights::LargestWeights;
use super::lease::Lease;
use super::mean::contributions;
use super::node_common::{Column, Common};
use super::node_moments::Moments;
use super::node_series::{Formed, Weighing};
use super::node_sums::{either_side, half_sums};
use super::ordered::Interrupt;
use super::signed_tail::{Sides, sides_shape, signed_tail_shape};
use super::smooth_weights::{Weighed, smooth_weights};
use super::weigh::weigh;

/// Figures of the weights of a node.
pub const WEIGHT_FIGURES: usize = 10;

/// Figures of a quantity, or of its shift, at a node.
pub const SERIES_FIGURES: usize = 9;

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
        sides_shape(&formed.raw.entries, sides, figures[4])
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
