//! Log densities, entry by entry, and the special functions behind them.
//!
//! A family is a fast loop, compiled for several instruction sets ([`family`]), and a careful
//! function for what the loop does not reach. Entries are taken in blocks of constant length, and
//! each entry is computed by itself: results do not depend on threads, blocks or neighbours.

pub mod beta;
pub mod counts;
pub mod exponential;
pub mod family;
pub mod gamma;
pub mod hyper;
pub mod incomplete_beta;
pub mod incomplete_gamma;
pub mod logistic;
pub mod normal;
pub mod normal_tail;
pub mod skew_normal;
pub mod slopes;
pub mod stirling;
pub mod student_t;

use self::hyper::Hyper;
use super::error::KernelError;
use super::ordered::{Interrupt, map_tasks};

/// Entries that one task takes.
const BLOCK: usize = 8192;

/// Fills a block: entries, hyperparameters, their table, index of the first entry, result.
type Fill = fn(&[f64], &Hyper<'_>, &[f64], usize, &mut [f64]);

/// A family by name.
#[derive(Clone, Copy)]
pub struct Kind {
    name: &'static str,
    hyperparameters: usize,
    table: fn(&Hyper<'_>) -> Vec<f64>,
    fill: Fill,
}

const fn kind<F: family::Family>(name: &'static str, hyperparameters: usize) -> Kind {
    Kind {
        name,
        hyperparameters,
        table: family::normaliser_table::<F>,
        fill: family::fill::<F>,
    }
}

const KINDS: [Kind; 21] = [
    kind::<normal::Normal>("normal", 2),
    kind::<normal::HalfNormal>("half_normal", 1),
    kind::<normal::LogNormal>("log_normal", 2),
    kind::<student_t::StudentT>("student_t", 3),
    kind::<student_t::HalfStudentT>("half_student_t", 2),
    kind::<student_t::Cauchy>("cauchy", 2),
    kind::<student_t::HalfCauchy>("half_cauchy", 1),
    kind::<gamma::Gamma>("gamma", 2),
    kind::<gamma::InverseGamma>("inverse_gamma", 2),
    kind::<beta::Beta>("beta", 2),
    kind::<exponential::Exponential>("exponential", 1),
    kind::<exponential::Laplace>("laplace", 2),
    kind::<exponential::Pareto>("pareto", 2),
    kind::<exponential::Flat>("flat", 2),
    kind::<logistic::Logistic>("logistic", 2),
    kind::<logistic::Gumbel>("gumbel", 2),
    kind::<logistic::Weibull>("weibull", 2),
    kind::<skew_normal::SkewNormal>("skew_normal", 3),
    kind::<counts::Poisson>("poisson", 1),
    kind::<counts::Binomial>("binomial", 2),
    kind::<counts::NegativeBinomial>("negative_binomial", 2),
];

impl Kind {
    /// The family of that name.
    pub fn named(name: &str) -> Option<Self> {
        KINDS.into_iter().find(|kind| kind.name == name)
    }

    /// Names of all families.
    pub fn names() -> impl Iterator<Item = &'static str> {
        KINDS.iter().map(|kind| kind.name)
    }

    /// Number of hyperparameters.
    pub fn hyperparameters(&self) -> usize {
        self.hyperparameters
    }

    /// Log density of every entry of `x` into `out`, natural scale of `x`, normalising constants
    /// included: `−inf` outside the support, NaN at NaN. Hyperparameters lie in their ranges.
    ///
    /// # Errors
    /// [`KernelError::Shape`] where the number of hyperparameters or the length of `out` is not
    /// that asked for; [`KernelError::Interrupted`].
    pub fn log_density(
        &self,
        x: &[f64],
        hyper: &Hyper<'_>,
        out: &mut [f64],
        interrupt: &Interrupt<'_>,
    ) -> Result<(), KernelError> {
        expect_length("hyper", self.hyperparameters, hyper.parameters())?;
        expect_length("out", x.len(), out.len())?;
        let table = (self.table)(hyper);
        let blocks: Vec<_> = x
            .chunks(BLOCK)
            .zip(out.chunks_mut(BLOCK))
            .enumerate()
            .collect();
        map_tasks(blocks, interrupt, |(index, (x, out))| {
            (self.fill)(x, hyper, &table, index * BLOCK, out);
            Ok(())
        })?;
        Ok(())
    }
}

fn expect_length(argument: &'static str, expected: usize, found: usize) -> Result<(), KernelError> {
    if expected == found {
        return Ok(());
    }
    Err(KernelError::Shape {
        argument,
        expected: vec![expected],
        found: vec![found],
    })
}
