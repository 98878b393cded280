//! Relative constants of several unnormalised densities from draws of each.

use ndarray::{Array2, ArrayView2, ArrayViewMut2, Axis, s};

use super::columns::expect_shape;
use super::error::KernelError;
use super::lease::Lease;
use super::ordered::{Interrupt, map_tasks, sum, sum_by};
use super::positive::solve;
use super::shares::{Constants, Sums, Tiles, padded};

/// Draws of one task.
const ROWS: usize = 4096;

/// Steps after which the search ends even where the constants still move.
const MOST_STEPS: usize = 200;

/// Halvings of one step.
const MOST_HALVINGS: usize = 40;

/// A step shorter than this is the last: the one after it would be about its square.
const SHORT: f64 = 1e-7;

/// With some of the draws only the search ends sooner: they miss the constants by more than this.
const SHORT_ROUGHLY: f64 = 1e-2;

/// After a step shorter than this the next one needs no curvature of its own.
const NEAR: f64 = 1e-3;

/// What may be left of a step taken with the curvature of the place before.
const LEFT: f64 = 5e-13;

/// From so many draws on the search begins with some of them.
const MANY: usize = 8192;

/// One draw in so many begins it.
const EVERY: usize = 8;

/// Distance on the log scale from which densities are scaled anew, so that none vanishes.
const FAR: f64 = 30.0;

/// A step as long as this is no step.
const BEYOND: f64 = 1e5;

/// A failure of the equations beyond which a step of no length is not the end.
const UNBALANCED: f64 = 1e-4;

/// What the draws say of the constants.
#[derive(Debug)]
pub struct Solution {
    /// `f_k`, minus the log constants, with that of the first density at 0.
    pub constants: Vec<f64>,
    /// `P_k(x) = n_k exp(f_k) q_k(x) / Σ_l n_l exp(f_l) q_l(x)`, shape `(n, K)`.
    pub shares: Array2<f64>,
    /// `log Σ_l n_l exp(f_l) q_l(x)` of every draw.
    pub log_mixture: Vec<f64>,
    /// Length of the last step; above `1e-6` the constants are not determined.
    pub last_step: f64,
}

/// Constants `f` that solve `exp(−f_k) = Σ_x c(x) q_k(x) / Σ_l n_l exp(f_l) q_l(x)`.
///
/// `log_densities` holds `log q_k(x)`, shape `(n, K)`; `counts` what each draw counts, shape `(n,)`;
/// `sizes` the `n_k`, shape `(K,)`, the sums of the counts over each density's own draws; `start`
/// where to begin, shape `(K,)`. With `solve` false the constants are kept where they begin. The
/// minimum of the convex `Σ c log Σ_l n_l exp(f_l) q_l − Σ n_l f_l` is found by Newton steps, halved
/// until it falls, or by the equation itself where none does. A draw on which all densities vanish
/// has no shares.
///
/// # Errors
/// [`KernelError::Shape`], [`KernelError::Empty`], [`KernelError::Range`] for sizes that are not
/// positive; [`KernelError::Interrupted`].
///
/// Source: Vardi (1985), Annals of Statistics 13, 178-203; Geyer (1994), Technical Report 568,
/// University of Minnesota; Shirts & Chodera (2008), J. Chem. Phys. 129, 124105.
pub fn multi_sample(
    log_densities: ArrayView2<'_, f64>,
    counts: &[f64],
    sizes: &[f64],
    start: &[f64],
    solve: bool,
    interrupt: &Interrupt<'_>,
) -> Result<Solution, KernelError> {
    let mut shares = Array2::zeros(log_densities.dim());
    let mut log_mixture = vec![0.0; log_densities.nrows()];
    let problem = Problem {
        log_densities,
        counts,
        sizes,
    };
    let delivery = Delivery {
        shares: shares.view_mut(),
        log_mixture: &mut log_mixture,
    };
    let (constants, last_step) = multi_sample_into(problem, start, solve, delivery, interrupt)?;
    Ok(Solution {
        constants,
        shares,
        log_mixture,
        last_step,
    })
}

/// The arguments of [`multi_sample`] of these names.
#[derive(Clone, Copy)]
pub struct Problem<'a> {
    /// Shape `(n, K)`.
    pub log_densities: ArrayView2<'a, f64>,
    /// Shape `(n,)`.
    pub counts: &'a [f64],
    /// Shape `(K,)`.
    pub sizes: &'a [f64],
}

