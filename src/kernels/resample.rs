//! Draws with equal weights from draws with unequal ones.

use std::str::FromStr;

use rand::rngs::ChaCha8Rng;
use rand::{Rng, SeedableRng};

use super::error::KernelError;
use super::ordered::sum_by;
use super::quantile::Compensated;

/// A way to resample.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Method {
    /// Independent choices.
    Multinomial,
    /// One choice in each of `size` equal strata of the cumulative weight (Kitagawa 1996).
    Stratified,
    /// As stratified, with one uniform for all strata (Kitagawa 1996).
    Systematic,
    /// `⌊size · w⌋` copies for certain, the rest multinomial (Liu & Chen 1998).
    Residual,
    /// Each draw at most once (Efraimidis & Spirakis 2006).
    WithoutReplacement,
}

impl Method {
    /// The methods as callers name them.
    pub const NAMES: [&'static str; 5] = [
        "multinomial",
        "stratified",
        "systematic",
        "residual",
        "without_replacement",
    ];

    /// Stream of random numbers that belongs to this method alone. Part of what makes results
    /// repeatable: never change one.
    fn stream(self) -> u64 {
        match self {
            Self::Multinomial => 1,
            Self::Stratified => 2,
            Self::Systematic => 3,
            Self::Residual => 4,
            Self::WithoutReplacement => 5,
        }
    }
}

impl FromStr for Method {
    type Err = KernelError;

    fn from_str(name: &str) -> Result<Self, KernelError> {
        match name {
            "multinomial" => Ok(Self::Multinomial),
            "stratified" => Ok(Self::Stratified),
            "systematic" => Ok(Self::Systematic),
            "residual" => Ok(Self::Residual),
            "without_replacement" => Ok(Self::WithoutReplacement),
            _ => Err(KernelError::Method {
                found: name.to_owned(),
            }),
        }
    }
}

/// `size` indices of draws in ascending order, chosen by the weights `w`, shape `(n,)`, natural
/// scale, not necessarily normalised. A draw of weight 0 is never chosen.
///
/// The random numbers are those of ChaCha8 under `key`, on a stream of the method's own, 53 bits
/// each: the same key, weights and size give the same indices on every machine. With systematic
/// and residual resampling the count of a draw differs from `size · w_s / Σ w` by less than 1.
///
/// # Errors
/// [`KernelError::NoWeight`] when a weight is negative or not finite or none is positive;
/// [`KernelError::TooFewPositive`] without replacement; [`KernelError::Memory`].
///
/// Sources: Kitagawa (1996), Journal of Computational and Graphical Statistics 5, 1-25; Liu & Chen
/// (1998), JASA 93, 1032-1044; Efraimidis & Spirakis (2006), Information Processing Letters 97,
/// 181-185, its keys taken to the log scale.
pub fn resample(
    w: &[f64],
    size: usize,
    method: Method,
    key: [u8; 32],
) -> Result<Vec<usize>, KernelError> {
    let weights = scaled(w)?;
    let mut uniform = Uniform::new(key, method.stream());
    match method {
        Method::Multinomial => {
            let mut chosen = reserved(size)?;
            multinomial(&weights, size, &mut uniform, &mut chosen)?;
            Ok(chosen)
        }
        Method::Stratified => {
            let mut within: Vec<f64> = reserved(size)?;
            within.extend((0..size).map(|_| uniform.next()));
            let reached = |share: f64| {
                let whole = share.floor();
                let stratum = within.get(whole as usize).copied();
                whole as usize + usize::from(stratum.is_some_and(|u| u < share - whole))
            };
            by_position(&weights, size, reached)
        }
        Method::Systematic => {
            let offset = uniform.next();
            by_position(&weights, size, |share| (share - offset).ceil() as usize)
        }
        Method::Residual => residual(&weights, size, &mut uniform),
        Method::WithoutReplacement => without_replacement(&weights, size, &mut uniform),
    }
}

/// Weights in units of the largest, so that their sum cannot overflow.
fn scaled(w: &[f64]) -> Result<Vec<f64>, KernelError> {
    let bad = |weight: f64| !(weight >= 0.0 && weight.is_finite());
    if let Some(index) = w.iter().position(|&weight| bad(weight)) {
        return Err(KernelError::NoWeight {
            offender: Some((index, w[index])),
        });
    }
    let largest = w.iter().copied().fold(0.0, f64::max);
    if largest == 0.0 {
        return Err(KernelError::NoWeight { offender: None });
    }
    Ok(w.iter().map(|weight| weight / largest).collect())
}

fn reserved<T>(size: usize) -> Result<Vec<T>, KernelError> {
    let mut room = Vec::new();
    room.try_reserve_exact(size)
        .map_err(|_| KernelError::Memory { entries: size })?;
    Ok(room)
}

