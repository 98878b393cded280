//! Smoothed weights from raw ones: only the tail needs exponentials again.

use super::columns::expect_shape;
use super::error::KernelError;
use super::largest::Ranked;
use super::ordered::{Interrupt, map_tasks};
use super::reductions::slice_sums;
use super::smooth::{smooth, tail_of};
use super::tail::{Found, Room, with_room};
use super::vector::{Arithmetic, Work, dispatch};
use super::weigh::{TASK, exponentials};
use super::weight_sums::{Sums, form};

/// Below this cut-off, or largest smoothed log weight, raw weights that vanish could be weights
/// that count once smoothed.
const LEAST_CUTOFF: f64 = -300.0;
const LEAST_TOP: f64 = -20.0;

const LANES: usize = 16;

/// Log weights and the weights that [`super::weigh::weigh`] makes of them.
#[derive(Clone, Copy)]
pub struct Weighed<'a> {
    /// Log weights up to a constant, shape `(n,)`.
    pub x: &'a [f64],
    /// Normalised weights, natural scale, shape `(n,)`.
    pub raw: &'a [f64],
    /// The sums of `x`.
    pub sums: Sums,
}

/// Writes the weights that [`smooth`] smooths, exponentials of its results, into `out`, shape
/// `(n,)`; returns the tail shape and the sums of the smoothed weights.
///
/// # Errors
/// [`KernelError::Shape`] for different lengths; [`KernelError::Interrupted`].
pub fn smooth_weights(
    of: Weighed<'_>,
    relative_efficiency: f64,
    out: &mut [f64],
    interrupt: &Interrupt<'_>,
) -> Result<(f64, Sums), KernelError> {
    expect_shape("raw", &[of.x.len()], &[of.raw.len()])?;
    expect_shape("out", &[of.x.len()], &[out.len()])?;
    let largest = of.sums.maximum;
    if largest.is_finite() {
        let done = with_room(|room| {
            let tail = tail_of(of.x, largest, None, relative_efficiency, room);
            Ok(patched(of, tail, room, out, interrupt)?.map(|sums| (tail.shape(), sums)))
        })?;
        if let Some(found) = done {
            return Ok(found);
        }
    }
    let mut logs = vec![0.0; of.x.len()];
    let shape = smooth(of.x, relative_efficiency, &mut logs);
    exponentials(&logs, (0.0, 0.0), out, interrupt)?;
    Ok((shape, slice_sums::<{ form::ALL }>(&logs)))
}

/// The raw weights with another tail, and their sums; nothing where they do not tell enough.
fn patched(
    of: Weighed<'_>,
    tail: Found,
    room: &mut Room,
    out: &mut [f64],
    interrupt: &Interrupt<'_>,
) -> Result<Option<Sums>, KernelError> {
    let Found::Fitted { cutoff, fit } = tail else {
        scaled(of.raw, 1.0, out, interrupt)?;
        return Ok(Some(of.sums));
    };
    let ranked = &room.finder.ranked;
    let smoothed = room.quantiles.logs(fit, cutoff.exp(), ranked.len());
    let of_tail = slice_sums::<{ form::ALL }>(smoothed);
    if !(cutoff > LEAST_CUTOFF && of_tail.maximum > LEAST_TOP) {
        return Ok(None);
    }
    let sums = body(of, cutoff, ranked, interrupt)?.merge(of_tail);
    let factor = of.sums.total * (-sums.maximum).exp() / sums.total;
    scaled(of.raw, factor, out, interrupt)?;
    let (maximum, log_total) = sums.offsets();
    for (&(_, index), value) in ranked.iter().zip(smoothed) {
        out[index as usize] = ((value - maximum) - log_total).exp();
    }
    Ok(Some(sums))
}

/// Sums over the draws that are not in the tail, on the scale whose raw maximum is 0.
fn body(
    of: Weighed<'_>,
    cutoff: f64,
    ranked: &[Ranked],
    interrupt: &Interrupt<'_>,
) -> Result<Sums, KernelError> {
    let scale = of.sums.total * (-cutoff).exp();
    let tasks = of.x.chunks(TASK).zip(of.raw.chunks(TASK)).collect();
    let parts = map_tasks(tasks, interrupt, |(x, raw)| {
        Ok(dispatch(Body {
            x,
            raw,
            largest: of.sums.maximum,
            cutoff,
            scale,
        }))
    })?;
    // Draws of the tail that tie with the cut-off were added up too.
    let tied = ranked.iter().take_while(|one| one.0 <= cutoff).count() as f64;
    let [total, squares, spread] =
        [0, 1, 2].map(|sum| parts.iter().map(|part| part[sum]).sum::<f64>());
    Ok(Sums {
        maximum: cutoff,
        total: total - tied,
        squares: squares - tied,
        spread,
    })
}

/// `Σ r`, `Σ r²` and `Σ r (z − cutoff)` over `z = x − largest` of at most `cutoff`, with
/// `r = exp(z − cutoff) = scale · raw`.
struct Body<'a> {
    x: &'a [f64],
    raw: &'a [f64],
    largest: f64,
    cutoff: f64,
    scale: f64,
}

impl Work for Body<'_> {
    type Output = [f64; 3];

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> [f64; 3] {
        let mut sums = [[0.0; LANES]; 3];
        let (chunks, rest) = self.x.as_chunks::<LANES>();
        let (weights, last_weights) = self.raw.as_chunks::<LANES>();
        let mut last = [[f64::NEG_INFINITY; LANES], [0.0; LANES]];
        last[0][..rest.len()].copy_from_slice(rest);
        last[1][..last_weights.len()].copy_from_slice(last_weights);
        let mut add = |x: &[f64; LANES], raw: &[f64; LANES]| {
            for lane in 0..LANES {
                let distance = (x[lane] - self.largest) - self.cutoff;
                let is_body = x[lane] - self.largest <= self.cutoff;
                let r = if is_body { self.scale * raw[lane] } else { 0.0 };
                // A weight of 0 may stand for −inf, which must not meet it.
                let distance = if r > 0.0 { distance } else { 0.0 };
                sums[0][lane] += r;
                sums[1][lane] = A::mul_add(r, r, sums[1][lane]);
                sums[2][lane] = A::mul_add(r, distance, sums[2][lane]);
            }
        };
        for (x, raw) in chunks.iter().zip(weights) {
            add(x, raw);
        }
        add(&last[0], &last[1]);
        sums.map(|lanes| lanes.iter().sum())
    }
}

/// Writes `factor · raw` into `out`.
fn scaled(
    raw: &[f64],
    factor: f64,
    out: &mut [f64],
    interrupt: &Interrupt<'_>,
) -> Result<(), KernelError> {
    let tasks = raw.chunks(TASK).zip(out.chunks_mut(TASK)).collect();
    map_tasks(tasks, interrupt, |(raw, out)| {
        dispatch(Scaled { raw, factor, out });
        Ok(())
    })?;
    Ok(())
}

struct Scaled<'a> {
    raw: &'a [f64],
    factor: f64,
    out: &'a mut [f64],
}

impl Work for Scaled<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for (target, raw) in self.out.iter_mut().zip(self.raw) {
            *target = self.factor * raw;
        }
    }
}
