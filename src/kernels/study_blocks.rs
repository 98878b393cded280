//! The second pass of [`super::study`] over half a chain, a block of draws at a time.

use super::study_sums::{Known, Stretch};
use super::summary::FIRST;
use super::vector::{Arithmetic, Work, dispatch};
use super::weight_sums::larger;

/// Draws of a block: with what follows it, four series of one fit the nearest cache.
const BLOCK: usize = 1024;

/// A block and the draws that follow it at the first lags.
const REACH: usize = BLOCK + FIRST - 1;

const LANES: usize = 8;

/// What the second pass finds over half a chain.
#[derive(Debug, Clone)]
pub struct Found {
    /// Sums of products of the four series at the first lags.
    pub products: [[f64; FIRST]; 4],
    /// `Σ ((z − z̄) · unit)³`.
    pub cubes: f64,
    /// Draws whose raw influence is positive, and negative.
    pub sides: [usize; 2],
    /// Raw influence values from the upper cut on, and down to the lower one.
    pub tails: [Vec<f64>; 2],
}

/// The second pass over half a chain.
pub fn look(half: Stretch<'_>, known: &Known) -> Found {
    let mut found = Found {
        products: [[0.0; FIRST]; 4],
        cubes: 0.0,
        sides: [0; 2],
        tails: [Vec::new(), Vec::new()],
    };
    let mut series = Series {
        centred: [[0.0; REACH]; 4],
        rough: [0.0; REACH],
    };
    let count = half.f.len();
    for from in (0..count).step_by(BLOCK) {
        let (own, reach) = (BLOCK.min(count - from), REACH.min(count - from));
        dispatch(Form {
            stretch: half.part(from, from + reach),
            known,
            series: &mut series,
        });
        for (series, totals) in series.centred.iter().zip(&mut found.products) {
            let z = &series[..reach];
            dispatch(Products { z, own, totals });
        }
        let z = &series.centred[0][..own];
        found.cubes += dispatch(Cubes {
            z,
            unit: known.unit,
        });
        dispatch(Tails {
            z: &series.rough[..own],
            cuts: known.cuts,
            found: &mut found,
        });
    }
    found
}

/// A block of each of the four series about its mean, and of z on raw weights as it is.
struct Series {
    centred: [[f64; REACH]; 4],
    rough: [f64; REACH],
}

struct Form<'a> {
    stretch: Stretch<'a>,
    known: &'a Known,
    series: &'a mut Series,
}

impl Work for Form<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let Stretch {
            f,
            w,
            raw,
            centre,
            count,
        } = self.stretch;
        let (mean, scale) = (self.known.chain_mean, self.known.scale);
        let means = self.known.means;
        let [smoothed, centred, own, chain] = &mut self.series.centred;
        let draws = f.iter().zip(w).zip(raw);
        let rough = centred.iter_mut().zip(&mut self.series.rough);
        let series = smoothed.iter_mut().zip(rough).zip(own).zip(chain);
        for (((f, w), r), (((z, (centred, rough)), own), chain)) in draws.zip(series) {
            let psi = f - centre;
            let on_raw = count * r * psi;
            *z = count * w * psi - means[0];
            *rough = on_raw;
            *centred = on_raw - means[1];
            *own = psi - means[2];
            let value = scale * w * (psi - mean);
            *chain = if *w == 0.0 { 0.0 } else { value } - means[3];
        }
    }
}

/// Adds the sums of products at the first lags of the first `own` entries of `z` with those that
/// follow them in `z`.
struct Products<'a> {
    z: &'a [f64],
    own: usize,
    totals: &'a mut [f64; FIRST],
}

impl Work for Products<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let z = self.z;
        // Up to here every draw has a partner at all lags.
        let whole = self.own.min((z.len() + 1).saturating_sub(FIRST));
        let later: [&[[f64; LANES]]; FIRST] = std::array::from_fn(|lag| {
            let later = z.get(lag..lag + whole).unwrap_or_default();
            later.as_chunks::<LANES>().0
        });
        let mut sums = [[0.0; LANES]; FIRST];
        for (place, early) in later[0].iter().enumerate() {
            for (sums, later) in sums.iter_mut().zip(&later) {
                for lane in 0..LANES {
                    sums[lane] = A::mul_add(early[lane], later[place][lane], sums[lane]);
                }
            }
        }
        for (lag, (total, sums)) in self.totals.iter_mut().zip(&sums).enumerate() {
            let rest = whole / LANES * LANES..self.own.min(z.len().saturating_sub(lag));
            let rest: f64 = rest.map(|i| z[i] * z[i + lag]).sum();
            *total += sums.iter().sum::<f64>() + rest;
        }
    }
}

struct Cubes<'a> {
    z: &'a [f64],
    unit: f64,
}

impl Work for Cubes<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        let cube = |z: f64| {
            let c = z * self.unit;
            c * c * c
        };
        let mut lanes = [0.0; 2 * LANES];
        let (chunks, rest) = self.z.as_chunks::<{ 2 * LANES }>();
        for chunk in chunks {
            for (lane, z) in lanes.iter_mut().zip(chunk) {
                *lane += cube(*z);
            }
        }
        for (lane, z) in lanes.iter_mut().zip(rest) {
            *lane += cube(*z);
        }
        lanes.into_iter().sum()
    }
}

struct Tails<'a> {
    z: &'a [f64],
    cuts: [f64; 2],
    found: &'a mut Found,
}

impl Work for Tails<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let [upper, lower] = self.cuts;
        let (mut positive, mut negative) = ([0.0; LANES], [0.0; LANES]);
        let mut keep = |z: f64| {
            if z >= upper {
                self.found.tails[0].push(z);
            }
            if z <= lower {
                self.found.tails[1].push(z);
            }
        };
        let (chunks, rest) = self.z.as_chunks::<LANES>();
        for chunk in chunks {
            let (mut high, mut low) = (f64::NEG_INFINITY, f64::INFINITY);
            for lane in 0..LANES {
                let z = chunk[lane];
                positive[lane] += if z > 0.0 { 1.0 } else { 0.0 };
                negative[lane] += if z < 0.0 { 1.0 } else { 0.0 };
            }
            for z in chunk {
                high = larger(*z, high);
                low = -larger(-*z, -low);
            }
            if (high >= upper) | (low <= lower) {
                chunk.iter().for_each(|z| keep(*z));
            }
        }
        rest.iter().for_each(|z| keep(*z));
        let side = |lanes: [f64; LANES], sign: f64| {
            let rest = rest.iter().filter(|&&z| sign * z > 0.0).count();
            lanes.iter().sum::<f64>() as usize + rest
        };
        self.found.sides[0] += side(positive, 1.0);
        self.found.sides[1] += side(negative, -1.0);
    }
}
