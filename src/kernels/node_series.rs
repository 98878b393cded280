//! Influence series of a weighted mean: formed, and all its sums taken, in one pass each.

use std::ops::Range;

use super::vector::{Arithmetic, Work, dispatch};

const LANES: usize = 8;

const ZERO: [f64; LANES] = [0.0; LANES];

/// Sums of a series `z` in one pass.
#[derive(Debug, Clone, Copy, Default)]
pub struct Moments {
    count: f64,
    first: f64,
    second: f64,
    third: f64,
    /// `Σ z ψ` of the pass that formed it.
    pub beside: f64,
}

impl Moments {
    /// `Σ (z − z̄)²/n`; 0 without entries.
    pub fn variance(&self) -> f64 {
        if self.count == 0.0 {
            return 0.0;
        }
        (self.second - self.first * (self.first / self.count)) / self.count
    }

    /// `(Σ c²)³/(Σ c³)²` of the centred series, as [`super::mean::contributions`]: exact enough
    /// since such a series is centred already, but for rounding. `+inf` for a constant series; NaN
    /// where a power leaves the range of numbers.
    pub fn contributions(&self) -> f64 {
        let mean = self.first / self.count;
        let second = self.second - self.first * mean;
        if self.second == 0.0 {
            return f64::INFINITY;
        }
        let third = self.third - mean * (3.0 * self.second - 2.0 * self.first * mean);
        if !(third.is_finite() && second > f64::MIN_POSITIVE) {
            return f64::NAN;
        }
        let ratio = second / third;
        second * ratio * ratio
    }
}

/// Writes `z = scale w (f − moved)`; its sums, `Σ z (f − moved)` among them.
pub fn influence(f: &[f64], w: &[f64], moved: f64, scale: f64, z: &mut [f64]) -> Moments {
    dispatch(Influence {
        f,
        w,
        moved,
        scale,
        z,
    })
}

struct Influence<'a> {
    f: &'a [f64],
    w: &'a [f64],
    moved: f64,
    scale: f64,
    z: &'a mut [f64],
}

impl Work for Influence<'_> {
    type Output = Moments;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Moments {
        let (mut first, mut second, mut third, mut beside) = (ZERO, ZERO, ZERO, ZERO);
        let (f, f_rest) = self.f.as_chunks::<LANES>();
        let (w, w_rest) = self.w.as_chunks::<LANES>();
        let (z, z_rest) = self.z.as_chunks_mut::<LANES>();
        for ((f, w), z) in f.iter().zip(w).zip(z) {
            // Formed apart from memory: a store that is read again would stand in the way.
            let (mut psi, mut value, mut square) = (ZERO, ZERO, ZERO);
            for lane in 0..LANES {
                psi[lane] = f[lane] - self.moved;
            }
            for lane in 0..LANES {
                value[lane] = self.scale * w[lane] * psi[lane];
            }
            for lane in 0..LANES {
                square[lane] = value[lane] * value[lane];
            }
            *z = value;
            add(&value, &mut first);
            add(&square, &mut second);
            add_product::<A>(&square, &value, &mut third);
            add_product::<A>(&value, &psi, &mut beside);
        }
        for ((f, w), z) in f_rest.iter().zip(w_rest).zip(z_rest) {
            let psi = f - self.moved;
            *z = self.scale * w * psi;
            first[0] += *z;
            second[0] += *z * *z;
            third[0] += *z * *z * *z;
            beside[0] += *z * psi;
        }
        Moments {
            count: self.f.len() as f64,
            first: tree(first),
            second: tree(second),
            third: tree(third),
            beside: tree(beside),
        }
    }
}

/// Takes `scale v f` off `z`; the sums of what is left.
pub fn take_base(f: &[f64], v: &[f64], scale: f64, z: &mut [f64]) -> Moments {
    dispatch(TakeBase { f, v, scale, z })
}

struct TakeBase<'a> {
    f: &'a [f64],
    v: &'a [f64],
    scale: f64,
    z: &'a mut [f64],
}

impl Work for TakeBase<'_> {
    type Output = Moments;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Moments {
        let (mut first, mut second, mut third) = (ZERO, ZERO, ZERO);
        let (f, f_rest) = self.f.as_chunks::<LANES>();
        let (v, v_rest) = self.v.as_chunks::<LANES>();
        let (z, z_rest) = self.z.as_chunks_mut::<LANES>();
        for ((f, v), z) in f.iter().zip(v).zip(z) {
            let (mut value, mut square) = (ZERO, ZERO);
            for lane in 0..LANES {
                value[lane] = z[lane] - self.scale * v[lane] * f[lane];
            }
            for lane in 0..LANES {
                square[lane] = value[lane] * value[lane];
            }
            *z = value;
            add(&value, &mut first);
            add(&square, &mut second);
            add_product::<A>(&square, &value, &mut third);
        }
        for ((f, v), z) in f_rest.iter().zip(v_rest).zip(z_rest) {
            *z -= self.scale * v * f;
            first[0] += *z;
            second[0] += *z * *z;
            third[0] += *z * *z * *z;
        }
        Moments {
            count: self.f.len() as f64,
            first: tree(first),
            second: tree(second),
            third: tree(third),
            beside: 0.0,
        }
    }
}