/// Where the fields of [`Solution`] of these names are written.
pub struct Delivery<'a> {
    /// Shape `(n, K)`.
    pub shares: ArrayViewMut2<'a, f64>,
    /// Shape `(n,)`.
    pub log_mixture: &'a mut [f64],
}

/// As [`multi_sample`], with the constants and the length of the last step as its result.
///
/// # Errors
/// Also [`KernelError::Shape`] for a delivery of another shape.
pub fn multi_sample_into(
    problem: Problem<'_>,
    start: &[f64],
    solve: bool,
    delivery: Delivery<'_>,
    interrupt: &Interrupt<'_>,
) -> Result<(Vec<f64>, f64), KernelError> {
    let (draws, densities) = problem.log_densities.dim();
    if densities == 0 || draws == 0 {
        return Err(KernelError::Empty {
            argument: "log_densities",
        });
    }
    let sizes = problem.sizes;
    expect_shape("counts", &[draws], &[problem.counts.len()])?;
    expect_shape("sizes", &[densities], &[sizes.len()])?;
    expect_shape("start", &[densities], &[start.len()])?;
    expect_shape("shares", &[draws, densities], delivery.shares.shape())?;
    expect_shape("log_mixture", &[draws], &[delivery.log_mixture.len()])?;
    if let Some(&found) = sizes.iter().find(|&&size| size.is_nan() || size <= 0.0) {
        return Err(KernelError::Range {
            argument: "sizes",
            expected: "positive sizes",
            found,
        });
    }
    let constants = if solve && draws >= MANY {
        roughly(problem, start, interrupt)?
    } else {
        start.to_vec()
    };
    let mut search = Search::new(problem, constants);
    let sums = search.scale(interrupt)?;
    let last_step = if solve {
        search.run(sums, SHORT, interrupt)?
    } else {
        0.0
    };
    search.deliver(delivery, interrupt)?;
    Ok((search.reached(), last_step))
}

/// The constants by some of the draws, evenly spread.
fn roughly(
    problem: Problem<'_>,
    start: &[f64],
    interrupt: &Interrupt<'_>,
) -> Result<Vec<f64>, KernelError> {
    let counts: Vec<f64> = problem.counts.iter().copied().step_by(EVERY).collect();
    let share = sum(&counts) / sum(problem.sizes);
    if share.is_nan() || share <= 0.0 {
        return Ok(start.to_vec());
    }
    let sizes: Vec<f64> = problem.sizes.iter().map(|size| size * share).collect();
    let some = Problem {
        log_densities: problem.log_densities.slice(s![..;EVERY, ..]),
        counts: &counts,
        sizes: &sizes,
    };
    let start = if counts.len() >= MANY {
        roughly(some, start, interrupt)?
    } else {
        start.to_vec()
    };
    let mut search = Search::new(some, start);
    let sums = search.scale(interrupt)?;
    search.run(sums, SHORT_ROUGHLY, interrupt)?;
    Ok(search.reached())
}

struct Search<'a> {
    log_densities: ArrayView2<'a, f64>,
    counts: &'a [f64],
    sizes: &'a [f64],
    /// Where the densities were scaled last.
    constants: Vec<f64>,
    tiles: Vec<Tiles>,
    /// The densities of the tiles, task after task.
    scaled: Lease,
    /// How far the constants have moved since.
    moved: Vec<f64>,
}

impl<'a> Search<'a> {
    fn new(problem: Problem<'a>, constants: Vec<f64>) -> Self {
        let (draws, densities) = problem.log_densities.dim();
        Self {
            log_densities: problem.log_densities,
            counts: problem.counts,
            sizes: problem.sizes,
            constants,
            tiles: Vec::new(),
            scaled: Lease::new(padded(draws) * densities),
            moved: vec![0.0; densities],
        }
    }

