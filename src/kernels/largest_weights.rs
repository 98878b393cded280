//! The largest weights of a node: what they hold, and from how many excursions they stem.

use super::chains::Chains;
use super::largest::largest;
use super::tail::tail_length;
use super::vector::dot::dot;

/// Fewest draws of a tail whose excursions are counted.
const FEWEST_EXCURSIONS: usize = 10;

/// The largest raw weights.
pub struct LargestWeights {
    /// `Σ (w² − u²)/Σ w²` over the largest weights, `u` the cut-off; NaN without a tail.
    pub share: f64,
    /// Draws of the tail that smoothing replaces, in input order.
    places: Vec<u32>,
    length: usize,
}

impl LargestWeights {
    /// Of normalised weights `raw`, shape `(n,)`, whose base draws have that relative efficiency.
    pub fn new(raw: &[f64], efficiency: f64) -> Self {
        let (length, plain) = (
            tail_length(raw.len(), efficiency),
            tail_length(raw.len(), 1.0),
        );
        let Some((ranked, cutoff)) = largest(raw, 1.0, length.max(plain)) else {
            return Self {
                share: f64::NAN,
                places: Vec::new(),
                length,
            };
        };
        // The shorter tail is the upper part of the longer one.
        let from = ranked.len() - plain;
        let below = if from == 0 {
            cutoff
        } else {
            ranked[from - 1].0
        };
        let unit = ranked.last().map_or(1.0, |ranked| ranked.0);
        let square = |w: f64| (w / unit) * (w / unit);
        let above = |place: &(f64, u32)| square(place.0) - square(below);
        let all = dot(raw, raw) / (unit * unit);
        let share = ranked[from..].iter().map(above).sum::<f64>() / all;
        let beyond = |ranked: &&(f64, u32)| ranked.0 > cutoff;
        let mut places: Vec<u32> = ranked
            .iter()
            .filter(beyond)
            .map(|ranked| ranked.1)
            .collect();
        places.sort_unstable();
        Self {
            share,
            places,
            length,
        }
    }

    /// As `excursions` of the trust in weights: draws of one chain no further apart than the
    /// integrated autocorrelation time are one; `+inf` where there is no tail to be judged.
    pub fn excursions(&self, chains: &Chains, efficiency: f64) -> f64 {
        let fewest = (self.length as f64 / 2.0).max(FEWEST_EXCURSIONS as f64);
        if (self.places.len() as f64) < fewest {
            return f64::INFINITY;
        }
        let gap = ((1.0 / efficiency) as u32).max(1);
        let apart = |pair: &[u32]| pair[1] - pair[0] > gap || chains.separate(pair[0], pair[1]);
        1.0 + self.places.windows(2).filter(|pair| apart(pair)).count() as f64
    }
}
