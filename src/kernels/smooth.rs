//! Pareto smoothing of the largest weights.

use super::largest::{Ranked, Spread};
use super::reductions::slice_sums;
use super::tail::{Found, Room, Scale, tail_length, with_room};
use super::vector::exp::exp;
use super::vector::{Arithmetic, Work, dispatch, tree};
use super::weight_sums::{form, larger};

/// Sums that are formed side by side.
const LANES: usize = 32;

/// Writes smoothed, normalised log weights into `out` and returns the tail shape `k`.
///
/// `x` holds log weights up to a constant, `out` log weights, both of shape `(n,)`;
/// `relative_efficiency` is that of the base draws for these weights, 1 for unordered draws.
///
/// The `M = ⌈min(n/5, 3 √(n/e))⌉` largest weights are replaced by `u + F⁻¹((z − ½)/M)`,
/// `z = 1..M`, in rank order and at most the largest raw weight; `u` is the next largest raw weight
/// and `F` the generalised Pareto distribution of [`super::pareto::fit`] with shrunk shape, fitted
/// to the exceedances over `u`. Weights are raw ones, `exp(x − max x)`.
///
/// Edges: a weight that is 0 on that scale is never in the tail and never the cut-off, so that `M`
/// is at most one below the number of positive weights; ties keep their input order; fewer than 5
/// tail draws are not smoothed and have shape `+inf`; a constant tail is not smoothed and has shape
/// `−inf`. An entry `−inf` stays `−inf`. NaN or `+inf` in `x` gives NaN throughout.
///
/// Source: Vehtari, Simpson, Gelman, Yao & Gabry (2024), JMLR 25.
pub fn smooth(x: &[f64], relative_efficiency: f64, out: &mut [f64]) -> f64 {
    out.copy_from_slice(x);
    smooth_in_place(out, relative_efficiency)
}

/// As [`smooth`], in place.
pub fn smooth_in_place(x: &mut [f64], relative_efficiency: f64) -> f64 {
    let (largest, spread) = survey(x);
    if largest == f64::NEG_INFINITY {
        return f64::INFINITY;
    }
    if !largest.is_finite() {
        x.fill(f64::NAN);
        return f64::NAN;
    }
    with_room(|room| {
        let tail = tail_of(x, largest, spread, relative_efficiency, room);
        match tail {
            Found::Fitted { cutoff, fit } => {
                let smoothed = room
                    .quantiles
                    .logs(fit, cutoff.exp(), room.finder.ranked.len());
                replace(x, largest, cutoff, &room.finder.ranked, smoothed);
            }
            _ => {
                let (maximum, log_total) = slice_sums::<{ form::TOTAL }>(x).offsets();
                dispatch(TakeOff(x, [maximum, 0.0, log_total]));
            }
        }
        tail.shape()
    })
}

/// Puts the `smoothed` log weights in the place of the `ranked` ones and normalises. Scale: the
/// raw maximum is 0, which `x` becomes by taking off `largest`.
fn replace(x: &mut [f64], largest: f64, cutoff: f64, ranked: &[Ranked], smoothed: &[f64]) {
    let maximum = smoothed.last().copied().unwrap_or(cutoff);
    // Body and tail are added up apart, so that no part is taken off again; and the smoothed
    // weights may all lie far below the raw maximum, so that the shift is found anew.
    let tied = ranked.iter().take_while(|one| one.0 <= cutoff).count();
    let body = dispatch(Body { x, largest, cutoff }) - tied as f64;
    let tail = dispatch(Total(smoothed, maximum));
    let log_total = (body * (cutoff - maximum).exp() + tail).ln();
    dispatch(TakeOff(x, [largest, maximum, log_total]));
    for (&(_, index), value) in ranked.iter().zip(smoothed) {
        x[index as usize] = (value - maximum) - log_total;
    }
}

/// Takes three numbers off every entry, one after the other.
struct TakeOff<'a>(&'a mut [f64], [f64; 3]);

impl Work for TakeOff<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let [first, second, third] = self.1;
        for entry in self.0 {
            *entry = ((*entry - first) - second) - third;
        }
    }
}

/// `Σ exp(z − cutoff)` over `z = x − largest` of at most `cutoff`: the body, and draws of the tail
/// that tie with the cut-off.
struct Body<'a> {
    x: &'a [f64],
    largest: f64,
    cutoff: f64,
}