    /// Takes the exponentials of the densities at the constants reached, and the sums there.
    fn scale(&mut self, interrupt: &Interrupt<'_>) -> Result<Sums, KernelError> {
        for (constant, moved) in self.constants.iter_mut().zip(&mut self.moved) {
            *constant += *moved;
            *moved = 0.0;
        }
        let first = self.constants[0];
        let mut shift = Vec::with_capacity(self.sizes.len());
        for (constant, size) in self.constants.iter_mut().zip(self.sizes) {
            *constant -= first;
            shift.push(*constant + libm::log(*size));
        }
        let tasks: Vec<_> = self
            .log_densities
            .axis_chunks_iter(Axis(0), ROWS)
            .zip(self.counts.chunks(ROWS))
            .zip(self.scaled.chunks_mut(ROWS * self.sizes.len()))
            .collect();
        let still = Constants::new(&self.moved);
        let parts = map_tasks(tasks, interrupt, |((rows, counts), scaled)| {
            // Summed while they are near.
            let tiles = Tiles::new(rows, counts, &shift, scaled);
            let sums = tiles.sums(scaled, &still, true);
            Ok((tiles, sums))
        })?;
        let (tiles, sums): (Vec<Tiles>, Vec<Sums>) = parts.into_iter().unzip();
        self.tiles = tiles;
        Ok(self.added(&sums))
    }

    /// The sums at constants that moved so far; on demand without products and logs.
    fn sums(
        &self,
        moved: &[f64],
        all: bool,
        interrupt: &Interrupt<'_>,
    ) -> Result<Sums, KernelError> {
        let constants = Constants::new(moved);
        let parts = map_tasks(self.parts(), interrupt, |(tiles, scaled)| {
            Ok(tiles.sums(scaled, &constants, all))
        })?;
        Ok(self.added(&parts))
    }

    /// The tiles of each task with their densities.
    fn parts(&self) -> Vec<(&Tiles, &[f64])> {
        let scaled = self.scaled.chunks(ROWS * self.sizes.len());
        self.tiles.iter().zip(scaled).collect()
    }

    /// Sums of the tasks added in their order.
    fn added(&self, parts: &[Sums]) -> Sums {
        let added =
            |entry: &(dyn Fn(&Sums) -> f64 + Sync)| sum_by(parts.len(), |part| entry(&parts[part]));
        let entries = |length: usize, of: fn(&Sums) -> &[f64]| {
            (0..length).map(|i| added(&|part| of(part)[i])).collect()
        };
        let densities = self.sizes.len();
        Sums {
            logs: added(&|part| part.logs),
            firsts: entries(densities, |part| &part.firsts),
            products: entries(densities * (densities - 1) / 2, |part| &part.products),
        }
    }

    /// `Σ c log Σ_l n_l exp(f_l) q_l − Σ n_l f_l`, up to what is fixed by the scaling.
    fn height(&self, sums: &Sums, moved: &[f64]) -> f64 {
        sums.logs - sum_by(moved.len(), |k| self.sizes[k] * moved[k])
    }

    /// Searches until a step is shorter than `short`, and takes that one.
    fn run(
        &mut self,
        mut sums: Sums,
        short: f64,
        interrupt: &Interrupt<'_>,
    ) -> Result<f64, KernelError> {
        let mut length = 0.0;
        for _ in 0..MOST_STEPS {
            let step = self.newton(&sums);
            length = longest(&step);
            if (short..NEAR).contains(&length)
                && let Some(last) = self.nearly(&mut sums, &step, interrupt)?
            {
                return Ok(last);
            }
            let (moved, found) = if length >= short {
                self.descend(&sums, &step, interrupt)?
            } else if self.imbalance(&sums) > UNBALANCED.max(10.0 * short) {
                length = FAR;
                self.balance(&sums, interrupt)?
            } else {
                for (moved, step) in self.moved.iter_mut().zip(&step) {
                    *moved += step;
                }
                break;
            };
            self.moved = moved;
            sums = found;
            if longest(&self.moved) > FAR {
                sums = self.scale(interrupt)?;
            }
        }
        Ok(length)
    }

    /// Takes a short step, and with the curvature before it the next, the length of which is
    /// returned; nothing, with neither taken, where that would not be the end.
    fn nearly(
        &mut self,
        sums: &mut Sums,
        step: &[f64],
        interrupt: &Interrupt<'_>,
    ) -> Result<Option<f64>, KernelError> {
        let add = |one: &[f64], other: &[f64]| -> Vec<f64> {
            one.iter()
                .zip(other)
                .map(|(one, other)| one + other)
                .collect()
        };
        let moved = add(&self.moved, step);
        let found = self.sums(&moved, false, interrupt)?;
        let balanced = self.imbalance(&found) <= UNBALANCED;
        let before = std::mem::replace(&mut sums.firsts, found.firsts);
        let last = self.newton(sums);
        let length = longest(&last);
        if balanced && length * longest(step) < LEFT {
            self.moved = add(&moved, &last);
            return Ok(Some(length));
        }
        sums.firsts = before;
        Ok(None)
    }