/// Running sums of `weights`, and the index from which on the sum is complete.
fn cumulated(weights: &[f64]) -> (Vec<f64>, usize) {
    let mut running = Compensated::default();
    let sums = weights
        .iter()
        .map(|&weight| {
            running.add(weight);
            running.value()
        })
        .collect();
    let last = weights.iter().rposition(|&weight| weight > 0.0);
    (sums, last.unwrap_or(0))
}

/// Copies each index until `reached(size · C_s / C)` of them are there in all, `C_s` the weight up
/// to and including draw `s`. A draw of weight 0 has the share of the draw before it, so that it
/// adds none; the last share is `size` exactly.
fn by_position(
    weights: &[f64],
    size: usize,
    reached: impl Fn(f64) -> usize,
) -> Result<Vec<usize>, KernelError> {
    let mut chosen = reserved(size)?;
    let (sums, last) = cumulated(weights);
    for (index, sum) in sums.iter().enumerate() {
        let target = reached(size as f64 * (sum / sums[last])).min(size);
        if target > chosen.len() {
            chosen.resize(target, index);
        }
    }
    Ok(chosen)
}

/// Appends `size` independent choices. Their uniforms are made sorted, as partial sums of
/// exponentials over the whole sum (Devroye 1986, section V.3.1).
fn multinomial(
    weights: &[f64],
    size: usize,
    uniform: &mut Uniform,
    chosen: &mut Vec<usize>,
) -> Result<(), KernelError> {
    let mut sorted: Vec<f64> = reserved(size + 1)?;
    let mut running = Compensated::default();
    for _ in 0..=size {
        running.add(uniform.exponential());
        sorted.push(running.value());
    }
    let whole = running.value();
    let (sums, last) = cumulated(weights);
    let total = sums[last];
    let mut index = 0;
    for position in &sorted[..size] {
        let target = position / whole * total;
        // `<=` passes over a leading weight of 0; the bound holds where rounding takes the target to
        // the total.
        while index < last && sums[index] <= target {
            index += 1;
        }
        chosen.push(index);
    }
    Ok(())
}

fn residual(
    weights: &[f64],
    size: usize,
    uniform: &mut Uniform,
) -> Result<Vec<usize>, KernelError> {
    let total = sum_by(weights.len(), |s| weights[s]);
    let mut chosen = reserved(size)?;
    let mut rest: Vec<f64> = Vec::with_capacity(weights.len());
    for (index, weight) in weights.iter().enumerate() {
        let wanted = size as f64 * (weight / total);
        // A count that is whole but for rounding is whole: the sum of all stays at most `size`.
        let certain = (wanted * (1.0 + 4.0 * f64::EPSILON)).floor();
        let target = (chosen.len() + certain as usize).min(size);
        chosen.resize(target, index);
        rest.push((wanted - certain).max(0.0));
    }
    let left = size - chosen.len();
    if left > 0 {
        multinomial(&rest, left, uniform, &mut chosen)?;
        chosen.sort_unstable();
    }
    Ok(chosen)
}

fn without_replacement(
    weights: &[f64],
    size: usize,
    uniform: &mut Uniform,
) -> Result<Vec<usize>, KernelError> {
    // Every draw uses up one number, whatever its weight: its key then depends on its index alone.
    let mut keyed: Vec<(f64, usize)> = Vec::with_capacity(weights.len());
    for (index, weight) in weights.iter().enumerate() {
        let key = uniform.exponential().ln() - weight.ln();
        if *weight > 0.0 {
            keyed.push((key, index));
        }
    }
    if size > keyed.len() {
        return Err(KernelError::TooFewPositive {
            size,
            positive: keyed.len(),
        });
    }
    if size > 0 && size < keyed.len() {
        keyed.select_nth_unstable_by(size - 1, |a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    }
    let mut chosen: Vec<usize> = keyed[..size].iter().map(|&(_, index)| index).collect();
    chosen.sort_unstable();
    Ok(chosen)
}

/// Numbers uniform on `[0, 1)` with 53 bits.
struct Uniform(ChaCha8Rng);

impl Uniform {
    fn new(key: [u8; 32], stream: u64) -> Self {
        let mut generator = ChaCha8Rng::from_seed(key);
        generator.set_stream(stream);
        Self(generator)
    }

    fn next(&mut self) -> f64 {
        (self.0.next_u64() >> 11) as f64 * (1.0 / (1_u64 << 53) as f64)
    }

    /// Standard exponential.
    fn exponential(&mut self) -> f64 {
        -(-self.next()).ln_1p()
    }
}
