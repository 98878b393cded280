//! Sums of a series in rows over batches of draws.

use std::ops::Range;

use super::lane_series::{Series, Sums};
use super::lanes::{LANES, Layout};
use super::vector::dispatch;

/// Where the batches lie in the rows of a layout.
pub struct Batches {
    count: usize,
    /// For every group, the rows between which no batch begins or ends.
    stretches: Vec<Vec<Stretch>>,
}

struct Stretch {
    rows: Range<usize>,
    /// The batch of each half; beyond all of them where there is none.
    batches: [usize; LANES],
}

impl Batches {
    /// Of batches that cover all draws in order.
    pub fn new(batches: &[Range<usize>], layout: &Layout) -> Self {
        let stretches = layout.groups().iter().map(|group| {
            let halves = &layout.halves()[group.halves.clone()];
            let mut cuts = vec![0, group.rows.len()];
            for half in halves {
                let starts = batches.iter().map(|batch| batch.start);
                let within = starts.filter(|start| half.contains(start));
                cuts.extend(within.map(|start| start - half.start));
                cuts.push(half.len());
            }
            cuts.sort_unstable();
            cuts.dedup();
            let stretch = |pair: &[usize]| {
                let mut of_lanes = [batches.len(); LANES];
                for (batch, half) in of_lanes.iter_mut().zip(halves) {
                    if pair[0] < half.len() {
                        let draw = half.start + pair[0];
                        *batch = batches.partition_point(|batch| batch.end <= draw);
                    }
                }
                Stretch {
                    rows: pair[0]..pair[1],
                    batches: of_lanes,
                }
            };
            cuts.windows(2).map(stretch).collect()
        });
        Self {
            count: batches.len(),
            stretches: stretches.collect(),
        }
    }

    /// How many there are.
    pub fn count(&self) -> usize {
        self.count
    }

    /// Sums of the series over each.
    pub fn sums(&self, series: &Series, layout: &Layout, sums: &mut [f64]) {
        sums.fill(0.0);
        for (group, stretches) in layout.groups().iter().zip(&self.stretches) {
            let rows = series.rows(group);
            for stretch in stretches {
                let found = dispatch(Sums(&rows[stretch.rows.clone()]));
                for (found, batch) in found.iter().zip(stretch.batches) {
                    if let Some(sum) = sums.get_mut(batch) {
                        *sum += found;
                    }
                }
            }
        }
    }
}
