//! What the fast families have in common, and the loop over a block of entries.

use std::marker::PhantomData;

use super::hyper::{Hyper, Triple};
use crate::kernels::vector::{Arithmetic, Work, dispatch};

/// Entries whose hyperparameters are laid out at a time where they differ.
const STRETCH: usize = 256;

/// Most sets of hyperparameters whose normalisers are formed beforehand.
const LARGEST_TABLE: usize = 65_536;

/// A family whose log density is a fast loop at ordinary values, and a careful function elsewhere.
///
/// Methods that take part in the loop are `#[inline(always)]` and free of branches that a compiler
/// cannot turn into a selection.
pub trait Family: Sized {
    /// The hyperparameters on which [`Family::normaliser`] depends.
    #[inline(always)]
    fn shape(_hyper: Triple) -> [f64; 2] {
        [0.0; 2]
    }

    /// The part of the normalising constant that costs special functions.
    fn normaliser(_shape: [f64; 2]) -> f64 {
        0.0
    }

    /// Whether the fast loop holds for these hyperparameters.
    fn is_plain(hyper: Triple) -> bool;

    /// Constants of the loop, for plain hyperparameters.
    fn new<A: Arithmetic>(hyper: Triple, normaliser: f64) -> Self;

    /// Whether the fast loop holds at `x`.
    fn is_ordinary(&self, x: f64) -> bool;

    /// Log density at an ordinary `x`.
    fn fast<A: Arithmetic>(&self, x: f64) -> f64;

    /// Log density anywhere: `−inf` outside the support, NaN at NaN.
    fn careful(hyper: Triple, x: f64) -> f64;
}

/// Whether a number and its reciprocal are both positive normal numbers.
#[inline(always)]
pub fn is_moderate(scale: f64) -> bool {
    (1e-300..=1e300).contains(&scale)
}

/// Normalisers of all sets of hyperparameters where there are few, else nothing.
pub fn normaliser_table<F: Family>(hyper: &Hyper<'_>) -> Vec<f64> {
    if hyper.count() > LARGEST_TABLE {
        return Vec::new();
    }
    (0..hyper.count())
        .map(|number| F::normaliser(F::shape(hyper.set(number))))
        .collect()
}

/// Log density of the family `F` at every `x`, into `out`; `start` is the index of the first,
/// `table` that of [`normaliser_table`].
pub fn fill<F: Family>(x: &[f64], hyper: &Hyper<'_>, table: &[f64], start: usize, out: &mut [f64]) {
    match (hyper.constant(), table) {
        (Some(constant), [normaliser]) => fill_constant::<F>(x, constant, *normaliser, out),
        _ => fill_varying::<F>(x, hyper, table, start, out),
    }
}

fn fill_constant<F: Family>(x: &[f64], hyper: Triple, normaliser: f64, out: &mut [f64]) {
    if !F::is_plain(hyper) {
        for (target, &x) in out.iter_mut().zip(x) {
            *target = F::careful(hyper, x);
        }
        return;
    }
    dispatch(Constant::<F> {
        x,
        out,
        hyper,
        normaliser,
        family: PhantomData,
    });
}

fn fill_varying<F: Family>(
    x: &[f64],
    hyper: &Hyper<'_>,
    table: &[f64],
    start: usize,
    out: &mut [f64],
) {
    let mut rows = [[0.0; STRETCH]; 3];
    let mut normalisers = [0.0; STRETCH];
    for (index, (x, out)) in x.chunks(STRETCH).zip(out.chunks_mut(STRETCH)).enumerate() {
        let start = start + index * STRETCH;
        hyper.lay_out(start, x.len(), &mut rows);
        let row = &mut normalisers[..x.len()];
        if table.is_empty() {
            form_normalisers::<F>(&rows, row);
        } else {
            hyper.lay_out_row(table, start, row);
        }
        dispatch(Varying::<F> {
            x,
            out,
            rows: &rows,
            normalisers: &normalisers,
            family: PhantomData,
        });
    }
}

/// Normalisers entry by entry; a shape equal to the one before costs nothing.
fn form_normalisers<F: Family>(rows: &[[f64; STRETCH]; 3], out: &mut [f64]) {
    let mut known = (F::shape(triple(rows, 0)), f64::NAN);
    known.1 = F::normaliser(known.0);
    for (at, target) in out.iter_mut().enumerate() {
        let shape = F::shape(triple(rows, at));
        if shape != known.0 {
            known = (shape, F::normaliser(shape));
        }
        *target = known.1;
    }
}

#[inline(always)]
fn triple(rows: &[[f64; STRETCH]; 3], at: usize) -> Triple {
    [rows[0][at], rows[1][at], rows[2][at]]
}

struct Constant<'a, F> {
    x: &'a [f64],
    out: &'a mut [f64],
    hyper: Triple,
    normaliser: f64,
    family: PhantomData<F>,
}

impl<F: Family> Work for Constant<'_, F> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let family = F::new::<A>(self.hyper, self.normaliser);
        let mut all = true;
        for (target, &x) in self.out.iter_mut().zip(self.x) {
            all &= family.is_ordinary(x);
            *target = family.fast::<A>(x);
        }
        if all {
            return;
        }
        for (target, &x) in self.out.iter_mut().zip(self.x) {
            if !family.is_ordinary(x) {
                *target = F::careful(self.hyper, x);
            }
        }
    }
}

struct Varying<'a, F> {
    x: &'a [f64],
    out: &'a mut [f64],
    rows: &'a [[f64; STRETCH]; 3],
    normalisers: &'a [f64; STRETCH],
    family: PhantomData<F>,
}

impl<F: Family> Work for Varying<'_, F> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        let count = self.x.len().min(STRETCH).min(self.out.len());
        let mut all = true;
        for at in 0..count {
            let hyper = triple(self.rows, at);
            let family = F::new::<A>(hyper, self.normalisers[at]);
            all &= F::is_plain(hyper) & family.is_ordinary(self.x[at]);
            self.out[at] = family.fast::<A>(self.x[at]);
        }
        if all {
            return;
        }
        for at in 0..count {
            let hyper = triple(self.rows, at);
            let family = F::new::<A>(hyper, self.normalisers[at]);
            if !(F::is_plain(hyper) && family.is_ordinary(self.x[at])) {
                self.out[at] = F::careful(hyper, self.x[at]);
            }
        }
    }
}