impl Work for Body<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        lane_sum(self.x, |x| {
            let z = x - self.largest;
            let weight = exp::<A>(z - self.cutoff);
            if z <= self.cutoff { weight } else { 0.0 }
        })
    }
}

/// `Σ exp(x − maximum)`.
struct Total<'a>(&'a [f64], f64);

impl Work for Total<'_> {
    type Output = f64;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> f64 {
        lane_sum(self.0, |x| exp::<A>(x - self.1))
    }
}

#[inline(always)]
fn lane_sum(x: &[f64], term: impl Fn(f64) -> f64) -> f64 {
    let mut sums = [0.0; LANES];
    let (chunks, rest) = x.as_chunks::<LANES>();
    for chunk in chunks {
        for (sum, x) in sums.iter_mut().zip(chunk) {
            *sum += term(*x);
        }
    }
    let mut last = [f64::NEG_INFINITY; LANES];
    last[..rest.len()].copy_from_slice(rest);
    for (sum, x) in sums.iter_mut().zip(last) {
        *sum += term(x);
    }
    tree(sums)
}

/// Tail shape that [`smooth`] returns, without the smoothed weights.
pub fn tail_shape(x: &[f64], relative_efficiency: f64) -> f64 {
    let (largest, spread) = survey(x);
    if largest == f64::NEG_INFINITY {
        return f64::INFINITY;
    }
    if !largest.is_finite() {
        return f64::NAN;
    }
    with_room(|room| tail_of(x, largest, spread, relative_efficiency, room).shape())
}

/// The tail of `x`, whose maximum is finite.
pub(super) fn tail_of(
    x: &[f64],
    largest: f64,
    spread: Option<Spread>,
    relative_efficiency: f64,
    room: &mut Room,
) -> Found {
    let length = tail_length(x.len(), relative_efficiency);
    let tail = room.fit(x, length, Scale::Log(largest), spread);
    match tail {
        // Where the cut-off has weight every draw of the tail has.
        Found::Fitted { cutoff, .. } if cutoff > -700.0 => return tail,
        Found::Constant => return tail,
        _ => {}
    }
    let positive = x.iter().filter(|&&x| (x - largest).exp() > 0.0).count();
    if positive > length {
        return tail;
    }
    room.fit(x, positive.saturating_sub(1), Scale::Log(largest), None)
}

/// Largest entry, NaN if any entry is NaN, and the spread of the entries where it is defined.
fn survey(x: &[f64]) -> (f64, Option<Spread>) {
    let origin = x.first().copied().filter(|first| first.is_finite());
    let (largest, sum, squares) = dispatch(Survey(x, origin.unwrap_or(0.0)));
    if sum.is_nan() && x.iter().any(|entry| entry.is_nan()) {
        return (f64::NAN, None);
    }
    let count = x.len() as f64;
    let mean = sum / count;
    let deviation = (squares / count - mean * mean).sqrt();
    let known = mean.is_finite() && deviation > 0.0 && deviation.is_finite();
    let spread = known.then_some((mean + origin.unwrap_or(0.0), deviation));
    (largest, spread)
}

/// Largest entry that is a number; sum and sum of squares of the distances from an origin.
struct Survey<'a>(&'a [f64], f64);

impl Work for Survey<'_> {
    type Output = (f64, f64, f64);

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> (f64, f64, f64) {
        const LANES: usize = 16;
        let mut most = [f64::NEG_INFINITY; LANES];
        let (mut sums, mut squares) = ([0.0; LANES], [0.0; LANES]);
        let (chunks, rest) = self.0.as_chunks::<LANES>();
        for chunk in chunks {
            for lane in 0..LANES {
                let d = chunk[lane] - self.1;
                most[lane] = larger(chunk[lane], most[lane]);
                sums[lane] += d;
                squares[lane] = A::mul_add(d, d, squares[lane]);
            }
        }
        for (lane, &x) in rest.iter().enumerate() {
            let d = x - self.1;
            most[lane] = larger(x, most[lane]);
            sums[lane] += d;
            squares[lane] = A::mul_add(d, d, squares[lane]);
        }
        (
            most.iter().fold(f64::NEG_INFINITY, |a, &b| larger(b, a)),
            sums.iter().sum(),
            squares.iter().sum(),
        )
    }
}
