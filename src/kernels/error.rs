//! What a kernel can refuse, as data; the wording lives in `Display` alone.

use std::error::Error;
use std::fmt;

/// A refusal by a kernel. Bad content is caught before a kernel is called; what is left are
/// shapes that do not fit, arguments outside their range and numerical impossibility.
#[derive(Debug, Clone, PartialEq)]
pub enum KernelError {
    /// An array whose shape does not fit the other arguments.
    Shape {
        /// Name of the argument.
        argument: &'static str,
        /// Shape that the other arguments ask for.
        expected: Vec<usize>,
        /// Shape that came.
        found: Vec<usize>,
    },
    /// An array whose memory does not lie on 8-byte boundaries.
    Misaligned {
        /// Name of the argument.
        argument: &'static str,
    },
    /// An array to be written to that holds some entry in two places.
    Overlap {
        /// Name of the argument.
        argument: &'static str,
    },
    /// An array without entries where at least one is needed.
    Empty {
        /// Name of the argument.
        argument: &'static str,
    },
    /// A number outside its allowed range.
    Range {
        /// Name of the argument.
        argument: &'static str,
        /// The allowed range in words.
        expected: &'static str,
        /// Value that came.
        found: f64,
    },
    /// Chain starts that do not rise from 0 to the number of draws.
    Starts {
        /// First position at which they go wrong.
        position: usize,
        /// Value found there, or nothing when the list ends too early.
        found: Option<i64>,
        /// Number of draws.
        draws: usize,
    },
    /// Weights without a finite positive sum.
    NoWeight {
        /// First weight that is negative or not finite, with its index, if there is one.
        offender: Option<(usize, f64)>,
    },
    /// More draws asked for without replacement than have a positive weight.
    TooFewPositive {
        /// Number of draws asked for.
        size: usize,
        /// Number of positive weights.
        positive: usize,
    },
    /// A name that is no resampling method.
    Method {
        /// Name that came.
        found: String,
    },
    /// A random key of the wrong length.
    Key {
        /// Length in bytes that came.
        found: usize,
    },
    /// A result that does not fit into memory.
    Memory {
        /// Number of 8-byte entries asked for.
        entries: usize,
    },
    /// The caller asked to stop.
    Interrupted,
}

impl fmt::Display for KernelError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Shape {
                argument,
                expected,
                found,
            } => write!(
                out,
                "{argument}: expected shape {}, got {}; reshape {argument} to fit the other arguments",
                tuple(expected),
                tuple(found)
            ),
            Self::Misaligned { argument } => write!(
                out,
                "{argument}: expected float64 entries on 8-byte boundaries, got a misaligned array; \
                 copy it with numpy.array({argument}, dtype=float)"
            ),
            Self::Overlap { argument } => write!(
                out,
                "{argument}: expected an array whose entries lie apart, got one that overlaps itself; \
                 make it with numpy.empty"
            ),
            Self::Empty { argument } => {
                write!(
                    out,
                    "{argument}: expected at least one entry, got none; pass at least one"
                )
            }
            Self::Range {
                argument,
                expected,
                found,
            } => {
                write!(
                    out,
                    "{argument}: expected {expected}, got {found}; choose a value in that range"
                )
            }
            Self::Starts {
                position,
                found,
                draws,
            } => write_starts(out, *position, *found, *draws),
            Self::NoWeight { offender } => write_no_weight(out, *offender),
            Self::TooFewPositive { size, positive } => write!(
                out,
                "size: expected at most {positive}, the number of positive weights, got {size}; \
                 ask for fewer draws or use a method with replacement"
            ),
            Self::Method { found } => write!(
                out,
                "method: expected one of {}, got '{found}'; choose one of these",
                super::resample::Method::NAMES.join(", ")
            ),
            Self::Key { found } => write!(
                out,
                "key: expected 32 bytes, got {found}; draw it with rng.bytes(32)"
            ),
            Self::Memory { entries } => write!(
                out,
                "size: expected a result that fits into memory, got {entries} entries; ask for fewer"
            ),
            Self::Interrupted => write!(out, "stopped on request; call again to start over"),
        }
    }
}

impl Error for KernelError {}

fn write_starts(
    out: &mut fmt::Formatter<'_>,
    position: usize,
    found: Option<i64>,
    draws: usize,
) -> fmt::Result {
    write!(
        out,
        "starts: expected 0 first, then rising positions that end with {draws}, the number of draws, got "
    )?;
    match found {
        Some(value) => write!(out, "{value} at position {position}")?,
        None => write!(out, "only {position} positions")?,
    }
    write!(
        out,
        "; pass where each chain begins, and the number of draws last"
    )
}

fn write_no_weight(out: &mut fmt::Formatter<'_>, offender: Option<(usize, f64)>) -> fmt::Result {
    write!(
        out,
        "w: expected finite, non-negative weights with a positive sum, got "
    )?;
    match offender {
        Some((index, value)) => write!(out, "{value} at index {index}")?,
        None => write!(out, "no positive weight")?,
    }
    write!(out, "; remove or correct such weights first")
}

/// Shape as Python writes it.
fn tuple(shape: &[usize]) -> String {
    match shape {
        [only] => format!("({only},)"),
        _ => {
            let sizes: Vec<String> = shape.iter().map(usize::to_string).collect();
            format!("({})", sizes.join(", "))
        }
    }
}
