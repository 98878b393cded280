//! Draws with equal weights from draws with unequal ones.

use std::str::FromStr;

use rand::rngs::ChaCha8Rng;
use rand::{Rng, SeedableRng};

use super::cumulated::Cumulated;
use super::error::KernelError;
use super::quantile::Compensated;
use super::vector::ln::ln;
use super::vector::{Arithmetic, Work, dispatch};

/// Numbers that are made or worked on together.
const BLOCK: usize = 256;

/// Added to an integer below it, leaves that integer in the last bits.
const TWO_52: f64 = 4_503_599_627_370_496.0;

/// Copies of an index that are written whether needed or not: most counts are at most this, and a
/// loop without a branch is worth the idle copies. Room for them is kept behind the result.
const COPIES: usize = 4;

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
/// each: the same key, weights and size give the same indices. With systematic and residual
/// resampling the count of a draw differs from `size · w_s / Σ w` by less than 1.
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
) -> Result<Vec<i64>, KernelError> {
    let weights = Cumulated::new(w)?;
    let mut uniform = Uniform::new(key, method.stream());
    match method {
        Method::Multinomial => {
            let (mut chosen, whole) = sorted_positions(size, &mut uniform)?;
            weights.merge(&mut chosen, whole);
            Ok(chosen)
        }
        Method::Stratified => {
            let mut strata = Strata::new(uniform, size);
            by_position(&weights, size, |shares, targets| {
                strata.reached(shares, targets);
            })
        }
        Method::Systematic => {
            let offset = uniform.next();
            by_position(&weights, size, |shares, targets| {
                dispatch(Ceilings {
                    shares,
                    offset,
                    targets,
                });
            })
        }
        Method::Residual => residual(&weights, size, &mut uniform),
        Method::WithoutReplacement => without_replacement(w, size, &mut uniform),
    }
}

/// Room for `size` indices and for those that are written whether needed or not.
fn room(size: usize) -> Result<Vec<i64>, KernelError> {
    let entries = size.saturating_add(COPIES);
    // Asked for first, since a plain allocation that fails ends the process.
    drop(reserved::<i64>(entries)?);
    Ok(vec![0; entries])
}

/// Writes copies of `first`, `first + 1`, … until as many are there in all as the targets say, at
/// most `size`; returns how many there are.
fn copy_until(
    targets: &[u64],
    first: usize,
    chosen: &mut [i64],
    mut count: usize,
    size: usize,
) -> usize {
    for (place, &target) in targets.iter().enumerate() {
        let index = (first + place) as i64;
        let target = size.min(target as usize);
        if let Some(copies) = chosen[count..].first_chunk_mut::<COPIES>() {
            *copies = [index; COPIES];
        }
        if target > count + COPIES {
            chosen[count + COPIES..target].fill(index);
        }
        count = count.max(target);
    }
    count
}

fn reserved<T>(size: usize) -> Result<Vec<T>, KernelError> {
    let mut room = Vec::new();
    room.try_reserve_exact(size)
        .map_err(|_| KernelError::Memory { entries: size })?;
    Ok(room)
}

/// Copies each index until as many are there as `reached(shares, targets)` says for its share
/// `size · C_s / C`, `C_s` the weight up to and including draw `s`. A draw of weight 0 has the
/// share of the draw before it, so that it adds none; the last share is `size` exactly.
fn by_position(
    weights: &Cumulated<'_>,
    size: usize,
    mut reached: impl FnMut(&[f64], &mut [u64]),
) -> Result<Vec<i64>, KernelError> {
    let mut chosen = room(size)?;
    let mut targets = [0; BLOCK];
    let mut count = 0;
    weights.shares(size as f64, |first, shares| {
        let targets = &mut targets[..shares.len()];
        reached(shares, targets);
        count = copy_until(targets, first, &mut chosen, count, size);
    });
    chosen.truncate(size);
    Ok(chosen)
}

/// `⌈share − offset⌉` of shares from 0 to `2^51`.
struct Ceilings<'a> {
    shares: &'a [f64],
    offset: f64,
    targets: &'a mut [u64],
}

impl Work for Ceilings<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (target, share) in self.targets.iter_mut().zip(self.shares) {
            let ceiling = (share - self.offset).ceil() + TWO_52;
            *target = ceiling.to_bits() & ((1 << 52) - 1);
        }
    }
}

/// The uniform number of every stratum, made in order.
struct Strata {
    uniform: Uniform,
    /// Those of the strata `first..first + numbers.len()`.
    numbers: Vec<f64>,
    first: usize,
    size: usize,
}

impl Strata {
    fn new(uniform: Uniform, size: usize) -> Self {
        Self {
            uniform,
            numbers: Vec::new(),
            first: 0,
            size,
        }
    }

