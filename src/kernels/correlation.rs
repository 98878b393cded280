//! Autocovariances at all lags at once, by the fast Fourier transform (Cooley & Tukey 1965).
//!
//! Forward by decimation in frequency, back by decimation in time: the order of frequencies in
//! between does not matter to a power spectrum, so that nothing is ever reordered.

use std::f64::consts::TAU;

use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::{Arithmetic, Work, dispatch};

/// Length of a block whose stages are all done in one go, within the nearest cache.
const SHORT: usize = 1024;

/// `Σ_i a_i a_{i+t} + Σ_i b_i b_{i+t}` for every lag `t` below `lags`, which is at least the length
/// of both. The real part of the correlation of `a + i b`; error about `1e-16 log n` of lag 0.
///
/// # Errors
/// [`KernelError::Interrupted`]; [`KernelError::Memory`].
pub fn correlations(
    a: &[f64],
    b: &[f64],
    lags: usize,
    interrupt: &Interrupt<'_>,
) -> Result<Vec<f64>, KernelError> {
    let mut spectrum = Spectrum::new(lags)?;
    spectrum.add(a, b, interrupt)?;
    spectrum.correlations(interrupt)
}

/// The power spectrum of some series, added up: one way back serves all.
pub struct Spectrum {
    lags: usize,
    power: Vec<f64>,
    re: Vec<f64>,
    im: Vec<f64>,
    turns: Turns,
}

impl Spectrum {
    /// No series yet; each may have up to `lags` entries.
    ///
    /// # Errors
    /// [`KernelError::Memory`].
    pub fn new(lags: usize) -> Result<Self, KernelError> {
        let size = (2 * lags).next_power_of_two();
        Ok(Self {
            lags,
            power: zeros(size)?,
            re: zeros(size)?,
            im: zeros(size)?,
            turns: Turns::new(size)?,
        })
    }

    /// Adds two series.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`].
    pub fn add(
        &mut self,
        a: &[f64],
        b: &[f64],
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        let series = [(&mut self.re, a), (&mut self.im, b)];
        for (room, entries) in series {
            room.fill(0.0);
            room[..entries.len()].copy_from_slice(entries);
        }
        self.turns.apart(&mut self.re, &mut self.im, interrupt)?;
        for ((power, re), im) in self.power.iter_mut().zip(&self.re).zip(&self.im) {
            *power += re * re + im * im;
        }
        Ok(())
    }

    /// The sums of products at every lag, over all series.
    ///
    /// # Errors
    /// [`KernelError::Interrupted`].
    pub fn correlations(mut self, interrupt: &Interrupt<'_>) -> Result<Vec<f64>, KernelError> {
        let size = self.power.len() as f64;
        self.im.fill(0.0);
        self.turns
            .together(&mut self.power, &mut self.im, interrupt)?;
        self.power.truncate(self.lags);
        self.power.iter_mut().for_each(|value| *value /= size);
        Ok(self.power)
    }
}

fn zeros(entries: usize) -> Result<Vec<f64>, KernelError> {
    let mut room = Vec::new();
    room.try_reserve_exact(entries)
        .map_err(|_| KernelError::Memory { entries })?;
    room.resize(entries, 0.0);
    Ok(room)
}

/// Cosines and sines for every stage, that of length 2 first.
struct Turns(Vec<(Vec<f64>, Vec<f64>)>);

impl Turns {
    fn new(size: usize) -> Result<Self, KernelError> {
        let (mut cosines, mut sines) = (zeros(size / 2)?, zeros(size / 2)?);
        let both = cosines.iter_mut().zip(&mut sines);
        for (k, (cosine, sine)) in both.enumerate() {
            (*sine, *cosine) = libm::sincos(TAU * (k as f64 / size as f64));
        }
        let mut stages = Vec::new();
        while !cosines.is_empty() {
            let half = cosines.len() / 2;
            let (mut fewer, mut lower) = (zeros(half)?, zeros(half)?);
            for k in 0..half {
                (fewer[k], lower[k]) = (cosines[2 * k], sines[2 * k]);
            }
            stages.push((
                std::mem::replace(&mut cosines, fewer),
                std::mem::replace(&mut sines, lower),
            ));
        }
        stages.reverse();
        Ok(Self(stages))
    }

