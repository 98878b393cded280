//! The upper tail of a set of draws: how long it is, which draws lie in it, and how heavy it is.

use std::cell::RefCell;

use super::largest::{Finder, Ranked, Spread};
use super::pareto::{self, FEWEST, Pareto, Quantiles};
use super::vector::exp::{LEAST, exp, exp_m1};
use super::vector::{Arithmetic, Work, dispatch};

/// Tail length `M = ⌈min(S/5, 3 √(S/e))⌉` of `S` draws with relative efficiency `e`, the rule of
/// Vehtari, Simpson, Gelman, Yao & Gabry (2024), JMLR 25.
pub fn tail_length(draws: usize, relative_efficiency: f64) -> usize {
    let count = draws as f64;
    (3.0 * (count / relative_efficiency).sqrt())
        .min(count / 5.0)
        .ceil() as usize
}

/// What became of a tail.
#[derive(Debug, Clone, PartialEq)]
pub enum Tail {
    /// Too few draws to say anything.
    Short,
    /// All draws in it are equal.
    Constant,
    /// Draws and the distribution fitted to their exceedances over the cut-off.
    Fitted {
        /// Values and indices of the tail draws in ascending order of value; ties in input order.
        ranked: Vec<Ranked>,
        /// Largest value that is not in the tail.
        cutoff: f64,
        /// Fit whose shape is shrunk; location 0, so that it describes exceedances.
        fit: Pareto,
    },
}

impl Tail {
    /// Tail shape: `+inf` for a short tail, `−inf` for a constant one.
    pub fn shape(&self) -> f64 {
        match self {
            Self::Short => f64::INFINITY,
            Self::Constant => f64::NEG_INFINITY,
            Self::Fitted { fit, .. } => fit.shape,
        }
    }
}

/// The scale on which values come.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Scale {
    /// As they are, times the sign: 1 for the upper tail, −1 for the lower.
    Natural(f64),
    /// Logarithms of weights, of which the given maximum is taken off first.
    Log(f64),
}

/// The `length` largest of `values`, fitted on the natural scale. Values must not be NaN.
///
/// `length` must leave at least one value below the tail, the cut-off; else the tail is short.
pub fn fit_tail(values: &[f64], length: usize, scale: Scale) -> Tail {
    with_room(|room| match room.fit(values, length, scale, None) {
        Found::Short => Tail::Short,
        Found::Constant => Tail::Constant,
        Found::Fitted { cutoff, fit } => Tail::Fitted {
            ranked: room.finder.ranked.clone(),
            cutoff,
            fit,
        },
    })
}

/// As [`Tail`], the draws left in [`Room`].
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Found {
    Short,
    Constant,
    Fitted { cutoff: f64, fit: Pareto },
}

impl Found {
    pub(super) fn shape(self) -> f64 {
        match self {
            Self::Short => f64::INFINITY,
            Self::Constant => f64::NEG_INFINITY,
            Self::Fitted { fit, .. } => fit.shape,
        }
    }
}

/// What tails need again and again.
#[derive(Default)]
pub(super) struct Room {
    pub(super) finder: Finder,
    pub(super) exceedances: Vec<f64>,
    pub(super) sample: Vec<f64>,
    pub(super) beyond: Vec<f64>,
    pub(super) quantiles: Quantiles,
}

thread_local! {
    static ROOM: RefCell<Option<Room>> = const { RefCell::new(None) };
}

/// `work` with the room that this thread keeps.
pub(super) fn with_room<T>(work: impl FnOnce(&mut Room) -> T) -> T {
    let mut room = ROOM.take().unwrap_or_default();
    let result = work(&mut room);
    ROOM.set(Some(room));
    result
}

impl Room {
    /// As [`fit_tail`]; the draws of the tail are those that `finder` ranks.
    pub(super) fn fit(
        &mut self,
        values: &[f64],
        length: usize,
        scale: Scale,
        spread: Option<Spread>,
    ) -> Found {
        if length < FEWEST {
            return Found::Short;
        }
        let sign = match scale {
            Scale::Natural(sign) => sign,
            Scale::Log(_) => 1.0,
        };
        let Some(mut cutoff) = self.finder.find(values, sign, length, spread) else {
            return Found::Short;
        };
        let ranked = &mut self.finder.ranked;
        if let Scale::Log(maximum) = scale {
            cutoff -= maximum;
            for (value, _) in ranked.iter_mut() {
                *value -= maximum;
            }
        }
        let exceedances = &mut self.exceedances;
        exceedances.clear();
        exceedances.extend(ranked.iter().map(|&(value, _)| value));
        let (least, most) = (ranked[0].0, ranked[length - 1].0);
        let constant = match scale {
            Scale::Natural(_) => least == most,
            Scale::Log(_) => least.exp() == most.exp(),
        };
        if constant {
            return Found::Constant;
        }
        match scale {
            Scale::Natural(_) => exceedances.iter_mut().for_each(|value| *value -= cutoff),
            Scale::Log(_) => dispatch(Differences {
                values: exceedances,
                cutoff,
            }),
        }
        let fit = pareto::fit_sorted(exceedances).shrunk(length);
        Found::Fitted { cutoff, fit }
    }
}

/// `exp(value) − exp(cutoff)` for `cutoff ≤ value ≤ 0`, in place.
struct Differences<'a> {
    values: &'a mut [f64],
    cutoff: f64,
}

impl Work for Differences<'_> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        // As `exp` rounds to 0, or a value would end below its cut-off.
        let base = if self.cutoff < LEAST {
            0.0
        } else {
            self.cutoff.exp()
        };
        for value in self.values {
            let distance = *value - self.cutoff;
            // Near the cut-off the difference of two exponentials cancels; far above it, from 710
            // on, the other form is 0 times infinity.
            let near = base * exp_m1::<A>(distance.min(1.0));
            let far = exp::<A>(*value) - base;
            *value = if distance < 0.5 { near } else { far };
        }
    }
}
