//! Everything that the verdict of a node rests on, from its log ratios in one call: the weights are
//! formed, smoothed and described once, and every quantity is studied while they are in the cache.
//!
//! The figures are those of the single kernels, which this one calls on contiguous columns.

use std::ops::Range;

use super::chains::{Chains, Test};
use super::error::KernelError;
use super::largest_weights::LargestWeights;
use super::lease::Lease;
use super::log_sum::{log_sum_exp, range};
use super::mean::contributions;
use super::node_series::{Moments, batch_sums, either_side, influence, take_base, weight_moments};
use super::ordered::Interrupt;
use super::reductions::slice_sums;
use super::signed_tail::signed_tail_shape;
use super::smooth::smooth;
use super::vector::exp::exp_slice;
use super::weight_sums::form;

/// Figures of the weights of a node.
pub const WEIGHT_FIGURES: usize = 10;

/// Figures of a quantity, or of its shift, at a node.
pub const SERIES_FIGURES: usize = 9;

/// What all nodes share.
pub struct Common<'a> {
    /// Quantities, `(n,)` each, with their base mean taken off.
    pub columns: Vec<&'a [f64]>,
    /// Whether each of these is an event, 0 and 1, and then its base mean; else NaN.
    pub events: Vec<f64>,
    /// Weights of the base, smoothed and not, normalised.
    pub own: &'a [f64],
    /// As `own`, unsmoothed.
    pub own_raw: &'a [f64],
    /// Whether draws without a weight of the base's own move nothing when all ratios are equal.
    pub equal_base: bool,
    /// The chains.
    pub chains: Chains,
    /// Whether the order of the draws is one of time.
    pub ordered: bool,
    /// Batches of draws over which the last series of a column is added up.
    pub batches: Vec<Range<usize>>,
    /// Whether differences from the base are studied too.
    pub shift: bool,
}

impl Common<'_> {
    /// Numbers that [`study`] writes.
    pub fn width(&self) -> usize {
        let series = SERIES_FIGURES * (1 + usize::from(self.shift));
        WEIGHT_FIGURES + self.columns.len() * (series + self.batches.len())
    }
}

/// Weights of a node, smoothed and not.
struct Weights {
    linear: Lease,
    raw: Lease,
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
    common: &Common<'_>,
    weights: &mut [f64],
    out: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let (about, rest) = out.split_at_mut(WEIGHT_FIGURES);
    let node = weigh(x, common, about, room, interrupt)?;
    if !weights.is_empty() {
        weights.copy_from_slice(&node.linear);
    }
    let series = SERIES_FIGURES * (1 + usize::from(common.shift));
    let each = series + common.batches.len();
    let columns = common.columns.iter().zip(&common.events);
    for ((f, event), out) in columns.zip(rest.chunks_mut(each.max(1))) {
        interrupt.check()?;
        let (figures, sums) = out.split_at_mut(series);
        let (of_value, of_shift) = figures.split_at_mut(SERIES_FIGURES);
        study_column(f, &node, common, of_value, room, interrupt)?;
        if !event.is_nan() {
            [of_value[7], of_value[8]] = either_side(f, 0.5 - event, &node.linear);
        }
        if common.shift {
            study_shift(f, &node, common, of_shift, room, interrupt)?;
        }
        batch_sums(&room.z, &common.batches, sums);
    }
    Ok(())
}

