//! Draws with equal weights from draws with unequal ones.

use std::str::FromStr;

use super::columns::expect_shape;
use super::cumulated::{Cumulated, SHARES};
use super::error::KernelError;
use super::ordered::Interrupt;
use super::points::{BLOCK, COPIES, Ceilings, Strata, Uniform, reserved, room, sorted_positions};
use super::quantile::PART;
use super::vector::{Arithmetic, Work, dispatch};

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
    let mut chosen = room(size)?;
    resample_into(w, &mut chosen, method, key, &Interrupt::never())?;
    chosen.truncate(size);
    Ok(chosen)
}

/// # Errors
/// Those of [`resample`] that can be known beforehand.
pub fn expect_room(w: &[f64], size: usize, method: Method) -> Result<(), KernelError> {
    if method == Method::WithoutReplacement {
        let positive = w.iter().filter(|&&weight| weight > 0.0).count();
        if size > positive {
            Cumulated::new(w)?;
            return Err(KernelError::TooFewPositive { size, positive });
        }
    }
    drop(reserved::<i64>(size.saturating_add(COPIES))?);
    Ok(())
}

/// As [`resample`], into the first `size` of `chosen`, which must hold [`COPIES`] more.
///
/// # Errors
/// Also [`KernelError::Interrupted`], and [`KernelError::Shape`] where `chosen` has another length.
pub fn resample_into(
    w: &[f64],
    chosen: &mut [i64],
    method: Method,
    key: [u8; 32],
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let size = chosen.len().saturating_sub(COPIES);
    expect_shape("chosen", &[size + COPIES], &[chosen.len()])?;
    let weights = Cumulated::new(w)?;
    let mut uniform = Uniform::new(key, method.stream());
    match method {
        Method::Multinomial => {
            let whole = sorted_positions(chosen, size, &mut uniform, interrupt)?;
            weights.merge(&mut chosen[..size], whole);
        }
        Method::Stratified => {
            let mut strata = Strata::new(uniform, size);
            by_position(&weights, size, chosen, |shares, targets| {
                strata.reached(shares, targets);
            });
        }
        Method::Systematic => {
            let offset = uniform.next();
            by_position(&weights, size, chosen, |shares, targets| {
                dispatch(Ceilings {
                    shares,
                    offset,
                    targets,
                });
            });
        }
        Method::Residual => residual(&weights, size, chosen, &mut uniform, interrupt)?,
        Method::WithoutReplacement => {
            without_replacement(w, &mut chosen[..size], &mut uniform, interrupt)?;
        }
    }
    Ok(())
}

/// Writes copies of `first`, `first + 1`, … until as many are there in all as the targets say,
/// which must not fall; returns how many there are.
struct Copied<'a> {
    targets: &'a [u64],
    first: usize,
    chosen: &'a mut [i64],
    count: usize,
}

impl Work for Copied<'_> {
    type Output = usize;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> usize {
        // No place waits for a comparison: where the copies of a draw begin is known beforehand.
        let mut start = self.count;
        for (index, &target) in (self.first as i64..).zip(self.targets) {
            let target = target as usize;
            if let Some(copies) = self.chosen.get_mut(start..start + COPIES) {
                copies.copy_from_slice(&[index; COPIES]);
            }
            if target > start + COPIES {
                fill(self.chosen, start + COPIES, target, index);
            }
            start = target;
        }
        start
    }
}

/// Rare, and kept out of the loop.
#[cold]
fn fill(chosen: &mut [i64], from: usize, to: usize, index: i64) {
    if let Some(more) = chosen.get_mut(from..to) {
        more.fill(index);
    }
}

/// Copies each index until as many are there as `reached(shares, targets)` says for its share
/// `size · C_s / C`, `C_s` the weight up to and including draw `s`. A draw of weight 0 has the
/// share of the draw before it, so that it adds none; the last share is `size` exactly.
fn by_position(
    weights: &Cumulated<'_>,
    size: usize,
    chosen: &mut [i64],
    mut reached: impl FnMut(&[f64], &mut [u64]),
) {
    let mut targets = [0; SHARES];
    let mut count = 0;
    weights.shares(size as f64, |first, shares| {
        let targets = &mut targets[..shares.len()];
        reached(shares, targets);
        count = dispatch(Copied {
            targets,
            first,
            chosen: &mut *chosen,
            count,
        });
    });
    // A point within a rounding of the whole is above no share.
    if let Some(left) = chosen.get_mut(count..size) {
        left.fill(weights.last() as i64);
    }
}

fn residual(
    weights: &Cumulated<'_>,
    size: usize,
    chosen: &mut [i64],
    uniform: &mut Uniform,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let factor = size as f64 / weights.total();
    let mut left = size;
    let mut counts: Vec<u64> = reserved(weights.len())?;
    let mut rest: Vec<f64> = reserved(weights.len())?;
    for (index, weight) in weights.scaled().enumerate() {
        if index.is_multiple_of(PART) {
            interrupt.check()?;
        }
        let wanted = factor * weight;
        // A count that is whole but for rounding is whole: the sum of all stays at most `size`.
        let certain = (wanted * (1.0 + 4.0 * f64::EPSILON)) as usize;
        counts.push(certain.min(left) as u64);
        left -= certain.min(left);
        rest.push((wanted - certain as f64).max(0.0));
    }
    if left > 0 {
        let whole = sorted_positions(chosen, left, uniform, interrupt)?;
        interrupt.check()?;
        Cumulated::new(&rest)?.merge(&mut chosen[..left], whole);
        for index in &chosen[..left] {
            counts[*index as usize] += 1;
        }
    }
    interrupt.check()?;
    let mut target = 0;
    for count in &mut counts {
        target += *count;
        *count = target;
    }
    dispatch(Copied {
        targets: &counts,
        first: 0,
        chosen,
        count: 0,
    });
    Ok(())
}

fn without_replacement(
    weights: &[f64],
    chosen: &mut [i64],
    uniform: &mut Uniform,
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let size = chosen.len();
    // Every draw uses up one number, whatever its weight: its key then depends on its index alone.
    let mut keyed: Vec<(f64, usize)> = reserved(weights.len())?;
    let mut numbers = [0.0; BLOCK];
    for (block, weights) in weights.chunks(BLOCK).enumerate() {
        interrupt.check()?;
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
    for (target, (_, index)) in chosen.iter_mut().zip(&keyed) {
        *target = *index as i64;
    }
    chosen.sort_unstable();
    Ok(())
}