/// Lanes of which one is in use.
#[inline(always)]
fn one(value: f64) -> [f64; LANES] {
    let mut lanes = ZERO;
    lanes[0] = value;
    lanes
}

/// `sum + a b`, lane by lane. One loop for each sum: several in one are not vectorised.
#[inline(always)]
fn add_product<A: Arithmetic>(a: &[f64; LANES], b: &[f64; LANES], sum: &mut [f64; LANES]) {
    for lane in 0..LANES {
        sum[lane] = A::mul_add(a[lane], b[lane], sum[lane]);
    }
}

#[inline(always)]
fn add(a: &[f64; LANES], sum: &mut [f64; LANES]) {
    for lane in 0..LANES {
        sum[lane] += a[lane];
    }
}

/// `Σ w`, `Σ w f` and `Σ w²`.
pub fn weight_moments(f: &[f64], w: &[f64]) -> [f64; 3] {
    dispatch(WeightMoments { f, w })
}

struct WeightMoments<'a> {
    f: &'a [f64],
    w: &'a [f64],
}

impl Work for WeightMoments<'_> {
    type Output = [f64; 3];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [f64; 3] {
        let (mut mass, mut moment, mut squares) = (ZERO, ZERO, ZERO);
        let (f, f_rest) = self.f.as_chunks::<LANES>();
        let (w, w_rest) = self.w.as_chunks::<LANES>();
        for (f, w) in f.iter().zip(w) {
            add(w, &mut mass);
            add_product::<A>(w, f, &mut moment);
            add_product::<A>(w, w, &mut squares);
        }
        for (f, w) in f_rest.iter().zip(w_rest) {
            add(&one(*w), &mut mass);
            add_product::<A>(&one(*w), &one(*f), &mut moment);
            add_product::<A>(&one(*w), &one(*w), &mut squares);
        }
        [tree(mass), tree(moment), tree(squares)]
    }
}

/// Effective draws `(Σ w)²/Σ w²` where `f > least`, and where not.
pub fn either_side(f: &[f64], least: f64, w: &[f64]) -> [f64; 2] {
    dispatch(EitherSide { f, least, w }).map(|[total, squares]| {
        if squares > 0.0 {
            total * total / squares
        } else {
            0.0
        }
    })
}

struct EitherSide<'a> {
    f: &'a [f64],
    least: f64,
    w: &'a [f64],
}

impl Work for EitherSide<'_> {
    type Output = [[f64; 2]; 2];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [[f64; 2]; 2] {
        let mut sums = [ZERO; 4];
        let (f, f_rest) = self.f.as_chunks::<LANES>();
        let (w, w_rest) = self.w.as_chunks::<LANES>();
        for (f, w) in f.iter().zip(w) {
            self.add::<A>(f, w, &mut sums);
        }
        for (f, w) in f_rest.iter().zip(w_rest) {
            self.add::<A>(&one(*f), &one(*w), &mut sums);
        }
        let [a, b, c, d] = sums.map(tree);
        [[a, b], [c, d]]
    }
}

impl EitherSide<'_> {
    #[inline(always)]
    fn add<A: Arithmetic>(&self, f: &[f64; LANES], w: &[f64; LANES], sums: &mut [[f64; LANES]; 4]) {
        let (mut inside, mut outside) = (ZERO, ZERO);
        for lane in 0..LANES {
            inside[lane] = if f[lane] > self.least { w[lane] } else { 0.0 };
        }
        for lane in 0..LANES {
            outside[lane] = w[lane] - inside[lane];
        }
        add(&inside, &mut sums[0]);
        add_product::<A>(&inside, &inside, &mut sums[1]);
        add(&outside, &mut sums[2]);
        add_product::<A>(&outside, &outside, &mut sums[3]);
    }
}

/// Sums of `z` over batches.
pub fn batch_sums(z: &[f64], batches: &[Range<usize>], sums: &mut [f64]) {
    dispatch(BatchSums { z, batches, sums });
}

struct BatchSums<'a> {
    z: &'a [f64],
    batches: &'a [Range<usize>],
    sums: &'a mut [f64],
}

impl Work for BatchSums<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (sum, batch) in self.sums.iter_mut().zip(self.batches) {
            let mut lanes = ZERO;
            let (chunks, rest) = self.z[batch.clone()].as_chunks::<LANES>();
            for chunk in chunks {
                add(chunk, &mut lanes);
            }
            for z in rest {
                lanes[0] += z;
            }
            *sum = tree(lanes);
        }
    }
}

/// As [`super::vector::tree`], with which, here and in [`super::spectrum`], a node took 7 % longer.
#[inline(always)]
fn tree(mut lanes: [f64; LANES]) -> f64 {
    for half in [4, 2, 1] {
        for lane in 0..half {
            lanes[lane] += lanes[lane + half];
        }
    }
    lanes[0]
}