fn weigh(
    x: &[f64],
    common: &Common<'_>,
    about: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<Weights, KernelError> {
    let draws = x.len();
    let mut raw = Lease::new(draws);
    let log_sum = log_sum_exp(x);
    shifted(x, log_sum, &mut raw);
    exp_slice(&mut raw);
    let (least, most) = range(&raw);
    let mut efficiency = 1.0;
    if common.ordered && most > least {
        let found = common.chains.spread(&raw, &mut room.spectrum, interrupt)?;
        efficiency = found.efficiency();
    }
    let mut linear = Lease::new(draws);
    let shape = smooth(x, efficiency, &mut linear);
    let sums = slice_sums::<{ form::ALL }>(&linear);
    let sizes = [
        sums.effective_size(),
        sums.entropy_size(),
        sums.largest_share(),
    ];
    exp_slice(&mut linear);
    let node = Weights {
        linear,
        raw,
        varies: most > least,
    };
    let mut share = 1.0;
    if common.ordered && common.chains.count() > 1 {
        let w = weight_moments(&node.linear, &node.linear);
        let pooled = (w[2] - w[0] * w[0] / draws as f64) / draws as f64;
        let (w, spectrum) = (&node.linear, &mut room.spectrum);
        share = common
            .chains
            .equal_agreement(w, pooled, spectrum, interrupt)?;
    }
    let tail = LargestWeights::new(&node.raw, efficiency);
    let apart = if common.ordered && node.varies {
        tail.excursions(&common.chains, efficiency)
    } else {
        f64::INFINITY
    };
    let lost = node.raw.iter().filter(|w| **w == 0.0).count() as f64 / draws as f64;
    let varies = f64::from(u8::from(node.varies));
    let figures = [
        log_sum, shape, sizes[0], sizes[1], sizes[2], tail.share, apart, share, lost, varies,
    ];
    about.copy_from_slice(&figures);
    Ok(node)
}

fn shifted(x: &[f64], by: f64, out: &mut [f64]) {
    for (out, x) in out.iter_mut().zip(x) {
        *out = x - by;
    }
}

/// Work arrays that a task keeps for all its nodes.
#[derive(Default)]
pub struct Room {
    z: Vec<f64>,
    z_raw: Vec<f64>,
    chain: Vec<f64>,
    spectrum: Vec<f64>,
}

fn study_column(
    f: &[f64],
    node: &Weights,
    common: &Common<'_>,
    figures: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let scale = f.len() as f64;
    room.z.resize(f.len(), 0.0);
    room.z_raw.resize(f.len(), 0.0);
    let moved = weight_moments(f, &node.linear)[1];
    let of_z = influence(f, &node.linear, moved, scale, &mut room.z);
    influence(f, &node.raw, moved, scale, &mut room.z_raw);
    figures[0] = moved;
    figures[1] = of_z.beside / scale;
    figures[2] = 1.0;
    if common.ordered {
        let test = Test {
            f,
            moved,
            pooled: figures[1],
        };
        let rooms = [&mut room.chain, &mut room.spectrum];
        figures[2] = common
            .chains
            .agreement(&test, &node.linear, rooms, interrupt)?;
    }
    study_series(&of_z, common, figures, room, interrupt)
}

/// The same of the shift, from what [`study_column`] left in `room`.
fn study_shift(
    f: &[f64],
    node: &Weights,
    common: &Common<'_>,
    figures: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let scale = f.len() as f64;
    let mut of_z = Moments::default();
    if common.equal_base && !node.varies {
        // Ratios that are all the same move nothing, rounding or not.
        room.z.fill(0.0);
        room.z_raw.fill(0.0);
        figures[..2].fill(0.0);
    } else {
        take_base(f, common.own_raw, scale, &mut room.z_raw);
        of_z = take_base(f, common.own, scale, &mut room.z);
        let moments = [&node.linear, common.own].map(|w| weight_moments(f, w)[1]);
        figures[0] = moments[0] - moments[1];
        figures[1] = of_z.variance();
    }
    figures[2] = 1.0;
    if common.ordered {
        let (z, spectrum) = (&room.z, &mut room.spectrum);
        figures[2] = common
            .chains
            .equal_agreement(z, figures[1], spectrum, interrupt)?;
    }
    study_series(&of_z, common, figures, room, interrupt)
}

/// Fills entries 3 and on of the figures of a series: long-run variance of `z`; efficiency and tail
/// shape of `z_raw`, its twin from unsmoothed weights; contributions of `z`.
fn study_series(
    of_z: &Moments,
    common: &Common<'_>,
    figures: &mut [f64],
    room: &mut Room,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let (chains, spectrum) = (&common.chains, &mut room.spectrum);
    (figures[3], figures[4]) = (of_z.variance(), 1.0);
    if common.ordered {
        figures[3] = chains.spread(&room.z, spectrum, interrupt)?.long_run;
        figures[4] = chains
            .spread(&room.z_raw, spectrum, interrupt)?
            .efficiency();
    }
    figures[5] = signed_tail_shape(&room.z_raw, figures[4]);
    let carried = of_z.contributions();
    figures[6] = if carried.is_nan() {
        contributions(&room.z)
    } else {
        carried
    };
    Ok(())
}
