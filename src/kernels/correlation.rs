//! Autocovariances at all lags at once, by the fast Fourier transform (Cooley & Tukey 1965).
//!
//! Forward by decimation in frequency, back by decimation in time: the order of frequencies in
//! between does not matter to a power spectrum, so that nothing is ever reordered.

use std::f64::consts::TAU;

use super::error::KernelError;
use super::ordered::Interrupt;

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
    let size = (2 * lags).next_power_of_two();
    let mut re = zeros(size)?;
    let mut im = zeros(size)?;
    re[..a.len()].copy_from_slice(a);
    im[..b.len()].copy_from_slice(b);
    let turns = Turns::new(size)?;
    let mut length = size;
    while length > 1 {
        interrupt.check()?;
        turns.apart(&mut re, &mut im, length);
        length /= 2;
    }
    for (re, im) in re.iter_mut().zip(&mut im) {
        *re = *re * *re + *im * *im;
        *im = 0.0;
    }
    while length < size {
        interrupt.check()?;
        length *= 2;
        turns.together(&mut re, &mut im, length);
    }
    re.truncate(lags);
    re.iter_mut().for_each(|value| *value /= size as f64);
    Ok(re)
}

fn zeros(entries: usize) -> Result<Vec<f64>, KernelError> {
    let mut room = Vec::new();
    room.try_reserve_exact(entries)
        .map_err(|_| KernelError::Memory { entries })?;
    room.resize(entries, 0.0);
    Ok(room)
}

/// Cosines and sines of `k/size` turns, for `k` below `size/2`.
struct Turns {
    cosines: Vec<f64>,
    sines: Vec<f64>,
}

impl Turns {
    fn new(size: usize) -> Result<Self, KernelError> {
        let mut turns = Self {
            cosines: zeros(size / 2)?,
            sines: zeros(size / 2)?,
        };
        let both = turns.cosines.iter_mut().zip(&mut turns.sines);
        for (k, (cosine, sine)) in both.enumerate() {
            (*sine, *cosine) = libm::sincos(TAU * (k as f64 / size as f64));
        }
        Ok(turns)
    }

    /// One stage forward, on blocks of `length`.
    fn apart(&self, re: &mut [f64], im: &mut [f64], length: usize) {
        let half = length / 2;
        let step = self.cosines.len() / half;
        for (re, im) in re.chunks_mut(length).zip(im.chunks_mut(length)) {
            let (re_a, re_b) = re.split_at_mut(half);
            let (im_a, im_b) = im.split_at_mut(half);
            for k in 0..half {
                let (cosine, sine) = (self.cosines[k * step], self.sines[k * step]);
                let (re_d, im_d) = (re_a[k] - re_b[k], im_a[k] - im_b[k]);
                re_a[k] += re_b[k];
                im_a[k] += im_b[k];
                re_b[k] = re_d * cosine + im_d * sine;
                im_b[k] = im_d * cosine - re_d * sine;
            }
        }
    }

    /// One stage back, on blocks of `length`.
    fn together(&self, re: &mut [f64], im: &mut [f64], length: usize) {
        let half = length / 2;
        let step = self.cosines.len() / half;
        for (re, im) in re.chunks_mut(length).zip(im.chunks_mut(length)) {
            let (re_a, re_b) = re.split_at_mut(half);
            let (im_a, im_b) = im.split_at_mut(half);
            for k in 0..half {
                let (cosine, sine) = (self.cosines[k * step], self.sines[k * step]);
                let re_t = re_b[k] * cosine - im_b[k] * sine;
                let im_t = im_b[k] * cosine + re_b[k] * sine;
                re_b[k] = re_a[k] - re_t;
                im_b[k] = im_a[k] - im_t;
                re_a[k] += re_t;
                im_a[k] += im_t;
            }
        }
    }
}