    /// How many strata have their point below each of `shares`, which must not fall.
    fn reached(&mut self, shares: &[f64], targets: &mut [u64]) {
        let (Some(&least), Some(&most)) = (shares.first(), shares.last()) else {
            return;
        };
        let passed = (least as usize).min(self.size) - self.first;
        let known = passed.min(self.numbers.len());
        self.numbers.drain(..known);
        for _ in known..passed {
            self.uniform.next();
        }
        self.first += passed;
        let needed = (most as usize + 1).min(self.size) - self.first;
        let known = self.numbers.len();
        if needed > known {
            self.numbers.resize(needed, 0.0);
            self.uniform.fill(&mut self.numbers[known..]);
        }
        // Beyond the last stratum there is no point.
        self.numbers.push(f64::INFINITY);
        let mut rest = [0.0; BLOCK];
        dispatch(Floors {
            shares,
            wholes: targets,
            rest: &mut rest,
        });
        for (target, rest) in targets.iter_mut().zip(rest) {
            let below = self.numbers[*target as usize - self.first] < rest;
            *target += u64::from(below);
        }
        self.numbers.pop();
    }
}

/// `⌊share⌋` and what is left, of shares from 0 to `2^51`.
struct Floors<'a> {
    shares: &'a [f64],
    wholes: &'a mut [u64],
    rest: &'a mut [f64],
}

impl Work for Floors<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for ((share, whole), rest) in self.shares.iter().zip(self.wholes).zip(self.rest) {
            let floor = share.floor();
            *whole = (floor + TWO_52).to_bits() & ((1 << 52) - 1);
            *rest = share - floor;
        }
    }
}

/// The bits of `size` independent uniforms on the interval up to the second value, sorted: partial
/// sums of exponentials, and the whole sum (Devroye 1986, section V.3.1).
fn sorted_positions(size: usize, uniform: &mut Uniform) -> Result<(Vec<i64>, f64), KernelError> {
    let mut sums = room(size)?;
    let mut numbers = [0.0; BLOCK];
    let mut before = Compensated::default();
    for sums in sums[..=size].chunks_mut(BLOCK) {
        let numbers = &mut numbers[..sums.len()];
        uniform.fill(numbers);
        dispatch(Exponentials(numbers));
        let base = before.value();
        let mut running = base;
        for (sum, number) in sums.iter_mut().zip(numbers) {
            running += *number;
            *sum = running.to_bits() as i64;
        }
        before.add(running - base);
    }
    let whole = f64::from_bits(sums[size] as u64);
    sums.truncate(size);
    Ok((sums, whole))
}

/// Uniforms on `[0, 1)` to standard exponentials.
struct Exponentials<'a>(&'a mut [f64]);

impl Work for Exponentials<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for number in self.0 {
            // With 53 bits the difference is exact, and at least 2^-53.
            *number = -ln::<A>(1.0 - *number);
        }
    }
}

fn residual(
    weights: &Cumulated<'_>,
    size: usize,
    uniform: &mut Uniform,
) -> Result<Vec<i64>, KernelError> {
    let factor = size as f64 / weights.total();
    let mut left = size;
    let mut counts: Vec<u64> = reserved(weights.len())?;
    let mut rest: Vec<f64> = reserved(weights.len())?;
    for weight in weights.scaled() {
        let wanted = factor * weight;
        // A count that is whole but for rounding is whole: the sum of all stays at most `size`.
        let certain = (wanted * (1.0 + 4.0 * f64::EPSILON)) as usize;
        counts.push(certain.min(left) as u64);
        left -= certain.min(left);
        rest.push((wanted - certain as f64).max(0.0));
    }
    if left > 0 {
        let (mut drawn, whole) = sorted_positions(left, uniform)?;
        Cumulated::new(&rest)?.merge(&mut drawn, whole);
        for index in drawn {
            counts[index as usize] += 1;
        }
    }
    let mut target = 0;
    for count in &mut counts {
        target += *count;
        *count = target;
    }
    let mut chosen = room(size)?;
    copy_until(&counts, 0, &mut chosen, 0, size);
    chosen.truncate(size);
    Ok(chosen)
}

fn without_replacement(
    weights: &[f64],
    size: usize,
    uniform: &mut Uniform,
) -> Result<Vec<i64>, KernelError> {
    // Every draw uses up one number, whatever its weight: its key then depends on its index alone.
    let mut keyed: Vec<(f64, usize)> = reserved(weights.len())?;
    let mut numbers = [0.0; BLOCK];
    for (block, weights) in weights.chunks(BLOCK).enumerate() {
        let numbers = &mut numbers[..weights.len()];
        uniform.fill(numbers);
        for (place, (number, weight)) in numbers.iter().zip(weights).enumerate() {
            let key = (-(-number).ln_1p()).ln() - weight.ln();
            if *weight > 0.0 {
                keyed.push((key, block * BLOCK + place));
            }
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
    let mut chosen: Vec<i64> = keyed[..size]
        .iter()
        .map(|&(_, index)| index as i64)
        .collect();
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

    fn fill(&mut self, numbers: &mut [f64]) {
        for number in numbers {
            *number = self.next();
        }
    }
}
