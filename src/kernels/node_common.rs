//! What all nodes of one base share, laid out in rows once.

use super::chains::Chains;
use super::error::KernelError;
use super::lease::Lease;
use super::log_sum::range;
use super::long_run;
use super::node_batches::Batches;
use super::node_sums::half_sums;
use super::nodes::{SERIES_FIGURES, WEIGHT_FIGURES};

/// What all nodes share.
pub struct Common {
    pub(super) columns: Vec<Column>,
    /// Weights of the base, smoothed and not, in rows.
    pub(super) own: [Lease; 2],
    pub(super) equal_base: bool,
    pub(super) chains: Chains,
    pub(super) batches: Batches,
    pub(super) shift: bool,
}

/// A quantity with its base mean taken off.
pub(super) struct Column {
    /// In rows.
    pub(super) entries: Lease,
    pub(super) low: f64,
    pub(super) high: f64,
    /// Base mean of an event, 0 and 1; else NaN.
    pub(super) event: f64,
    /// Mean under the smoothed weights of the base.
    pub(super) own: f64,
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

    /// Numbers that [`super::nodes::study`] writes.
    pub fn width(&self) -> usize {
        let series = SERIES_FIGURES * (1 + usize::from(self.shift));
        WEIGHT_FIGURES + self.columns.len() * (series + self.batches.count())
    }
}