    /// Forward, half after half, so that short blocks stay in the caches.
    fn apart(
        &self,
        re: &mut [f64],
        im: &mut [f64],
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        let stages = &self.0[..re.len().ilog2() as usize];
        if re.len() <= SHORT {
            dispatch(Apart { stages, re, im });
            return Ok(());
        }
        interrupt.check()?;
        dispatch(Apart {
            stages: &stages[stages.len() - 1..],
            re: &mut *re,
            im: &mut *im,
        });
        let half = re.len() / 2;
        let ((re_a, re_b), (im_a, im_b)) = (re.split_at_mut(half), im.split_at_mut(half));
        self.apart(re_a, im_a, interrupt)?;
        self.apart(re_b, im_b, interrupt)
    }

    /// Back, likewise.
    fn together(
        &self,
        re: &mut [f64],
        im: &mut [f64],
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        let stages = &self.0[..re.len().ilog2() as usize];
        if re.len() <= SHORT {
            dispatch(Together { stages, re, im });
            return Ok(());
        }
        interrupt.check()?;
        let half = re.len() / 2;
        {
            let ((re_a, re_b), (im_a, im_b)) = (re.split_at_mut(half), im.split_at_mut(half));
            self.together(re_a, im_a, interrupt)?;
            self.together(re_b, im_b, interrupt)?;
        }
        let stages = &stages[stages.len() - 1..];
        dispatch(Together { stages, re, im });
        Ok(())
    }
}

/// Stages forward, from the longest on; the shorter ones on every block.
struct Apart<'a> {
    stages: &'a [(Vec<f64>, Vec<f64>)],
    re: &'a mut [f64],
    im: &'a mut [f64],
}

impl Work for Apart<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (cosines, sines) in self.stages.iter().rev() {
            let half = cosines.len();
            let blocks = self.re.chunks_exact_mut(2 * half);
            for (re, im) in blocks.zip(self.im.chunks_exact_mut(2 * half)) {
                let (re_a, re_b) = re.split_at_mut(half);
                let (im_a, im_b) = im.split_at_mut(half);
                let first = re_a.iter_mut().zip(im_a);
                let second = re_b.iter_mut().zip(im_b);
                let turns = cosines.iter().zip(sines);
                for (((re_a, im_a), (re_b, im_b)), (cosine, sine)) in first.zip(second).zip(turns) {
                    let (re_d, im_d) = (*re_a - *re_b, *im_a - *im_b);
                    *re_a += *re_b;
                    *im_a += *im_b;
                    *re_b = A::mul_add(re_d, *cosine, im_d * sine);
                    *im_b = A::mul_add(im_d, *cosine, -(re_d * sine));
                }
            }
        }
    }
}

/// Stages back, from the shortest on.
struct Together<'a> {
    stages: &'a [(Vec<f64>, Vec<f64>)],
    re: &'a mut [f64],
    im: &'a mut [f64],
}

impl Work for Together<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (cosines, sines) in self.stages {
            let half = cosines.len();
            let blocks = self.re.chunks_exact_mut(2 * half);
            for (re, im) in blocks.zip(self.im.chunks_exact_mut(2 * half)) {
                let (re_a, re_b) = re.split_at_mut(half);
                let (im_a, im_b) = im.split_at_mut(half);
                let first = re_a.iter_mut().zip(im_a);
                let second = re_b.iter_mut().zip(im_b);
                let turns = cosines.iter().zip(sines);
                for (((re_a, im_a), (re_b, im_b)), (cosine, sine)) in first.zip(second).zip(turns) {
                    let re_t = A::mul_add(*re_b, *cosine, -(*im_b * sine));
                    let im_t = A::mul_add(*im_b, *cosine, *re_b * sine);
                    *re_b = *re_a - re_t;
                    *im_b = *im_a - im_t;
                    *re_a += re_t;
                    *im_a += im_t;
                }
            }
        }
    }
}
