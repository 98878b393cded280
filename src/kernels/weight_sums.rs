//! Maximum, sum, sum of squares and entropy sum of weights, in one pass over their logarithms.
//!
//! The order of all sums is a property of the column alone, not of how it lies in memory or who
//! works on it: blocks of 4096 rows are merged in order; a block is cut into chunks of 64 rows, a
//! chunk into 8 groups of rows with the same position modulo 8; the maximum is raised group by
//! group and the 8 terms of a group are added as a tree.

/// Rows of a block.
pub const BLOCK: usize = 4096;

/// Which sums are formed: every one costs a little.
pub mod form {
    /// The sum alone.
    pub const TOTAL: u8 = 0;
    /// The sum of squares too.
    pub const SQUARES: u8 = 1;
    /// The entropy sum too.
    pub const SPREAD: u8 = 2;
    /// All of them.
    pub const ALL: u8 = 3;
}

/// Sums of the weights `r = exp(x − m)` of a column of log weights `x`, `m` its maximum.
///
/// Terms below `exp(−708)` of the largest are left out. NaN or `+inf` in the column gives NaN sums.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sums {
    /// `m`, the largest entry that is a number; `−inf` without one.
    pub maximum: f64,
    /// `Σ r`, at least 1 where `m` is finite.
    pub total: f64,
    /// `Σ r²`.
    pub squares: f64,
    /// `Σ r (x − m)`, with `0 · −inf = 0`.
    pub spread: f64,
}

impl Sums {
    /// The sums of no draw.
    pub const NONE: Self = Self {
        maximum: f64::NEG_INFINITY,
        total: 0.0,
        squares: 0.0,
        spread: 0.0,
    };

    /// The sums of both parts of a column.
    pub fn merge(self, other: Self) -> Self {
        let maximum = larger(other.maximum, self.maximum);
        let (a, b) = (self.raised(maximum), other.raised(maximum));
        Self {
            maximum,
            total: a.total + b.total,
            squares: a.squares + b.squares,
            spread: a.spread + b.spread,
        }
    }

    fn raised(self, maximum: f64) -> Self {
        let distance = distance(self.maximum, maximum);
        let factor = distance.exp();
        Self {
            maximum,
            total: factor * self.total,
            squares: factor * factor * self.squares,
            spread: factor * (self.spread + distance * self.total),
        }
    }

    /// `log Σ exp x`.
    pub fn log_sum(&self) -> f64 {
        if self.maximum.is_infinite() {
            return self.maximum;
        }
        self.maximum + self.total.ln()
    }

    /// What normalising takes off: `m` first, then `log Σ exp(x − m)`; nothing without weight.
    pub fn offsets(&self) -> (f64, f64) {
        if self.total == 0.0 {
            return (0.0, 0.0);
        }
        (self.maximum, self.total.ln())
    }

    /// `(Σ r)² / Σ r²`; 0 without weight.
    pub fn effective_size(&self) -> f64 {
        if self.total == 0.0 {
            return 0.0;
        }
        self.total * self.total / self.squares
    }

    /// `exp(−Σ w log w)`; 0 without weight.
    pub fn entropy_size(&self) -> f64 {
        if self.total == 0.0 {
            return 0.0;
        }
        // −Σ w log w = log Σ r − (Σ r log r) / Σ r, which needs no second logarithm per draw.
        (self.total.ln() - self.spread / self.total).exp()
    }

    /// `1 / Σ r`; 0 without weight.
    pub fn largest_share(&self) -> f64 {
        if self.total == 0.0 {
            return 0.0;
        }
        1.0 / self.total
    }
}

/// The larger of both, `b` if `a` is NaN.
#[inline(always)]
pub fn larger(a: f64, b: f64) -> f64 {
    if a > b { a } else { b }
}

/// `lower − upper`, 0 where both are the same infinity.
#[inline(always)]
pub(super) fn distance(lower: f64, upper: f64) -> f64 {
    // Beyond −1000 the factor is 0 either way, and 0 · −inf must not arise.
    if lower < upper {
        larger(lower - upper, -1000.0)
    } else {
        0.0
    }
}

/// What is taken off log weights: their maximum, or nothing where none is a number.
#[inline(always)]
pub(super) fn shift(maximum: f64) -> f64 {
    if maximum == f64::NEG_INFINITY {
        0.0
    } else {
        maximum
    }
}