    /// Newton's step, with the first constant held.
    fn newton(&self, sums: &Sums) -> Vec<f64> {
        let free = self.sizes.len() - 1;
        let mut matrix = vec![0.0; free * free];
        let mut slope = vec![0.0; free];
        for i in 0..free {
            slope[i] = self.sizes[i + 1] - sums.firsts[i + 1];
            for j in 0..=i {
                let product = sums.products[i * (i + 1) / 2 + j];
                let entry = if i == j { sums.firsts[i + 1] } else { 0.0 } - product;
                matrix[i * free + j] = entry;
                matrix[j * free + i] = entry;
            }
        }
        let mut step = vec![0.0];
        step.extend(solve(&matrix, &slope));
        // Where shares have all but vanished the curvature says nothing.
        if !step.iter().all(|entry| entry.abs() < BEYOND) {
            step.fill(0.0);
        }
        step
    }

    /// Goes along `step`, halved until the height falls; by the equation itself where none does.
    fn descend(
        &self,
        sums: &Sums,
        step: &[f64],
        interrupt: &Interrupt<'_>,
    ) -> Result<(Vec<f64>, Sums), KernelError> {
        let before = self.height(sums, &self.moved);
        // Rounding of a sum of this size is no rise.
        let slack = 1e-13 * (sums.logs.abs() + self.counts.len() as f64);
        let mut share = if longest(step) > FAR {
            FAR / longest(step)
        } else {
            1.0
        };
        for _ in 0..MOST_HALVINGS {
            let moved: Vec<f64> = (self.moved.iter().zip(step))
                .map(|(moved, step)| moved + share * step)
                .collect();
            let found = self.sums(&moved, true, interrupt)?;
            let slope = sum_by(step.len(), |k| (sums.firsts[k] - self.sizes[k]) * step[k]);
            if self.height(&found, &moved) <= before + 1e-4 * share * slope.min(0.0) + slack {
                return Ok((moved, found));
            }
            share *= 0.5;
        }
        self.balance(sums, interrupt)
    }

    /// Largest share by which a density's own equation fails.
    fn imbalance(&self, sums: &Sums) -> f64 {
        let parts = sums.firsts.iter().zip(self.sizes);
        parts.fold(0.0, |most: f64, (first, size)| {
            most.max((first / size - 1.0).abs())
        })
    }

    /// Goes where the equation itself leads: never up, if slowly.
    fn balance(
        &self,
        sums: &Sums,
        interrupt: &Interrupt<'_>,
    ) -> Result<(Vec<f64>, Sums), KernelError> {
        let log = |x: f64| libm::log(x.max(f64::MIN_POSITIVE));
        let own = |k: usize| log(self.sizes[k]) - log(sums.firsts[k]);
        let moved: Vec<f64> = (0..self.sizes.len())
            .map(|k| self.moved[k] + (own(k) - own(0)).clamp(-10.0 * FAR, 10.0 * FAR))
            .collect();
        let found = self.sums(&moved, true, interrupt)?;
        Ok((moved, found))
    }

    fn deliver(
        &self,
        mut delivery: Delivery<'_>,
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        let reached = Constants::new(&self.moved);
        let into = delivery.shares.axis_chunks_iter_mut(Axis(0), ROWS);
        let logs = delivery.log_mixture.chunks_mut(ROWS);
        let tasks: Vec<_> = self.parts().into_iter().zip(into.zip(logs)).collect();
        map_tasks(tasks, interrupt, |((tiles, scaled), (shares, logs))| {
            tiles.deliver(scaled, &reached, shares, logs);
            Ok(())
        })?;
        Ok(())
    }

    /// The constants reached, with the first at 0.
    fn reached(&self) -> Vec<f64> {
        let own = |k: usize| self.constants[k] + self.moved[k];
        (0..self.sizes.len()).map(|k| own(k) - own(0)).collect()
    }
}

fn longest(step: &[f64]) -> f64 {
    step.iter()
        .fold(0.0, |most: f64, entry| most.max(entry.abs()))
}
