//! The largest weights of a node: what they hold, and from how many excursions they stem.

use super::chains::Chains;
use super::largest::guess;
use super::tail::tail_length;
use super::vector::dot::dot;
use super::vector::rank::nth_largest;
use super::vector::select::at_least;

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
        let without = Self {
            share: f64::NAN,
            places: Vec::new(),
            length,
        };
        let needed = length.max(plain) + 1;
        if needed > raw.len() {
            return without;
        }
        let mut places = Vec::new();
        at_least(raw, 1.0, guess(raw, 1.0, needed), &mut places);
        if places.len() < needed {
            places.clear();
            at_least(raw, 1.0, f64::NEG_INFINITY, &mut places);
        }
        let weight = |place: &u32| raw[*place as usize];
        let values: Vec<f64> = places.iter().map(weight).collect();
        let [Some(cutoff), Some(below), Some(unit)] =
            [needed, plain + 1, 1].map(|rank| nth_largest(&values, rank))
        else {
            return without;
        };
        let square = |w: f64| (w / unit) * (w / unit);
        // The shorter tail is the upper part of the longer one; what ties with its end adds nothing.
        let above = values.iter().filter(|w| **w > below);
        let above: f64 = above.map(|w| square(*w) - square(below)).sum();
        places.retain(|place| weight(place) > cutoff);
        Self {
            share: above / (dot(raw, raw) / (unit * unit)),
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
