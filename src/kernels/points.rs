//! The random points at which resampling reads off the running sums of the weights.

use rand::rngs::ChaCha8Rng;
use rand::{Rng, SeedableRng};

use super::cumulated::SHARES;
use super::error::KernelError;
use super::ordered::Interrupt;
use super::quantile::Compensated;
use super::vector::ln::ln;
use super::vector::{Arithmetic, TWO_52, Work, dispatch};

/// Numbers that are made or worked on together.
pub(super) const BLOCK: usize = 256;

/// Copies of an index that are written whether needed or not: most counts are at most this, and a
/// loop without a branch is worth the idle copies. Room for them is kept behind the result.
pub const COPIES: usize = 4;

/// `⌈share − offset⌉` of shares from 0 to `2^51`.
pub(super) struct Ceilings<'a> {
    pub(super) shares: &'a [f64],
    pub(super) offset: f64,
    pub(super) targets: &'a mut [u64],
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
pub(super) struct Strata {
    uniform: Uniform,
    /// Those of the strata `first..first + numbers.len()`.
    numbers: Vec<f64>,
    first: usize,
    size: usize,
}

impl Strata {
    pub(super) fn new(uniform: Uniform, size: usize) -> Self {
        Self {
            uniform,
            numbers: Vec::new(),
            first: 0,
            size,
        }
    }

    /// How many strata have their point below each of `shares`, which must not fall.
    pub(super) fn reached(&mut self, shares: &[f64], targets: &mut [u64]) {
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
        let mut rest = [0.0; SHARES];
        dispatch(Floors {
            shares,
            wholes: targets,
            rest: &mut rest,
        });
        dispatch(Passed {
            targets,
            rest: &rest,
            numbers: &self.numbers,
            first: self.first,
        });
        self.numbers.pop();
    }
}

/// Adds 1 to the targets whose stratum, `numbers` from the `first` on, has its number below `rest`.
struct Passed<'a> {
    targets: &'a mut [u64],
    rest: &'a [f64],
    numbers: &'a [f64],
    first: usize,
}

impl Work for Passed<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (target, rest) in self.targets.iter_mut().zip(self.rest) {
            let below = self.numbers[*target as usize - self.first] < *rest;
            *target += u64::from(below);
        }
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

/// Writes the bits of `size` independent uniforms on the interval up to the value returned, sorted,
/// to the front of `sums`, which is longer: partial sums of exponentials, and the whole sum (Devroye
/// 1986, section V.3.1).
pub(super) fn sorted_positions(
    sums: &mut [i64],
    size: usize,
    uniform: &mut Uniform,
    interrupt: &Interrupt<'_>,
) -> Result<f64, KernelError> {
    let mut numbers = [0.0; BLOCK];
    let mut before = Compensated::default();
    for sums in sums[..=size].chunks_mut(BLOCK) {
        interrupt.check()?;
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
    Ok(f64::from_bits(sums[size] as u64))
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

/// Numbers uniform on `[0, 1)` with 53 bits.
pub(super) struct Uniform(ChaCha8Rng);

impl Uniform {
    pub(super) fn new(key: [u8; 32], stream: u64) -> Self {
        let mut generator = ChaCha8Rng::from_seed(key);
        generator.set_stream(stream);
        Self(generator)
    }

    pub(super) fn next(&mut self) -> f64 {
        (self.0.next_u64() >> 11) as f64 * (1.0 / (1_u64 << 53) as f64)
    }

    /// As so many calls of [`Self::next`].
    pub(super) fn fill(&mut self, numbers: &mut [f64]) {
        let mut bytes = [[0; 8]; BLOCK];
        for numbers in numbers.chunks_mut(BLOCK) {
            let bytes = &mut bytes[..numbers.len()];
            self.0.fill_bytes(bytes.as_flattened_mut());
            dispatch(Fractions { bytes, numbers });
        }
    }
}

/// 64 bits, the low ones first, to a number on `[0, 1)` of their upper 53.
struct Fractions<'a> {
    bytes: &'a [[u8; 8]],
    numbers: &'a mut [f64],
}

impl Work for Fractions<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (number, bytes) in self.numbers.iter_mut().zip(self.bytes) {
            let bits = u64::from_le_bytes(*bytes) >> 11;
            *number = bits as f64 * (1.0 / (1_u64 << 53) as f64);
        }
    }
}

/// Room for `size` indices and for those that are written whether needed or not.
pub(super) fn room(size: usize) -> Result<Vec<i64>, KernelError> {
    let entries = size.saturating_add(COPIES);
    // Asked for first, since a plain allocation that fails ends the process.
    drop(reserved::<i64>(entries)?);
    Ok(vec![0; entries])
}

pub(super) fn reserved<T>(size: usize) -> Result<Vec<T>, KernelError> {
    let mut room = Vec::new();
    room.try_reserve_exact(size)
        .map_err(|_| KernelError::Memory { entries: size })?;
    Ok(room)
}
